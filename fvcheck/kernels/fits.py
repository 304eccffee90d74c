"""Weighted least-squares polynomials about mesh points, as linear operators on the data."""

from __future__ import annotations

import numpy as np
from numba import njit, prange

from fvcheck.kernels.moments import cell_moments, monomials, polygon_centroid, whitening

# Number of monomials up to each degree.
TERMS = (1, 3, 6, 10)

# A fit whose matrix (columns scaled to one) is worse conditioned than this
# would amplify the data's own roughness; the degree falls instead.
_WORST_CONDITION = 2e3

# Distance of the mean of a patch from its centre, in units of its own spread, beyond
# which it lies on one side: about 0.9 on a straight boundary, 0 inside.
_ONE_SIDED = 0.4

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
