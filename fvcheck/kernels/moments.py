"""What data around a mesh point say of a polynomial about it: monomials, and their averages over cells."""

from __future__ import annotations

import numpy as np
from numba import njit

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
