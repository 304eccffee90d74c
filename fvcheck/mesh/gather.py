"""The pieces of an export put behind one another, checked, without ghosts."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from fvcheck.errors import MeshError
from fvcheck.mesh.celltypes import DIMENSION, Part
from fvcheck.mesh.piece import Piece

Array = np.ndarray

_RUN = 1 << 16


@dataclass(frozen=True, eq=False)
class Raw:
    """All points and cells of all pieces, numbered through.

    points (n, 3) float64; types, offsets, nodes as in `Piece`, with point
    numbers of the whole; ``dimension`` (m,) of each cell, -1 for ghosts;
    ``point_start``, ``cell_start`` (pieces+1,) first numbers of each piece;
    ``precision`` the relative spacing of the stored coordinates.
    """

    points: Array
    types: Array
    offsets: Array
    nodes: Array
    dimension: Array
    point_start: Array
    cell_start: Array
    precision: float

    def cells_of(self, dimension: int) -> Array:
        """Numbers of the cells of one dimension."""
        return np.flatnonzero(self.dimension == dimension)

    def piece_of_cell(self, cells: Array) -> Array:
        return np.searchsorted(self.cell_start, cells, side="right") - 1

    def piece_of_point(self, points: Array) -> Array:
        return np.searchsorted(self.point_start, points, side="right") - 1


@dataclass(frozen=True, eq=False)
class Polygons:
    """Polygons over points: offsets (m+1,), nodes (k,), ``source`` (m,) the raw cell of each."""

    offsets: Array
    nodes: Array
    source: Array


def gather(pieces: Sequence[Piece]) -> Raw:
    """Put pieces behind one another.

    Raises MeshError for coordinates that are not finite, node numbers out of
    range, lists that do not fit together, and unknown cell types.
    """
    if not pieces:
        raise MeshError("there are no 2D cells", mend="The file holds no mesh.")
    point_start = np.cumsum([0, *(len(piece.points) for piece in pieces)])
    cell_start = np.cumsum([0, *(len(piece.types) for piece in pieces)])
    for piece in pieces:
        _check(piece)
    types = _joined([np.asarray(piece.types, np.uint8) for piece in pieces])
    dimension = DIMENSION[types]
    ghost = _joined(
        [np.zeros(len(p.types), bool) if p.ghost is None else np.asarray(p.ghost, bool) for p in pieces]
    )
    unknown = np.flatnonzero((dimension < 0) & ~ghost)
    if len(unknown):
        raise MeshError(
            f"cell {unknown[0]} has type {types[unknown[0]]}, which is no cell of a plane mesh",
            mend="Export linear or quadratic cells.",
        )
    if ghost.any():
        dimension = np.where(ghost, np.int8(-1), dimension)
    node_start = np.cumsum([0, *(len(piece.nodes) for piece in pieces)])
    if len(pieces) == 1:  # taken as it is, without copies
        offsets, nodes = (np.asarray(part, np.int64) for part in (pieces[0].offsets, pieces[0].nodes))
    else:
        offsets, nodes = np.zeros(cell_start[-1] + 1, np.int64), np.empty(node_start[-1], np.int64)
        for k, piece in enumerate(pieces):
            cells_here = slice(cell_start[k] + 1, cell_start[k + 1] + 1)
            offsets[cells_here] = piece.offsets[1:]
            offsets[cells_here] += node_start[k]
            nodes_here = slice(node_start[k], node_start[k + 1])
            nodes[nodes_here] = piece.nodes
            nodes[nodes_here] += point_start[k]
    single = any(np.asarray(piece.points).dtype == np.float32 for piece in pieces)
    return Raw(
        points=_joined([np.asarray(piece.points, np.float64) for piece in pieces]),
        types=types,
        offsets=offsets,
        nodes=nodes,
        dimension=dimension,
        point_start=point_start,
        cell_start=cell_start,
        precision=float(np.finfo(np.float32 if single else np.float64).eps),
    )


def _joined(arrays: list[Array]) -> Array:
    return arrays[0] if len(arrays) == 1 else np.concatenate(arrays)


def _check(piece: Piece) -> None:
    where = piece.name or None
    types = np.asarray(piece.types)
    if types.dtype != np.uint8 and len(types) and (types.min() < 0 or types.max() > 255):
        raise MeshError("a cell type is no VTK cell type", where=where, mend="The file is damaged.")
    points, offsets, nodes = np.asarray(piece.points), np.asarray(piece.offsets), np.asarray(piece.nodes)
    if points.ndim != 2 or points.shape[1] != 3:
        raise MeshError(f"points have shape {points.shape} instead of (n, 3)", where=where)
    if not np.isfinite(points).all():
        bad = int(np.flatnonzero(~np.isfinite(points).all(axis=1))[0])
        raise MeshError(
            f"a coordinate of point {bad} is not a finite number",
            where=where,
            mend="Repair the export: every point needs finite coordinates.",
        )
    if len(offsets) != len(piece.types) + 1 or offsets[0] != 0 or offsets[-1] != len(nodes):
        raise MeshError("cell offsets do not fit the node list", where=where, mend="The file is damaged.")
    if (np.diff(offsets) < 0).any():
        raise MeshError("cell offsets decrease", where=where, mend="The file is damaged.")
    if len(nodes) and (nodes.min() < 0 or nodes.max() >= len(points)):
        bad = int(nodes.min()) if nodes.min() < 0 else int(nodes.max())
        raise MeshError(
            f"a cell uses point {bad}, but there are {len(points)} points",
            where=where,
            mend="The cell lists are damaged.",
        )
    if piece.ghost is not None and len(piece.ghost) != len(piece.types):
        raise MeshError("the ghost mask has another length than the cells", where=where)


def expand_cells(raw: Raw, cells: Array, template_of: Callable[[int, int], list[Part]]) -> Polygons:
    """Polygons or segments of ``cells`` by templates ``template_of(type, number of nodes)``."""
    if len(cells) == 0:
        return Polygons(np.zeros(1, np.int64), np.zeros(0, np.int64), cells)
    if len(cells) == len(raw.types) and _as_stored(raw, template_of):
        return Polygons(raw.offsets, raw.nodes, cells)
    from fvcheck.kernels.polygons import expand

    kinds = raw.types[cells].astype(np.int64)
    sizes = raw.offsets[cells + 1] - raw.offsets[cells]
    factor = int(sizes.max()) + 1 if len(sizes) else 1
    keys = kinds * factor + sizes
    if len(keys) and (keys == keys[0]).all():
        distinct, template = keys[:1], np.zeros(len(keys), np.int64)
    else:
        distinct = np.unique(keys)
        template = np.searchsorted(distinct, keys)
    part_start, part_sizes, part_nodes = [0], [0], []
    for key in distinct.tolist():
        parts = template_of(key // factor, key % factor)
        part_sizes += [len(part) for part in parts]
        part_nodes += [node for part in parts for node in part]
        part_start.append(part_start[-1] + len(parts))
    offsets, nodes, place = expand(
        cells,
        template,
        np.array(part_start, np.int64),
        np.cumsum(part_sizes, dtype=np.int64),
        np.array(part_nodes, np.int64),
        raw.offsets,
        raw.nodes,
    )
    return Polygons(offsets, nodes, cells[place])


def _as_stored(raw: Raw, template_of: Callable[[int, int], list[Part]]) -> bool:
    """Whether all cells are of one kind and size whose polygon has their nodes as they stand."""
    kind, size = int(raw.types[0]), int(raw.offsets[1] - raw.offsets[0])
    if not (raw.types == kind).all():
        return False
    for begin in range(0, len(raw.types), _RUN):  # run by run, so that no table of the mesh is made
        if (np.diff(raw.offsets[begin : begin + _RUN + 1]) != size).any():
            return False
    return template_of(kind, size) == [list(range(size))]
