"""Whole cells of a large volume: a quadratic about each node from its own cells, a cubic in each triangle.

Fits over two rings as in `fvcheck.kernels.fits` cost a microsecond or two per
node and degree. Inside a volume, where there is a node per two cells and an
integral over all of them is wanted, the nearest ring does: see
`fvcheck.sampling.inner` for the orders that follow.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange

# A column of the normal equations of which less than this share (squared) is left
# beyond the columns before it makes the node weak: its conditioning would exceed some hundred.
_LEAST_PIVOT = 1e-4

# Loops here divide as numpy does: the test for zero before each division costs a sixth.
_RUN = 256
"""Nodes per task of the parallel loop."""

_MOST = 64
"""Neighbours for which there is room without asking for more."""


@njit(cache=True, parallel=True, error_model="numpy")
def nodal_quadratics(points, offsets, nodes, first, cells, data):
    """Least-squares quadratics through the nodes' own values, from the corners of the cells at each node.

    points (n, 2); offsets, nodes cells over them; cells[first[p]:first[p+1]] the
    cells at point p; data (n, f). Of each cell all corners count but p itself and the
    one before it, which is that after it in the next cell: each neighbour once.

    Returns jets (n, 5, f): ∂x, ∂y, ∂xx, ∂xy, ∂yy, zero at weak nodes; low, high
    (n, f): range of the data in the cells at a node; weak (n,) bool: too few or
    badly placed neighbours.
    """
    n, fields = data.shape
    jets = np.zeros((n, 5, fields))
    low, high = data.copy(), data.copy()
    weak = np.zeros(n, np.bool_)
    for run in prange((n + _RUN - 1) // _RUN):
        right = np.empty((5, fields))
        around = np.empty(_MOST, np.int64)
        for p in range(run * _RUN, min((run + 1) * _RUN, n)):
            weak[p] = not _one_quadratic(
                points,
                offsets,
                nodes,
                cells[first[p] : first[p + 1]],
                data,
                p,
                right,
                around,
                jets[p],
                low[p],
                high[p],
            )
    return jets, low, high, weak


@njit(cache=True, error_model="numpy")
def _one_quadratic(points, offsets, nodes, cells, data, p, right, room, jet, low, high):
    fields = data.shape[1]
    x0, y0 = points[p, 0], points[p, 1]
    xx = xy = yy = 0.0
    count = 0
    for c in cells:
        count += offsets[c + 1] - offsets[c] - 2
    if count < 5:
        return False
    around = room[:count] if count <= _MOST else np.empty(count, np.int64)
    count = 0
    for c in cells:
        begin, end = offsets[c], offsets[c + 1]
        at = begin
        while nodes[at] != p:
            at += 1
        for _ in range(end - begin - 2):
            at = at + 1 if at + 1 < end else begin
            q = nodes[at]
            around[count] = q
            count += 1
            dx, dy = points[q, 0] - x0, points[q, 1] - y0
            xx, xy, yy = xx + dx * dx, xy + dx * dy, yy + dy * dy
            for f in range(fields):
                low[f], high[f] = min(low[f], data[q, f]), max(high[f], data[q, f])
    # In ξ = a·d the patch looks round: a is the inverse of the Cholesky factor of the mean of d dᵀ.
    xx, xy, yy = xx / count, xy / count, yy / count
    rest = yy - xy * xy / xx if xx > 0.0 else 0.0
    if not rest > 1e-12 * yy:
        return False
    a00, a11 = 1.0 / np.sqrt(xx), 1.0 / np.sqrt(rest)
    a10 = -xy / xx * a11
    right[:, :] = 0.0
    # The normal equations of x, y, x²/2, xy, y²/2 hold twelve different sums.
    s20 = s11 = s02 = s30 = s21 = s12 = s03 = s40 = s31 = s22 = s13 = s04 = 0.0
    for q in around:
        dx, dy = points[q, 0] - x0, points[q, 1] - y0
        x, y = a00 * dx, a10 * dx + a11 * dy
        x2, xy, y2 = x * x, x * y, y * y
        w = 1.0 / (x2 + y2 + 0.1)
        w *= w
        w2, w11, w02 = w * x2, w * xy, w * y2
        s20, s11, s02 = s20 + w2, s11 + w11, s02 + w02
        s30, s21, s12, s03 = s30 + w2 * x, s21 + w2 * y, s12 + w02 * x, s03 + w02 * y
        s40, s31, s22, s13, s04 = s40 + w2 * x2, s31 + w2 * xy, s22 + w2 * y2, s13 + w02 * xy, s04 + w02 * y2
        for f in range(fields):
            d = data[q, f] - data[p, f]
            right[0, f] += w * x * d
            right[1, f] += w * y * d
            right[2, f] += 0.5 * w2 * d
            right[3, f] += w11 * d
            right[4, f] += 0.5 * w02 * d
    # Cholesky row by row; d is the reciprocal of a diagonal entry.
    if not s20 > 0.0:
        return False
    d0 = 1.0 / np.sqrt(s20)
    l10, l20, l30, l40 = s11 * d0, 0.5 * s30 * d0, s21 * d0, 0.5 * s12 * d0
    rest = s02 - l10 * l10
    if not rest > _LEAST_PIVOT * s02:
        return False
    d1 = 1.0 / np.sqrt(rest)
    l21, l31, l41 = (0.5 * s21 - l20 * l10) * d1, (s12 - l30 * l10) * d1, (0.5 * s03 - l40 * l10) * d1
    rest = 0.25 * s40 - l20 * l20 - l21 * l21
    if not rest > _LEAST_PIVOT * 0.25 * s40:
        return False
    d2 = 1.0 / np.sqrt(rest)
    l32 = (0.5 * s31 - l30 * l20 - l31 * l21) * d2
    l42 = (0.25 * s22 - l40 * l20 - l41 * l21) * d2
    rest = s22 - l30 * l30 - l31 * l31 - l32 * l32
    if not rest > _LEAST_PIVOT * s22:
        return False
    d3 = 1.0 / np.sqrt(rest)
    l43 = (0.5 * s13 - l40 * l30 - l41 * l31 - l42 * l32) * d3
    rest = 0.25 * s04 - l40 * l40 - l41 * l41 - l42 * l42 - l43 * l43
    if not rest > _LEAST_PIVOT * 0.25 * s04:
        return False
    d4 = 1.0 / np.sqrt(rest)
    for f in range(fields):
        c1 = right[0, f] * d0
        c2 = (right[1, f] - l10 * c1) * d1
        c3 = (right[2, f] - l20 * c1 - l21 * c2) * d2
        c4 = (right[3, f] - l30 * c1 - l31 * c2 - l32 * c3) * d3
        c5 = (right[4, f] - l40 * c1 - l41 * c2 - l42 * c3 - l43 * c4) * d4
        c5 = c5 * d4
        c4 = (c4 - l43 * c5) * d3
        c3 = (c3 - l32 * c4 - l42 * c5) * d2
        c2 = (c2 - l21 * c3 - l31 * c4 - l41 * c5) * d1
        c1 = (c1 - l10 * c2 - l20 * c3 - l30 * c4 - l40 * c5) * d0
        jet[0, f] = a00 * c1 + a10 * c2
        jet[1, f] = a11 * c2
        jet[2, f] = a00 * a00 * c3 + 2.0 * a00 * a10 * c4 + a10 * a10 * c5
        jet[3, f] = a00 * a11 * c4 + a10 * a11 * c5
        jet[4, f] = a11 * a11 * c5
    return True


@njit(cache=True, error_model="numpy")
def in_triangles(points, triangles, data, jets, degree, slots, n_slots):
    """What three kinds of polynomials in triangles (t, 3) say: degree 1 at the centroid, 2 and 3 at the
    middles of the sides.

    Degree 1: through the corners. Degree 2: through corners and middles of sides,
    those by the second derivatives at the ends. Degree 3: the cubic with the
    corners' values and gradients, and the centroid of the quadratic.

    Returns places (2, q), values (n_slots, q), gradients (n_slots, 2, q), twice the
    area (t,); field f goes to row slots[f], other rows are zero. Component by
    component: what laws do with them then runs along memory. q = t, or 3t with
    the k-th places of all triangles together. One thread: it works on runs of
    triangles between other steps, and waking a second one each time costs more.
    """
    count, fields = len(triangles), data.shape[1]
    per = 1 if degree == 1 else 3
    places, values = np.empty((2, per * count)), np.zeros((n_slots, per * count))
    gradients, twice = np.zeros((n_slots, 2, per * count)), np.empty(count)
    for t in range(count):
        a, b, c = triangles[t, 0], triangles[t, 1], triangles[t, 2]
        ax, ay, bx, by, cx, cy = (
            points[a, 0],
            points[a, 1],
            points[b, 0],
            points[b, 1],
            points[c, 0],
            points[c, 1],
        )
        # Sides ab, bc, ca, and the gradients of the barycentric weights.
        ux, uy, vx, vy, wx, wy = bx - ax, by - ay, cx - bx, cy - by, ax - cx, ay - cy
        det = uy * wx - ux * wy
        twice[t] = det
        lax, lay, lbx, lby, lcx, lcy = -vy / det, vx / det, -wy / det, wx / det, -uy / det, ux / det
        if degree == 1:
            places[0, t], places[1, t] = ax + (ux - wx) / 3.0, ay + (uy - wy) / 3.0
            for f in range(fields):
                g = slots[f]
                va, vb, vc = data[a, f], data[b, f], data[c, f]
                values[g, t] = (va + vb + vc) / 3.0
                gradients[g, 0, t] = va * lax + vb * lbx + vc * lcx
                gradients[g, 1, t] = va * lay + vb * lby + vc * lcy
            continue
        i, j, k = t, count + t, 2 * count + t
        places[0, i], places[1, i] = 0.5 * (ax + bx), 0.5 * (ay + by)
        places[0, j], places[1, j] = 0.5 * (bx + cx), 0.5 * (by + cy)
        places[0, k], places[1, k] = 0.5 * (cx + ax), 0.5 * (cy + ay)
        for f in range(fields):
            g = slots[f]
            va, vb, vc = data[a, f], data[b, f], data[c, f]
            if degree == 2:
                # −d·(H + H')·d/16
                mab = 0.5 * (va + vb) - _second(jets, a, b, ux, uy, f)
                mbc = 0.5 * (vb + vc) - _second(jets, b, c, vx, vy, f)
                mca = 0.5 * (vc + va) - _second(jets, c, a, wx, wy, f)
                eab = ebc = eca = 0.0
            else:
                gax, gay, gbx, gby = jets[a, 0, f], jets[a, 1, f], jets[b, 0, f], jets[b, 1, f]
                gcx, gcy = jets[c, 0, f], jets[c, 1, f]
                mab = 0.5 * (va + vb) + 0.125 * ((gax - gbx) * ux + (gay - gby) * uy)
                mbc = 0.5 * (vb + vc) + 0.125 * ((gbx - gcx) * vx + (gby - gcy) * vy)
                mca = 0.5 * (vc + va) + 0.125 * ((gcx - gax) * wx + (gcy - gay) * wy)
                # What the cubic adds along a side: e·L L'(L − L').
                eab = 0.5 * ((gax + gbx) * ux + (gay + gby) * uy) - (vb - va)
                ebc = 0.5 * ((gbx + gcx) * vx + (gby + gcy) * vy) - (vc - vb)
                eca = 0.5 * ((gcx + gax) * wx + (gcy + gay) * wy) - (va - vc)
            values[g, i], values[g, j], values[g, k] = mab, mbc, mca
            # Gradients as sums over the barycentric weights of a, b, c.
            pa, pb = va + 0.25 * eab, vb - 0.25 * eab
            pc = 2.0 * (mbc + mca - mab) - vc + 0.25 * (ebc - eca)
            gradients[g, 0, i] = pa * lax + pb * lbx + pc * lcx
            gradients[g, 1, i] = pa * lay + pb * lby + pc * lcy
            pb, pc = vb + 0.25 * ebc, vc - 0.25 * ebc
            pa = 2.0 * (mca + mab - mbc) - va + 0.25 * (eca - eab)
            gradients[g, 0, j] = pa * lax + pb * lbx + pc * lcx
            gradients[g, 1, j] = pa * lay + pb * lby + pc * lcy
            pc, pa = vc + 0.25 * eca, va - 0.25 * eca
            pb = 2.0 * (mab + mbc - mca) - vb + 0.25 * (eab - ebc)
            gradients[g, 0, k] = pa * lax + pb * lbx + pc * lcx
            gradients[g, 1, k] = pa * lay + pb * lby + pc * lcy
    return places, values, gradients, twice


@njit(cache=True, error_model="numpy")
def _second(jets, p, q, dx, dy, f):
    """An eighth of the mean second derivative along d between two nodes, times |d|²."""
    along = (jets[p, 2, f] + jets[q, 2, f]) * dx * dx + 2.0 * (jets[p, 3, f] + jets[q, 3, f]) * dx * dy
    return 0.0625 * (along + (jets[p, 4, f] + jets[q, 4, f]) * dy * dy)


@njit(cache=True, parallel=True, error_model="numpy")
def jumps(points, triangles, data, jets, low, high, least, disagree, excess):
    """(t,) bool: triangles across which a field jumps.

    There the middles of a side by degrees 2 and 3 differ by more than ``disagree``
    of the range of the data around, low and high (n, f), and the latter leaves it
    by more than ``excess`` of it; ranges below ``least`` (f,) do not matter.
    """
    out = np.zeros(len(triangles), np.bool_)
    for t in prange(len(triangles)):
        a, b, c = triangles[t, 0], triangles[t, 1], triangles[t, 2]
        for f in range(data.shape[1]):
            bottom, top = min(low[a, f], low[b, f], low[c, f]), max(high[a, f], high[b, f], high[c, f])
            extent = top - bottom
            if not extent > least[f]:
                continue
            for k in range(3):
                p, q = triangles[t, k], triangles[t, (k + 1) % 3]
                dx, dy = points[q, 0] - points[p, 0], points[q, 1] - points[p, 1]
                mean = 0.5 * (data[p, f] + data[q, f])
                bend = 0.125 * ((jets[p, 0, f] - jets[q, 0, f]) * dx + (jets[p, 1, f] - jets[q, 1, f]) * dy)
                beyond = max(mean + bend - top, bottom - mean - bend)
                if beyond > excess * extent:
                    apart = abs(bend + _second(jets, p, q, dx, dy, f))
                    out[t] = out[t] or apart > disagree * extent
    return out
