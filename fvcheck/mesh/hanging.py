"""Hanging nodes: points of one cell on the edge of another."""

from __future__ import annotations

import numpy as np

from fvcheck.hints import Hint
from fvcheck.mesh.edges import Edges, points_of
from fvcheck.mesh.finder import Finder
from fvcheck.mesh.gather import Polygons
from fvcheck.mesh.stitch import NEAR, SPACINGS, WIDER

Array = np.ndarray

_FEW = 16
_HALVINGS = 20


def insert_hanging(
    points: Array,
    cells: Polygons,
    edges: Edges,
    finder: Finder,
    number: Array,
    precision: float,
    hints: list[Hint],
) -> Polygons:
    """Put points that lie on an open edge of a cell into that cell's outline.

    Edges that belong to a patch of the file are walls and stay as they are. Adds
    the hint "hanging-nodes".
    """
    patch, _ = finder.find(edges.start, edges.end, number)
    wall = finder.claims.is_wall(patch)
    walls, alone = edges.start[wall], edges.open[~wall]
    start, stop, cell = edges.start[~wall], edges.end[~wall], edges.cell[~wall]
    tolerance = _tolerances(points, start, stop, precision)
    if _bare(points, start, stop, points_of(np.concatenate([start, stop, walls]), len(points)), tolerance):
        return cells
    from fvcheck.kernels.edges import paths_back
    from fvcheck.kernels.polygons import insert_nodes

    # Where others run back along an edge from end to end the mesh itself leads to the points ...
    x, y = np.ascontiguousarray(points.T)
    edge, node, along, done = paths_back(start, stop, x, y, tolerance)
    # ... elsewhere, as along uneven seams, they have to be searched.
    left = np.flatnonzero(~done)
    rim = points_of(np.concatenate([start[left], stop[left], walls]), len(points))
    more = _on_edges(points, start[left], stop[left], rim, tolerance[left])
    row = np.concatenate([edge, left[more[0]]])
    node, along = np.concatenate([node, more[1]]), np.concatenate([along, more[2]])
    own = _cell_has(cells, cell[row], node)
    edge, node, along = alone[row[~own]], node[~own], along[~own]
    if len(edge) == 0:
        return cells
    order = np.lexsort((along, edge))
    edge, node, along = edge[order], node[order], along[order]
    # Two points kept apart at one place: one of them is enough for this side.
    twice = np.zeros(len(edge), bool)
    twice[1:] = (edge[1:] == edge[:-1]) & (along[1:] - along[:-1] < NEAR)
    edge, node = edge[~twice], node[~twice]
    offsets, nodes = insert_nodes(cells.offsets, cells.nodes, edge, node)
    hints.append(Hint("hanging-nodes", f"{len(edge)} hanging nodes are put into the cells they lie on"))
    return Polygons(offsets, nodes, cells.source)


def _tolerances(points: Array, start: Array, end: Array, precision: float) -> Array:
    """(e,) distance within which a point lies on an edge."""
    length = np.hypot(*(points[end] - points[start]).T)
    size = np.maximum(np.abs(points[start, 0]), np.abs(points[start, 1]))
    return np.minimum(np.maximum(NEAR * length, SPACINGS * precision * size), 0.01 * length)


def _bare(points: Array, start: Array, end: Array, rim: Array, tolerance: Array) -> bool:
    """Whether the disk about each edge that just holds it holds no rim point but its two ends.

    So it is with most edges of most meshes; what looks closer takes longer to load than this.
    """
    from fvcheck.kernels.vicinity import crowds

    radius = 0.5 * np.hypot(*(points[end] - points[start]).T) + tolerance
    x, y = np.ascontiguousarray(points[rim].T)
    at_x, at_y = np.ascontiguousarray(0.5 * (points[start] + points[end]).T)
    return bool(crowds(x, y, at_x, at_y, WIDER * radius).max(initial=0) <= 2)


def _on_edges(
    points: Array, start: Array, end: Array, rim: Array, tolerance: Array
) -> tuple[Array, Array, Array]:
    """Rim points between the ends of edges: edge number, point, share of the way.

    Each edge is looked at through the disk that just holds it; where that holds
    many points the edge is halved, so that the work follows the points near the
    edge, not those in a wide disk round it.
    """
    step = points[end] - points[start]
    length = np.hypot(*step.T)
    none = np.zeros(0, np.int64)
    edges, nodes, shares = [none], [none], [np.zeros(0)]
    if len(rim) == 0 or len(start) == 0:
        return none, none, np.zeros(0)
    from scipy.spatial import cKDTree

    tree = cKDTree(points[rim])
    row, low, high = np.arange(len(start)), np.zeros(len(start)), np.ones(len(start))
    for depth in range(_HALVINGS + 1):
        middle = points[start[row]] + (0.5 * (low + high))[:, None] * step[row]
        radius = 0.5 * (high - low) * length[row] * (1 + 1e-9) + tolerance[row]
        count = tree.query_ball_point(middle, radius, return_length=True)
        ready = count <= (_FEW if depth < _HALVINGS else np.inf)
        look = ready & (count > (2 if depth == 0 else 0))  # a whole edge always sees its own two ends
        if look.any():
            found = tree.query_ball_point(middle[look], radius[look], return_sorted=False)
            size = count[look]
            node = rim[np.concatenate([np.asarray(some, np.int64) for some in found])]
            r, t0, t1 = (np.repeat(values[look], size) for values in (row, low, high))
            away = points[node] - points[start[r]]
            along = (away * step[r]).sum(axis=1) / length[r] ** 2
            off = np.abs(away[:, 0] * step[r, 1] - away[:, 1] * step[r, 0]) / length[r]
            slack = tolerance[r]
            good = (off <= slack) & (along * length[r] > slack) & ((1 - along) * length[r] > slack)
            good &= (along >= t0) & (along < t1)
            edges.append(r[good])
            nodes.append(node[good])
            shares.append(along[good])
        row, low, high = row[~ready], low[~ready], high[~ready]
        if len(row) == 0:
            break
        half = 0.5 * (low + high)
        row, low, high = np.tile(row, 2), np.concatenate([low, half]), np.concatenate([half, high])
    return np.concatenate(edges), np.concatenate(nodes), np.concatenate(shares)


def _cell_has(cells: Polygons, cell: Array, node: Array) -> Array:
    """(p,) whether cell[j] has node[j] already."""
    first, size = cells.offsets[cell], cells.offsets[cell + 1] - cells.offsets[cell]
    out = np.zeros(len(cell), bool)
    for step in range(int(size.max(initial=0))):
        inside = step < size
        out[inside] |= cells.nodes[first[inside] + step] == node[inside]
    return out
