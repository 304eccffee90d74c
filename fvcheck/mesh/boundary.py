"""Chains, rings and loops of boundary edges."""

from __future__ import annotations

import numpy as np

from fvcheck.mesh.mesh import Mesh

Array = np.ndarray


def walks(edges: Array, points: Array) -> list[tuple[Array, bool]]:
    """Edge numbers along each connected directed chain of ``edges`` (e, 2), and whether it closes.

    points (n, 2) decide the way where several edges leave a point: the fluid on
    the left is kept on the left. No chain passes a point twice; one that would
    is cut there into rings.
    """
    from fvcheck.kernels.edges import successors, walk

    if len(edges) == 0:
        return []
    start, end = np.ascontiguousarray(edges[:, 0]), np.ascontiguousarray(edges[:, 1])
    x, y = np.ascontiguousarray(points[:, 0]), np.ascontiguousarray(points[:, 1])
    order, offsets, closed = walk(start, end, successors(start, end, x, y))
    return [(order[a:b], bool(c)) for a, b, c in zip(offsets[:-1], offsets[1:], closed)]


def chains(edges: Array, points: Array | None = None) -> list[Array]:
    """Point numbers along each connected directed chain of ``edges`` (e, 2).

    A closed chain does not repeat its first point, an open one has one point
    more than edges. Give ``points`` (n, 2) where chains may touch each other.
    """
    if points is None:
        points = np.zeros((int(edges.max()) + 1 if len(edges) else 0, 2))
    return [_nodes(edges[chain], closed) for chain, closed in walks(edges, points)]


def _nodes(edges: Array, closed: bool) -> Array:
    return edges[:, 0] if closed else np.append(edges[:, 0], edges[-1, 1])


def ring_area(points: Array) -> float:
    """Signed area of the ring ``points`` (n, 2), positive counter-clockwise."""
    x, y = (points - points[0]).T
    return 0.5 * float(x @ np.roll(y, -1) - y @ np.roll(x, -1))


def patch_chains(mesh: Mesh, name: str) -> list[tuple[Array, bool]]:
    """Chains of point numbers of a patch, fluid on their left, and whether each closes."""
    edges = mesh.patch_edges(name)
    return [(_nodes(edges[chain], closed), closed) for chain, closed in walks(edges, mesh.points)]


def patch_rings(mesh: Mesh, name: str) -> list[Array]:
    """The closed chains of a patch, as point numbers, fluid on their left (holes run clockwise)."""
    return [nodes for nodes, closed in patch_chains(mesh, name) if closed]


def domain_loops(mesh: Mesh) -> list[Array]:
    """All rings of the domain boundary, as point numbers; outer ones counter-clockwise, holes clockwise."""
    edges = mesh.boundary.edges
    return [_nodes(edges[chain], closed) for chain, closed in walks(edges, mesh.points)]


def is_hole(points: Array) -> bool:
    """Whether a ring with the fluid on its left bounds a hole.

    A plate without thickness has no area and is a hole too: a ring around
    fluid has an area well above rounding.
    """
    extent = float(np.ptp(points, axis=0).max())
    rounding = 8 * np.finfo(float).eps * (extent + float(np.abs(points).max())) * extent * len(points)
    return bool(ring_area(points) <= rounding)


def lowest_left(points: Array, bounds: tuple[float, float, float, float]) -> tuple[int, int]:
    """Order of rings from left to right, then upwards, by their leftmost point.

    In millionths of the domain, so that translating the mesh does not change
    the order of rings that lie equally far left.
    """
    x0, y0, x1, y1 = bounds
    unit = max(x1 - x0, y1 - y0) * 1e-6
    columns = np.round((points - [x0, y0]) / unit).astype(np.int64)
    left = columns[columns[:, 0] == columns[:, 0].min()]
    return int(left[0, 0]), int(left[:, 1].min())


def holes(mesh: Mesh) -> list[tuple[str, list[Array]]]:
    """Every hole of the domain: (name, rings of point numbers).

    A body (`Mesh.bodies`) carries its patch's name and all its rings. A hole that
    several patches bound, or one whose patch also lies elsewhere, is called
    ``hole-1``, ``hole-2``, … from left to right.
    """
    edges, patch = mesh.boundary.edges, mesh.boundary.patch
    out: dict[str, list[Array]] = {name: [] for name in mesh.bodies}
    others = []
    for chain, closed in walks(edges, mesh.points):
        ring = _nodes(edges[chain], closed)
        if not closed or not is_hole(mesh.points[ring]):
            continue
        name = mesh.boundary.names[patch[chain[0]]]
        if name in out:
            out[name].append(ring)
        else:
            others.append(ring)
    others.sort(key=lambda ring: lowest_left(mesh.points[ring], mesh.bounds))
    taken = set(mesh.boundary.names)
    count = 0
    for ring in others:
        count += 1
        while f"hole-{count}" in taken:
            count += 1
        out[f"hole-{count}"] = [ring]
    return list(out.items())
