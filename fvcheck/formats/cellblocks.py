"""Cells that a file stores in blocks of one type, joined into the flat arrays of a piece."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fvcheck.mesh.piece import Array, NamedFaces

VERTEX, LINE, TRIANGLE, POLYGON, QUAD, TETRA, HEXAHEDRON, WEDGE, PYRAMID = 1, 3, 5, 7, 9, 10, 12, 13, 14
LINE3, TRIANGLE6, QUAD8, HEXAHEDRON20, WEDGE15, QUAD9, HEXAHEDRON27, WEDGE18 = 21, 22, 23, 25, 26, 28, 29, 32
TRIANGLE7, POLYHEDRON = 34, 42

_DIMENSION = {VERTEX: 0, LINE: 1, LINE3: 1}
_DIMENSION |= dict.fromkeys((TRIANGLE, POLYGON, QUAD, TRIANGLE6, QUAD8, QUAD9, TRIANGLE7), 2)

_NONE = np.empty(0, dtype=np.int64)


def dimension(kind: int) -> int:
    """Dimension of a VTK cell type that occurs in blocks: 0 (vertex) to 3."""
    return _DIMENSION.get(kind, 3)


@dataclass(frozen=True, eq=False)
class Block:
    """Cells of one VTK type: cell i has ``nodes[offsets[i]:offsets[i+1]]``, in VTK's order, from 0."""

    kind: int
    nodes: Array
    offsets: Array

    @classmethod
    def of_table(cls, kind: int, table: Array) -> Block:
        """A block from its (cells, nodes per cell) table."""
        count, width = table.shape
        return cls(kind, table.reshape(-1), np.arange(count + 1, dtype=np.int64) * width)

    @property
    def dimension(self) -> int:
        return dimension(self.kind)

    def __len__(self) -> int:
        return len(self.offsets) - 1


def join(blocks: Sequence[Block]) -> tuple[Array, Array, Array]:
    """(types, offsets, nodes) of a piece with the cells of all blocks, one block after the other."""
    types = np.repeat(np.array([b.kind for b in blocks], dtype=np.uint8), [len(b) for b in blocks])
    sizes = np.concatenate([np.diff(b.offsets) for b in blocks] or [np.empty(0, dtype=np.int64)])
    nodes = np.concatenate([b.nodes for b in blocks] or [np.empty(0, dtype=np.int64)])
    offsets = np.concatenate([[0], np.cumsum(sizes, dtype=np.int64)])
    return types, offsets, nodes.astype(np.int64, copy=False)


def top_dimension(blocks: Sequence[Block]) -> int:
    """Highest dimension among the cells; 0 without cells."""
    return max((b.dimension for b in blocks if len(b)), default=0)


def in_top_cells(blocks: Sequence[Block], points: int) -> Array:
    """(points,) bool: the points that a cell of the highest dimension uses.

    Node numbers that are out of range are left for the check of the piece.
    """
    used = np.zeros(points, dtype=bool)
    top = top_dimension(blocks)
    for block in blocks:
        if block.dimension == top:
            used[block.nodes[(block.nodes >= 0) & (block.nodes < points)]] = True
    return used


def faces_of_tables(tables: Sequence[Array]) -> NamedFaces:
    """A patch of all faces in (faces, nodes per face) tables."""
    sizes = np.concatenate([np.full(len(one), one.shape[1], dtype=np.int64) for one in tables] or [_NONE])
    nodes = np.concatenate([one.reshape(-1) for one in tables] or [_NONE])
    return NamedFaces(np.concatenate([_NONE, [0], np.cumsum(sizes)]), nodes.astype(np.int64, copy=False))


def faces_of_vertices(nodes: Array) -> NamedFaces:
    """A patch given by its vertices only."""
    nodes = np.asarray(nodes, dtype=np.int64)
    return NamedFaces(np.arange(len(nodes) + 1, dtype=np.int64), nodes, by_vertex=True)
