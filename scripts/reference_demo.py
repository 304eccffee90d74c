"""The demo case at high order, by another method: what the finite-volume runs should tend to.

Run ``python scripts/reference_demo.py [ORDER [FILE.npz]]`` (needs ngsolve). Taylor-Hood elements of
order 5/4 on curved triangles, the bar with its true round corners, the outlet with the
natural condition ν ∂u/∂n − p n = 0. Forces and heat come from the residual of the
discrete equations, which is far more accurate than integrating derivatives over the bar.
The values are kept in ``demo_solver.case.REFERENCE``. FILE gets the averages of the solution over
the cells of the coarse demo mesh, which is what a run without any error would export;
``tests/data/demo_exact.npz`` was made with order 4.

It also follows a disturbance of the steady flow in time, by the linearised
equations: the flow is steady in truth if, and only if, that dies out.
"""

from __future__ import annotations

import sys
from pathlib import Path

import ngsolve as ng
import numpy as np
import trial_meshes as tm
from demo_solver.case import Case
from demo_solver.duct import MM, Bar
from netgen.geom2d import SplineGeometry

import fvcheck

MESHES = Path(__file__).parent.parent / "meshes"
CASE = Case()
# Lengths in millimetres, velocities in mean speeds, pressures in ρ U².
FORCE = CASE.fluid.density * CASE.mean_speed**2 * MM
VISCOSITY = CASE.fluid.viscosity / (CASE.fluid.density * CASE.mean_speed * MM)
HEAT_FLOW = CASE.fluid.density * CASE.fluid.specific_heat * CASE.mean_speed * MM
DIFFUSIVITY = CASE.fluid.conductivity / HEAT_FLOW


def curved_mesh(order: int, size: float = 1.2, at_bar: float = 0.15) -> ng.Mesh:
    """Curved triangles of the channel around the bar."""
    width, height = CASE.duct.length / MM, CASE.duct.height / MM
    geometry = SplineGeometry()
    corners = [geometry.AppendPoint(*p) for p in [(0, 0), (width, 0), (width, height), (0, height)]]
    for i, name in enumerate(["wall", "outlet", "wall", "inlet"]):
        geometry.Append(["line", corners[i], corners[(i + 1) % 4]], bc=name, leftdomain=1, rightdomain=0)
    arcs = [[geometry.AppendPoint(*p) for p in arc] for arc in corner_arcs(CASE.duct.bar)]
    for i, arc in enumerate(arcs):
        for piece in (["spline3", *arc], ["line", arc[2], arcs[(i + 1) % 4][0]]):
            geometry.Append(piece, bc="bar", leftdomain=0, rightdomain=1, maxh=at_bar)
    mesh = ng.Mesh(geometry.GenerateMesh(maxh=size))
    mesh.Curve(order)
    return mesh


def corner_arcs(bar: Bar) -> np.ndarray:
    """(4, 3, 2) start, corner of the tangents, and end of each round corner, counter-clockwise [mm]."""
    half, r = np.array([bar.length, bar.thickness]) / 2, bar.radius
    signs = np.array([[1, 1], [-1, 1], [-1, -1], [1, -1]])
    along_x, along_y = -r * signs * [1, 0], -r * signs * [0, 1]
    swap = np.array([False, True, False, True])[:, None]
    start, end = np.where(swap, along_x, along_y), np.where(swap, along_y, along_x)
    local = (signs * half)[:, None] + np.stack([start, np.zeros((4, 2)), end], axis=1)
    return (local @ bar.axes + [bar.x, bar.y]) / MM


def solve_flow(mesh: ng.Mesh, order: int) -> tuple[ng.GridFunction, np.ndarray]:
    """Velocity and pressure, and the force on the bar [N/m]."""
    space = ng.VectorH1(mesh, order=order, dirichlet="wall|inlet|bar") * ng.H1(mesh, order=order - 1)
    (u, p), (v, q) = space.TnT()
    flow = ng.GridFunction(space)
    s = ng.y / (CASE.duct.height / MM)
    flow.components[0].Set(ng.CF((6 * s * (1 - s), 0)), definedon=mesh.Boundaries("inlet"))
    stokes = VISCOSITY * ng.InnerProduct(ng.Grad(u), ng.Grad(v)) - p * ng.div(v) - q * ng.div(u)
    form = ng.BilinearForm(space)
    form += (stokes + (ng.Grad(u) * u) * v) * ng.dx
    ng.solvers.Newton(form, flow, freedofs=space.FreeDofs(), inverse="umfpack", maxerr=1e-11, printing=False)

    residual = flow.vec.CreateVector()
    form.Apply(flow.vec, residual)
    force = []
    for direction in ((1, 0), (0, 1)):
        lift_off = ng.GridFunction(space)
        lift_off.components[0].Set(ng.CF(direction), definedon=mesh.Boundaries("bar"))
        force.append(-FORCE * ng.InnerProduct(residual, lift_off.vec))
    return flow, np.array(force)


def heat_rate(mesh: ng.Mesh, velocity: ng.GridFunction, order: int) -> float:
    """Heat that the bar gives to the air [W/m]."""
    space = ng.H1(mesh, order=order, dirichlet="inlet|bar")
    t, s = space.TnT()
    form = ng.BilinearForm(space)
    form += (DIFFUSIVITY * ng.Grad(t) * ng.Grad(s) + (velocity * ng.Grad(t)) * s) * ng.dx
    form.Assemble()
    rise = ng.GridFunction(space)
    rise.Set(CASE.bar_temperature - CASE.inlet_temperature, definedon=mesh.Boundaries("bar"))
    residual = (form.mat * rise.vec).Evaluate()
    rise.vec.data -= form.mat.Inverse(space.FreeDofs(), "umfpack") * residual
    bar = ng.GridFunction(space)
    bar.Set(1, definedon=mesh.Boundaries("bar"))
    return HEAT_FLOW * ng.InnerProduct((form.mat * rise.vec).Evaluate(), bar.vec)


def disturbance(mesh: ng.Mesh, flow: ng.GridFunction, order: int, step: float, steps: int) -> list[float]:
    """Norms of a disturbance over time, by the trapezoidal rule, which neither damps nor feeds waves."""
    space = flow.space
    (u, p), (v, q) = space.TnT()
    base = flow.components[0]
    stokes = VISCOSITY * ng.InnerProduct(ng.Grad(u), ng.Grad(v)) - p * ng.div(v) - q * ng.div(u)
    mass, after = ng.BilinearForm(space), ng.BilinearForm(space)
    mass += u * v * ng.dx
    change = stokes + (ng.Grad(u) * base + ng.Grad(base) * u) * v
    after += (u * v + 0.5 * step * change) * ng.dx
    mass.Assemble()
    after.Assemble()
    inverse = after.mat.Inverse(space.FreeDofs(), "umfpack")
    wave = ng.GridFunction(space)
    wave.components[0].Set(ng.CF((0, ng.exp(-((ng.x - 22) ** 2 + (ng.y - 8) ** 2) / 4))))
    right, middle = wave.vec.CreateVector(), wave.vec.CreateVector()
    norms = []
    for i in range(steps):
        right.data = mass.mat * wave.vec
        middle.data = inverse * right
        # The first step is an implicit one: what is not divergence-free would flip its sign for ever.
        middle.data -= wave.vec
        wave.vec.data += (2 if i else 1) * middle
        norms.append(float(np.sqrt(ng.Integrate(wave.components[0] ** 2, mesh))))
    return norms


def cell_data(mesh: ng.Mesh, flow: ng.GridFunction, file: Path) -> dict[str, np.ndarray]:
    """``velocity`` (n, 2) and ``pressure`` (n,) averaged over the cells of a demo mesh, SI units.

    Between chords and round corners of the bar there is no fluid; both count as zero there.
    """
    plane = fvcheck.open_flow(file).mesh
    cells = tm.Cells(plane.points, plane.offsets, plane.nodes)
    width, height = CASE.duct.length / MM, CASE.duct.height / MM
    velocity, pressure = flow.components

    def values(x: np.ndarray, y: np.ndarray) -> np.ndarray:
        at = np.clip(np.stack([x, y], axis=-1) / MM, 1e-9, np.array([width, height]) - 1e-9)
        out = np.zeros((*x.shape, 3))
        for k in np.ndindex(x.shape):
            if mesh.Contains(*at[k]):
                place = mesh(*at[k])
                out[k] = *velocity(place), pressure(place)
        return out

    mean = tm.cell_averages(values, cells, degree=7)
    scale = CASE.fluid.density * CASE.mean_speed**2
    return {"velocity": CASE.mean_speed * mean[:, :2], "pressure": scale * mean[:, 2]}


def main() -> None:
    order = int(sys.argv[1]) if len(sys.argv) > 1 else 5
    with ng.TaskManager():
        mesh = curved_mesh(order)
        flow, (drag, lift) = solve_flow(mesh, order)
        if len(sys.argv) > 2:
            data = cell_data(mesh, flow, MESHES / "demo-coarse.vtu")
            data = {name: values.astype(np.float32) for name, values in data.items()}
            np.savez_compressed(sys.argv[2], force=[drag, lift], **data)
        heat = heat_rate(mesh, flow.components[0], order)
        print(f"{mesh.ne} triangles, order {order}:")
        print(f"drag {drag:.8e} N/m, lift {lift:.8e} N/m, heat {heat:.6f} W/m")
        norms = disturbance(mesh, flow, order, step=0.5, steps=400)
        passes = ", ".join(f"{norm:.2e}" for norm in norms[::50])
        print(f"disturbance, every {25 * MM / CASE.mean_speed:.2f} s: {passes}")


if __name__ == "__main__":
    main()
