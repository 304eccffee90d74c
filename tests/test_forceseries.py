"""Forces over time, by every route: what is stored around the body counts."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path

import numpy as np
import pytest
import trial_meshes as tm
from series_cases import export_of

import fvcheck
from fvcheck import Fluid
from fvcheck.cli.app import run
from fvcheck.forceseries import force_series
from fvcheck.mesh.boundary import patch_rings, ring_area
from fvcheck.series import open_series

ROOT = Path(__file__).parent.parent
DATA = Path(__file__).parent / "data"

RHO, RADIUS = 1.5, 0.2
ROUTES = ["body-surface", "control-surface", "band"]


def gust(times, speed, rate):
    """A fluid that is pushed as a whole past a body that lets it through: u(t) along x, p = −ρ u̇ x.

    Closed form. The force of the pressure on the body is ρ u̇ times its area (Archimedes), the
    same by every surface around, once what the fluid between stores is counted.
    """
    cells = tm.with_hole((-1.0, -1.0, 1.0, 1.0), (0.0, 0.0, RADIUS), 0.12, 0.05, seed=1)

    def load(t):
        x = cells.points[:, 0]
        u = np.full(len(x), speed(t))
        return cells, {"U": np.column_stack([u, 0 * u]), "p": -RHO * rate(t) * x}

    return open_series(export_of(load, times), fluid=Fluid(density=RHO, viscosity=0.0))


def area_of_body(flow):
    """Of the polygon that the body's edges are."""
    (ring,) = patch_rings(flow.mesh, flow.mesh.bodies[0])
    return abs(ring_area(flow.mesh.points[ring]))


def test_every_route_sees_the_force_of_an_accelerated_stream():
    # quadratic in time: three snapshots give its rate exactly, at uneven steps and both ends
    series = gust([0.0, 0.1, 0.25, 0.3], lambda t: 1.0 + t - 2 * t * t, lambda t: 1.0 - 4 * t)
    flow = series.flow(0)
    area = area_of_body(flow)
    found = force_series(series, methods=ROUTES, distances=[0.15, 0.3])
    for time, one in zip(series.times, found.found):
        assert [e.refused for e in one.estimates] == [""] * 4
        for e in one.estimates:
            # everything is linear in space: rounding is left
            assert e.drag == pytest.approx(RHO * (1.0 - 4 * time) * area, abs=1e-9), (time, e.label)
            assert e.lift == pytest.approx(0.0, abs=1e-9)


def test_the_error_of_the_rate_is_in_the_bands_and_of_second_order():
    errors = []
    for n in (9, 17, 33):
        times = np.linspace(0.0, 1.0, n)
        series = gust(times, lambda t: np.sin(3 * t), lambda t: 3 * np.cos(3 * t))
        found = force_series(series, methods=["control-surface"], distances=[0.3])
        area = area_of_body(series.flow(0))
        worst = 0.0
        for time, one in zip(times, found.found):
            error = abs(one.estimates[0].drag - RHO * 3 * np.cos(3 * time) * area)
            assert error <= one.estimates[0].band("drag") + 1e-9
            worst = max(worst, error)
        errors.append(worst)
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    assert np.all(np.abs(orders - 2.0) < 0.3), orders


def test_without_times_nothing_is_stored():
    series = gust([0.0, 0.1, 0.2], lambda t: 1.0 + t, lambda t: 1.0).steady()
    near, far = force_series(series, methods=["control-surface"], distances=[0.1, 0.4]).found[1].estimates
    # p = −ρ x, and no storage: the force grows with the area within the surface
    assert far.drag > 1.5 * near.drag


def test_a_mesh_that_changes_leaves_the_body_s_own_surface():
    meshes = [
        tm.with_hole((-1.0, -1.0, 1.0, 1.0), (0.0, 0.0, RADIUS), 0.2, 0.1, seed=seed) for seed in (1, 2, 3)
    ]

    def load(t):
        cells = meshes[int(t)]
        x = cells.points[:, 0]
        return cells, {"U": np.column_stack([0 * x + t, 0 * x]), "p": -RHO * x}

    series = open_series(export_of(load, [0.0, 1.0, 2.0]), fluid=Fluid(density=RHO, viscosity=0.0))
    found = force_series(series)
    assert {e.method for one in found.found for e in one.estimates} == {"body-surface"}
    assert "forces-at-rest" in {hint.code for hint in found.hints}


def test_shedding_has_the_forces_of_the_solver_itself():
    """Channel cylinder at Re 100: scripts/reference_unsteady.py, forces of the solver's own residual."""
    facts = json.loads((DATA / "cylinder_re100.json").read_text(encoding="utf-8"))
    stored = np.load(DATA / "cylinder_re100.npz")
    cells = tm.from_table(stored["points"], stored["triangles"].astype(np.int64))
    first, count = 40, 8

    def load(t):
        k = facts["times"].index(t)
        u, v, p = (facts["scales"][n][0] + facts["scales"][n][1] * stored[n][k].astype(float) for n in "uvp")
        velocity = np.column_stack([u, v])
        velocity[stored["still"]] = 0.0
        return cells, {"U": velocity, "p": p}

    times = facts["times"][first : first + count]
    fluid = Fluid(density=1.0, viscosity=facts["fluid"]["viscosity"])
    series = open_series(export_of(load, times), fluid=fluid)
    reference = {"velocity": 1.0, "length": 0.1, "density": 1.0}
    asked = {"methods": ROUTES, "distances": [0.025], "reference": reference}
    found = force_series(series, **asked).found
    amplitude = 0.5 * np.ptp(facts["cl"])
    for k, one in enumerate(found):
        for e in one.estimates:
            c, lift, drag = e.coefficients, facts["cl"][first + k], facts["cd"][first + k]
            assert abs(c["lift"] - lift) <= 0.01 * amplitude, (k, e.label)  # issue: 1 % of the amplitude
            assert abs(c["lift"] - lift) <= c["lift_band"]
            assert abs(c["drag"] - drag) <= max(c["drag_band"], 0.01 * amplitude), (k, e.label)


def test_history_carries_forces_into_every_form(tmp_path, capsys):
    files = [str(ROOT / "meshes" / f"demo-coarse-{n}.vtu") for n in ("0100", "0200", "0400")]
    check = str(ROOT / "meshes" / "demo.toml")
    out, table, plot = tmp_path / "h.json", tmp_path / "h.csv", tmp_path / "h.svg"
    options = ["--steady", "--forces", "--law", "mass"]
    options += ["--json", str(out), "--csv", str(table), "--plot", str(plot)]
    assert run(["history", *files, "-c", check, *options]) in (0, 3)
    text = capsys.readouterr().out
    assert "patch-4  ·  drag by route, N/m" in text and max(map(len, text.splitlines())) <= 80
    assert "drag, band [N/m]" in text and "lift, control-surface" in " ".join(text.split())
    told = json.loads(out.read_text(encoding="utf-8"))
    flow = fvcheck.open_flow(
        files[2],
        fluid=Fluid(density=1.2, viscosity=1.8e-5),
        fields={"velocity": "U", "pressure": "p"},
        walls=["patch-3", "patch-4"],
    )
    alone = {e.label: e.drag for e in fvcheck.forces(flow, "patch-4").estimates}
    assert {e["method"]: e["drag"] for e in told["forces"]}["band"] == pytest.approx(alone["band"], rel=1e-12)
    assert len(told["history"]) == 3 and all(len(state["forces"]) >= 5 for state in told["history"])
    assert told["forces"][0]["coefficients"]["drag"] is not None
    lines = list(csv.DictReader(io.StringIO(table.read_text(encoding="utf-8"))))
    drag = [float(row["force"]) for row in lines if (row["law"], row["component"]) == ("band", "drag")]
    assert drag[-1] == pytest.approx(alone["band"], rel=1e-12) and len(drag) == 3
    assert "patch-4: drag and sampling band" in plot.read_text(encoding="utf-8").replace("<!-- ", "")


def test_forces_of_a_run_that_still_writes_are_refused(tmp_path, capsys):
    assert run(["history", str(tmp_path), "--follow", "--forces", "--density", "1"]) == 2
    assert "--follow" in capsys.readouterr().err
