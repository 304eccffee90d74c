"""Partitioned exports read piece by piece: the numbers of the whole file, with a part of its cells held."""

from __future__ import annotations

from functools import partial
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

import fvcheck
from fvcheck.formats.check import check_piece
from fvcheck.mesh.piece import Export, NamedFaces, Piece

FLUID = fvcheck.Fluid(density=1.2, viscosity=0.02)
SURFACES = (
    fvcheck.ControlSurface.circle(0.52, 0.47, 0.08, name="cut by seams"),
    fvcheck.ControlSurface.box(0.11, 0.13, 0.36, 0.37, name="round the hole"),
    fvcheck.ControlSurface.box(0.8, 0.7, 1.2, 1.1, name="partly outside"),
    fvcheck.ControlSurface.line([(0.05, 0.9), (0.4, 0.93)], name="line"),
)


def mesh(n=90, seed=3):
    """Irregular triangles over the unit square, a square hole in it."""
    rng = np.random.default_rng(seed)
    x, y = (part.ravel() for part in np.meshgrid(np.linspace(0, 1, n + 1), np.linspace(0, 1, n + 1)))
    number = np.arange((n + 1) ** 2).reshape(n + 1, n + 1)
    a, b, c, d = number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1]
    quads = np.stack([a, b, c, d], axis=-1).reshape(-1, 4)
    middle = np.column_stack([x[quads].mean(axis=1), y[quads].mean(axis=1)])
    quads = quads[~((np.abs(middle - 0.25) < 0.05).all(axis=1))]
    cells = np.concatenate([quads[:, [0, 1, 2]], quads[:, [0, 2, 3]]])
    free = (np.minimum(x, y) > 0) & (np.maximum(x, y) < 1)
    free &= (np.abs(np.column_stack([x, y]) - 0.25) > 0.08).any(axis=1)
    x, y = (part + free * rng.uniform(-0.2, 0.2, len(x)) / n for part in (x, y))
    return np.column_stack([x, y, 0 * x]), cells


def data(points):
    x, y = 2 * np.pi * points[:, 0], 2 * np.pi * points[:, 1]
    velocity = np.column_stack([np.sin(x) * np.cos(y), -np.cos(x) * np.sin(y), 0 * x])
    return {"U": velocity, "p": 0.25 * (np.cos(2 * x) + np.cos(2 * y))}


def part(points, cells, at, patch=None):
    used = np.unique(cells)
    place = points[used]
    centres = points[cells].mean(axis=1)
    patches = {}
    if patch is not None:
        low = np.flatnonzero(place[:, 1] == 0.0)
        low = low[np.argsort(place[low, 0])]
        ends = np.column_stack([low[:-1], low[1:]])
        patches = {patch: NamedFaces(np.arange(0, 2 * len(ends) + 1, 2), ends.ravel())}
    return check_piece(
        Piece(
            place,
            np.full(len(cells), 5, np.uint8),
            np.arange(0, cells.size + 1, 3),
            np.searchsorted(used, cells).ravel(),
            data(place) if at == "point" else {},
            data(centres) if at == "cell" else {},
            patches=patches,
        ),
        "test",
    )


def export(points, cells, k, at, patch=None):
    """The mesh in k × k pieces, cell by cell where their middles lie."""
    middle = points[cells].mean(axis=1)
    column, row = (np.minimum((middle[:, i] * k).astype(int), k - 1) for i in (0, 1))
    order = np.argsort(row * k + column, kind="stable")
    bounds = np.searchsorted((row * k + column)[order], np.arange(k * k + 1))
    pieces = [part(points, cells[order[a:b]], at, patch) for a, b in pairwise(bounds)]

    return Export(
        Path("test"),
        "test",
        lambda step: pieces,
        parts=lambda step: [partial(list, [piece]) for piece in pieces],
    )


def rows(flow, surfaces=SURFACES):
    result = fvcheck.balancing.balance_all(flow, surfaces, ["mass", "momentum", "kinetic-energy"])
    return numbers(result.to_dict())


def numbers(value, at=""):
    if isinstance(value, dict):
        return [found for name, part in value.items() for found in numbers(part, f"{at}/{name}")]
    if isinstance(value, list | tuple):
        return [found for i, part in enumerate(value) for found in numbers(part, f"{at}/{i}")]
    return [(at, value)]


@pytest.mark.parametrize("at", ["point", "cell"])
@pytest.mark.parametrize("k", [2, 3])
def test_pieces_read_one_by_one_give_the_numbers_of_the_whole(at, k):
    import fvcheck.balancing  # noqa: F401
    from fvcheck.flow import flow_of_export

    points, cells = mesh()
    parts = export(points, cells, k, at)
    whole = flow_of_export(parts, fluid=FLUID)
    near = flow_of_export(parts, fluid=FLUID, near=SURFACES)
    assert near.mesh.left_out > 0
    assert near.mesh.n_cells + near.mesh.left_out == whole.mesh.n_cells == len(cells)
    assert near.mesh.boundary.names == whole.mesh.boundary.names
    assert near.mesh.bodies == whole.mesh.bodies == ("body-1",)
    assert len(near.mesh.boundary.edges) == len(whole.mesh.boundary.edges)
    for (name, value), (other_name, other) in zip(rows(near), rows(whole), strict=True):
        assert name == other_name
        if isinstance(value, float):
            # The same cells in the same order: only sums over other numbers of cells round otherwise.
            assert value == pytest.approx(other, rel=1e-9, abs=1e-13), name
        else:
            assert value == other, name


def test_patches_that_a_file_names_are_whole_in_cut_down_pieces():
    from fvcheck.flow import flow_of_export

    points, cells = mesh(60)
    parts = export(points, cells, 2, "point", patch="floor")
    whole = flow_of_export(parts, fluid=FLUID)
    near = flow_of_export(parts, fluid=FLUID, near=SURFACES[:1])
    assert near.mesh.left_out > 0
    assert near.mesh.boundary.names == whole.mesh.boundary.names
    for name in whole.mesh.boundary.names:
        assert len(near.mesh.patch_edges(name)) == len(whole.mesh.patch_edges(name))


def test_a_surface_that_the_flow_was_not_opened_for_is_refused():
    from fvcheck.flow import flow_of_export

    points, cells = mesh(60)
    near = flow_of_export(export(points, cells, 2, "point"), fluid=FLUID, near=SURFACES[:1])
    for surface in (SURFACES[1], fvcheck.ControlSurface.domain()):
        with pytest.raises(fvcheck.SurfaceError, match="were not kept"):
            fvcheck.balance(near, surface)


def test_surfaces_that_need_the_mesh_to_be_drawn_hold_it_whole():
    from fvcheck.flow import flow_of_export

    points, cells = mesh(60)
    around = fvcheck.ControlSurface.around("body-1", 0.03)
    flow = flow_of_export(export(points, cells, 2, "point"), fluid=FLUID, near=[around])
    assert flow.mesh.left_out == 0
    assert fvcheck.balance(flow, around).rows


@pytest.mark.parametrize("kind", ["pvtu", "vtm", "vtkhdf", "cgns"])
def test_formats_in_several_pieces_stream_the_pieces_that_they_load(kind):
    from fvcheck.formats.registry import open_export

    files = sorted((Path(__file__).parent / "samples").rglob(f"*.{kind}"))
    files = [path for path in files if "bad" not in path.parts]
    assert files
    for path in files:
        export = open_export(path)
        assert export.parts is not None
        for step in {0, export.steps - 1}:
            loaded, streamed = export.load(step), list(export.stream(step))
            assert len(loaded) == len(streamed)
            for one, other in zip(loaded, streamed):
                assert one.name == other.name
                assert np.array_equal(one.points, other.points)
                assert np.array_equal(one.nodes, other.nodes)
                for mine, theirs in ((one.point_data, other.point_data), (one.cell_data, other.cell_data)):
                    assert list(mine) == list(theirs)
                    assert all(np.array_equal(mine[k], theirs[k], equal_nan=True) for k in mine)
