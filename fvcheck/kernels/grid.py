"""A background grid over the control surface: which cells may it touch, which side are the others on."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit, prange

from fvcheck.kernels.blocks import PER_BLOCK

OUTSIDE, INSIDE, NEAR = 0, 1, 2


class SurfaceGrid(NamedTuple):
    """Segments binned on a uniform grid over their bounding box.

    x0, y0, dx, dy, nx, ny : the grid
    first, segments : segments that may touch grid cell j·nx+i, CSR
    row_first, row_segments : segments that may reach grid row j, CSR
    marks : (ny+1, nx+1) int32, summed-area table of the touched grid cells
    winding : (ny, nx) int32, winding number at the centre of each grid cell
    """

    x0: float
    y0: float
    dx: float
    dy: float
    nx: int
    ny: int
    first: np.ndarray
    segments: np.ndarray
    row_first: np.ndarray
    row_segments: np.ndarray
    marks: np.ndarray
    winding: np.ndarray


@njit(cache=True)
def _clip(value, low, high):
    return low if value < low else (high if value > high else value)


@njit(cache=True)
def _walk(px, py, qx, qy, x0, y0, dx, dy, nx, ny, step):
    """Grid range (i0, i1, j0, j1) covered by one sub-step of a segment, with a safe margin."""
    steps = int(max(abs(qx - px) / dx, abs(qy - py) / dy)) + 1
    t0, t1 = step / steps, (step + 1) / steps
    ax, ay = px + t0 * (qx - px), py + t0 * (qy - py)
    bx, by = px + t1 * (qx - px), py + t1 * (qy - py)
    margin = 1e-6
    i0 = _clip(int(np.floor((min(ax, bx) - x0) / dx - margin)), 0, nx - 1)
    i1 = _clip(int(np.floor((max(ax, bx) - x0) / dx + margin)), 0, nx - 1)
    j0 = _clip(int(np.floor((min(ay, by) - y0) / dy - margin)), 0, ny - 1)
    j1 = _clip(int(np.floor((max(ay, by) - y0) / dy + margin)), 0, ny - 1)
    return i0, i1, j0, j1


@njit(cache=True)
def _bin(start, end, x0, y0, dx, dy, nx, ny):
    """CSR of segments per grid cell: count, then fill."""
    n = len(start)
    size = nx * ny
    first = np.zeros(size + 1, np.int64)
    segments = np.empty(0, np.int64)
    for fill in range(2):
        last = np.full(size, -1, np.int64)
        if fill == 1:
            for c in range(size):
                first[c + 1] += first[c]
            segments = np.empty(first[size], np.int64)
            at = first[:-1].copy()
        else:
            at = np.empty(0, np.int64)
        for s in range(n):
            px, py, qx, qy = start[s, 0], start[s, 1], end[s, 0], end[s, 1]
            steps = int(max(abs(qx - px) / dx, abs(qy - py) / dy)) + 1
            for k in range(steps):
                i0, i1, j0, j1 = _walk(px, py, qx, qy, x0, y0, dx, dy, nx, ny, k)
                for j in range(j0, j1 + 1):
                    for i in range(i0, i1 + 1):
                        c = j * nx + i
                        if last[c] == s:
                            continue
                        last[c] = s
                        if fill == 1:
                            segments[at[c]] = s
                            at[c] += 1
                        else:
                            first[c + 1] += 1
    return first, segments


@njit(cache=True)
def build_grid(start, end, resolution):
    """Bin the segments start→end ((n, 2) each) on about ``resolution``² grid cells."""
    x0, x1 = min(start[:, 0].min(), end[:, 0].min()), max(start[:, 0].max(), end[:, 0].max())
    y0, y1 = min(start[:, 1].min(), end[:, 1].min()), max(start[:, 1].max(), end[:, 1].max())
    # A margin keeps points on the border of the box inside the grid.
    pad = 1e-3 * max(x1 - x0, y1 - y0) + 1e-300
    x0, x1, y0, y1 = x0 - pad, x1 + pad, y0 - pad, y1 + pad
    size = np.sqrt((x1 - x0) * (y1 - y0)) / resolution
    size = max(size, max(x1 - x0, y1 - y0) / (16 * resolution))
    nx, ny = int((x1 - x0) / size) + 1, int((y1 - y0) / size) + 1
    dx, dy = (x1 - x0) / nx, (y1 - y0) / ny
    first, segments = _bin(start, end, x0, y0, dx, dy, nx, ny)

    row_first = np.zeros(ny + 1, np.int64)
    row_segments = np.empty(0, np.int64)
    winding = np.zeros((ny, nx), np.int32)
    at = np.zeros(ny, np.int64)
    for fill in range(2):
        if fill == 1:
            for j in range(ny):
                row_first[j + 1] += row_first[j]
            row_segments = np.empty(row_first[ny], np.int64)
            at = row_first[:-1].copy()
        for s in range(len(start)):
            low, high = min(start[s, 1], end[s, 1]), max(start[s, 1], end[s, 1])
            j0 = _clip(int(np.floor((low - y0) / dy - 1e-6)), 0, ny - 1)
            j1 = _clip(int(np.floor((high - y0) / dy + 1e-6)), 0, ny - 1)
            for j in range(j0, j1 + 1):
                if fill == 0:
                    row_first[j + 1] += 1
                    continue
                row_segments[at[j]] = s
                at[j] += 1
                yc = y0 + (j + 0.5) * dy
                if (start[s, 1] > yc) != (end[s, 1] > yc):
                    t = (yc - start[s, 1]) / (end[s, 1] - start[s, 1])
                    x = start[s, 0] + t * (end[s, 0] - start[s, 0])
                    turn = 1 if end[s, 1] > yc else -1
                    for i in range(_clip(int(np.ceil((x - x0) / dx - 0.5)), 0, nx)):
                        winding[j, i] += turn
    marks = np.zeros((ny + 1, nx + 1), np.int32)
    for j in range(ny):
        for i in range(nx):
            c = j * nx + i
            touched = 1 if first[c + 1] > first[c] else 0
            marks[j + 1, i + 1] = touched + marks[j, i + 1] + marks[j + 1, i] - marks[j, i]
    return SurfaceGrid(x0, y0, dx, dy, nx, ny, first, segments, row_first, row_segments, marks, winding)


@njit(cache=True)
def _status(low_x, low_y, high_x, high_y, grid):
    """`OUTSIDE`, `INSIDE` or `NEAR` of a box."""
    x1, y1 = grid.x0 + grid.nx * grid.dx, grid.y0 + grid.ny * grid.dy
    if high_x < grid.x0 or low_x > x1 or high_y < grid.y0 or low_y > y1:
        return OUTSIDE
    i0 = _clip(int((low_x - grid.x0) / grid.dx), 0, grid.nx - 1)
    i1 = _clip(int((high_x - grid.x0) / grid.dx), 0, grid.nx - 1) + 1
    j0 = _clip(int((low_y - grid.y0) / grid.dy), 0, grid.ny - 1)
    j1 = _clip(int((high_y - grid.y0) / grid.dy), 0, grid.ny - 1) + 1
    marks = grid.marks
    if marks[j1, i1] - marks[j0, i1] - marks[j1, i0] + marks[j0, i0] > 0:
        return NEAR
    if low_x < grid.x0 or high_x > x1 or low_y < grid.y0 or high_y > y1:
        return OUTSIDE
    return INSIDE if grid.winding[j0, i0] != 0 else OUTSIDE


@njit(cache=True, parallel=True)
def classify_cells(points, offsets, nodes, boxes, grid):
    """OUTSIDE, INSIDE or NEAR (the surface may touch it) for every cell.

    points (n, 2), offsets (m+1,), nodes (k,), boxes (b, 4) of runs of cells, see
    `block_boxes` -> (m,) uint8. Cells are looked at only where their run is near.
    """
    m = len(offsets) - 1
    status = np.empty(m, np.uint8)
    for b in prange(len(boxes)):
        first, last = b * PER_BLOCK, min((b + 1) * PER_BLOCK, m)
        of_block = _status(boxes[b, 0], boxes[b, 1], boxes[b, 2], boxes[b, 3], grid)
        for c in range(first, last):
            if of_block != NEAR:
                status[c] = of_block
                continue
            a = nodes[offsets[c]]
            low_x = high_x = points[a, 0]
            low_y = high_y = points[a, 1]
            for k in range(offsets[c] + 1, offsets[c + 1]):
                x, y = points[nodes[k], 0], points[nodes[k], 1]
                low_x, high_x = min(low_x, x), max(high_x, x)
                low_y, high_y = min(low_y, y), max(high_y, y)
            status[c] = _status(low_x, low_y, high_x, high_y, grid)
    return status
