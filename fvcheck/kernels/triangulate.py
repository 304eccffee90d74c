"""Cells into triangles, by geometry alone, so that numbering changes nothing."""

from __future__ import annotations

import numpy as np
from numba import njit

# A direction no mesh made by hand is aligned with: it breaks ties between the
# equal diagonals of squares in the same way for every numbering.
_TIE_X, _TIE_Y = 0.8253356149096783, 0.5646424733950354


@njit(cache=True)
def _quality(ax, ay, bx, by, cx, cy):
    """4√3·area over the sum of squared sides: 1 equilateral, 0 flat, negative turned."""
    twice = (bx - ax) * (cy - ay) - (cx - ax) * (by - ay)
    sides = (
        (bx - ax) ** 2 + (by - ay) ** 2 + (cx - bx) ** 2 + (cy - by) ** 2 + (ax - cx) ** 2 + (ay - cy) ** 2
    )
    if sides == 0.0:
        return 0.0
    return 3.4641016151377544 * twice / sides


@njit(cache=True)
def _holds(ax, ay, bx, by, cx, cy, px, py):
    """Does the triangle abc (ccw) hold p, its border included?"""
    return (
        (bx - ax) * (py - ay) - (by - ay) * (px - ax) >= 0.0
        and (cx - bx) * (py - by) - (cy - by) * (px - bx) >= 0.0
        and (ax - cx) * (py - cy) - (ay - cy) * (px - cx) >= 0.0
    )


# Above this number of corners the O(k³) search gives way to the O(k²) one.
_MOST_CORNERS = 64


@njit(cache=True)
def triangulate_polygon(points, ring, out):
    """Triangles of one simple counter-clockwise polygon, of the best shapes together.

    points (n, 2); ring (k,) point numbers; out (>= k-2, 3) receives the
    triangles, counter-clockwise. Returns their number, less than k-2 only when
    the polygon is not simple.

    The sum of 1/quality is least, by dynamic programming over the diagonals
    (Klincsek 1980): one flat triangle, as between nodes that lie on a straight
    side but for rounding, weighs more than any number of good ones. Triangles
    of positive area within a simple outline cannot overlap, so no diagonal needs
    a test of its own. Ties go to a fixed direction of the plane.
    """
    k = len(ring)
    if k == 3:
        out[0, 0], out[0, 1], out[0, 2] = ring[0], ring[1], ring[2]
        return 1
    if k > _MOST_CORNERS:
        return _clip_ears(points, ring, out)
    start, lowest = 0, np.inf
    for j in range(k):
        tie = points[ring[j], 0] * _TIE_X + points[ring[j], 1] * _TIE_Y
        if tie < lowest:
            start, lowest = j, tie
    p = np.empty(k, np.int64)
    for j in range(k):
        p[j] = ring[(start + j) % k]
    cost = np.zeros((k, k))
    split = np.zeros((k, k), np.int64)
    for span in range(2, k):
        for i in range(k - span):
            j = i + span
            best = np.inf
            for m in range(i + 1, j):
                a, b, c = p[i], p[m], p[j]
                quality = _quality(
                    points[a, 0], points[a, 1], points[b, 0], points[b, 1], points[c, 0], points[c, 1]
                )
                if quality <= 0.0:
                    continue
                total = cost[i, m] + cost[m, j] + 1.0 / quality
                if total < best * (1.0 - 1e-7) or (best == np.inf and total < best):
                    best = total
                    split[i, j] = m
            cost[i, j] = best
    if cost[0, k - 1] == np.inf:
        return 0
    made = 0
    todo = np.empty((k, 2), np.int64)
    todo[0, 0], todo[0, 1] = 0, k - 1
    waiting = 1
    while waiting > 0:
        waiting -= 1
        i, j = todo[waiting, 0], todo[waiting, 1]
        m = split[i, j]
        out[made, 0], out[made, 1], out[made, 2] = p[i], p[m], p[j]
        made += 1
        if m > i + 1:
            todo[waiting, 0], todo[waiting, 1] = i, m
            waiting += 1
        if j > m + 1:
            todo[waiting, 0], todo[waiting, 1] = m, j
            waiting += 1
    return made


@njit(cache=True)
def _clip_ears(points, ring, out):
    """The same for polygons of many corners: best ear first, O(k²)."""
    k = len(ring)
    left = ring.copy()
    made = 0
    while k > 3:
        best, best_quality, best_tie = -1, 0.0, 0.0
        for j in range(k):
            a, b, c = left[j - 1 if j else k - 1], left[j], left[j + 1 if j + 1 < k else 0]
            ax, ay, bx, by, cx, cy = (
                points[a, 0],
                points[a, 1],
                points[b, 0],
                points[b, 1],
                points[c, 0],
                points[c, 1],
            )
            quality = _quality(ax, ay, bx, by, cx, cy)
            if quality <= 1e-12:
                continue
            if k == 4:
                # The ear and what it leaves must both be good.
                d = left[(j + 2) % k]
                rest = _quality(ax, ay, cx, cy, points[d, 0], points[d, 1])
                if rest <= 0.0:
                    continue
                quality = min(quality, rest)
            tie = bx * _TIE_X + by * _TIE_Y
            better = quality > best_quality * (1.0 + 1e-7)
            equal = not better and quality > best_quality * (1.0 - 1e-7) and tie < best_tie
            if best >= 0 and not better and not equal:
                continue
            free = True
            for i in range(k):
                p = left[i]
                if (
                    p != a
                    and p != b
                    and p != c
                    and _holds(ax, ay, bx, by, cx, cy, points[p, 0], points[p, 1])
                ):
                    free = False
                    break
            if free:
                best, best_quality, best_tie = j, quality, tie
        if best < 0:
            return made
        out[made, 0] = left[best - 1 if best else k - 1]
        out[made, 1] = left[best]
        out[made, 2] = left[best + 1 if best + 1 < k else 0]
        made += 1
        for i in range(best, k - 1):
            left[i] = left[i + 1]
        k -= 1
    out[made, 0], out[made, 1], out[made, 2] = left[0], left[1], left[2]
    return made + 1


@njit(cache=True)
def triangulate_cells(points, offsets, nodes, cells):
    """Triangles of the chosen cells.

    Returns (triangles (t, 3), first (c+1,)): those of ``cells[j]`` are
    ``triangles[first[j]:first[j+1]]``. A cell that cannot be cut into all its
    triangles gets an empty range.
    """
    total, longest = 0, 3
    for j in range(len(cells)):
        k = offsets[cells[j] + 1] - offsets[cells[j]]
        total += k - 2
        longest = max(longest, k)
    triangles = np.empty((total, 3), np.int64)
    first = np.zeros(len(cells) + 1, np.int64)
    work = np.empty((longest, 3), np.int64)
    at = 0
    for j in range(len(cells)):
        ring = nodes[offsets[cells[j]] : offsets[cells[j] + 1]]
        made = triangulate_polygon(points, ring, work)
        if made == len(ring) - 2:
            for i in range(made):
                triangles[at] = work[i]
                at += 1
        first[j + 1] = at
    return triangles[:at], first
