"""Merging the points that pieces of an export repeat along their seams.

How far apart may two copies of one point lie? Partitioned runs write bit-equal
copies; a transformed block differs by a few roundings of the stored
coordinates. So the tolerance is `NEAR` of the shortest open edge at the point,
or eight spacings of the stored numbers where that is more (float32 files: far
from the origin the spacing is what limits us), but never above a tenth of
that edge, so that neighbours along a seam stay apart however coarse the numbers.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fvcheck.hints import Hint
from fvcheck.mesh.claims import Claims
from fvcheck.mesh.edges import Edges, points_of
from fvcheck.mesh.finder import Finder
from fvcheck.mesh.gather import Polygons, Raw
from fvcheck.mesh.piece import Piece

Array = np.ndarray

NEAR = 1e-6
SPACINGS = 8
WIDER = 1 + 1e-9
"""A count within a distance this much wider misses none that a tree finds, which rounds otherwise."""


@dataclass(frozen=True, eq=False)
class Seams:
    """number (n,): the point each raw point was merged into; finder: patches of edges."""

    number: Array
    finder: Finder
    merged: int = 0


def stitch(
    points: Array,
    cells: Polygons,
    edges: Edges,
    raw: Raw,
    pieces: Sequence[Piece],
    claims: Claims,
    hints: list[Hint],
) -> Seams:
    """Find and merge coincident points on open edges.

    points (n, 2) of all raw points. Kept apart: both sides of a plate that
    patches cover on both sides, and points of one piece whose float data
    differ beyond rounding. Adds the hints "stitched-points" and
    "kept-apart-points".
    """
    from fvcheck.kernels.edges import twins
    from fvcheck.kernels.merging import groups

    n = len(points)
    start, end = edges.start, edges.end
    rim = points_of(start, n)
    tolerance, shortest = _tolerances(points, start, end, rim, raw.precision)
    group, far = _coincident(points, start, end, rim, tolerance)
    used = np.zeros(n, bool)
    used[cells.nodes] = True
    finder = Finder(claims, used, group, _places(points, claims, used, rim, group, shortest))
    number = np.arange(n)
    rim_group = group[rim]
    if (rim_group == rim).all():
        return Seams(number, finder)

    real = group[start] != group[end]
    start, end = start[real], end[real]
    twin = twins(group[start], group[end], n)
    h = np.flatnonzero(twin > np.arange(len(twin)))
    t = twin[h]
    patch, _ = finder.find(start, end, number)
    wall = claims.is_wall(patch)
    plate = wall[h] & wall[t]
    torn = 2 * len(h) > 0.5 * len(cells.nodes)  # every cell has points of its own: no plates
    a = np.concatenate([start[h], end[h]])
    b = np.concatenate([end[t], start[t]])
    unlike = np.zeros(len(a), bool) if torn else _data_differ(raw, pieces, a, b)
    apart = np.concatenate([plate, plate]) | unlike
    guarded = np.zeros(n, bool)
    guarded[a[apart]] = guarded[b[apart]] = True
    # Points that meet without a common edge (block corners, ends of uneven seams) merge as well.
    free = rim[~guarded[rim]]
    leader = np.full(n, n, np.int64)
    np.minimum.at(leader, group[free], free)
    meets = leader[group[free]]
    loose = np.zeros(len(free), bool) if torn else _data_differ(raw, pieces, free, meets)
    a = np.concatenate([a[~apart], free[~loose]])
    b = np.concatenate([b[~apart], meets[~loose]])
    number = groups(n, a, b)
    merged = int(np.count_nonzero(number != np.arange(n)))
    if merged:
        hints.append(
            Hint(
                "stitched-points",
                f"{merged} repeated points are merged, up to {far:.3g} apart"
                f" (tolerance {tolerance.min():.3g} to {tolerance.max():.3g})",
            )
        )
    kept = len(points_of(number[rim], n)) - len(points_of(rim_group, n))
    if kept:
        hints.append(
            Hint(
                "kept-apart-points",
                f"{kept} points lie on another and are kept apart: two sides of a wall, or differing data",
            )
        )
    return Seams(number, finder, merged)


def _tolerances(points: Array, start: Array, end: Array, rim: Array, precision: float) -> tuple[Array, Array]:
    """(r,) tolerance and shortest open edge of each rim point; edges within rounding do not count."""
    size = np.maximum(np.abs(points[:, 0]), np.abs(points[:, 1]))
    spacing = SPACINGS * precision * size[rim]
    length = np.hypot(*(points[end] - points[start]).T)
    real = length > SPACINGS * precision * size[start]
    shortest = np.full(len(points), np.inf)
    for ends in (start[real], end[real]):
        np.minimum.at(shortest, ends, length[real])
    shortest = shortest[rim]
    fallback = float(length.max(initial=0.0))
    shortest[~np.isfinite(shortest)] = fallback
    return np.minimum(np.maximum(NEAR * shortest, spacing), 0.1 * shortest), shortest


def _coincident(points: Array, start: Array, end: Array, rim: Array, tolerance: Array) -> tuple[Array, float]:
    """Group number of each point (points at one place share it), and the largest distance bridged."""
    from fvcheck.kernels.edges import ALONE, twins
    from fvcheck.kernels.merging import first_equal, groups
    from fvcheck.kernels.vicinity import crowds

    n = len(points)
    group = np.arange(n)
    x, y = np.ascontiguousarray(points[rim].T)
    if crowds(x, y, x, y, tolerance * WIDER).max(initial=0) < 2:
        return group, 0.0  # as in most files: what follows takes longer to load than this to count
    group[rim] = rim[first_equal(x, y)]
    a, b = group[start], group[end]
    real = a != b
    a, b = a[real], b[real]
    open_ = twins(a, b, n) == ALONE
    left = points_of(np.concatenate([a[open_], b[open_]]), n)
    if len(left) < 2:
        return group, 0.0
    reach = np.zeros(n)
    reach[rim] = tolerance
    reach = reach[left]
    from scipy.spatial import cKDTree

    tree = cKDTree(points[left])
    many = min(8, len(left))
    distance, other = tree.query(points[left], k=many, distance_upper_bound=float(reach.max()) * (1 + 1e-12))
    me = np.repeat(np.arange(len(left)), many)
    distance, other = np.ravel(distance), np.ravel(other)
    good = other < len(left)
    me, distance, other = me[good], distance[good], other[good]
    good = (me < other) & (distance <= np.minimum(reach[me], reach[other]))
    if not good.any():
        return group, 0.0
    joined = groups(n, left[me[good]], left[other[good]])
    return joined[group], float(distance[good].max())


def _places(points: Array, claims: Claims, used: Array, rim: Array, group: Array, shortest: Array) -> Array:
    """(n,) group at the place of claimed points that no cell uses, -1 where there is none.

    A name only has to find the nearest boundary point: a thousandth of an edge will do.
    """
    place = np.full(len(points), -1, np.int64)
    place[used] = group[used]
    claimed = np.concatenate([claims.ends.reshape(-1), *(ids for _, ids in claims.vertices)])
    claimed = points_of(claimed, len(points))
    claimed = claimed[~used[claimed]]
    if len(claimed) and len(rim):
        from scipy.spatial import cKDTree

        distance, nearest = cKDTree(points[rim]).query(points[claimed])
        distance, nearest = np.atleast_1d(distance), np.atleast_1d(nearest)
        good = distance <= 1e-3 * shortest[nearest]
        place[claimed[good]] = group[rim[nearest[good]]]
    return place


def _data_differ(raw: Raw, pieces: Sequence[Piece], a: Array, b: Array) -> Array:
    """(p,) whether points a[j], b[j] belong to one piece and carry different float data."""
    out = np.zeros(len(a), bool)
    piece_of = raw.piece_of_point(a)
    same = (piece_of == raw.piece_of_point(b)) & (a != b)
    for p in np.unique(piece_of[same]).tolist():
        rows = np.flatnonzero(same & (piece_of == p))
        i, j = a[rows] - raw.point_start[p], b[rows] - raw.point_start[p]
        for array in pieces[p].point_data.values():
            array = np.asarray(array)
            if array.dtype.kind != "f" or len(array) != len(pieces[p].points):
                continue
            # Copies of one solution agree to iteration errors; two sides of a plate do not.
            share = 1e-5 if array.dtype.itemsize <= 4 else 1e-6
            finite = np.abs(array[np.isfinite(array)])
            scale = float(finite.max()) if finite.size else 0.0
            gap = np.abs(array[i].astype(float) - array[j].astype(float)).reshape(len(rows), -1).max(axis=1)
            out[rows] |= gap > share * scale
    return out
