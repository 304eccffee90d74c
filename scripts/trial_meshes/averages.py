"""Exact data on a mesh: point values and cell averages."""

from __future__ import annotations

import itertools
from collections.abc import Callable

import numpy as np

from trial_meshes.cells import Array, Cells, from_lists


def point_values(function: Callable, cells: Cells) -> Array:
    """``function(x, y)`` at the points."""
    return function(cells.points[:, 0], cells.points[:, 1])


def triangle_rule(degree: int) -> tuple[Array, Array]:
    """Barycentric points (q, 3) and weights (q,) adding to 1, exact to ``degree``.

    Gauss-Legendre points squeezed towards one corner (a collapsed square): all inside.
    """
    n = degree // 2 + 1
    s, ws = np.polynomial.legendre.leggauss(n)
    t, wt = np.polynomial.legendre.leggauss(n + 1)  # the squeeze adds one degree
    s, t = 0.5 + 0.5 * s, 0.5 + 0.5 * t
    a, b = np.meshgrid(s, t, indexing="ij")
    weights = (0.25 * ws[:, None] * wt * 2 * b).ravel()
    bary = np.stack([1 - b, b * (1 - a), b * a], axis=-1).reshape(-1, 3)
    return bary, weights


def cell_integrals(function: Callable, cells: Cells, degree: int = 11) -> Array:
    """(m,) or (m, c) integrals over the cells, by a fan of triangles from each centroid."""
    bary, weights = triangle_rule(degree)
    owner = np.repeat(np.arange(len(cells.sizes)), cells.sizes)
    a = cells.centroids[owner]
    b, c = cells.points[cells.nodes], cells.points[cells.following()]
    area = 0.5 * ((b - a)[:, 0] * (c - a)[:, 1] - (b - a)[:, 1] * (c - a)[:, 0])
    total = 0.0
    for w, (i, j, k) in zip(weights, bary):
        at = i * a + j * b + k * c
        value = function(at[:, 0], at[:, 1])
        total = total + w * (area if value.ndim == 1 else area[:, None]) * value
    return np.add.reduceat(total, cells.offsets[:-1], axis=0)


def cell_averages(
    function: Callable,
    cells: Cells,
    degree: int = 11,
    jump: tuple[float, float, float] | None = None,
) -> Array:
    """Averages over the cells; polynomials up to ``degree`` come out exact.

    ``jump`` (x, y, angle) is a straight line across which the function jumps: cells
    that it crosses are cut along it, so that each part is smooth. Cells must be convex
    there.
    """
    areas = cells.areas
    if jump is None:
        total = cell_integrals(function, cells, degree)
    else:
        parts, owner = cut_along(cells, jump)
        piece = cell_integrals(function, parts, degree)
        total = np.zeros((len(areas), *piece.shape[1:]))
        np.add.at(total, owner, piece)
    return total / (areas if total.ndim == 1 else areas[:, None])


def cut_along(cells: Cells, line: tuple[float, float, float]) -> tuple[Cells, Array]:
    """The cells, those crossed by the line (x, y, angle) cut in two, and the owner of each part.

    Parts do not share points; they serve integration only.
    """
    x, y, angle = line
    normal = np.array([np.sin(angle), -np.cos(angle)])
    parts, owner = [], []
    for i in range(len(cells.sizes)):
        p = cells.polygon(i)
        side = (p - [x, y]) @ normal
        tiny = 1e-13 * np.abs(p - p[0]).max()
        if side.min() >= -tiny or side.max() <= tiny:
            parts.append(p)
            owner.append(i)
            continue
        for sign in (1.0, -1.0):
            part = []
            for a, b, sa, sb in zip(p, np.roll(p, -1, axis=0), sign * side, np.roll(sign * side, -1)):
                if sa >= 0:
                    part.append(a)
                if sa * sb < 0:
                    part.append(a + (b - a) * (sa / (sa - sb)))
            parts.append(np.array(part))
            owner.append(i)
    ends = np.cumsum([0] + [len(p) for p in parts])
    numbers = [np.arange(a, b) for a, b in itertools.pairwise(ends)]
    return from_lists(np.concatenate(parts), numbers), np.array(owner)
