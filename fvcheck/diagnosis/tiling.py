"""What is looked at for an imbalance: blocks that tile the domain, and round windows."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from fvcheck.diagnosis.cells import CellLedgers
from fvcheck.diagnosis.tree import bisect
from fvcheck.diagnosis.volumes import (
    Blocks,
    blocks_by_label,
    blocks_of,
)

Array = np.ndarray

# Radii of windows in cells, and the distance between their centres in radii.
_RADII, _SPACING = (2.5, 4.0, 6.5, 10.0, 16.0), 0.6


@dataclass(frozen=True, eq=False)
class Tiling:
    """Blocks to look at, the same for all laws: labels (m,) and blocks by level; round windows."""

    labels: list[Array]
    blocks: list[Blocks]
    windows: list[Blocks]

    @property
    def size(self) -> int:
        """How many blocks and windows there are."""
        return sum(len(some.size) for some in (*self.blocks, *self.windows))

    @classmethod
    def of(cls, ledgers: CellLedgers) -> Tiling:
        from scipy.spatial import cKDTree

        labels = bisect(ledgers.centres)
        blocks = [blocks_by_label(ledgers.edges, label, 2**number) for number, label in enumerate(labels)]
        tree, order = cKDTree(ledgers.centres), _walk(ledgers.centres)
        found = (_windows(ledgers, radius, tree, order) for radius in _RADII)
        windows = [window for window in found if window is not None]
        return cls(labels, blocks, windows)


def _windows(ledgers: CellLedgers, radius: float, tree: Any, order: Array) -> Blocks | None:
    """Sets of neighbouring cells, about as many as a disc of so many cells in radius holds."""
    from scipy import sparse

    centres = ledgers.centres
    n, k = len(centres), int(np.pi * radius**2)
    if k > 0.1 * n:
        return None
    # Cells far apart in number lie anywhere; a walk through the plane picks evenly.
    step = max(1, int((_SPACING * radius) ** 2))
    chosen = order[step // 2 :: step]
    _, near = tree.query(centres[chosen], k=k, workers=2)
    rows = np.repeat(np.arange(len(chosen)), k)
    shape = (len(chosen), n)
    return blocks_of(
        ledgers.edges, sparse.csr_matrix((np.ones(len(rows)), (rows, np.asarray(near).ravel())), shape=shape)
    )


def _walk(centres: Array) -> Array:
    """Cells along a curve that visits neighbours soon: that of the bits of both coordinates in turn."""
    low, high = centres.min(axis=0), centres.max(axis=0)
    grid = ((centres - low) / np.maximum(high - low, 1e-300) * 65535).astype(np.int64)
    code = np.zeros(len(centres), np.int64)
    for bit in range(16):
        for c in range(2):
            code |= ((grid[:, c] >> bit) & 1) << (2 * bit + c)
    return np.argsort(code, kind="stable")
