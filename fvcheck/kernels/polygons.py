"""Building, cleaning and testing polygon cells."""

from __future__ import annotations

import numpy as np
from numba import njit, prange

SIMPLE, CROSSING, LONG = 0, 1, 2
LONG_POLYGON = 400
"""Above this the pairwise test is left to a library with a sweep."""


@njit(cache=True)
def expand(cells, template, part_start, part_offsets, part_nodes, offsets, nodes):
    """Write out the polygons of cells by templates of local node numbers.

    cells (c,) numbers into offsets; template (c,) template of each; template t
    consists of parts ``part_start[t]:part_start[t+1]``, part j of local nodes
    ``part_nodes[part_offsets[j]:part_offsets[j+1]]``.
    Returns offsets (p+1,), nodes (k,), position in ``cells`` of each polygon (p,).
    """
    n_parts, n_nodes = 0, 0
    for i in range(len(cells)):
        a, b = part_start[template[i]], part_start[template[i] + 1]
        n_parts += b - a
        n_nodes += part_offsets[b] - part_offsets[a]
    out_offsets = np.zeros(n_parts + 1, np.int64)
    out_nodes = np.empty(n_nodes, np.int64)
    source = np.empty(n_parts, np.int64)
    p, k = 0, 0
    for i in range(len(cells)):
        base = offsets[cells[i]]
        for j in range(part_start[template[i]], part_start[template[i] + 1]):
            for s in range(part_offsets[j], part_offsets[j + 1]):
                out_nodes[k] = nodes[base + part_nodes[s]]
                k += 1
            source[p] = i
            p += 1
            out_offsets[p] = k
    return out_offsets, out_nodes, source


@njit(cache=True)
def without_repeats(offsets, nodes):
    """Drop nodes that repeat the one before them (cyclically); cells under 3 nodes become empty.

    Returns offsets, nodes of the same number of cells.
    """
    m = len(offsets) - 1
    out_offsets = np.zeros(m + 1, np.int64)
    out = np.empty(len(nodes), np.int64)
    k = 0
    for i in range(m):
        begin = k
        for h in range(offsets[i], offsets[i + 1]):
            if k == begin or nodes[h] != out[k - 1]:
                out[k] = nodes[h]
                k += 1
        while k - begin > 1 and out[k - 1] == out[begin]:
            k -= 1
        if k - begin < 3:
            k = begin
        out_offsets[i + 1] = k
    return out_offsets, out[:k].copy()


@njit(cache=True)
def sound_triangles(points, offsets, nodes, precision):
    """Whether all polygons are triangles of three points that run counter-clockwise about an area.

    The same measures as `shape_measures` gives, and area counts as `fvcheck.mesh.tidy` counts it, but
    nothing is kept: most meshes pass, and need no table of their cells.
    """
    for i in range(len(offsets) - 1):
        first = offsets[i]
        if offsets[i + 1] - first != 3:
            return False
        p, q, r = nodes[first], nodes[first + 1], nodes[first + 2]
        if p == q or q == r or r == p:
            return False
        x0, y0 = points[p, 0], points[p, 1]
        bx, by = points[q, 0] - x0, points[q, 1] - y0
        cx, cy = points[r, 0] - x0, points[r, 1] - y0
        area = 0.5 * (bx * cy - by * cx)
        length = np.sqrt(bx**2 + by**2) + np.sqrt((cx - bx) ** 2 + (cy - by) ** 2) + np.sqrt(cx**2 + cy**2)
        size = max(abs(x0), abs(y0))
        for k in (q, r):
            size = max(size, max(abs(points[k, 0]), abs(points[k, 1])))
        # Rounding may differ from that of `shape_measures` by a few last digits: twice the
        # limit sends what is near it to the tables, which decide.
        if not area > 2.0 * (precision * size * length):
            return False
    return True


@njit(cache=True, parallel=True)
def shape_measures(points, offsets, nodes):
    """Signed area (m,), perimeter (m,) and largest coordinate (m,) of polygons over points (n, 2)."""
    m = len(offsets) - 1
    area, perimeter, size = np.zeros(m), np.zeros(m), np.zeros(m)
    for i in prange(m):
        first, last = offsets[i], offsets[i + 1]
        if last == first:
            continue
        x0, y0 = points[nodes[first], 0], points[nodes[first], 1]
        twice, length, largest = 0.0, 0.0, 0.0
        for h in range(first, last):
            a = nodes[h]
            b = nodes[h + 1] if h + 1 < last else nodes[first]
            ax, ay = points[a, 0] - x0, points[a, 1] - y0
            bx, by = points[b, 0] - x0, points[b, 1] - y0
            twice += ax * by - bx * ay
            length += np.sqrt((bx - ax) ** 2 + (by - ay) ** 2)
            largest = max(largest, max(abs(points[a, 0]), abs(points[a, 1])))
        area[i], perimeter[i], size[i] = 0.5 * twice, length, largest
    return area, perimeter, size


@njit(cache=True)
def select(offsets, nodes, keep, turn):
    """Keep the cells of the mask ``keep``, node order reversed where ``turn``; new offsets, nodes."""
    n_cells, n_nodes = 0, 0
    for i in range(len(offsets) - 1):
        if keep[i]:
            n_cells += 1
            n_nodes += offsets[i + 1] - offsets[i]
    out_offsets = np.zeros(n_cells + 1, np.int64)
    out = np.empty(n_nodes, np.int64)
    c, k = 0, 0
    for i in range(len(offsets) - 1):
        if not keep[i]:
            continue
        first, last = offsets[i], offsets[i + 1]
        for h in range(first, last):
            out[k] = nodes[last - 1 - (h - first)] if turn[i] else nodes[h]
            k += 1
        c += 1
        out_offsets[c] = k
    return out_offsets, out


@njit(cache=True)
def _side(points, a, b, c):
    return (points[b, 0] - points[a, 0]) * (points[c, 1] - points[a, 1]) - (points[b, 1] - points[a, 1]) * (
        points[c, 0] - points[a, 0]
    )


@njit(cache=True)
def _convex(points, nodes, first, last):
    """True when all corners turn left and the outline goes round once."""
    n = last - first
    reversals = 0
    before = 0.0
    for h in range(n):  # sign of the last edge's x step, to count reversals cyclically
        step = points[nodes[first + (h + 1) % n], 0] - points[nodes[first + h], 0]
        if step != 0.0:
            before = step
    for h in range(n):
        a, b, c = nodes[first + h], nodes[first + (h + 1) % n], nodes[first + (h + 2) % n]
        if not _side(points, a, b, c) > 0.0:
            return False
        step = points[b, 0] - points[a, 0]
        if step * before < 0.0:
            reversals += 1
        if step != 0.0:
            before = step
    return reversals == 2


@njit(cache=True)
def _crosses(points, nodes, first, last, slack):
    n = last - first
    for i in range(n):
        a, b = nodes[first + i], nodes[first + (i + 1) % n]
        length = np.hypot(points[b, 0] - points[a, 0], points[b, 1] - points[a, 1])
        for j in range(i + 1, n):
            c, d = nodes[first + j], nodes[first + (j + 1) % n]
            if a == c:
                return True  # passes a point twice
            if j == i + 1 or (i == 0 and j == n - 1):
                continue
            other = np.hypot(points[d, 0] - points[c, 0], points[d, 1] - points[c, 1])
            s1, s2 = _side(points, a, b, c), _side(points, a, b, d)
            s3, s4 = _side(points, c, d, a), _side(points, c, d, b)
            u, v = slack * length, slack * other
            if ((s1 > u and s2 < -u) or (s1 < -u and s2 > u)) and (
                (s3 > v and s4 < -v) or (s3 < -v and s4 > v)
            ):
                return True
    return False


@njit(cache=True, parallel=True)
def outline_faults(points, offsets, nodes, slack):
    """(m,) int8: `SIMPLE`, `CROSSING`, or `LONG` (not tested here).

    slack (m,): distance below which a point counts as lying on an edge, so
    that rounding of stored coordinates is no crossing. Convex outlines leave
    at once; others are tested edge against edge.
    """
    m = len(offsets) - 1
    out = np.zeros(m, np.int8)
    for i in prange(m):
        first, last = offsets[i], offsets[i + 1]
        if last - first <= 3 or _convex(points, nodes, first, last):
            continue
        if last - first > LONG_POLYGON:
            out[i] = LONG
        elif _crosses(points, nodes, first, last, slack[i]):
            out[i] = CROSSING
    return out


@njit(cache=True)
def insert_nodes(offsets, nodes, after, new):
    """Insert ``new[j]`` behind half-edge ``after[j]`` (sorted; several on one edge in order)."""
    m = len(offsets) - 1
    out_offsets = np.zeros(m + 1, np.int64)
    out = np.empty(len(nodes) + len(new), np.int64)
    k, j = 0, 0
    for i in range(m):
        for h in range(offsets[i], offsets[i + 1]):
            out[k] = nodes[h]
            k += 1
            while j < len(after) and after[j] == h:
                out[k] = new[j]
                k += 1
                j += 1
        out_offsets[i + 1] = k
    return out_offsets, out


@njit(cache=True)
def renumber(nodes, n_points):
    """Number the points that ``nodes`` uses 0, 1, … in their old order.

    Returns (number by old point, -1 unused; old point by number; nodes renumbered).
    """
    number = np.full(n_points, -1, np.int64)
    for h in range(len(nodes)):
        number[nodes[h]] = 0
    count = 0
    for p in range(n_points):
        if number[p] == 0:
            number[p] = count
            count += 1
    if count == n_points:
        return number, number, nodes  # all are used: every number stays
    old = np.empty(count, np.int64)
    for p in range(n_points):
        if number[p] >= 0:
            old[number[p]] = p
    out = np.empty(len(nodes), np.int64)
    for h in range(len(nodes)):
        out[h] = number[nodes[h]]
    return number, old, out
