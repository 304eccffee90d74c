"""The solver behind the demo case, against closed forms and an independent solution."""

from __future__ import annotations

import json
import subprocess
import sys
from dataclasses import replace
from functools import cache
from itertools import islice, pairwise
from pathlib import Path

import numpy as np
import pytest

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT / "scripts"))

from demo_solver.case import REFERENCE, Case  # noqa: E402
from demo_solver.duct import Duct  # noqa: E402
from demo_solver.mesh import Mesh, jittered_rectangle  # noqa: E402
from demo_solver.operators import Unknown, dot  # noqa: E402
from demo_solver.solver import Air, Boundary, Relaxation, Solver, State  # noqa: E402

MESHES = ROOT / "meshes"


def converged(solver: Solver, velocity: tuple[float, float], limit: float) -> State:
    """March from a uniform state until no cell gains or loses more than ``limit`` of anything."""
    n = solver.mesh.n_cells
    start = solver.start(np.tile(np.array(velocity), (n, 1)), np.zeros(n), np.zeros(n))
    for iteration, state in enumerate(solver.march(start)):
        if iteration % 50 == 0:
            fluxes = solver.fluxes(state)
            net = [solver.mesh.divergence @ flux for flux in (fluxes.mass, fluxes.momentum, fluxes.heat)]
            if max(np.abs(law).max() for law in net) < limit:
                return state
        assert iteration < 3000, "the solver does not converge"
    raise AssertionError


# Kovasznay 1948: exact flow behind a grid at Re 40, lengths in wavelengths of the grid, mean speed
# and density 1. Its vorticity, like any in a plane steady flow, obeys the heat equation with
# a Prandtl number of one, which makes exp(λx) sin 2πy an exact temperature.
NU = 1 / 40
DECAY = 1 / (2 * NU) - np.sqrt(1 / (4 * NU**2) + 4 * np.pi**2)
WAVE = 2 * np.pi


def kovasznay(at: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    x, y = at.T
    e = np.exp(DECAY * x)
    velocity = np.column_stack([1 - e * np.cos(WAVE * y), DECAY / WAVE * e * np.sin(WAVE * y)])
    return velocity, 0.5 * (1 - e**2), e * np.sin(WAVE * y)


def kovasznay_errors(n: int) -> dict[str, float]:
    """Root-mean-square errors of velocity, pressure and temperature with n cells across."""
    mesh = jittered_rectangle((-0.5, -0.5, 1.0, 0.75), 6 * n // 5, n)
    x, y = mesh.points[mesh.face_nodes[mesh.n_inner :]].transpose(2, 0, 1)
    stream = y - np.exp(DECAY * x) * np.sin(WAVE * y) / WAVE
    everywhere = np.ones(mesh.patch.size, bool)
    u, p, t = kovasznay(mesh.face_centre[mesh.n_inner :])
    through = stream[:, 1] - stream[:, 0]
    boundary = Boundary(everywhere, u, through, ~everywhere, p, everywhere, t)
    solver = Solver(mesh, Air(1.0, NU, 1.0, NU), boundary)
    state = converged(solver, (1.0, 0.0), limit=1e-8)  # far below the errors looked at
    u, p, t = kovasznay(mesh.centre)
    share = mesh.volume / mesh.volume.sum()
    level = share @ (state.pressure - p)  # of no meaning where no pressure is fixed

    def size(error: np.ndarray) -> float:
        return float(np.sqrt(share @ error**2))

    return {
        "velocity": size(np.linalg.norm(state.velocity - u, axis=1)),
        "pressure": size(state.pressure - p - level),
        "temperature": size(state.temperature - t),
    }


def test_the_solver_is_of_second_order_on_the_exact_flow_of_kovasznay():
    coarse, fine = kovasznay_errors(12), kovasznay_errors(24)
    order = {name: np.log2(coarse[name] / fine[name]) for name in coarse}
    # Two irregular meshes that are not nested: the observed order scatters by a few tenths. Pressure is
    # known to come in below velocity, its boundary values being extrapolated.
    assert order["velocity"] > 1.8
    assert order["temperature"] > 1.8
    assert order["pressure"] > 1.4
    # In units of the mean speed, at 24 cells per wave: twice what was measured.
    assert fine["velocity"] < 0.008


@cache
def poiseuille(n: int, limit: float) -> tuple[Solver, State]:
    """Air between plates 10 mm apart, Re 80 on the height, parabolic inflow; irregular cells."""
    length, height, speed, air = 0.02, 0.01, 0.12, Air()
    mesh = jittered_rectangle((0.0, 0.0, length, height), 2 * n, n)
    left, right = mesh.on("left"), mesh.on("right")
    s = mesh.points[mesh.face_nodes[mesh.n_inner :]][..., 1] / height
    below = speed * height * s**2 * (3 - 2 * s)
    inflow = np.where(left, below[:, 0] - below[:, 1], 0)
    size = np.linalg.norm(mesh.area[mesh.n_inner :], axis=1)
    velocity = np.column_stack([inflow / size, 0 * size])
    boundary = Boundary(~right, velocity, -inflow, right, 0 * size, left, 0 * size)
    solver = Solver(mesh, air, boundary, Relaxation(velocity=0.8, pressure=0.3))
    return solver, converged(solver, (speed, 0.0), limit)


def test_developed_flow_between_plates_has_the_known_pressure_and_wall_friction():
    # Pressure gradient 12 μU/H², friction 6 μU/H on each wall: plane Poiseuille flow (Schlichting & Gersten).
    air, speed, height, length = Air(), 0.12, 0.01, 0.02
    errors = []
    for n in (10, 20):
        solver, state = poiseuille(n, limit=1e-11)  # of 1.4e-3 kg/(m s) and 1.7e-4 N/m
        mesh = solver.mesh
        exact = 12 * air.viscosity * speed / height**2 * (length - mesh.centre[:, 0])
        slope = np.polyfit(mesh.centre[:, 0], state.pressure, 1)[0]
        viscous = solver.fluxes(state).viscous[mesh.n_inner :, 0]
        friction = viscous[mesh.on("bottom", "top")].sum()
        errors.append(
            [
                abs(slope * height**2 / (-12 * air.viscosity * speed) - 1),
                abs(friction / (12 * air.viscosity * speed / height * length) - 1),
                np.sqrt(np.mean((state.pressure - exact) ** 2)) / exact.max(),
            ]
        )
    coarse, fine = np.array(errors)
    # One per cent with 20 cells across; at least a factor of 2.5 (of 4 in the limit) from half the cell size.
    assert np.all(fine < 0.012)
    assert np.all(fine < coarse / 2.5)


def test_a_converged_run_balances_to_rounding_and_an_early_one_does_not():
    solver, state = poiseuille(10, limit=1e-15)
    mesh = solver.mesh
    start = solver.start(0 * state.velocity + [0.12, 0.0], 0 * state.pressure, 0 * state.temperature)
    early = next(islice(solver.march(start), 4, None))

    def worst(of: State) -> list[float]:
        fluxes = solver.fluxes(of)
        return [
            float(np.abs(mesh.divergence @ flux).max() / np.abs(flux).max())
            for flux in (fluxes.mass, fluxes.momentum)
        ]

    # A few roundings of the largest flux; the march was stopped at 1e-15 kg/(m s) and N/m.
    assert max(worst(state)) < 1e-10
    assert min(worst(early)) > 1e-5


def test_the_converged_state_does_not_depend_on_the_relaxation():
    solver, state = poiseuille(10, limit=1e-15)
    other = Solver(solver.mesh, solver.fluid, solver.boundary, Relaxation(0.5, 0.15, 0.7, 0.01))
    again = converged(other, (0.0, 0.0), limit=1e-15)
    # Both are converged to about 1e-10 of their largest values.
    assert np.abs(again.velocity - state.velocity).max() < 1e-8 * np.abs(state.velocity).max()
    assert np.abs(again.pressure - state.pressure).max() < 1e-8 * np.abs(state.pressure).max()


@cache
def demo_mesh(h: float) -> Mesh:
    return Duct(h=h).mesh()


@pytest.mark.parametrize(
    "build", [lambda: demo_mesh(2.0), lambda: jittered_rectangle((0, 0, 0.03, 0.01), 9, 5)]
)
def test_gradients_face_values_and_diffusion_are_exact_for_a_linear_field(build):
    mesh = build()
    slope = np.array([300.0, -170.0])
    fixed = mesh.patch == 0
    unknown = Unknown(mesh, fixed, mesh.face_centre[mesh.n_inner :] @ slope, extrapolated=True)
    cells = mesh.centre @ slope
    gradient = unknown.gradient(cells)
    scale = np.abs(cells).max()
    faces = mesh.face_centre @ slope
    flux = np.random.default_rng(0).normal(size=mesh.n_faces)
    # Roundings of values of size ``scale`` over distances of a fiftieth of the domain.
    assert np.abs(gradient - slope).max() < 1e-11 * np.abs(slope).max()
    assert np.abs(unknown.at_faces(cells, gradient) - faces).max() < 1e-13 * scale
    assert np.abs(unknown.convected(cells, gradient, flux) - faces).max() < 1e-13 * scale
    known = np.append(np.ones(mesh.n_inner, bool), fixed)
    through = unknown.normal_gradient(cells, gradient) - dot(mesh.area, np.tile(slope, (mesh.n_faces, 1)))
    assert np.abs(through[known]).max() < 1e-11 * scale


def test_the_demo_mesh_fills_the_channel_outside_the_bar_with_mixed_cells():
    duct = Duct(h=2.0)
    mesh = demo_mesh(2.0)
    bar = duct.bar
    corners = (4 - np.pi) * bar.radius**2
    solid = bar.length * bar.thickness - corners
    # Thirty chords cut a little off the bar: less than two per cent of it.
    missing = mesh.volume.sum() - (duct.length * duct.height - solid)
    assert 0 < missing < 0.02 * solid
    sizes = np.diff(mesh.offsets)
    assert set(sizes) == {3, 4} and min((sizes == 3).mean(), (sizes == 4).mean()) > 0.25
    lengths = np.linalg.norm(mesh.area[mesh.n_inner :], axis=1)
    expected = {"inlet": duct.height, "outlet": duct.height, "wall": 2 * duct.length}
    for name, length in expected.items():
        assert lengths[mesh.on(name)].sum() == pytest.approx(length, rel=1e-12)  # roundings of a sum
    # The normals of a closed boundary cancel, and so do those of every cell.
    assert np.abs(mesh.divergence @ mesh.area).max() < 1e-15
    assert demo_mesh(1.0).n_cells == pytest.approx(4 * mesh.n_cells, rel=0.15)


def demo_states() -> dict:
    return json.loads((MESHES / "demo-solver.json").read_text())["states"]


def test_the_bundled_runs_tend_to_the_independent_solution():
    # REFERENCE: finite elements of order 5 on the true shape, scripts/reference_demo.py.
    states = demo_states()
    coarse, fine = states["demo-coarse.vtu"]["bar"], states["demo-fine.vtu"]["bar"]
    for axis, name, allowed in ((0, "drag", 0.005), (1, "lift", 0.03)):
        errors = [abs(run["force"][axis] / REFERENCE[name] - 1) for run in (coarse, fine)]
        assert errors[0] < allowed  # as found, and typical of this mesh: 0.3 % and 2.4 %
        assert errors[1] < errors[0] / 2
    for run in (coarse, fine):
        assert run["heat_rate"] == pytest.approx(REFERENCE["heat_rate"], rel=5e-4)


def test_the_bundled_runs_march_from_open_to_closed():
    states = demo_states()
    marched = [states[name] for name in sorted(states, key=lambda name: states[name]["iterations"])]
    marched = [state for state in marched if state["cells"] == states["demo-coarse.vtu"]["cells"]]
    for law in ("mass", "momentum", "heat"):
        residuals = [state["residuals"][law] for state in marched]
        assert all(later < earlier for earlier, later in pairwise(residuals))
        # Ten orders of magnitude and more below the first stored state.
        assert residuals[-1] < 1e-10 * residuals[0]
    for name in ("demo-coarse.vtu", "demo-fine.vtu"):
        assert max(states[name]["closure"].values()) < 1e-10
        assert states[name]["largest_mass_imbalance_of_a_cell"] < 1e-15


def test_the_bundled_files_are_small_and_hold_what_the_sums_say():
    from vtkmodules.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

    assert sum(path.stat().st_size for path in MESHES.glob("demo*")) < 2_000_000
    states = demo_states()
    assert {path.name for path in MESHES.glob("demo*.vtu")} == set(states)
    for name, state in states.items():
        reader = vtkXMLUnstructuredGridReader()
        reader.SetFileName(str(MESHES / name))
        reader.Update()
        data = reader.GetOutput().GetCellData()
        patch, velocity = (vtk_to_numpy(data.GetArray(array)) for array in ("patch", "U"))
        assert (patch == 0).sum() == state["cells"]
        for number, facts in enumerate(state["patches"].values(), start=1):
            assert (patch == number).sum() == facts["faces"]
        assert np.all(velocity[patch >= 3] == 0)  # no slip on walls and bar


def test_the_program_runs_from_end_to_end(tmp_path):
    command = [sys.executable, str(ROOT / "scripts" / "make_demo.py"), "--quick", "--out", str(tmp_path)]
    done = subprocess.run(command, capture_output=True, text=True, timeout=120)
    assert done.returncode == 0, done.stderr
    states = json.loads((tmp_path / "demo-solver.json").read_text())["states"]
    assert {path.name for path in tmp_path.glob("*.vtu")} == set(states)
    # Twice the cell size of the coarse demo: three times its error in drag and more.
    assert states["demo-quick.vtu"]["bar"]["force"][0] == pytest.approx(REFERENCE["drag"], rel=0.02)


def test_mass_enters_the_demo_exactly_whatever_the_mesh():
    case = Case()
    for h in (2.0, 1.0):
        solver = replace(case, duct=replace(case.duct, h=h)).solver(demo_mesh(h))
        inflow = -solver.boundary.volume_flux.sum()
        assert inflow == pytest.approx(case.mean_speed * case.duct.height, rel=1e-13)  # roundings of a sum
