"""How many points lie near places, each within its own distance."""

from __future__ import annotations

import numpy as np
from numba import njit


@njit(cache=True)
def crowds(x, y, at_x, at_y, radius):
    """Number of points x, y (n,) within ``radius`` (q,) of places (q,), (q,) int64.

    Points are put into squares, about one each, and squares that a disk touches are looked
    through: for radii of the size of the gaps between points, time grows as n + q.
    """
    n, q = len(x), len(at_x)
    count = np.zeros(q, np.int64)
    if n == 0:
        return count
    low_x, low_y = x.min(), y.min()
    wide, high = x.max() - low_x, y.max() - low_y
    side = max(wide, high) / np.sqrt(n)
    if not side > 0.0:
        side = 1.0
    columns, rows = int(wide / side) + 1, int(high / side) + 1
    first = np.zeros(columns * rows + 1, np.int64)
    square = np.empty(n, np.int64)
    for p in range(n):
        square[p] = int((y[p] - low_y) / side) * columns + int((x[p] - low_x) / side)
        first[square[p] + 1] += 1
    for s in range(columns * rows):
        first[s + 1] += first[s]
    order = np.empty(n, np.int64)
    fill = first[:-1].copy()
    for p in range(n):
        order[fill[square[p]]] = p
        fill[square[p]] += 1
    for i in range(q):
        r = radius[i]
        # A square more on each side than the distance asks for: rounding must lose no point.
        left = max(0.0, np.floor((at_x[i] - r - low_x) / side) - 1.0)
        right = min(columns - 1.0, np.floor((at_x[i] + r - low_x) / side) + 1.0)
        bottom = max(0.0, np.floor((at_y[i] - r - low_y) / side) - 1.0)
        top = min(rows - 1.0, np.floor((at_y[i] + r - low_y) / side) + 1.0)
        for row in range(int(bottom), int(top) + 1):
            for s in range(row * columns + int(left), row * columns + int(right) + 1):
                for j in range(first[s], first[s + 1]):
                    dx, dy = x[order[j]] - at_x[i], y[order[j]] - at_y[i]
                    if dx * dx + dy * dy <= r * r:
                        count[i] += 1
    return count
