"""Compiled polynomial reconstruction: data at points or in cells → values and gradients anywhere.

About each corner point of a triangle that is sampled stands a polynomial,
fitted by weighted least squares to the data around it (design of the stencils:
patch recovery, Zienkiewicz & Zhu 1992; Zhang & Naga 2005; cell averages enter
through their moments, k-exact reconstruction, Barth & Frederickson 1990). In
the triangle the three polynomials are blended with barycentric weights:
continuous, exact for polynomials of the degree. Degree 1 is plain linear
interpolation, of the point values or of values fitted to the cells around.

Fits depend on geometry alone. They are compiled once and applied to any field
of any time step; a blend of three is evaluated where it is needed, so the
cost is that of the points, not of the quadrature.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from fvcheck.mesh.mesh import Mesh

Array = np.ndarray

DEGREES = (1, 2, 3)

# In place of a degree: the cubics of a triangle, each taken where the others count
# (`Sampler.crosswise`). A second opinion of the same order.
CROSS = 4

# Rings of cells a fit may reach for. Thin strips of cells need more than the
# three of an open mesh; beyond the last the data are too far to matter.
_RINGS = (3, 5)

# How many further rings a fit may take in where those that hold enough data do
# not determine it well (corners and sides of even grids) before its degree falls.
_MORE_RINGS = 2

# A fit, and an evaluation, are worth so many items of a simple loop.
_HEAVY, _LIGHT = 30, 6

# Equations wanted per unknown, to keep the fit from following single values.
_SURPLUS = 1.5


class Known(NamedTuple):
    """Spots whose value is known beside cell data: on no-slip walls, on patches with data of their own.

    cells, places : (r,) mesh cells, (r, 2) places on their border
    """

    cells: Array
    places: Array


class NodeFits(NamedTuple):
    """Fits of one degree: coefficient i about centre j is Σ operator[i, s]·data[columns[s]]
    over s in row_first[j]:row_first[j+1]. See `fvcheck.kernels.fits.fit_points`.
    """

    row_first: Array
    columns: Array
    operator: Array
    frames: Array
    reached: Array


@dataclass(frozen=True, eq=False)
class Sampler:
    """Fits about a set of mesh points, for data at one location.

    mesh_points : (n_mesh_points, 2)
    centre_of : (n_mesh_points,) row of each fitted mesh point, 0 elsewhere
    centres : (c,) fitted points, local numbers
    local_points : (p,) mesh number of each local point
    local_cells : (k,) mesh number of each local cell
    spots : (r,) which of the known values the fits use, in the order of their columns
    spot_cells : (r,) local cell of each
    rim : (p,) bool, local points on the domain boundary
    offsets, nodes : the neighbourhood's cells over local points
    fits : degree -> NodeFits; columns index ``[data…, known values…]``
    """

    location: str
    mesh_points: Array
    centre_of: Array
    centres: Array
    local_points: Array
    local_cells: Array
    spots: Array
    spot_cells: Array
    rim: Array
    offsets: Array
    nodes: Array
    fits: dict[int, NodeFits]

    @property
    def sources(self) -> Array:
        """Mesh points or cells whose data the fits use, in the order of their columns."""
        return self.local_points if self.location == "point" else self.local_cells

    def apply(self, degree: int, data: Array, known: Array | None = None) -> Array:
        """Coefficients (c, terms, f) of the fits on data (n_mesh_points or n_mesh_cells, f).

        known : (k, f) values at the spots given to `compile_sampler`
        """
        return self.apply_local(degree, self.gather(data), known)

    def gather(self, data: Array) -> Array:
        """The rows of data (n_mesh_points or n_mesh_cells, f) that the fits use, in double precision."""
        return np.ascontiguousarray(data[self.sources], float)

    def apply_local(self, degree: int, column: Array, known: Array | None = None) -> Array:
        """`apply` on what `gather` gives."""
        from fvcheck.kernels.evaluation import apply_fits
        from fvcheck.kernels.threads import use_for

        fit = self.fits[degree]
        if known is not None:
            column = np.concatenate([column, known[self.spots]])
        use_for(_HEAVY * len(self.centres))
        return apply_fits(fit.row_first, fit.columns, fit.operator, column)

    def ranges(self, column: Array, known: Array | None = None) -> tuple[Array, Array]:
        """Smallest and largest datum in two rings of cells around each fitted point: two (c, f) arrays.

        column : what `gather` gives
        """
        from fvcheck.kernels.neighbours import ring_range

        at_points = self.location == "point"
        low, high = ring_range(self.offsets, self.nodes, len(self.local_points), at_points, column)
        if known is not None:
            # A spot counts for all points of its cell.
            begin, end = self.offsets[self.spot_cells], self.offsets[self.spot_cells + 1]
            where = np.concatenate([np.empty(0, np.int64), *(self.nodes[a:b] for a, b in zip(begin, end))])
            value = np.repeat(known[self.spots], end - begin, axis=0)
            np.minimum.at(low, where, value)
            np.maximum.at(high, where, value)
        low, _ = ring_range(self.offsets, self.nodes, len(low), True, low)
        _, high = ring_range(self.offsets, self.nodes, len(high), True, high)
        return low[self.centres], high[self.centres]

    def within(self, points: Array, rings: int) -> Array:
        """(n_mesh_points,) bool: points within so many rings of cells of the given mesh points."""
        from fvcheck.kernels.neighbours import mark_rings

        mark = np.zeros(len(self.local_points), np.uint8)
        mark[np.isin(self.local_points, points)] = 1
        mark_rings(self.offsets, self.nodes, mark, rings)
        out = np.zeros(len(self.mesh_points), bool)
        out[self.local_points] = mark > 0
        return out

    def evaluate(
        self, degree: int, coefficients: Array, triangle: Array, places: Array
    ) -> tuple[Array, Array, Array]:
        """Values (q, f), gradients (q, f, 2) and disagreement of the corners' polynomials (q, f).

        places (q, 2) in triangles (q, 3) of fitted mesh points.
        """
        from fvcheck.kernels.evaluation import evaluate
        from fvcheck.kernels.threads import use_for

        frames = self.fits[degree].frames
        use_for(_LIGHT * len(places))
        return evaluate(self.mesh_points, triangle, self.centre_of, frames, coefficients, places)

    def crosswise(
        self, coefficients: Array, blend: tuple[Array, Array], triangle: Array, places: Array
    ) -> tuple[Array, Array]:
        """The cubics blended with the weights ½(1 − L_i) in place of L_i: values (q, f), gradients (q, f, 2).

        At a corner these are the polynomials of the two others, which did not have
        to meet its datum: how far they miss it tells how good they are, as in
        cross-validation. blend : values and gradients of `evaluate`
        """
        from fvcheck.kernels.crosswise import corner_means
        from fvcheck.kernels.threads import use_for

        frames = self.fits[DEGREES[-1]].frames
        use_for(_LIGHT * len(places))
        means = corner_means(self.mesh_points, triangle, self.centre_of, frames, coefficients, places)
        value, gradient = (1.5 * mean - 0.5 * plain for mean, plain in zip(means, blend))
        return value, gradient


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

    threads.use_for(_HEAVY * len(centres))
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
        threads.use_for(_HEAVY * len(chosen) * len(about))
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
