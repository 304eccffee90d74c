"""Partitioned files opened near surfaces: the digits of the whole, read here, in processes or by Dask."""

import os
from functools import partial

import numpy as np
import pytest
from test_near import data, export, mesh, numbers

import fvcheck
from fvcheck.balancing import balance_all
from fvcheck.flow import flow_of_export
from fvcheck.formats.registry import open_export
from fvcheck.mesh.near import Cutter
from fvcheck.opening import _part, open_near
from fvcheck.tasks import run_tasks

FLUID = fvcheck.Fluid(density=1.2, viscosity=0.02)
DRAWN = (
    fvcheck.ControlSurface.circle(0.5, 0.52, 0.4, name="across all pieces"),
    fvcheck.ControlSurface.box(0.11, 0.13, 0.36, 0.37, name="round the hole"),
    fvcheck.ControlSurface.box(0.6, 0.55, 1.2, 1.1, name="partly outside"),
    fvcheck.ControlSurface.line([(0.05, 0.9), (0.4, 0.93)], name="line"),
)


def rows(flow, surfaces, laws):
    return numbers(balance_all(flow, surfaces, laws).to_dict())


@pytest.fixture(scope="module")
def parts():
    points, cells = mesh(200)
    return {at: export(points, cells, 2, at) for at in ("point", "cell")}


@pytest.fixture(scope="module")
def file(tmp_path_factory):
    """Nine pieces of a mesh with a hole as a PVTU file that VTK's writers made."""
    import pyvista

    folder = tmp_path_factory.mktemp("parts")
    points, cells = mesh(90)
    listed = ""
    for number, piece in enumerate(export(points, cells, 3, "point").load(0)):
        nodes = piece.nodes.reshape(-1, 3)
        lists = np.column_stack([np.full(len(nodes), 3), nodes]).ravel()
        grid = pyvista.UnstructuredGrid(lists, piece.types, piece.points)
        grid.point_data.update(data(piece.points))
        grid.save(folder / f"{number}.vtu")
        listed += f'<Piece Source="{number}.vtu"/>'
    path = folder / "all.pvtu"
    path.write_text(
        '<?xml version="1.0"?><VTKFile type="PUnstructuredGrid" version="0.1"><PUnstructuredGrid>'
        '<PPoints><PDataArray type="Float64" NumberOfComponents="3"/></PPoints>'
        '<PPointData><PDataArray type="Float64" Name="U" NumberOfComponents="3"/>'
        f'<PDataArray type="Float64" Name="p"/></PPointData>{listed}</PUnstructuredGrid></VTKFile>'
    )
    return path


@pytest.mark.parametrize("at", ["point", "cell"])
def test_cells_inside_are_dropped_where_no_law_wants_them_and_no_digit_changes(parts, at):
    laws = ["mass", "momentum"]
    whole = flow_of_export(parts[at], fluid=FLUID)
    flow = open_near(parts[at], DRAWN, laws, fluid=FLUID)
    assert flow.mesh.hollow
    assert flow.mesh.left_out > 0.25 * whole.mesh.n_cells
    assert rows(flow, DRAWN, laws) == rows(whole, DRAWN, laws)


def test_gravity_is_the_same_all_over_and_needs_no_cells_inside(parts):
    fluid = fvcheck.Fluid(density=1.2, viscosity=0.02, gravity=(0.0, -9.81))
    flow = open_near(parts["cell"], DRAWN[:1], ["momentum"], fluid=fluid)
    assert flow.mesh.hollow
    whole = flow_of_export(parts["cell"], fluid=fluid)
    assert rows(flow, DRAWN[:1], ["momentum"]) == rows(whole, DRAWN[:1], ["momentum"])


def test_cells_inside_are_kept_for_a_law_that_integrates_over_them(parts):
    laws = ["mass", "kinetic-energy"]
    flow = open_near(parts["point"], DRAWN, laws, fluid=FLUID)
    assert flow.mesh.left_out and not flow.mesh.hollow
    whole = flow_of_export(parts["point"], fluid=FLUID)
    for (name, value), (other_name, other) in zip(
        rows(flow, DRAWN, laws), rows(whole, DRAWN, laws), strict=True
    ):
        assert name == other_name
        if isinstance(value, float):
            # The same cells in the same order: sums over other numbers of cells round otherwise.
            assert value == pytest.approx(other, rel=1e-9, abs=1e-13), name
        else:
            assert value == other, name


def test_a_flow_without_the_cells_inside_refuses_laws_that_need_them(parts):
    flow = open_near(parts["point"], DRAWN[:1], ["mass"], fluid=FLUID)
    with pytest.raises(fvcheck.SurfaceError, match="over which a law integrates"):
        fvcheck.balance(flow, DRAWN[0], ["kinetic-energy"])


def test_the_default_surfaces_need_the_boundary_and_the_places_around_bodies_only(parts):
    laws = ["mass", "momentum"]
    flow = open_near(parts["point"], None, laws, fluid=FLUID)
    assert flow.mesh.hollow and flow.mesh.left_out
    whole = flow_of_export(parts["point"], fluid=FLUID)
    assert rows(flow, None, laws) == rows(whole, None, laws)


def test_domain_and_patches_with_a_law_over_the_volume_are_read_whole(parts):
    surfaces = [fvcheck.ControlSurface.domain(), fvcheck.ControlSurface.patch("body-1")]
    flow = open_near(parts["point"], surfaces, ["kinetic-energy"], fluid=FLUID)
    assert flow.mesh.left_out == 0
    flow = open_near(parts["point"], surfaces[1:], ["mass"], fluid=FLUID)
    assert flow.mesh.left_out > 0
    assert fvcheck.balance(flow, surfaces[1], ["mass"]).rows


@pytest.mark.parametrize("where", ["processes", "dask"])
def test_pieces_read_elsewhere_give_the_same_digits(file, where, request):
    spread = {"workers": 2} if where == "processes" else {"scheduler": request.getfixturevalue("scheduler")}
    laws = ["mass", "momentum"]
    whole = flow_of_export(open_export(file), fluid=FLUID)
    for surfaces in (DRAWN, None):
        flow = open_near(open_export(file), surfaces, laws, fluid=FLUID, **spread)
        assert flow.mesh.left_out > 0
        assert rows(flow, surfaces, laws) == rows(whole, surfaces, laws)


def _dies_once(marker, path, cutter, number):
    """As the reading of a part, but the process that reads the fourth one is killed first."""
    if number == 3 and not marker.exists():
        marker.touch()
        os.kill(os.getpid(), 9)
    return _part(path, 0, cutter, number)


@pytest.mark.parametrize("where", ["processes", "dask"])
def test_a_worker_that_is_killed_while_it_reads_is_survived(file, where, request, tmp_path):
    spread = {"workers": 2} if where == "processes" else {"scheduler": request.getfixturevalue("scheduler")}
    cutter = Cutter.of(DRAWN, "auto", False)
    here = run_tasks(partial(_part, str(file), 0, cutter), range(9))
    there = run_tasks(partial(_dies_once, tmp_path / "died", str(file), cutter), range(9), **spread)
    assert (tmp_path / "died").exists()
    for mine, theirs in zip(here, there, strict=True):
        assert [p.types.tobytes() for p in mine] == [p.types.tobytes() for p in theirs]
        assert [p.points.tobytes() for p in mine] == [p.points.tobytes() for p in theirs]
        for one, other in zip(mine, theirs, strict=True):
            assert all(
                np.array_equal(one.point_data[name], other.point_data[name]) for name in one.point_data
            )


def test_a_part_that_cannot_be_read_elsewhere_is_told_as_here(file, tmp_path):
    text = file.read_text().replace('Source="5.vtu"', 'Source="gone.vtu"')
    for source in file.parent.glob("*.vtu"):
        (tmp_path / source.name).write_bytes(source.read_bytes())
    (tmp_path / "all.pvtu").write_text(text)
    for spread in ({}, {"workers": 2}):
        with pytest.raises(fvcheck.FormatError, match=r"gone\.vtu"):
            open_near(open_export(tmp_path / "all.pvtu"), DRAWN, ["mass"], fluid=FLUID, **spread)


def test_forces_need_the_boundary_first_and_then_what_lies_around_the_body(file):
    from fvcheck.routes.region import surfaces_near

    asked = {"wake_line": fvcheck.ControlSurface.line([(0.45, 0.05), (0.45, 0.45)])}
    whole = fvcheck.forces(flow_of_export(open_export(file), fluid=FLUID), **asked)
    for spread in ({}, {"workers": 2}):
        flow = open_near(
            open_export(file), partial(surfaces_near, **asked), inside=True, fluid=FLUID, **spread
        )
        assert flow.mesh.left_out > 0 and not flow.mesh.hollow
        found = numbers(fvcheck.forces(flow, **asked).to_dict())
        assert len(found) == len(numbers(whole.to_dict()))
        for (name, value), (other_name, other) in zip(found, numbers(whole.to_dict()), strict=True):
            assert name == other_name
            if isinstance(value, float):
                # Cells of a band are the same ones, summed with the same neighbours in other places.
                assert value == pytest.approx(other, rel=1e-9, abs=1e-12), name
            else:
                assert value == other, name


def test_the_forces_command_reads_a_partitioned_file_near_the_body(file, capsys):
    from fvcheck.cli.app import run

    words = ["forces", str(file), "--density", "1.2", "--viscosity", "0.02", "--json", "-"]
    texts = []
    for more in ([], ["--workers", "2"]):
        assert run([*words, *more]) == 0
        texts.append(capsys.readouterr().out)
    assert texts[0] == texts[1]
