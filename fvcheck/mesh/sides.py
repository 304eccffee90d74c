"""Names for boundary edges that no patch of the file covers."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fvcheck.mesh.boundary import is_hole, lowest_left, walks

Array = np.ndarray

CORNER = np.radians(30.0)
SHARP = np.radians(70.0)
STRAIGHT = 1e-6
"""Largest distance from a side of the bounding box, as a share of the extent."""

Bounds = tuple[float, float, float, float]


def name_all(
    points: Array, edges: Array, patch: Array, names: Sequence[str]
) -> tuple[Array, tuple[str, ...]]:
    """Give the edges with ``patch`` -1 names of our own.

    points (n, 2), edges (e, 2) fluid on the left, patch (e,) index into ``names``.
    Holes become ``body-1`` …, straight sides on the bounding box ``left``,
    ``right``, ``bottom``, ``top``, other sides ``side-1`` … Returns patch and names.
    """
    patch, out = patch.copy(), list(names)
    if (patch >= 0).all():
        return patch, tuple(out)
    low, high = points.min(axis=0), points.max(axis=0)
    bounds = (float(low[0]), float(low[1]), float(high[0]), float(high[1]))
    inner: list[tuple[Array, bool]] = []
    outer: list[tuple[Array, bool]] = []
    for chain, closed in walks(edges, points):
        hole = closed and is_hole(points[edges[chain, 0]])
        (inner if hole else outer).append((chain, closed))
    sides = []
    outer.sort(key=lambda item: lowest_left(points[edges[item[0], 0]], bounds))
    for chain, closed in outer:
        if closed:
            chain = np.roll(chain, -_start(points[edges[chain, 0]], bounds))
        sides += _sides(points, edges, patch, chain, closed)
    labels = [_box_side(points, edges[side], bounds) for side in sides]
    count, called = 0, []
    for label in labels:
        if not label or labels.count(label) > 1 or label in names:
            label, count = _free("side", count, out)
        called.append(label)
    for order in sorted(range(len(sides)), key=lambda i: _box_order(called[i])):
        patch[sides[order]] = len(out)
        out.append(called[order])
    count = 0
    inner.sort(key=lambda item: lowest_left(points[edges[item[0], 0]], bounds))
    for chain, _ in inner:
        bare = chain[patch[chain] < 0]
        if len(bare):
            name, count = _free("body", count, out)
            patch[bare] = len(out)
            out.append(name)
    return patch, tuple(out)


def _free(word: str, count: int, taken: Sequence[str]) -> tuple[str, int]:
    count += 1
    while f"{word}-{count}" in taken:
        count += 1
    return f"{word}-{count}", count


def _box_order(label: str) -> int:
    return (
        ("left", "right", "bottom", "top").index(label) if label in ("left", "right", "bottom", "top") else 4
    )


def _start(ring: Array, bounds: Bounds) -> int:
    """Position of the ring's point nearest to the lower left, in millionths against rounding."""
    x0, y0, x1, y1 = bounds
    x = np.round((ring[:, 0] - x0) / (x1 - x0) * 1e6)
    y = np.round((ring[:, 1] - y0) / (y1 - y0) * 1e6)
    return int(np.lexsort((y, x + y))[0])


def turns(ring: Array) -> Array:
    """(n,) angle by which a closed ring (n, 2) turns at each point, positive to the left."""
    step = np.roll(ring, -1, axis=0) - ring
    before = np.roll(step, 1, axis=0)
    return np.arctan2(
        before[:, 0] * step[:, 1] - before[:, 1] * step[:, 0],
        before[:, 0] * step[:, 0] + before[:, 1] * step[:, 1],
    )


def corners(ring: Array) -> Array:
    """(n,) which points of a closed ring are corners.

    A corner turns by over 30 degrees. On a coarse curve every point may do so:
    a turn below 70 degrees between two turns the same way, each at least a
    quarter as large and below 70 degrees too, counts as part of a curve (a
    chamfer's ends each have a straight side or a sharp corner next to them and
    stay corners).
    """
    turn = turns(ring)
    quarter = 0.25 * np.abs(turn)
    before, after = np.roll(turn, 1) * np.sign(turn), np.roll(turn, -1) * np.sign(turn)
    curve = (np.abs(turn) < SHARP) & (before >= quarter) & (after >= quarter)
    curve &= (before < SHARP) & (after < SHARP)
    return (np.abs(turn) > CORNER) & ~curve


def _sides(points: Array, edges: Array, patch: Array, chain: Array, closed: bool) -> list[Array]:
    """Runs of uncovered edges of one loop, cut at corners, in walking order."""
    ring = points[edges[chain, 0]]
    begins = corners(ring) if closed and len(ring) > 2 else np.zeros(len(ring), bool)
    bare = patch[chain] < 0
    previous = np.roll(bare, 1)
    if not closed:
        previous[0] = False
    begins = bare & (begins | ~previous)
    if not bare.any():
        return []
    if not begins.any():
        return [chain]
    first = int(np.argmax(begins))
    chain, bare, begins = (np.roll(a, -first) for a in (chain, bare, begins))
    label = np.cumsum(begins)
    return [chain[(label == i) & bare] for i in range(1, int(label[-1]) + 1)]


def _box_side(points: Array, edges: Array, bounds: Bounds) -> str:
    """left, right, bottom or top if all points lie on that side of the bounding box, else empty."""
    x0, y0, x1, y1 = bounds
    tolerance = STRAIGHT * max(x1 - x0, y1 - y0)
    used = points[edges.reshape(-1)]
    for label, column, value in (("left", 0, x0), ("right", 0, x1), ("bottom", 1, y0), ("top", 1, y1)):
        if (np.abs(used[:, column] - value) <= tolerance).all():
            return label
    return ""
