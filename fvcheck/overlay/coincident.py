"""Where what is drawn runs along the domain boundary."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.pieces import DRAWN, Overlay, edge_pieces, edge_triangles

Array = np.ndarray


def covered(mesh: Mesh, pieces: Overlay, by: Overlay) -> Array:
    """(n,) bool: which pieces have their middle on one of the others."""
    middle = 0.5 * (pieces.start + pieces.end)
    out = np.zeros(len(middle), bool)
    for a, b, slack in zip(by.start, by.end, _slack(mesh, by.lengths)):
        t = (b - a) / np.hypot(*(b - a))
        place, across = (middle - a) @ t, (middle - a) @ np.array([t[1], -t[0]])
        out |= (place > 0.0) & (place < np.hypot(*(b - a))) & (np.abs(across) <= slack)
    return out


def along_boundary(mesh: Mesh, start: Array, end: Array) -> Overlay:
    """Parts of boundary edges that segments run along, in the direction of the segments."""
    a, b = (mesh.points[mesh.boundary.edges[:, k]] for k in (0, 1))
    slack = _slack(mesh, np.hypot(*(b - a).T))
    low, high = np.minimum(a, b) - slack[:, None], np.maximum(a, b) + slack[:, None]
    edges, begins, ends = [np.empty(0, np.int64)], [np.empty((0, 2))], [np.empty((0, 2))]
    for p, q in zip(start, end):
        near = (low <= np.maximum(p, q)).all(axis=1) & (high >= np.minimum(p, q)).all(axis=1)
        edge = np.flatnonzero(near)
        side = b[edge] - a[edge]
        length = np.hypot(*side.T)
        # Fractions along the edge and distances from it of the segment's two ends.
        fp, fq = (np.sum((x - a[edge]) * side, axis=1) / length**2 for x in (p, q))
        dp, dq = (
            (side[:, 0] * (x - a[edge])[:, 1] - side[:, 1] * (x - a[edge])[:, 0]) / length for x in (p, q)
        )
        f0, f1 = np.clip(fp, 0.0, 1.0), np.clip(fq, 0.0, 1.0)
        run = np.where(fp != fq, fq - fp, 1.0)
        d0, d1 = dp + (dq - dp) * (f0 - fp) / run, dp + (dq - dp) * (f1 - fp) / run
        on = (np.maximum(np.abs(d0), np.abs(d1)) <= slack[edge]) & (np.abs(f1 - f0) > 1e-9)
        # Of both faces of a plate without thickness, that with the fluid on the left.
        middle = a[edge] + 0.5 * (f0 + f1)[:, None] * side
        t = (middle - p) @ (q - p)
        reach = 0.5 * np.abs(f1 - f0) * np.abs(side @ (q - p))
        same = on & (f1 > f0)
        on &= (f1 > f0) | ~(np.abs(t[:, None] - t[same]) < reach[same]).any(axis=1)
        edges.append(edge[on])
        begins.append(a[edge[on]] + f0[on, None] * side[on])
        ends.append(a[edge[on]] + f1[on, None] * side[on])
    found = np.concatenate(edges)
    edge, triangle = edge_triangles(mesh, np.unique(found))
    of_edge = np.zeros(len(a), np.int64)
    of_edge[edge] = np.arange(len(edge))
    pieces = triangle[of_edge[found]]
    none = np.empty(0, np.int64)
    return edge_pieces(mesh, found, pieces, np.concatenate(begins), np.concatenate(ends), none, False)


def label_coincident(mesh: Mesh, overlay: Overlay) -> Overlay:
    """Give drawn pieces that lie on the domain boundary, in its direction, to its patch.

    Whether a surface drawn along a wall comes out a rounding error inside or
    outside of it is chance; this makes the ledger the same in both cases. It
    moves no piece, so it cannot open the volume.
    """
    piece, edge, on, same_way = _coincident(mesh, overlay)
    patch = overlay.patch.copy()
    patch[piece[on & same_way]] = mesh.boundary.patch[edge[on & same_way]]
    return replace(overlay, patch=patch)


def _coincident(mesh: Mesh, overlay: Overlay) -> tuple[Array, Array, Array, Array]:
    """Pairs of a drawn piece and a boundary edge of its cell.

    Returns (piece, edge, on, same_way): numbers, whether the piece lies on the
    edge, whether it runs in the edge's direction.
    """
    boundary = mesh.boundary
    order, sorted_cells = mesh.boundary_by_cell
    drawn = np.flatnonzero(overlay.patch == DRAWN)
    low = np.searchsorted(sorted_cells, overlay.cell[drawn], "left")
    count = np.searchsorted(sorted_cells, overlay.cell[drawn], "right") - low
    piece = np.repeat(drawn, count)
    edge = order[np.repeat(low - np.cumsum(count) + count, count) + np.arange(count.sum())]
    a, b = (mesh.points[boundary.edges[edge, k]] for k in (0, 1))
    length = np.hypot(*(b - a).T)
    tangent = (b - a) / length[:, None]
    normal = np.column_stack([tangent[:, 1], -tangent[:, 0]])
    p, q = overlay.start[piece], overlay.end[piece]
    slack = _slack(mesh, length)
    middle = np.sum((0.5 * (p + q) - a) * tangent, axis=1)
    on = (
        (np.abs(np.sum((p - a) * normal, axis=1)) <= slack)
        & (np.abs(np.sum((q - a) * normal, axis=1)) <= slack)
        & (middle >= 0.0)
        & (middle <= length)
    )
    return piece, edge, on, np.sum((q - p) * tangent, axis=1) > 0


def _slack(mesh: Mesh, length: Array) -> Array:
    """Distance within which a piece lies on a boundary edge of that length.

    Meshes stored in single precision are off a drawn line by their own rounding.
    """
    return 1e-9 * length + mesh.boundary_rounding
