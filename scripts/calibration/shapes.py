"""Random control surfaces, and room for a source inside them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely

from calibration.suite import Subject
from fvcheck import ControlSurface

Array = np.ndarray

# Half the width of a surface in units of the domain, and at least so many cells.
_SMALLEST, _LARGEST, _CELLS = 0.12, 0.42, 2.5

# Share of surfaces that touch the domain boundary or reach beyond it.
_TOUCHING = 0.3


@dataclass(frozen=True, eq=False)
class Drawn:
    """A control surface; ``core`` (x, y, a, b) is an ellipse well inside the volume.

    clear : no body is cut or enclosed
    """

    surface: ControlSurface
    core: tuple[float, float, float, float]
    clear: bool = True


def random_surfaces(subject: Subject, size: str, count: int, seed: int = 0) -> list[Drawn]:
    """Boxes, circles (ellipses, where the unit is stretched), turned ellipses and stars, in turn."""
    rng = np.random.default_rng([seed, len(subject.name), count])
    unit = np.array(subject.unit)
    low, high = (np.array(subject.exact.domain).reshape(2, 2)) / unit
    stretched = unit[0] != unit[1]
    # Along a wall of long cells, cells are few that way: size by the count across.
    cell = subject.h[size] / unit.max()
    smallest = min(max(_SMALLEST, _CELLS * cell), 0.75 * _LARGEST)
    out: list[Drawn] = []
    while len(out) < count:
        half = rng.uniform(smallest, _LARGEST) * rng.uniform([0.7, 0.7], 1.0)
        ring = _RINGS[len(out) % len(_RINGS)](rng, half)
        touching = rng.random() < _TOUCHING
        reach = np.abs(ring).max(axis=0)
        if touching:
            centre = rng.uniform(low + 0.4 * reach, high - 0.4 * reach)
            if len(ring) == 4:
                centre = _against(rng, centre, reach, low, high)
        else:
            gap = np.minimum(reach * 1.02, 0.499 * (high - low))
            centre = rng.uniform(low + gap, high - gap)
        points = centre + ring
        if len(ring) == 4:
            # On the boundary means on it: the domain's own numbers.
            for axis in (0, 1):
                for side in (low, high):
                    near = np.abs(points[:, axis] - side[axis]) < 1e-9
                    points[near, axis] = side[axis]
        drawn = _drawn(subject, points * unit, f"s{len(out)}", stretched)
        if drawn is not None:
            out.append(drawn)
    return out


def _box(rng, half: Array) -> Array:
    return half * np.array([(-1, -1), (1, -1), (1, 1), (-1, 1)])


def _circle(rng, half: Array) -> Array:
    return _ellipse(rng, half[[0, 0]])


def _ellipse(rng, half: Array) -> Array:
    t, turn = 2 * np.pi * np.arange(180) / 180, rng.uniform(0, np.pi)
    ring = half * np.stack([np.cos(t), np.sin(t)], axis=1)
    c, s = np.cos(turn), np.sin(turn)
    return ring @ np.array([[c, s], [-s, c]])


def _star(rng, half: Array) -> Array:
    corners = rng.integers(5, 12)
    t = 2 * np.pi * (np.arange(corners) + rng.uniform(-0.3, 0.3, corners)) / corners
    r = rng.uniform(0.5, 1.0, corners)[:, None]
    return half * r * np.stack([np.cos(t), np.sin(t)], axis=1)


_RINGS = (_box, _circle, _ellipse, _star)


def _against(rng, centre: Array, reach: Array, low: Array, high: Array) -> Array:
    """The centre moved so that a box lies against one side of the domain, or in a corner."""
    for axis in {int(rng.integers(2)), int(rng.integers(2))}:
        at_low = rng.random() < 0.5
        centre[axis] = low[axis] + reach[axis] if at_low else high[axis] - reach[axis]
    return centre


def _drawn(subject: Subject, points: Array, name: str, stretched: bool) -> Drawn | None:
    x0, y0, x1, y1 = subject.exact.domain
    volume = shapely.Polygon(points).intersection(shapely.box(x0, y0, x1, y1))
    clear = True
    if subject.exact.hole is not None:
        x, y, r = subject.exact.hole
        body = shapely.Point(x, y).buffer(1.02 * r)
        clear = not volume.intersects(body)
        volume = volume.difference(body)
    unit = np.array(subject.unit)
    scaled = shapely.transform(volume, lambda p: p / unit)
    if scaled.area < 0.3 * _SMALLEST**2:
        return None
    spoke = np.array(shapely.maximum_inscribed_circle(scaled, tolerance=0.01 * _SMALLEST).coords)
    radius = 0.5 * np.hypot(*(spoke[1] - spoke[0])) * unit
    x, y = spoke[0] * unit
    return Drawn(ControlSurface.polygon(points, name=name), (x, y, radius[0], radius[1]), clear)
