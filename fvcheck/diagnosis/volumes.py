"""Blocks of cells as control volumes: sums of columns over them, and the bands of these sums."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from fvcheck.bands import RESOLUTION_FACTOR
from fvcheck.diagnosis.cells import _SHAKE_COVERAGE, CellLedgers, Column, MeshEdges
from fvcheck.mesh.mesh import Mesh

Array = np.ndarray

SAMPLING_DEVIATIONS = 3.0
"""A sampling band in standard deviations of independent errors, as in `fvcheck.bands`."""

_RESOLUTION = 2.0

FIRST, SECOND, THIRD, CHOSEN = range(4)
"""Rows of a `Column` by what they are."""


@dataclass(frozen=True, eq=False)
class Blocks:
    """k sets of cells.

    border : (k, e) sparse, +1 or -1 for edges that bound the block, outward; inner edges have none
    cells : (k, m) sparse, 1 for cells of the block
    """

    border: Any
    cells: Any
    size: Array

    def sums(self, edge: Array, cell: Array | None) -> Array:
        """(k, c) of data on edges (e, c) and in cells (m, c)."""
        out = self.border @ edge
        return out if cell is None else out + self.cells @ cell


@dataclass(frozen=True, eq=False)
class Found:
    """Imbalances of k blocks, with half-widths; all (k, c)."""

    value: Array
    sampling: Array
    resolution: Array


def blocks_of(edges: MeshEdges, members: Any) -> Blocks:
    """Blocks from a sparse (k, m) matrix of ones."""
    from scipy import sparse

    n_cells, n_edges = members.shape[1], len(edges.owner)
    inner = edges.other >= 0
    rows = np.concatenate([edges.owner, edges.other[inner]])
    columns = np.concatenate([np.arange(n_edges), np.flatnonzero(inner)])
    signs = np.concatenate([np.ones(n_edges), -np.ones(int(inner.sum()))])
    incidence = sparse.csr_matrix((signs, (rows, columns)), shape=(n_cells, n_edges))
    border = sparse.csr_matrix(members @ incidence)
    border.eliminate_zeros()
    size = np.asarray(members.sum(axis=1)).ravel().astype(int)
    return Blocks(border, sparse.csr_matrix(members), size)


def blocks_by_label(edges: MeshEdges, labels: Array, count: int) -> Blocks:
    """Blocks that do not overlap: cells (m,) with labels 0 to count - 1, negative for none."""
    from scipy import sparse

    inside = np.flatnonzero(labels >= 0)
    shape = (count, len(labels))
    members = sparse.csr_matrix((np.ones(len(inside)), (labels[inside], inside)), shape=shape)
    return blocks_of(edges, members)


def measure(blocks: Blocks, column: Column, outside: Array, shaken: Array | None) -> Found:
    """Values and bands of a column over blocks, by the rules of `fvcheck.bands.bands`."""
    edge, cell = column.edge, column.cell
    best = blocks.sums(edge[CHOSEN], None if cell is None else cell[CHOSEN])
    out = outside[:, None] | (edge[CHOSEN] != edge[THIRD])
    positive = abs(blocks.border)

    def spread_of(high: int, low: int) -> tuple[Array, Array, Array]:
        """Net, root of squares and sum of sizes of what one degree changes, where errors do not add up."""
        d = np.where(out, 0.0, edge[high] - edge[low])
        net, square, size = blocks.border @ d, positive @ d**2, positive @ np.abs(d)
        if cell is not None:
            dc = cell[high] - cell[low]
            net, square, size = (
                net + blocks.cells @ dc,
                square + blocks.cells @ dc**2,
                size + blocks.cells @ np.abs(dc),
            )
        return np.abs(net), np.sqrt(square), size

    net23, root23, size23 = spread_of(THIRD, SECOND)
    net12, root12, size12 = spread_of(SECOND, FIRST)
    sampling = np.where(size23 > 0.5 * size12, size23, np.maximum(net23, SAMPLING_DEVIATIONS * root23))
    resolution = np.maximum(net12, _RESOLUTION * root12)
    if out.any():
        d23, d12 = np.abs(edge[THIRD] - edge[SECOND]), np.abs(edge[SECOND] - edge[FIRST])
        sampling = sampling + positive @ np.where(out, np.maximum(d23, d12), 0.0)
        d12 = np.where(out, edge[SECOND] - edge[FIRST], 0.0)
        resolution = resolution + np.maximum(
            np.abs(blocks.border @ d12), _RESOLUTION * np.sqrt(positive @ d12**2)
        )
    rounding = 256.0 * np.finfo(float).eps * (positive @ np.abs(edge[THIRD]))
    if shaken is not None:
        moved = np.stack([blocks.border @ change for change in shaken])
        rounding = rounding + _SHAKE_COVERAGE * np.sqrt(np.mean(moved**2, axis=0))
    sampling = sampling + rounding
    return Found(best, sampling, np.maximum(RESOLUTION_FACTOR * resolution, sampling))


def random_blocks(ledgers: CellLedgers, count: int, seed: int) -> Blocks:
    """Boxes of random place and size, as the cells whose centres lie in them; the same for the same mesh.

    Most keep two cells off the domain boundary, beside which cell data must be extrapolated.
    """
    from scipy import sparse

    centres = ledgers.centres
    rng = np.random.default_rng(seed)
    near = _beside_boundary(ledgers.flow.mesh)[ledgers.cells]
    # Places by the cells' own density, so that fine regions have their share.
    sets: list[Array] = []
    extent = np.maximum(np.ptp(centres, axis=0), 1e-300)
    for _ in range(20 * count):
        if len(sets) == count:
            break
        share = rng.uniform(0.004, 0.35)
        inside = _box(centres, extent, centres[rng.integers(len(centres))], rng.uniform(0.4, 2.5), share)
        if rng.uniform() < 0.75:
            inside = inside & ~near
        found = np.flatnonzero(inside)
        if len(found) >= 12:
            sets.append(found)
    rows = np.repeat(np.arange(len(sets)), [len(s) for s in sets])
    columns = np.concatenate(sets) if sets else np.empty(0, np.int64)
    shape = (len(sets), len(centres))
    return blocks_of(ledgers.edges, sparse.csr_matrix((np.ones(len(rows)), (rows, columns)), shape=shape))


def _box(centres: Array, extent: Array, middle: Array, aspect: float, share: float) -> Array:
    """(m,) bool: the box about ``middle`` that holds a share of all cells."""
    scaled = np.abs(centres - middle) / extent * np.array([np.sqrt(aspect), 1.0 / np.sqrt(aspect)])
    reach = np.maximum(scaled[:, 0], scaled[:, 1])
    rank = int(share * (len(reach) - 1))
    return reach <= np.partition(reach, rank)[rank]


def _beside_boundary(mesh: Mesh) -> Array:
    """(m,) bool: cells within two rings of the domain boundary."""
    near = np.zeros(mesh.n_points, bool)
    near[mesh.boundary.edges] = True
    touched = np.zeros(mesh.n_cells, bool)
    cell_of = np.repeat(np.arange(mesh.n_cells), np.diff(mesh.offsets))
    for _ in range(2):
        touched |= np.bincount(cell_of, near[mesh.nodes], mesh.n_cells) > 0
        near[mesh.nodes[touched[cell_of]]] = True
    return touched
