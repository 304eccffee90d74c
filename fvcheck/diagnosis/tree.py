"""A hierarchy of blocks of cells that tile the domain: halves of halves."""

from __future__ import annotations

import numpy as np

Array = np.ndarray

# Blocks are halved down to so many cells.
_LEAST = 6


def bisect(centres: Array) -> list[Array]:
    """Labels (m,) of each cell per level, from the whole (all 0) down.

    Block k of one level is made of 2k and 2k + 1 of the next: halved across
    their longer side, by number of cells, so that fine regions are looked at finely.
    """
    count = len(centres)
    labels = [np.zeros(count, np.int64)]
    while count / 2 ** len(labels) >= _LEAST:
        old = labels[-1]
        blocks = 2 ** (len(labels) - 1)
        low, high = np.full((blocks, 2), np.inf), np.full((blocks, 2), -np.inf)
        np.minimum.at(low, old, centres)
        np.maximum.at(high, old, centres)
        along = np.argmax(high - low, axis=1)
        place = np.where(along[old] == 0, centres[:, 0], centres[:, 1])
        order = np.lexsort((place, old))
        size = np.bincount(old, minlength=blocks)
        first = np.concatenate([[0], np.cumsum(size)[:-1]])
        rank = np.empty(count, np.int64)
        rank[order] = np.arange(count) - first[old[order]]
        labels.append(2 * old + (rank >= (size[old] + 1) // 2))
    return labels
