"""Matching the half-edges of polygons, and following boundary edges.

Half-edge ``h`` runs from ``nodes[h]`` to the next node of the same cell.
"""

from __future__ import annotations

import numpy as np
from numba import njit

ALONE = -1
CROWDED = -2
_SORT_ABOVE = 24
"""Buckets longer than this are sorted: pairwise search would be quadratic at the hub of a fan."""


@njit(cache=True)
def open_half_edges(offsets, nodes, n_points):
    """Half-edges without a partner (o,), ascending, and the first crowded one (see `twins`), -1 for none.

    offsets (m+1,), nodes (k,) of polygons. The matching of `twins` without its
    tables, which on a large mesh take more memory than the mesh: numbers are
    kept in 32 bits where they fit, and partners are only counted.
    """
    k = len(nodes)
    if k < 1 << 31:
        return _open_half_edges(offsets, nodes, np.zeros(n_points + 1, np.int32), np.empty(k, np.int32))
    return _open_half_edges(offsets, nodes, np.zeros(n_points + 1, np.int64), np.empty(k, np.int64))


@njit(cache=True)
def _open_half_edges(offsets, nodes, first, order):
    k, n_points = len(nodes), len(first) - 1
    m = len(offsets) - 1
    high = np.empty_like(order)
    for i in range(m):
        a, b = offsets[i], offsets[i + 1]
        before = nodes[b - 1] if b > a else 0
        for h in range(a, b):
            first[min(before, nodes[h])] += 1
            before = nodes[h]
    # Ends of the buckets; filling them from behind leaves their starts.
    for p in range(1, n_points + 1):
        first[p] += first[p - 1]
    for i in range(m - 1, -1, -1):
        a, b = offsets[i], offsets[i + 1]
        after = nodes[a] if b > a else 0
        for h in range(b - 1, a - 1, -1):
            here = nodes[h]
            low = min(here, after)
            first[low] -= 1
            order[first[low]] = h
            high[first[low]] = max(here, after)
            after = here
    open_ = np.zeros(k, np.bool_)
    count, crowded = 0, -1
    for p in range(n_points):
        a, b = first[p], first[p + 1]
        if b - a > _SORT_ABOVE:
            rank = np.argsort(high[a:b], kind="mergesort")
            order[a:b] = order[a:b][rank]
            high[a:b] = high[a:b][rank]
        for i in range(a, b):
            others, same, seen = 0, False, False
            for j in range(i - 1, a - 1, -1):
                if high[j] == high[i]:
                    seen = True
                    break
                if b - a > _SORT_ABOVE:
                    break
            if seen:
                continue  # counted with the first of its points
            least = order[i]
            for j in range(i + 1, b):
                if high[j] == high[i]:
                    others += 1
                    least = min(least, order[j])
                    same = same or (nodes[order[i]] == p) == (nodes[order[j]] == p)
                elif b - a > _SORT_ABOVE:
                    break
            if others == 0:
                open_[order[i]] = True
                count += 1
            elif others > 1 or same:
                crowded = least if crowded < 0 else min(crowded, least)
    out = np.empty(count, np.int64)
    at = 0
    for h in range(k):
        if open_[h]:
            out[at] = h
            at += 1
    return out, np.int64(crowded)


@njit(cache=True)
def twins(start, end, n_points):
    """The half-edge that runs the other way along the same two points.

    start, end (k,) point numbers below n_points -> (k,): the twin's number,
    `ALONE`, or `CROWDED` where more than two half-edges share the points or
    two run the same way. Counting sort on the lower point, then a search
    within its few edges: linear time.
    """
    k = len(start)
    first = np.zeros(n_points + 1, np.int64)
    for h in range(k):
        first[min(start[h], end[h]) + 1] += 1
    for p in range(n_points):
        first[p + 1] += first[p]
    fill = first[:-1].copy()
    order = np.empty(k, np.int64)
    high = np.empty(k, np.int64)
    for h in range(k):
        low = min(start[h], end[h])
        order[fill[low]] = h
        high[fill[low]] = max(start[h], end[h])
        fill[low] += 1
    twin = np.full(k, ALONE, np.int64)
    for p in range(n_points):
        a, b = first[p], first[p + 1]
        if b - a > _SORT_ABOVE:
            rank = np.argsort(high[a:b])
            order[a:b] = order[a:b][rank]
            high[a:b] = high[a:b][rank]
        for i in range(a, b):
            for j in range(i + 1, b):
                if high[j] != high[i]:
                    if b - a > _SORT_ABOVE:
                        break
                    continue
                g, h = order[i], order[j]
                if twin[g] == ALONE and twin[h] == ALONE and start[g] == end[h] and start[g] != end[g]:
                    twin[g], twin[h] = h, g
                else:
                    for e in (g, h):
                        if twin[e] >= 0:
                            twin[twin[e]] = CROWDED
                        twin[e] = CROWDED
                    if b - a > _SORT_ABOVE:
                        break
    return twin


@njit(cache=True)
def successors(start, end, x, y):
    """The edge that follows each directed edge, or -1 at an open end.

    start, end (e,) point numbers; x, y coordinates by point number. Where
    several edges leave a point, the one reached first when turning clockwise
    from the edge just walked: with the fluid on the left this stays with the
    same fan of cells. Two edges never get the same successor.
    """
    e = len(start)
    order = np.argsort(start, kind="mergesort")
    sorted_start = start[order]
    out = np.full(e, -1, np.int64)
    taken = np.zeros(e, np.bool_)
    cursor = np.zeros(e, np.int64)
    for i in range(e):
        p = end[i]
        a = np.searchsorted(sorted_start, p)
        if a == e or sorted_start[a] != p:
            continue
        b = np.searchsorted(sorted_start, p, side="right")
        if b - a == 1:
            if not taken[order[a]]:
                out[i] = order[a]
                taken[order[a]] = True
            continue
        if b - a > _SORT_ABOVE:  # comparing all angles at such a hub would be quadratic: any way on will do
            if a + cursor[a] < b:
                out[i] = order[a + cursor[a]]
                cursor[a] += 1
            continue
        back = np.arctan2(y[start[i]] - y[p], x[start[i]] - x[p])
        best, best_turn = -1, 1e300
        for s in range(a, b):
            j = order[s]
            if taken[j]:
                continue
            turn = back - np.arctan2(y[end[j]] - y[p], x[end[j]] - x[p])
            while turn <= 1e-12:
                turn += 2 * np.pi
            if turn < best_turn:
                best, best_turn = j, turn
        if best >= 0:
            out[i] = best
            taken[best] = True
    return out


@njit(cache=True)
def walk(start, end, following):
    """Cut the graph of `successors` into simple chains.

    Returns (edges, offsets, closed): chain c is ``edges[offsets[c]:offsets[c+1]]``
    in walking order; a chain that comes back to one of its points is cut there,
    so that no chain passes a point twice.
    """
    e = len(start)
    has_before = np.zeros(e, np.bool_)
    for i in range(e):
        if following[i] >= 0:
            has_before[following[i]] = True
    done = np.zeros(e, np.bool_)
    out = np.empty(e, np.int64)
    offsets = np.zeros(e + 1, np.int64)
    closed = np.zeros(e, np.bool_)
    n_chains, filled = 0, 0
    stack = np.empty(e, np.int64)
    top = 0
    n_points = 0
    for i in range(e):
        n_points = max(n_points, max(start[i], end[i]) + 1)
    place = np.full(n_points, -1, np.int64)  # place of a point as a start in the stack
    for sweep in range(2):  # open chains from their beginnings first, then the closed ones
        for seed in range(e):
            if done[seed] or (sweep == 0 and has_before[seed]):
                continue
            i = seed
            while i >= 0 and not done[i]:
                done[i] = True
                place[start[i]] = top
                stack[top] = i
                top += 1
                back = place[end[i]]
                if back >= 0:
                    for s in range(back, top):
                        out[filled] = stack[s]
                        filled += 1
                        place[start[stack[s]]] = -1
                    top = back
                    closed[n_chains] = True
                    n_chains += 1
                    offsets[n_chains] = filled
                i = following[i]
            if top > 0:
                for s in range(top):
                    out[filled] = stack[s]
                    filled += 1
                    place[start[stack[s]]] = -1
                top = 0
                n_chains += 1
                offsets[n_chains] = filled
    return out, offsets[: n_chains + 1], closed[:n_chains]


@njit(cache=True)
def paths_back(start, end, x, y, tolerance):
    """Open edges that others run back along, point by point, as across a quadtree's coarse edges.

    start, end (e,) open half-edges; x, y by point number; tolerance (e,) distance
    from an edge within which a point lies on it. Returns (edge, point, share of
    the way) of each point met on the way back, and (e,) whether an edge needs no
    further look: those run back along, and those run.
    """
    e = len(start)
    order = np.argsort(start, kind="mergesort")
    n_points = 0
    for i in range(e):
        n_points = max(n_points, max(start[i], end[i]) + 1)
    first = np.zeros(n_points + 1, np.int64)
    for i in range(e):
        first[start[i] + 1] += 1
    for p in range(n_points):
        first[p + 1] += first[p]
    capacity = 2 * e + 16
    edge = np.empty(capacity, np.int64)
    node = np.empty(capacity, np.int64)
    share = np.empty(capacity)
    done = np.zeros(e, np.bool_)
    filled = 0
    for i in range(e):
        a, b = start[i], end[i]
        dx, dy = x[b] - x[a], y[b] - y[a]
        square = dx * dx + dy * dy
        if square == 0.0:
            continue
        length = np.sqrt(square)
        at, t, begin = b, 1.0, filled
        while at != a:
            step = -1
            if first[at + 1] - first[at] <= _SORT_ABOVE:
                for s in range(first[at], first[at + 1]):
                    p = end[order[s]]
                    px, py = x[p] - x[a], y[p] - y[a]
                    tp = (px * dx + py * dy) / square
                    if abs(px * dy - py * dx) <= tolerance[i] * length and tp < t and (p == a or tp > 0.0):
                        step, next_t = order[s], tp
                        break
            if step < 0 or filled == capacity:
                break
            at, t = end[step], next_t
            edge[filled], node[filled], share[filled] = (
                step,
                at,
                t,
            )  # the edge walked, until known to lead back
            filled += 1
        if at != a or filled - begin < 2:
            filled = begin
            continue
        for s in range(begin, filled):
            done[edge[s]] = True
            edge[s] = i
        done[i] = True
        filled -= 1  # the last point is the edge's own start
    return edge[:filled].copy(), node[:filled].copy(), share[:filled].copy(), done
