"""Triangles, quadrilaterals, mixtures and polygons in a rectangle."""

from __future__ import annotations

import numpy as np

from trial_meshes.cells import Array, Box, Cells, from_lists, from_table


def hex_points(domain: Box, h: float) -> Array:
    """Interior points of a triangular lattice of edge about h, clear of the boundary by h/2 or so."""
    x0, y0, x1, y1 = domain
    rows = max(round((y1 - y0) / (h * np.sqrt(0.75))), 2)
    columns = max(round((x1 - x0) / h), 2)
    dx, dy = (x1 - x0) / columns, (y1 - y0) / rows
    out = []
    for j in range(1, rows):
        shift = 0.5 * (j % 2)
        x = x0 + dx * (np.arange(columns) + shift)
        x = x[(x > x0 + 0.4 * dx) & (x < x1 - 0.4 * dx)]
        out.append(np.stack([x, np.full(len(x), y0 + j * dy)], axis=1))
    return np.concatenate(out)


def rim_points(domain: Box, h: float) -> Array:
    """Points along the rectangle's sides, corners included, spaced h or a little less."""
    x0, y0, x1, y1 = domain
    nx, ny = (max(round(side / h), 2) for side in (x1 - x0, y1 - y0))
    x, y = np.linspace(x0, x1, nx + 1), np.linspace(y0, y1, ny + 1)
    low, high = np.full(nx + 1, y0), np.full(nx + 1, y1)
    left, right = np.full(ny - 1, x0), np.full(ny - 1, x1)
    sides = [(x, low), (x, high), (left, y[1:-1]), (right, y[1:-1])]
    return np.concatenate([np.stack(side, axis=1) for side in sides])


def delaunay(points: Array) -> Array:
    """(m, 3) triangles without the flat ones that rounding leaves along straight sides."""
    from scipy.spatial import Delaunay

    table = Delaunay(points).simplices
    a, b, c = (points[table[:, i]] for i in range(3))
    twice = np.abs((b - a)[:, 0] * (c - a)[:, 1] - (b - a)[:, 1] * (c - a)[:, 0])
    longest = np.max([np.sum((p - q) ** 2, axis=1) for p, q in ((a, b), (b, c), (c, a))], axis=0)
    return table[twice > 1e-6 * longest]


def relax(points: Array, fixed: int, table_of=delaunay, rounds: int = 3, pull: float = 0.5) -> Array:
    """Move all but the first ``fixed`` points towards the mean of their neighbours."""
    points = points.copy()
    for _ in range(rounds):
        table = table_of(points)
        total, count = np.zeros_like(points), np.zeros(len(points))
        for i, j in ((0, 1), (1, 2), (2, 0), (1, 0), (2, 1), (0, 2)):
            np.add.at(total, table[:, i], points[table[:, j]])
            np.add.at(count, table[:, i], 1.0)
        mean = total / np.maximum(count, 1)[:, None]
        points[fixed:] += pull * (mean - points)[fixed:]
    return points


def triangles(domain: Box, h: float, seed: int = 0, jitter: float = 0.35) -> Cells:
    """Irregular triangles of edge about h: a jittered lattice, relaxed, and Delaunay's triangles."""
    rng = np.random.default_rng(seed)
    rim, inside = rim_points(domain, h), hex_points(domain, h)
    inside = inside + jitter * h * rng.uniform(-1, 1, inside.shape)
    x0, y0, x1, y1 = domain
    margin = 0.4 * min(h, (x1 - x0) / 2, (y1 - y0) / 2)
    inside = np.clip(inside, [x0 + margin, y0 + margin], [x1 - margin, y1 - margin])
    points = relax(np.concatenate([rim, inside]), len(rim), rounds=2)
    return from_table(points, delaunay(points))


def grid(x: Array, y: Array) -> tuple[Array, Array]:
    """Points (n, 2) and (m, 4) quadrilaterals of a tensor grid."""
    nx, ny = len(x), len(y)
    points = np.stack([a.ravel() for a in np.meshgrid(x, y)], axis=1)
    first = (np.arange(nx - 1) + nx * np.arange(ny - 1)[:, None]).ravel()
    return points, first[:, None] + np.array([0, 1, nx + 1, nx])


def quads(domain: Box, h: float, seed: int = 0, jitter: float = 0.2) -> Cells:
    """Rows and columns of quadrilaterals of side about h; inner points moved by jitter·h at most."""
    x0, y0, x1, y1 = domain
    nx, ny = (max(round(side / h), 1) for side in (x1 - x0, y1 - y0))
    points, table = grid(np.linspace(x0, x1, nx + 1), np.linspace(y0, y1, ny + 1))
    move = jitter * h * np.random.default_rng(seed).uniform(-1, 1, points.shape)
    inner = (points > [x0, y0]) & (points < [x1, y1])
    return from_table(points + np.where(inner.all(axis=1)[:, None], move, 0.0), table)


def merged(cells: Cells, share: float = 0.6, seed: int = 0) -> Cells:
    """Join pairs of triangles to convex quadrilaterals until ``share`` of the triangles is used up."""
    table = cells.nodes.reshape(-1, 3)
    edges = np.stack([table, np.roll(table, -1, axis=1)], axis=-1).reshape(-1, 2)
    owner = np.repeat(np.arange(len(table)), 3)
    order = np.lexsort(np.sort(edges, axis=1).T)
    key = np.sort(edges, axis=1)[order]
    twin = np.flatnonzero((key[1:] == key[:-1]).all(axis=1))
    rng = np.random.default_rng(seed)
    free = np.ones(len(table), bool)
    polygons: list[Array] = []
    for i in rng.permutation(twin):
        if free.mean() <= 1 - share:
            break
        one, two = order[i], order[i + 1]
        s, t = owner[one], owner[two]
        if not (free[s] and free[t]):
            continue
        a, b = edges[one]
        opposite = [table[k][~np.isin(table[k], (a, b))][0] for k in (s, t)]
        quad = np.array([opposite[0], a, opposite[1], b])
        p = cells.points[quad]
        ahead, back = np.roll(p, -1, axis=0) - p, np.roll(p, 1, axis=0) - p
        sine = (ahead[:, 0] * back[:, 1] - ahead[:, 1] * back[:, 0]) / (
            np.linalg.norm(ahead, axis=1) * np.linalg.norm(back, axis=1)
        )
        if sine.min() > 0.25:
            free[[s, t]] = False
            polygons.append(quad)
    return from_lists(cells.points, [*polygons, *table[free]])


def mixed(domain: Box, h: float, seed: int = 0, share: float = 0.6) -> Cells:
    """Triangles and quadrilaterals of edge about h."""
    return merged(triangles(domain, h, seed), share, seed)


def polygons(domain: Box, h: float, seed: int = 0, rounds: int = 4) -> Cells:
    """Voronoi cells of relaxed random points, of area about h², cut off at the rectangle.

    Mirror images of the points in the four sides make the sides themselves Voronoi edges.
    """
    from scipy.spatial import Voronoi

    x0, y0, x1, y1 = domain
    count = max(round((x1 - x0) * (y1 - y0) / h**2), 4)
    rng = np.random.default_rng(seed)
    columns = int(np.ceil(np.sqrt(count * (x1 - x0) / (y1 - y0))))
    rows = int(np.ceil(count / columns))
    at = np.stack(np.meshgrid(np.arange(columns), np.arange(rows)), axis=-1).reshape(-1, 2)
    seeds = [x0, y0] + (at + rng.uniform(0.1, 0.9, at.shape)) / [columns, rows] * [x1 - x0, y1 - y0]
    for _ in range(rounds + 1):
        mirrors = [seeds]
        for axis, wall in ((0, x0), (0, x1), (1, y0), (1, y1)):
            image = seeds.copy()
            image[:, axis] = 2 * wall - image[:, axis]
            mirrors.append(image)
        diagram = Voronoi(np.concatenate(mirrors))
        regions = [np.array(diagram.regions[diagram.point_region[i]]) for i in range(len(seeds))]
        cells = _tidy(diagram.vertices, regions, domain)
        seeds = cells.centroids
    return cells


def _tidy(vertices: Array, regions: list[Array], domain: Box) -> Cells:
    """Snap to the sides, merge vertices that rounding tells apart, sort corners round each cell."""
    x0, y0, x1, y1 = domain
    size = max(x1 - x0, y1 - y0)
    vertices = vertices.copy()
    for axis, wall in ((0, x0), (0, x1), (1, y0), (1, y1)):
        near = np.abs(vertices[:, axis] - wall) < 1e-9 * size
        vertices[near, axis] = wall
    _, first, same = np.unique(
        np.round(vertices / (1e-9 * size)), axis=0, return_index=True, return_inverse=True
    )
    same = same.ravel()
    out = []
    for region in regions:
        corners = np.unique(same[region])
        p = vertices[first[corners]]
        angle = np.arctan2(*(p - p.mean(axis=0)).T[::-1])
        out.append(corners[np.argsort(angle)])
    used, nodes = np.unique(np.concatenate(out), return_inverse=True)
    offsets = np.concatenate([[0], np.cumsum([len(p) for p in out])]).astype(np.int64)
    return Cells(vertices[first[used]], offsets, nodes.ravel().astype(np.int64))
