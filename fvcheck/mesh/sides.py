"""Names for boundary edges that no patch of the file covers."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence
from itertools import count

import numpy as np

from fvcheck.mesh.boundary import Loops, lowest_left

Array = np.ndarray

CORNER = np.radians(30.0)
SHARP = np.radians(70.0)
STRAIGHT = 1e-6
"""Largest distance from a side of the bounding box, as a share of the extent."""

_BOX = ("left", "right", "bottom", "top")

Bounds = tuple[float, float, float, float]


def name_all(
    points: Array, edges: Array, loops: Loops, patch: Array, names: Sequence[str]
) -> tuple[Array, tuple[str, ...]]:
    """Give the edges with ``patch`` -1 names of our own.

    points (n, 2), edges (e, 2) fluid on the left, their loops, patch (e,) index
    into ``names``. Holes become ``body-1`` …, straight sides on the bounding box
    ``left``, ``right``, ``bottom``, ``top``, other sides ``side-1`` … Returns
    patch and names.
    """
    patch, out = patch.copy(), list(names)
    low, high = points.min(axis=0), points.max(axis=0)
    bounds = (float(low[0]), float(low[1]), float(high[0]), float(high[1]))
    bare = np.zeros(len(loops), bool)
    bare[loops.of_edge()[patch < 0]] = True

    def in_order(which: Array) -> list[int]:
        ring = {c: points[edges[loops.chain(c), 0]] for c in np.flatnonzero(which & bare).tolist()}
        return sorted(ring, key=lambda c: lowest_left(ring[c], bounds))

    sides = []
    for c in in_order(~loops.hole):
        chain = loops.chain(c)
        if loops.closed[c]:
            chain = np.roll(chain, -_start(points[edges[chain, 0]], bounds))
        sides += _sides(points, edges, patch, chain, bool(loops.closed[c]))
    labels = [_box_side(points, edges[side], bounds) for side in sides]
    often, side_names = Counter(labels), _free("side", names)
    called = [
        label if label and often[label] == 1 and label not in names else next(side_names) for label in labels
    ]
    for i in sorted(range(len(sides)), key=lambda i: _box_order(called[i])):
        patch[sides[i]] = len(out)
        out.append(called[i])
    for c, name in zip(in_order(loops.hole), _free("body", names)):
        chain = loops.chain(c)
        patch[chain[patch[chain] < 0]] = len(out)
        out.append(name)
    return patch, tuple(out)


def _free(word: str, taken: Sequence[str]) -> Iterator[str]:
    """word-1, word-2, … without those taken."""
    return (name for name in (f"{word}-{i}" for i in count(1)) if name not in taken)


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
