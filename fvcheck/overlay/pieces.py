"""The pieces a control volume is made of, each in one mesh triangle."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from fvcheck.errors import MeshError
from fvcheck.mesh.mesh import Mesh

Array = np.ndarray

DRAWN = -1
"""Value of `Overlay.patch` for pieces that the analyst drew inside the fluid."""


@dataclass(frozen=True, eq=False)
class Overlay:
    """Pieces of the border of V, and V itself.

    start, end : (n, 2) piece ends; V lies on the left, so the outward normal
        times the length is (dy, -dx)
    triangle : (n, 3) mesh points of the triangle that holds the piece
    cell : (n,) its mesh cell
    patch : (n,) index into ``mesh.boundary.names``, `DRAWN` for drawn pieces
    winding : (n,) how often V covers the piece (1, except where surfaces overlap)
    whole : (w,) cells that lie entirely inside
    corners : (c, 3, 2) signed triangles that make up the cut part of V
    corner_triangle : (c, 3), corner_cell : (c,), corner_weight : (c,)
    closed : whether there is a volume at all
    """

    start: Array
    end: Array
    triangle: Array
    cell: Array
    patch: Array
    winding: Array
    whole: Array
    corners: Array
    corner_triangle: Array
    corner_cell: Array
    corner_weight: Array
    closed: bool

    @property
    def normals(self) -> Array:
        """(n, 2) outward normal times length."""
        step = self.end - self.start
        return np.column_stack([step[:, 1], -step[:, 0]]) * self.winding[:, None]

    @property
    def lengths(self) -> Array:
        """(n,) piece lengths."""
        return np.hypot(*(self.end - self.start).T)

    @property
    def corner_areas(self) -> Array:
        """(c,) signed areas, weight included: summed with the whole cells they are V's area."""
        a, b, c = self.corners[:, 0], self.corners[:, 1], self.corners[:, 2]
        u, v = b - a, c - a
        return 0.5 * self.corner_weight * (u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0])

    def held_area(self, mesh: Mesh) -> float:
        """Area of V, as far as its cells are held."""
        return float(mesh.areas[self.whole].sum() + self.corner_areas.sum())

    @cached_property
    def area(self) -> float:
        """Area of V, from its border by Green's theorem: of a near mesh the same as of the whole."""
        if len(self.start) == 0:
            return 0.0
        middle = 0.5 * (self.start + self.end) - self.start[0]  # digits are not lost far from the origin
        return float(0.5 * np.einsum("ni,ni->n", middle, self.normals).sum())


_PIECE_FIELDS = ("start", "end", "triangle", "cell", "patch", "winding")


def select(overlay: Overlay, keep: Array) -> Overlay:
    kept = {name: getattr(overlay, name)[keep] for name in _PIECE_FIELDS}
    return replace(overlay, **kept)


def join(first: Overlay, second: Overlay) -> Overlay:
    """Line pieces of both; the volume of the first."""
    both = {name: np.concatenate([getattr(first, name), getattr(second, name)]) for name in _PIECE_FIELDS}
    return replace(first, **both)  # type: ignore[arg-type]


def triangles_of(mesh: Mesh, cells: Array) -> tuple[Array, Array]:
    """Triangles (t, 3) of chosen cells, those of ``cells[j]`` in rows first[j]:first[j+1]; first (c+1,).

    Raises MeshError for a cell whose outline crosses itself: without its
    triangles it would be missing from every sum.
    """
    from fvcheck.kernels.triangulate import triangulate_cells

    triangles, first = triangulate_cells(mesh.points, mesh.offsets, mesh.nodes, cells)
    empty = np.flatnonzero(np.diff(first) == 0)
    if len(empty):
        cell = cells[empty[0]]
        x, y = mesh.points[mesh.nodes[mesh.offsets[cell] : mesh.offsets[cell + 1]]].mean(axis=0)
        raise MeshError(
            f"{len(empty)} cells near the control surface are no simple polygons",
            where=f"cell {cell} near x {x:.6g}, y {y:.6g}",
            mend="Repair the mesh, or keep the surface away from them.",
        )
    return triangles, first


def edge_triangles(mesh: Mesh, chosen: Array) -> tuple[Array, Array]:
    """Boundary edges (e,), those chosen sorted by cell, and the triangle (e, 3) each lies on."""
    cells = np.unique(mesh.boundary.cells[chosen])
    triangles, first = triangles_of(mesh, cells)
    sides = boundary_sides(mesh, cells, triangles, first)
    row, column = np.nonzero(sides >= 0)
    edge = sides[row, column]
    keep = np.isin(edge, chosen)
    return edge[keep], triangles[row[keep]]


def edge_pieces(
    mesh: Mesh, edge: Array, triangle: Array, start: Array, end: Array, whole: Array, closed: bool
) -> Overlay:
    """Pieces start→end (n, 2) of the boundary edges ``edge`` (n,)."""
    none = np.empty(0, np.int64)
    return Overlay(
        start=start,
        end=end,
        triangle=triangle,
        cell=mesh.boundary.cells[edge],
        patch=mesh.boundary.patch[edge],
        winding=np.ones(len(edge), np.int64),
        whole=whole,
        corners=np.empty((0, 3, 2)),
        corner_triangle=np.empty((0, 3), np.int64),
        corner_cell=none,
        corner_weight=none,
        closed=closed,
    )


def boundary_sides(mesh: Mesh, cells: Array, triangles: Array, first: Array) -> Array:
    """(t, 3) number of the boundary edge on each triangle side, or -1."""
    from fvcheck.kernels.overlay import find_sides

    order, sorted_cells = mesh.boundary_by_cell
    low = np.searchsorted(sorted_cells, cells, "left")
    count = np.searchsorted(sorted_cells, cells, "right") - low
    edge_first = np.concatenate([[0], np.cumsum(count)])
    picked = order[np.repeat(low - edge_first[:-1], count) + np.arange(edge_first[-1])]
    local = find_sides(triangles, first, edge_first, mesh.boundary.edges[picked])
    if len(picked) == 0:
        return local
    return np.where(local >= 0, picked[np.maximum(local, 0)], -1)
