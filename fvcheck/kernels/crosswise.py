"""The mean of the polynomials of a triangle's corners, for a second opinion beside their blend."""

from __future__ import annotations

import numpy as np
from numba import njit, prange

from fvcheck.kernels.moments import monomials


@njit(cache=True, parallel=True)
def corner_means(points, triangle, centre_of, frames, coefficients, places):
    """⅓ Σ p_i of the three corner polynomials, and its gradient.

    Arguments as in `fvcheck.kernels.evaluation.evaluate`; cubics, that is
    coefficients (c, 10, f). Returns values (q, f) and gradients (q, f, 2).
    """
    count, fields = len(places), coefficients.shape[2]
    values, gradients = np.zeros((count, fields)), np.zeros((count, fields, 2))
    for q in prange(count):
        mono = np.empty(10)
        for k in range(3):
            p = triangle[q, k]
            j = centre_of[p]
            dx, dy = places[q, 0] - points[p, 0], places[q, 1] - points[p, 1]
            f00, f01, f10, f11 = frames[j, 0, 0], frames[j, 0, 1], frames[j, 1, 0], frames[j, 1, 1]
            x, y = f00 * dx + f01 * dy, f10 * dx + f11 * dy
            monomials(x, y, mono)
            for f in range(fields):
                c = coefficients[j, :, f]
                value = 0.0
                for i in range(10):
                    value += mono[i] * c[i]
                px = c[1] + x * c[3] + y * c[4] + mono[3] * c[6] + mono[4] * c[7] + mono[5] * c[8]
                py = c[2] + x * c[4] + y * c[5] + mono[3] * c[7] + mono[4] * c[8] + mono[5] * c[9]
                values[q, f] += value / 3.0
                gradients[q, f, 0] += (f00 * px + f10 * py) / 3.0
                gradients[q, f, 1] += (f01 * px + f11 * py) / 3.0
    return values, gradients
