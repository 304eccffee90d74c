"""Meshes whose cell size varies: hanging nodes, wall layers, holes."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from trial_meshes.cells import Array, Box, Cells, from_table, mapped
from trial_meshes.plane import delaunay, grid, hex_points, relax, rim_points


def quadtree(
    domain: Box, h: float, levels: int = 2, refine: Callable[[Array, Array], Array] | None = None
) -> Cells:
    """Squares of side about h, split up to ``levels`` times where ``refine(x, y)`` is true.

    Hanging nodes are left hanging: each cell lists its four corners only, and sizes of
    neighbours may differ by any power of two. By default a disc off the middle is refined.
    """
    x0, y0, x1, y1 = domain
    if refine is None:
        radius = 0.3 * min(x1 - x0, y1 - y0)
        cx, cy = 0.55 * x0 + 0.45 * x1, 0.48 * y0 + 0.52 * y1

        def refine(x, y):
            return np.hypot(x - cx, y - cy) < radius

    nx, ny = (max(round(side / h), 1) for side in (x1 - x0, y1 - y0))
    unit = 2**levels  # corners live on an integer lattice, so that equal corners are equal
    dx, dy = (x1 - x0) / (nx * unit), (y1 - y0) / (ny * unit)
    low = unit * np.stack(np.meshgrid(np.arange(nx), np.arange(ny)), axis=-1).reshape(-1, 2)
    side = np.full(len(low), unit)
    for _ in range(levels):
        middle = low + 0.5 * side[:, None]
        split = refine(x0 + dx * middle[:, 0], y0 + dy * middle[:, 1]) & (side > 1)
        half = side[split] // 2
        children = [low[split] + half[:, None] * np.array(c) for c in ((0, 0), (1, 0), (0, 1), (1, 1))]
        low = np.concatenate([low[~split], *children])
        side = np.concatenate([side[~split], *[half] * 4])
    corners = low[:, None] + side[:, None, None] * np.array([(0, 0), (1, 0), (1, 1), (0, 1)])
    unique, table = np.unique(corners.reshape(-1, 2), axis=0, return_inverse=True)
    return from_table([x0, y0] + unique * [dx, dy], table.reshape(-1, 4))


def graded_steps(length: float, first: float, largest: float, growth: float) -> Array:
    """Positions 0 … length whose steps grow from ``first`` by ``growth`` up to ``largest``."""
    steps = [first]
    while sum(steps) < length:
        steps.append(min(steps[-1] * growth, largest))
    at = np.concatenate([[0.0], np.cumsum(steps)])
    if len(at) > 2 and at[-1] - length > 0.5 * steps[-1]:
        at = at[:-1]
    return at * (length / at[-1])


def boundary_layer(
    domain: Box,
    h: float,
    aspect: float = 2500.0,
    growth: float = 1.2,
    kind: str = "quads",
    jitter: float = 0.2,
    seed: int = 0,
) -> Cells:
    """Layers on the wall y = y0: cells h long, the lowest about h/aspect high, heights growing to h.

    ``kind`` is ``quads``, ``triangles`` or ``mixed`` (some rows split). Columns keep
    their x, spaced unevenly by ``jitter``; heights vary along the wall by the same share.
    """
    x0, y0, x1, y1 = domain
    rng = np.random.default_rng(seed)
    nx = max(round((x1 - x0) / h), 2)
    x = np.linspace(x0, x1, nx + 1)
    x[1:-1] += jitter * h * rng.uniform(-1, 1, nx - 1)
    y = graded_steps(y1 - y0, h / aspect, h, growth)
    points, table = grid(x, y)
    ny = len(y) - 1
    step = np.diff(y)
    room = np.zeros(ny + 1)
    room[1:-1] = np.minimum(step[:-1], step[1:])
    up = y[:, None] + jitter * room[:, None] * rng.uniform(-1, 1, (ny + 1, nx + 1))
    points = np.stack([points[:, 0], y0 + up.ravel()], axis=1)
    points[-nx - 1 :, 1] = y1
    if kind == "quads":
        return from_table(points, table)
    row = np.arange(len(table)) // nx
    split = np.ones(len(table), bool) if kind == "triangles" else (row % 3 == 1)
    flip = rng.random(len(table)) < 0.5
    a, b, c, d = (table[:, i] for i in range(4))
    one = np.where(flip[:, None], np.stack([a, b, c], 1), np.stack([a, b, d], 1))
    two = np.where(flip[:, None], np.stack([a, c, d], 1), np.stack([b, c, d], 1))
    tri = np.concatenate([one[split], two[split]])
    nodes = np.concatenate([table[~split].ravel(), tri.ravel()])
    sizes = np.concatenate([np.full((~split).sum(), 4), np.full(len(tri), 3)])
    offsets = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    return Cells(points, offsets, nodes.astype(np.int64))


def annulus(inner: float, outer: float, h: float, kind: str = "quads", seed: int = 0) -> Cells:
    """Between two circles about the origin; radial size grows with the radius, h at the inner circle.

    ``kind``: ``quads`` or ``triangles`` (each quadrilateral split at random).
    """
    around = max(round(2 * np.pi * inner / h), 8)
    rows = max(round(np.log(outer / inner) / np.log1p(2 * np.pi / around)), 1)
    r = inner * (outer / inner) ** (np.arange(rows + 1) / rows)
    i, j = np.meshgrid(np.arange(around), np.arange(rows))
    a, b = (i + around * j).ravel(), ((i + 1) % around + around * j).ravel()
    angle = 2 * np.pi * np.arange(around) / around
    points = (r[:, None, None] * np.stack([np.cos(angle), np.sin(angle)], axis=-1)).reshape(-1, 2)
    table = np.stack([a, a + around, b + around, b], axis=1)
    if kind == "quads":
        return from_table(points, table)
    flip = np.random.default_rng(seed).random(len(table)) < 0.5
    table = np.where(flip[:, None], table, np.roll(table, 1, axis=1))
    return from_table(points, np.concatenate([table[:, [0, 1, 2]], table[:, [0, 2, 3]]]))


def with_hole(
    domain: Box,
    hole: tuple[float, float, float],
    h: float,
    h_hole: float | None = None,
    growth: float = 0.25,
    jitter: float = 0.25,
    seed: int = 0,
) -> Cells:
    """Triangles in a rectangle around a disc (x, y, r): edge ``h_hole`` on the circle, growing to h.

    ``growth`` is the increase of the edge length per length away from the circle.
    """
    cx, cy, radius = hole
    h_hole = h if h_hole is None else h_hole
    x0, y0, x1, y1 = domain
    rng = np.random.default_rng(seed)
    wall = np.array([x0, y0]), np.array([x1, y1])

    def ring(r: float, size: float, turn: float) -> Array:
        n = max(round(2 * np.pi * r / size), 8)
        t = 2 * np.pi * (np.arange(n) + turn) / n
        return np.array([cx, cy]) + r * np.stack([np.cos(t), np.sin(t)], axis=1)

    circle = ring(radius, h_hole, 0.0)
    inside, r, size, k = [], radius, h_hole, 0
    while size < h * (1 - 1e-9) or k < 2:
        r += size * np.sqrt(0.75)
        size = min(h, h_hole + growth * (r - radius))
        k += 1
        points = ring(r, size, 0.5 * (k % 2))
        points = points + 0.4 * jitter * size * rng.uniform(-1, 1, points.shape)
        clear = np.minimum(points - wall[0], wall[1] - points).min(axis=1)
        inside.append(points[clear > 0.5 * size])
    far = hex_points(domain, h)
    far = far + jitter * h * rng.uniform(-1, 1, far.shape)
    margin = 0.4 * h
    far = np.clip(far, wall[0] + margin, wall[1] - margin)
    far = far[np.hypot(far[:, 0] - cx, far[:, 1] - cy) > r + 0.6 * h]
    rim = _graded_rim(domain, hole, h, h_hole, growth)
    fixed = np.concatenate([circle, rim])
    points = np.concatenate([fixed, *inside, far])

    def outside(points: Array) -> Array:
        table = delaunay(points)
        return table[~(table < len(circle)).all(axis=1)]

    points = relax(points, len(fixed), outside, rounds=3)
    return from_table(points, outside(points))


def _graded_rim(domain: Box, hole: tuple[float, float, float], h: float, h_hole: float, growth: float):
    """Points along the sides, closer where a side passes near the hole."""
    cx, cy, radius = hole
    fine = rim_points(domain, min(h, h_hole) / 8)

    def size(p):
        return np.minimum(h, h_hole + growth * (np.hypot(p[:, 0] - cx, p[:, 1] - cy) - radius))

    x0, y0, x1, y1 = domain
    out = []
    for axis, value in ((1, y0), (1, y1), (0, x0), (0, x1)):
        side = fine[fine[:, axis] == value]
        side = side[np.argsort(side[:, 1 - axis])]
        s = side[:, 1 - axis]
        density = 1 / size(side)
        count = np.concatenate([[0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(s))])
        n = max(round(count[-1]), 2)
        at = np.interp(np.linspace(0, count[-1], n + 1), count, s)
        at[[0, -1]] = s[[0, -1]]
        at = at if axis == 1 else at[1:-1]
        pair = np.empty((len(at), 2))
        pair[:, axis], pair[:, 1 - axis] = value, at
        out.append(pair)
    return np.concatenate(out)


def channel(x: Array, y: Array, bend: Callable[[Array], Array] | None = None) -> Cells:
    """A tensor grid of quadrilaterals, its points moved by ``bend`` ((n, 2) to (n, 2))."""
    cells = from_table(*grid(np.asarray(x, float), np.asarray(y, float)))
    return cells if bend is None else mapped(cells, bend)
