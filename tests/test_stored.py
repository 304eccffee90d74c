"""Arrays are read when they are wanted: only those, and to the same numbers."""

import pickle
import re
import shutil
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest
from whole import whole

from fvcheck import Fluid, inspect_file, open_flow
from fvcheck.errors import FormatError, FvcheckError
from fvcheck.flow import flow_of_export
from fvcheck.formats import hdf5_safe
from fvcheck.formats.registry import open_export
from fvcheck.formats.xml_arrays import ArrayReader
from fvcheck.mesh.stored import Stored, at_rows, stored

SAMPLES = Path(__file__).parent / "samples"
NAMES = sorted(path.name for path in SAMPLES.glob("*.*") if path.suffix not in (".json", ".h5"))
FLUID = Fluid(density=1.2, viscosity=0.01)


def read(export):
    try:
        return flow_of_export(export, fluid=FLUID)
    except FvcheckError as error:
        return str(error)


@pytest.mark.parametrize("name", NAMES)
def test_a_flow_of_wanted_arrays_is_that_of_all_arrays(name):
    export = open_export(SAMPLES / name)
    lazy = read(export)
    eager = read(replace(export, load=lambda step: whole(export.load(step))))
    if isinstance(lazy, str):
        assert lazy == eager
        return
    assert lazy.hints == eager.hints
    assert list(lazy.fields) == list(eager.fields)
    for role, field in lazy.fields.items():
        assert type(field.values) is np.ndarray
        assert field.values.dtype == eager.fields[role].values.dtype
        np.testing.assert_array_equal(field.values, eager.fields[role].values, strict=True)
        np.testing.assert_array_equal(field.rim, eager.fields[role].rim)
    for part in ("points", "offsets", "nodes"):
        np.testing.assert_array_equal(getattr(lazy.mesh, part), getattr(eager.mesh, part), strict=True)


def with_another_array(tmp_path, values):
    """The text sample with one more array at points that no role has."""
    text = (SAMPLES / "tri_point_ascii.vtu").read_text()
    more = f'<DataArray type="Float64" Name="residual" format="ascii">{values}</DataArray></PointData>'
    path = tmp_path / "a.vtu"
    path.write_text(text.replace("</PointData>", more, 1))
    return path


def test_an_array_without_a_role_is_never_decoded(tmp_path, monkeypatch):
    points = int(re.search(r'NumberOfPoints="(\d+)"', (SAMPLES / "tri_point_ascii.vtu").read_text())[1])
    path = with_another_array(tmp_path, "1.0 " * points)
    decoded = []
    values = ArrayReader.values
    monkeypatch.setattr(
        ArrayReader,
        "values",
        lambda self, element, tuples: (
            decoded.append(element.attributes.get("Name", "")) or values(self, element, tuples)
        ),
    )
    open_flow(path, fluid=FLUID)
    assert "residual" not in decoded
    assert len(decoded) == len(set(decoded))  # and nothing twice
    decoded.clear()
    assert "residual" in {facts.row.name for facts in inspect_file(path, fluid=FLUID).arrays}
    assert "residual" in decoded


# Format -> where a pressure lies in the HDF5 file of its sample, and where one more array is put.
MORE = {
    "vtkhdf": ("/VTKHDF/CellData/p", "/VTKHDF/CellData/residual"),
    "cgns": ("/Base/Zone1/FlowSolution#CC/Pressure", "/Base/Zone1/FlowSolution#CC/residual"),
    "xdmf": ("/d3", "/residual"),
}


@pytest.mark.parametrize("ending", MORE)
def test_a_dataset_without_a_role_is_never_read(ending, tmp_path, monkeypatch):
    for name in (f"poly_cell.{ending}", "poly_cell.h5"):
        shutil.copy(SAMPLES / name, tmp_path)
    path = tmp_path / f"poly_cell.{ending}"
    source, target = MORE[ending]
    with h5py.File(tmp_path / "poly_cell.h5" if ending == "xdmf" else path, "r+") as file:
        file.copy(source, target)
    if ending == "xdmf":
        grid, end = path.read_text(), "</Grid>"
        attribute = grid[grid.index('<Attribute Name="p"') : grid.index('<Attribute Name="T"')]
        attribute = attribute.replace('"p"', '"residual"').replace("/d3", "/residual")
        path.write_text(grid.replace(end, attribute + end))
    names = []
    read_dataset = hdf5_safe.read
    monkeypatch.setattr(
        hdf5_safe, "read", lambda data, *rest: names.append(data.name) or read_dataset(data, *rest)
    )
    open_flow(path, fluid=FLUID)
    assert any(name.startswith(source) for name in names)
    assert not any("residual" in name for name in names)
    inspect_file(path, fluid=FLUID)
    assert any("residual" in name for name in names)


def test_damage_is_told_where_the_array_is_wanted_and_only_there(tmp_path):
    path = with_another_array(tmp_path, "1.0 abc")
    assert open_flow(path, fluid=FLUID).fields
    with pytest.raises(FormatError, match="array 'residual'"):
        open_flow(path, fluid=FLUID, fields={"scalar:r": "residual"})
    with pytest.raises(FormatError, match="array 'residual'"):
        inspect_file(path, fluid=FLUID)


def test_a_file_written_anew_between_mesh_and_field_is_refused(tmp_path):
    path = with_another_array(tmp_path, "")
    (piece,) = open_export(path).load(0)
    path.write_text(path.read_text() + "\n")
    with pytest.raises(FormatError, match="written anew"):
        np.asarray(piece.point_data["p"])
    path.unlink()
    with pytest.raises(FormatError, match="written anew"):
        np.asarray(piece.point_data["T"])


def test_an_array_that_the_memory_cannot_hold_is_refused_in_one_line():
    def give():
        raise MemoryError

    with pytest.raises(FormatError, match="not enough memory"):
        np.asarray(stored((10**12,), np.dtype(float), give))


def test_a_stored_array_is_read_once_and_behaves_as_what_it_stands_for():
    reads = []

    def give():
        reads.append(1)
        return np.arange(12.0).reshape(6, 2)

    array = stored((6, 2), np.dtype(float), give)
    assert isinstance(array, Stored)
    assert (array.shape, array.ndim, array.size, len(array)) == ((6, 2), 2, 12, 6)
    few = at_rows(array, np.array([True, False, False, True, False, False]))
    assert few.shape == (2, 2)
    assert not reads
    assert np.array_equal(few, [[0, 1], [6, 7]])
    assert len(reads) == 1  # for the rows, and not kept
    assert np.array_equal(array + 1.0, np.arange(12.0).reshape(6, 2) + 1.0)
    assert array.max() == 11.0
    assert (array == 3.0).sum() == 1
    assert len(reads) == 2
    assert type(pickle.loads(pickle.dumps(array))) is np.ndarray
