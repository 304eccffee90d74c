"""Chains, rings and loops of boundary edges."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.mesh.mesh import Mesh

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Loops:
    """Directed edges sorted into chains; chain c is ``order[offsets[c]:offsets[c+1]]``.

    ``closed`` (c,) whether a chain comes back to its start; ``hole`` (c,) whether
    it is closed and does not go round fluid on its left. A plate without
    thickness has no area and is a hole: a ring round fluid has one well above rounding.
    """

    order: Array
    offsets: Array
    closed: Array
    hole: Array

    def __len__(self) -> int:
        return len(self.closed)

    def chain(self, c: int) -> Array:
        """Numbers of the edges of chain c, in walking order."""
        return self.order[self.offsets[c] : self.offsets[c + 1]]

    def of_edge(self) -> Array:
        """(e,) the chain of each edge."""
        out = np.empty(len(self.order), np.int64)
        out[self.order] = np.repeat(np.arange(len(self)), np.diff(self.offsets))
        return out


def trace(edges: Array, points: Array) -> Loops:
    """Follow ``edges`` (e, 2) over points (n, 2), fluid on the left.

    Where several edges leave a point, the fluid on the left is kept on the left.
    No chain passes a point twice; one that would is cut there into rings.
    """
    from fvcheck.kernels.edges import successors, walk

    start, end = np.ascontiguousarray(edges[:, 0]), np.ascontiguousarray(edges[:, 1])
    x, y = np.ascontiguousarray(points[:, 0]), np.ascontiguousarray(points[:, 1])
    order, offsets, closed = walk(start, end, successors(start, end, x, y))
    sizes = np.diff(offsets)
    first = np.repeat(order[offsets[:-1]], sizes)
    from_first = points[edges[order]] - points[edges[first, 0]][:, None]
    a, b = from_first[:, 0], from_first[:, 1]

    def per_chain(reduce: np.ufunc, values: Array) -> Array:
        return reduce.reduceat(values, offsets[:-1]) if len(sizes) else np.zeros(0)

    area = 0.5 * per_chain(np.add, a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0])
    extent = per_chain(np.maximum, np.abs(a).max(axis=1))
    size = extent + per_chain(np.maximum, np.abs(points[edges[order, 0]]).max(axis=1))
    rounding = 8 * np.finfo(float).eps * size * extent * sizes
    return Loops(order, offsets, closed, closed & (area <= rounding))


def nodes_along(edges: Array, closed: bool) -> Array:
    """Points along a chain of edges; a closed one does not repeat the first, an open one has both ends."""
    return edges[:, 0] if closed else np.append(edges[:, 0], edges[-1, 1])


def chains(edges: Array, points: Array | None = None) -> list[Array]:
    """Point numbers along each connected directed chain of ``edges`` (e, 2).

    A closed chain does not repeat its first point, an open one has one point
    more than edges. Give ``points`` (n, 2) where chains may touch each other.
    """
    if points is None:
        points = np.zeros((int(edges.max()) + 1 if len(edges) else 0, 2))
    loops = trace(edges, points)
    return [nodes_along(edges[loops.chain(c)], loops.closed[c]) for c in range(len(loops))]


def patch_chains(mesh: Mesh, name: str) -> list[tuple[Array, bool]]:
    """Chains of point numbers of a patch, fluid on their left, and whether each closes."""
    edges = mesh.patch_edges(name)
    loops = trace(edges, mesh.points)
    return [
        (nodes_along(edges[loops.chain(c)], loops.closed[c]), bool(loops.closed[c]))
        for c in range(len(loops))
    ]


def patch_rings(mesh: Mesh, name: str) -> list[Array]:
    """The closed chains of a patch, as point numbers, fluid on their left (holes run clockwise)."""
    return [nodes for nodes, closed in patch_chains(mesh, name) if closed]


def domain_loops(mesh: Mesh) -> list[Array]:
    """All rings of the domain boundary, as point numbers; outer ones counter-clockwise, holes clockwise."""
    return chains(mesh.boundary.edges, mesh.points)


def ring_area(points: Array) -> float:
    """Signed area of the ring ``points`` (n, 2), positive counter-clockwise."""
    x, y = (points - points[0]).T
    return 0.5 * float(x @ np.roll(y, -1) - y @ np.roll(x, -1))


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


def bodies(loops: Loops, patch: Array, names: tuple[str, ...]) -> tuple[str, ...]:
    """Patches whose every edge lies on holes that are theirs alone; patch (e,) index into ``names``."""
    along = patch[loops.order]
    sizes = np.diff(loops.offsets)
    first = along[loops.offsets[:-1]]
    foreign = np.zeros(len(loops), bool)
    chain = np.repeat(np.arange(len(loops)), sizes)
    foreign[chain[along != first[chain]]] = True
    shared = np.zeros(len(names), bool)
    shared[along[(foreign | ~loops.hole)[chain]]] = True
    return tuple(name for name, other in zip(names, shared) if not other)


def holes(mesh: Mesh) -> list[tuple[str, list[Array]]]:
    """Every hole of the domain: (name, rings of point numbers).

    A body (`Mesh.bodies`) carries its patch's name and all its rings. A hole that
    several patches bound, or one whose patch also lies elsewhere, is called
    ``hole-1``, ``hole-2``, … from left to right.
    """
    edges, patch, names = mesh.boundary.edges, mesh.boundary.patch, mesh.boundary.names
    out: dict[str, list[Array]] = {name: [] for name in mesh.bodies}
    others = []
    loops = trace(edges, mesh.points)
    for c in np.flatnonzero(loops.hole).tolist():
        chain = loops.chain(c)
        name = names[patch[chain[0]]]
        if name in out:
            out[name].append(edges[chain, 0])
        else:
            others.append(edges[chain, 0])
    others.sort(key=lambda ring: lowest_left(mesh.points[ring], mesh.bounds))
    free = (
        name for name in (f"hole-{i}" for i in range(1, len(names) + len(others) + 1)) if name not in names
    )
    out.update(zip(free, ([ring] for ring in others)))
    return list(out.items())


def clearance(mesh: Mesh, name: str) -> float:
    """Shortest distance from a patch to the rest of the boundary; 0 where they touch, inf without a rest."""
    import shapely

    mine = mesh.boundary.patch == mesh.boundary.names.index(name)
    if mine.all():
        return float("inf")
    own, rest = (
        shapely.multilinestrings(shapely.linestrings(mesh.points[mesh.boundary.edges[w]]))
        for w in (mine, ~mine)
    )
    shapely.prepare(rest)  # an indexed search instead of every edge against every other
    return float(shapely.distance(rest, own))
