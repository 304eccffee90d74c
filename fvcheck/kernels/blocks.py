"""Bounding boxes of runs of cells: what lets a look at every cell skip nearly all of them.

Meshes are numbered more or less along the plane, so that a run of consecutive
cells lies together. Where one does not, its box is large and it is looked at
in vain: slower, never wrong.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange

PER_BLOCK = 32
"""Cells in a run: few enough that a run along a row stays short, enough that boxes cost little memory."""

_GRID = 256
"""Squares across the box of a set of points, in which blocks look whether they may hold any."""


@njit(cache=True, parallel=True)
def block_boxes(points, offsets, nodes):
    """(b, 4) bounding boxes x0, y0, x1, y1 of runs of `PER_BLOCK` cells: one streaming pass."""
    m = len(offsets) - 1
    out = np.empty(((m + PER_BLOCK - 1) // PER_BLOCK, 4))
    for b in prange(len(out)):
        begin, end = offsets[b * PER_BLOCK], offsets[min((b + 1) * PER_BLOCK, m)]
        out[b, 0], out[b, 1], out[b, 2], out[b, 3] = _box(points, nodes[begin:end])
    return out


@njit(cache=True)
def _box(points, chosen):
    """x0, y0, x1, y1 of some of the points."""
    low_x = low_y = np.inf
    high_x = high_y = -np.inf
    for p in chosen:
        x, y = points[p, 0], points[p, 1]
        low_x, high_x = min(low_x, x), max(high_x, x)
        low_y, high_y = min(low_y, y), max(high_y, y)
    return low_x, low_y, high_x, high_y


@njit(cache=True)
def group_boxes(points, triangles, first):
    """(c, 4) bounding boxes of groups of triangles (t, 3), group c in rows first[c]:first[c+1]."""
    out = np.empty((len(first) - 1, 4))
    for c in range(len(out)):
        corners = triangles[first[c] : first[c + 1]].ravel()
        out[c, 0], out[c, 1], out[c, 2], out[c, 3] = _box(points, corners)
    return out


@njit(cache=True)
def _blocks_with(points, chosen, boxes):
    """Blocks whose box may hold one of the chosen points: by a summed-area table over the points."""
    x0, y0, x1, y1 = _box(points, chosen)
    # A margin keeps the last point within the last square.
    dx, dy = (x1 - x0) * 1.000001 / _GRID, (y1 - y0) * 1.000001 / _GRID
    sx, sy = (1.0 / dx if dx > 0.0 else 0.0), (1.0 / dy if dy > 0.0 else 0.0)
    table = np.zeros((_GRID + 1, _GRID + 1), np.int32)
    for p in chosen:
        i, j = int((points[p, 0] - x0) * sx), int((points[p, 1] - y0) * sy)
        table[min(j, _GRID - 1) + 1, min(i, _GRID - 1) + 1] += 1
    for j in range(_GRID):
        for i in range(_GRID):
            table[j + 1, i + 1] += table[j, i + 1] + table[j + 1, i] - table[j, i]
    out = np.empty(len(boxes), np.int64)
    found = 0
    for b in range(len(boxes)):
        if boxes[b, 2] < x0 or boxes[b, 0] > x1 or boxes[b, 3] < y0 or boxes[b, 1] > y1:
            continue
        # The same rounding as above, so that no point can slip between the squares.
        i0, j0 = int((max(boxes[b, 0], x0) - x0) * sx), int((max(boxes[b, 1], y0) - y0) * sy)
        i1, j1 = int((min(boxes[b, 2], x1) - x0) * sx), int((min(boxes[b, 3], y1) - y0) * sy)
        i0, j0, i1, j1 = min(i0, _GRID - 1), min(j0, _GRID - 1), min(i1, _GRID - 1), min(j1, _GRID - 1)
        if table[j1 + 1, i1 + 1] - table[j0, i1 + 1] - table[j1 + 1, i0] + table[j0, i0] > 0:
            out[found] = b
            found += 1
    return out[:found]


@njit(cache=True, parallel=True)
def _mark_cells(offsets, nodes, blocks, ring_of, ring, seen_cell):
    """Give ``ring`` to the cells in some blocks that hold a point of it and had none."""
    for j in prange(len(blocks)):
        for c in range(blocks[j] * PER_BLOCK, min((blocks[j] + 1) * PER_BLOCK, len(seen_cell))):
            if seen_cell[c] == 0:
                for k in range(offsets[c], offsets[c + 1]):
                    if ring_of[nodes[k]] == ring:
                        seen_cell[c] = ring
                        break


@njit(cache=True)
def grow_rings(points, offsets, nodes, boxes, centres, rings):
    """Cells within ``rings`` rings of mesh points, and their points: (m,), (n,) uint8, 0 beyond.

    points (n, 2); offsets (m+1,), nodes (k,) cells over them; boxes from
    `block_boxes`; centres (c,) points. Only blocks that may hold a point reached
    last are looked into.
    """
    m = len(offsets) - 1
    seen_cell = np.zeros(m, np.uint8)
    ring_of = np.zeros(len(points), np.uint8)
    out = np.empty(16 * len(centres) + 64, np.int64)
    n_points = 0
    for p in centres:
        if ring_of[p] == 0:
            ring_of[p] = 1
            out[n_points] = p
            n_points += 1
    begin = 0
    for ring in range(1, rings + 1):
        frontier = out[begin:n_points].copy()
        begin = n_points
        if len(frontier) == 0:
            break
        hit = _blocks_with(points, frontier, boxes)
        _mark_cells(offsets, nodes, hit, ring_of, ring, seen_cell)
        for b in hit:
            for c in range(b * PER_BLOCK, min((b + 1) * PER_BLOCK, m)):
                if seen_cell[c] != ring:
                    continue
                first, last = offsets[c], offsets[c + 1]
                if n_points + last - first > len(out):
                    out = _longer(out, n_points + last - first)
                for k in range(first, last):
                    p = nodes[k]
                    if ring_of[p] == 0:
                        ring_of[p] = ring + 1
                        out[n_points] = p
                        n_points += 1
    return seen_cell, ring_of


@njit(cache=True)
def _longer(array, least):
    out = np.empty(2 * least + 64, array.dtype)
    out[: len(array)] = array
    return out


@njit(cache=True)
def distinct(numbers, limit):
    """Each of ``numbers`` (k,), all below ``limit``, once, in the order they come."""
    seen = np.zeros(limit, np.uint8)
    out = np.empty(len(numbers), np.int64)
    found = 0
    for number in numbers:
        if seen[number] == 0:
            seen[number] = 1
            out[found] = number
            found += 1
    return out[:found]


@njit(cache=True)
def mark_points(offsets, nodes, cells, n_points):
    """(n_points,) uint8, 1 at the points of the chosen cells."""
    out = np.zeros(n_points, np.uint8)
    for c in cells:
        for k in range(offsets[c], offsets[c + 1]):
            out[nodes[k]] = 1
    return out


@njit(cache=True, parallel=True)
def renumber(offsets, nodes, cells, chosen, n_points):
    """The cells (k,) over new point numbers, those of ``chosen`` in their order: (offsets, nodes).

    ``chosen`` holds every point of the cells.
    """
    # Not filled: only what is written here is read.
    new = np.empty(n_points, np.int32)
    for j in range(len(chosen)):
        new[chosen[j]] = j
    out_offsets = np.zeros(len(cells) + 1, np.int64)
    for j in range(len(cells)):
        out_offsets[j + 1] = out_offsets[j] + offsets[cells[j] + 1] - offsets[cells[j]]
    out_nodes = np.empty(out_offsets[-1], np.int64)
    for j in prange(len(cells)):
        at = out_offsets[j]
        for k in range(offsets[cells[j]], offsets[cells[j] + 1]):
            out_nodes[at] = new[nodes[k]]
            at += 1
    return out_offsets, out_nodes
