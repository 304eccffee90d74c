"""VTK files: sample files of a closed-form field, VTK's own writers, and damage.

The samples and what they hold (samples.json) were not written by this project's
readers. Files written here come from VTK's writers; what they hold is known
before they are written.
"""

from __future__ import annotations

import json
import re
import struct
import subprocess
import sys
import zlib
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from whole import whole

from fvcheck.errors import FormatError
from fvcheck.formats.registry import open_export
from fvcheck.formats.vtk_cells import ghost_cells
from fvcheck.formats.vtk_convert import piece_of

HERE = Path(__file__).parent
SAMPLES = HERE / "samples"
ENDINGS = (".vtu", ".pvtu", ".vtp", ".vts", ".vtr", ".vtm", ".pvd", ".vtk")
INDEX = json.loads((SAMPLES / "samples.json").read_text())["files"]
GOOD = [name for name in INDEX if name.endswith(ENDINGS)]
BAD = [
    name
    for name in json.loads((SAMPLES / "bad" / "bad.json").read_text())
    if name.startswith(("vtu_", "pvtu_", "vtm_", "pvd_", "vtk_"))
]
# Sound files of meshes that only the next layer can refuse; and a number any Fortran program reads.
READABLE = {"vtu_bow_tie.vtu", "vtu_two_layers.vtu", "vtu_lines_only.vtu", "vtu_exponent_d.vtu"}
LINES = (1, 2, 3, 4, 21, 35)


def taylor_green(points, time=0.0):
    """u, v, p, T of samples.json, "about"; nu = 0.05 in the series."""
    x, y = points[:, 0], points[:, 1]
    fade = np.exp(-2 * 0.05 * time)
    return {
        "U": np.stack([np.sin(x) * np.cos(y) * fade, -np.cos(x) * np.sin(y) * fade, 0 * x], axis=1),
        "u": np.sin(x) * np.cos(y) * fade,
        "v": -np.cos(x) * np.sin(y) * fade,
        "p": (np.cos(2 * x) + np.cos(2 * y)) / 4 * fade**2,
        "T": 1 + 0.1 * x - 0.2 * y,
        "rho": np.ones_like(x),
    }


def cell_averages(corners, time):
    """Averages over a polygon by 12 x 12 Gauss points on a fan of signed triangles."""
    nodes, weights = np.polynomial.legendre.leggauss(12)
    s, t = np.meshgrid((nodes + 1) / 2, (nodes + 1) / 2)
    weight = np.outer(weights, weights) / 4 * s
    total, area = {}, 0.0
    for b, c in pairwise(corners[1:]):
        a = corners[0]
        twice = (b[0] - a[0]) * (c[1] - a[1]) - (c[0] - a[0]) * (b[1] - a[1])
        at = a + s[..., None] * ((1 - t)[..., None] * (b - a) + t[..., None] * (c - a))
        for name, values in taylor_green(at.reshape(-1, 2), time).items():
            part = np.tensordot(weight.ravel(), values, axes=1) * twice
            total[name] = total.get(name, 0.0) + part
        area += twice / 2
    return {name: value / area for name, value in total.items()}


def polygon_of(piece, cell):
    """Corners (k, 2) of a plane cell, or of the lower face of a cell that is one thick."""
    nodes = piece.nodes[piece.offsets[cell] : piece.offsets[cell + 1]]
    kind = int(piece.types[cell])
    if kind == 8:
        nodes = nodes[[0, 1, 3, 2]]
    elif kind == 22:
        nodes = nodes[:3]
    elif kind in (12, 13):
        nodes = nodes[: len(nodes) // 2]
    elif kind == 42:
        low = piece.points[nodes, 2].min()
        own = piece.faces.cell_faces[piece.faces.cell_offsets[cell] : piece.faces.cell_offsets[cell + 1]]
        for face in own:
            begin, end = piece.faces.face_offsets[face : face + 2]
            nodes = piece.faces.face_nodes[begin:end]
            if np.all(piece.points[nodes, 2] == low):
                break
    return piece.points[nodes, :2].astype(float)


def own_cells(piece):
    """Cells with an area that this piece owns."""
    kept = ~np.isin(piece.types, LINES)
    return np.flatnonzero(kept if piece.ghost is None else kept & ~piece.ghost)


@pytest.mark.parametrize("name", GOOD)
def test_a_sample_gives_its_cells_points_and_times(name):
    about = INDEX[name]
    export = open_export(SAMPLES / name)
    assert list(export.times) == about["times"]
    for step in range(export.steps):
        pieces = export.load(step)
        assert sum(len(own_cells(piece)) for piece in pieces) == about["cells"]
        layers = 2 if name.startswith("ext_") else 1
        places = {tuple(point) for piece in pieces for point in np.round(piece.points, 9)}
        assert len(places) == about["points"] * layers
        if "cells_stored" in about:
            assert sum(len(piece.types) for piece in pieces) == about["cells_stored"]
            assert sum(len(piece.points) for piece in pieces) == about["points_stored"]


@pytest.mark.parametrize("name", GOOD)
def test_a_sample_gives_the_closed_form_field_at_points_or_as_cell_averages(name):
    about = INDEX[name]
    export = open_export(SAMPLES / name)
    step = export.steps - 1
    time = export.times[step] if export.times else 0.0
    names = [n for role in about["fields"].values() for n in (role if isinstance(role, list) else [role])]
    for piece in export.load(step):
        stored = piece.point_data if about["location"] == "point" else piece.cell_data
        assert set(names) <= set(stored)
        # Rounding of the written numbers and of the quadrature; float32 keeps 24 bits.
        close = 2e-7 if "float32" in name else 1e-13
        if about["location"] == "point":
            exact = taylor_green(piece.points.astype(float), time)
            for field in names:
                np.testing.assert_allclose(stored[field], exact[field], rtol=0, atol=close)
            continue
        for cell in own_cells(piece)[::7]:
            exact = cell_averages(polygon_of(piece, cell), time)
            for field in names:
                np.testing.assert_allclose(stored[field][cell], exact[field], rtol=0, atol=close)


def test_the_kind_of_numbers_is_kept():
    piece = open_export(SAMPLES / "mixed_cell_float32.vtu").load(0)[0]
    assert piece.cell_data["U"].dtype == np.float32
    assert piece.points.dtype == np.float64
    (piece,) = open_export(SAMPLES / "tri_lines_point.vtu").load(0)
    assert piece.cell_data["patch"].dtype.kind == "i"
    (piece,) = open_export(SAMPLES / "tri6_point_bigendian.vtu").load(0)
    assert all(array.dtype.isnative for array in (piece.points, piece.point_data["p"]))


def test_line_cells_stay_with_the_ids_of_their_patches():
    for name in ("tri_lines_cell.vtu", "tri_lines_point.vtu"):
        (piece,) = open_export(SAMPLES / name).load(0)
        for patch in INDEX[name]["patches"].values():
            edges = (piece.types == 3) & (piece.cell_data["patch"] == patch["id"])
            assert edges.sum() == patch["edges"]


def test_blocks_keep_their_last_name():
    pieces = open_export(SAMPLES / "tri_point_patches.vtm").load(0)
    assert [piece.name for piece in pieces] == ["internal", "left", "right", "bottom", "top"]
    pieces = open_export(SAMPLES / "mixed_cell_zones.vtm").load(0)
    assert [piece.name for piece in pieces] == ["west", "east"]


def test_blocks_of_one_name_are_told_apart_by_their_path(tmp_path):
    (tmp_path / "a.vtu").write_bytes((SAMPLES / "tri_point_ascii.vtu").read_bytes())
    leaf = '<DataSet index="0" name="wall" file="a.vtu"/>'
    (tmp_path / "a.vtm").write_text(
        '<VTKFile type="vtkMultiBlockDataSet"><vtkMultiBlockDataSet>'
        f'<Block name="one">{leaf}</Block><Block name="two">{leaf}</Block><Block name="none"/>'
        "</vtkMultiBlockDataSet></VTKFile>"
    )
    assert [piece.name for piece in open_export(tmp_path / "a.vtm").load(0)] == ["one/wall", "two/wall"]


def test_ghost_marks_leave_the_arrays():
    for piece in open_export(SAMPLES / "mixed_cell_ghosts.pvtu").load(0):
        assert piece.ghost is not None and piece.ghost.any()
        assert "vtkGhostType" not in piece.cell_data


def test_duplicate_refined_and_blanked_cells_are_ghosts():
    # Bits of vtkDataSetAttributes: cells 1 duplicate, 2 and 4 connectivity, 8 refined, 32 hidden;
    # points 2 hidden.
    cells = np.full(6, 5, "u1"), np.arange(0, 19, 3), np.arange(18)
    marks = np.array([0, 1, 2, 8, 32, 4], "u1")
    blank = np.zeros(18, "u1")
    blank[17] = 2
    data = {"vtkGhostType": marks, "p": np.zeros(6)}
    assert ghost_cells({}, data, cells).tolist() == [False, True, False, True, True, False]
    assert set(data) == {"p"}
    assert ghost_cells({"vtkGhostType": blank}, {}, cells).tolist() == [False] * 5 + [True]
    assert ghost_cells({}, {}, cells) is None


def test_empty_pieces_are_left_out_unless_they_hide_values(tmp_path):
    empty = '<Piece NumberOfPoints="0" NumberOfCells="0"><Points/><Cells/></Piece>'
    text = (SAMPLES / "tri_point_ascii.vtu").read_text()
    path = tmp_path / "a.vtu"
    path.write_text(text.replace("<Piece", empty + "<Piece", 1))
    assert len(open_export(path).load(0)) == 1
    path.write_text(re.sub('NumberOfCells="[0-9]+"', 'NumberOfCells="0"', text))
    with pytest.raises(FormatError, match="declared empty"):
        open_export(path).load(0)


def test_parts_of_one_time_make_one_step_and_times_are_sorted(tmp_path):
    for name in ("west", "east"):
        (tmp_path / f"{name}.vtu").write_bytes((SAMPLES / "tri_point_ascii.vtu").read_bytes())
    rows = [("2.5", "0", "west"), ("2.5", "1", "east"), ("0.5", "0", "west")]
    listed = "".join(f'<DataSet timestep="{t}" part="{p}" name="{n}" file="{n}.vtu"/>' for t, p, n in rows)
    (tmp_path / "run.pvd").write_text(
        f'<VTKFile type="Collection"><Collection>{listed}</Collection></VTKFile>'
    )
    export = open_export(tmp_path / "run.pvd")
    assert export.times == (0.5, 2.5)
    assert [piece.name for piece in export.load(1)] == ["west", "east"]
    assert len(export.load(0)) == 1


# --- files written by VTK -------------------------------------------------------------------------


def known_grid():
    """A triangle, a quadrilateral and a pentagon of VTK, with arrays of many kinds."""
    from vtkmodules.util.numpy_support import numpy_to_vtk
    from vtkmodules.vtkCommonCore import vtkPoints
    from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid

    places = np.random.default_rng(3).random((9, 3))
    grid, points = vtkUnstructuredGrid(), vtkPoints()
    points.SetData(numpy_to_vtk(places, deep=True))
    grid.SetPoints(points)
    for kind, nodes in ((5, [0, 1, 2]), (9, [1, 3, 4, 2]), (7, [4, 5, 6, 7, 8])):
        grid.InsertNextCell(kind, len(nodes), nodes)
    arrays = {
        "real": np.arange(27.0).reshape(9, 3) / 7,
        "single": (np.arange(9) / 3).astype("f4"),
        "whole": np.arange(9) * 10**12,
        "small": np.arange(9, dtype="u1"),
    }
    for name, values in arrays.items():
        array = numpy_to_vtk(values, deep=True)
        array.SetName(name)
        grid.GetPointData().AddArray(array)
    cell = numpy_to_vtk(np.array([0.1, np.nan, 0.3]), deep=True)
    cell.SetName("with space")
    grid.GetCellData().AddArray(cell)
    return grid, places, arrays


def demand_known(piece, places, arrays, close=0.0):
    np.testing.assert_allclose(piece.points, places, rtol=close)
    assert piece.types.tolist() == [5, 9, 7]
    assert piece.offsets.tolist() == [0, 3, 7, 12]
    assert piece.nodes.tolist() == [0, 1, 2, 1, 3, 4, 2, 4, 5, 6, 7, 8]
    assert set(piece.point_data) == set(arrays)
    for name, values in arrays.items():
        assert piece.point_data[name].dtype == values.dtype
        np.testing.assert_allclose(piece.point_data[name], values, rtol=close)
    np.testing.assert_allclose(piece.cell_data["with space"], [0.1, np.nan, 0.3], rtol=close)


@pytest.mark.parametrize("mode", ["ascii", "binary", "raw", "base64"])
@pytest.mark.parametrize("squeeze", ["None", "ZLib", "LZ4", "LZMA"])
@pytest.mark.parametrize("order", ["Little", "Big"])
@pytest.mark.parametrize("bits", [32, 64])
def test_every_encoding_of_vtk_gives_back_what_was_written(tmp_path, mode, squeeze, order, bits):
    from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridWriter

    grid, places, arrays = known_grid()
    writer = vtkXMLUnstructuredGridWriter()
    writer.SetInputData(grid)
    writer.SetFileName(str(tmp_path / "a.vtu"))
    getattr(writer, f"SetCompressorTypeTo{squeeze}")()
    getattr(writer, f"SetByteOrderTo{order}Endian")()
    getattr(writer, f"SetHeaderTypeToUInt{bits}")()
    {"ascii": writer.SetDataModeToAscii, "binary": writer.SetDataModeToBinary}.get(
        mode, writer.SetDataModeToAppended
    )()
    writer.SetEncodeAppendedData(mode == "base64")
    if squeeze != "None":
        writer.SetBlockSize(64)  # several blocks, the last one short
    assert writer.Write()
    (piece,) = open_export(tmp_path / "a.vtu").load(0)
    # The XML writer puts down enough digits in text to give back every number.
    demand_known(piece, places, arrays)


@pytest.mark.parametrize("version", [42, 51])
@pytest.mark.parametrize("text", [True, False])
def test_legacy_files_of_vtk_give_back_what_was_written(tmp_path, version, text):
    from vtkmodules.vtkIOLegacy import vtkUnstructuredGridWriter

    grid, places, arrays = known_grid()
    if text:  # VTK writes NaN into text, and reads it back as 0
        grid.GetCellData().GetArray(0).SetValue(1, 0.2)
    writer = vtkUnstructuredGridWriter()
    writer.SetInputData(grid)
    writer.SetFileName(str(tmp_path / "a.vtk"))
    writer.SetFileVersion(version)
    writer.SetFileType(1 if text else 2)
    assert writer.Write()
    (piece,) = open_export(tmp_path / "a.vtk").load(0)
    if text:
        assert piece.cell_data["with space"][1] == 0.2
        piece.cell_data["with space"][1] = np.nan
    # The legacy writer keeps 11 digits in text, and 6 of single precision.
    demand_known(piece, places, arrays, 1e-5 if text else 0.0)


def flat_sets():
    """The kinds of data sets by name, each with numbers at points and cells."""
    import pyvista

    image = pyvista.ImageData(dimensions=(4, 3, 1), spacing=(0.5, 0.25, 1.0), origin=(1.0, 2.0, 0.0))
    image.point_data["a"] = np.arange(12.0)
    image.cell_data["c"] = np.arange(6)
    lattice = pyvista.RectilinearGrid(
        np.array([0.0, 1.0, 3.0]), np.array([0.0, 0.5]), np.array([0.0, 1.0, 4.0])
    )
    lattice.cell_data["c"] = np.arange(4)
    disc = pyvista.Disc(c_res=6)
    disc.cell_data["c"] = np.arange(disc.n_cells)
    strip = pyvista.Plane(i_resolution=3, j_resolution=2).triangulate().strip()
    sets = {"image": image, "lattice": lattice, "disc": disc, "strip": strip}
    return sets | {"curved": image.cast_to_structured_grid(), "cells": lattice.cast_to_unstructured_grid()}


XML_ENDING = {
    "image": "vti",
    "lattice": "vtr",
    "disc": "vtp",
    "strip": "vtp",
    "curved": "vts",
    "cells": "vtu",
}


@pytest.mark.parametrize("name", XML_ENDING)
@pytest.mark.parametrize("kind", ["xml", "legacy binary", "legacy text", "memory"])
def test_every_data_set_of_vtk_gives_its_points_cells_and_areas(tmp_path, name, kind):
    data = flat_sets()[name]
    path = tmp_path / f"a.{XML_ENDING[name] if kind == 'xml' else 'vtk'}"
    if kind == "memory":
        piece = piece_of(data)
    else:
        data.save(path, binary="text" not in kind)
        (piece,) = open_export(path).load(0)
    np.testing.assert_allclose(
        piece.points, data.points, atol=1e-6
    )  # text of single precision keeps 6 digits
    assert len(piece.types) == data.n_cells
    for cell in range(data.n_cells):
        nodes = piece.nodes[piece.offsets[cell] : piece.offsets[cell + 1]]
        assert sorted(nodes) == sorted(data.get_cell(cell).point_ids)
    for array in data.point_data:
        np.testing.assert_allclose(piece.point_data[array], data.point_data[array], atol=1e-6)
    for array in data.cell_data:
        np.testing.assert_array_equal(piece.cell_data[array], data.cell_data[array])
        assert piece.cell_data[array].dtype == data.cell_data[array].dtype
    if name == "image":
        # Explicit quadrilaterals, counter-clockwise: 0.5 x 0.25 each.
        for cell in range(6):
            x, y = polygon_of(piece, cell).T
            assert np.isclose((x * np.roll(y, -1) - np.roll(x, -1) * y).sum() / 2, 0.125, rtol=1e-14)


@pytest.mark.parametrize("kind", ["vtu", "old vtu", "vtk 4.2", "vtk 5.1"])
def test_polyhedra_keep_their_faces(tmp_path, kind):
    import pyvista
    from vtkmodules.vtkIOLegacy import vtkUnstructuredGridWriter

    grid = pyvista.read(SAMPLES / "ext_poly_cell_lzma.vtu")
    path = tmp_path / ("a.vtu" if "vtu" in kind else "a.vtk")
    if "vtk" in kind:
        writer = vtkUnstructuredGridWriter()
        writer.SetInputData(grid)
        writer.SetFileVersion(42 if "4.2" in kind else 51)
        writer.SetFileName(str(path))
        writer.Write()
    elif kind == "vtu":
        grid.save(path)
    else:
        write_old_polyhedra(path, grid)
    (piece,) = open_export(path).load(0)
    assert set(piece.types) == {42}
    for cell in range(grid.n_cells):
        own = piece.faces.cell_faces[piece.faces.cell_offsets[cell] : piece.faces.cell_offsets[cell + 1]]
        bounds = piece.faces.face_offsets
        found = {tuple(piece.faces.face_nodes[bounds[face] : bounds[face + 1]]) for face in own}
        assert found == {tuple(face.point_ids) for face in grid.get_cell(cell).faces}
        nodes = piece.nodes[piece.offsets[cell] : piece.offsets[cell + 1]]
        assert sorted(nodes) == sorted(grid.get_cell(cell).point_ids)


def write_old_polyhedra(path, grid):
    """The arrays ``faces`` and ``faceoffsets`` of files before version 2.3, and a plain cell between."""
    nodes, ends, stream, face_ends = [], [], [], []
    for cell in range(grid.n_cells):
        nodes += grid.get_cell(cell).point_ids
        ends.append(len(nodes))
        faces = grid.get_cell(cell).faces
        stream.append(len(faces))
        for face in faces:
            stream += [len(face.point_ids), *face.point_ids]
        face_ends.append(len(stream))
    arrays = {"connectivity": nodes, "offsets": ends, "types": [42] * len(ends)}
    arrays |= {"faces": stream, "faceoffsets": face_ends}
    text = "".join(
        f'<DataArray type="Int64" Name="{name}" format="ascii">{" ".join(map(str, values))}</DataArray>'
        for name, values in arrays.items()
    )
    points = " ".join(repr(float(x)) for x in grid.points.ravel())
    path.write_text(
        '<VTKFile type="UnstructuredGrid"><UnstructuredGrid>'
        f'<Piece NumberOfPoints="{grid.n_points}" NumberOfCells="{grid.n_cells}"><Points>'
        f'<DataArray type="Float64" NumberOfComponents="3" format="ascii">{points}</DataArray></Points>'
        f"<Cells>{text}</Cells></Piece></UnstructuredGrid></VTKFile>"
    )


@pytest.mark.parametrize("kind", ["vti", "vtr", "vts", "vtp", "vtu"])
def test_parallel_files_of_vtk_give_all_their_pieces(tmp_path, kind):
    from vtkmodules import vtkIOParallelXML

    sets = {ending: name for name, ending in XML_ENDING.items() if name != "strip"}
    data = flat_sets()[sets[kind]]
    names = {"vti": "ImageData", "vtr": "RectilinearGrid", "vts": "StructuredGrid"}
    names |= {"vtp": "PolyData", "vtu": "UnstructuredGrid"}
    writer = getattr(vtkIOParallelXML, f"vtkXMLP{names[kind]}Writer")()
    writer.SetInputData(data)
    writer.SetFileName(str(tmp_path / f"a.p{kind}"))
    writer.SetNumberOfPieces(1)
    assert writer.Write()
    (piece,) = open_export(tmp_path / f"a.p{kind}").load(0)
    assert (len(piece.points), len(piece.types)) == (data.n_points, data.n_cells)


def test_the_time_of_a_single_file_is_its_field_array(tmp_path):
    from vtkmodules.vtkIOParallelXML import vtkXMLPUnstructuredGridWriter

    data = flat_sets()["cells"]
    data.field_data["note"] = ["a", "b"]
    data.field_data["TimeValue"] = [2.5]
    for name in ("a.vtu", "a.vtk"):
        data.save(tmp_path / name)
        assert open_export(tmp_path / name).times == (2.5,)
    writer = vtkXMLPUnstructuredGridWriter()  # appended data by default
    writer.SetInputData(data)
    writer.SetFileName(str(tmp_path / "b.pvtu"))
    assert writer.Write()
    for name in ("b.pvtu", "b_0.vtu"):
        export = open_export(tmp_path / name)
        assert export.times == (2.5,)
        assert len(export.load(0)) == 1


# --- odd text -------------------------------------------------------------------------------------


def with_first_value(tmp_path, token):
    """The text sample, its first value of p replaced."""
    text = (SAMPLES / "tri_point_ascii.vtu").read_text()
    head, tail = text.split('Name="p" format="ascii">', 1)
    old = re.search(r"\S+", tail).group()
    path = tmp_path / "a.vtu"
    path.write_text(head + 'Name="p" format="ascii">' + tail.replace(old, token, 1))
    return path


@pytest.mark.parametrize("token", ["1,5", "1.5-103", "abc", "1e", "--1", "0x10", "1 2", "1_0", "\u00bd"])
def test_text_that_is_no_number_is_refused(tmp_path, token):
    with pytest.raises(FormatError, match="array 'p'"):
        whole(open_export(with_first_value(tmp_path, token)).load(0))


@pytest.mark.parametrize("token, value", [("1D+5", 1e5), ("-inf", -np.inf), ("nan", np.nan), ("+.5", 0.5)])
def test_unusual_numbers_are_read_as_what_they_are(tmp_path, token, value):
    (piece,) = open_export(with_first_value(tmp_path, token)).load(0)
    np.testing.assert_equal(piece.point_data["p"][0], value)


def test_a_text_file_without_a_last_line_end_gives_a_hint(tmp_path):
    text = (SAMPLES / "tri_point_ascii.vtk").read_bytes().rstrip()
    (tmp_path / "a.vtk").write_bytes(text[:-1])  # a digit of the last number is gone
    assert [hint.code for hint in open_export(tmp_path / "a.vtk").hints] == ["no-line-end"]
    assert open_export(SAMPLES / "tri_point_ascii.vtk").hints == ()


# --- damage, in child processes -------------------------------------------------------------------

CHILD = """
import json, random, resource, shutil, signal, sys, time
from pathlib import Path
from fvcheck.errors import FvcheckError
from fvcheck.formats.registry import open_export
from tests.whole import whole

resource.setrlimit(resource.RLIMIT_AS, (4 << 30, 4 << 30))

def outcome(path):
    signal.alarm(10)  # no handler: a hang kills this process
    try:
        export = open_export(path)
        for step in range(export.steps):
            whole(export.load(step))
        return " ".join(["read", *(hint.code for hint in export.hints)])
    except FvcheckError as error:
        return f"refused: {error}"
"""


def child(code, *arguments):
    run = subprocess.run(
        [sys.executable, "-W", "error", "-c", CHILD + code, *map(str, arguments)],
        capture_output=True,
        text=True,
        timeout=300,
        cwd=HERE.parent,
    )
    assert run.returncode == 0, run.stderr[-2000:]
    assert run.stderr == ""
    return json.loads(run.stdout)


@pytest.fixture(scope="module")
def outcomes():
    """Outcome of every damaged sample; one child process each would take ten times as long."""
    found = {}
    for start in range(0, len(BAD), 12):
        names = BAD[start : start + 12]
        code = "print(json.dumps([outcome(Path(p)) for p in sys.argv[1:]]))"
        found |= dict(zip(names, child(code, *(SAMPLES / "bad" / name for name in names))))
    return found


@pytest.mark.parametrize("name", BAD)
def test_a_damaged_sample_is_refused_in_one_line(outcomes, name):
    if name in READABLE:
        assert outcomes[name] == "read"
    else:
        assert outcomes[name].startswith("refused: ")
        assert "\n" not in outcomes[name]
        assert name.split(".")[0] in outcomes[name]  # says which file


CUTS = """
found = []
for name in sys.argv[2:]:
    source = Path(name)
    data = source.read_bytes()
    target = Path(sys.argv[1]) / source.name
    length = len(data.rstrip())
    for part in range(40):
        target.write_bytes(data[: 1 + part * (length - 2) // 39])
        found.append((source.name, part, outcome(target)))
print(json.dumps(found))
"""


def test_an_xml_file_cut_short_anywhere_is_refused(tmp_path):
    names = [n for n in GOOD if n.endswith((".vtu", ".vtp", ".vts", ".vtr"))]
    for name, part, result in child(CUTS, tmp_path, *(SAMPLES / name for name in names)):
        assert result.startswith("refused: "), f"{name}, part {part}"


def test_a_legacy_file_cut_short_anywhere_is_refused(tmp_path):
    # But between two arrays, which none of these cuts meets, and within the last number of a text.
    names = [name for name in GOOD if name.endswith(".vtk")]
    for name, part, result in child(CUTS, tmp_path, *(SAMPLES / name for name in names)):
        assert result.startswith("refused: ") or result == "read no-line-end", f"{name}, part {part}"


MUTATIONS = """
found = {"read": 0, "refused": 0}
draw = random.Random(11)
for name in sys.argv[2:]:
    source = Path(name)
    data = source.read_bytes()
    target = Path(sys.argv[1]) / source.name
    for _ in range(25):
        worse = bytearray(data)
        for _ in range(draw.choice((1, 1, 4))):
            at, size = draw.randrange(len(worse)), draw.randrange(1, 40)
            kind = draw.randrange(5)
            if kind == 0:
                worse[at] = draw.randrange(256)
            elif kind == 1:
                del worse[at : at + size]
            elif kind == 2:
                worse[at:at] = worse[at : at + size]
            elif kind == 3:
                worse[at : at + 8] = draw.choice((b"\\xff" * 8, bytes(8), b"99999999"))
            else:
                worse[at : at + size] = worse[: size]
        target.write_bytes(worse)
        found["refused" if outcome(target).startswith("refused") else "read"] += 1
print(json.dumps(found))
"""


def test_random_damage_never_crashes_hangs_or_warns(tmp_path):
    for name in GOOD:
        folder = SAMPLES / name.split(".")[0]
        if folder.is_dir():
            (tmp_path / folder.name).symlink_to(folder)
    found = child(MUTATIONS, tmp_path, *(SAMPLES / name for name in GOOD))
    assert sum(found.values()) == 25 * len(GOOD)
    # Not all damage can be seen (digits of a number, bytes of raw data), most of it is.
    assert found["refused"] > 2 * found["read"]


BLOCKS = """
found = []
data = Path(sys.argv[2]).read_bytes()
start = data.index(b'encoding="raw"') + 30
draw = random.Random(5)
target = Path(sys.argv[1]) / "a.vtu"
for _ in range(100):
    worse = bytearray(data)
    at = draw.randrange(start, len(data) - 40)
    worse[at] ^= 1 << draw.randrange(8)
    target.write_bytes(worse)
    found.append(outcome(target))
print(json.dumps(found))
"""


@pytest.mark.parametrize("name", ["poly_cell_raw_zlib.vtu", "ext_poly_cell_lzma.vtu"])
def test_a_flipped_bit_in_blocks_with_a_checksum_is_always_noticed(tmp_path, name):
    results = child(BLOCKS, tmp_path, SAMPLES / name)
    assert all(result.startswith("refused: ") for result in results)


def test_xml_nested_too_deep_is_refused(tmp_path):
    path = tmp_path / "a.vtu"
    path.write_text('<VTKFile type="UnstructuredGrid">' + "<a>" * 200_000)
    assert child("print(json.dumps(outcome(Path(sys.argv[1]))))", path).startswith("refused: ")


def test_a_grid_larger_than_its_file_is_refused_before_it_is_built(tmp_path):
    path = tmp_path / "a.vti"
    path.write_text(
        '<VTKFile type="ImageData"><ImageData WholeExtent="0 40000 0 40000 0 0">'
        '<Piece Extent="0 40000 0 40000 0 0"/></ImageData></VTKFile>'
    )
    assert child("print(json.dumps(outcome(Path(sys.argv[1]))))", path).startswith("refused: ")


def test_a_legacy_grid_without_bytes_for_its_points_is_refused(tmp_path):
    path = tmp_path / "a.vtk"
    head = "# vtk DataFile Version 3.0\nx\nASCII\nDATASET STRUCTURED_POINTS\nDIMENSIONS 40000 40000 1\n"
    for data in ("CELL_DATA 0", "POINT_DATA 1600000000\nSCALARS a float 0\nLOOKUP_TABLE default"):
        path.write_text(f"{head}ORIGIN 0 0 0\nSPACING 1 1 1\n{data}\n")
        assert child("print(json.dumps(outcome(Path(sys.argv[1]))))", path).startswith("refused: ")


def test_compressed_zeros_are_refused_before_they_are_expanded(tmp_path):
    count, size = 700, 1 << 20
    block = zlib.compress(bytes(size), 9)
    blob = struct.pack(f"<{3 + count}Q", count, size, size, *[len(block)] * count) + block * count
    array = '<DataArray type="Int64" Name="{}" format="appended" offset="0"/>'
    number = count * size // 8
    text = (
        '<VTKFile type="UnstructuredGrid" byte_order="LittleEndian" header_type="UInt64" '
        'compressor="vtkZLibDataCompressor"><UnstructuredGrid>'
        f'<Piece NumberOfPoints="{number}" NumberOfCells="{number}"><Cells>'
        + "".join(array.format(name) for name in ("connectivity", "offsets", "types"))
        + '</Cells></Piece></UnstructuredGrid><AppendedData encoding="raw">_'
    )
    path = tmp_path / "a.vtu"
    path.write_bytes(text.encode() + blob + b"</AppendedData></VTKFile>")
    assert path.stat().st_size < 1_000_000
    # VmHWM is the peak of this process; ru_maxrss would start from that of the process that forked it
    code = (
        "result = outcome(Path(sys.argv[1]));"
        "lines = Path('/proc/self/status').read_text().splitlines();"
        "print(json.dumps([result, next(int(x.split()[1]) for x in lines if x.startswith('VmHWM'))]))"
    )
    result, kilobytes = child(code, path)
    assert "expands" in result
    assert kilobytes < 400_000


def test_a_missing_part_is_named(tmp_path):
    (tmp_path / "a.pvtu").write_text(
        '<VTKFile type="PUnstructuredGrid"><PUnstructuredGrid><Piece Source="part_7.vtu"/>'
        "</PUnstructuredGrid></VTKFile>"
    )
    (tmp_path / "a.vtm").write_text(
        '<VTKFile type="vtkMultiBlockDataSet"><vtkMultiBlockDataSet>'
        '<DataSet index="0" file="part_7.vtu"/></vtkMultiBlockDataSet></VTKFile>'
    )
    for name in ("a.pvtu", "a.vtm"):
        with pytest.raises(FormatError, match=r"part_7\.vtu"):
            open_export(tmp_path / name).load(0)


@pytest.mark.parametrize(
    "name, kind, listed",
    [
        ("a.pvtu", "PUnstructuredGrid", '<Piece Source="a.pvtu"/>'),
        ("a.vtm", "vtkMultiBlockDataSet", '<Block><DataSet file="a.vtm"/></Block>'),
        ("a.pvd", "Collection", '<DataSet timestep="0" file="a.pvd"/>'),
    ],
)
def test_a_list_that_names_itself_is_refused(tmp_path, name, kind, listed):
    path = tmp_path / name
    path.write_text(f'<VTKFile type="{kind}"><{kind}>{listed}</{kind}></VTKFile>')
    assert child("print(json.dumps(outcome(Path(sys.argv[1]))))", path).startswith("refused: ")


def test_readers_start_without_the_slow_libraries():
    code = (
        "outcome(Path(sys.argv[1]))\n"
        "print(json.dumps([m for m in ('vtkmodules', 'pyvista', 'h5py', 'meshio') if m in sys.modules]))"
    )
    assert child(code, SAMPLES / "poly_cell_raw_zlib.vtu") == []
