"""Cells and faces of logically rectangular blocks of points."""

from __future__ import annotations

import numpy as np

from fvcheck.mesh.piece import Array

# VTK cell types by the number of axes with more than one point, and their corners as steps along them.
_TYPES = (1, 3, 9, 12)
_CORNERS: tuple[tuple[tuple[int, ...], ...], ...] = (
    ((),),
    ((0,), (1,)),
    ((0, 0), (1, 0), (1, 1), (0, 1)),
    ((0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0, 0, 1), (1, 0, 1), (1, 1, 1), (0, 1, 1)),
)


def block_cells(points: tuple[int, ...]) -> tuple[Array, Array, Array]:
    """(types, offsets, nodes) of a block with ``points`` points per axis, the first axis fastest.

    Axes with one point are left out: a flat block has quadrilaterals, not hexahedra.
    Cells run with the first axis fastest, too.
    """
    nodes = block_nodes(points, [(0, n) for n in points])
    cells = len(nodes)
    kind = _TYPES[sum(n > 1 for n in points)]
    return (
        np.full(cells, kind, dtype=np.uint8),
        np.arange(cells + 1, dtype=np.int64) * nodes.shape[1],
        nodes.reshape(-1),
    )


def block_nodes(points: tuple[int, ...], window: list[tuple[int, int]]) -> Array:
    """Corner nodes (cells, corners) of the cells spanned by a window of points.

    ``window``: first and one past the last point per axis. Axes over which the
    window has one point are left out, so that a face of a block gives its faces.
    """
    strides = np.concatenate([[1], np.cumprod(points[:-1])]).astype(np.int64)
    start = sum(int(stride) * first for stride, (first, _) in zip(strides, window))
    axes = [axis for axis, (first, last) in enumerate(window) if last - first > 1]
    base = np.array([start], dtype=np.int64)
    for axis in axes:
        first, last = window[axis]
        base = (np.arange(last - first - 1)[:, None] * strides[axis] + base).reshape(-1)
    corners = [
        sum(step * strides[axis] for step, axis in zip(corner, axes)) for corner in _CORNERS[len(axes)]
    ]
    return base[:, None] + np.array(corners, dtype=np.int64)
