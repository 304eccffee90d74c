"""Polynomials about mesh points: their coefficients from data, and their blend in triangles."""

from __future__ import annotations

import numpy as np
from numba import njit, prange

from fvcheck.kernels.moments import monomials

# Places evaluated by one task of a parallel loop.
_RUN = 512


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
