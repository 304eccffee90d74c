"""Loops over polygon cells."""

from __future__ import annotations

import numpy as np
from numba import njit, prange


@njit(cache=True, parallel=True)
def polygon_areas(points, offsets, nodes):
    """Signed areas by the shoelace formula, about each cell's first point.

    points (n, 2), offsets (m+1,), nodes (k,) -> (m,), positive when
    counter-clockwise. Working from the first point keeps the digits of small
    cells far from the origin.
    """
    m = len(offsets) - 1
    out = np.empty(m)
    for i in prange(m):
        first, last = offsets[i], offsets[i + 1]
        x0, y0 = points[nodes[first], 0], points[nodes[first], 1]
        twice = 0.0
        for j in range(first + 1, last - 1):
            a, b = nodes[j], nodes[j + 1]
            twice += (points[a, 0] - x0) * (points[b, 1] - y0) - (points[b, 0] - x0) * (points[a, 1] - y0)
        out[i] = 0.5 * twice
    return out
