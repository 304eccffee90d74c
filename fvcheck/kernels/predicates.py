"""Exact signs, so that the overlay never contradicts itself.

Every decision of the overlay (does this segment cross that edge, is this node
inside) is the sign of an orientation determinant. Rounded signs can disagree
with one another when a surface runs through nodes or along edges; exact signs
cannot. Exact zeros are settled by an infinitesimal translation of the surface
along `SHIFT` (simulation of simplicity, Edelsbrunner & Mücke 1990): the moved
surface is in general position, so all the signs belong to one geometry.
"""

from __future__ import annotations

import numpy as np
from numba import njit

# Direction of the infinitesimal translation. The slope is no simple ratio, so
# that no edge of a mesh made by hand runs along it.
SHIFT_X = 1.0
SHIFT_Y = 0.5772156649015329

# Bound of the rounding error of the plain determinant (Shewchuk 1997, 3u + 16u²).
_FILTER = 3.3306690738754716e-16
_SPLITTER = 134217729.0  # 2^27 + 1, Dekker's splitting constant


@njit(cache=True, inline="always")
def _two_product(a, b):
    """a·b as an unevaluated sum (high, low), exact (Dekker 1971)."""
    high = a * b
    t = _SPLITTER * a
    a_high = t - (t - a)
    a_low = a - a_high
    t = _SPLITTER * b
    b_high = t - (t - b)
    b_low = b - b_high
    low = a_low * b_low - (((high - a_high * b_high) - a_low * b_high) - a_high * b_low)
    return high, low


@njit(cache=True)
def _exact_sign(ax, ay, bx, by, cx, cy):
    """Sign of (b − a) × (c − a) by an exact sum of six products."""
    terms = np.empty(12)
    terms[0], terms[1] = _two_product(ax, by)
    terms[2], terms[3] = _two_product(-ax, cy)
    terms[4], terms[5] = _two_product(bx, cy)
    terms[6], terms[7] = _two_product(-bx, ay)
    terms[8], terms[9] = _two_product(cx, ay)
    terms[10], terms[11] = _two_product(-cx, by)
    # Grow an expansion term by term; its parts do not overlap, so the sign of
    # the largest non-zero part is the sign of the sum.
    parts = np.zeros(12)
    used = 0
    for k in range(12):
        q = terms[k]
        kept = 0
        for j in range(used):
            e = parts[j]
            total = q + e
            virtual = total - q
            error = (q - (total - virtual)) + (e - virtual)
            if error != 0.0:
                parts[kept] = error
                kept += 1
            q = total
        if q != 0.0:
            parts[kept] = q
            kept += 1
        used = kept
    if used == 0:
        return 0
    return 1 if parts[used - 1] > 0.0 else -1


@njit(cache=True)
def orientation(ax, ay, bx, by, cx, cy):
    """Sign of (b − a) × (c − a): 1 when c lies left of a→b, −1 right, 0 on the line."""
    left = (bx - ax) * (cy - ay)
    right = (by - ay) * (cx - ax)
    det = left - right
    if abs(det) > _FILTER * (abs(left) + abs(right)):
        return 1 if det > 0.0 else -1
    return _exact_sign(ax, ay, bx, by, cx, cy)


@njit(cache=True)
def side_of_edge(ax, ay, bx, by, px, py, shift):
    """Side of surface point p, moved by shift·SHIFT·0⁺, to the mesh edge a→b: 1 left, −1 right."""
    sign = orientation(ax, ay, bx, by, px, py)
    if sign == 0:
        cross = (bx - ax) * SHIFT_Y - (by - ay) * SHIFT_X
        sign = 1 if cross * shift > 0.0 else -1
    return sign


@njit(cache=True)
def side_of_segment(px, py, qx, qy, ax, ay, shift):
    """Side of mesh point a to the surface segment p→q, moved likewise: 1 left, −1 right."""
    sign = orientation(px, py, qx, qy, ax, ay)
    if sign == 0:
        # Moving the segment by d is moving the point by -d.
        cross = (qx - px) * SHIFT_Y - (qy - py) * SHIFT_X
        sign = 1 if cross * shift < 0.0 else -1
    return sign


@njit(cache=True)
def crosses_ray(px, py, qx, qy, ax, ay, shift):
    """Crossing of the ray from a towards +x with the moved segment p→q: 1 upwards, −1 downwards, 0 none."""
    # Half-open in y; equal heights are settled by the translation.
    p_above = py > ay or (py == ay and shift * SHIFT_Y > 0.0)
    q_above = qy > ay or (qy == ay and shift * SHIFT_Y > 0.0)
    if p_above == q_above:
        return 0
    side = side_of_segment(px, py, qx, qy, ax, ay, shift)
    if q_above:
        return 1 if side > 0 else 0
    return -1 if side < 0 else 0
