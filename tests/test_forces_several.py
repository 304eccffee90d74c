"""Several bodies, bodies on walls, and surfaces that hold or cut neighbours: still water has the answer."""

from __future__ import annotations

import json

import numpy as np
import pytest
import trial_meshes as tm

import fvcheck
from fvcheck import ControlSurface, Flow, Fluid
from fvcheck.cli.app import run

WEIGHT = 9.81 * 2.0
LEFT, RIGHT, STEP = (0.6, 0.8, 1.0, 1.2), (1.6, 0.8, 1.8, 1.4), (2.2, 0.0, 2.6, 0.4)


def inside(x, box):
    return (x[:, 0] > box[0]) & (x[:, 0] < box[2]) & (x[:, 1] > box[1]) & (x[:, 1] < box[3])


def tank(where="point"):
    """Water of density 2 at rest in [0, 3] × [0, 2], less two bars and a step on the floor. p = −ρg y."""
    whole = tm.quads((0.0, 0.0, 3.0, 2.0), 0.1, jitter=0.0)
    kept = ~(inside(whole.centroids, LEFT) | inside(whole.centroids, RIGHT) | inside(whole.centroids, STEP))
    table = whole.nodes.reshape(-1, 4)[kept]
    used, nodes = np.unique(table, return_inverse=True)
    cells = tm.from_table(whole.points[used], nodes.reshape(-1, 4))
    at = cells.points if where == "point" else cells.centroids
    data = {"U": np.zeros((len(at), 2)), "p": -WEIGHT * at[:, 1]}
    kind = "point_data" if where == "point" else "cell_data"
    fluid = Fluid(density=2.0, viscosity=1e-3, gravity=(0.0, -9.81))
    flow = Flow.from_arrays(cells.points, (cells.offsets, cells.nodes), fluid=fluid, **{kind: data})
    return flow, cells


def body_at(flow, box):
    """The body whose places lie on a box."""
    for name in flow.mesh.bodies:
        x = flow.mesh.points[flow.mesh.patch_edges(name)].reshape(-1, 2)
        if np.allclose([*x.min(axis=0), *x.max(axis=0)], box):
            return name
    raise AssertionError(flow.mesh.bodies)


def lift_of(box):
    """Archimedes: the weight of the water that the bar displaces."""
    return WEIGHT * (box[2] - box[0]) * (box[3] - box[1])


@pytest.mark.parametrize("where", ["point", "average"])
def test_each_of_several_bodies_has_its_own_buoyancy_by_every_route(where):
    flow, _ = tank(where)
    assert len(flow.mesh.bodies) == 2
    found = fvcheck.forces(flow)
    assert {e.body for e in found.estimates} == set(flow.mesh.bodies)
    for box in (LEFT, RIGHT):
        name = body_at(flow, box)
        mine = [e for e in found.estimates if e.body == name]
        assert len(mine) == 5
        for e in mine:
            # a linear pressure: exact to rounding; the moment is that of a force in the middle
            assert e.force == pytest.approx((0.0, lift_of(box)), abs=1e-9), e.label
            assert e.moment == pytest.approx(0.5 * (box[0] + box[2]) * lift_of(box), abs=1e-9), e.label
        assert found[name, "band"].force == mine[-1].force


@pytest.mark.parametrize("where", ["point", "average"])
def test_neighbours_in_or_on_the_surface_are_taken_off(where):
    flow, _ = tank(where)
    name = body_at(flow, LEFT)
    surfaces = [
        ControlSurface.box(0.4, 0.6, 2.0, 1.6, name="holds both"),
        ControlSurface.box(0.4, 0.6, 1.7, 1.3, name="cuts the neighbour"),
        ControlSurface.box(0.3, -0.5, 2.4, 1.3, name="cuts floor and step"),
    ]
    found = fvcheck.forces(flow, name, methods="control-surface", surfaces=surfaces)
    for e in found.estimates:
        assert e.force == pytest.approx((0.0, lift_of(LEFT)), abs=1e-9), e.label
    assert "other-patch-inside" in {hint.code for hint in found.hints}
    other = fvcheck.forces(flow, body_at(flow, RIGHT), methods="control-surface", surfaces=surfaces)
    refused = {e.surface: e.refused for e in other.estimates}
    assert not refused["holds both"] and all(refused[s.name] for s in surfaces[1:])
    assert "whole of" in refused["cuts the neighbour"]
    assert refused["cuts the neighbour"] in " ".join(h.message for h in other.hints)


def test_a_step_on_the_floor_is_drawn_up_by_pressure_below_zero():
    flow, _ = tank()
    faces = [
        name
        for name in flow.mesh.boundary.names
        if inside(flow.mesh.points[flow.mesh.patch_edges(name)].mean(axis=1), (2.19, 0.01, 2.61, 0.41)).all()
    ]
    assert faces  # the step has patches of its own, told apart by its corners
    found = fvcheck.forces(flow, faces)
    # p = 0 at y = 0 and −ρg·0.4 on top, 0.4 wide: drawn up, and equal on both sides
    assert np.sum([e.force for e in found.of("body-surface")], axis=0) == pytest.approx((0.0, 0.16 * WEIGHT))
    assert "open-body" in {hint.code for hint in found.hints}


def test_a_result_of_several_bodies_is_strict_json_with_a_hint_for_every_null(tmp_path):
    import meshio

    _, cells = tank()
    path = tmp_path / "tank.vtu"
    x = np.column_stack([cells.points, 0 * cells.points[:, 0]])
    data = {"U": 0 * x, "p": -WEIGHT * x[:, 1]}
    meshio.write(path, meshio.Mesh(x, [("quad", cells.nodes.reshape(-1, 4))], point_data=data))
    out = tmp_path / "out.json"
    words = ["--density", "2", "--viscosity", "1e-3", "--gravity", "0,-9.81", "--reference", "1,0.4,2"]
    more = ["--method", "band,wake,circulation", "--wake", "line(2.9 0.2, 2.9 1.9)"]
    assert run(["forces", str(path), *words, *more, "--json", str(out), "-q"]) == 0
    text = out.read_text(encoding="utf-8")
    result = json.loads(text, parse_constant=lambda word: pytest.fail(word))
    entries = {(e["body"], e["method"]): e for e in result["forces"]}
    assert len(entries) == 6
    told = " ".join(hint["message"] for hint in result["hints"] if hint["code"] == "route-refused")
    for (body, method), e in entries.items():
        if e["drag"] is None and e["lift"] is None:
            assert e["refused"] in told and body in told, method
        else:
            assert not e["refused"]
