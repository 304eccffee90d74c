"""Runs of cells: what is found by their boxes is what a look at every cell would find."""

from __future__ import annotations

import numpy as np
import pytest
import trial_meshes as tm
from core_cases import UNIT, mesh_of, meshes

from fvcheck.kernels.blocks import (
    PER_BLOCK,
    block_boxes,
    distinct,
    group_boxes,
    grow_rings,
    mark_points,
    renumber,
)
from fvcheck.kernels.grid import INSIDE, NEAR, OUTSIDE, build_grid, classify_cells
from fvcheck.kernels.neighbours import corner_range, mark_rings
from fvcheck.surfaces import ControlSurface


def shuffled(mesh, seed=0):
    """The cells of a mesh in random order: no run of them lies together."""
    order = np.random.default_rng(seed).permutation(mesh.n_cells)
    rings = [mesh.nodes[mesh.offsets[c] : mesh.offsets[c + 1]] for c in order]
    return mesh_of(tm.from_lists(mesh.points, [list(ring) for ring in rings]))


def cases():
    fine = mesh_of(tm.triangles(UNIT, 0.035, 3))
    kinds = {name: mesh_of(cells) for name, cells in meshes().items()}
    layer = mesh_of(tm.boundary_layer((0.0, 0.0, 1.0, 0.05), 0.02, 200))
    return kinds | {"fine": fine, "in random order": shuffled(fine), "layer": layer}


CASES = cases()


def rings_of(mesh):
    return [mesh.nodes[mesh.offsets[c] : mesh.offsets[c + 1]] for c in range(mesh.n_cells)]


@pytest.mark.parametrize("name", CASES)
def test_boxes_of_runs_are_those_of_their_points(name):
    mesh, rings = CASES[name], rings_of(CASES[name])
    boxes = block_boxes(mesh.points, mesh.offsets, mesh.nodes)
    for b, box in enumerate(boxes):
        points = mesh.points[np.concatenate(rings[b * PER_BLOCK : (b + 1) * PER_BLOCK])]
        assert np.array_equal(box, np.concatenate([points.min(axis=0), points.max(axis=0)]))
    assert len(boxes) == -(-mesh.n_cells // PER_BLOCK)


@pytest.mark.parametrize("rings", [1, 2, 3, 5])
@pytest.mark.parametrize("name", CASES)
def test_rings_of_cells_are_those_of_a_plain_search(name, rings):
    mesh = CASES[name]
    rng = np.random.default_rng(rings)
    centres = np.unique(rng.integers(0, mesh.n_points, 4))
    reached, cells = set(centres.tolist()), set()
    for _ in range(rings):
        touched = [c for c, ring in enumerate(rings_of(mesh)) if reached & set(ring.tolist())]
        cells |= set(touched)
        reached |= {p for c in touched for p in rings_of(mesh)[c].tolist()}
    near, there = grow_rings(mesh.points, mesh.offsets, mesh.nodes, mesh.boxes, centres, rings)
    assert set(np.flatnonzero(near).tolist()) == cells
    assert set(np.flatnonzero(there).tolist()) == reached
    mark = np.zeros(mesh.n_points, np.uint8)
    mark[centres] = 1
    mark_rings(mesh.offsets, mesh.nodes, mark, rings)
    assert set(np.flatnonzero(mark).tolist()) == reached


@pytest.mark.parametrize("name", CASES)
def test_no_cell_that_a_surface_touches_is_missed_and_no_other_on_the_wrong_side(name):
    import shapely

    mesh = CASES[name]
    x0, y0, x1, y1 = mesh.bounds
    size = max(x1 - x0, y1 - y0)
    ring = ControlSurface.circle(0.5 * (x0 + x1), 0.5 * (y0 + y1), 0.31 * size).rings[0]
    start, end = ring, np.roll(ring, -1, axis=0)
    shape, border = shapely.Polygon(ring), shapely.LinearRing(ring)
    for resolution in (16, 200):
        status = classify_cells(
            mesh.points, mesh.offsets, mesh.nodes, mesh.boxes, build_grid(start, end, resolution)
        )
        cells = [shapely.Polygon(mesh.points[ring]) for ring in rings_of(mesh)]
        for cell, found in zip(cells, status):
            if border.intersects(cell):
                assert found == NEAR
            elif found != NEAR:
                assert found == (INSIDE if shape.contains(cell) else OUTSIDE)


def test_chosen_cells_over_points_of_their_own_are_the_same_cells():
    mesh = CASES["mixed"]
    chosen = np.array([0, 3, 4, mesh.n_cells - 1])
    points = np.flatnonzero(mark_points(mesh.offsets, mesh.nodes, chosen, mesh.n_points))
    offsets, nodes = renumber(mesh.offsets, mesh.nodes, chosen, points, mesh.n_points)
    assert np.array_equal(points, np.unique(np.concatenate([rings_of(mesh)[c] for c in chosen])))
    for j, c in enumerate(chosen):
        assert np.array_equal(points[nodes[offsets[j] : offsets[j + 1]]], rings_of(mesh)[c])


def test_small_loops_do_what_numpy_does():
    rng = np.random.default_rng(0)
    numbers = rng.integers(0, 50, 300)
    assert sorted(distinct(numbers, 50).tolist()) == np.unique(numbers).tolist()
    points, triangles = rng.normal(size=(50, 2)), rng.integers(0, 50, (20, 3))
    boxes = group_boxes(points, triangles, np.array([0, 7, 8, 20]))
    for box, (a, b) in zip(boxes, ((0, 7), (7, 8), (8, 20))):
        corners = points[triangles[a:b]].reshape(-1, 2)
        assert np.array_equal(box, [*corners.min(axis=0), *corners.max(axis=0)])
    low, high = rng.normal(size=(9, 2)), rng.normal(size=(9, 2))
    row_of = rng.integers(0, 9, 50)
    least, most = corner_range(low, high, row_of, triangles)
    assert np.array_equal(least, low[row_of[triangles]].min(axis=1))
    assert np.array_equal(most, high[row_of[triangles]].max(axis=1))
