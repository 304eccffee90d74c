"""The half-edges of polygons that have no partner."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.mesh.gather import Polygons

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Edges:
    """Open half-edges: half-edge ``open[j]`` runs from ``start[j]`` to ``end[j]`` in cell ``cell[j]``.

    Half-edge h of polygons is that from ``nodes[h]`` to the next node of its cell.
    ``crowded`` (start, end, cell) is one with more than one other on its two
    points, or one that runs the same way, where there is any.
    """

    open: Array
    start: Array
    end: Array
    cell: Array
    crowded: tuple[int, int, int] | None

    def without(self, left: Array) -> Edges:
        """The same without the open half-edges that start at a point marked in ``left`` (n,)."""
        keep = ~left[self.start]
        return Edges(self.open[keep], self.start[keep], self.end[keep], self.cell[keep], self.crowded)


def edges_of(cells: Polygons, n_points: int) -> Edges:
    """Match the half-edges of ``cells`` in linear time."""
    from fvcheck.kernels.edges import open_half_edges

    open_, crowded = open_half_edges(cells.offsets, cells.nodes, n_points)
    worst = None
    if crowded >= 0:
        _, start, end, cell = _described(cells, np.array([crowded]))
        worst = int(start[0]), int(end[0]), int(cell[0])
    return Edges(*_described(cells, open_), worst)


def _described(cells: Polygons, which: Array) -> tuple[Array, Array, Array, Array]:
    """Half-edges with their start, end and cell."""
    cell = np.searchsorted(cells.offsets, which, side="right") - 1
    following = np.where(which + 1 < cells.offsets[cell + 1], which + 1, cells.offsets[cell])
    return which, cells.nodes[which], cells.nodes[following], cell


def points_of(ends: Array, n_points: int) -> Array:
    """Distinct point numbers in ``ends``, ascending, without sorting."""
    mask = np.zeros(n_points, bool)
    mask[ends] = True
    return np.flatnonzero(mask)
