"""The neighbourhood of a set of mesh points, grown by topology."""

from __future__ import annotations

import numpy as np
from numba import njit


@njit(cache=True)
def mark_rings(offsets, nodes, mark, rings):
    """Mark (n,) uint8, edited here, the points within ``rings`` rings of cells of those marked."""
    for ring in range(1, rings + 1):
        for c in range(len(offsets) - 1):
            reached = False
            for k in range(offsets[c], offsets[c + 1]):
                reached = reached or 0 < mark[nodes[k]] <= ring
            if reached:
                for k in range(offsets[c], offsets[c + 1]):
                    if mark[nodes[k]] == 0:
                        mark[nodes[k]] = ring + 1


@njit(cache=True)
def cells_of_points(offsets, nodes, n_points):
    """Transpose of the cell → points table: (first (n+1,), cells)."""
    first = np.zeros(n_points + 1, np.int64)
    for k in range(len(nodes)):
        first[nodes[k] + 1] += 1
    for p in range(n_points):
        first[p + 1] += first[p]
    cells = np.empty(len(nodes), np.int64)
    at = first[:-1].copy()
    for c in range(len(offsets) - 1):
        for k in range(offsets[c], offsets[c + 1]):
            cells[at[nodes[k]]] = c
            at[nodes[k]] += 1
    return first, cells


@njit(cache=True)
def stencils(offsets, nodes, point_first, point_cells, spot_first, spots, centres, at_points, targets, rings):
    """Data around each centre point, ring after ring, until there are enough.

    spots[spot_first[c]:spot_first[c+1]] : numbers, beyond those of the points, of
    the places on the border of cell c whose value is known beside cell data;
    centres (c,) points; at_points: the data live at points, else in cells;
    targets (c, d) wanted numbers of equations about each centre, ascending.

    Returns (first (c+1,), entries, sizes (c, d), unmet): ``entries[first[j]:first[j+1]]``
    are point numbers, or cell numbers, or -1-s for the known value at spot s.
    The first ``sizes[j, k]`` of them, whole rings always, serve target k. The
    centre itself is left out: its own value is interpolated. unmet: whether a
    target was missed though further rings exist.
    """
    count = len(centres)
    n_points = len(point_first) - 1
    seen_cell = np.full(len(offsets) - 1, -1, np.int64)
    seen_point = np.full(n_points, -1, np.int64)
    first = np.zeros(count + 1, np.int64)
    entries = np.empty(64 * count + 64, np.int64)
    wanted = targets.shape[1]
    sizes = np.zeros((count, wanted), np.int64)
    used = 0
    unmet = False
    queue = np.empty(n_points, np.int64)
    for j in range(count):
        centre = centres[j]
        queue[0] = centre
        seen_point[centre] = j
        low, high = 0, 1
        start = used
        reached = 0
        for _ in range(rings):
            old_high = high
            for q in range(low, high):
                p = queue[q]
                for k in range(point_first[p], point_first[p + 1]):
                    c = point_cells[k]
                    if seen_cell[c] == j:
                        continue
                    seen_cell[c] = j
                    most = used + 1 + offsets[c + 1] - offsets[c] + spot_first[c + 1] - spot_first[c]
                    if most > len(entries):
                        longer = np.empty(2 * most + 64, np.int64)
                        longer[:used] = entries[:used]
                        entries = longer
                    if not at_points:
                        entries[used] = c
                        used += 1
                        for i in range(spot_first[c], spot_first[c + 1]):
                            entries[used] = -1 - spots[i]
                            used += 1
                    for i in range(offsets[c], offsets[c + 1]):
                        other = nodes[i]
                        if seen_point[other] == j:
                            continue
                        seen_point[other] = j
                        queue[high] = other
                        high += 1
                        if at_points:
                            entries[used] = other
                            used += 1
            low = old_high
            while reached < wanted and used - start >= targets[j, reached]:
                sizes[j, reached] = used - start
                reached += 1
            if reached == wanted or low == high:
                break
        unmet = unmet or (reached < wanted and low < high)
        for k in range(reached, wanted):
            sizes[j, k] = used - start
        first[j + 1] = used
    return first, entries[:used], sizes, unmet


@njit(cache=True)
def corner_range(low, high, row_of, triangle):
    """Least of ``low`` and most of ``high`` (c, f) over the corners of triangles (q, 3): two (q, f) arrays.

    row_of : row of each point in ``low`` and ``high``
    """
    least, most = np.empty((len(triangle), low.shape[1])), np.empty((len(triangle), low.shape[1]))
    for q in range(len(triangle)):
        a, b, c = row_of[triangle[q, 0]], row_of[triangle[q, 1]], row_of[triangle[q, 2]]
        for f in range(low.shape[1]):
            least[q, f] = min(low[a, f], low[b, f], low[c, f])
            most[q, f] = max(high[a, f], high[b, f], high[c, f])
    return least, most


@njit(cache=True)
def ring_range(offsets, nodes, n_points, at_points, data):
    """Smallest and largest datum in the cells around each point: two (n_points, f) arrays.

    data : (n_points, f) or (cells, f), as ``at_points`` says
    """
    fields = data.shape[1]
    low, high = np.full((n_points, fields), np.inf), np.full((n_points, fields), -np.inf)
    for c in range(len(offsets) - 1):
        for f in range(fields):
            if at_points:
                least = most = data[nodes[offsets[c]], f]
                for k in range(offsets[c] + 1, offsets[c + 1]):
                    least, most = min(least, data[nodes[k], f]), max(most, data[nodes[k], f])
            else:
                least = most = data[c, f]
            for k in range(offsets[c], offsets[c + 1]):
                p = nodes[k]
                low[p, f], high[p, f] = min(low[p, f], least), max(high[p, f], most)
    return low, high
