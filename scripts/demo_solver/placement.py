"""Points of a prescribed spacing, on a line or filling a plane region with triangles."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy.spatial import Delaunay

Array = np.ndarray
Size = Callable[[Array], Array]
"""(k, 2) points to (k,) wanted edge lengths."""
Depth = Callable[[Array], Array]
"""(k, 2) points to (k,) distances from the edge of a region, positive inside."""

SWEEPS = 60
"""Relaxation sweeps; they leave no angle below 30 degrees or so, and twice as many gain little."""


def graded(total: float, ratio: float, n: int) -> Array:
    """(n+1,) heights from 0 to ``total``, the last of n layers about ``ratio`` times the first."""
    return total * (ratio ** (np.arange(n + 1) / n) - 1) / (ratio - 1)


def along(start: float, end: float, size: Callable[[Array], Array]) -> Array:
    """Points from ``start`` to ``end`` whose spacing follows ``size`` of the position."""
    fine = np.linspace(start, end, 2001)
    density = 1 / size(fine)
    count = np.concatenate([[0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(fine))])
    n = max(1, round(count[-1]))
    points = np.interp(np.linspace(0, count[-1], n + 1), count, fine)
    points[[0, -1]] = start, end
    return points


def fill(boundary: Array, depth: Depth, size: Size, seed: int) -> tuple[Array, Array]:
    """Triangles between given boundary points.

    Points are scattered with the density that ``size`` asks for, then pushed apart
    by the edges of their Delaunay triangulation until these have the wanted lengths
    (Persson & Strang, "A simple mesh generator in MATLAB", SIAM Review 46, 2004).

    boundary : (b, 2) fixed points along the whole edge of the region

    Returns all points, the boundary's first, and (t, 3) counter-clockwise triangles.
    """
    low, high = boundary.min(axis=0), boundary.max(axis=0)
    rng = np.random.default_rng(seed)
    finest = size(boundary).min()
    # Triangles of edge h have one point per h² √3/2.
    candidates = low + (high - low) * rng.random((int(np.prod(high - low) / (finest**2 * 0.866)), 2))
    keep = rng.random(len(candidates)) < (finest / size(candidates)) ** 2
    free = candidates[keep & (depth(candidates) > 0)]
    for _ in range(SWEEPS):
        free = _keep_inside(
            free + _push(np.concatenate([boundary, free]), boundary, depth, size), depth, size
        )
    points = np.concatenate([boundary, free])
    return points, _triangles(points, depth, size)


def _push(points: Array, boundary: Array, depth: Depth, size: Size) -> Array:
    """Steps of the free points, from edges shorter than wanted."""
    triangles = _triangles(points, depth, size)
    edges = np.unique(np.sort(triangles[:, [0, 1, 1, 2, 2, 0]].reshape(-1, 2), axis=1), axis=0)
    step = points[edges[:, 1]] - points[edges[:, 0]]
    length = np.linalg.norm(step, axis=1)
    wanted = size(points[edges].mean(axis=1))
    # A little over the wanted length, so that the points fill the region by pressure.
    wanted *= 1.2 * np.sqrt((length**2).sum() / (wanted**2).sum())
    force = (np.maximum(wanted - length, 0) / length)[:, None] * step
    total = np.zeros_like(points)
    np.add.at(total, edges[:, 1], force)
    np.add.at(total, edges[:, 0], -force)
    return 0.2 * total[len(boundary) :]


def _keep_inside(points: Array, depth: Depth, size: Size) -> Array:
    """Move points off the edge of the region, to the height of a triangle standing on it."""
    wanted = 0.6 * size(points)
    short = np.maximum(wanted - depth(points), 0)
    eps = 1e-4 * wanted.min()
    slope = np.column_stack([(depth(points + e) - depth(points - e)) / (2 * eps) for e in eps * np.eye(2)])
    return points + short[:, None] * slope


def _triangles(points: Array, depth: Depth, size: Size) -> Array:
    """Delaunay triangles inside the region, without flat ones between points of a straight edge."""
    triangles = Delaunay(points).simplices
    corners = points[triangles]
    a, b = corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]
    twice = a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]
    triangles = np.where((twice < 0)[:, None], triangles[:, ::-1], triangles)
    middle = corners.mean(axis=1)
    return triangles[(depth(middle) > 0) & (np.abs(twice) > 1e-3 * size(middle) ** 2)]
