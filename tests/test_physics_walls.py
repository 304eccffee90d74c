"""Walls that turn: no slip on a rotor, in plane and axisymmetric runs, from every place they can be told."""

from __future__ import annotations

import json

import exact
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import flow_on

import fvcheck
from fvcheck import ControlSurface, Flow, Fluid, SetupError
from fvcheck.cli.app import run
from fvcheck.walls import Spin, settled, wall_velocity

ABOUT = (0.4, 0.6)
SIDES = ["bottom", "left", "right", "top"]


def turning(walls=None, rate=3.0, **settings):
    """Cell data of water that turns with its polygonal tank about ABOUT: u = Ω × x, p = ½ρΩ²r²."""
    cells = tm.mixed((0.0, 0.0, 1.0, 1.0), 0.12, seed=3)
    x, y = (cells.centroids - ABOUT).T
    data = {"U": rate * np.column_stack([-y, x]), "p": 0.5 * rate**2 * (x * x + y * y)}
    flow = Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        cell_data=data,
        fluid=Fluid(density=1.0, viscosity=0.1),
        cell_values="centroid",
        walls=walls,
        **settings,
    )
    return flow


def test_water_that_turns_with_its_tank_has_no_friction_and_passes_no_wall():
    names = turning().mesh.boundary.names
    right = {name: {"omega": 3.0, "centre": ABOUT} for name in names}
    ledger = fvcheck.balance(turning(right), ControlSurface.domain(), laws=["mass", "momentum"])
    # a linear velocity and a quadratic pressure are exact by degree 3: rounding only
    assert all(abs(row.imbalance) < 1e-10 for row in ledger.rows)
    found = fvcheck.forces(turning(right), names, methods="body-surface", about=ABOUT)
    assert all(np.abs(e.viscous).max() < 1e-10 for e in found.estimates)
    # the same tank told to stand still: all the friction that the wall would have
    still = fvcheck.forces(turning(names), names, methods="body-surface", about=ABOUT)
    assert min(np.abs(e.viscous).max() for e in still.estimates) > 0.1


def test_a_rotor_between_cylinders_has_its_torque():
    # 4πμΩ R1²R2²/(R2² − R1²) = 16.755161 for R 1, 2, Ω 1, 0, μ 1 (Schlichting & Gersten; recomputed)
    def flow(**settings):
        return flow_on(exact.cylindrical_couette(), tm.annulus(1.0, 2.0, 0.1, "quads"), "average", **settings)

    rotor, *_ = flow().mesh.bodies
    walls = dict.fromkeys(flow().mesh.boundary.names, (0.0, 0.0)) | {rotor: {"omega": 1.0}}
    found = fvcheck.forces(flow(walls=walls), rotor, distances=[0.3, 0.5])
    assert "body-no-wall" not in {hint.code for hint in found.hints}
    for e in (*found.of("control-surface"), found["band"]):
        assert e.moment == pytest.approx(-16.755161, rel=1e-3)
        assert abs(e.moment + 16.755161) <= e.band("moment"), e.label
    # The exact field is that of round cylinders, but 63 chords turn: at their middles 0.3 % slower, over
    # half a cell of 0.1, which is 5 % of the slope.
    assert found["body-surface"].moment == pytest.approx(-16.755161, rel=6e-2)
    wrong = fvcheck.forces(flow(walls=walls | {rotor: (0.0, 0.0)}), rotor, methods="body-surface")
    assert abs(wrong["body-surface"].moment + 16.755161) > 16.0


@pytest.mark.parametrize("axis", ["x", "y"])
def test_a_wall_turns_about_the_axis_of_an_axisymmetric_run(axis):
    # solid rotation again, now as swirl: u_θ = Ωr, p = ½ρΩ²r²; no torque anywhere
    cells = tm.mixed((0.0, 0.2, 1.0, 1.0), 0.12, seed=3)
    order = slice(None) if axis == "x" else slice(None, None, -1)
    radius = cells.centroids[:, 1]
    # the azimuth runs against the plane's normal where the axis is y (laws.places)
    swirl = (1.0 if axis == "x" else -1.0) * 3.0 * radius

    def estimates(wall):
        flow = Flow.from_arrays(
            cells.points[:, order],
            [cells.nodes[i:j][order] for i, j in zip(cells.offsets[:-1], cells.offsets[1:])],
            cell_data={"U": np.column_stack([0 * radius, 0 * radius, swirl]), "p": 4.5 * radius**2},
            fluid=Fluid(density=1.0, viscosity=0.1),
            cell_values="centroid",
            walls=dict.fromkeys(SIDES, wall),
            symmetry="axisymmetric",
            axis=axis,
        )
        return fvcheck.forces(flow, SIDES, methods="body-surface").estimates

    assert all(abs(e.moment) < 1e-10 for e in estimates(Spin(3.0)))
    assert min(abs(e.moment) for e in estimates((0.0, 0.0))) > 0.1


def test_a_rotor_is_told_the_same_in_command_and_check_file(tmp_path):
    import meshio

    cells = tm.annulus(1.0, 2.0, 0.2, "quads")
    exact_flow = exact.cylindrical_couette()
    x, y = cells.centroids.T
    u = np.column_stack([exact_flow.velocity(x, y), 0 * x])
    points = np.column_stack([cells.points, 0 * cells.points[:, 0]])
    path = tmp_path / "rotor.vtu"
    data = {"U": [u], "p": [exact_flow.p(x, y)]}
    meshio.write(path, meshio.Mesh(points, [("quad", cells.nodes.reshape(-1, 4))], cell_data=data))
    check = tmp_path / "check.toml"
    check.write_text(
        "[case]\nfile = 'rotor.vtu'\n[fluid]\ndensity = 1\nviscosity = 1\n"
        "[patches]\nmoving_wall = { body-1 = { omega = 1.0, centre = [0.0, 0.0] } }\n",
        encoding="utf-8",
    )
    told = ["--density", "1", "--viscosity", "1", "--wall", "body-1=spin(1, 0, 0)"]
    moments = []
    for words in ([str(path), *told], ["-c", str(check)], [str(path), *told[:-1], "body-1"]):
        out = tmp_path / "out.json"
        assert run(["forces", *words, "--method", "body-surface", "--json", str(out), "-q"]) == 0
        moments.append(json.loads(out.read_text(encoding="utf-8"))["forces"][0]["moment"])
    assert moments[0] == moments[1] != moments[2]


@pytest.mark.parametrize(
    ("words", "match"),
    [
        (["--wall", "body-1=spin(1, 0)"], "spin(OMEGA, X, Y)"),
        (["--wall", "body-1=spin(a, 0, 0)"], "no finite number"),
        (["--wall", "body-1=turn(1)"], "no pair of numbers"),
        (["--wall", "rotor=spin(1, 0, 0)"], "no patch 'rotor'"),
        (["--wall", "body-1=spin(1e300, 0, 0)"], "omega and centre"),
        (["--wall", "body-1=1e300,0"], "velocity"),
        (["--frame-rate", "1e300"], "frame_rate"),
        (["--viscosity", "1e300"], "viscosity"),
        (["--about", "1e300,0"], "point of the moment"),
        (["-s", "circle(0.2, 0.2, 0.1) @ spin(1e300, 0, 0)"], "flow's size"),
    ],
)
def test_a_motion_that_cannot_be_read_is_one_line(capsys, words, match):
    from test_forces import CYLINDER

    assert run(["forces", CYLINDER, "--density", "1", *words]) == 2
    captured = capsys.readouterr()
    assert captured.err.startswith("error: ") and captured.err.count("\n") == 1 and match in captured.err


@pytest.mark.parametrize(
    "motion", [(1.0,), (1.0, float("nan")), {"rate": 1.0}, {"omega": 1.0, "center": (0, 0)}, "fast", 3]
)
def test_other_motions_are_refused_with_the_form(motion):
    with pytest.raises(SetupError, match="omega and centre"):
        settled({"rotor": motion}, ["rotor"])


def test_a_spin_is_omega_cross_the_arm():
    places = np.array([[1.0, 0.0], [0.0, 2.0]])
    assert wall_velocity(Spin(2.0, 1.0, 1.0), places, None).tolist() == [[2.0, 0.0, 0.0], [-2.0, -2.0, 0.0]]
    assert settled({"a": Spin(0.0, 1.0, 1.0)}, ["a"]) == {"a": (0.0, 0.0)}
