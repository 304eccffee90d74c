"""The fits of a sampler, from the geometry of the mesh about its centres."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.mesh.mesh import Mesh
from fvcheck.sampling.sampler import DEGREES, HEAVY, Known, NodeFits, Sampler

Array = np.ndarray

# Rings of cells a fit may reach for. Thin strips of cells need more than the
# three of an open mesh; beyond the last the data are too far to matter.
_RINGS = (3, 5)

# How many further rings a fit may take in where those that hold enough data do
# not determine it well (corners and sides of even grids) before its degree falls.
_MORE_RINGS = 2

# Equations wanted per unknown, to keep the fit from following single values.
_SURPLUS = 1.5


def compile_sampler(
    mesh: Mesh,
    centres: Array,
    location: str,
    *,
    averages: bool = True,
    axis: int | None = None,
    known: Known | None = None,
    degrees: tuple[int, ...] = DEGREES,
) -> Sampler:
    """Fit operators about ``centres`` ((c,) mesh points) for data at ``location`` ("point" or "cell").

    averages : a cell value is the average over the cell; else the value at its centroid
    axis : of an axisymmetric run, the coordinate along it: averages are then over
        the body of revolution, with the weight r
    known : where values are known beside cell data; ignored for point data
    """
    few, most = _RINGS
    settings = mesh, centres, location, averages, axis, known, degrees
    sampler = _compile(*settings, rings=few) or _compile(*settings, rings=most)
    assert sampler is not None
    return sampler


def _compile(
    mesh: Mesh,
    centres: Array,
    location: str,
    averages: bool,
    axis: int | None,
    known: Known | None,
    degrees: tuple[int, ...],
    *,
    rings: int,
) -> Sampler | None:
    """The sampler from so many rings of cells; None where they do not hold enough and there are more."""
    from fvcheck.kernels import blocks, fits, neighbours, threads

    threads.use_for(HEAVY * len(centres))
    near, reached = blocks.grow_rings(mesh.points, mesh.offsets, mesh.nodes, mesh.boxes, centres, rings)
    local_cells, local_points = np.flatnonzero(near > 0), np.flatnonzero(reached > 0)
    threads.use_for(len(local_cells))
    local_offsets, local_nodes = blocks.renumber(
        mesh.offsets, mesh.nodes, local_cells, local_points, mesh.n_points
    )
    at_points = location == "point"
    used = _Used.of(None if at_points else known, local_cells, len(local_points))
    points = np.concatenate([mesh.points[local_points], used.places])
    point_first, point_cells = neighbours.cells_of_points(local_offsets, local_nodes, len(local_points))
    local_centres = np.searchsorted(local_points, centres)
    short = False

    def gather(about: Array, targets: Array) -> tuple[Array, Array, Array]:
        nonlocal short
        first, entries, sizes, unmet = neighbours.stencils(
            local_offsets,
            local_nodes,
            point_first,
            point_cells,
            used.first,
            used.numbers,
            about,
            at_points,
            targets,
            rings,
        )
        short = short or unmet
        return first, entries, sizes

    def fit(about: Array, stencil: tuple[Array, Array, Array], chosen: tuple[int, ...]) -> list[NodeFits]:
        begin, entries, sizes = stencil
        threads.use_for(HEAVY * len(chosen) * len(about))
        row_first, columns, operator, frames, reached = fits.fit_points(
            points,
            local_offsets,
            local_nodes,
            about,
            begin,
            entries,
            sizes,
            np.array(chosen),
            at_points,
            averages,
            -1 if axis is None else 1 - axis,
        )
        if not at_points:
            columns = np.where(columns >= 0, columns, len(local_cells) + (-1 - columns - len(local_points)))
        return [
            NodeFits(
                row_first[k],
                columns,
                operator[: fits.TERMS[degree]],
                np.ascontiguousarray(frames[:, k]),
                np.ascontiguousarray(reached[:, k]),
            )
            for k, degree in enumerate(chosen)
        ]

    fitted = tuple(degree for degree in degrees if not (at_points and degree == 1))
    targets = np.array([_wanted(degree, at_points) for degree in fitted])
    stencil = gather(local_centres, np.tile(targets, (len(local_centres), 1)))
    compiled = {1: _plain_values(local_centres)} if at_points else {}
    for k, (degree, found) in enumerate(zip(fitted, fit(local_centres, stencil, fitted))):
        size = stencil[2][:, k].copy()
        for _ in range(_MORE_RINGS):
            weak = np.flatnonzero(found.reached < degree)
            if len(weak) == 0:
                break
            wider = gather(local_centres[weak], size[weak, None] + 1)
            (again,) = fit(local_centres[weak], wider, (degree,))
            size[weak] = wider[2][:, 0]
            better = again.reached > found.reached[weak]
            found = _merged(found, again, weak[better], np.flatnonzero(better))
        compiled[degree] = found
    if short and rings < _RINGS[-1]:
        return None
    centre_of = np.zeros(mesh.n_points, np.int32)
    centre_of[centres] = np.arange(len(centres))
    rim = np.zeros(mesh.n_points, bool)
    rim[mesh.boundary.edges] = True
    return Sampler(
        location=location,
        mesh_points=mesh.points,
        centre_of=centre_of,
        centres=local_centres,
        local_points=local_points,
        local_cells=local_cells,
        spots=used.rows,
        spot_cells=used.cells,
        rim=rim[local_points],
        offsets=local_offsets,
        nodes=local_nodes,
        fits=compiled,
    )


@dataclass(frozen=True, eq=False)
class _Used:
    """The known spots within a neighbourhood; they are numbered beyond its points.

    rows : which of the known spots; cells, places : of each;
    numbers[first[c]:first[c+1]] : those of local cell c
    """

    rows: Array
    cells: Array
    places: Array
    first: Array
    numbers: Array

    @classmethod
    def of(cls, known: Known | None, local_cells: Array, n_points: int) -> _Used:
        if known is None:
            known = Known(np.empty(0, np.int64), np.empty((0, 2)))
        at = np.minimum(np.searchsorted(local_cells, known.cells), len(local_cells) - 1)
        rows = np.flatnonzero(local_cells[at] == known.cells)
        rows = rows[np.argsort(at[rows], kind="stable")]
        count = np.bincount(at[rows], minlength=len(local_cells))
        return cls(
            rows=rows,
            cells=at[rows],
            places=known.places[rows],
            first=np.concatenate([[0], np.cumsum(count)]),
            numbers=n_points + np.arange(len(rows)),
        )


def _plain_values(centres: Array) -> NodeFits:
    """The points' own values: with them the blend is linear interpolation."""
    count = len(centres)
    frames = np.broadcast_to(np.eye(2), (count, 2, 2)).copy()
    return NodeFits(np.arange(count + 1), centres, np.ones((1, count)), frames, np.ones(count, np.int64))


def _wanted(degree: int, at_points: bool) -> int:
    from fvcheck.kernels.fits import TERMS

    unknowns = TERMS[degree] - (1 if at_points else 0)
    return int(np.ceil(_SURPLUS * unknowns))


def _merged(one: NodeFits, other: NodeFits, to: Array, source: Array) -> NodeFits:
    """The fits ``one`` with rows ``to`` taken from the rows ``source`` of ``other``."""
    if len(to) == 0:
        return one
    total = len(one.columns)
    begin, length = one.row_first[:-1].copy(), np.diff(one.row_first)
    begin[to] = total + other.row_first[source]
    length[to] = np.diff(other.row_first)[source]
    row_first = np.concatenate([[0], np.cumsum(length)])
    take = np.repeat(begin - row_first[:-1], length) + np.arange(row_first[-1])
    frames, reached = one.frames.copy(), one.reached.copy()
    frames[to], reached[to] = other.frames[source], other.reached[source]
    return NodeFits(
        row_first,
        np.concatenate([one.columns, other.columns])[take],
        np.ascontiguousarray(np.concatenate([one.operator, other.operator], axis=1)[:, take]),
        frames,
        reached,
    )
