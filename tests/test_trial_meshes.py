"""The trial meshes are what they say, and exact data on them are exact."""

from __future__ import annotations

import numpy as np
import pytest
import shapely
import trial_meshes as tm

BOX = (-0.5, 0.0, 1.5, 1.0)
LAYER = (0.0, 0.0, 10.0, 0.048)
DISC = (0.4, 0.55, 0.15)

CONFORMING = {
    "triangles": (lambda seed=0: tm.triangles(BOX, 0.1, seed), 2.0),
    "quads": (lambda seed=0: tm.quads(BOX, 0.1, seed), 2.0),
    "mixed": (lambda seed=0: tm.mixed(BOX, 0.1, seed), 2.0),
    "polygons": (lambda seed=0: tm.polygons(BOX, 0.1, seed), 2.0),
    "layer of quads": (lambda seed=0: tm.boundary_layer(LAYER, 0.5, 2500, seed=seed), 0.48),
    "layer of triangles": (
        lambda seed=0: tm.boundary_layer(LAYER, 0.5, 1e4, kind="triangles", seed=seed),
        0.48,
    ),
    "mixed layer": (lambda seed=0: tm.boundary_layer(BOX, 0.1, kind="mixed", seed=seed), 2.0),
}
# inscribed polygons with n corners have the area ½ n r² sin(2π/n)
HOLED = {
    "annulus of quads": lambda: tm.annulus(1.0, 3.0, 0.1),
    "annulus of triangles": lambda: tm.annulus(1.0, 3.0, 0.1, "triangles"),
    "rectangle with a hole": lambda: tm.with_hole(BOX, DISC, 0.08, 0.03),
    "channel with a small hole": lambda: tm.with_hole((0, 0, 2.2, 0.41), (0.2, 0.2, 0.05), 0.04, 0.01),
}


def edge_lengths(cells):
    return np.hypot(*(cells.points[cells.following()] - cells.points[cells.nodes]).T)


def corner_angles(cells):
    before = np.empty_like(cells.nodes)
    order = np.arange(len(cells.nodes))
    after = np.roll(order, -1)
    after[cells.offsets[1:] - 1] = cells.offsets[:-1]
    before[after] = cells.nodes
    p = cells.points
    a, b = p[cells.following()] - p[cells.nodes], p[before] - p[cells.nodes]
    return np.degrees(np.arctan2(a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0], np.sum(a * b, axis=1)))


def assert_sound(cells, holes):
    assert np.all(cells.areas > 0)
    assert np.array_equal(np.unique(cells.nodes), np.arange(len(cells.points)))  # no stray points
    assert len(np.unique(cells.points, axis=0)) == len(cells.points)
    edges = np.stack([cells.nodes, cells.following()], axis=1)
    assert len(np.unique(edges, axis=0)) == len(edges)  # neighbours run along an edge in opposite directions
    rim = cells.boundary_edges()
    assert np.array_equal(np.sort(rim[:, 0]), np.sort(rim[:, 1]))  # closed loops
    euler = len(cells.points) - (len(edges) + len(rim)) // 2 + len(cells.sizes)
    assert euler == 1 - holes  # Euler's relation: no gap, no overlap
    return rim


@pytest.mark.parametrize("name", CONFORMING)
def test_a_conforming_mesh_fills_its_rectangle_once(name):
    make, area = CONFORMING[name]
    cells = make()
    rim = assert_sound(cells, holes=0)
    # rounding of some hundred cells
    assert cells.areas.sum() == pytest.approx(area, rel=1e-13)
    x0, y0, x1, y1 = LAYER if area == 0.48 else BOX
    length = np.hypot(*(cells.points[rim[:, 1]] - cells.points[rim[:, 0]]).T).sum()
    assert length == pytest.approx(2 * (x1 - x0 + y1 - y0), rel=1e-13)


@pytest.mark.parametrize("name", CONFORMING)
def test_a_seed_decides_the_mesh(name):
    make = CONFORMING[name][0]
    assert np.array_equal(make(3).points, make(3).points)
    one, other = make(3).points, make(4).points
    assert one.shape != other.shape or not np.allclose(one, other)


@pytest.mark.parametrize("name", HOLED)
def test_a_mesh_with_a_hole_leaves_exactly_the_hole_out(name):
    cells = HOLED[name]()
    rim = assert_sound(cells, holes=1)
    loops = shapely.polygonize([shapely.LineString(cells.points[e]) for e in rim])
    outer = max(loops.geoms, key=lambda g: g.area)
    # GEOS builds the ring polygon from the loose edges, independently of the cells
    assert cells.areas.sum() == pytest.approx(outer.area, rel=1e-12)
    centre, radius = ((0.0, 0.0), 1.0) if "annulus" in name else (DISC[:2], DISC[2])
    if "channel" in name:
        centre, radius = (0.2, 0.2), 0.05
    (hole,) = outer.interiors
    assert np.allclose(np.hypot(*(np.array(hole.coords) - centre).T), radius, rtol=1e-13)


@pytest.mark.parametrize("h", [0.12, 0.05])
@pytest.mark.parametrize("make", [tm.triangles, tm.quads, tm.mixed])
def test_edges_are_about_as_long_as_asked(make, h):
    lengths = edge_lengths(make(BOX, h))
    assert np.median(lengths) == pytest.approx(h, rel=0.1)  # the lattice is rounded to whole cells
    assert lengths.min() > 0.4 * h
    assert lengths.max() < 2.2 * h


def test_polygons_have_the_area_that_was_asked_for():
    cells = tm.polygons(BOX, 0.05)
    assert np.mean(cells.areas) == pytest.approx(0.05**2, rel=0.05)  # count rounded to rows and columns
    assert cells.areas.min() > 0.3 * 0.05**2
    assert set(cells.sizes) >= {4, 5, 6, 7}


@pytest.mark.parametrize("seed", range(4))
def test_triangles_are_irregular_without_slivers(seed):
    for cells in (tm.triangles(BOX, 0.07, seed), tm.with_hole(BOX, DISC, 0.08, 0.03, seed=seed)):
        angles = corner_angles(cells)
        assert angles.min() > 15  # a sliver would have a few degrees
        assert np.std(angles) > 5  # an even lattice has none


def test_a_mixed_mesh_has_convex_quadrilaterals_and_triangles():
    cells = tm.mixed(BOX, 0.07)
    assert set(cells.sizes) == {3, 4}
    assert 0.2 < np.mean(cells.sizes == 4) < 0.8
    assert corner_angles(cells).max() < 170


def test_a_quadtree_leaves_its_hanging_nodes_hanging():
    cells = tm.quadtree(BOX, 0.1, levels=2)
    assert np.all(cells.sizes == 4)
    assert cells.areas.sum() == pytest.approx(2.0, rel=1e-13)
    assert np.allclose(np.unique(np.round(np.sqrt(cells.areas), 12)), [0.025, 0.05, 0.1])
    single = cells.boundary_edges()
    x, y = cells.points[single].mean(axis=1).T
    inside = (x > BOX[0] + 1e-9) & (x < BOX[2] - 1e-9) & (y > BOX[1] + 1e-9) & (y < BOX[3] - 1e-9)
    assert inside.sum() > 20  # edges whose other side is split in two
    # nothing overlaps: the union has the summed area (GEOS)
    union = shapely.union_all([shapely.Polygon(cells.polygon(i)) for i in range(len(cells.sizes))])
    assert union.area == pytest.approx(2.0, rel=1e-12)


@pytest.mark.parametrize("aspect", [100.0, 2500.0, 20000.0])
def test_a_wall_layer_has_the_aspect_ratio_asked_for(aspect):
    cells = tm.boundary_layer(LAYER, 0.5, aspect, growth=1.3)
    size = np.array([np.ptp(cells.polygon(i), axis=0) for i in range(20)])  # the lowest row
    # columns and heights are uneven by a fifth, the growth is fitted to the height
    assert np.median(size[:, 0] / size[:, 1]) == pytest.approx(aspect, rel=0.35)


def test_shuffling_keeps_the_cells():
    cells = tm.mixed(BOX, 0.2)
    other = tm.shuffled(cells, 5)
    assert not np.array_equal(cells.points, other.points)
    assert np.allclose(np.sort(cells.areas), np.sort(other.areas), rtol=1e-13)
    assert_sound(other, holes=0)


@pytest.mark.parametrize("name", ["triangles", "polygons", "layer of quads"])
def test_centroids_and_areas_agree_with_geos(name):
    cells = CONFORMING[name][0]()
    shapes = [shapely.Polygon(cells.polygon(i)) for i in range(len(cells.sizes))]
    assert np.allclose(cells.areas, shapely.area(shapes), rtol=1e-11)  # GEOS sums about another origin
    assert np.allclose(cells.centroids, shapely.get_coordinates(shapely.centroid(shapes)), atol=1e-11)


def test_the_triangle_rule_is_exact_for_polynomials_up_to_its_degree():
    from math import factorial

    from trial_meshes.averages import triangle_rule

    for degree in (1, 2, 5, 8, 11):
        bary, weights = triangle_rule(degree)
        assert weights.min() > 0 and bary.min() > 0
        for i in range(degree + 1):
            j = degree - i
            # ∫ x^i y^j over the unit triangle = i! j! / (i+j+2)!, times 2 for the average
            exact = 2 * factorial(i) * factorial(j) / factorial(i + j + 2)
            assert weights @ (bary[:, 1] ** i * bary[:, 2] ** j) == pytest.approx(exact, rel=1e-13)


def test_averages_add_up_to_the_integral_over_the_domain():
    cells = tm.polygons(BOX, 0.2)

    def wave(x, y):
        return np.stack([np.sin(2 * x + y), x**3 * y**2], axis=-1)

    total = tm.cell_averages(wave, cells).T @ cells.areas
    # ∫ sin(2x+y) = [−sin(2x+y)/2] over the corners; ∫ x³y² = (1.5⁴ − .5⁴)/4 · 1/3
    corner = np.sin(2 * np.array([1.5, 1.5, -0.5, -0.5]) + np.array([1.0, 0.0, 1.0, 0.0]))
    sine = -0.5 * (corner[0] - corner[1] - corner[2] + corner[3])
    assert total[0] == pytest.approx(sine, rel=1e-12)  # degree 11 on cells of a fifth
    assert total[1] == pytest.approx((1.5**4 - 0.5**4) / 12, rel=1e-12)


@pytest.mark.parametrize("angle", [0.686, 2.0, np.pi / 2])
def test_averages_of_a_jump_share_each_cell_exactly(angle):
    cells = tm.mixed(BOX, 0.1)
    line = (0.3, 0.35, angle)
    normal = np.array([np.sin(angle), -np.cos(angle)])

    def step(x, y):
        return np.where((x - 0.3) * normal[0] + (y - 0.35) * normal[1] > 0, 5.0, 2.0)

    along = np.array([np.cos(angle), np.sin(angle)]) * 10
    start = np.array([0.3, 0.35])
    half = shapely.Polygon(
        [start - along, start + along, start + along + 10 * normal, start - along + 10 * normal]
    )
    shapes = [shapely.Polygon(cells.polygon(i)) for i in range(len(cells.sizes))]
    share = shapely.area(shapely.intersection(shapes, half)) / cells.areas  # GEOS
    assert ((share > 1e-6) & (share < 1 - 1e-6)).sum() > 10
    assert np.allclose(tm.cell_averages(step, cells, jump=line), 2 + 3 * share, atol=1e-9)


def test_point_values_are_the_function_at_the_points():
    cells = tm.quads(BOX, 0.5, jitter=0.0)
    assert np.array_equal(tm.point_values(lambda x, y: x + 10 * y, cells), cells.points @ [1, 10])
