"""The cut of a mesh by a control surface: what must always hold, and GEOS as an independent judge."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
import shapely
import trial_meshes as tm
from core_cases import UNIT, mesh_of, meshes
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from fvcheck.errors import MeshError, SurfaceError
from fvcheck.mesh.mesh import Boundary, Mesh
from fvcheck.overlay.overlay import lay_over
from fvcheck.overlay.pieces import DRAWN
from fvcheck.surfaces import ControlSurface

KINDS = tuple(meshes())


@cache
def mesh(kind, seed=0):
    return mesh_of(meshes(seed)[kind])


@cache
def cell_shapes(kind, seed=0):
    m = mesh(kind, seed)
    return [shapely.Polygon(m.points[m.nodes[a:b]]) for a, b in zip(m.offsets[:-1], m.offsets[1:])]


@cache
def domain_shape(kind, seed=0):
    # the boundary loops, not the union of cells: GEOS may lose slivers where it unites hundreds
    m = mesh(kind, seed)
    loops = shapely.polygonize([shapely.LineString(m.points[e]) for e in m.boundary.edges]).geoms
    return max(loops, key=lambda g: g.area)


def shape_of(surface):
    return shapely.Polygon(surface.rings[0], surface.rings[1:])


@st.composite
def surfaces(draw, kinds=KINDS):
    """(mesh kind, seed, closed surface), the surface often in an awkward position."""
    kind, seed = draw(st.sampled_from(kinds)), draw(st.integers(0, 1))
    m = mesh(kind, seed)
    rng = np.random.default_rng(draw(st.integers(0, 10**6)))
    form = draw(
        st.sampled_from(["box", "node box", "circle", "star", "node star", "edges", "tenths", "rim box"])
    )
    if form == "box":
        x, y = np.sort(rng.uniform(-0.2, 1.2, 2)), np.sort(rng.uniform(-0.2, 1.2, 2))
        ring = box(x[0], y[0], x[1], y[1])
    elif form == "node box":
        a, b = m.points[rng.choice(len(m.points), 2)]
        ring = box(*a, *b)
    elif form == "rim box":
        x = np.sort(rng.choice([-0.1, 0.0, 0.25, 0.5, 0.75, 1.0, 1.1], 2, replace=False))
        y = np.sort(rng.choice([-0.1, 0.0, 0.25, 0.5, 0.75, 1.0, 1.1], 2, replace=False))
        ring = box(x[0], y[0], x[1], y[1])
    elif form == "circle":
        n = int(rng.choice([5, 60, 400]))
        angle = 2 * np.pi * np.arange(n) / n
        radius = rng.choice([1e-5, 0.01, 0.2, 0.6])
        ring = rng.uniform(0, 1, 2) + radius * np.stack([np.cos(angle), np.sin(angle)], axis=1)
    else:
        n = int(rng.integers(3, 24))
        angle = np.sort(rng.uniform(0, 2 * np.pi, n))
        radius = rng.uniform(0.05, 0.7, n)
        centre = rng.uniform(0.1, 0.9, 2)
        ring = centre + radius[:, None] * np.stack([np.cos(angle), np.sin(angle)], axis=1)
        if form == "tenths":
            ring = np.round(ring, 1)
        if form == "node star":
            snap = rng.random(n) < 0.7
            for k in np.flatnonzero(snap):
                ring[k] = m.points[np.argmin(np.hypot(*(m.points - ring[k]).T))]
        if form == "edges":
            # a whole cell, or the outline of several: every side runs along a mesh edge
            first = rng.integers(m.n_cells)
            chosen = shapely.union_all(cell_shapes(kind, seed)[first : first + int(rng.integers(1, 4))])
            assume(chosen.geom_type == "Polygon" and not chosen.interiors)
            ring = np.array(chosen.exterior.coords)[:-1]
    if draw(st.booleans()):
        ring = ring.astype(np.float32).astype(float)
    try:
        return kind, seed, ControlSurface.polygon(ring)
    except SurfaceError:
        assume(False)


def box(x0, y0, x1, y1):
    return np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]])


def overlay_of(m, surface):
    try:
        return lay_over(m, surface)
    except SurfaceError:
        return None


def moment_area(o):
    """½ Σ ∫ x·n dA; straight pieces make the midpoint rule exact."""
    return 0.5 * float(np.sum(0.5 * (o.start + o.end) * o.normals))


@settings(max_examples=250, deadline=None)
@given(surfaces())
def test_the_border_closes_and_bounds_the_area_that_geos_finds(case):
    kind, seed, surface = case
    m = mesh(kind, seed)
    expected = domain_shape(kind, seed).intersection(shape_of(surface)).area
    o = overlay_of(m, surface)
    if o is None:
        assert expected <= 1e-12
        return
    # rounding of some hundred pieces in a domain of size 1
    assert np.abs(o.normals.sum(axis=0)).max() < 1e-13
    assert o.held_area(m) == pytest.approx(expected, abs=1e-13)
    assert moment_area(o) == pytest.approx(expected, abs=1e-13)


@settings(max_examples=120, deadline=None)
@given(surfaces())
def test_drawn_and_enclosed_pieces_are_those_that_geos_finds(case):
    kind, seed, surface = case
    m, shape, domain = mesh(kind, seed), shape_of(surface), domain_shape(kind, seed)
    o = overlay_of(m, surface)
    assume(o is not None)
    # what runs along the rim may fall on either side of a rounding error (single precision included)
    hair = 2e-7
    drawn = o.lengths[o.patch == DRAWN].sum()
    along = o.lengths[o.patch != DRAWN].sum()
    rim = domain.boundary
    assert shape.boundary.intersection(domain.buffer(-hair)).length <= drawn + 1e-9
    assert drawn <= shape.boundary.intersection(domain.buffer(hair)).length + 1e-9
    assert rim.intersection(shape.buffer(-hair)).length <= along + 1e-9
    assert along <= rim.intersection(shape.buffer(hair)).length + 1e-6


@settings(max_examples=80, deadline=None)
@given(surfaces())
def test_every_piece_lies_in_its_triangle_and_every_triangle_in_its_cell(case):
    kind, seed, surface = case
    m = mesh(kind, seed)
    o = overlay_of(m, surface)
    assume(o is not None)
    for ends in (o.start, o.end):
        a, b, c = (m.points[o.triangle[:, k]] for k in range(3))
        det = cross(b - a, c - a)
        barycentric = np.stack(
            [cross(b - ends, c - ends), cross(c - ends, a - ends), cross(a - ends, b - ends)]
        )
        assert np.all(det > 0)
        assert np.all(barycentric > -1e-13)  # in a domain of size 1: a distance of 1e-12 at most
    cells = [set(m.nodes[m.offsets[c] : m.offsets[c + 1]].tolist()) for c in range(m.n_cells)]
    assert all(set(t) <= cells[c] for t, c in zip(o.triangle.tolist(), o.cell.tolist()))
    on_rim = o.patch != DRAWN
    assert set(o.cell[on_rim].tolist()) <= set(m.boundary.cells.tolist())


def cross(u, v):
    return u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0]


@settings(max_examples=60, deadline=None)
@given(surfaces(("triangles", "polygons", "quadtree", "concave", "holed")))
def test_area_cell_by_cell_is_that_of_a_readable_twin(case):
    kind, seed, surface = case
    m, shape = mesh(kind, seed), shape_of(surface)
    o = overlay_of(m, surface)
    assume(o is not None)
    ours = np.bincount(o.corner_cell, o.corner_areas, m.n_cells).astype(
        float
    )  # integers where no cell is cut
    ours[o.whole] += m.areas[o.whole]
    twin = [cell.intersection(shape).area for cell in cell_shapes(kind, seed)]
    assert np.allclose(ours, twin, rtol=0, atol=1e-14)


@settings(max_examples=80, deadline=None)
@given(surfaces(), st.floats(0.1, 0.9))
def test_two_parts_of_a_volume_add_up_to_it(case, share):
    kind, seed, surface = case
    m, shape = mesh(kind, seed), shape_of(surface)
    x0, y0, x1, y1 = shape.bounds
    cut = x0 + share * (x1 - x0)
    halves = [
        shape.intersection(shapely.box(a, y0 - 1, b, y1 + 1)) for a, b in ((x0 - 1, cut), (cut, x1 + 1))
    ]
    assume(all(h.geom_type == "Polygon" and h.area > 1e-9 for h in halves))
    try:
        parts = [ControlSurface.polygon(np.array(h.exterior.coords)) for h in halves]
    except SurfaceError:
        assume(False)
    laid = [overlay_of(m, s) for s in (surface, *parts)]
    areas = [0.0 if o is None else o.held_area(m) for o in laid]
    assert areas[0] == pytest.approx(areas[1] + areas[2], abs=1e-13)
    # a linear flux density adds up too: what the halves exchange cancels
    fluxes = [0.0 if o is None else flux(o) for o in laid]
    assert fluxes[0] == pytest.approx(fluxes[1] + fluxes[2], abs=1e-13)


def flux(o):
    """∮ u·n dA of u = (3x − y, x + 2y) by the midpoint rule, exact for linear u."""
    x, y = 0.5 * (o.start + o.end).T
    return float(np.sum(np.stack([3 * x - y, x + 2 * y], axis=1) * o.normals))


@settings(max_examples=60, deadline=None)
@given(surfaces(), st.integers(1, 1000))
def test_another_numbering_changes_nothing(case, seed):
    kind, mesh_seed, surface = case
    one, other = mesh(kind, mesh_seed), mesh_of(tm.shuffled(meshes(mesh_seed)[kind], seed))
    a, b = overlay_of(one, surface), overlay_of(other, surface)
    assert (a is None) == (b is None)
    assume(a is not None)
    assert b.held_area(other) == pytest.approx(a.held_area(one), abs=1e-14)
    assert flux(b) == pytest.approx(flux(a), abs=1e-13)
    # the same pieces, since triangles are chosen by geometry; what rounding leaves at a node is no piece
    pieces = [np.hstack([o.start, o.end])[o.lengths > 1e-12] for o in (a, b)]
    assert len(pieces[0]) == len(pieces[1])
    ordered = [p[np.lexsort(np.round(p, 9).T)] for p in pieces]
    assert np.allclose(ordered[0], ordered[1], atol=1e-12)


@settings(max_examples=60, deadline=None)
@given(surfaces(), st.sampled_from([(8.0, -4.0), (1000.0, 1000.0)]))
def test_another_origin_changes_nothing(case, shift):
    kind, seed, surface = case
    cells = meshes(seed)[kind]
    m, moved = mesh(kind, seed), mesh_of(tm.mapped(cells, lambda p: p + shift))
    there = ControlSurface.polygon(surface.rings[0] + shift)
    a, b = overlay_of(m, surface), overlay_of(moved, there)
    # digits lost to the offset, over an outline of length 10 at most
    tolerance = 20 * np.finfo(float).eps * max(map(abs, shift))
    area_a, area_b = (0.0 if o is None else o.held_area(k) for o, k in ((a, m), (b, moved)))
    assert area_b == pytest.approx(area_a, abs=tolerance)


@st.composite
def lines(draw):
    kind, seed = draw(st.sampled_from(KINDS)), draw(st.integers(0, 1))
    m = mesh(kind, seed)
    rng = np.random.default_rng(draw(st.integers(0, 10**6)))
    form = draw(st.sampled_from(["free", "nodes", "tenths"]))
    count = int(rng.integers(2, 6))
    points = rng.uniform(-0.1, 1.1, (count, 2))
    if form == "nodes":
        points = m.points[rng.choice(len(m.points), count, replace=False)]
    if form == "tenths":
        points = np.round(points, 1)
    try:
        return kind, seed, ControlSurface.line(points), ControlSurface.line(points[::-1])
    except SurfaceError:
        assume(False)


@settings(max_examples=120, deadline=None)
@given(lines())
def test_a_line_has_the_length_that_geos_finds_and_its_reverse_the_opposite_flux(case):
    kind, seed, line, back = case
    m = mesh(kind, seed)
    a, b = overlay_of(m, line), overlay_of(m, back)
    domain = domain_shape(kind, seed)
    # a hair wider, so that GEOS too counts what runs along the boundary
    expected = sum(
        shapely.LineString(pair).intersection(domain.buffer(1e-11)).length
        for pair in zip(line.rings[0][:-1], line.rings[0][1:])
    )
    assert (a is None) == (b is None)
    if a is None:
        assert expected < 1e-5
        return
    # where the line leaves at a flat angle the hair makes up to 1e-11 / angle
    assert a.lengths.sum() == pytest.approx(expected, abs=1e-7)
    assert b.lengths.sum() == pytest.approx(a.lengths.sum(), abs=1e-13)
    assert np.allclose(a.normals.sum(axis=0), -b.normals.sum(axis=0), atol=1e-13)
    assert flux(a) == pytest.approx(-flux(b), abs=1e-13)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("inset", [0.0, 1e-17, -1e-17])
def test_a_line_along_any_side_of_the_domain_is_found_once(kind, inset):
    if kind == "annulus":
        pytest.skip("has no straight side")
    m = mesh(kind)
    for a, b in (((0, 0), (1, 0)), ((1, 0), (1, 1)), ((1, 1), (0, 1)), ((0, 1), (0, 0))):
        o = lay_over(m, ControlSurface.line(np.array([a, b], float) + inset))
        assert o.lengths.sum() == pytest.approx(1.0, abs=1e-13)


@pytest.mark.parametrize("kind", ["quads", "triangles", "quadtree"])
def test_lines_along_opposite_sides_are_found_on_both(kind):
    lines = ControlSurface.from_wkt("MULTILINESTRING ((0 0, 1 0), (0 1, 1 1), (0 0, 0 1, 0.5 0.5))")
    o = lay_over(mesh(kind), lines)
    assert o.lengths.sum() == pytest.approx(3.0 + np.hypot(0.5, 0.5), abs=1e-13)
    # to the right of the direction: down twice, then right, then down and left along the diagonal
    assert np.allclose(o.normals.sum(axis=0), [0.5, -2.5], atol=1e-13)
    bottom, top = (mesh(kind).boundary.names.index(name) for name in ("bottom", "top"))
    assert o.lengths[o.patch == bottom].sum() == pytest.approx(1.0, abs=1e-13)
    assert o.lengths[o.patch == top].sum() == pytest.approx(1.0, abs=1e-13)


def test_a_line_along_a_side_of_a_mesh_in_single_precision_is_found():
    cells = tm.mapped(meshes()["triangles"], lambda p: (2.2 * p).astype(np.float32).astype(float))
    m = mesh_of(cells)
    for at in (0.0, 2.2):  # 2.2 in single precision is 2.2000000477
        o = lay_over(m, ControlSurface.line([(at, 0.3), (at, 1.9)]))
        assert o.lengths.sum() == pytest.approx(1.6, abs=1e-13)
        assert np.all(o.patch != DRAWN)


def test_a_line_along_a_plate_without_thickness_is_found_on_one_face():
    # four squares; the edge between the left two is double, a slit from the side to the middle
    points = [(x, y) for y in (0, 1, 2) for x in (0, 1, 2)] + [(0, 1)]
    cells = tm.from_lists(np.array(points, float), [[0, 1, 4, 9], [1, 2, 5, 4], [3, 4, 7, 6], [4, 5, 8, 7]])
    edges = cells.boundary_edges()
    owner = [
        next(i for i in range(4) if set(e) <= set(cells.nodes[4 * i : 4 * i + 4])) for e in edges.tolist()
    ]
    rim = Boundary(edges, np.array(owner), np.zeros(len(edges), np.int64), ("rim",))
    m = Mesh(cells.points, cells.offsets, cells.nodes, rim)
    for path in ([(0, 1), (2, 1)], [(2, 1), (0, 1)]):
        o = lay_over(m, ControlSurface.line(path))
        assert o.lengths.sum() == pytest.approx(2.0, abs=1e-14)
        assert np.allclose(o.normals.sum(axis=0), [0.0, path[0][0] - path[1][0]], atol=1e-14)


@pytest.mark.parametrize("kind", KINDS)
def test_the_domain_and_a_box_around_it_have_the_same_border(kind):
    m = mesh(kind)
    whole, drawn = lay_over(m, ControlSurface.domain()), lay_over(m, ControlSurface.box(-1, -1, 2, 2))
    assert whole.held_area(m) == pytest.approx(drawn.held_area(m), rel=1e-14)
    assert np.all(drawn.patch != DRAWN)
    assert sorted(map(tuple, whole.start.tolist())) == sorted(map(tuple, drawn.start.tolist()))
    assert len(whole.start) == len(m.boundary.edges)


@pytest.mark.parametrize("kind", ["triangles", "quads", "mixed", "polygons", "quadtree", "concave", "holed"])
@pytest.mark.parametrize("error", [0.0, 1e-16, -1e-16, 3e-17])
def test_a_box_drawn_along_the_domain_is_all_boundary(kind, error):
    m = mesh(kind)
    o = lay_over(m, ControlSurface.box(error, error, 1 - error, 1 + error))
    assert o.held_area(m) == pytest.approx(domain_shape(kind).area, abs=1e-13)
    assert o.lengths[o.patch == DRAWN].sum() < 1e-12
    rim = m.points[m.boundary.edges]
    for number in range(len(m.boundary.names)):
        length = np.hypot(*(rim[:, 1] - rim[:, 0])[m.boundary.patch == number].T).sum()
        assert o.lengths[o.patch == number].sum() == pytest.approx(length, abs=1e-12)


def test_a_drawn_line_beyond_a_corner_of_the_boundary_is_no_part_of_the_patch():
    # a step: the wall y = 1 ends at x = 1, in the middle of the long cell above it; a box along y = 1 goes on
    points = [(0, 1), (1, 1), (2, 1), (2, 2), (0, 2), (1, 0), (2, 0)]
    m = mesh_of(tm.from_lists(np.array(points, float), [[0, 1, 2, 3, 4], [5, 6, 2, 1]]))
    o = lay_over(m, ControlSurface.box(0, 1, 2, 2))
    low = (o.start[:, 1] == 1) & (o.end[:, 1] == 1)
    assert o.lengths[low & (o.patch == DRAWN)].sum() == pytest.approx(1.0, abs=1e-14)
    assert o.lengths[low & (o.patch != DRAWN)].sum() == pytest.approx(1.0, abs=1e-14)


@pytest.mark.parametrize("kind", ["annulus", "holed"])
def test_around_a_body_its_whole_outline_is_enclosed(kind):
    m = mesh(kind)
    (body,) = m.bodies
    surface = ControlSurface.around(body, 0.05).resolve(m)
    o = lay_over(m, surface)
    number = m.boundary.names.index(body)
    rim = m.points[m.patch_edges(body)]
    assert o.lengths[o.patch == number].sum() == pytest.approx(
        np.hypot(*(rim[:, 1] - rim[:, 0]).T).sum(), rel=1e-12
    )
    assert set(o.patch.tolist()) == {DRAWN, number}
    assert np.abs(o.normals.sum(axis=0)).max() < 1e-13


def test_a_surface_with_a_hole_and_two_parts_keeps_its_area():
    text = (
        "MULTIPOLYGON (((0.1 0.1, 0.6 0.1, 0.6 0.6, 0.1 0.6, 0.1 0.1), "
        "(0.2 0.2, 0.2 0.4, 0.4 0.4, 0.4 0.2, 0.2 0.2)), ((0.7 0.7, 0.9 0.7, 0.9 0.9, 0.7 0.9, 0.7 0.7)))"
    )
    surface = ControlSurface.from_wkt(text)
    for kind in ("triangles", "quadtree", "polygons"):
        o = lay_over(mesh(kind), surface)
        assert o.held_area(mesh(kind)) == pytest.approx(0.25 - 0.04 + 0.04, abs=1e-14)
        assert np.abs(o.normals.sum(axis=0)).max() < 1e-14


@pytest.mark.parametrize("at", [(0.5, 0.5), (0.4321, 0.1234)])
@pytest.mark.parametrize("radius", [1e-3, 1e-6, 1e-9])
def test_a_circle_much_smaller_than_a_cell_keeps_its_area(at, radius):
    m = mesh_of(tm.quads(UNIT, 0.5, jitter=0.0))  # the first circle sits on a node
    surface = ControlSurface.circle(*at, radius)
    o = lay_over(m, surface)
    # coordinates have an absolute rounding of 1e-16
    assert o.held_area(m) == pytest.approx(np.pi * radius**2, rel=1e-12 + 1e-15 / radius)
    assert np.abs(o.normals.sum(axis=0)).max() < 1e-15


def test_many_short_segments_and_few_long_ones_cut_the_same_area():
    m = mesh("triangles")
    few = ControlSurface.box(0.1, 0.2, 0.8, 0.7)
    t = np.linspace(0, 1, 2500, endpoint=False)[:, None]
    ring = few.rings[0]
    many = np.concatenate([a + t * (b - a) for a, b in zip(ring, np.roll(ring, -1, axis=0))])
    a, b = lay_over(m, few), lay_over(m, ControlSurface.polygon(many))
    assert a.held_area(m) == pytest.approx(b.held_area(m), abs=1e-13)
    assert len(b.start) > 10_000
    assert flux(a) == pytest.approx(flux(b), abs=1e-13)


@pytest.mark.parametrize(
    "surface",
    [
        ControlSurface.box(2, 2, 3, 3),
        ControlSurface.box(1, 0, 2, 1),  # touches the domain from outside
        ControlSurface.line([(1.5, 0), (1.5, 1)]),
        ControlSurface.circle(0.5, 0.5, 0.1),  # inside the hole
    ],
)
def test_a_surface_that_holds_no_fluid_is_refused_with_the_extent_of_the_mesh(surface):
    m = mesh("annulus") if surface.kind == "circle" else mesh("quads")
    with pytest.raises(SurfaceError, match="outside the domain"):
        lay_over(m, surface)


def test_a_cell_that_crosses_itself_is_an_error_not_a_gap():
    # a bow tie, made by moving a corner after the mesh was checked
    m = mesh_of(tm.quads(UNIT, 0.25, jitter=0.0))
    points = m.points.copy()
    points[np.argmin(np.hypot(*(points - 0.5).T))] = [0.9, 0.9]
    broken = Mesh(points, m.offsets, m.nodes, m.boundary)
    with pytest.raises(MeshError, match="no simple polygons"):
        lay_over(broken, ControlSurface.box(0.1, 0.1, 0.6, 0.6))
