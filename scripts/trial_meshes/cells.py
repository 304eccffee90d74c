"""Polygons over points: what every generator returns, and small steps they share."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

Array = np.ndarray
Box = tuple[float, float, float, float]


class Cells(NamedTuple):
    """Counter-clockwise polygons; cell i is ``nodes[offsets[i]:offsets[i+1]]``.

    points (n, 2) float64, offsets (m+1,) int64, nodes (k,) int64
    """

    points: Array
    offsets: Array
    nodes: Array

    @property
    def sizes(self) -> Array:
        """(m,) corners of each cell."""
        return np.diff(self.offsets)

    def polygon(self, i: int) -> Array:
        """(c, 2) corners of cell i."""
        return self.points[self.nodes[self.offsets[i] : self.offsets[i + 1]]]

    @property
    def areas(self) -> Array:
        """(m,) signed areas, from each cell's own first corner to keep digits."""
        first = np.repeat(self.nodes[self.offsets[:-1]], self.sizes)
        a = self.points[self.nodes] - self.points[first]
        b = self.points[self.following()] - self.points[first]
        return 0.5 * np.add.reduceat(a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0], self.offsets[:-1])

    def following(self) -> Array:
        """(k,) the corner after each corner, round its cell."""
        after = np.roll(self.nodes, -1)
        after[self.offsets[1:] - 1] = self.nodes[self.offsets[:-1]]
        return after

    @property
    def centroids(self) -> Array:
        """(m, 2) centres of area."""
        first = self.points[self.nodes[self.offsets[:-1]]]
        origin = np.repeat(first, self.sizes, axis=0)
        a, b = self.points[self.nodes] - origin, self.points[self.following()] - origin
        cross = a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]
        moment = np.add.reduceat((a + b) * cross[:, None], self.offsets[:-1], axis=0)
        return first + moment / (6 * self.areas[:, None])

    def boundary_edges(self) -> Array:
        """(e, 2) edges that only one cell has, cell on their left. Hanging edges count too."""
        edges = np.stack([self.nodes, self.following()], axis=1)
        _, inverse, count = np.unique(np.sort(edges, axis=1), axis=0, return_inverse=True, return_counts=True)
        return edges[count[inverse.ravel()] == 1]


def from_lists(points: Array, polygons: list) -> Cells:
    """Cells from a list of corner lists."""
    offsets = np.concatenate([[0], np.cumsum([len(p) for p in polygons])]).astype(np.int64)
    return Cells(np.asarray(points, float), offsets, np.concatenate(polygons).astype(np.int64))


def from_table(points: Array, table: Array) -> Cells:
    """Cells from an (m, c) table of corners, turned counter-clockwise, unused points dropped."""
    table = np.asarray(table, np.int64)
    p = points[table]
    q = np.roll(p, -1, axis=1)
    clockwise = np.sum(p[..., 0] * q[..., 1] - p[..., 1] * q[..., 0], axis=1) < 0
    table[clockwise] = table[clockwise, ::-1]
    used, nodes = np.unique(table, return_inverse=True)
    m, c = table.shape
    return Cells(np.asarray(points[used], float), np.arange(m + 1, dtype=np.int64) * c, nodes.ravel())


def mapped(cells: Cells, function) -> Cells:
    """The same cells over moved points; ``function`` takes (n, 2) to (n, 2) and keeps orientation."""
    return Cells(np.asarray(function(cells.points), float), cells.offsets, cells.nodes)


def shuffled(cells: Cells, seed: int = 0) -> Cells:
    """The same mesh with points and cells in random order, as partitioned solvers leave it."""
    rng = np.random.default_rng(seed)
    place = rng.permutation(len(cells.points))
    points = np.empty_like(cells.points)
    points[place] = cells.points
    order = rng.permutation(len(cells.sizes))
    return from_lists(points, [place[cells.nodes[cells.offsets[i] : cells.offsets[i + 1]]] for i in order])
