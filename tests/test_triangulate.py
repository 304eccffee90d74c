"""Cells into triangles: the areas add up, shapes are good, numbering changes nothing."""

from __future__ import annotations

import numpy as np
import pytest
import shapely
import trial_meshes as tm
from core_cases import concave_cells, mesh_of, meshes
from hypothesis import given, settings
from hypothesis import strategies as st

from fvcheck.kernels.triangulate import triangulate_cells, triangulate_polygon


def triangles(points, ring=None):
    points = np.asarray(points, float)
    ring = np.arange(len(points)) if ring is None else np.asarray(ring)
    out = np.empty((len(ring), 3), np.int64)
    return out[: triangulate_polygon(points, ring, out)]


def areas(points, table):
    a, b, c = (points[table[:, k]] for k in range(3))
    return 0.5 * ((b - a)[:, 0] * (c - a)[:, 1] - (b - a)[:, 1] * (c - a)[:, 0])


def quality(points, table):
    """Inscribed over circumscribed radius, twice: 1 for an equilateral triangle, 0 for a flat one."""
    a, b, c = (points[table[:, k]] for k in range(3))
    sides = np.stack([np.hypot(*(b - a).T), np.hypot(*(c - b).T), np.hypot(*(a - c).T)])
    return 16 * areas(points, table) ** 2 / (sides.prod(axis=0) * sides.sum(axis=0))


@st.composite
def stars(draw):
    """A simple polygon, seldom convex, of 3 to 90 corners."""
    rng = np.random.default_rng(draw(st.integers(0, 10**6)))
    n = draw(st.one_of(st.integers(3, 12), st.integers(60, 90)))
    angle = 2 * np.pi * (np.arange(n) + rng.uniform(-0.3, 0.3, n)) / n
    return rng.uniform(0.3, 1.0, n)[:, None] * np.stack([np.cos(angle), np.sin(angle)], axis=1)


@settings(max_examples=150, deadline=None)
@given(stars())
def test_the_triangles_of_a_polygon_fill_it_once(points):
    table = triangles(points)
    assert len(table) == len(points) - 2
    assert areas(points, table).min() > 0
    assert areas(points, table).sum() == pytest.approx(shapely.Polygon(points).area, rel=1e-12)
    union = shapely.union_all([shapely.Polygon(points[t]) for t in table])
    assert union.area == pytest.approx(shapely.Polygon(points).area, rel=1e-9)  # GEOS snaps slivers


@settings(max_examples=60, deadline=None)
@given(stars(), st.integers(0, 89))
def test_the_corner_a_polygon_starts_from_changes_nothing(points, turn):
    one = triangles(points)
    other = triangles(points, np.roll(np.arange(len(points)), turn))
    assert {frozenset(t) for t in one.tolist()} == {frozenset(t) for t in other.tolist()}


def test_equal_diagonals_of_squares_are_chosen_alike_wherever_the_numbering_starts():
    square = np.array([[0, 0], [1, 0], [1, 1], [0, 1]], float)
    chosen = {
        frozenset(map(frozenset, triangles(square, np.roll(np.arange(4), k)).tolist())) for k in range(4)
    }
    assert len(chosen) == 1


def side_nodes(counts, aspect=1.0):
    """A rectangle with so many nodes on each of its sides."""
    corners = np.array([(0, 0), (1, 0), (1, 1), (0, 1)], float)
    out = []
    for corner, following, n in zip(corners, np.roll(corners, -1, axis=0), counts):
        out += [corner + (following - corner) * j / (n + 1) for j in range(n + 1)]
    return np.array(out) * [aspect, 1.0]


@settings(max_examples=200, deadline=None)
@given(
    st.lists(st.integers(0, 4), min_size=4, max_size=4),
    st.sampled_from([0.0, 1e-16, 1e-12, 1e-8]),
    st.integers(0, 1000),
)
def test_hanging_nodes_off_the_line_by_rounding_make_no_slivers(counts, noise, seed):
    points = side_nodes(counts)
    points = points + noise * np.random.default_rng(seed).uniform(-1, 1, points.shape)
    table = triangles(points)
    assert len(table) == len(points) - 2
    # four nodes on one side of a square force triangles of base 0.2 and height 1: quality 0.17
    assert quality(points, table).min() > 0.03
    assert areas(points, table).sum() == pytest.approx(1.0, abs=10 * noise + 1e-14)


@pytest.mark.parametrize("aspect", [2500.0, 1e6])
def test_a_flat_cell_with_hanging_nodes_is_cut_whole(aspect):
    points = side_nodes([3, 0, 2, 0], aspect)
    table = triangles(points)
    assert len(table) == len(points) - 2
    assert areas(points, table).min() > 0
    assert areas(points, table).sum() == pytest.approx(aspect, rel=1e-13)


def test_a_polygon_that_crosses_itself_gets_no_triangles():
    assert len(triangles([[0, 0], [1, 1], [1, 0], [0, 1]])) == 0


def test_a_non_convex_cell_keeps_to_its_inside():
    cells = concave_cells(1)
    table, first = triangulate_cells(cells.points, cells.offsets, cells.nodes, np.arange(2))
    assert first.tolist() == [0, 6, 8]
    notch = shapely.box(0.5, 0.5, 1.0, 1.0)
    for t in table[:6]:
        assert shapely.Polygon(cells.points[t]).intersection(notch).area < 1e-15


@pytest.mark.parametrize("kind", list(meshes()))
def test_areas_of_triangles_add_up_to_those_of_the_cells(kind):
    m = mesh_of(meshes()[kind])
    table, first = triangulate_cells(m.points, m.offsets, m.nodes, np.arange(m.n_cells))
    assert np.array_equal(np.diff(first), np.diff(m.offsets) - 2)
    size = areas(m.points, table)
    assert size.min() > 0
    assert np.allclose(np.add.reduceat(size, first[:-1]), m.areas, rtol=1e-12)


@pytest.mark.parametrize("kind", list(meshes()))
def test_renumbering_the_mesh_gives_the_same_triangles(kind):
    cells = meshes()[kind]
    found = []
    for version in (cells, tm.shuffled(cells, 3)):
        m = mesh_of(version)
        table, _ = triangulate_cells(m.points, m.offsets, m.nodes, np.arange(m.n_cells))
        found.append(sorted(sorted(map(tuple, corners)) for corners in m.points[table].tolist()))
    assert found[0] == found[1]
