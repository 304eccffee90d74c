"""Round bodies meshed with chords: whether the bands of the route along the body hold for the curve."""

from __future__ import annotations

import exact
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import flow_on

import fvcheck
from fvcheck import Flow
from fvcheck.routes.chords import sagittas

COUETTE, CYLINDER, STOKES = exact.cylindrical_couette(), exact.cylinder(), exact.stokes_sphere()


def on_body(flow, body):
    return fvcheck.forces(flow, body, methods="body-surface")["body-surface"]


def test_an_edge_of_a_regular_polygon_has_the_sagitta_of_its_circle():
    # s = r (1 − cos ½θ), here by the leading term of its series: Lθ/8
    flow = flow_on(COUETTE, tm.annulus(1.0, 2.0, 0.1))
    s = sagittas(flow.mesh, "body-1")
    turn = 2 * np.pi / len(s)
    assert s == pytest.approx(1.0 - np.cos(0.5 * turn), rel=2e-3)  # the next term is θ²/48 of it


def test_sides_of_a_bar_are_no_chords():
    cells = tm.quads((0.0, 0.0, 3.0, 2.0), 0.25, jitter=0.0)
    hole = (np.abs(cells.centroids - (1.5, 1.0)) < (0.5, 0.25)).all(axis=1)
    table = cells.nodes.reshape(-1, 4)[~hole]
    used, nodes = np.unique(table, return_inverse=True)
    bar = tm.from_table(cells.points[used], nodes.reshape(-1, 4))
    data = {"U": np.zeros((len(bar.points), 2)), "p": bar.points[:, 0]}
    flow = Flow.from_arrays(bar.points, (bar.offsets, bar.nodes), point_data=data)
    (body,) = flow.mesh.bodies
    assert not sagittas(flow.mesh, body).any()


@pytest.mark.parametrize("where", ["point", "average"])
@pytest.mark.parametrize("told", [False, True])
@pytest.mark.parametrize("h", [0.1, 0.05])
def test_the_torque_on_a_cylinder_is_within_the_band_of_the_body_itself(h, told, where):
    # 4πμΩ R1²R2²/(R2² − R1²) = 16.755161 on the round one (White; recomputed); 63 and 126 chords
    walls = {"body-1": {"omega": 1.0}} if told else None
    e = on_body(flow_on(COUETTE, tm.annulus(1.0, 2.0, h), where, walls=walls), "body-1")
    assert abs(e.moment + 16.755161) <= e.band("moment")
    # extrapolated to the wall, ten cells across the gap: a sixth of the torque, and no more
    assert e.band("moment") <= 3.0


@pytest.mark.parametrize("where", ["point", "average"])
@pytest.mark.parametrize("h", [0.2, 0.1, 0.05])
def test_the_lift_of_a_round_cylinder_is_within_the_band_of_the_body_itself(h, where):
    # L = −ρUΓ = 3 (Joukowski); the pressure is read on chords, where it differs from that on the arc
    flow = flow_on(CYLINDER, tm.with_hole(CYLINDER.domain, CYLINDER.hole, 3 * h, h), where)
    e = on_body(flow, flow.mesh.bodies[0])
    assert abs(e.lift - 3.0) <= e.band("lift")
    assert abs(e.drag) <= e.band("drag")


@pytest.mark.parametrize("where", ["point", "average"])
@pytest.mark.parametrize("told", [False, True])
@pytest.mark.parametrize("h", [0.06, 0.03, 0.015])
def test_the_drag_of_a_stokes_sphere_is_within_the_band_of_the_body_itself(h, told, where):
    # 6πμRU (Stokes 1851); chords of 11, 5 and 3 degrees. The field leaves inertia out, so ρ is tiny here
    cells = tm.mapped(
        tm.quads((0.0, 0.0, 1.0, 1.0), h, 2, jitter=0.1),
        lambda p: ((1 + 3 * p[:, 0]) * np.stack([np.cos(np.pi * p[:, 1]), np.sin(np.pi * p[:, 1])])).T,
    )
    flow = flow_on(STOKES, cells, where, symmetry="axisymmetric", axis="x")
    mesh = flow.mesh
    far = {n: np.hypot(*mesh.points[mesh.patch_edges(n)].reshape(-1, 2).T).max() for n in mesh.boundary.names}
    body = min(far, key=far.get)
    walls = [body] if told else None
    e = on_body(flow_on(STOKES, cells, where, symmetry="axisymmetric", axis="x", walls=walls), body)
    assert abs(e.drag - 6 * np.pi) <= e.band("drag")
