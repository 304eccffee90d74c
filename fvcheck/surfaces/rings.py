"""Rings and polylines of drawn shapes: made, checked, turned the right way round.

A ring is an (n, 2) float64 array whose first point is not repeated. A set of
rings lists every exterior ring (counter-clockwise) followed by its own holes
(clockwise); the sign of a ring's area therefore says which it is.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np

from fvcheck.errors import SurfaceError

Array = np.ndarray

CHORDS = 720
"""Chords of a circle or ellipse: half a degree each."""


def finite(values: Sequence[Any], what: str) -> tuple[float, ...]:
    """``values`` as floats; SurfaceError if one is no finite number."""
    try:
        numbers = tuple(float(value) for value in values)
    except (TypeError, ValueError, OverflowError):
        raise SurfaceError(f"{what} needs numbers, not {list(values)!r}") from None
    if not all(math.isfinite(number) for number in numbers):
        raise SurfaceError(f"{what} has a number that is not finite: {list(numbers)}")
    return numbers


def signed_area(ring: Array) -> float:
    """Shoelace area, positive counter-clockwise."""
    # From one corner and with differences of neighbours: far from the origin, and for thin
    # outlines, whole products x y would cancel digits away.
    x, y = (ring - ring[0]).T
    return 0.5 * float(np.dot(x, np.roll(y, -1) - np.roll(y, 1)))


def path_length(points: Array, closed: bool) -> float:
    """Length of a polyline, the closing segment included when ``closed``."""
    steps = np.diff(points, axis=0, append=points[:1]) if closed else np.diff(points, axis=0)
    return float(np.hypot(steps[:, 0], steps[:, 1]).sum())


def box_ring(x0: float, y0: float, x1: float, y1: float) -> Array:
    """Counter-clockwise rectangle between two opposite corners, in any order."""
    (x0, x1), (y0, y1) = sorted((x0, x1)), sorted((y0, y1))
    if x0 == x1 or y0 == y1:
        raise SurfaceError(
            f"The box has no {'width' if x0 == x1 else 'height'}",
            where=f"x {x0!r} to {x1!r}, y {y0!r} to {y1!r}",
            mend="Give two opposite corners: box(x0, y0, x1, y1).",
        )
    ring = np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]])
    _check_extent(ring, "The box")
    return ring


def ellipse_ring(x: float, y: float, a: float, b: float, degrees: float, what: str) -> Array:
    """Ellipse of half axes a, b about (x, y), a turned by ``degrees`` counter-clockwise.

    The vertices lie on an ellipse larger by sqrt(2π / (N sin(2π/N))), N = 720
    chords, so that the polygon has exactly the area π a b. An inscribed polygon
    is everywhere inside: its area is 1.3e-5 too small, and every flux and source
    term carries that one-sided error. With the areas equal, the chords run as
    much outside the curve as inside it, and the errors cancel to fourth order.
    """
    if min(a, b) <= 0:
        raise SurfaceError(f"{what} needs a radius above zero, not {min(a, b)!r}")
    grow = math.sqrt(2 * math.pi / (CHORDS * math.sin(2 * math.pi / CHORDS)))
    angle, turn = 2 * np.pi * np.arange(CHORDS) / CHORDS, math.radians(degrees)
    along, across = grow * a * np.cos(angle), grow * b * np.sin(angle)
    ring = np.stack(
        [
            x + along * math.cos(turn) - across * math.sin(turn),
            y + along * math.sin(turn) + across * math.cos(turn),
        ],
        axis=1,
    )
    _check_extent(ring, what)
    if abs(signed_area(ring) - math.pi * a * b) > 1e-6 * math.pi * a * b:
        raise SurfaceError(f"{what} is too small, or too thin, for the digits of its centre ({x!r}, {y!r})")
    return ring


def polyline(points: Any, what: str) -> Array:
    """Open chain in drawn order, zero-length segments removed."""
    chain = _distinct(_points(points, what))
    if len(chain) < 2:
        raise SurfaceError(f"{what} needs at least 2 different points", mend="Write line(x y, x y, …).")
    return chain


def polygon_rings(polygons: Sequence[Sequence[Any]], what: str) -> tuple[Array, ...]:
    """Rings of polygons, each given as exterior and holes, in any direction.

    SurfaceError if a ring has fewer than 3 points or no area, crosses or
    touches itself, or if the rings do not make valid polygons together (OGC
    simple features rules, as GEOS checks them).
    """
    turned = [
        [_ring(ring, what, hole=index > 0) for index, ring in enumerate(polygon)] for polygon in polygons
    ]
    _check_valid(turned, what)
    return tuple(ring for polygon in turned for ring in polygon)


def _ring(points: Any, what: str, hole: bool) -> Array:
    ring = _distinct(_points(points, what))
    if len(ring) > 1 and len(_distinct(ring[[-1, 0]])) == 1:
        ring = ring[:-1]
    if len(ring) < 3:
        raise SurfaceError(f"{what} needs at least 3 different points, not {len(ring)}")
    area = signed_area(ring)
    if area == 0:
        raise SurfaceError(f"{what} has no area: its points lie on one line, or its loops cancel")
    return ring if (area < 0) == hole else np.ascontiguousarray(ring[::-1])


def _check_valid(polygons: Sequence[Sequence[Array]], what: str) -> None:
    import shapely

    shape = shapely.MultiPolygon([(rings[0], rings[1:]) for rings in polygons])
    if not shapely.is_valid(shape):
        raise SurfaceError(
            f"{what} crosses itself or its parts overlap: {shapely.is_valid_reason(shape)}",
            mend="Draw simple outlines that do not touch; give overlapping parts as surfaces of their own.",
        )


def _points(points: Any, what: str) -> Array:
    try:
        array = np.array(points, dtype=np.float64)
    except (TypeError, ValueError, OverflowError):
        raise SurfaceError(f"{what} needs points (x, y) of numbers") from None
    if array.size == 0:
        raise SurfaceError(f"{what} has no points")
    if array.ndim != 2 or array.shape[1] not in (2, 3):
        raise SurfaceError(f"{what} needs an (n, 2) list of points, not shape {array.shape}")
    if array.shape[1] == 3:
        # A drawing with a real third coordinate may mean another plane: never guess.
        if np.ptp(array[:, 2]) > 0:
            raise SurfaceError(f"{what} has z coordinates", mend="Give the two in-plane coordinates only.")
        array = np.ascontiguousarray(array[:, :2])
    if not np.isfinite(array).all():
        row = int(np.flatnonzero(~np.isfinite(array).all(axis=1))[0])
        raise SurfaceError(f"{what} has a point that is not finite", where=f"point {row + 1}")
    _check_extent(array, what)
    return array


def _check_extent(points: Array, what: str) -> None:
    # Squares of larger numbers would overflow in areas and lengths.
    if not np.abs(points).max() < 1e150:
        raise SurfaceError(f"{what} has coordinates too large to compute with")


def _distinct(points: Array) -> Array:
    """Without points that repeat their predecessor to the last digits."""
    steps = np.abs(np.diff(points, axis=0)).max(axis=1)
    keep = steps > 4 * np.finfo(np.float64).eps * np.abs(points).max()
    return points[np.concatenate([[True], keep])]
