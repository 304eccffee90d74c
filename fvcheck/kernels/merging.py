"""Points that coincide: exact matches by hashing, groups by union-find."""

from __future__ import annotations

import numpy as np
from numba import njit


@njit(cache=True)
def first_equal(x, y):
    """(n,) number of the first point with the very same coordinates (itself if none).

    Open addressing in a table at most half full: linear time.
    """
    n = len(x)
    bits = 2
    while (1 << bits) < 2 * n + 2:
        bits += 1
    mask = np.uint64((1 << bits) - 1)
    table = np.full(1 << bits, -1, np.int64)
    out = np.empty(n, np.int64)
    xs = (x + 0.0).view(np.uint64)  # + 0.0 turns -0.0 into 0.0
    ys = (y + 0.0).view(np.uint64)
    for i in range(n):
        h = xs[i] * np.uint64(0x9E3779B97F4A7C15) ^ ys[i] * np.uint64(0xC2B2AE3D27D4EB4F)
        h ^= h >> np.uint64(29)
        h *= np.uint64(0xBF58476D1CE4E5B9)
        h ^= h >> np.uint64(32)
        slot = h & mask
        while table[slot] >= 0 and (x[table[slot]] != x[i] or y[table[slot]] != y[i]):
            slot = (slot + np.uint64(1)) & mask
        if table[slot] < 0:
            table[slot] = i
        out[i] = table[slot]
    return out


@njit(cache=True)
def _root(parent, i):
    while parent[i] != i:
        parent[i] = parent[parent[i]]
        i = parent[i]
    return i


@njit(cache=True)
def groups(n, a, b):
    """(n,) lowest member of each number's group, after joining a[j] with b[j] for all j."""
    parent = np.arange(n)
    for j in range(len(a)):
        p, q = _root(parent, a[j]), _root(parent, b[j])
        if p < q:
            parent[q] = p
        elif q < p:
            parent[p] = q
    for i in range(n):
        parent[i] = _root(parent, i)
    return parent
