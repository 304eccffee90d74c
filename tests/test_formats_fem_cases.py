"""MSH, Exodus II, MED and meshio cases that the sample files do not hold, built here with other writers.

Exodus files are written by netCDF4, meshes by meshio or by hand after the
published formats; node orders are checked by geometry: the mid-node of an edge
lies half-way between the ends that VTK's order gives it.
"""

from __future__ import annotations

import struct
from pathlib import Path

import meshio
import numpy as np
import pytest

from fvcheck.errors import FormatError
from fvcheck.formats import exodus, med, msh
from fvcheck.formats.objects import piece_from_meshio

SAMPLES = Path(__file__).parent / "samples"

SQUARES = """$MeshFormat
2.2 0 8
$EndMeshFormat
$PhysicalNames
2
1 7 "left side"
2 7 "fluid"
$EndPhysicalNames
$Nodes
7
10 0 0 0
20 1 0 0
30 2 0 0
11 0 1 0
21 1 1 0
31 2 1 0
99 5 5 0
$EndNodes
$Elements
3
5 1 2 7 1 11 10
8 3 2 7 1 10 20 21 11
2 3 2 7 1 20 30 31 21
$EndElements
"""


def view(kind, name, step, time, rows, extra=""):
    values = "\n".join(f"{number} {value}" for number, value in rows)
    tags = f"1\n{time}\n{4 if extra else 3}\n{step}\n1\n{len(rows)}\n{extra}"
    return f'${kind}\n1\n"{name}"\n{tags}{values}\n$End{kind}\n'


def written(tmp_path, text, name="case.msh"):
    path = tmp_path / name
    path.write_bytes(text.encode())
    return path


def load(path, step=0, reader=msh):
    (piece,) = reader.open_export(path).load(step)
    return piece


POINTS = (10, 20, 30, 11, 21, 31)


def test_values_of_an_msh_file_go_to_their_ids_and_only_unused_points_may_lack_them(tmp_path):
    rows = [(number, number / 2) for number in reversed(POINTS)]
    piece = load(written(tmp_path, SQUARES + view("NodeData", "p", 0, 0.0, rows)))
    np.testing.assert_array_equal(piece.point_data["p"][:6], [5, 10, 15, 5.5, 10.5, 15.5])
    assert np.isnan(piece.point_data["p"][6])
    with pytest.raises(FormatError, match="misses 1 of 6 points"):
        load(written(tmp_path, SQUARES + view("NodeData", "p", 0, 0.0, rows[1:])))
    with pytest.raises(FormatError, match="node 12, which"):
        load(written(tmp_path, SQUARES + view("NodeData", "p", 0, 0.0, [*rows[1:], (12, 1.0)])))
    with pytest.raises(FormatError, match="twice"):
        load(written(tmp_path, SQUARES + view("NodeData", "p", 0, 0.0, [*rows, rows[0]])))


def test_element_data_of_an_msh_file_may_miss_on_lines_but_not_on_cells(tmp_path):
    piece = load(written(tmp_path, SQUARES + view("ElementData", "T", 0, 0.0, [(2, 3.0), (8, 4.0)])))
    quads = piece.types == 9
    # Element 8 stands first in the file.
    np.testing.assert_array_equal(piece.cell_data["T"][quads], [4.0, 3.0])
    assert np.isnan(piece.cell_data["T"][~quads]).all()
    with pytest.raises(FormatError, match="misses 1 of 2 cells"):
        load(written(tmp_path, SQUARES + view("ElementData", "T", 0, 0.0, [(2, 3.0), (5, 4.0)])))


def test_a_number_shared_by_a_line_group_and_a_surface_group_names_the_lines_only(tmp_path):
    piece = load(written(tmp_path, SQUARES))
    assert piece.tag_names == {"gmsh:physical": {7: "left side"}}


def test_steps_of_msh_data_become_steps_with_their_times(tmp_path):
    text = SQUARES
    for step, time in ((1, 0.5), (0, 0.25), (2, 0.75)):
        text += view("NodeData", "p", step, time, [(number, time) for number in POINTS])
    text += view("NodeData", "rho", 0, 0.25, [(number, 3.0) for number in POINTS])
    export = msh.open_export(written(tmp_path, text))
    assert export.times == (0.25, 0.5, 0.75)
    assert [hint.code for hint in export.hints] == ["one-step-array"]
    for step, time in enumerate(export.times):
        (piece,) = export.load(step)
        assert set(piece.point_data["p"][:6]) == {time}
        assert set(piece.point_data["rho"][:6]) == {3.0}


def test_an_msh_array_that_lacks_one_of_the_steps_is_an_error_that_names_it(tmp_path):
    text = SQUARES
    for step in range(3):
        text += view("NodeData", "p", step, float(step), [(number, 1.0) for number in POINTS])
    for step in range(2):
        text += view("NodeData", "U", step, float(step), [(number, 1.0) for number in POINTS])
    with pytest.raises(FormatError, match="'node data U' is missing at step 2"):
        msh.open_export(written(tmp_path, text))


def test_parts_of_msh_data_that_partitions_wrote_are_put_together(tmp_path):
    first, second = [(n, 1.0) for n in POINTS[:4]], [(n, 1.0) for n in POINTS[3:]]
    text = (
        SQUARES + view("NodeData", "p", 0, 0.0, first, "1\n") + view("NodeData", "p", 0, 0.0, second, "2\n")
    )
    assert set(load(written(tmp_path, text)).point_data["p"][:6]) == {1.0}
    second[0] = (second[0][0], 2.0)
    text = (
        SQUARES + view("NodeData", "p", 0, 0.0, first, "1\n") + view("NodeData", "p", 0, 0.0, second, "2\n")
    )
    with pytest.raises(FormatError, match="different values"):
        load(written(tmp_path, text))


def test_values_at_corners_of_elements_are_left_out_with_a_hint(tmp_path):
    text = SQUARES + view("NodeData", "p", 0, 0.0, [(number, 2.0) for number in POINTS])
    text += view("ElementNodeData", "stress", 0, 0.0, [(8, "4 1 2 3 4")])
    export = msh.open_export(written(tmp_path, text))
    assert [hint.code for hint in export.hints] == ["array-not-read"]
    (piece,) = export.load(0)
    assert list(piece.point_data) == ["p"]


def test_windows_line_ends_change_nothing(tmp_path):
    text = SQUARES + view("NodeData", "p", 0, 0.0, [(number, 2.0) for number in POINTS])
    unix, windows = load(written(tmp_path, text)), load(written(tmp_path, text.replace("\n", "\r\n")))
    np.testing.assert_array_equal(unix.nodes, windows.nodes)
    np.testing.assert_array_equal(unix.point_data["p"], windows.point_data["p"])
    assert windows.tag_names == unix.tag_names


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("20 1 0 0", "20 1.5-103 0"),  # a Fortran exponent, two numbers to a careless parser
        ("20 1 0 0", "20 1D+5 0 0"),
        ("20 1 0 0", "20 nan 0 0"),
        ("20 1 0 0", "20 inf 0 0"),
        ("20 1 0 0", "10 1 0 0"),  # a number twice
        ("20 1 0 0", "20.5 1 0 0"),
        ("8 3 2 7", "2 3 2 7"),
        ("8 3 2 7", "8 93 2 7"),  # no such element type
        ("8 3 2 7", "8 2 2 7"),  # a triangle with four nodes
        ("8 3 2 7", "8 3 -2 7"),
        ("2.2 0 8", "2.2 1 8"),  # said to be binary
        ('"fluid"\n', ""),
    ],
)
def test_each_kind_of_nonsense_in_an_msh_file_is_refused(tmp_path, old, new):
    assert SQUARES.count(old) == 1
    with pytest.raises(FormatError):
        load(written(tmp_path, SQUARES.replace(old, new)))


def test_version_40_and_big_endian_41_give_the_same_mesh_as_22(tmp_path):
    reference = load(written(tmp_path, SQUARES))
    numbers = (*POINTS, 99)
    xyz = dict(zip(numbers, reference.points.tolist()))
    head = SQUARES[SQUARES.index("$PhysicalNames") : SQUARES.index("$Nodes")]
    box = "0 0 0 1 1 0"
    old = f"$MeshFormat\n4.0 0 8\n$EndMeshFormat\n{head}$Entities\n0 1 1 0\n1 {box} 1 7 0\n1 {box} 1 7 1 1\n"
    old += "$EndEntities\n$Nodes\n1 7\n1 2 0 7\n"
    old += "".join(f"{n} {xyz[n][0]} {xyz[n][1]} 0\n" for n in numbers)
    old += (
        "$EndNodes\n$Elements\n2 3\n1 1 1 1\n5 11 10\n1 2 3 2\n8 10 20 21 11\n2 20 30 31 21\n$EndElements\n"
    )

    big = b"$MeshFormat\n4.1 1 8\n" + struct.pack(">i", 1) + b"\n$EndMeshFormat\n" + head.encode()
    big += b"$Entities\n" + struct.pack(">4Q", 0, 1, 1, 0)
    big += struct.pack(">i6dQiQ", 1, *range(6), 1, 7, 0) + struct.pack(">i6dQiQi", 1, *range(6), 1, 7, 1, 1)
    big += b"\n$EndEntities\n$Nodes\n" + struct.pack(">4Q3iQ", 1, 7, 10, 99, 2, 1, 0, 7)
    big += struct.pack(">7Q", *numbers) + struct.pack(">21d", *(c for n in numbers for c in xyz[n]))
    big += b"\n$EndNodes\n$Elements\n" + struct.pack(">4Q", 2, 3, 2, 8)
    big += struct.pack(">3iQ3Q", 1, 1, 1, 1, 5, 11, 10)
    big += struct.pack(">3iQ10Q", 2, 1, 3, 2, 8, 10, 20, 21, 11, 2, 20, 30, 31, 21) + b"\n$EndElements\n"
    binary = tmp_path / "big.msh"
    binary.write_bytes(big)
    for path in (written(tmp_path, old, "old.msh"), binary):
        piece = load(path)
        assert piece.tag_names == reference.tag_names
        for name in ("points", "types", "offsets", "nodes"):
            np.testing.assert_array_equal(getattr(piece, name), getattr(reference, name))
        np.testing.assert_array_equal(piece.cell_data["gmsh:physical"], [7, 7, 7])


HEX = np.array(
    [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1]], float
)
# Ends of the edges whose mid-nodes follow the corners, in VTK's order ("VTK File Formats").
HEX_EDGES = [(0, 1), (1, 2), (2, 3), (3, 0), (4, 5), (5, 6), (6, 7), (7, 4), (0, 4), (1, 5), (2, 6), (3, 7)]
WEDGE_EDGES = [(0, 1), (1, 2), (2, 0), (3, 4), (4, 5), (5, 3), (0, 3), (1, 4), (2, 5)]
# The same in Gmsh's order (reference manual, "Node ordering") and in that of Exodus.
GMSH_HEX = [(0, 1), (0, 3), (0, 4), (1, 2), (1, 5), (2, 3), (2, 6), (3, 7), (4, 5), (4, 7), (5, 6), (6, 7)]
GMSH_WEDGE = [(0, 1), (0, 2), (0, 3), (1, 2), (1, 4), (2, 5), (3, 4), (3, 5), (4, 5)]
EXO_HEX = [*HEX_EDGES[:4], *HEX_EDGES[8:], *HEX_EDGES[4:8]]
EXO_WEDGE = [*WEDGE_EDGES[:3], *WEDGE_EDGES[6:], *WEDGE_EDGES[3:6]]


def quadratic(corners, edges):
    return np.vstack([corners, [(corners[a] + corners[b]) / 2 for a, b in edges]])


@pytest.mark.parametrize(
    ("kind", "corners", "edges", "expected"),
    [(17, HEX, GMSH_HEX, HEX_EDGES), (18, HEX[[0, 1, 3, 4, 5, 7]], GMSH_WEDGE, WEDGE_EDGES)],
)
def test_quadratic_solids_of_msh_files_come_in_the_order_of_vtk(tmp_path, kind, corners, edges, expected):
    points = quadratic(corners, edges)
    text = f"$MeshFormat\n2.2 0 8\n$EndMeshFormat\n$Nodes\n{len(points)}\n"
    text += "".join(f"{i + 1} {x} {y} {z}\n" for i, (x, y, z) in enumerate(points))
    text += (
        f"$EndNodes\n$Elements\n1\n1 {kind} 0 {' '.join(map(str, range(1, len(points) + 1)))}\n$EndElements\n"
    )
    piece = load(written(tmp_path, text))
    np.testing.assert_array_equal(piece.points[piece.nodes], quadratic(corners, expected))


def exodus_file(
    path,
    points,
    blocks,
    *,
    dims=3,
    sides=None,
    nodes=None,
    values=None,
    times=(0.0,),
    model="NETCDF3_CLASSIC",
):
    """An Exodus II file by netCDF4.

    blocks: (type, table, name); values: name -> one array or None per block.
    """
    import netCDF4

    with netCDF4.Dataset(path, "w", format=model) as out:
        number = "f8" if path.name != "single.exo" else "f4"

        def text(name, dim, words):
            variable = out.createVariable(name, "S1", (dim, "len_name"))
            variable[:] = np.array([list(word.ljust(33, "\0")) for word in words], dtype="S1")

        for name, size in (
            ("len_name", 33),
            ("num_dim", dims),
            ("num_nodes", len(points)),
            ("time_step", None),
        ):
            out.createDimension(name, size)
        out.createDimension("num_elem", sum(len(table) for _, table, _ in blocks))
        out.createDimension("num_el_blk", len(blocks))
        for axis in range(dims):
            out.createVariable(f"coord{'xyz'[axis]}", number, ("num_nodes",))[:] = np.asarray(points)[:, axis]
        text("eb_names", "num_el_blk", [name for _, _, name in blocks])
        for i, (kind, table, _) in enumerate(blocks, 1):
            out.createDimension(f"num_el_in_blk{i}", len(table))
            out.createDimension(f"num_nod_per_el{i}", len(table[0]))
            variable = out.createVariable(f"connect{i}", "i4", (f"num_el_in_blk{i}", f"num_nod_per_el{i}"))
            variable.elem_type = kind
            variable[:] = table
        if sides:
            out.createDimension("num_side_sets", len(sides))
            text("ss_names", "num_side_sets", list(sides))
            for i, pairs in enumerate(sides.values(), 1):
                out.createDimension(f"num_side_ss{i}", len(pairs))
                for column, name in enumerate(("elem", "side")):
                    values_of = [pair[column] for pair in pairs]
                    out.createVariable(f"{name}_ss{i}", "i4", (f"num_side_ss{i}",))[:] = values_of
        if nodes:
            out.createDimension("num_node_sets", len(nodes))
            text("ns_names", "num_node_sets", list(nodes))
            for i, members in enumerate(nodes.values(), 1):
                out.createDimension(f"num_nod_ns{i}", len(members))
                out.createVariable(f"node_ns{i}", "i4", (f"num_nod_ns{i}",))[:] = members
        clock = out.createVariable("time_whole", number, ("time_step",))
        for step, time in enumerate(times):
            clock[step] = time
        if values:
            out.createDimension("num_elem_var", len(values))
            text("name_elem_var", "num_elem_var", list(values))
            table = [[part is not None for part in parts] for parts in values.values()]
            variable = out.createVariable("elem_var_tab", "i4", ("num_el_blk", "num_elem_var"))
            variable[:] = np.array(table).T.astype(int)
            for i, parts in enumerate(values.values(), 1):
                for j, part in enumerate(parts, 1):
                    if part is not None:
                        name = f"vals_elem_var{i}eb{j}"
                        one = out.createVariable(name, number, ("time_step", f"num_el_in_blk{j}"))
                        for step in range(len(times)):
                            one[step] = np.asarray(part) + step
    return path


SQUARE = [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [2, 0, 0]]


@pytest.mark.parametrize(
    "model", ["NETCDF3_CLASSIC", "NETCDF3_64BIT_OFFSET", "NETCDF3_64BIT_DATA", "NETCDF4"]
)
def test_every_flavour_of_netcdf_gives_the_same_exodus_mesh_and_steps(tmp_path, model):
    path = exodus_file(
        tmp_path / "case.exo",
        SQUARE,
        [("QUAD4", [[1, 2, 3, 4]], "fluid"), ("TRI3", [[2, 5, 3]], "corner"), ("BAR2", [[4, 1]], "inlet")],
        dims=2,
        nodes={"floor": [1, 2, 5]},
        values={"p": [[1.0], [2.0], None]},
        times=(0.5, 1.5, 2.5),
        model=model,
    )
    export = exodus.open_export(path)
    assert export.times == (0.5, 1.5, 2.5)
    for step in range(3):
        (piece,) = export.load(step)
        np.testing.assert_array_equal(piece.types, [9, 5, 3])
        np.testing.assert_array_equal(piece.nodes, [0, 1, 2, 3, 1, 4, 2, 3, 0])
        np.testing.assert_array_equal(piece.points, SQUARE)
        np.testing.assert_array_equal(piece.cell_data["p"], [1.0 + step, 2.0 + step, np.nan])
        assert piece.patches["floor"].by_vertex
        np.testing.assert_array_equal(piece.patches["floor"].nodes, [0, 1, 4])
        assert piece.tag_names == {"exodus:block": {3: "inlet"}}
        np.testing.assert_array_equal(piece.cell_data["exodus:block"], [1, 2, 3])


def test_single_precision_stays_single_precision(tmp_path):
    path = exodus_file(
        tmp_path / "single.exo", SQUARE, [("QUAD", [[1, 2, 3, 4]], "a")], values={"p": [[0.1]]}
    )
    piece = load(path, reader=exodus)
    assert piece.points.dtype == np.float32 and piece.cell_data["p"].dtype == np.float32


def test_a_variable_missing_on_a_block_of_cells_is_an_error_naming_both(tmp_path):
    blocks = [("QUAD4", [[1, 2, 3, 4]], "fluid"), ("TRI3", [[2, 5, 3]], "solid")]
    path = exodus_file(tmp_path / "case.exo", SQUARE, blocks, values={"p": [[1.0], None]})
    with pytest.raises(FormatError, match="'p' is missing on block 'solid'"):
        load(path, reader=exodus)


def test_values_that_netcdf_says_were_never_written_are_no_numbers(tmp_path):
    never = 9.969209968386869e36  # NC_FILL_DOUBLE
    path = exodus_file(
        tmp_path / "case.exo", SQUARE, [("QUAD4", [[1, 2, 3, 4]], "a")], values={"p": [[never]]}
    )
    assert np.isnan(load(path, reader=exodus).cell_data["p"]).all()


def test_sides_of_hexahedra_and_wedges_are_those_of_the_exodus_manual(tmp_path):
    # By geometry: sides 1 to 6 of a brick face -y, +x, +y, -x, -z, +z; those of a wedge on the same
    # corners 0, 1, 3: -y, the slanted one, -x, -z, +z.
    for corners, kind, edges, expected, centres in (
        (
            HEX,
            "HEX20",
            EXO_HEX,
            HEX_EDGES,
            [(0.5, 0, 0.5), (1, 0.5, 0.5), (0.5, 1, 0.5), (0, 0.5, 0.5), (0.5, 0.5, 0), (0.5, 0.5, 1)],
        ),
        (
            HEX[[0, 1, 3, 4, 5, 7]],
            "WEDGE15",
            EXO_WEDGE,
            WEDGE_EDGES,
            [(0.5, 0, 0.5), (0.5, 0.5, 0.5), (0, 0.5, 0.5), (1 / 3, 1 / 3, 0), (1 / 3, 1 / 3, 1)],
        ),
    ):
        points = quadratic(corners, edges)
        sides = {f"side {i}": [(1, i)] for i in range(1, len(centres) + 1)}
        table = [list(range(1, len(points) + 1))]
        piece = load(
            exodus_file(tmp_path / "solid.exo", points, [(kind, table, "a")], sides=sides), reader=exodus
        )
        np.testing.assert_array_equal(piece.points[piece.nodes], quadratic(corners, expected))
        for centre, patch in zip(centres, piece.patches.values()):
            # Tolerance: the rounding of a mean of four numbers of order one.
            np.testing.assert_allclose(piece.points[patch.nodes].mean(axis=0), centre, atol=1e-15)


def test_edges_of_shells_count_from_three_unless_a_writer_counts_from_one(tmp_path):
    blocks = [("SHELL4", [[1, 2, 3, 4]], "a"), ("TRI3", [[2, 5, 3]], "b")]
    manual = {"floor": [(1, 3), (2, 3)]}
    plain = {"floor": [(1, 1), (2, 1)]}
    for sides in (manual, plain):
        piece = load(exodus_file(tmp_path / "shell.exo", SQUARE, blocks, sides=sides), reader=exodus)
        np.testing.assert_array_equal(piece.patches["floor"].nodes, [0, 1, 1, 4])


def test_sides_that_do_not_exist_are_refused(tmp_path):
    for pair in ((1, 5), (3, 1), (0, 1), (1, 0)):
        blocks = [("QUAD4", [[1, 2, 3, 4]], "a"), ("TRI3", [[2, 5, 3]], "b")]
        path = exodus_file(tmp_path / "case.exo", SQUARE, blocks, dims=2, sides={"x": [pair]})
        with pytest.raises(FormatError, match="side set x"):
            load(path, reader=exodus)


def test_a_layer_of_hexahedra_and_wedges_becomes_a_plane_mesh_with_the_names_of_its_side_sets(tmp_path):
    from fvcheck.mesh.assemble import assemble

    plane = [(0, 0), (1, 0), (2, 0), (3, 0), (0, 1), (1, 1), (2, 1), (3, 1)]
    points = [(x, y, z) for z in (0.0, 0.125) for x, y in plane]
    blocks = [
        ("HEX8", [[1, 2, 6, 5, 9, 10, 14, 13], [2, 3, 7, 6, 10, 11, 15, 14]], "bricks"),
        ("WEDGE6", [[3, 4, 8, 11, 12, 16], [3, 8, 7, 11, 16, 15]], "wedges"),
    ]
    sides = {
        "floor": [(1, 1), (2, 1), (3, 1)],
        "left": [(1, 4)],
        "right": [(3, 2)],
        "roof": [(1, 3), (2, 3), (4, 2)],
        "front": [(1, 5), (2, 5), (3, 4), (4, 4)],
        "back": [(1, 6), (2, 6), (3, 5), (4, 5)],
    }
    found = assemble([load(exodus_file(tmp_path / "layer.exo", points, blocks, sides=sides), reader=exodus)])
    assert found.thickness == 0.125
    np.testing.assert_allclose(found.mesh.areas, [1, 1, 0.5, 0.5], rtol=1e-15)
    edges = {name: len(found.mesh.patch_edges(name)) for name in found.mesh.boundary.names}
    assert edges == {"floor": 3, "left": 1, "right": 1, "roof": 3}


def test_polyhedra_of_an_exodus_file_have_the_faces_of_the_file(tmp_path):
    import netCDF4

    path = exodus_file(tmp_path / "poly.exo", HEX, [("HEX8", [list(range(1, 9))], "a")])
    faces = [[1, 2, 6, 5], [2, 3, 7, 6], [3, 4, 8, 7], [1, 5, 8, 4], [1, 4, 3, 2], [5, 6, 7, 8]]
    with netCDF4.Dataset(path, "a") as out:
        out.renameVariable("connect1", "unused")
        for name, size in (
            ("num_fa_blk", 1),
            ("num_nod_per_fa1", 24),
            ("num_fa_in_blk1", 6),
            ("num_fac_per_el1", 6),
        ):
            out.createDimension(name, size)
        out.createVariable("fbconn1", "i4", ("num_nod_per_fa1",))[:] = np.ravel(faces)
        out.createVariable("fbepecnt1", "i4", ("num_fa_in_blk1",))[:] = 4
        cells = out.createVariable("facconn1", "i4", ("num_fac_per_el1",))
        cells.elem_type = "NFACED"
        cells[:] = np.arange(1, 7)
        out.createVariable("ebepecnt1", "i4", ("num_el_in_blk1",))[:] = 6
    piece = load(path, reader=exodus)
    np.testing.assert_array_equal(piece.types, [42])
    np.testing.assert_array_equal(np.sort(piece.nodes), np.arange(8))
    np.testing.assert_array_equal(piece.faces.face_nodes, np.ravel(faces) - 1)
    np.testing.assert_array_equal(piece.faces.cell_faces, np.arange(6))


STATE = "-0000000000000000001-0000000000000000001"


def med_file(path, *, steps=(), profile=None):
    """A square and a polygon of five corners, with a point group, as MED lays them out."""
    import h5py

    points = np.array([[0, 0], [1, 0], [1, 1], [0, 1], [2, 0], [2, 1], [1.5, 1.5]], float)
    with h5py.File(path, "w") as out:
        out.create_group("INFOS_GENERALES").attrs["MAJ"] = 4
        mesh = out.create_group("ENS_MAA/plate")
        mesh.attrs.update({"ESP": 2, "DIM": 2, "TYP": 0})
        state = mesh.create_group(STATE)
        state["NOE/COO"] = points.T.ravel()
        state["NOE/COO"].attrs["NBR"] = 7
        state["NOE/FAM"] = np.array([1, 1, 0, 0, 1, 0, 0])
        state["MAI/QU4/NOD"] = np.array([1, 2, 3, 4])
        state["MAI/QU4/NOD"].attrs["NBR"] = 1
        state["MAI/POG/NOD"] = np.array([2, 5, 6, 7, 3])
        state["MAI/POG/INN"] = np.array([1, 6])
        floor = out.create_group("FAS/plate/NOEUD/FAM_1_floor")
        floor.attrs["NUM"] = 1
        floor["GRO/NOM"] = np.frombuffer(b"floor".ljust(80, b"\0"), dtype="i1").reshape(1, 80)
        for index, time in steps:
            field = out.require_group("CHA/U")
            field.attrs.update({"MAI": np.bytes_("plate"), "NCO": 2})
            step = field.create_group(f"{index:020d}{-1:020d}")
            step.attrs.update({"NDT": index, "NOR": -1, "PDT": time})
            for kind in ("QU4", "POG"):
                name = profile if profile and kind == "QU4" else "MED_NO_PROFILE_INTERNAL"
                part = step.create_group(f"MAI.{kind}/{name}")
                part.attrs.update({"NBR": 1, "NGA": 1})
                part["CO"] = np.array([time, 10 * time])
        if profile:
            out[f"PROFILS/{profile}/PFL"] = np.array([2])
    return path


def test_polygons_point_groups_and_steps_of_a_med_file_are_read(tmp_path):
    # The steps stand in another order than their numbers.
    export = med.open_export(med_file(tmp_path / "case.med", steps=((2, 4.0), (1, 3.0))))
    assert export.times == (3.0, 4.0)
    for step, time in enumerate(export.times):
        (piece,) = export.load(step)
        sizes = dict(zip(piece.types.tolist(), np.diff(piece.offsets).tolist()))
        assert sizes == {9: 4, 7: 5}
        np.testing.assert_array_equal(piece.points[[1, 6]], [[1, 0, 0], [1.5, 1.5, 0]])
        np.testing.assert_array_equal(piece.patches["floor"].nodes, [0, 1, 4])
        np.testing.assert_array_equal(piece.cell_data["U"], [[time, 10 * time]] * 2)


def test_a_med_field_on_a_part_of_the_cells_is_never_taken_for_one_on_all(tmp_path):
    path = med_file(tmp_path / "case.med", steps=((1, 3.0),), profile="some")
    with pytest.raises(FormatError, match="profile 'some' is damaged"):
        load(path, reader=med)


@pytest.mark.parametrize(
    ("damage", "message"),
    [
        (lambda file: file["CHA/U"].attrs.modify("MAI", np.bytes_("other")), "another mesh"),
        (lambda file: file["CHA/U"].attrs.modify("NCO", 3), "no 1 with 3 components"),
        (lambda file: file["CHA"].create_group("p").attrs.update({"NCO": 1}), "'p' has no values"),
        (lambda file: file.create_group("ENS_MAA/second"), "2 meshes"),
        (lambda file: file[f"ENS_MAA/plate/{STATE}/MAI/POG/INN"].write_direct(np.array([1, 7])), "index"),
        (lambda file: file[f"ENS_MAA/plate/{STATE}/MAI/QU4"].create_dataset("FAM", data=[-5]), "family -5"),
    ],
)
def test_contradictions_within_a_med_file_are_refused(tmp_path, damage, message):
    import h5py

    path = med_file(tmp_path / "case.med", steps=((1, 3.0),))
    with h5py.File(path, "a") as file:
        damage(file)
    with pytest.raises(FormatError, match=message):
        load(path, reader=med)


def test_a_meshio_mesh_keeps_its_groups_sets_and_data():
    points = np.array(SQUARE)[:, :2]
    cells = [
        ("line", np.array([[0, 1], [3, 0]])),
        ("quad", np.array([[0, 1, 2, 3]])),
        ("triangle", np.array([[1, 4, 2]])),
    ]
    mesh = meshio.Mesh(
        points,
        cells,
        point_data={"U": np.ones((5, 2))},
        cell_data={
            "gmsh:physical": [np.array([4, 5]), np.array([4]), np.array([4])],
            "p": [[0, 0], [1.5], [2.5]],
        },
        field_data={"floor": np.array([4, 1]), "fluid": np.array([4, 2])},
        cell_sets={"west": [[1], [], []], "all cells": [[], [0], [0]], "floor": [[0], [], []]},
        point_sets={"corner": [4]},
    )
    piece = piece_from_meshio(mesh)
    np.testing.assert_array_equal(piece.types, [3, 3, 9, 5])
    np.testing.assert_array_equal(piece.cell_data["p"], [0, 0, 1.5, 2.5])
    assert piece.tag_names == {"gmsh:physical": {4: "floor", 5: "group 5"}}
    assert sorted(piece.patches) == ["corner", "west"]
    np.testing.assert_array_equal(piece.patches["west"].nodes, [3, 0])
    assert piece.points.shape == (5, 3)


def test_polygons_of_meshio_are_read_and_other_objects_are_refused():
    mesh = meshio.Mesh(np.array(SQUARE, float), [("polygon", np.array([[0, 1, 4, 2, 3]]))])
    np.testing.assert_array_equal(piece_from_meshio(mesh).offsets, [0, 5])
    for wrong in (None, 3, "mesh.vtu", meshio.Mesh(np.zeros((3, 3)), [("triangle", np.array([[0, 1, 3]]))])):
        with pytest.raises(FormatError):
            piece_from_meshio(wrong)


@pytest.mark.parametrize("name", ["mixed_point_v41.msh", "tri_point_v41_binary.msh", "tri_lines_point.med"])
def test_reading_a_file_and_converting_what_meshio_reads_from_it_agree(name):
    reader = med if name.endswith(".med") else msh
    ours, theirs = load(SAMPLES / name, reader=reader), piece_from_meshio(meshio.read(SAMPLES / name))
    np.testing.assert_array_equal(ours.points, theirs.points)
    np.testing.assert_array_equal(np.bincount(ours.types), np.bincount(theirs.types))
    (names,) = ours.tag_names.values()
    assert set(names.values()) == {"left", "right", "bottom", "top"}
    assert [names] == list(theirs.tag_names.values())


@pytest.mark.parametrize("name", ["mixed_point.exo", "tri6_point.exo"])
def test_the_classic_netcdf_layout_is_read_as_by_the_netcdf_library(name):
    import netCDF4

    from fvcheck.formats.netcdf_classic import open_classic

    with open_classic(SAMPLES / name) as ours, netCDF4.Dataset(SAMPLES / name) as theirs:
        theirs.set_auto_mask(False)
        assert set(ours.variables) == set(theirs.variables)
        for variable in theirs.variables.values():
            if variable.dtype.kind != "S":
                np.testing.assert_array_equal(ours.numbers(variable.name), variable[:])
        assert ours.words("ss_names") == ["left", "right", "bottom", "top"]
