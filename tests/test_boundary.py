"""Patches, names of our own, chains, loops and holes."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from small_pieces import block, codes, length, named, piece, with_hole

from fvcheck.errors import MeshError
from fvcheck.mesh.assemble import assemble
from fvcheck.mesh.boundary import chains, clearance, domain_loops, holes, patch_chains, patch_rings, ring_area
from fvcheck.mesh.sides import corners


def fan(ring):
    """Triangles from the middle of a star-shaped ring to its edges."""
    n = len(ring)
    return np.vstack([ring, ring.mean(axis=0)]), [[i, (i + 1) % n, n] for i in range(n)]


def polygon_ring(n, radius=1.0, phase=0.1):
    a = phase + 2 * np.pi * np.arange(n) / n
    return radius * np.column_stack([np.cos(a), np.sin(a)])


def names_of(ring):
    return assemble([piece(*fan(np.asarray(ring, float)))]).mesh.boundary.names


# ---------------------------------------------------------------- names of our own


def test_a_rectangle_has_four_named_sides_even_with_one_cell():
    for n in (1, 5):
        mesh = assemble([piece(*block(n, n, x1=3.0))]).mesh
        assert mesh.boundary.names == ("left", "right", "bottom", "top")
        assert [length(mesh, name) for name in mesh.boundary.names] == pytest.approx([1, 1, 3, 3])


@pytest.mark.parametrize("n", [6, 8, 12, 40])
def test_a_coarse_circle_is_one_side(n):
    assert names_of(polygon_ring(n)) == ("side-1",)


@pytest.mark.parametrize("segments", [2, 3, 4, 10])
def test_rounded_corners_do_not_break_a_boundary_into_many_sides(segments):
    """A rectangle with quarter circles at its corners is smooth all round."""
    a = np.linspace(0, np.pi / 2, segments + 1)
    arc = np.column_stack([np.cos(a), np.sin(a)])
    turn = np.array([[0, 1], [-1, 0]])
    ring, rows = [], arc
    for centre in ([3, 1], [0, 1], [0, 0], [3, 0]):
        ring.append(rows + centre)
        rows = rows @ turn
    assert names_of(np.vstack(ring)) == ("side-1",)


def test_a_chamfer_is_a_side_of_its_own():
    ring = [[0, 0], [2, 0], [4, 0], [4, 2], [4, 3], [3, 4], [0, 4], [0, 2]]
    assert names_of(ring) == ("left", "right", "bottom", "top", "side-1")


def test_a_step_makes_sides_of_the_walls_that_do_not_lie_on_the_box():
    points, quads = with_hole(4, 2, missing=((0, 0),), x1=4.0, y1=2.0)
    mesh = assemble([piece(points, quads)]).mesh
    assert mesh.boundary.names == ("left", "right", "bottom", "top", "side-1", "side-2")
    # counter-clockwise from the lower left: the walls of the step are met first and last
    sides = [mesh.points[mesh.patch_edges(n)].reshape(-1, 2) for n in ("side-1", "side-2")]
    assert {tuple(np.ptp(side, axis=0)) for side in sides} == {(0.0, 1.0), (1.0, 0.0)}
    assert mesh.bodies == ()


def test_two_inlets_on_one_side_are_not_both_called_left():
    points, quads = block(2, 3)
    p = piece(points, quads, patches={"plate": named([3, 6])})
    mesh = assemble([p]).mesh
    assert mesh.boundary.names == ("plate", "right", "bottom", "top", "side-1", "side-2")


def test_a_name_that_the_file_uses_is_not_given_again():
    points, quads = with_hole(4, 4, missing=((1, 1),))
    p = piece(points, quads, patches={"left": named([0, 1]), "body-1": named([2, 1])})
    mesh = assemble([p]).mesh
    assert mesh.boundary.names[:2] == ("left", "body-1")
    assert len(set(mesh.boundary.names)) == len(mesh.boundary.names)
    assert mesh.bodies == ("body-2",)


def test_holes_are_numbered_from_left_to_right_then_upwards():
    points, quads = with_hole(9, 9, missing=((6, 2), (1, 6), (1, 2)))
    mesh = assemble([piece(points, quads)]).mesh
    assert mesh.bodies == ("body-1", "body-2", "body-3")
    low = [mesh.points[patch_rings(mesh, name)[0]].min(axis=0) * 9 for name in mesh.bodies]
    np.testing.assert_allclose(low, [[1, 2], [1, 6], [6, 2]], atol=1e-12)


def test_holes_that_touch_in_a_point_are_two_bodies():
    points, quads = with_hole(6, 6, missing=((2, 2), (3, 3)))
    mesh = assemble([piece(points, quads)]).mesh
    assert mesh.bodies == ("body-1", "body-2")
    assert [len(mesh.patch_edges(name)) for name in mesh.bodies] == [4, 4]


def test_regions_that_touch_in_a_point_have_a_loop_each():
    a, quads = block(2, 2)
    mesh = assemble([piece(a, quads), piece(a + 1.0, quads)]).mesh
    loops = domain_loops(mesh)
    assert [ring_area(mesh.points[ring]) for ring in loops] == pytest.approx([1, 1])
    assert mesh.bodies == ()


# ---------------------------------------------------------------- corners


def test_corners_of_plain_shapes():
    square = np.array([[0, 0], [1, 0], [1, 1], [0, 1.0]])
    assert corners(square).all()
    assert not corners(polygon_ring(8)).any()
    bend = np.array([[0, 0], [2, 0], [4, 1.5], [4, 4], [0, 4]])  # turns by 36.9 degrees at (2, 0)
    assert corners(bend).all()


# ---------------------------------------------------------------- patches of the file


def test_named_faces_by_edges_with_mid_nodes_and_by_vertices():
    points, quads = block(2, 2)
    middle = (points[0] + points[1]) / 2
    points = np.vstack([points, middle])
    quads[0] = [0, 9, *quads[0][1:]]
    patches = {
        "inlet": named([0, 3], [6, 3], kind="BCInflow"),
        "floor": named([0, 1, 9], [1, 2]),
        "outlet": named([2], [5], [8], by_vertex=True),
    }
    assembly = assemble([piece(points, quads, patches=patches)])
    mesh = assembly.mesh
    assert mesh.boundary.names == ("inlet", "floor", "outlet", "top")
    assert [len(mesh.patch_edges(n)) for n in mesh.boundary.names] == [2, 3, 2, 2]
    assert mesh.kinds == {"inlet": "BCInflow"}
    assert assembly.hints == ()


def test_faces_that_are_no_boundary_edges_are_ignored_with_a_hint():
    points, quads = block(2, 2)
    assembly = assemble([piece(points, quads, patches={"odd": named([1, 4], [0, 8])})])
    assert codes(assembly) == ["unknown-faces"]
    assert "2 faces" in assembly.hints[0].message
    assert "odd" not in assembly.mesh.boundary.names


def test_named_faces_come_before_line_cells():
    points, quads = block(1, 1)
    p = piece(
        points,
        [*quads, [0, 2], [1, 3]],
        [9, 3, 3],
        cell_data={"patch": np.array([0, 5, 6])},
        patches={"west": named([0, 2])},
    )
    assert assemble([p]).mesh.boundary.names == ("west", "patch-6", "bottom", "top")


@pytest.mark.parametrize(
    "name",
    ["patch", "PatchId", "boundary", "CellEntityIds", "gmsh:physical", "cell_tags", "medit:ref", "wallTag"],
)
def test_line_cells_are_named_by_the_array_that_marks_them(name):
    points, quads = block(2, 1)
    lines = [[0, 3], [2, 5], [0, 1]]
    data = {"GlobalCellId": np.arange(5), name: np.array([9, 9, 4, 5, 0])}
    mesh = assemble([piece(points, [*quads, *lines], [9, 9, 3, 3, 3], cell_data=data)]).mesh
    assert mesh.boundary.names == ("patch-4", "patch-5", "bottom", "top")


def test_tag_names_give_names_and_make_zero_a_patch():
    points, quads = block(2, 1)
    data = {"patch": np.zeros(4, int), "fam": np.array([0, 0, 0, -3])}
    p = piece(
        points,
        [*quads, [0, 3], [2, 5]],
        [9, 9, 3, 3],
        cell_data=data,
        tag_names={"fam": {0: "inlet", -3: "outlet"}},
    )
    assert assemble([p]).mesh.boundary.names == ("inlet", "outlet", "bottom", "top")


def test_polylines_and_quadratic_lines_mark_edges():
    points, quads = block(2, 2)
    p = piece(
        points,
        [*quads, [0, 3, 6], [2, 8, 5]],
        [9] * 4 + [4, 21],  # a polyline, and ends before the middle
        cell_data={"patch": np.array([0] * 4 + [1, 2])},
    )
    mesh = assemble([p]).mesh
    assert [len(mesh.patch_edges(n)) for n in ("patch-1", "patch-2")] == [2, 2]


def test_lines_in_a_block_of_their_own_are_found_by_place():
    points, quads = block(2, 2)
    wall = piece(points[[0, 1, 2]][::-1], [[0, 1], [1, 2]], [3, 3], name="fluid/walls/floor")
    mesh = assemble([piece(points, quads, name="fluid/inside"), wall]).mesh
    assert mesh.boundary.names == ("floor", "left", "right", "top")
    assert length(mesh, "floor") == pytest.approx(1)


def test_lines_inside_the_domain_are_ignored_with_a_hint():
    points, quads = block(2, 2)
    p = piece(
        points, [*quads, [1, 4], [0, 3]], [9] * 4 + [3, 3], cell_data={"patch": np.array([0] * 4 + [1, 2])}
    )
    assembly = assemble([p])
    assert codes(assembly) == ["inner-lines"]
    assert "1 line" in assembly.hints[0].message
    assert "patch-1" not in assembly.mesh.boundary.names


def test_unmarked_lines_on_the_boundary_change_nothing():
    points, quads = block(2, 2)
    assembly = assemble([piece(points, [*quads, [0, 3], [3, 6]], [9] * 4 + [3, 3])])
    assert assembly.mesh.boundary.names == ("left", "right", "bottom", "top")
    assert assembly.hints == ()


# ---------------------------------------------------------------- bodies and holes


def test_a_hole_of_one_patch_is_a_body_of_that_name():
    points, quads = with_hole(5, 5, missing=((1, 1), (3, 3)))
    ring = [(7, 8), (8, 14), (14, 13), (13, 7)]
    mesh = assemble([piece(points, quads, patches={"pier": named(*ring)})]).mesh
    assert mesh.bodies == ("pier", "body-1")
    found = dict(holes(mesh))
    assert sorted(found["pier"][0].tolist()) == [7, 8, 13, 14]
    assert ring_area(mesh.points[found["pier"][0]]) == pytest.approx(-0.04)


def test_holes_of_several_patches_are_no_bodies_but_are_listed():
    points, quads = with_hole(5, 5, missing=((1, 1), (3, 3)))
    patches = {"front": named((7, 8), (13, 7)), "back": named((8, 14), (14, 13))}
    mesh = assemble([piece(points, quads, patches=patches)]).mesh
    assert mesh.bodies == ("body-1",)
    assert [name for name, _ in holes(mesh)] == ["body-1", "hole-1"]


def test_a_patch_that_is_also_an_outer_wall_is_no_body():
    points, quads = with_hole(5, 5, missing=((1, 1),))
    walls = [(7, 8), (8, 14), (14, 13), (13, 7), (0, 1), (1, 2), (2, 3), (3, 4), (4, 5)]
    mesh = assemble([piece(points, quads, patches={"wall": named(*walls)})]).mesh
    assert mesh.bodies == ()
    assert [name for name, _ in holes(mesh)] == ["hole-1"]
    kinds = [closed for _, closed in patch_chains(mesh, "wall")]
    assert sorted(kinds) == [False, True]
    assert len(patch_rings(mesh, "wall")) == 1


# ---------------------------------------------------------------- chains


def test_open_chains_hold_both_ends_and_closed_ones_no_repeat():
    found = chains(np.array([[3, 4], [1, 2], [2, 3], [8, 9], [9, 8]]))
    assert sorted(c.tolist() for c in found) == [[1, 2, 3, 4], [8, 9]]
    assert chains(np.zeros((0, 2), np.int64)) == []


@given(st.integers(0, 2**32 - 1), st.integers(1, 40))
@settings(max_examples=50, deadline=None)
def test_chains_use_every_edge_once_and_no_point_twice(seed, n):
    """Any directed edges, balanced at their points or not, with points in general position."""
    rng = np.random.default_rng(seed)
    start = rng.integers(12, size=n)
    edges = np.unique(np.column_stack([start, (start + rng.integers(1, 12, size=n)) % 12]), axis=0)
    pairs = set(map(tuple, edges.tolist()))
    seen = []
    for nodes in chains(edges, rng.normal(size=(12, 2))):
        assert len(set(nodes.tolist())) == len(nodes)
        seen += list(zip(nodes[:-1].tolist(), nodes[1:].tolist()))
    assert len(seen) == len(set(seen))
    assert set(seen) <= pairs
    closing = len(pairs) - len(seen)  # one more edge in every closed chain
    assert 0 <= closing <= len(chains(edges, rng.normal(size=(12, 2)))) + len(pairs)


def test_loops_of_a_domain_with_holes():
    points, quads = with_hole(8, 8, missing=((2, 1), (2, 5), (5, 3)))
    mesh = assemble([piece(points, quads)]).mesh
    areas = sorted(ring_area(mesh.points[ring]) for ring in domain_loops(mesh))
    assert areas == pytest.approx([-1 / 64] * 3 + [1])
    assert sum(areas) == pytest.approx(mesh.areas.sum())


def test_clearance_is_the_distance_to_the_rest_of_the_boundary():
    points, quads = with_hole(10, 10, missing=((2, 1), (6, 3)))
    mesh = assemble([piece(points, quads)]).mesh
    assert clearance(mesh, "body-1") == pytest.approx(0.1)  # to the bottom
    assert clearance(mesh, "body-2") == pytest.approx(0.3)  # to the bottom and the right
    assert clearance(mesh, "left") == 0


# ---------------------------------------------------------------- soundness


def test_a_seam_that_stays_open_is_hinted():
    a, quads = block(5, 5)
    b, _ = block(5, 5, x0=1.001, x1=2.0)
    assembly = assemble([piece(a, quads), piece(b, quads)])
    assert codes(assembly) == ["open-seams"]
    assert "10 boundary edges" in assembly.hints[0].message


def test_a_narrow_gap_inside_a_mesh_is_hinted():
    """One point of an inner edge chain doubled and lifted by a thousandth."""
    points, quads = block(6, 2)
    points = np.vstack([points, points[10] + [0, 1e-3]])
    quads = [[21 if i == 10 and k >= 6 else i for i in q] for k, q in enumerate(quads)]
    assembly = assemble([piece(points, quads)])
    assert codes(assembly) == ["open-seams", "narrow-holes"]


def test_blocks_with_chords_of_different_length_along_an_arc_are_hinted():
    def bulge(points):
        x, y = points.T
        return np.column_stack([x + 0.01 * x * np.sin(np.pi * y), y])

    a, quads = block(4, 3)
    b, more = block(4, 9, x0=1.0, x1=2.0)
    assembly = assemble([piece(bulge(a), quads), piece(bulge(b), more)])
    assert "open-seams" in codes(assembly)


def test_blocks_that_overlap_in_part_are_refused():
    a, quads = block(4, 4)
    with pytest.raises(MeshError, match="parts of the mesh overlap"):
        assemble([piece(a, quads), piece(a + np.array([0.6, 0.13]), quads)])


def test_a_region_in_the_hole_of_another_is_fine():
    points, quads = with_hole(5, 5, missing=[(i, j) for i in (1, 2, 3) for j in (1, 2, 3)])
    island, more = block(1, 1, x0=0.4, x1=0.6, y0=0.4, y1=0.6)
    mesh = assemble([piece(points, quads), piece(island, more)]).mesh
    assert mesh.areas.sum() == pytest.approx(16 / 25 + 0.04)
    assert mesh.bodies == ("body-1",)


def test_a_mesh_that_falls_apart_is_refused_at_once():
    """Twenty thousand triangles round one point, none beside another."""
    n = 20_000
    a = 2 * np.pi * np.arange(2 * n) / (2 * n)
    points = np.vstack([np.column_stack([np.cos(a), np.sin(a)]), [[0, 0]]])
    cells = [[2 * i, 2 * i + 1, 2 * n] for i in range(n)]
    with pytest.raises(MeshError, match="falls apart into 20000 regions"):
        assemble([piece(points, cells)])


def test_many_bodies_are_named_without_delay():
    """A porous bed of 2,500 grains: takes well under a second; a quadratic search would take minutes."""
    points, quads = with_hole(
        101, 101, missing={(2 * i + 1, 2 * j + 1) for i in range(50) for j in range(50)}
    )
    mesh = assemble([piece(points, quads)]).mesh
    assert len(mesh.bodies) == 2500
    assert len(holes(mesh)) == 2500


def test_a_damaged_patch_list_is_refused():
    points, quads = block(2, 2)
    with pytest.raises(MeshError, match="patch 'wall' uses a point that does not exist"):
        assemble([piece(points, quads, patches={"wall": named([0, 99])})])


def test_a_patch_named_after_a_seam_does_not_keep_blocks_apart():
    pieces = [
        piece(*block(2, 2, x0=x, x1=x + 1), patches={"block_interface": named(*faces)})
        for x, faces in ((0.0, ([2, 5], [5, 8])), (1.0, ([0, 3], [3, 6])))
    ]
    mesh = assemble(pieces).mesh
    assert mesh.n_points == 15
    assert mesh.boundary.names == ("left", "right", "bottom", "top")
