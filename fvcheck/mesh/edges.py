"""The half-edges of polygons and their matches."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.mesh.gather import Polygons

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Edges:
    """Half-edge h runs from ``nodes[h]`` of its polygons to ``end[h]`` in cell ``cell[h]``.

    ``twin[h]`` is the half-edge that runs the other way; see `kernels.edges.twins`.
    """

    cell: Array
    end: Array
    twin: Array

    @property
    def open(self) -> Array:
        """Numbers of the half-edges without a twin."""
        from fvcheck.kernels.edges import ALONE

        return np.flatnonzero(self.twin == ALONE)


def edges_of(cells: Polygons, n_points: int) -> Edges:
    """Match the half-edges of ``cells`` in linear time."""
    from fvcheck.kernels.edges import half_edges, twins

    cell, end = half_edges(cells.offsets, cells.nodes)
    return Edges(cell, end, twins(cells.nodes, end, n_points))


def points_of(ends: Array, n_points: int) -> Array:
    """Distinct point numbers in ``ends``, ascending, without sorting."""
    mask = np.zeros(n_points, bool)
    mask[ends] = True
    return np.flatnonzero(mask)
