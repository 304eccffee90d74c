"""Polynomial reconstruction: data at points or in cells → values and gradients anywhere.

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

Array = np.ndarray

DEGREES = (1, 2, 3)

# In place of a degree: the cubics of a triangle, each taken where the others count
# (`Sampler.crosswise`). A second opinion of the same order.
CROSS = 4

# A fit, and an evaluation, are worth so many items of a simple loop.
HEAVY, _LIGHT = 30, 6


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
        use_for(HEAVY * len(self.centres))
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
