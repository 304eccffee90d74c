"""Later snapshots are read by the rows that the surfaces need, and give the numbers of a whole read."""

from __future__ import annotations

from dataclasses import asdict, replace

import h5py
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import FIELDS
from exact import isentropic_vortex, taylor_green
from exact_data import flow_data
from write_series import write_vtkhdf, write_xdmf

import fvcheck
from fvcheck import ControlSurface, Fluid, FormatError, series
from fvcheck.formats.hdf5_rows import read_rows
from fvcheck.formats.registry import open_export

PI = float(np.pi)
SQUARE = (0.0, 0.0, PI, PI)
TIMES = (0.0, 0.05, 0.15, 0.2, 0.3)
FLUID = Fluid(density=1.0, viscosity=0.5)
SURFACES = [
    ControlSurface.box(0.5, 0.7, 2.1, 2.6, name="box"),
    ControlSurface.circle(1.6, 1.6, 0.6, name="circle"),
    ControlSurface.line([(0.2, 0.3), (2.5, 2.8)], name="line"),
]


def load_from(cells, where):
    def load(time):
        data = flow_data(taylor_green(0.5, time), cells, where)
        u = np.column_stack([data["velocity"], np.zeros(len(data["velocity"]))])
        return {"U": u, "p": data["pressure"], "left alone": data["pressure"] + 1.0}

    return load


def write(path, form, kind, store, cells=None, load=None):
    cells = tm.mixed(SQUARE, 0.15, 1) if cells is None else cells
    load = load or load_from(cells, "point" if kind == "PointData" else "average")
    if form == "vtkhdf":
        return write_vtkhdf(path / "run.vtkhdf", cells, TIMES, load, kind, **store)
    return write_xdmf(path / "run.xdmf", cells, TIMES, load, kind, **store)


def both(file, monkeypatch, surfaces=SURFACES, laws=("mass", "momentum", "kinetic-energy"), **settings):
    """Histories by rows and by whole reads, and how many steps the first one read whole."""
    export = open_export(file)
    loaded = []
    counted = replace(export, load=lambda step: loaded.append(step) or export.load(step))
    by_rows = fvcheck.history(counted, surfaces, list(laws), **settings)
    whole = fvcheck.history(replace(export, rows=None), surfaces, list(laws), **settings)
    return by_rows, whole, len(set(loaded))


def same(one, other):
    """Bit for bit."""
    for a, b in zip(one.entries, other.entries, strict=True):
        for first, second in zip(a.result.ledgers, b.result.ledgers, strict=True):
            assert asdict(first) == asdict(second)
    assert one.totals == other.totals
    assert one.trends == other.trends


@pytest.mark.parametrize("store", [{}, {"chunks": True}, {"compression": "gzip", "shuffle": True}])
@pytest.mark.parametrize("kind", ["PointData", "CellData"])
@pytest.mark.parametrize("form", ["vtkhdf", "xdmf"])
@pytest.mark.parametrize("steady", [False, True])
def test_histories_by_rows_are_those_of_whole_reads(form, kind, store, steady, tmp_path, monkeypatch):
    file = write(tmp_path, form, kind, store)
    by_rows, whole, loaded = both(file, monkeypatch, fluid=FLUID, steady=steady)
    same(by_rows, whole)
    assert loaded == 1


def test_so_are_those_of_a_gas_in_cells(tmp_path, monkeypatch):
    exact = isentropic_vortex()
    cells = tm.triangles(exact.domain, (exact.domain[2] - exact.domain[0]) / 20, 1)
    data = {FIELDS[role]: value for role, value in flow_data(exact, cells, "average").items()}

    def load(time):
        return {name: value * (1.0 + 0.1 * time) for name, value in data.items()}

    file = write(tmp_path, "vtkhdf", "CellData", {}, cells, load)
    x0, y0, x1, y1 = exact.domain
    box = ControlSurface.box(*(np.array([x0, y0]) * 0.4), *(np.array([x1, y1]) * 0.5), name="box")
    by_rows, whole, loaded = both(
        file, monkeypatch, [box], ("mass", "momentum", "total-energy"), fluid=Fluid(**exact.fluid)
    )
    same(by_rows, whole)
    assert loaded == 1


def test_volumes_with_many_cells_take_whole_fields_but_no_mesh(tmp_path, monkeypatch):
    monkeypatch.setattr("fvcheck.volume.MANY_CELLS", 20)
    file = write(tmp_path, "vtkhdf", "PointData", {})
    by_rows, whole, loaded = both(file, monkeypatch, SURFACES[:1], fluid=FLUID)
    same(by_rows, whole)
    assert loaded == 1


def test_only_rows_near_the_surfaces_are_fetched(tmp_path):
    cells = tm.triangles(SQUARE, 0.02, 1)
    file = write(tmp_path, "xdmf", "PointData", {}, cells)
    export = open_export(file)
    seen = []

    def read(step, wanted):
        seen.append({location: (part.names, len(part.rows)) for location, part in wanted.items()})
        return export.rows.read(step, wanted)

    counted = replace(export, rows=replace(export.rows, read=read))
    fvcheck.history(counted, [SURFACES[1]], ["mass", "momentum"], fluid=FLUID, steady=True)
    assert len(seen) == len(TIMES) - 1
    names, count = seen[0]["point"]
    assert set(names) == {"U", "p"}
    assert count < 0.2 * len(cells.points)


def test_a_mesh_that_changes_in_the_file_is_read_again(tmp_path, monkeypatch):
    cells = tm.triangles(SQUARE, 0.15, 1)
    x, y = cells.points.T
    moved = np.column_stack([x + 0.02 * np.sin(x) * np.sin(y), y, 0.0 * x])
    file = write(tmp_path, "xdmf", "PointData", {}, cells)
    with h5py.File(file.with_suffix(".h5"), "a") as heavy:
        heavy["moved"] = moved
    head, *grids = file.read_text().split('<Grid GridType="Uniform">')
    grids[2] = grids[2].replace(":/mesh/points", ":/moved")
    file.write_text('<Grid GridType="Uniform">'.join([head, *grids]))
    by_rows, whole, loaded = both(file, monkeypatch, fluid=FLUID)
    same(by_rows, whole)
    assert by_rows.hints == whole.hints
    assert loaded > 2


def test_arrays_that_come_later_are_seen(tmp_path, monkeypatch):
    cells = tm.triangles(SQUARE, 0.15, 1)
    file = write(tmp_path, "xdmf", "PointData", {}, cells)
    head, *grids = file.read_text().split('<Grid GridType="Uniform">')
    grids[3] = grids[3].replace('"left alone"', '"T"')
    file.write_text('<Grid GridType="Uniform">'.join([head, *grids]))
    by_rows, whole, loaded = both(file, monkeypatch, laws=("mass", "momentum"), fluid=FLUID, steady=True)
    same(by_rows, whole)
    assert loaded == 3  # the first, the one with other arrays, the one after it


def test_nan_near_a_surface_in_a_later_step_is_refused(tmp_path):
    cells = tm.triangles(SQUARE, 0.15, 1)
    plain = load_from(cells, "point")

    def load(time):
        data = plain(time)
        if time == TIMES[3]:
            data["p"] = np.full_like(data["p"], np.nan)
        return data

    file = write(tmp_path, "vtkhdf", "PointData", {}, cells, load)
    with pytest.raises(fvcheck.FieldError, match="no numbers"):
        fvcheck.history(file, SURFACES, ["mass", "momentum"], fluid=FLUID)


def test_a_field_read_in_part_refuses_other_rows(tmp_path):
    file = write(tmp_path, "vtkhdf", "PointData", {})
    run = series.open_series(file, fluid=FLUID)
    first = run.flow(0)
    part = run.flow(1, {"point": np.array([3, 7, 20])})
    whole = fvcheck.open_flow(file, step=1, fluid=FLUID)
    assert part.mesh is first.mesh
    velocity = part.fields["velocity"]
    assert np.array_equal(velocity.at(np.array([20, 3])), whole.fields["velocity"].values[[20, 3]])
    with pytest.raises(IndexError, match="3 points only"):
        velocity.at(np.array([3, 4]))
    with pytest.raises(ValueError, match="whole fields"):
        fvcheck.balance(part, SURFACES[0], ["mass"])


@pytest.mark.parametrize(
    "store",
    [
        {},
        {"chunks": (7, 3)},
        {"chunks": (7, 2)},
        {"chunks": (7, 3), "compression": "gzip"},
        {"chunks": (200, 3)},
    ],
)
@pytest.mark.parametrize("dtype", ["<f8", ">f8", "<f4", ">i2", "?"])
def test_rows_are_those_of_the_whole_dataset(store, dtype, tmp_path):
    rng = np.random.default_rng(0)
    values = (100 * rng.normal(size=(5000, 3))).astype(dtype)
    with h5py.File(tmp_path / "a.h5", "w") as file:
        file.create_dataset("v", data=values, **store)
    with h5py.File(tmp_path / "a.h5") as file:
        for share in (0.001, 0.1, 1.0):
            rows = np.flatnonzero(rng.random(5000) < share)
            found = read_rows(file["v"], "a.h5", rows)
            assert np.array_equal(found, values[rows])
            assert found.dtype == values.dtype.newbyteorder("=") and found.flags.c_contiguous
        assert np.array_equal(read_rows(file["v"], "a.h5", np.array([4999])), values[4999:])


def test_rows_outside_and_files_cut_short_are_refused(tmp_path):
    path = tmp_path / "a.h5"
    with h5py.File(path, "w") as file:
        file["v"] = np.arange(100_000.0)
    with h5py.File(path) as file:
        with pytest.raises(FormatError, match="100000 are there"):
            read_rows(file["v"], path, np.array([5, 100_000]))
        size = path.stat().st_size
        with open(path, "r+b") as raw:
            raw.truncate(size // 2)
        with pytest.raises(FormatError):
            read_rows(file["v"], path, np.array([5, 99_999]))
