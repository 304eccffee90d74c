"""Where the integrands are taken, with which weights."""

from __future__ import annotations

import numpy as np

Array = np.ndarray

# Four Gauss points a piece: exact to degree 7, so momentum fluxes of quadratic
# fields are exact and those of cubic ones off by the eighth power of the cell size.
_LINE_POINTS, _LINE_WEIGHTS = np.polynomial.legendre.leggauss(4)
_LINE_POINTS, _LINE_WEIGHTS = 0.5 * (_LINE_POINTS + 1.0), 0.5 * _LINE_WEIGHTS

PER_PIECE = len(_LINE_WEIGHTS)

# Six points in a triangle, exact to degree 4 (Strang & Fix 1973; Dunavant 1985,
# IJNME 21): barycentric coordinates of two symmetric orbits of three points.
_A, _B = 0.445948490915965, 0.091576213509771
_TRIANGLE_POINTS = np.array(
    [
        [1 - 2 * _A, _A, _A],
        [_A, 1 - 2 * _A, _A],
        [_A, _A, 1 - 2 * _A],
        [1 - 2 * _B, _B, _B],
        [_B, 1 - 2 * _B, _B],
        [_B, _B, 1 - 2 * _B],
    ]
)
_TRIANGLE_WEIGHTS = np.repeat([0.223381589678011, 0.109951743655322], 3)

_COARSE_POINTS = np.full((3, 3), 1 / 6) + np.eye(3) / 2

PER_TRIANGLE = len(_TRIANGLE_WEIGHTS)


def along(start: Array, end: Array) -> tuple[Array, Array]:
    """Places (4n, 2) on n straight pieces, and weights (4,) that sum to 1."""
    step = end - start
    places = start[:, None] + _LINE_POINTS[None, :, None] * step[:, None]
    return places.reshape(-1, 2), _LINE_WEIGHTS


def within(corners: Array, coarse: bool = False) -> tuple[Array, Array]:
    """Places (6n, 2) in n triangles (n, 3, 2), and weights (6,) that sum to 1.

    coarse : three places, exact to degree 2
    """
    points = _COARSE_POINTS if coarse else _TRIANGLE_POINTS
    weights = np.ones(3) if coarse else _TRIANGLE_WEIGHTS
    places = np.einsum("pk,nkd->npd", points, corners)
    return places.reshape(-1, 2), weights / weights.sum()
