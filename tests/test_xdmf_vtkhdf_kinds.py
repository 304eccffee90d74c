"""XDMF and VTKHDF kinds beyond the samples.

VTKHDF files come from VTK's own writer; XDMF files are written out here after
"XDMF Model and Format" and, where stated, compared with VTK's XDMF reader.
"""

from __future__ import annotations

from pathlib import Path
from shutil import copy

import h5py
import numpy as np
import pytest

from fvcheck.errors import FormatError
from fvcheck.formats import vtkhdf, xdmf

POINTS = np.array([[0.0, 0], [1, 0], [2, 0], [0, 1], [1, 1], [2, 1]])


def item(values, kind="Float", dims=None, **more):
    values = np.asarray(values)
    text = " ".join(repr(value) for value in values.reshape(-1).tolist())
    dims = " ".join(map(str, values.shape)) if dims is None else dims
    extra = "".join(f' {key}="{value}"' for key, value in more.items())
    form = f'NumberType="{kind}" Precision="8" Format="XML"{extra}'
    return f'<DataItem Dimensions="{dims}" {form}>{text}</DataItem>'


def topology(kind, count, values):
    return f'<Topology TopologyType="{kind}" NumberOfElements="{count}">{item(values, "Int")}</Topology>'


def geometry(kind, *values):
    return f'<Geometry GeometryType="{kind}">{"".join(map(item, values))}</Geometry>'


QUADS = topology("Quadrilateral", 2, [[0, 1, 4, 3], [1, 2, 5, 4]])
PLANE = geometry("XY", POINTS)


def scalar(name, values, centre="Cell"):
    return f'<Attribute Name="{name}" AttributeType="Scalar" Center="{centre}">{item(values)}</Attribute>'


def uniform(*parts, name="g"):
    return f'<Grid Name="{name}" GridType="Uniform">{"".join(parts)}</Grid>'


def collection(kind, *grids, name="c"):
    return f'<Grid Name="{name}" GridType="Collection" CollectionType="{kind}">{"".join(grids)}</Grid>'


def write(path, *grids):
    path.write_text(
        f'<Xdmf Version="3.0" xmlns:xi="http://www.w3.org/2001/XInclude"><Domain>{"".join(grids)}</Domain></Xdmf>'
    )
    return xdmf.open_export(path)


@pytest.fixture
def path(tmp_path):
    return tmp_path / "a.xdmf"


def cells_of(piece):
    return [piece.nodes[a:b].tolist() for a, b in zip(piece.offsets, piece.offsets[1:])]


def test_mixed_topologies_hold_lines_polygons_and_quadratic_cells(path):
    lines = [2, 2, 0, 1, 2, 3, 0, 1, 2]
    values = [5, 0, 1, 4, 3, *lines, 3, 4, 0, 1, 2, 5, 36, 0, 1, 2, 3, 4, 5, 4, 1, 2, 5, 4, 1, 5, 4]
    (piece,) = write(path, uniform(topology("Mixed", 7, values), PLANE)).load(0)
    assert piece.types.tolist() == [9, 3, 4, 7, 22, 5, 5]
    assert cells_of(piece) == [
        [0, 1, 4, 3], [0, 1], [0, 1, 2], [0, 1, 2, 5], [0, 1, 2, 3, 4, 5], [1, 2, 5], [1, 5, 4],
    ]  # fmt: skip


def test_long_runs_of_one_kind_in_a_mixed_topology_are_read_exactly(path):
    rng = np.random.default_rng(3)
    kinds = np.repeat(rng.choice([4, 5, 3], 60), rng.integers(1, 90, 60))
    cells = [rng.integers(0, 6, {4: 3, 5: 4, 3: 5}[kind]).tolist() for kind in kinds]
    heads = {3: [3, 5], 4: [4], 5: [5]}
    values = [n for kind, cell in zip(kinds.tolist(), cells) for n in heads[kind] + cell]
    (piece,) = write(path, uniform(topology("Mixed", len(cells), values), PLANE)).load(0)
    assert cells_of(piece) == cells


def test_a_polyhedron_in_a_mixed_topology_brings_its_faces(path):
    cube = np.array([[i, j, k] for k in (0, 1) for j in (0, 1) for i in (0, 1)], float)
    loops = [[0, 1, 3, 2], [4, 5, 7, 6], [0, 1, 5, 4], [2, 3, 7, 6], [0, 2, 6, 4], [1, 3, 7, 5]]
    values = [16, 6, *(n for loop in loops for n in [4, *loop])]
    (piece,) = write(path, uniform(topology("Mixed", 1, values), geometry("XYZ", cube))).load(0)
    assert piece.types.tolist() == [42] and cells_of(piece) == [list(range(8))]
    assert piece.faces.face_nodes.reshape(-1, 4).tolist() == loops


def test_separate_coordinates_and_a_base_offset_are_understood(path):
    cells = topology("Quadrilateral", 2, [[1, 2, 5, 4], [2, 3, 6, 5]])
    cells = cells.replace("<Topology", '<Topology BaseOffset="1"')
    (piece,) = write(path, uniform(cells, geometry("X_Y", POINTS[:, 0], POINTS[:, 1]))).load(0)
    assert cells_of(piece) == [[0, 1, 4, 3], [1, 2, 5, 4]]
    assert np.array_equal(piece.points[:, :2], POINTS)


STRUCTURED = {
    "2DSMesh": ("3 4", geometry("XYZ", [[i, j * j, 0.0] for j in range(3) for i in range(4)])),
    "2DRectMesh": ("3 4", geometry("VXVY", [0.0, 1, 2, 4], [1.0, 2, 4])),
    "3DSMesh": (
        "2 3 4",
        geometry("XYZ", [[i, j, k] for k in (0.0, 0.1) for j in range(3) for i in range(4)]),
    ),
    "3DCoRectMesh": ("2 3 4", geometry("ORIGIN_DXDYDZ", [10.0, 20, 30], [1.0, 2, 3])),
}


@pytest.mark.parametrize("kind", STRUCTURED)
def test_structured_grids_agree_with_the_reader_of_vtk(kind, path):
    reader = pytest.importorskip("vtkmodules.vtkIOXdmf2").vtkXdmfReader()
    from vtkmodules.util.numpy_support import vtk_to_numpy

    dims, points_of_grid = STRUCTURED[kind]
    shape = [int(n) for n in dims.split()]
    cells = f'<Topology TopologyType="{kind}" Dimensions="{dims}"/>'
    point = np.arange(float(np.prod(shape))).reshape(shape)
    cell = np.arange(float(np.prod([n - 1 for n in shape]))).reshape([n - 1 for n in shape])
    fields = scalar("p", point, "Node"), scalar("c", cell)
    (piece,) = write(path, uniform(cells, points_of_grid, *fields)).load(0)
    reader.SetFileName(str(path))
    reader.Update()
    grid = reader.GetOutputDataObject(0)
    points = np.array([grid.GetPoint(n) for n in range(grid.GetNumberOfPoints())])
    assert np.array_equal(piece.points, points)
    assert np.array_equal(piece.point_data["p"], vtk_to_numpy(grid.GetPointData().GetArray("p")))
    assert np.array_equal(piece.cell_data["c"], vtk_to_numpy(grid.GetCellData().GetArray("c")))
    for number, nodes in enumerate(cells_of(piece)):
        theirs = grid.GetCell(number).GetPointIds()
        # VTK's pixels and voxels number the corners otherwise.
        assert sorted(nodes) == sorted(theirs.GetId(n) for n in range(theirs.GetNumberOfIds()))


def test_an_origin_and_spacing_bring_a_hint_on_their_order(path):
    dims, points = STRUCTURED["3DCoRectMesh"]
    export = write(path, uniform(f'<Topology TopologyType="3DCoRectMesh" Dimensions="{dims}"/>', points))
    assert [hint.code for hint in export.hints] == ["xdmf-origin-order"]


@pytest.mark.parametrize("kind,values", [("List", [0.5, 2.0]), ("HyperSlab", [0.5, 1.5, 2])])
def test_a_series_may_list_its_times_at_its_head(kind, values, path):
    time = f'<Time TimeType="{kind}">{item(values)}</Time>'
    grids = [uniform(QUADS, PLANE, scalar("p", [n, n + 1.0])) for n in (1.0, 5.0)]
    export = write(path, collection("Temporal", time, *grids))
    assert export.times == (0.5, 2.0)
    assert [export.load(n)[0].cell_data["p"][0] for n in (0, 1)] == [1.0, 5.0]


def test_spatial_collections_within_a_series_come_as_several_pieces(path):
    other = PLANE.replace("2.0 1.0", "2.5 1.0")
    grids = uniform(QUADS, PLANE, name="A"), uniform(QUADS, other, name="B")
    steps = [collection("Spatial", f'<Time Value="{t}"/>', *grids) for t in (1.0, 3.0)]
    export = write(path, collection("Temporal", *steps))
    assert export.times == (1.0, 3.0)
    assert [piece.name for piece in export.load(1)] == ["A", "B"]


def test_one_series_per_function_on_an_included_mesh_comes_as_one_piece(path):
    # How finite-element writers store several functions: one collection each, the mesh included by a pointer.
    mesh = uniform(QUADS, PLANE, name="mesh")
    pointer = "xpointer(//Grid[@Name='mesh']/*[self::Topology or self::Geometry])"
    include = f'<xi:include xpointer="{pointer}"/>'

    def steps(name):
        return [uniform(f'<Time Value="{t}"/>', include, scalar(name, [t, t])) for t in (0.0, 1.0)]

    export = write(path, mesh, *(collection("Temporal", *steps(name)) for name in ("u", "p")))
    (piece,) = export.load(1)
    assert export.times == (0.0, 1.0) and set(piece.cell_data) == {"u", "p"}


def test_references_inside_the_file_are_followed(path):
    first = uniform(QUADS, PLANE, scalar("p", [1.0, 2.0]), name="first")
    target = "/Xdmf/Domain/Grid[@Name='first']/Attribute/DataItem"
    second = uniform(
        '<Topology Reference="XML">/Xdmf/Domain/Grid[1]/Topology[1]</Topology>',
        geometry("XY", POINTS + 1),
        f'<Attribute Name="p" Center="Cell"><DataItem Reference="{target}"/></Attribute>',
    )
    pieces = write(path, first, second).load(0)
    assert pieces[1].cell_data["p"].tolist() == [1.0, 2.0] and cells_of(pieces[1])[0] == [0, 1, 4, 3]


@pytest.mark.parametrize(
    "grid,text",
    [
        ('<Grid Reference="/Xdmf/Domain/Grid[1]"/>', "reference"),
        ('<xi:include xpointer="xpointer(//Grid[@Name=&quot;no&quot;])"/>', "points at nothing"),
        ('<Grid GridType="Tree"><Grid Reference="/Xdmf/Domain/Grid"/></Grid>', "circle"),
        ('<Grid GridType="Subset"/>', "subset"),
        ("<Grid>" * 40 + "</Grid>" * 40, "nested"),
    ],
)
def test_references_that_lead_nowhere_or_in_circles_are_refused(grid, text, path):
    with pytest.raises(FormatError, match=text):
        write(path, grid).load(0)


def test_few_references_that_stand_for_very_many_grids_are_refused(path):
    levels = [f'<Grid Name="L0" GridType="Tree">{uniform(QUADS, PLANE)}</Grid>']
    for n in range(1, 12):
        inner = f"<Grid Reference=\"/Xdmf/Domain/Grid[@Name='L{n - 1}']\"/>" * 10
        levels.append(f'<Grid Name="L{n}" GridType="Tree">{inner}</Grid>')
    with pytest.raises(FormatError, match="too many"):
        write(path, *levels)


def elsewhere(form, place):
    return item([1.0, 2.0]).replace("XML", form).replace("1.0 2.0", place)


@pytest.mark.parametrize(
    "data,text",
    [
        (item([1.0, 2.0], ItemType="Function", Function="$0"), "Function"),
        (item([1.0, 2.0], ItemType="Coordinates"), "Coordinates"),
        (item([1.0, 2.0], dims="3"), "3 values are declared"),
        (item([1.0, 2.0, 3.0]), "3 values for 2 cells"),
        (item([1.0, 2.0]).replace("1.0", "1,0"), "no number"),
        (item([1.0, 2.0]).replace("1.0", "1_0"), "no number"),
        (item([1.0, 2.0]).replace('Precision="8"', 'Precision="16"'), "precision"),
        (elsewhere("HDF", "../a.h5:/x"), "not in the folder"),
        (elsewhere("HDF", "/etc/passwd:/x"), "not in the folder"),
        (elsewhere("HDF", "missing.h5:/x"), "no such file"),
        (elsewhere("Binary", "a.xdmf").replace('="2"', '="99999"'), "too short"),
    ],
)
def test_data_items_that_cannot_be_read_rightly_are_refused(data, text, path):
    attribute = f'<Attribute Name="p" AttributeType="Scalar" Center="Cell">{data}</Attribute>'
    with pytest.raises(FormatError, match=text):
        write(path, uniform(QUADS, PLANE, attribute)).load(0)


def test_a_link_out_of_the_folder_is_refused(tmp_path):
    (tmp_path / "in").mkdir()
    with h5py.File(tmp_path / "out.h5", "w") as file:
        file["x"] = [1.0, 2.0]
    (tmp_path / "in/out.h5").symlink_to("../out.h5")
    attribute = f'<Attribute Name="p" Center="Cell">{elsewhere("HDF", "out.h5:/x")}</Attribute>'
    export = write(tmp_path / "in/a.xdmf", uniform(QUADS, PLANE, attribute))
    with pytest.raises(FormatError, match="not in the folder"):
        export.load(0)


def test_binary_values_and_strided_hyperslabs_are_read_rightly(path):
    np.array([7.0, 1.0, 2.0], ">f8").tofile(path.with_name("v.bin"))
    with h5py.File(path.with_name("s.h5"), "w") as file:
        file["x"] = np.arange(20.0).reshape(4, 5)
    binary = '<DataItem Dimensions="2" Precision="8" Format="Binary" Endian="Big" Seek="8">v.bin</DataItem>'
    source = '<DataItem Dimensions="4 5" Precision="8" Format="HDF">s.h5:/x</DataItem>'
    chosen = item([[2, 1], [1, 2], [1, 2]], "Int")
    slab = f'<DataItem ItemType="HyperSlab" Dimensions="2">{chosen}{source}</DataItem>'
    named = {"b": binary, "s": slab}
    parts = [f'<Attribute Name="{n}" Center="Cell">{data}</Attribute>' for n, data in named.items()]
    (piece,) = write(path, uniform(QUADS, PLANE, *parts)).load(0)
    assert piece.cell_data["b"].tolist() == [1.0, 2.0]
    assert piece.cell_data["s"].tolist() == [11.0, 13.0]


def test_the_mesh_is_read_once_when_all_steps_share_it(path, monkeypatch):
    grids = [uniform(f'<Time Value="{n}"/>', QUADS, PLANE, scalar("p", [n, n])) for n in (1.0, 2.0)]
    export = write(path, collection("Temporal", *grids))
    assert export.load(0)[0].nodes is not None
    calls = []
    monkeypatch.setattr(xdmf, "read_mesh", lambda *_: calls.append(1))
    export.load(1)
    assert not calls


def vtk_write(data, path):
    from vtkmodules.vtkIOHDF import vtkHDFWriter

    writer = vtkHDFWriter()
    writer.SetInputDataObject(data)
    writer.SetFileName(str(path))
    writer.Write()


def plane(**more):
    pyvista = pytest.importorskip("pyvista")
    mesh = pyvista.Plane(i_resolution=4, j_resolution=3, **more)
    mesh.clear_data()
    mesh.cell_data["c"] = np.arange(12.0)
    mesh.point_data["p"] = np.arange(20.0)
    return mesh


def test_polygonal_data_keep_lines_and_the_order_of_their_values(tmp_path):
    pyvista = pytest.importorskip("pyvista")
    mesh = pyvista.PolyData(plane().points, faces=plane().faces, lines=[2, 0, 1, 3, 1, 2, 3])
    mesh.cell_data["c"] = np.arange(14.0)
    vtk_write(mesh, tmp_path / "a.vtkhdf")
    (piece,) = vtkhdf.open_export(tmp_path / "a.vtkhdf").load(0)
    assert piece.types.tolist() == [3, 4] + [9] * 12
    assert np.array_equal(piece.cell_data["c"], np.arange(14.0))


def test_blocks_carry_the_names_of_the_assembly_and_partitions_come_one_by_one(tmp_path):
    pyvista = pytest.importorskip("pyvista")
    from vtkmodules.vtkCommonDataModel import vtkPartitionedDataSet

    left, right = (plane(center=(x, 0, 0)).cast_to_unstructured_grid() for x in (0, 1))
    vtk_write(pyvista.MultiBlock({"left": left, "right": right}), tmp_path / "blocks.vtkhdf")
    blocks = vtkhdf.open_export(tmp_path / "blocks.vtkhdf").load(0)
    assert [piece.name for piece in blocks] == ["left", "right"]
    parts = vtkPartitionedDataSet()
    for number, grid in enumerate((left, right)):
        grid.cell_data["c"] = np.arange(12.0) + 12 * number
        parts.SetPartition(number, grid)
    vtk_write(parts, tmp_path / "parts.vtkhdf")
    pieces = vtkhdf.open_export(tmp_path / "parts.vtkhdf").load(0)
    assert [piece.cell_data["c"][0] for piece in pieces] == [0.0, 12.0]
    assert np.array_equal(pieces[1].points, right.points)


def series(step_mesh, path):
    """A transient file by VTK's writer: ``step_mesh(time)`` at the times 0, 0.5 and 1.5."""
    from vtkmodules.util.vtkAlgorithm import VTKPythonAlgorithmBase
    from vtkmodules.vtkCommonDataModel import vtkDataObject
    from vtkmodules.vtkCommonExecutionModel import vtkStreamingDemandDrivenPipeline as Pipeline
    from vtkmodules.vtkIOHDF import vtkHDFWriter

    class Source(VTKPythonAlgorithmBase):
        def __init__(self):
            super().__init__(nInputPorts=0, nOutputPorts=1, outputType=step_mesh(0.0).GetClassName())

        def RequestInformation(self, request, given, out):
            out.GetInformationObject(0).Set(Pipeline.TIME_STEPS(), [0.0, 0.5, 1.5], 3)
            out.GetInformationObject(0).Set(Pipeline.TIME_RANGE(), [0.0, 1.5], 2)
            return 1

        def RequestData(self, request, given, out):
            info = out.GetInformationObject(0)
            time = info.Get(Pipeline.UPDATE_TIME_STEP()) if info.Has(Pipeline.UPDATE_TIME_STEP()) else 0.0
            vtkDataObject.GetData(info).ShallowCopy(step_mesh(time))
            return 1

    source, writer = Source(), vtkHDFWriter()
    writer.SetInputConnection(source.GetOutputPort())
    writer.SetWriteAllTimeSteps(True)
    writer.SetFileName(str(path))
    writer.Write()


def moved(mesh, time, shift):
    mesh = mesh.copy()
    mesh.points = mesh.points + shift * time
    mesh.cell_data["c"] = np.arange(mesh.n_cells) + 100 * time
    return mesh


def thick():
    pyvista = pytest.importorskip("pyvista")
    return pyvista.read(Path(__file__).parent / "samples/ext_poly_cell_lzma.vtu")


@pytest.mark.parametrize("shift", [0.0, 1.0])
@pytest.mark.parametrize("make", [plane, lambda: plane().cast_to_unstructured_grid(), thick])
def test_transient_files_of_vtk_give_back_points_values_and_faces_at_every_step(make, shift, tmp_path):
    from vtkmodules.util.numpy_support import vtk_to_numpy

    mesh = make()
    static = mesh if shift == 0 else None

    def step_mesh(time):
        if static is None:
            return moved(mesh, time, shift)
        same = static.copy(deep=False)
        same.cell_data["c"] = np.arange(mesh.n_cells) + 100 * time
        return same

    series(step_mesh, tmp_path / "a.vtkhdf")
    export = vtkhdf.open_export(tmp_path / "a.vtkhdf")
    assert export.times == (0.0, 0.5, 1.5)
    for step in (2, 0, 1):
        (piece,) = export.load(step)
        expected = step_mesh(export.times[step])
        assert np.array_equal(piece.points, expected.points)
        assert np.array_equal(piece.cell_data["c"], expected.cell_data["c"])
        if piece.faces is not None:
            faces = vtk_to_numpy(expected.GetPolyhedronFaces().GetConnectivityArray())
            assert np.array_equal(piece.faces.face_nodes, faces)


def test_an_image_of_points_becomes_quadrilaterals(tmp_path):
    with h5py.File(tmp_path / "a.vtkhdf", "w") as file:
        root = file.create_group("VTKHDF")
        root.attrs["Version"], root.attrs["Type"] = [2, 0], np.bytes_("ImageData")
        root.attrs["WholeExtent"] = [0, 2, 0, 1, 0, 0]
        root.attrs["Origin"], root.attrs["Spacing"] = [1.0, 2.0, 0.0], [0.5, 0.25, 1.0]
        root.create_group("PointData")["p"] = np.arange(6.0).reshape(1, 2, 3)
        root.create_group("CellData")["c"] = np.arange(4.0).reshape(1, 1, 2, 2)
    (piece,) = vtkhdf.open_export(tmp_path / "a.vtkhdf").load(0)
    assert piece.points[4].tolist() == [1.5, 2.25, 0.0] and piece.types.tolist() == [9, 9]
    assert piece.point_data["p"][4] == 4.0 and piece.cell_data["c"].tolist() == [[0, 1], [2, 3]]


def test_ghost_cells_are_marked_and_not_a_field(tmp_path):
    mesh = plane().cast_to_unstructured_grid()
    mesh.cell_data["vtkGhostType"] = np.array([0, 1, 32] + [0] * 9, np.uint8)
    vtk_write(mesh, tmp_path / "a.vtkhdf")
    (piece,) = vtkhdf.open_export(tmp_path / "a.vtkhdf").load(0)
    assert piece.ghost.tolist() == [False, True, True] + [False] * 9
    assert "vtkGhostType" not in piece.cell_data


def test_overlapping_steps_are_refused(tmp_path):
    from pathlib import Path

    path = copy(Path(__file__).parent / "samples/mixed_cell_series.vtkhdf", tmp_path)
    with h5py.File(path, "r+") as file:
        file["VTKHDF/Steps/CellDataOffsets/p"][1] = 130
    with pytest.raises(FormatError, match="overlap"):
        vtkhdf.open_export(Path(path)).load(0)
