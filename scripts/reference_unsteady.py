"""The published unsteady channel-cylinder benchmark at Re 100, exported coarsely about the cylinder.

Case 2D-2 of Schäfer & Turek (1996): the channel and cylinder of `reference_cylinder`, inflow of mean
speed 1. Published bounds: largest drag coefficient 3.22 to 3.24, largest lift coefficient 0.99 to 1.01,
Strouhal number 0.295 to 0.305.

Run ``python scripts/reference_unsteady.py`` (needs ngsolve, in the ``test`` extra; some minutes) to write
tests/data/cylinder_re100.npz: velocity and pressure of a Taylor-Hood solution of degree 3/2 at the
vertices of an independent triangulation of the part of the channel about the cylinder, over a little more
than two periods, as 16-bit steps of each field's range; and beside it a JSON file with the forces of the
solution itself at the same times, from its residual tested with a unit velocity on the cylinder.
"""

from __future__ import annotations

import json
import os
from pathlib import Path

import numpy as np
from reference_cylinder import CHANNEL, CYLINDER, VISCOSITY
from trial_meshes import Cells, with_hole

MEAN_SPEED = 1.0
STEP, EVERY, END, KEPT = 4e-4, 20, 7.6, 92
PART = (0.0, 0.0, 0.5, 0.41)
DATA = Path(__file__).parents[1] / "tests" / "data"


def export_mesh() -> Cells:
    """Triangles of the part of the channel that is exported, independent of the solver's mesh."""
    return with_hole(PART, CYLINDER, 0.019, 0.005, growth=0.2, seed=20)


def solve(points: np.ndarray, order: int = 3) -> dict[str, np.ndarray]:
    """Times, forces, and fields at points, at every ``EVERY``-th step near the end.

    Second-order backward differences; convection extrapolated from two steps
    (Ascher, Ruuth & Wetton 1995, SIAM Journal on Numerical Analysis 32, recalled from memory).
    """
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    import ngsolve as ng
    from netgen.occ import Circle, OCCGeometry, Rectangle, X

    x1, y1 = CHANNEL[2:]
    shape = Rectangle(x1, y1).Face()
    shape.edges.name = "wall"
    shape.edges.Min(X).name = "inlet"
    shape.edges.Max(X).name = "outlet"
    disc = Circle((CYLINDER[0], CYLINDER[1]), CYLINDER[2]).Face()
    disc.edges.name = "cylinder"
    disc.edges.maxh = 0.011
    mesh = ng.Mesh(OCCGeometry(shape - disc, dim=2).GenerateMesh(maxh=0.06, grading=0.2))
    mesh.Curve(order + 1)

    space = ng.VectorH1(mesh, order=order, dirichlet="wall|inlet|cylinder") * ng.H1(mesh, order=order - 1)
    (u, p), (w, q) = space.TnT()
    stokes = VISCOSITY * ng.InnerProduct(ng.Grad(u), ng.Grad(w)) - ng.div(w) * p - ng.div(u) * q
    state = ng.GridFunction(space)
    velocity, pressure = state.components
    profile = 6 * MEAN_SPEED * ng.y * (y1 - ng.y) / y1**2
    velocity.Set(ng.CF((profile, 0)), definedon=mesh.Boundaries("inlet"))
    slow = ng.BilinearForm(stokes * ng.dx).Assemble()
    mass = ng.BilinearForm(u * w * ng.dx).Assemble()
    convection = ng.BilinearForm(space, nonassemble=True)
    convection += (ng.Grad(u) * u) * w * ng.dx
    free = space.FreeDofs()
    rest = state.vec.CreateVector()
    rest.data = slow.mat * state.vec
    state.vec.data -= slow.mat.Inverse(free, inverse="umfpack") * rest
    bump = ng.GridFunction(space)  # breaks the symmetry, so that shedding begins soon
    bump.components[0].Set(ng.CF((0, 0.3 * ng.exp(-300 * ((ng.x - 0.32) ** 2 + (ng.y - 0.2) ** 2)))))
    for dof, is_free in enumerate(free):
        if not is_free:
            bump.vec[dof] = 0.0
    state.vec.data += bump.vec

    tests = []
    for direction in ((1, 0), (0, 1)):
        test = ng.GridFunction(space)
        test.components[0].Set(ng.CF(direction), definedon=mesh.Boundaries("cylinder"))
        tests.append(test.vec)
    located = [mesh(float(x), float(y)) for x, y in points]

    old, new_convection, old_convection = (state.vec.CreateVector() for _ in range(3))
    residual, change, past = (state.vec.CreateVector() for _ in range(3))
    matrix = mass.mat.CreateMatrix()
    out: dict[str, list] = {"time": [], "force": [], "velocity": [], "pressure": []}
    steps = round(END / STEP)
    for step in range(1, steps + 1):
        lead = 1.0 if step == 1 else 1.5
        if step <= 2:
            matrix.AsVector().data = (lead / STEP) * mass.mat.AsVector() + slow.mat.AsVector()
            inverse = matrix.Inverse(free, inverse="umfpack")
        convection.Apply(state.vec, new_convection)
        if step == 1:
            change.data = (1.0 / STEP) * state.vec
            residual.data = new_convection
        else:
            change.data = (2.0 / STEP) * state.vec - (0.5 / STEP) * old
            residual.data = 2.0 * new_convection - old_convection
        past.data = mass.mat * change
        residual.data -= past
        old.data, old_convection.data = state.vec, new_convection
        # what the momentum equation leaves with the last state in place of the next
        rest.data = matrix * state.vec + residual
        state.vec.data -= inverse * rest
        if step % EVERY == 0:
            rest.data = matrix * state.vec + residual
            force = [-ng.InnerProduct(rest, test) for test in tests]
            if step % (50 * EVERY) == 0:
                print(f"t {step * STEP:.3f}  cd {20 * force[0]:.5f}  cl {20 * force[1]:.5f}", flush=True)
            if step > steps - KEPT * EVERY:
                out["time"].append(step * STEP)
                out["force"].append(force)
                out["velocity"].append([velocity(at) for at in located])
                out["pressure"].append([pressure(at) for at in located])
    return {name: np.array(values) for name, values in out.items()}


def moved_in(points: np.ndarray) -> np.ndarray:
    """Points on the circle 1e-9 away from it, where the curved elements surely are."""
    away = points - CYLINDER[:2]
    distance = np.hypot(*away.T)
    on = np.abs(distance - CYLINDER[2]) < 1e-10
    return np.where(
        on[:, None], np.array(CYLINDER[:2]) + away * ((CYLINDER[2] + 1e-9) / distance)[:, None], points
    )


def quantised(values: np.ndarray) -> tuple[np.ndarray, float, float]:
    """16-bit numbers, the lowest value and the step: value = low + step × number."""
    low, high = float(values.min()), float(values.max())
    step = (high - low) / 65535
    return np.round((values - low) / step).astype(np.uint16), low, step


def main() -> None:
    cells = export_mesh()
    run = solve(moved_in(cells.points))
    x, y = cells.points.T
    still = (
        (np.abs(np.hypot(x - CYLINDER[0], y - CYLINDER[1]) - CYLINDER[2]) < 1e-10) | (y == 0) | (y == 0.41)
    )
    fields, scales = {}, {}
    for name, values in (
        ("u", run["velocity"][..., 0]),
        ("v", run["velocity"][..., 1]),
        ("p", run["pressure"]),
    ):
        fields[name], *scales[name] = quantised(values)
    DATA.mkdir(exist_ok=True)
    np.savez_compressed(
        DATA / "cylinder_re100.npz",
        points=cells.points,
        triangles=cells.nodes.reshape(-1, 3).astype(np.uint16),
        still=still,
        **fields,
    )
    scale = 2 / (MEAN_SPEED**2 * 2 * CYLINDER[2])
    facts = {
        "case": "channel-cylinder benchmark 2D-2, Re 100, point values at vertices",
        "source": "Schäfer & Turek 1996",
        "published": {"cd_max": [3.22, 3.24], "cl_max": [0.99, 1.01], "strouhal": [0.295, 0.305]},
        "fluid": {"density": 1.0, "viscosity": VISCOSITY},
        "mean_speed": MEAN_SPEED,
        "cylinder": {"centre": CYLINDER[:2], "radius": CYLINDER[2]},
        "scales": scales,
        "times": [round(float(t), 10) for t in run["time"]],
        "cd": [round(float(f), 8) for f in scale * run["force"][:, 0]],
        "cl": [round(float(f), 8) for f in scale * run["force"][:, 1]],
    }
    (DATA / "cylinder_re100.json").write_text(json.dumps(facts, ensure_ascii=False) + "\n", encoding="utf-8")
    print("cd", min(facts["cd"]), max(facts["cd"]), "cl", min(facts["cl"]), max(facts["cl"]))


if __name__ == "__main__":
    main()
