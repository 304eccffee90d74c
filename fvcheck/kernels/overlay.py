"""Where the control surface cuts the mesh: every piece in one triangle, every area in one triangle."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit

from fvcheck.kernels.grid import _clip
from fvcheck.kernels.predicates import crosses_ray, side_of_edge, side_of_segment


class Cuts(NamedTuple):
    """Raw result of `cut_triangles`; see `fvcheck.overlay.overlay.Overlay` for the meaning.

    drawn_ends (a, 4), drawn (a, 2): start and end point; triangle, segment
    edge_ends (b, 4), edge (b, 3): start and end point; triangle, boundary edge, winding
    area_corners (c, 6), area (c, 2): a signed triangle; the mesh triangle it lies in, winding
    """

    drawn_ends: np.ndarray
    drawn: np.ndarray
    edge_ends: np.ndarray
    edge: np.ndarray
    area_corners: np.ndarray
    area: np.ndarray


@njit(cache=True)
def winding_numbers(points, chosen, start, end, grid, shift):
    """Winding number of the surface, moved by shift·SHIFT·0⁺, about the chosen mesh points.

    Exact also for points on the surface; ray casting over one grid row.
    """
    out = np.zeros(len(chosen), np.int64)
    for k in range(len(chosen)):
        x, y = points[chosen[k], 0], points[chosen[k], 1]
        j = int(np.floor((y - grid.y0) / grid.dy))
        if j < 0 or j >= grid.ny:
            continue
        for r in range(grid.row_first[j], grid.row_first[j + 1]):
            s = grid.row_segments[r]
            out[k] += crosses_ray(start[s, 0], start[s, 1], end[s, 0], end[s, 1], x, y, shift)
    return out


@njit(cache=True)
def _more(array):
    """The same rows in an array twice as long."""
    out = np.empty((2 * array.shape[0], array.shape[1]), array.dtype)
    out[: array.shape[0]] = array
    return out


@njit(cache=True)
def _position(points, a, b, px, py, qx, qy):
    """Fraction along the mesh edge a→b (a < b) where the line p→q crosses it.

    Both triangles of the edge call this with the same arguments and get the
    same bits, so what leaves one triangle enters the next exactly there. The
    fraction is kept within the stretch that p→q covers: where both run nearly
    along one another the quotient alone would be noise.
    """
    ex, ey = points[b, 0] - points[a, 0], points[b, 1] - points[a, 1]
    sx, sy = qx - px, qy - py
    da = sx * (points[a, 1] - py) - sy * (points[a, 0] - px)
    db = sx * (points[b, 1] - py) - sy * (points[b, 0] - px)
    length2 = ex * ex + ey * ey
    fp = ((px - points[a, 0]) * ex + (py - points[a, 1]) * ey) / length2
    fq = ((qx - points[a, 0]) * ex + (qy - points[a, 1]) * ey) / length2
    f = da / (da - db) if da != db else 0.5 * (fp + fq)
    return _clip(f, max(0.0, min(fp, fq)), min(1.0, max(fp, fq)))


@njit(cache=True)
def cut_triangles(points, triangles, first, boxes, tri_edges, winding, start, end, grid, shift, closed):
    """Cut triangles by the segments start→end.

    points (n, 2); triangles (t, 3) ccw, grouped by cell: those of cell c are
    first[c]:first[c+1]; boxes (cells, 4) their bounding boxes; tri_edges (t, 3)
    number of the boundary edge that side j (corner j to j+1) lies on, or -1;
    winding (n,) winding numbers at the corners; shift ±1 direction of the
    infinitesimal translation; closed: also areas and boundary parts.

    The part of triangle T inside the surface is a sum of signed triangles from
    its corner 0 over the pieces of its border: drawn pieces with the inside on
    their left, and side 1 (the side opposite to corner 0) where it is inside.
    The two other sides pass through corner 0 and add nothing.
    """
    drawn_ends, drawn = np.empty((64, 4)), np.empty((64, 2), np.int64)
    edge_ends, edge = np.empty((64, 4)), np.empty((64, 3), np.int64)
    corners, area = np.empty((64, 6)), np.empty((64, 2), np.int64)
    n_drawn = n_edge = n_area = 0
    last = np.full(len(start), -1, np.int64)
    candidates = np.empty(len(start), np.int64)
    hit_s = np.empty(2 * len(start) + 2)
    hit_side = np.empty(2 * len(start) + 2, np.int64)
    hit_turn = np.empty(2 * len(start) + 2, np.int64)

    for c in range(len(first) - 1):
        i0 = _clip(int(np.floor((boxes[c, 0] - grid.x0) / grid.dx)), 0, grid.nx - 1)
        j0 = _clip(int(np.floor((boxes[c, 1] - grid.y0) / grid.dy)), 0, grid.ny - 1)
        i1 = _clip(int(np.floor((boxes[c, 2] - grid.x0) / grid.dx)), 0, grid.nx - 1)
        j1 = _clip(int(np.floor((boxes[c, 3] - grid.y0) / grid.dy)), 0, grid.ny - 1)
        found = 0
        for j in range(j0, j1 + 1):
            for i in range(i0, i1 + 1):
                for r in range(grid.first[j * grid.nx + i], grid.first[j * grid.nx + i + 1]):
                    s = grid.segments[r]
                    if last[s] != c:
                        last[s] = c
                        candidates[found] = s
                        found += 1
        # Grid order depends on the cell's place only; segment order keeps sums reproducible.
        candidates[:found].sort()

        for t in range(first[c], first[c + 1]):
            tri = triangles[t]
            x = points[tri[0], 0], points[tri[1], 0], points[tri[2], 0]
            y = points[tri[0], 1], points[tri[1], 1], points[tri[2], 1]
            hits = 0
            pieces = 0
            for r in range(found):
                s = candidates[r]
                px, py, qx, qy = start[s, 0], start[s, 1], end[s, 0], end[s, 1]
                if (
                    max(px, qx) < min(x[0], x[1], x[2])
                    or min(px, qx) > max(x[0], x[1], x[2])
                    or max(py, qy) < min(y[0], y[1], y[2])
                    or min(py, qy) > max(y[0], y[1], y[2])
                ):
                    continue
                side0 = side_of_segment(px, py, qx, qy, x[0], y[0], shift)
                side1 = side_of_segment(px, py, qx, qy, x[1], y[1], shift)
                side2 = side_of_segment(px, py, qx, qy, x[2], y[2], shift)
                if side0 == side1 and side1 == side2:
                    continue
                sides = (side0, side1, side2)
                p_in = q_in = True
                ax, ay, bx, by = px, py, qx, qy
                entered = left = False
                for k in range(3):
                    a, b = tri[k], tri[(k + 1) % 3]
                    low, high = min(a, b), max(a, b)
                    turned = 1 if a < b else -1
                    lx, ly, hx, hy = points[low, 0], points[low, 1], points[high, 0], points[high, 1]
                    p_side = turned * side_of_edge(lx, ly, hx, hy, px, py, shift)
                    q_side = turned * side_of_edge(lx, ly, hx, hy, qx, qy, shift)
                    p_in = p_in and p_side > 0
                    q_in = q_in and q_side > 0
                    if p_side == q_side or sides[k] == sides[(k + 1) % 3]:
                        continue
                    f = _position(points, low, high, px, py, qx, qy)
                    cx, cy = lx + f * (hx - lx), ly + f * (hy - ly)
                    if q_side > 0:
                        ax, ay, entered = cx, cy, True
                    else:
                        bx, by, left = cx, cy, True
                    hit_s[hits] = f if turned > 0 else 1.0 - f
                    hit_side[hits] = k
                    hit_turn[hits] = 1 if sides[k] < 0 else -1
                    hits += 1
                    if closed and k == 1:
                        if n_area == len(corners):
                            corners, area = _more(corners), _more(area)
                        corners[n_area, 0], corners[n_area, 1] = x[0], y[0]
                        corners[n_area, 2], corners[n_area, 3] = x[1], y[1]
                        corners[n_area, 4], corners[n_area, 5] = cx, cy
                        area[n_area, 0], area[n_area, 1] = t, -hit_turn[hits - 1]
                        n_area += 1
                if not ((p_in or entered) and (q_in or left)):
                    continue
                pieces += 1
                if ax == bx and ay == by:
                    continue
                if n_drawn == len(drawn):
                    drawn_ends, drawn = _more(drawn_ends), _more(drawn)
                drawn_ends[n_drawn, 0], drawn_ends[n_drawn, 1] = ax, ay
                drawn_ends[n_drawn, 2], drawn_ends[n_drawn, 3] = bx, by
                drawn[n_drawn, 0], drawn[n_drawn, 1] = t, s
                n_drawn += 1
                if closed:
                    if n_area == len(corners):
                        corners, area = _more(corners), _more(area)
                    corners[n_area, 0], corners[n_area, 1] = x[0], y[0]
                    corners[n_area, 2], corners[n_area, 3] = ax, ay
                    corners[n_area, 4], corners[n_area, 5] = bx, by
                    area[n_area, 0], area[n_area, 1] = t, 1
                    n_area += 1
            if not closed:
                continue
            if winding[tri[2]] != 0:
                if n_area == len(corners):
                    corners, area = _more(corners), _more(area)
                for k in range(3):
                    corners[n_area, 2 * k], corners[n_area, 2 * k + 1] = x[k], y[k]
                area[n_area, 0], area[n_area, 1] = t, winding[tri[2]]
                n_area += 1
            for k in range(3):
                if tri_edges[t, k] < 0:
                    continue
                # Walk along the side from corner to corner; the winding number changes at each hit.
                a, b = tri[k], tri[(k + 1) % 3]
                turn = winding[a]
                from_s = 0.0
                while True:
                    nearest = -1
                    for h in range(hits):
                        if hit_side[h] == k and (nearest < 0 or hit_s[h] < hit_s[nearest]):
                            nearest = h
                    to_s = hit_s[nearest] if nearest >= 0 else 1.0
                    if turn != 0 and to_s != from_s:
                        if n_edge == len(edge):
                            edge_ends, edge = _more(edge_ends), _more(edge)
                        edge_ends[n_edge, 0] = _between(points, a, b, from_s, 0)
                        edge_ends[n_edge, 1] = _between(points, a, b, from_s, 1)
                        edge_ends[n_edge, 2] = _between(points, a, b, to_s, 0)
                        edge_ends[n_edge, 3] = _between(points, a, b, to_s, 1)
                        edge[n_edge, 0], edge[n_edge, 1], edge[n_edge, 2] = t, tri_edges[t, k], turn
                        n_edge += 1
                    if nearest < 0:
                        break
                    turn += hit_turn[nearest]
                    from_s = to_s
                    hit_side[nearest] = -1
    return Cuts(
        drawn_ends[:n_drawn],
        drawn[:n_drawn],
        edge_ends[:n_edge],
        edge[:n_edge],
        corners[:n_area],
        area[:n_area],
    )


@njit(cache=True)
def _between(points, a, b, s, axis):
    """Coordinate at fraction s of a→b, exact at both ends."""
    if s == 0.0:
        return points[a, axis]
    if s == 1.0:
        return points[b, axis]
    if a < b:
        return points[a, axis] + s * (points[b, axis] - points[a, axis])
    return points[b, axis] + (1.0 - s) * (points[a, axis] - points[b, axis])


@njit(cache=True)
def find_sides(triangles, first, edge_first, edge_ends):
    """(t, 3) number of the boundary edge each triangle side lies on, or -1.

    ``edge_ends[edge_first[c]:edge_first[c+1]]`` are the boundary edges (e, 2) of cell c.
    """
    out = np.full((len(triangles), 3), -1, np.int64)
    for c in range(len(first) - 1):
        for t in range(first[c], first[c + 1]):
            for k in range(3):
                a, b = triangles[t, k], triangles[t, (k + 1) % 3]
                for e in range(edge_first[c], edge_first[c + 1]):
                    if edge_ends[e, 0] == a and edge_ends[e, 1] == b:
                        out[t, k] = e
    return out
