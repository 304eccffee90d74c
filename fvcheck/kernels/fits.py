"""Weighted least-squares polynomials about mesh points, as linear operators on the data."""

from __future__ import annotations

import numpy as np
from numba import njit, prange

# Number of monomials up to each degree.
TERMS = (1, 3, 6, 10)

# A fit whose matrix (columns scaled to one) is worse conditioned than this
# would amplify the data's own roughness; the degree falls instead.
_WORST_CONDITION = 2e3

# Places evaluated by one task of a parallel loop.
_RUN = 512

# Distance of the mean of a patch from its centre, in units of its own spread, beyond
# which it lies on one side: about 0.9 on a straight boundary, 0 inside.
_ONE_SIDED = 0.4

# Abscissas and weights of three-point Gauss quadrature on (0, 1): exact to degree 5.
_G = (0.1127016653792583, 0.5, 0.8872983346207417)
_W = (0.2777777777777778, 0.4444444444444444, 0.2777777777777778)


@njit(cache=True)
def monomials(x, y, out):
    """1, x, y, x²/2, xy, y²/2, x³/6, x²y/2, xy²/2, y³/6 (so coefficients are derivatives)."""
    out[0] = 1.0
    out[1] = x
    out[2] = y
    out[3] = 0.5 * x * x
    out[4] = x * y
    out[5] = 0.5 * y * y
    out[6] = x * x * x / 6.0
    out[7] = 0.5 * x * x * y
    out[8] = 0.5 * x * y * y
    out[9] = y * y * y / 6.0


@njit(cache=True)
def cell_moments(points, ring, x0, y0, a, radial, out):
    """Averages of the monomials over a polygon, in coordinates ξ = a (x − x0).

    By the divergence theorem, ∫f dA = ∮F dη with ∂F/∂ξ = f, three Gauss points
    an edge: exact for cubics. ring (k,) point numbers, either orientation;
    radial: coordinate (0, 1) whose value weighs the average, as in the volume of
    an axisymmetric cell, or -1 for none.
    """
    # The weight as r + r1 ξ + r2 η.
    r, r1, r2 = 1.0, 0.0, 0.0
    if radial >= 0:
        det = a[0, 0] * a[1, 1] - a[0, 1] * a[1, 0]
        if radial == 0:
            r, r1, r2 = x0, a[1, 1] / det, -a[0, 1] / det
        else:
            r, r1, r2 = y0, -a[1, 0] / det, a[0, 0] / det
    k = len(ring)
    area = 0.0
    for j in range(10):
        out[j] = 0.0
    for e in range(k):
        p, q = ring[e], ring[e + 1 if e + 1 < k else 0]
        px, py = points[p, 0] - x0, points[p, 1] - y0
        qx, qy = points[q, 0] - x0, points[q, 1] - y0
        ux, uy = a[0, 0] * px + a[0, 1] * py, a[1, 0] * px + a[1, 1] * py
        vx, vy = a[0, 0] * qx + a[0, 1] * qy, a[1, 0] * qx + a[1, 1] * qy
        dy = vy - uy
        for g in range(3):
            x, y = ux + _G[g] * (vx - ux), uy + _G[g] * dy
            w = _W[g] * dy * x
            # ∫ of each monomial over ξ is ξ/(m+1) times it, m its power of ξ; with a weight
            # r1 ξ it is r1 ξ²/(m+2) times it.
            here = r + r2 * y
            w0, w1 = w * (here + r1 * x / 2.0), w * (here / 2.0 + r1 * x / 3.0)
            w2, w3 = w * (here / 3.0 + r1 * x / 4.0), w * (here / 4.0 + r1 * x / 5.0)
            area += w0
            out[1] += w1 * x
            out[2] += w0 * y
            out[3] += w2 * x * x / 2.0
            out[4] += w1 * x * y
            out[5] += w0 * y * y / 2.0
            out[6] += w3 * x * x * x / 6.0
            out[7] += w2 * x * x * y / 2.0
            out[8] += w1 * x * y * y / 2.0
            out[9] += w0 * y * y * y / 6.0
    out[0] = 1.0
    for j in range(1, 10):
        out[j] /= area


@njit(cache=True)
def polygon_centroid(points, ring):
    """Centroid of a polygon, about its first point to keep the digits."""
    x0, y0 = points[ring[0], 0], points[ring[0], 1]
    twice = cx = cy = 0.0
    for e in range(1, len(ring) - 1):
        ux, uy = points[ring[e], 0] - x0, points[ring[e], 1] - y0
        vx, vy = points[ring[e + 1], 0] - x0, points[ring[e + 1], 1] - y0
        w = ux * vy - uy * vx
        twice += w
        cx += w * (ux + vx) / 3.0
        cy += w * (uy + vy) / 3.0
    return x0 + cx / twice, y0 + cy / twice


@njit(cache=True)
def whitening(places, count, out):
    """out (2, 2): the inverse square root of the mean of d dᵀ over the offsets d.

    In ξ = out·d every patch looks round, so a boundary-layer patch of aspect
    ratio 10⁴ is as well conditioned as an isotropic one.
    """
    xx = xy = yy = 0.0
    for s in range(count):
        xx += places[s, 0] * places[s, 0]
        xy += places[s, 0] * places[s, 1]
        yy += places[s, 1] * places[s, 1]
    xx, xy, yy = xx / count, xy / count, yy / count
    # Eigenvalues; the small one from the determinant, so that it keeps its digits.
    half, diff = 0.5 * (xx + yy), 0.5 * (xx - yy)
    root = np.sqrt(diff * diff + xy * xy)
    big = half + root
    if big <= 0.0:
        return False
    # Rotation to the axes of the patch.
    angle = 0.5 * np.arctan2(2.0 * xy, xx - yy)
    c, s = np.cos(angle), np.sin(angle)
    small = 0.0
    for i in range(count):
        d = -s * places[i, 0] + c * places[i, 1]
        small += d * d
    small /= count
    if small <= 1e-20 * big:
        return False
    out[0, 0], out[0, 1] = c / np.sqrt(big), s / np.sqrt(big)
    out[1, 0], out[1, 1] = -s / np.sqrt(small), c / np.sqrt(small)
    return True


# Sums may be taken in any order: four at a time. The order is that of the entries either way.
_FAST = {"reassoc", "contract"}


@njit(cache=True, fastmath=_FAST)
def _add(a, factor, b, n):
    """b += factor·a."""
    for s in range(n):
        b[s] += factor * a[s]


@njit(cache=True, fastmath=_FAST)
def _factor(matrix, weights, rows, columns, q, inverse, size, scale):
    """diag(weights)·matrixᵀ·diag(scale) = Q R, column by column; returns how many are independent.

    matrix (columns, rows): a row for each unknown, so that sums run along memory.
    Fills q (columns, rows): the columns of Q; inverse (columns, columns): of R;
    size (columns,): squared length of its columns; scale (columns,): to length one.
    The inverse of a leading block of R is a leading block of the inverse, so one
    factorisation serves all degrees. Modified Gram–Schmidt; orthogonalised again
    where the first time took most of a column away ("twice is enough", Parlett
    1980, section 6.9).
    """
    r = np.empty((columns, columns))
    for j in range(columns):
        total = 0.0
        for s in range(rows):
            q[j, s] = weights[s] * matrix[j, s]
            total += q[j, s] * q[j, s]
        norm = np.sqrt(total)
        if norm == 0.0:
            return j
        scale[j] = 1.0 / norm
        for s in range(rows):
            q[j, s] *= scale[j]
        for i in range(columns):
            r[i, j] = 0.0
        for _ in range(2):
            for i in range(j):
                dot = 0.0
                for s in range(rows):
                    dot += q[i, s] * q[j, s]
                r[i, j] += dot
                for s in range(rows):
                    q[j, s] -= dot * q[i, s]
            total = 0.0
            for s in range(rows):
                total += q[j, s] * q[j, s]
            norm = np.sqrt(total)
            if norm > 0.5:
                break
        if norm < 1e-10:
            return j
        r[j, j] = norm
        for s in range(rows):
            q[j, s] /= norm
        inverse[j, j] = 1.0 / norm
        size[j] = inverse[j, j] ** 2
        for i in range(j - 1, -1, -1):
            total = 0.0
            for k in range(i + 1, j + 1):
                total += r[i, k] * inverse[k, j]
            inverse[i, j] = -total / r[i, i]
            size[j] += inverse[i, j] ** 2
    return columns


@njit(cache=True)
def _set_up(
    points, offsets, nodes, centre, entries, rows, at_points, averages, radial, a, places, matrix, weights
):
    """Frame ``a``, matrix (10, rows) and weights (rows,) of fits about a centre; False without a frame."""
    x0, y0 = points[centre, 0], points[centre, 1]
    for s in range(rows):
        e = entries[s]
        if at_points or e < 0:
            p = e if e >= 0 else -1 - e
            places[s, 0], places[s, 1] = points[p, 0] - x0, points[p, 1] - y0
        else:
            cx, cy = polygon_centroid(points, nodes[offsets[e] : offsets[e + 1]])
            places[s, 0], places[s, 1] = cx - x0, cy - y0
    framed = rows > 0 and whitening(places, rows, a)
    if not framed:
        a[0, 0], a[0, 1], a[1, 0], a[1, 1] = 1.0, 0.0, 0.0, 1.0
    row = np.empty(10)
    mean_x = mean_y = 0.0
    for s in range(rows):
        dx, dy = places[s, 0], places[s, 1]
        x, y = a[0, 0] * dx + a[0, 1] * dy, a[1, 0] * dx + a[1, 1] * dy
        e = entries[s]
        if at_points or e < 0 or not averages:
            monomials(x, y, row)
        else:
            cell_moments(points, nodes[offsets[e] : offsets[e + 1]], x0, y0, a, radial, row)
        for j in range(10):
            matrix[j, s] = row[j]
        mean_x += row[1] / rows
        mean_y += row[2] / rows
        weights[s] = x * x + y * y
    # Near data count more. All around a centre, the inverse fourth power of the distance
    # leaves the least error of the powers tried in scripts/calibrate.py; where the data
    # lie on one side, it makes a fit lean on too few of them, and the square is better.
    one_sided = mean_x * mean_x + mean_y * mean_y > _ONE_SIDED**2
    for s in range(rows):
        weights[s] = 1.0 / (weights[s] + 0.1)
        if not one_sided:
            weights[s] *= weights[s]
    return framed


@njit(cache=True)
def _fit_one(
    points,
    offsets,
    nodes,
    centre,
    entries,
    sizes,
    degrees,
    at_points,
    averages,
    radial,
    begin,
    operator,
    frames,
    reached,
):
    """Polynomials of all degrees about a centre: fills operator (10, …) from columns begin[k] on.

    frames (d, 2, 2), reached (d,): the degree reached, -1 for none. Column
    begin[k] + sizes[k] of the operator belongs to the centre's own value, which
    point data have and which is interpolated.
    """
    most = sizes.max()
    places, matrix, weights = np.empty((most, 2)), np.empty((10, most)), np.empty(most)
    q, inverse = np.empty((10, most)), np.empty((10, 10))
    size, scale = np.empty(10), np.empty(10)
    skip = 1 if at_points else 0
    last, sound, framed = -1, 0, False
    for k in range(len(degrees) - 1, -1, -1):
        rows = sizes[k]
        if rows == last:
            frames[k] = frames[k + 1]
        else:
            framed = _set_up(
                points,
                offsets,
                nodes,
                centre,
                entries,
                rows,
                at_points,
                averages,
                radial,
                frames[k],
                places,
                matrix,
                weights,
            )
            columns = min(TERMS[degrees[k]] - skip, rows)
            sound = _factor(matrix[skip:], weights, rows, columns, q, inverse, size, scale)
            last = rows
        at = begin[k]
        reached[k] = -1
        for degree in range(degrees[k] if framed else 0, -1, -1):
            columns = TERMS[degree] - skip
            # The scaled matrix has Frobenius norm √columns.
            if columns > sound or np.sqrt(size[:columns].sum() * columns) > _WORST_CONDITION:
                continue
            for i in range(columns):
                out = operator[i + skip, at : at + rows + 1]
                for j in range(i, columns):
                    _add(q[j], inverse[i, j] * scale[i], out, rows)
                for s in range(rows):
                    out[s] *= weights[s]
                    if at_points:
                        out[rows] -= out[s]
            if at_points:
                operator[0, at + rows] = 1.0
            reached[k] = degree
            break


@njit(cache=True, parallel=True)
def fit_points(points, offsets, nodes, centres, first, entries, sizes, degrees, at_points, averages, radial):
    """Operators of the fits about ``centres``, of several degrees.

    first, entries, sizes (c, d): from `stencils`; degrees (d,) ascending, sizes
    too; averages: cell values are averages, else values at the centroid; radial:
    what weighs the averages, see `cell_moments`.

    Returns (row_first (d, c+1), columns, operator (10, total), frames (d, c, 2, 2),
    reached (d, c)): coefficient i of degree k about centre j is
    Σ operator[i, s]·data[columns[s]] over s in row_first[k, j]:row_first[k, j+1].
    Columns follow `stencils`: points, or cells, or -1-s for known values.
    """
    count, kinds = len(centres), len(degrees)
    row_first = np.zeros((kinds, count + 1), np.int64)
    total = 0
    for k in range(kinds):
        row_first[k, 0] = total
        for j in range(count):
            total += sizes[j, k] + 1
            row_first[k, j + 1] = total
    columns = np.empty(total, np.int64)
    operator = np.zeros((10, total))
    frames = np.zeros((count, kinds, 2, 2))
    reached = np.empty((count, kinds), np.int64)
    for j in prange(count):
        mine = entries[first[j] : first[j + 1]]
        _fit_one(
            points,
            offsets,
            nodes,
            centres[j],
            mine,
            sizes[j],
            degrees,
            at_points,
            averages,
            radial,
            row_first[:, j],
            operator,
            frames[j],
            reached[j],
        )
        for k in range(kinds):
            at, size = row_first[k, j], sizes[j, k]
            for s in range(size):
                columns[at + s] = mine[s]
            # Without an own value the last column is zero; any valid number will do.
            columns[at + size] = centres[j] if at_points else mine[0]
    return row_first, columns, operator, frames, reached


@njit(cache=True, parallel=True)
def apply_fits(row_first, columns, operator, data):
    """Coefficients (c, keep, f) of the fits on data (n, f)."""
    count, keep, fields = len(row_first) - 1, operator.shape[0], data.shape[1]
    out = np.zeros((count, keep, fields))
    for j in prange(count):
        for s in range(row_first[j], row_first[j + 1]):
            for i in range(keep):
                w = operator[i, s]
                if w != 0.0:
                    for f in range(fields):
                        out[j, i, f] += w * data[columns[s], f]
    return out


@njit(cache=True)
def _evaluate_run(points, triangle, centre_of, frames, coefficients, places, values, gradients, disagreement):
    """`evaluate` for one run of places: what it needs to work with is made once."""
    terms, fields = coefficients.shape[1], coefficients.shape[2]
    mono, least, most = np.empty(10), np.empty(fields), np.empty(fields)
    for q in range(len(places)):
        least[:] = np.inf
        most[:] = -np.inf
        a, b, c = triangle[q, 0], triangle[q, 1], triangle[q, 2]
        ax, ay = points[a, 0], points[a, 1]
        ux, uy, vx, vy = points[b, 0] - ax, points[b, 1] - ay, points[c, 0] - ax, points[c, 1] - ay
        det = ux * vy - uy * vx
        bx, by, cx, cy = vy / det, -vx / det, -uy / det, ux / det
        dx, dy = places[q, 0] - ax, places[q, 1] - ay
        lb, lc = bx * dx + by * dy, cx * dx + cy * dy
        for k in range(3):
            p = triangle[q, k]
            if k == 0:
                weight, gx, gy = 1.0 - lb - lc, -bx - cx, -by - cy
            elif k == 1:
                weight, gx, gy = lb, bx, by
            else:
                weight, gx, gy = lc, cx, cy
            j = centre_of[p]
            dx, dy = places[q, 0] - points[p, 0], places[q, 1] - points[p, 1]
            f00, f01, f10, f11 = frames[j, 0, 0], frames[j, 0, 1], frames[j, 1, 0], frames[j, 1, 1]
            x, y = f00 * dx + f01 * dy, f10 * dx + f11 * dy
            monomials(x, y, mono)
            for f in range(fields):
                value = 0.0
                for i in range(terms):
                    value += mono[i] * coefficients[j, i, f]
                values[q, f] += weight * value
                least[f], most[f] = min(least[f], value), max(most[f], value)
                px = py = 0.0
                if terms > 1:
                    px, py = coefficients[j, 1, f], coefficients[j, 2, f]
                if terms > 3:
                    px += x * coefficients[j, 3, f] + y * coefficients[j, 4, f]
                    py += x * coefficients[j, 4, f] + y * coefficients[j, 5, f]
                if terms > 6:
                    px += mono[3] * coefficients[j, 6, f] + mono[4] * coefficients[j, 7, f]
                    px += mono[5] * coefficients[j, 8, f]
                    py += mono[3] * coefficients[j, 7, f] + mono[4] * coefficients[j, 8, f]
                    py += mono[5] * coefficients[j, 9, f]
                gradients[q, f, 0] += gx * value + weight * (f00 * px + f10 * py)
                gradients[q, f, 1] += gy * value + weight * (f01 * px + f11 * py)
        for f in range(fields):
            disagreement[q, f] = most[f] - least[f]


@njit(cache=True, parallel=True)
def evaluate(points, triangle, centre_of, frames, coefficients, places):
    """Blend Σ L_i p_i of the three corner polynomials, and its gradient.

    points (n, 2); triangle (q, 3) corner points, centre_of (n,) row of each
    point in frames (c, 2, 2) and coefficients (c, t, f); places (q, 2).
    Returns values (q, f), gradients (q, f, 2) and the disagreement (q, f) of the
    three polynomials, largest minus smallest.
    """
    count, fields = len(places), coefficients.shape[2]
    values, gradients = np.zeros((count, fields)), np.zeros((count, fields, 2))
    disagreement = np.empty((count, fields))
    for part in prange((count + _RUN - 1) // _RUN):
        begin, end = part * _RUN, min((part + 1) * _RUN, count)
        _evaluate_run(
            points,
            triangle[begin:end],
            centre_of,
            frames,
            coefficients,
            places[begin:end],
            values[begin:end],
            gradients[begin:end],
            disagreement[begin:end],
        )
    return values, gradients, disagreement
