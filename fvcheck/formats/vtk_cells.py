"""Cells as the VTK family stores them, brought to the arrays of a piece.

Polyhedra get their faces, poly data are
put in the order in which their cell data run, and ghost marks are taken out of
the data arrays. Cell types and node orders: https://docs.vtk.org, "VTK File
Formats".
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.check import DAMAGED
from fvcheck.mesh.piece import Array, Faces

# Marks of vtkGhostType: cells that another partition owns (1), that a finer block
# replaces (8), that are blanked (32); points that are blanked (2).
DROPPED_CELL = 1 | 8 | 32
HIDDEN_POINT = 2
GHOST_NAMES = ("vtkGhostType", "vtkGhostLevels")

# Groups of poly data in the order of their cell data: the usual cell type, and that of certain node counts.
_POLY_TYPES: dict[str, tuple[int, dict[int, int]]] = {
    "verts": (2, {1: 1}),
    "lines": (4, {2: 3}),
    "polys": (7, {3: 5, 4: 9}),
    "strips": (6, {}),
}

Cells = tuple[Array, Array, Array]
"""types (m,) uint8, offsets (m+1,) int64, nodes (k,) int64."""

Group = tuple[Array, Array]
"""offsets (m+1,) int64, nodes (k,) int64 of cells of one kind."""


def poly_cells(groups: dict[str, Group]) -> Cells:
    """Cells of poly data from the (offsets, nodes) of its four groups.

    ``groups`` may hold "verts", "lines", "polys", "strips"; cell data run over
    them in this order.
    """
    types, counts, nodes = [], [], []
    for name, (usual, special) in _POLY_TYPES.items():
        if name not in groups:
            continue
        offsets, ids = groups[name]
        count = np.diff(offsets)
        kind = np.full(len(count), usual, dtype=np.uint8)
        for size, other in special.items():
            kind[count == size] = other
        types.append(kind)
        counts.append(count)
        nodes.append(ids)
    if not types:
        return np.empty(0, np.uint8), np.zeros(1, np.int64), np.empty(0, np.int64)
    offsets = np.concatenate([[0], np.cumsum(np.concatenate(counts))]).astype(np.int64)
    return np.concatenate(types), offsets, np.concatenate(nodes).astype(np.int64, copy=False)


def running_offsets(ends: Array, total: int, what: str, where: str) -> Array:
    """Offsets from 0, given the end of every entry. Raises `FormatError` if they fall or miss ``total``."""
    offsets = np.concatenate([[0], ends.astype(np.int64, copy=False)])
    if offsets[-1] != total or (np.diff(offsets) < 0).any():
        raise FormatError(
            f"the {what} fall, or do not end at the {total} entries stored", where=where, mend=DAMAGED
        )
    return offsets


def listed_cells(stream: Array, count: int, where: str) -> Group:
    """(offsets, nodes) of ``count`` cells from a list "n, id, …, id, n, id, …".

    Raises `FormatError` when the counts do not fill the list exactly.
    """
    starts = np.empty(count + 1, dtype=np.int64)
    numbers, at = stream.tolist(), 0
    for cell in range(count):
        starts[cell] = at
        if at >= len(numbers) or numbers[at] < 0:
            raise FormatError(f"the list of cells is damaged at cell {cell}", where=where, mend=DAMAGED)
        at += numbers[at] + 1
    starts[count] = at
    if at != len(numbers):
        raise FormatError(
            f"the cells take {at} numbers, their list holds {len(numbers)}", where=where, mend=DAMAGED
        )
    keep = np.ones(len(stream), dtype=bool)
    keep[starts[:-1]] = False
    return starts - np.arange(count + 1), stream[keep].astype(np.int64, copy=False)


def streamed_faces(stream: Array, starts: Array, ends: Array, solid: Array, where: str) -> Faces:
    """Faces of polyhedra from the lists "faces, n, id, …, n, id, …" of the cells.

    The list of a cell is ``stream[starts[cell]:ends[cell]]``, where ``solid`` (m,)
    says that the cell is a polyhedron. Raises `FormatError` when the faces do not
    fill it exactly.
    """
    numbers = stream.tolist()
    begin: list[int] = []
    sizes: list[int] = []
    counts = np.zeros(len(solid), dtype=np.int64)
    for cell in np.flatnonzero(solid).tolist():
        at, end = int(starts[cell]), int(ends[cell])
        left = numbers[at] if 0 <= at < end <= len(numbers) else 0
        counts[cell] = left
        at += 1
        while left > 0 and at < end and numbers[at] >= 3:
            begin.append(at + 1)
            sizes.append(numbers[at])
            at += numbers[at] + 1
            left -= 1
        if left or not counts[cell] or at != end:
            raise FormatError(f"the faces of polyhedron {cell} are damaged", where=where, mend=DAMAGED)
    offsets = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    inside = np.arange(offsets[-1]) - np.repeat(offsets[:-1], sizes) + np.repeat(begin, sizes)
    nodes = stream[inside.astype(np.int64)].astype(np.int64)
    cell_offsets = np.concatenate([[0], np.cumsum(counts)])
    return Faces(offsets, nodes, cell_offsets, np.arange(len(sizes), dtype=np.int64))


def ghost_cells(point_data: dict[str, Array], cell_data: dict[str, Array], cells: Cells) -> Array | None:
    """Cells to drop (m,), or None; takes the ghost arrays out of both dictionaries."""
    _types, offsets, nodes = cells
    marks = [_taken(cell_data, name) for name in GHOST_NAMES]
    hidden = _taken(point_data, GHOST_NAMES[0])
    point_data.pop(GHOST_NAMES[1], None)
    if hidden is None and all(mark is None for mark in marks):
        return None
    ghost = np.zeros(len(offsets) - 1, dtype=bool)
    kind, level = marks
    if kind is not None and kind.shape == ghost.shape and kind.dtype.kind in "iu":
        ghost |= (kind & DROPPED_CELL) != 0
    if level is not None and level.shape == ghost.shape:
        ghost |= level > 0
    if hidden is not None and hidden.ndim == 1 and hidden.dtype.kind in "iu" and len(nodes):
        full = np.diff(offsets) > 0
        blanked = (hidden[nodes] & HIDDEN_POINT) != 0
        ghost[full] |= np.logical_or.reduceat(blanked, offsets[:-1][full])
    return ghost if ghost.any() else None


def _taken(data: dict[str, Array], name: str) -> Array | None:
    """An array taken out of the data, read."""
    values = data.pop(name, None)
    return None if values is None else np.asarray(values)


def lattice(axes: Sequence[Array]) -> Array:
    """The points (nx·ny·nz, 3) of three coordinate lists, x running fastest."""
    z, y, x = np.meshgrid(*(np.ravel(axis) for axis in reversed(axes)), indexing="ij")
    return np.stack([x.ravel(), y.ravel(), z.ravel()], axis=1)
