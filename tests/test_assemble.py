"""Raw pieces to plane meshes: one rule per test, on meshes small enough to draw."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from small_pieces import block, codes, length, named, piece, renumbered, with_hole

from fvcheck.errors import MeshError, SetupError
from fvcheck.mesh.assemble import assemble
from fvcheck.mesh.piece import Faces, Piece

ROUNDING = 1e-13  # areas near 1, some ten roundings of 2.2e-16 each


def edges_by_dictionary(mesh):
    """Slow twin of the matching kernel: edge -> cells, in a dictionary."""
    found = {}
    for i in range(mesh.n_cells):
        ring = mesh.nodes[mesh.offsets[i] : mesh.offsets[i + 1]].tolist()
        for a, b in zip(ring, ring[1:] + ring[:1]):
            found.setdefault(frozenset((a, b)), []).append((a, b, i))
    return found


def check_laws(mesh):
    """What every mesh obeys, whatever it was made from."""
    found = edges_by_dictionary(mesh)
    alone = {edges[0] for edges in found.values() if len(edges) == 1}
    b = mesh.boundary
    assert {(int(p), int(q), int(c)) for (p, q), c in zip(b.edges, b.cells)} == alone
    assert all(len(edges) <= 2 for edges in found.values())
    assert all(e[0][:2] == e[1][1::-1] for e in found.values() if len(e) == 2)
    assert (mesh.areas > 0).all()
    step = mesh.points[b.edges[:, 1]] - mesh.points[b.edges[:, 0]]
    scale = np.abs(step).sum()
    np.testing.assert_allclose(step.sum(axis=0), 0, atol=1e-14 * scale)  # closed rings
    middle = mesh.points[b.edges].mean(axis=1)
    normal = np.column_stack([step[:, 1], -step[:, 0]])
    assert 0.5 * (middle * normal).sum() == pytest.approx(mesh.areas.sum(), abs=1e-13 * (1 + scale**2))
    assert (b.patch >= 0).all()
    assert set(b.patch.tolist()) == set(range(len(b.names)))
    assert len(np.unique(mesh.nodes)) == mesh.n_points
    return found


def summary(assembly):
    """What must not depend on numbering."""
    mesh = assembly.mesh
    sides = {
        name: (len(mesh.patch_edges(name)), round(length(mesh, name), 10)) for name in mesh.boundary.names
    }
    return mesh.n_points, mesh.n_cells, round(float(mesh.areas.sum()), 10), sides, mesh.bodies


# ---------------------------------------------------------------- laws


@given(st.integers(0, 2**32 - 1), st.integers(2, 6), st.integers(2, 6))
@settings(max_examples=40, deadline=None)
def test_renumbering_and_turning_cells_changes_nothing(seed, nx, ny):
    rng = np.random.default_rng(seed)
    points, quads = with_hole(nx + 2, ny + 2, missing=((1, 1), (nx, ny)), y1=0.7)
    plain = assemble([piece(points, quads)])
    other = assemble([renumbered(piece(points, quads), rng)])
    check_laws(other.mesh)
    assert summary(other) == summary(plain)


@given(st.integers(0, 2**32 - 1), st.integers(1, 5))
@settings(max_examples=40, deadline=None)
def test_cutting_into_partitions_changes_nothing_but_hints(seed, parts):
    rng = np.random.default_rng(seed)
    points, quads = with_hole(7, 5)
    owner = rng.integers(parts, size=len(quads))
    pieces = []
    for p in range(parts):
        mine = [q for q, o in zip(quads, owner) if o == p]
        used = np.unique(mine).astype(int) if mine else np.zeros(0, int)
        new = {old: i for i, old in enumerate(used.tolist())}
        pieces.append(piece(points[used].reshape(-1, 2), [[new[n] for n in q] for q in mine]))
    whole, cut = assemble([piece(points, quads)]), assemble(pieces)
    check_laws(cut.mesh)
    assert summary(cut) == summary(whole)


@given(st.floats(-1e3, 1e3), st.floats(-1e3, 1e3))
@settings(max_examples=30, deadline=None)
def test_translating_changes_no_name(dx, dy):
    points, quads = with_hole(8, 8, missing=((2, 1), (2, 5), (5, 3)))
    names = [assemble([piece(points + d, quads)]).mesh for d in (np.zeros(2), np.array([dx, dy]))]
    assert names[0].boundary.names == names[1].boundary.names
    for name in names[0].bodies:
        moved = names[1].points[names[1].patch_edges(name)] - [dx, dy]
        np.testing.assert_allclose(moved, names[0].points[names[0].patch_edges(name)], atol=1e-12)


def test_eulers_formula_holds_with_holes():
    points, quads = with_hole(8, 8, missing=((2, 1), (2, 5), (5, 3)))
    mesh = assemble([piece(points, quads)]).mesh
    n_edges = len(check_laws(mesh))
    assert mesh.n_points - n_edges + mesh.n_cells == 1 - 3  # one region with three holes


def test_the_callers_arrays_are_left_alone():
    p = piece(*block(2, 2))
    before = [a.copy() for a in (p.points, p.nodes, p.offsets, p.types)]
    for array in (p.points, p.nodes, p.offsets, p.types):
        array.flags.writeable = False
    assemble([p, Piece(p.points + np.array([1, 0, 0]), p.types, p.offsets, p.nodes)])
    for a, b in zip(before, (p.points, p.nodes, p.offsets, p.types)):
        np.testing.assert_array_equal(a, b)


# ---------------------------------------------------------------- cell types


@pytest.mark.parametrize(
    ("kind", "nodes", "cells"),
    [
        (8, [0, 1, 3, 2], 1),  # pixel: 0 1 3 2 round the square
        (6, [0, 1, 3, 2], 2),  # strip
    ],
)
def test_pixels_and_strips_cover_the_square(kind, nodes, cells):
    points = np.array([[0, 0], [1, 0], [1, 1], [0, 1]], float)
    mesh = assemble([piece(points, [nodes], [kind])]).mesh
    check_laws(mesh)
    assert mesh.n_cells == cells
    assert mesh.areas.sum() == pytest.approx(1, abs=ROUNDING)


def test_a_long_strip_has_all_its_triangles_the_same_way_round():
    x = np.repeat(np.arange(5.0), 2)
    points = np.column_stack([x, np.tile([0.0, 1.0], 5)])
    assembly = assemble([piece(points, [list(range(10))], [6])])
    check_laws(assembly.mesh)
    assert assembly.mesh.n_cells == 8
    assert "clockwise-cells" not in codes(assembly)
    assert set(assembly.cell_source.tolist()) == {0}


def lagrange_points(kind, order):
    """Points of a Lagrange cell in VTK's own numbering."""
    if kind == 70:
        from vtkmodules.vtkCommonDataModel import vtkLagrangeQuadrilateral

        out = np.zeros(((order + 1) ** 2, 2))
        for i in range(order + 1):
            for j in range(order + 1):
                at = vtkLagrangeQuadrilateral.PointIndexFromIJK(i, j, (order, order))
                out[at] = i / order, j / order
        return out
    from vtkmodules.vtkCommonDataModel import vtkLagrangeTriangle

    cell = vtkLagrangeTriangle()
    n = (order + 1) * (order + 2) // 2
    cell.GetPointIds().SetNumberOfIds(n)
    cell.GetPoints().SetNumberOfPoints(n)
    cell.Initialize()
    coordinates = cell.GetParametricCoords()
    return np.array([coordinates[3 * i : 3 * i + 2] for i in range(n)])


@pytest.mark.parametrize("kind", [69, 70])
@pytest.mark.parametrize("order", [1, 2, 3, 4, 5])
@pytest.mark.parametrize("keep", [False, True])
def test_lagrange_cells_follow_the_numbering_of_vtk(kind, order, keep):
    """Curved outline, so that a wrong order of nodes changes the area or crosses."""
    points = lagrange_points(kind, order)
    points = points + 0.05 * np.sin(3 * points[:, ::-1])
    assembly = assemble([piece(points, [list(range(len(points)))], [kind])], keep_centres=keep)
    check_laws(assembly.mesh)
    inside = (order - 1) ** 2 if kind == 70 else (order - 1) * (order - 2) // 2
    split = keep and inside > 0
    assert assembly.mesh.n_cells == ((order**2) if split else 1)
    assert assembly.mesh.n_points == len(points) - (0 if split else inside)
    outline = (4 if kind == 70 else 3) * order
    assert len(assembly.mesh.boundary.edges) == outline


@pytest.mark.parametrize(("kind", "size", "cells"), [(28, 9, 4), (34, 7, 3)])
def test_centre_nodes_are_kept_only_where_asked(kind, size, cells):
    square = [[0, 0], [2, 0], [2, 2], [0, 2], [1, 0], [2, 1], [1, 2], [0, 1], [1, 1]]
    triangle = [[0, 0], [3, 0], [0, 3], [1.5, 0], [1.5, 1.5], [0, 1.5], [1, 1]]
    points = np.array(square if kind == 28 else triangle, float)
    whole, split = (
        assemble([piece(points, [list(range(size))], [kind])], keep_centres=k) for k in (False, True)
    )
    assert (whole.mesh.n_cells, whole.mesh.n_points) == (1, size - 1)
    assert (split.mesh.n_cells, split.mesh.n_points) == (cells, size)
    assert split.mesh.areas.sum() == pytest.approx(whole.mesh.areas.sum(), abs=ROUNDING)
    check_laws(split.mesh)


@pytest.mark.parametrize(
    ("kind", "points"),
    [
        (22, [[0, 0], [2, 0], [0, 2], [1, -0.1], [1.1, 1.1], [-0.1, 1]]),
        (23, [[0, 0], [2, 0], [2, 2], [0, 2], [1, -0.1], [2.1, 1], [1, 2.1], [-0.1, 1]]),
        (30, [[0, 0], [2, 0], [2, 2], [0, 2], [1, -0.1], [1, 2.1]]),
        (36, [[0, 0], [2, 0], [2, 2], [0, 2], [1, -0.1], [2.1, 1], [1, 2.1], [-0.1, 1]]),
    ],
)
def test_mid_edge_nodes_stay_in_one_polygon(kind, points):
    """Nodes pushed outwards make a star round the middle: its area is that of its convex hull."""
    from shapely import MultiPoint

    mesh = assemble([piece(np.array(points, float), [list(range(len(points)))], [kind])]).mesh
    assert (mesh.n_cells, mesh.n_points) == (1, len(points))
    assert mesh.areas.sum() == pytest.approx(MultiPoint(points).convex_hull.area, abs=ROUNDING)


def test_a_wrong_number_of_nodes_is_refused():
    with pytest.raises(MeshError, match="has 4 nodes instead of 3"):
        assemble([piece(np.array([[0, 0], [1, 0], [1, 1], [0, 1.0]]), [[0, 1, 2, 3]], [5])])


def test_an_unknown_cell_type_is_refused():
    with pytest.raises(MeshError, match="type 200"):
        assemble([piece(np.array([[0, 0], [1, 0], [1, 1.0]]), [[0, 1, 2]], [200])])


# ---------------------------------------------------------------- tidying


def test_repeated_nodes_of_a_cell_are_dropped():
    points = np.array([[0, 0], [1, 0], [1, 1.0]])
    mesh = assemble([piece(points, [[0, 0, 1, 2, 2, 0]])]).mesh
    assert np.diff(mesh.offsets).tolist() == [3]


def test_cells_without_area_are_dropped_with_a_hint():
    points = np.array([[0, 0], [1, 0], [2, 0], [2, 1], [0, 1.0]])
    assembly = assemble([piece(points, [[0, 2, 3, 4], [0, 1, 2]])])
    assert assembly.mesh.n_cells == 1
    assert codes(assembly) == ["zero-area-cells"]
    assert assembly.cell_source.tolist() == [0]


def test_a_flat_sliver_between_cells_leaves_no_gap():
    """The sliver (0, 1, 2) lies between two cells below and one above: its middle node hangs there."""
    points = np.array([[0, 0], [1, 0], [2, 0], [2, 1], [0, 1], [0, -1], [1, -1], [2, -1.0]])
    assembly = assemble([piece(points, [[0, 2, 3, 4], [0, 1, 2], [5, 6, 1, 0], [6, 7, 2, 1]])])
    check_laws(assembly.mesh)
    assert codes(assembly) == ["zero-area-cells", "hanging-nodes"]
    assert assembly.mesh.bodies == ()


def test_a_minority_of_clockwise_cells_is_turned_with_a_hint():
    points, quads = block(3, 1)
    quads[1] = quads[1][::-1]
    assembly = assemble([piece(points, quads)])
    check_laws(assembly.mesh)
    assert codes(assembly) == ["clockwise-cells"]
    assert "1 of 3 cells" in assembly.hints[0].message


def test_cells_that_are_all_clockwise_are_turned_without_a_word():
    points, quads = block(3, 2)
    assembly = assemble([piece(points, [q[::-1] for q in quads])])
    check_laws(assembly.mesh)
    assert assembly.hints == ()


@pytest.mark.parametrize(
    "ring",
    [
        [[0, 0], [1, 1], [1, 0], [0, 1.2]],  # bow-tie
        [[0, 0], [2, 0], [2, 2], [1, -0.5], [0, 2]],  # a notch through the other side
        [[np.cos(a), np.sin(a)] for a in 4 * np.pi * np.arange(5) / 5],  # pentagram: every turn the same way
        [[0, 0], [4, 0], [4, 4], [0, 4], [0, 0.0001], [3, 3], [3, 1], [-1, 2]],
    ],
)
def test_crossing_outlines_are_refused_and_named(ring):
    points = np.array([[5, 5], [6, 5], [5, 6], *ring])
    with pytest.raises(MeshError, match="outline of cell 1 crosses"):
        assemble([piece(points, [[0, 1, 2], list(range(3, 3 + len(ring)))])])


@given(st.integers(0, 2**32 - 1), st.integers(4, 12))
@settings(max_examples=60, deadline=None)
def test_the_crossing_test_agrees_with_geos(seed, n):
    """Random rings: shapely's is_valid is the outside authority."""
    from shapely import Polygon

    from fvcheck.kernels.polygons import outline_faults

    ring = np.random.default_rng(seed).normal(size=(n, 2))
    fault = outline_faults(ring, np.array([0, n]), np.arange(n), np.zeros(1))
    assert bool(fault[0]) == (not Polygon(ring).is_valid)


def test_a_polygon_of_thousands_of_nodes_is_tested_without_delay():
    a = 2 * np.pi * np.arange(20_000) / 20_000
    ring = (1 + 0.1 * np.cos(9 * a))[:, None] * np.column_stack([np.cos(a), np.sin(a)])
    assert assemble([piece(ring, [list(range(len(ring)))])]).mesh.n_cells == 1
    ring[[5, 10_000]] = ring[[10_000, 5]]
    with pytest.raises(MeshError, match="crosses"):
        assemble([piece(ring, [list(range(len(ring)))])])


def test_a_concave_polygon_is_kept():
    points = np.array([[0, 0], [2, 0], [2, 2], [1, 0.5], [0, 2.0]])
    mesh = assemble([piece(points, [[0, 1, 2, 3, 4]])]).mesh
    assert mesh.areas.sum() == pytest.approx(2.5, abs=ROUNDING)


@pytest.mark.parametrize("value", [np.nan, np.inf])
def test_coordinates_that_are_no_numbers_are_refused(value):
    points, quads = block(1, 1)
    points[2, 0] = value
    with pytest.raises(MeshError, match="point 2 is not a finite number"):
        assemble([piece(points, quads)])


@pytest.mark.parametrize("node", [-1, 4])
def test_node_numbers_out_of_range_are_refused(node):
    points, _ = block(1, 1)
    with pytest.raises(MeshError, match=f"point {node}, but there are 4"):
        assemble([piece(points, [[0, 1, node]])])


def test_damaged_offsets_are_refused():
    p = piece(*block(2, 1))
    for offsets in ([0, 9, 8], [0, 4], [1, 4, 8], [0, 4, 7]):
        with pytest.raises(MeshError, match="offsets"):
            assemble([Piece(p.points, p.types, np.array(offsets), p.nodes)])


def test_no_cells_and_no_pieces_are_refused():
    with pytest.raises(MeshError, match="no 2D cells"):
        assemble([])
    with pytest.raises(MeshError, match="no 2D cells"):
        assemble([piece(np.zeros((3, 2)), [[0], [1]], [1, 1])])


def test_cells_on_one_line_are_refused():
    with pytest.raises(MeshError, match="area"):
        assemble([piece(np.array([[0, 0], [1, 0], [2.0, 0]]), [[0, 1, 2]])])


def test_unused_points_and_vertex_cells_are_dropped():
    points, quads = block(1, 1)
    points = np.vstack([[[9.0, 9.0]], points])
    cells = [[0], *([n + 1 for n in q] for q in quads)]
    assembly = assemble([piece(points, cells, [1, 9])])
    assert assembly.mesh.n_points == 4
    assert assembly.point_source.tolist() == [1, 2, 3, 4]
    assert assembly.cell_source.tolist() == [1]


def test_ghost_cells_are_dropped_first():
    points, quads = block(3, 1)
    ghost = np.array([False, False, True])
    mesh = assemble([piece(points, quads, ghost=ghost)]).mesh
    assert (mesh.n_cells, mesh.n_points) == (2, 6)


# ---------------------------------------------------------------- planes


@pytest.mark.parametrize("plane", ["xy", "xz", "yz"])
def test_coordinate_planes_keep_the_coordinates_of_the_file(plane):
    points, quads = block(3, 2, x0=-0.3, y1=0.7)
    axes = ["xyz".index(letter) for letter in plane]
    space = np.full((len(points), 3), 0.25)
    space[:, axes] = points
    for wanted in ("auto", plane):
        assembly = assemble([piece(space, quads)], plane=wanted)
        assert assembly.plane == plane
        np.testing.assert_array_equal(assembly.mesh.points, points)
        np.testing.assert_allclose(np.linalg.det(assembly.axes), 1)
        u = np.zeros(3)
        u[axes[1]] = 2.0
        np.testing.assert_array_equal(assembly.axes[:2] @ u, [0, 2])
    other = {"xy": "xz", "xz": "yz", "yz": "xy"}[plane]
    with pytest.raises(MeshError, match=f"do not lie in the {other} plane"):
        assemble([piece(space, quads)], plane=other)


def turned(points, normal, lift=0.0):
    """Plane points put on a plane with the given normal; e1 from the x axis as documented."""
    n = np.array(normal) / np.linalg.norm(normal)
    e1 = np.array([1.0, 0, 0]) - n[0] * n
    e1 /= np.linalg.norm(e1)
    return points @ np.array([e1, np.cross(n, e1)]) + lift * n, n, e1


@pytest.mark.parametrize("normal", [(1, 2, 3), (-1, 0.5, 4), (0, 1, 1), (0.2, 3, -1)])
@pytest.mark.parametrize("dtype", [np.float64, np.float32])
def test_a_turned_plane_is_found(normal, dtype):
    points, quads = block(5, 3, x1=2.0)
    space, n, e1 = turned(points, normal, lift=0.7)
    assembly = assemble([piece(space.astype(dtype), quads)])
    assert assembly.plane == "rotated"
    accuracy = 1e-12 if dtype == np.float64 else 1e-6  # float32 spacing near 2 is 2.4e-7
    np.testing.assert_allclose(assembly.axes[2], n, atol=accuracy)
    np.testing.assert_allclose(assembly.axes[0], e1, atol=accuracy)
    np.testing.assert_allclose(assembly.mesh.points, points, atol=accuracy * 3)
    assert assembly.mesh.boundary.names == ("left", "right", "bottom", "top")


def test_a_surface_that_is_not_plane_is_refused():
    points, quads = block(4, 4)
    space = np.column_stack([points, 1e-3 * np.sin(3 * points[:, 0])])
    with pytest.raises(MeshError, match="do not lie in one plane"):
        assemble([piece(space, quads)])


def test_an_unknown_plane_is_a_setup_error():
    with pytest.raises(SetupError, match="unknown plane"):
        assemble([piece(*block(1, 1))], plane="zx")


# ---------------------------------------------------------------- one cell thick


def extruded(points, cells, kinds, depth=0.1, axis=2, dtype=float):
    """Prisms over plane cells, along a coordinate axis; types 13 (triangles), 12 (quads)."""
    n = len(points)
    space = np.zeros((2 * n, 3))
    plane = [c for c in range(3) if c != axis]
    space[:n, plane] = space[n:, plane] = points
    space[n:, axis] = depth
    return piece(space.astype(dtype), [[*c, *(i + n for i in c)] for c in cells], kinds)


@pytest.mark.parametrize("axis", [0, 1, 2])
@pytest.mark.parametrize("dtype", [np.float64, np.float32])
def test_hexahedra_and_wedges_one_cell_thick_become_polygons(axis, dtype):
    points, quads = block(3, 2, x1=1.5)
    cells = [*quads[1:], quads[0][:3], [quads[0][0], *quads[0][2:]]]
    kinds = [12] * 5 + [13] * 2
    assembly = assemble([extruded(points, cells, kinds, axis=axis, dtype=dtype)])
    check_laws(assembly.mesh)
    assert assembly.plane == {2: "xy", 1: "xz", 0: "yz"}[axis]
    assert (assembly.mesh.n_cells, assembly.mesh.n_points) == (7, 12)
    assert assembly.mesh.areas.sum() == pytest.approx(1.5, abs=1e-12)  # halves are exact in float32 too
    assert assembly.thickness == pytest.approx(0.1, abs=1e-8)  # 0.1 in float32
    assert assembly.mesh.boundary.names == ("left", "right", "bottom", "top")
    assert assembly.hints == ()


def test_voxels_one_cell_thick_become_quads():
    points, quads = block(2, 2)
    p = extruded(points, [[q[0], q[1], q[3], q[2]] for q in quads], [11] * 4)
    mesh = assemble([p]).mesh
    check_laws(mesh)
    assert (mesh.n_cells, mesh.n_points) == (4, 9)


def test_a_turned_extrusion_is_found_and_its_thickness_measured():
    points, quads = block(4, 3, x1=2.0)
    front, n, _ = turned(points, (1, 2, 3), lift=0.5)
    space = np.vstack([front, front - 0.05 * n])
    m = len(points)
    assembly = assemble([piece(space, [[*q, *(i + m for i in q)] for q in quads], [12] * len(quads))])
    assert assembly.plane == "rotated"
    assert assembly.thickness == pytest.approx(0.05, abs=1e-12)
    np.testing.assert_allclose(assembly.mesh.points, points, atol=1e-12)
    assert (assembly.point_source < m).all()


def test_a_quadratic_hexahedron_keeps_its_mid_edge_nodes():
    """VTK's own reference coordinates of the 20-node cell."""
    from vtkmodules.vtkCommonDataModel import vtkQuadraticHexahedron

    c = vtkQuadraticHexahedron().GetParametricCoords()
    points = np.array([c[3 * i : 3 * i + 3] for i in range(20)]) * [1, 1, 0.1]
    mesh = assemble([piece(points, [list(range(20))], [25])]).mesh
    assert (mesh.n_cells, mesh.n_points) == (1, 8)
    assert mesh.areas.sum() == pytest.approx(1, abs=ROUNDING)


@pytest.mark.parametrize(
    ("kind", "name", "cells", "points", "area"),
    [
        (15, "vtkPentagonalPrism", 1, 5, None),
        (16, "vtkHexagonalPrism", 1, 6, None),
        (26, "vtkQuadraticWedge", 1, 6, 0.5),
        (29, "vtkTriQuadraticHexahedron", 1, 8, 1.0),
        (31, "vtkQuadraticLinearWedge", 1, 6, 0.5),
        (32, "vtkBiQuadraticQuadraticWedge", 1, 6, 0.5),
        (33, "vtkBiQuadraticQuadraticHexahedron", 1, 8, 1.0),
    ],
)
def test_every_prismatic_type_is_read_in_vtks_node_order(kind, name, cells, points, area):
    """VTK's own reference coordinates; squeezed, so that no other direction is as thin."""
    from vtkmodules import vtkCommonDataModel

    cell = getattr(vtkCommonDataModel, name)()
    c, n = cell.GetParametricCoords(), cell.GetNumberOfPoints()
    where = np.array([c[3 * i : 3 * i + 3] for i in range(n)]) * [1, 1, 0.1]
    assembly = assemble([piece(where, [list(range(n))], [kind])])
    assert assembly.plane == "xy"
    assert (assembly.mesh.n_cells, assembly.mesh.n_points) == (cells, points)
    if area:
        assert assembly.mesh.areas.sum() == pytest.approx(area, abs=ROUNDING)


def test_two_layers_and_tetrahedra_are_refused():
    points, quads = block(2, 2)
    n = len(points)
    space = np.vstack([np.column_stack([points, np.full(n, z)]) for z in (0, 0.1, 0.2)])
    cells = [[i + k * n for i in q] + [i + (k + 1) * n for i in q] for k in (0, 1) for q in quads]
    with pytest.raises(MeshError, match="not one cell thick"):
        assemble([piece(space, cells, [12] * 8)])
    with pytest.raises(MeshError, match="tetrahedra"):
        assemble([piece(np.eye(4, 3), [[0, 1, 2, 3]], [10])])


def test_polyhedra_become_polygons_and_damaged_faces_are_refused():
    ring = np.array([[0, 0], [2, 0], [3, 1], [2, 2], [0, 2.0]])
    n = len(ring)
    space = np.vstack([np.column_stack([ring, np.zeros(n)]), np.column_stack([ring, np.full(n, 0.3)])])
    sides = [[i, (i + 1) % n, n + (i + 1) % n, n + i] for i in range(n)]
    every = [list(range(n)), list(range(n, 2 * n)), *sides]
    offsets = np.cumsum([0, *(len(f) for f in every)])
    nodes = np.array([i for f in every for i in f])
    faces = Faces(offsets, nodes, np.array([0, len(every)]), np.arange(len(every)))
    mesh = assemble([piece(space, [list(range(2 * n))], [42], faces=faces)]).mesh
    assert np.diff(mesh.offsets).tolist() == [5]
    assert mesh.areas.sum() == pytest.approx(
        5, abs=ROUNDING
    )  # square 2 x 2 and a triangle of base 2, height 1
    bad = Faces(offsets, np.where(nodes == 3, 99, nodes), np.array([0, len(every)]), np.arange(len(every)))
    with pytest.raises(MeshError, match="polyhedron uses a node"):
        assemble([piece(space, [list(range(2 * n))], [42], faces=bad)])


def test_patches_of_an_extrusion_become_edges_and_front_and_back_vanish():
    points, quads = block(2, 1)
    solid = extruded(points, quads, [12, 12])
    n = len(points)
    left = [0, 3, 3 + n, n]  # x = 0
    front = [[i + n for i in q] for q in quads]
    patches = {"inlet": named(left, kind="BCInflow"), "empty": named(*front)}
    p = Piece(solid.points, solid.types, solid.offsets, solid.nodes, patches=patches)
    right = piece(solid.points[[2, 5, 5 + n, 2 + n]], [[0, 1, 2, 3]], name="case/outlet")
    mesh = assemble([p, right]).mesh
    assert mesh.boundary.names == ("inlet", "outlet", "bottom", "top")
    assert length(mesh, "inlet") == length(mesh, "outlet") == 1
    assert mesh.kinds == {"inlet": "BCInflow"}


# ---------------------------------------------------------------- seams


def test_two_blocks_are_stitched_along_their_seam():
    a, quads = block(2, 2)
    b, _ = block(2, 2, x0=1.0, x1=2.0)
    assembly = assemble([piece(a, quads), piece(b, quads)])
    check_laws(assembly.mesh)
    assert codes(assembly) == ["stitched-points"]
    assert "3 repeated points" in assembly.hints[0].message
    assert assembly.mesh.boundary.names == ("left", "right", "bottom", "top")


@pytest.mark.parametrize(("shift", "joined"), [(3e-8, True), (1e-5, False)])
def test_the_tolerance_follows_the_local_edge(shift, joined):
    """Edges of 0.1: a tolerance of 1e-7."""
    a, quads = block(10, 10)
    b, _ = block(10, 10, x0=1.0 + shift, x1=2.0)
    mesh = assemble([piece(a, quads), piece(b, quads)]).mesh
    assert mesh.n_points == (231 if joined else 242)


def test_float32_copies_a_few_spacings_apart_are_stitched():
    a, quads = block(4, 4, x0=100.0, x1=101.0)
    b, _ = block(4, 4, x0=101.0, x1=102.0)
    b = b.astype(np.float32)
    b[:, 0] = np.where(b[:, 0] == 101, np.nextafter(np.float32(101), np.float32(102)), b[:, 0])
    assembly = assemble([piece(a.astype(np.float32), quads), piece(b, quads)])
    assert assembly.mesh.n_points == 45
    assert "7.63e-06 apart" in assembly.hints[0].message  # the spacing of float32 above 64


def test_four_blocks_meet_in_one_point():
    pieces = [
        piece(*block(2, 2, x0=x, x1=x + 1, y0=y, y1=y + 1)) for x, y in ((0, 0), (1, 1), (1, 0), (0, 1))
    ]
    mesh = assemble(pieces).mesh
    check_laws(mesh)
    assert (mesh.n_points, mesh.n_cells) == (25, 16)


def test_an_o_grid_in_one_piece_closes_on_itself():
    a = np.linspace(0, 2 * np.pi, 25)
    a[-1] = a[0] + 2 * np.pi
    r = np.linspace(1, 2, 5)
    points = np.vstack([rr * np.column_stack([np.cos(a), np.sin(a)]) for rr in r])
    _, quads = block(24, 4)
    assembly = assemble([piece(points, quads)])
    check_laws(assembly.mesh)
    assert assembly.mesh.n_points == 24 * 5
    assert assembly.mesh.bodies == ("body-1",)
    assert assembly.mesh.boundary.names == ("side-1", "body-1")


def test_the_pole_of_a_polar_grid_collapses():
    a = np.linspace(0, 2 * np.pi, 13)
    points = np.vstack([r * np.column_stack([np.cos(a), np.sin(a)]) for r in (0.0, 1.0, 2.0)])
    _, quads = block(12, 2)
    mesh = assemble([piece(points, quads)]).mesh
    check_laws(mesh)
    assert mesh.n_points == 1 + 2 * 12
    assert sorted(np.diff(mesh.offsets).tolist()) == [3] * 12 + [4] * 12
    assert mesh.bodies == ()


def plate(n=6):
    """A block with a slit along y = 0.5 from x = 1/n to (n-1)/n, its inner points doubled."""
    points, quads = block(n, 2)
    row = n + 1
    inner = list(range(row + 2, row + n - 1))
    copy = {old: len(points) + i for i, old in enumerate(inner)}
    quads = [[copy.get(i, i) for i in q] if k >= n else q for k, q in enumerate(quads)]
    lower = [[row + i, row + i + 1] for i in range(1, n - 1)]
    upper = [[copy.get(a, a), copy.get(b, b)] for a, b in lower]
    return np.vstack([points, points[inner]]), quads, lower, upper


def test_a_plate_without_thickness_survives_where_a_patch_covers_both_sides():
    points, quads, lower, upper = plate()
    p = piece(points, quads, patches={"blade": named(*lower, *upper)})
    assembly = assemble([p])
    check_laws(assembly.mesh)
    assert codes(assembly) == ["kept-apart-points"]
    assert assembly.mesh.bodies == ("blade",)
    assert len(assembly.mesh.patch_edges("blade")) == 2 * len(lower)


def test_a_plate_survives_with_line_cells_and_across_blocks():
    """Upper and lower block are separate pieces; a seam before and behind the plate is closed."""
    row = 7
    lower_points, quads = block(6, 1, y1=0.5)
    upper_points, _ = block(6, 1, y0=0.5)
    lines = [[row + i, row + i + 1] for i in range(2, 5)]
    upper_lines = [[i, i + 1] for i in range(2, 5)]
    kinds = [9] * 6 + [3] * 3
    tags = np.array([0] * 6 + [7] * 3)
    pieces = [
        piece(lower_points, quads + lines, kinds, cell_data={"tag": tags}),
        piece(upper_points, quads + upper_lines, kinds, cell_data={"tag": tags}),
    ]
    mesh = assemble(pieces).mesh
    check_laws(mesh)
    assert mesh.bodies == ("patch-7",)
    assert len(mesh.patch_edges("patch-7")) == 6
    assert mesh.n_points == 21 + 2  # two inner points of the plate are double, its tips are shared


def test_points_of_one_piece_with_differing_data_are_kept_apart():
    points, quads, lower, _ = plate()
    pressure = np.where(np.arange(len(points)) >= 21, 1.0, 0.0)
    assembly = assemble([piece(points, quads, point_data={"p": pressure})])
    check_laws(assembly.mesh)
    assert codes(assembly) == ["kept-apart-points"]
    assert assembly.mesh.bodies == ("body-1",)
    same = assemble([piece(points, quads, point_data={"p": np.ones(len(points)), "id": np.arange(24)})])
    assert codes(same) == ["stitched-points"]
    assert len(lower) == 4


def test_differing_data_across_pieces_are_merged_and_the_first_is_kept():
    a, quads = block(2, 2)
    b, _ = block(2, 2, x0=1.0, x1=2.0)
    pieces = [piece(x, quads, point_data={"p": np.full(9, v)}) for x, v in ((a, 0.0), (b, 1.0))]
    assembly = assemble(pieces)
    assert codes(assembly) == ["stitched-points"]
    seam = assembly.mesh.points[:, 0] == 1
    assert (assembly.point_source[seam] < 9).all()


def test_a_mesh_whose_every_cell_has_points_of_its_own_is_joined():
    points, quads = block(5, 4)
    split = points[np.concatenate(quads)]
    rng = np.random.default_rng(1)
    p = piece(
        split, np.arange(len(split)).reshape(-1, 4).tolist(), point_data={"p": rng.normal(size=len(split))}
    )
    mesh = assemble([p]).mesh
    check_laws(mesh)
    assert mesh.n_points == 30


def test_overlapping_cells_are_refused():
    points, quads = block(2, 2)
    with pytest.raises(MeshError, match="overlap"):
        assemble([piece(points, quads), piece(points, quads)])


# ---------------------------------------------------------------- hanging nodes


def quadtree(depth, rng):
    """Leaves of a random quadtree on the unit square, corner nodes only."""
    leaves, size = [], 2**depth

    def divide(x, y, s):
        if s > 1 and (s == size or rng.random() < 0.6):
            for dx in (0, s // 2):
                for dy in (0, s // 2):
                    divide(x + dx, y + dy, s // 2)
        else:
            leaves.append((x, y, s))

    divide(0, 0, size)
    number, cells = {}, []
    for x, y, s in leaves:
        ring = [(x, y), (x + s, y), (x + s, y + s), (x, y + s)]
        cells.append([number.setdefault(p, len(number)) for p in ring])
    return np.array(list(number)) / size, cells


@given(st.integers(0, 2**32 - 1), st.sampled_from([np.float64, np.float32]))
@settings(max_examples=30, deadline=None)
def test_hanging_nodes_of_a_quadtree_are_inserted_and_the_area_stays(seed, dtype):
    """Several levels across one edge too. Boundary edges: the rim and nothing else."""
    points, cells = quadtree(4, np.random.default_rng(seed))
    points = (points * [1.7, 0.9] + 0.3).astype(dtype)
    mesh = assemble([piece(points, cells)]).mesh
    check_laws(mesh)
    assert mesh.areas.sum() == pytest.approx(1.7 * 0.9, abs=1e-6)  # float32 coordinates
    assert mesh.boundary.names == ("left", "right", "bottom", "top")


def test_hanging_nodes_are_counted():
    points = np.array([[0, 0], [1, 0], [1, 1], [0, 1], [2, 0], [2, 0.5], [1, 0.5], [2, 1.0]])
    assembly = assemble([piece(points, [[0, 1, 2, 3], [1, 4, 5, 6], [6, 5, 7, 2]])])
    check_laws(assembly.mesh)
    assert codes(assembly) == ["hanging-nodes"]
    assert assembly.hints[0].message.startswith("1 hanging")


def test_blocks_that_do_not_match_at_their_seam_are_joined():
    mesh = assemble([piece(*block(3, 3)), piece(*block(3, 5, x0=1.0, x1=2.0))]).mesh
    check_laws(mesh)
    assert mesh.boundary.names == ("left", "right", "bottom", "top")
    assert mesh.bodies == ()


def test_a_mid_edge_node_beside_a_linear_cell_is_inserted():
    points = np.array([[0, 0], [1, 0], [0, 1], [0.5, 0], [0.5, 0.5], [0, 0.5], [1, 1.0]])
    mesh = assemble([piece(points, [[0, 1, 2, 3, 4, 5], [1, 6, 2]], [22, 5])]).mesh
    check_laws(mesh)
    assert sorted(np.diff(mesh.offsets).tolist()) == [4, 6]


# ---------------------------------------------------------------- kernels against slow twins


@given(st.integers(0, 2**32 - 1), st.integers(3, 60), st.integers(1, 150))
@settings(max_examples=60, deadline=None)
def test_matching_agrees_with_a_dictionary_on_any_edges(seed, n_points, n_edges):
    from fvcheck.kernels.edges import ALONE, CROWDED, twins

    rng = np.random.default_rng(seed)
    start = rng.integers(n_points, size=n_edges)
    end = (start + rng.integers(1, n_points, size=n_edges)) % n_points
    if seed % 2:
        start[: n_edges // 2] = 0  # a hub
        end = np.where(end == start, n_points - 1, end)
    start, end = start[start != end], end[start != end]
    found = {}
    for h, (a, b) in enumerate(zip(start.tolist(), end.tolist())):
        found.setdefault(frozenset((a, b)), []).append(h)
    twin = twins(start, end, n_points)
    for group in found.values():
        if len(group) == 1:
            assert twin[group[0]] == ALONE
        elif len(group) == 2 and start[group[0]] == end[group[1]]:
            assert twin[group].tolist() == group[::-1]
        else:
            assert (twin[group] == CROWDED).all()


@given(st.integers(0, 2**32 - 1), st.integers(4, 60), st.integers(1, 60))
@settings(max_examples=60, deadline=None)
def test_open_half_edges_agree_with_the_matching_on_any_polygons(seed, n_points, n_cells):
    from fvcheck.kernels.edges import ALONE, CROWDED, open_half_edges, twins

    rng = np.random.default_rng(seed)
    cells = [rng.permutation(n_points)[: rng.integers(3, 5)] for _ in range(n_cells)]
    if seed % 2:
        cells = [np.append(cell[cell != 0], 0) for cell in cells]  # a hub
        cells = [cell for cell in cells if len(cell) > 2]
    if not cells:
        return
    offsets = np.cumsum([0, *map(len, cells)])
    start, end = np.concatenate(cells), np.concatenate([np.roll(cell, -1) for cell in cells])
    twin = twins(start, end, n_points)
    open_, crowded = open_half_edges(offsets, start, n_points)
    assert open_.tolist() == np.flatnonzero(twin == ALONE).tolist()
    expected = np.flatnonzero(twin == CROWDED)
    assert crowded == (expected[0] if len(expected) else -1)


@given(st.integers(0, 2**32 - 1))
@settings(max_examples=30, deadline=None)
def test_equal_points_agree_with_a_dictionary(seed):
    from fvcheck.kernels.merging import first_equal

    rng = np.random.default_rng(seed)
    x, y = rng.integers(-3, 4, size=(2, 80)).astype(float)
    x[x == 0] = rng.choice([0.0, -0.0], size=(x == 0).sum())
    first = {}
    expected = [first.setdefault((a + 0.0, b + 0.0), i) for i, (a, b) in enumerate(zip(x, y))]
    assert first_equal(x, y).tolist() == expected


@given(st.integers(0, 2**32 - 1))
@settings(max_examples=20, deadline=None)
def test_walking_back_finds_the_hanging_nodes_that_a_search_finds(seed):
    from fvcheck.kernels.edges import paths_back
    from fvcheck.mesh.edges import edges_of
    from fvcheck.mesh.gather import Polygons
    from fvcheck.mesh.hanging import _on_edges

    points, cells = quadtree(4, np.random.default_rng(seed))
    p = piece(points, cells)
    polygons = Polygons(p.offsets, p.nodes, np.arange(len(cells)))
    edges = edges_of(polygons, len(points))
    start, end = edges.start, edges.end
    tolerance = np.full(len(start), 1e-9)
    edge, node, share, done = paths_back(start, end, points[:, 0].copy(), points[:, 1].copy(), tolerance)
    found = _on_edges(points, start, end, np.unique(start), tolerance)
    assert sorted(zip(edge.tolist(), node.tolist(), share.tolist())) == sorted(
        zip(*(f.tolist() for f in found))
    )
    assert done[edge].all()
    rim = np.isin(points, (0, 1))  # what is not walked is the rim of the square
    assert (rim[start[~done]] & rim[end[~done]]).any(axis=1).all()
