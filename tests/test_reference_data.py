"""The stored high-order solutions are those of the published benchmarks."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import pyvista

DATA = Path(__file__).parent / "data"


def test_the_cylinder_solution_has_the_published_drag_and_lift():
    # Schäfer & Turek 1996, Nabh 1998; the solution's own error is 1e-8 of the drag
    facts = json.loads((DATA / "cylinder_re20.json").read_text(encoding="utf-8"))
    assert facts["solution"]["cd"] == pytest.approx(5.57953523384, rel=2e-8)
    assert facts["solution"]["cl"] == pytest.approx(0.010618948146, rel=1e-6)
    # taken at two points of the curved wall, where convergence is slowest
    assert facts["solution"]["pressure_difference"] == pytest.approx(0.11752016697, rel=1e-5)


def test_the_cylinder_export_is_the_coarse_mesh_it_says():
    facts = json.loads((DATA / "cylinder_re20.json").read_text(encoding="utf-8"))
    mesh = pyvista.read(DATA / "cylinder_re20.vtu")
    assert (mesh.n_cells, mesh.n_points) == (facts["cells"], facts["points"])
    x, y, _ = mesh.points.T
    u = mesh["velocity"]
    on_circle = np.abs(np.hypot(x - 0.2, y - 0.2) - 0.05) < 1e-12
    assert on_circle.sum() > 40 and np.all(u[on_circle] == 0)
    # the inflow is a parabola of mean speed 0.2, a polynomial that the elements hold exactly
    inlet = x == 0
    assert np.allclose(u[inlet, 0], 1.2 * y[inlet] * (0.41 - y[inlet]) / 0.41**2, atol=1e-12)
    # front minus rear pressure, Nabh 1998, at vertices on the circle
    front, rear = (mesh["pressure"][np.argmin(np.hypot(x - a, y - 0.2))] for a in (0.15, 0.25))
    assert front - rear == pytest.approx(0.11752016697, rel=1e-3)  # the front vertex lies beside the axis


@pytest.mark.parametrize(("name", "nusselt"), [("1e4", 2.24475), ("1e5", 4.52164), ("1e6", 8.82513)])
def test_the_cavity_solutions_have_the_published_heat_transfer(name, nusselt):
    # Hortmann et al. 1990, Le Quéré 1991, from memory; they differ from each other by 3e-5
    facts = json.loads((DATA / "cavity.json").read_text(encoding="utf-8"))
    assert facts[name]["solution"]["nusselt"] == pytest.approx(nusselt, rel=4e-5)
    mesh = pyvista.read(DATA / f"cavity_{name}.vtu")
    assert mesh.n_cells == facts["cells"] == 1600
    x = mesh.points[:, 0]
    assert np.allclose(mesh["temperature"][x == 0], 1.0, atol=1e-12)
    assert np.allclose(mesh["temperature"][x == 1], 0.0, atol=1e-12)
    # the flow is symmetric about the centre: T averages to ½, velocity to nothing
    area = mesh.compute_cell_sizes(length=False, volume=False)["Area"]
    assert area @ mesh["cell_temperature"] == pytest.approx(0.5, abs=1e-8)
    assert np.allclose(area @ mesh["cell_velocity"], 0.0, atol=1e-6 * np.abs(mesh["velocity"]).max())
    # de Vahl Davis 1983: v_max on the horizontal mid-line is also about the largest of all
    published = {"1e4": 19.617, "1e5": 68.59, "1e6": 219.36}[name]
    assert np.abs(mesh["velocity"][:, 1]).max() == pytest.approx(published, rel=0.05)
