"""CGNS kinds beyond the samples, in files built node by node; rules from the SIDS and its HDF5 mapping."""

from __future__ import annotations

import numpy as np
import pytest
from cgns_builder import Builder

from fvcheck.errors import FormatError
from fvcheck.formats import cgns

# Two quadrilaterals side by side: points 1 … 6, x fastest.
X = np.array([0.0, 1.0, 2.0, 0.0, 1.0, 2.0])
Y = np.array([0.0, 0.0, 0.0, 1.0, 1.0, 1.0])
QUADS = [1, 2, 5, 4, 2, 3, 6, 5]


def edges(patch):
    return sorted(tuple(sorted(map(int, pair))) for pair in patch.nodes.reshape(-1, 2))


def cells_of(piece):
    return [piece.nodes[a:b].tolist() for a, b in zip(piece.offsets, piece.offsets[1:])]


def two_quads(file, **axes):
    zone = file.zone(file.base(), 6, 2)
    file.coordinates(zone, **(axes or {"X": X, "Y": Y}))
    file.section(zone, "Quads", 7, 1, 2, QUADS)
    return zone


def only(path, step=0):
    (piece,) = cgns.open_export(path).load(step)
    return piece


@pytest.mark.parametrize("axes,columns", [("XY", (0, 1)), ("XZ", (0, 2)), ("YZ", (1, 2))])
def test_a_missing_coordinate_is_zero_and_the_others_keep_their_axes(axes, columns, tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        two_quads(file, **{axes[0]: X, axes[1]: Y})
    points = only(tmp_path / "a.cgns").points
    (rest,) = {0, 1, 2} - set(columns)
    assert np.array_equal(points[:, columns], np.column_stack([X, Y]))
    assert not points[:, rest].any()


def test_polar_coordinates_are_refused(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        two_quads(file, R=X, Theta=Y)
    with pytest.raises(FormatError, match="Cartesian"):
        only(tmp_path / "a.cgns")


def test_rind_planes_are_taken_off_and_indices_run_with_the_first_axis_fastest(tmp_path):
    ni, nj = 4, 3
    x, y = np.meshgrid(np.arange(float(ni)), np.arange(float(nj)))
    cells = np.arange(6.0).reshape(nj - 1, ni - 1)
    points = np.arange(12.0).reshape(nj, ni)
    with Builder(tmp_path / "a.cgns") as file:
        zone = file.zone(file.base(), [ni, nj], [ni - 1, nj - 1], structured=True)
        file.coordinates(zone, X=x, Y=y)
        # Rind: one plane before and two behind in i, none and one in j; marked by -1.
        file.solution(
            zone, "CellCenter", "C", [1, 2, 0, 1], P=np.pad(cells, [(0, 1), (1, 2)], constant_values=-1)
        )
        around = np.pad(points, [(1, 0), (0, 1)], constant_values=-1)
        file.solution(zone, "Vertex", "V", [0, 1, 1, 0], T=around)
    piece = only(tmp_path / "a.cgns")
    assert piece.cell_data["P"].tolist() == list(range(6))
    assert piece.point_data["T"].tolist() == list(range(12))
    assert np.array_equal(piece.points[:, 0], x.reshape(-1))
    assert cells_of(piece)[0] == [0, 1, 5, 4] and cells_of(piece)[3] == [4, 5, 9, 8]


@pytest.mark.parametrize(
    "location,ends,expected",
    [
        (None, [[1, 1], [4, 1]], [(0, 1), (1, 2), (2, 3)]),
        ("Vertex", [[4, 3], [4, 1]], [(3, 7), (7, 11)]),
        ("JFaceCenter", [[1, 3], [3, 3]], [(8, 9), (9, 10), (10, 11)]),
        ("EdgeCenter", [[1, 1], [1, 2]], [(0, 4), (4, 8)]),
        ("FaceCenter", [[4, 1], [4, 2]], [(3, 7), (7, 11)]),
        ("IFaceCenter", [[1, 1], [1, 1]], [(0, 4)]),
    ],
)
def test_a_point_range_of_a_structured_zone_names_its_edges(location, ends, expected, tmp_path):
    x, y = np.meshgrid(np.arange(4.0), np.arange(3.0))
    with Builder(tmp_path / "a.cgns") as file:
        zone = file.zone(file.base(), [4, 3], [3, 2], structured=True)
        file.coordinates(zone, X=x, Y=y)
        file.condition(zone, "side", "BCWall", "PointRange", ends, location)
    patch = only(tmp_path / "a.cgns").patches["side"]
    assert edges(patch) == expected and patch.kind == "BCWall" and not patch.by_vertex


def test_a_list_of_faces_of_a_structured_block_one_cell_thick_names_its_polygons(tmp_path):
    z, y, x = np.meshgrid([0.0, 0.1], np.arange(3.0), np.arange(4.0), indexing="ij")
    with Builder(tmp_path / "a.cgns") as file:
        zone = file.zone(file.base(3, 3), [4, 3, 2], [3, 2, 1], structured=True)
        file.coordinates(zone, X=x, Y=y, Z=z)
        file.condition(zone, "low", "BCWall", "PointList", [[1, 1, 1], [2, 1, 1], [3, 1, 1]], "JFaceCenter")
        file.condition(zone, "back", "BCSymmetryPlane", "PointRange", [[1, 1, 1], [4, 3, 1]])
    piece = only(tmp_path / "a.cgns")
    assert set(piece.types) == {12} and len(piece.types) == 6
    loops = piece.patches["low"].nodes.reshape(-1, 4)
    assert np.abs(piece.points[loops][..., 1]).max() == 0 and len(loops) == 3
    assert len(piece.patches["back"].offsets) == 7


@pytest.mark.parametrize(
    "index,values,location",
    [
        ("PointRange", [[3], [4]], "EdgeCenter"),
        ("PointRange", [[3], [4]], "FaceCenter"),
        ("PointList", [[4], [3]], "EdgeCenter"),
        ("ElementRange", [3, 4], None),
        ("ElementList", [[3], [4]], None),
    ],
)
def test_conditions_by_element_numbers_name_edges(index, values, location, tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = two_quads(file)
        file.section(zone, "Bars", 3, 3, 4, [1, 2, 2, 3])
        file.condition(zone, "low", "BCWallViscous", index, values, location)
    piece = only(tmp_path / "a.cgns")
    assert edges(piece.patches["low"]) == [(0, 1), (1, 2)]
    assert len(piece.types) == 2  # the bars are the patch, not cells


def test_conditions_by_vertices_are_marked_so(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = two_quads(file)
        file.condition(zone, "low", "BCWall", "PointList", [[1], [2], [3]])
    patch = only(tmp_path / "a.cgns").patches["low"]
    assert patch.by_vertex and patch.nodes.tolist() == [0, 1, 2] and patch.offsets.tolist() == [0, 1, 2, 3]


def test_a_family_that_gathers_conditions_names_the_patch_and_its_type(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = two_quads(file)
        family = file.add(zone.parent, "Walls", "Family_t")
        file.add(family, "FamilyBC", "FamilyBC_t", "BCWallInviscid")
        file.section(zone, "Bars", 3, 3, 5, [1, 2, 2, 3, 4, 5])
        file.condition(zone, "one", "FamilySpecified", "PointList", [[3], [4]], "EdgeCenter", "Walls")
        file.condition(zone, "two", "FamilySpecified", "PointList", [[5]], "EdgeCenter", "Walls")
    patches = only(tmp_path / "a.cgns").patches
    assert list(patches) == ["Walls"] and patches["Walls"].kind == "BCWallInviscid"
    assert edges(patches["Walls"]) == [(0, 1), (1, 2), (3, 4)]


def test_bars_without_a_condition_stay_as_line_cells_named_by_their_section(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = file.zone(file.base(), 6, 2)
        file.coordinates(zone, X=X, Y=Y)
        file.section(zone, "Floor", 3, 1, 2, [1, 2, 2, 3])
        file.section(zone, "Quads", 7, 3, 4, QUADS)
        file.solution(zone, "CellCenter", P=[5.0, 6.0], N=np.array([7, 8], "i4"))
    piece = only(tmp_path / "a.cgns")
    assert piece.types.tolist() == [9, 9, 3, 3]
    assert piece.cell_data["P"][:2].tolist() == [5.0, 6.0] and np.isnan(piece.cell_data["P"][2:]).all()
    names = [piece.tag_names["Section"].get(int(tag), "") for tag in piece.cell_data["Section"]]
    assert names == ["", "", "Floor", "Floor"]


@pytest.mark.parametrize("offsets", [[0, 3, 8, 13], None])
def test_bars_inside_a_mixed_section_take_no_cell_value(offsets, tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = file.zone(file.base(), 6, 2)
        file.coordinates(zone, X=X, Y=Y)
        file.section(zone, "All", 20, 1, 3, [3, 1, 2, 7, *QUADS[:4], 7, *QUADS[4:]], offsets)
        file.solution(zone, "CellCenter", P=[5.0, 6.0])
    piece = only(tmp_path / "a.cgns")
    assert piece.types.tolist() == [9, 9, 3] and piece.cell_data["P"][:2].tolist() == [5.0, 6.0]
    assert cells_of(piece) == [[0, 1, 4, 3], [1, 2, 5, 4], [0, 1]]


def test_cells_of_several_sections_follow_their_element_numbers_not_the_order_in_the_file(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = file.zone(file.base(), 6, 3)
        file.coordinates(zone, X=X, Y=Y)
        file.section(zone, "Polygons", 22, 3, 3, [2, 3, 6, 5], [0, 4])
        file.section(zone, "Triangles", 5, 1, 2, [1, 2, 5, 1, 5, 4])
        file.solution(zone, "CellCenter", P=[1.0, 2.0, 3.0])
    piece = only(tmp_path / "a.cgns")
    assert piece.types.tolist() == [5, 5, 7] and piece.cell_data["P"].tolist() == [1.0, 2.0, 3.0]
    assert cells_of(piece)[2] == [1, 2, 5, 4]


def test_polygons_of_the_older_layout_carry_their_own_counts(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = file.zone(file.base(), 6, 2)
        file.coordinates(zone, X=X, Y=Y)
        file.section(zone, "Polygons", 22, 1, 2, [4, *QUADS[:4], 4, *QUADS[4:]])
    assert cells_of(only(tmp_path / "a.cgns")) == [[0, 1, 4, 3], [1, 2, 5, 4]]


# Two cubes side by side: the faces by points 1 … 12 (the second layer from 7), and the cells they bound.
FACES = [
    ([1, 2, 5, 4], 1, 0), ([7, 8, 11, 10], 1, 0), ([1, 2, 8, 7], 1, 0), ([4, 5, 11, 10], 1, 0),
    ([1, 4, 10, 7], 1, 0), ([2, 5, 11, 8], 1, 2), ([2, 3, 6, 5], 2, 0), ([8, 9, 12, 11], 2, 0),
    ([2, 3, 9, 8], 2, 0), ([5, 6, 12, 11], 2, 0), ([3, 6, 12, 9], 2, 0),
]  # fmt: skip
HELD = [[1, 2, 3, 4, 5, 6], [-6, 7, 8, 9, 10, 11]]


@pytest.mark.parametrize("layout", ["offsets", "counts", "parents"])
def test_polyhedra_come_from_their_faces_in_each_layout(layout, tmp_path):
    count = layout == "counts"
    flat = [n for nodes, _, _ in FACES for n in ([len(nodes)] if count else []) + nodes]
    cells = [n for held in HELD for n in ([len(held)] if count else []) + held]
    with Builder(tmp_path / "a.cgns") as file:
        zone = file.zone(file.base(3, 3), 12, 2)
        file.coordinates(zone, X=[*X, *X], Y=[*Y, *Y], Z=[0.0] * 6 + [0.1] * 6)
        starts = None if count else list(range(0, 45, 4))
        parents = None
        if layout == "parents":
            parents = [[p + 11 if p else 0 for _, p, _ in FACES], [q + 11 if q else 0 for _, _, q in FACES]]
        file.section(zone, "Faces", 22, 1, 11, flat, starts, parents)
        if layout != "parents":
            file.section(zone, "Cells", 23, 12, 13, cells, None if count else [0, 6, 12])
        file.condition(zone, "inlet", "BCInflow", "PointList", [[5]], "FaceCenter")
        file.solution(zone, "CellCenter", P=[1.0, 2.0])
    piece = only(tmp_path / "a.cgns")
    assert piece.types.tolist() == [42, 42]
    assert cells_of(piece)[0] == [0, 1, 3, 4, 6, 7, 9, 10]
    faces = piece.faces
    for cell, held in enumerate(HELD):
        mine = faces.cell_faces[faces.cell_offsets[cell] : faces.cell_offsets[cell + 1]]
        assert sorted(mine.tolist()) == [abs(n) - 1 for n in sorted(held, key=abs)]
    assert piece.patches["inlet"].nodes.tolist() == [0, 3, 9, 6]


# Edges and faces of the SIDS' elements by corner numbers, in the order of their mid-nodes.
HEXA = (
    [(1, 2), (2, 3), (3, 4), (4, 1), (1, 5), (2, 6), (3, 7), (4, 8), (5, 6), (6, 7), (7, 8), (8, 5)],
    [(1, 2, 3, 4), (1, 2, 6, 5), (2, 3, 7, 6), (3, 4, 8, 7), (1, 5, 8, 4), (5, 6, 7, 8), tuple(range(1, 9))],
)
PENTA = (
    [(1, 2), (2, 3), (3, 1), (1, 4), (2, 5), (3, 6), (4, 5), (5, 6), (6, 4)],
    [(1, 2, 5, 4), (2, 3, 6, 5), (3, 1, 4, 6)],
)
TETRA = ([(1, 2), (2, 3), (3, 1), (1, 4), (2, 4), (3, 4)], [])


@pytest.mark.parametrize(
    "code,cell,corners,mids,size",
    [
        (18, "vtkQuadraticHexahedron", 8, HEXA, 20),
        (19, "vtkTriQuadraticHexahedron", 8, HEXA, 27),
        (15, "vtkQuadraticWedge", 6, PENTA, 15),
        (16, "vtkBiQuadraticQuadraticWedge", 6, PENTA, 18),
        (11, "vtkQuadraticTetra", 4, TETRA, 10),
    ],
)
def test_quadratic_solids_get_the_node_order_of_vtk(code, cell, corners, mids, size, tmp_path):
    from vtkmodules import vtkCommonDataModel

    # Where VTK puts its nodes; its corners serve as the corners of the CGNS element.
    stated = getattr(vtkCommonDataModel, cell)()
    wanted = np.array(list(stated.GetParametricCoords())).reshape(-1, 3)
    ends = wanted[:corners]
    nodes = [*ends, *(np.mean([ends[n - 1] for n in group], axis=0) for group in (*mids[0], *mids[1]))][:size]
    points = np.array(nodes)
    with Builder(tmp_path / "a.cgns") as file:
        zone = file.zone(file.base(3, 3), size, 1)
        file.coordinates(zone, X=points[:, 0], Y=points[:, 1], Z=points[:, 2])
        file.section(zone, "Solids", code, 1, 1, list(range(1, size + 1)))
    piece = only(tmp_path / "a.cgns")
    np.testing.assert_allclose(piece.points[piece.nodes], wanted, atol=1e-15)


def test_several_zones_and_bases_come_as_pieces_with_their_names(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        for name in ("One", "Two"):
            base = file.base(name=name)
            for number in range(2):
                zone = file.zone(base, 6, 2, f"Z{number}")
                file.coordinates(zone, X=X + 2 * number, Y=Y)
                file.section(zone, "Quads", 7, 1, 2, QUADS)
    names = [piece.name for piece in cgns.open_export(tmp_path / "a.cgns").load(0)]
    assert names == ["One/Z0", "One/Z1", "Two/Z0", "Two/Z1"]


def test_moving_grids_and_solutions_follow_the_pointers_of_the_zone(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = two_quads(file)
        series = file.add(zone.parent, "Times", "BaseIterativeData_t", np.array([2], "i4"))
        file.add(series, "TimeValues", "DataArray_t", np.array([0.25, 0.5]))
        file.coordinates(zone, name="Moved", X=X + 10, Y=Y)
        file.solution(zone, "CellCenter", "B", P=[3.0, 4.0])
        file.solution(zone, "CellCenter", "A", P=[1.0, 2.0])
        steps = file.add(zone, "Steps", "ZoneIterativeData_t")
        file.add(steps, "GridCoordinatesPointers", "DataArray_t", ["GridCoordinates", "Moved"])
        file.add(steps, "FlowSolutionPointers", "DataArray_t", ["A", "B"])
    export = cgns.open_export(tmp_path / "a.cgns")
    assert export.times == (0.25, 0.5)
    first, second = (export.load(step)[0] for step in (0, 1))
    assert first.cell_data["P"].tolist() == [1.0, 2.0] and second.cell_data["P"].tolist() == [3.0, 4.0]
    assert np.array_equal(second.points[:, 0] - first.points[:, 0], np.full(6, 10.0))


def test_a_series_that_does_not_say_which_solution_is_which_is_refused(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = two_quads(file)
        series = file.add(zone.parent, "Times", "BaseIterativeData_t", np.array([2], "i4"))
        file.add(series, "TimeValues", "DataArray_t", np.array([0.0, 1.0]))
        file.solution(zone, "CellCenter", "A", P=[1.0, 2.0])
        file.solution(zone, "CellCenter", "B", P=[3.0, 4.0])
    with pytest.raises(FormatError, match="which solution"):
        only(tmp_path / "a.cgns")


def test_arrays_of_one_name_in_two_solutions_are_told_apart(tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = two_quads(file)
        file.solution(zone, "CellCenter", "Now", P=[1.0, 2.0], Q=[0.0, 0.0])
        file.solution(zone, "CellCenter", "Mean", P=[3.0, 4.0])
    assert set(only(tmp_path / "a.cgns").cell_data) == {"Now/P", "Mean/P", "Q"}


@pytest.mark.parametrize(
    "damage,text",
    [
        (lambda zone: zone["Quads/ElementRange/ data"].__setitem__(slice(None), [1, 3]), "of 4 nodes"),
        (lambda zone: zone["Quads/ElementRange/ data"].__setitem__(slice(None), [2, 1]), "declared"),
        (lambda zone: zone[" data"].__setitem__((1, 0), 3), "3 cells"),
        (lambda zone: zone["ZoneBC/low/PointList/ data"].__setitem__((0, 0), 99), "refers to"),
        (lambda zone: zone["Quads"].attrs.__delitem__("label"), "no label"),
        (lambda zone: zone["GridCoordinates/CoordinateX/ data"].__setitem__(0, np.nan), "no finite number"),
    ],
)
def test_counts_that_contradict_each_other_are_refused(damage, text, tmp_path):
    with Builder(tmp_path / "a.cgns") as file:
        zone = two_quads(file)
        file.condition(zone, "low", "BCWall", "PointList", [[1], [2], [3]])
        damage(zone)
    with pytest.raises(FormatError, match=text):
        only(tmp_path / "a.cgns")


def test_a_link_into_another_file_is_refused(tmp_path):
    import h5py

    with Builder(tmp_path / "a.cgns") as file:
        zone = two_quads(file)
        node = file.add(zone, "FlowSolution", "FlowSolution_t")
        node.attrs["type"] = np.bytes_("LK")
        node[" file"], node[" path"] = np.frombuffer(b"b.cgns", "i1"), np.frombuffer(b"/Base", "i1")
        node[" link"] = h5py.ExternalLink("b.cgns", "/Base")
    with pytest.raises(FormatError, match="another file"):
        only(tmp_path / "a.cgns")
