"""Element sections of an unstructured CGNS zone.

Types, numbering and node orders: "CGNS Standard Interface Data Structures",
https://cgns.github.io, conventions for unstructured grid element numbering.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.formats.cgns_tree import Node
from fvcheck.mesh.piece import Array, Faces

MIXED, NGON, NFACE = 20, 22, 23
_SWAP_15 = (*range(9), 12, 13, 14, 9, 10, 11)
_SWAP_20 = (*range(12), 16, 17, 18, 19, 12, 13, 14, 15)
# CGNS ElementType -> (VTK type, nodes in CGNS, dimension, CGNS place of each VTK node or None if the same)
_TYPES: dict[int, tuple[int, int, int, tuple[int, ...] | None]] = {
    2: (1, 1, 0, None),
    3: (3, 2, 1, None),
    4: (21, 3, 1, None),
    5: (5, 3, 2, None),
    6: (22, 6, 2, None),
    7: (9, 4, 2, None),
    8: (23, 8, 2, None),
    9: (28, 9, 2, None),
    10: (10, 4, 3, None),
    11: (24, 10, 3, None),
    12: (14, 5, 3, None),
    13: (27, 14, 3, tuple(range(13))),
    14: (13, 6, 3, None),
    15: (26, 15, 3, _SWAP_15),
    16: (32, 18, 3, (*_SWAP_15, 15, 16, 17)),
    17: (12, 8, 3, None),
    18: (25, 20, 3, _SWAP_20),
    19: (29, 27, 3, (*_SWAP_20, 24, 22, 21, 23, 20, 25, 26)),
    21: (27, 13, 3, None),
}


@dataclass(frozen=True, eq=False)
class Section:
    """Elements ``first`` … ``last`` of a zone (numbers from 1) in VTK types and node orders.

    ``dimension`` (m,) of each element. For NFACE_n sections ``nodes`` holds signed
    face numbers; `solid` turns them into cells.
    """

    name: str
    first: int
    last: int
    code: int
    types: Array
    offsets: Array
    nodes: Array
    dimension: Array
    parents: Array | None = None


def read_sections(zone: Node) -> list[Section]:
    """All sections of a zone by their element numbers. Raises `FormatError` when they overlap."""
    sections = sorted((_section(node) for node in zone.children("Elements_t")), key=lambda s: s.first)
    for before, after in pairwise(sections):
        if after.first <= before.last:
            raise FormatError(
                f"the sections {before.name} and {after.name} share element numbers",
                where=zone.where,
                mend=safe.DAMAGED,
            )
    return sections


def _section(node: Node) -> Section:
    code = int(node.integers(2)[0])
    ranges = node.child("ElementRange") or node.first("IndexRange_t")
    data = node.child("ElementConnectivity")
    if ranges is None or data is None:
        raise FormatError("the section has no range or no connectivity", where=node.where, mend=safe.DAMAGED)
    first, last = (int(n) for n in ranges.integers(2))
    count = last - first + 1
    values = data.integers()
    if first < 1 or count < 1 or count > len(values):
        raise FormatError(
            f"the elements {first} to {last} are declared for {len(values)} node numbers",
            where=node.where,
            mend=safe.DAMAGED,
        )
    start = node.child("ElementStartOffset")
    offsets = None if start is None else _start_offsets(start, count, len(values))
    parents = None
    if code in (NGON, NFACE):
        sizes, nodes = _poly(values, count, offsets, node.where)
        kind, dimension = (7, 2) if code == NGON else (42, 3)
        types = np.full(count, kind, dtype=np.uint8)
        dims = np.full(count, dimension, dtype=np.int8)
        held = node.child("ParentElements")
        if code == NGON and held is not None:
            parents = held.integers(2 * count).reshape(2, count)
    elif code == MIXED:
        types, sizes, nodes, dims = _mixed(values, count, offsets, node.where)
    elif code in _TYPES:
        kind, size, dimension, order = _TYPES[code]
        if len(values) != count * size:
            raise FormatError(
                f"{count} elements of {size} nodes are declared, {len(values)} node numbers are there",
                where=node.where,
                mend=safe.DAMAGED,
            )
        block = values.reshape(count, size)
        nodes = (block if order is None else block[:, list(order)]).reshape(-1)
        sizes = np.full(count, size if order is None else len(order), dtype=np.int64)
        types, dims = np.full(count, kind, dtype=np.uint8), np.full(count, dimension, dtype=np.int8)
    else:
        raise _unknown(code, node.where)
    return Section(
        node.name,
        first,
        last,
        code,
        types,
        np.concatenate([[0], np.cumsum(sizes)]),
        nodes if code == NFACE else nodes - 1,
        dims,
        parents,
    )


def _unknown(code: int, where: str) -> FormatError:
    return FormatError(
        f"the element type {code} cannot be read",
        where=where,
        mend="Export linear or quadratic elements, polygons or polyhedra.",
    )


def _start_offsets(node: Node, count: int, total: int) -> Array:
    offsets = node.integers(count + 1)
    if offsets[0] != 0 or offsets[-1] != total or (np.diff(offsets) < 1).any():
        raise FormatError(f"the offsets do not run from 0 to {total}", where=node.where, mend=safe.DAMAGED)
    return offsets


def _poly(values: Array, count: int, offsets: Array | None, where: str) -> tuple[Array, Array]:
    """(sizes, members) of polygons or polyhedra, with offsets or, before version 4, with leading counts."""
    if offsets is not None:
        return np.diff(offsets), values
    sizes = np.empty(count, dtype=np.int64)
    keep = np.ones(len(values), dtype=bool)
    place = 0
    flat = values.tolist()
    for element in range(count):
        size = flat[place] if place < len(flat) else 0
        if size < 1 or size > len(flat) - place - 1:
            raise FormatError(
                f"element {element} of the section has {size} members", where=where, mend=safe.DAMAGED
            )
        sizes[element], keep[place] = size, False
        place += size + 1
    if place != len(flat):
        raise FormatError("the section holds more than its range declares", where=where, mend=safe.DAMAGED)
    return sizes, values[keep]


def _mixed(values: Array, count: int, offsets: Array | None, where: str) -> tuple[Array, Array, Array, Array]:
    """(types, sizes, nodes, dimensions) of a MIXED section: each element starts with its type."""
    if offsets is None:
        places, flat, place = [], values.tolist(), 0
        for _ in range(count):
            if place >= len(flat):
                raise FormatError("the section ends too early", where=where, mend=safe.DAMAGED)
            if flat[place] not in _TYPES:
                raise _unknown(flat[place], where)
            places.append(place)
            place += 1 + _TYPES[flat[place]][1]
        offsets = np.array([*places, place], dtype=np.int64)
        if place != len(flat):
            raise FormatError(
                "the section holds more or less than its range declares", where=where, mend=safe.DAMAGED
            )
    codes = values[offsets[:-1]]
    types = np.zeros(count, dtype=np.uint8)
    sizes = np.zeros(count, dtype=np.int64)
    dims = np.zeros(count, dtype=np.int8)
    for code in np.unique(codes):
        if int(code) not in _TYPES:
            raise _unknown(int(code), where)
        kind, size, dimension, order = _TYPES[int(code)]
        mine = codes == code
        types[mine], sizes[mine], dims[mine] = kind, size if order is None else len(order), dimension
        if (np.diff(offsets)[mine] != size + 1).any():
            raise FormatError(f"the offsets do not fit element type {code}", where=where, mend=safe.DAMAGED)
    ends = np.concatenate([[0], np.cumsum(sizes)])
    nodes = np.empty(ends[-1], dtype=np.int64)
    for code in np.unique(codes):
        _, size, _, order = _TYPES[int(code)]
        mine = np.flatnonzero(codes == code)
        inner = np.arange(size) if order is None else np.array(order)
        nodes[ends[mine][:, None] + np.arange(len(inner))] = values[offsets[mine][:, None] + 1 + inner]
    return types, sizes, nodes, dims


def solid_cells(sections: list[Section], cells: int, where: str) -> tuple[Array, Array, Array, Faces] | None:
    """Polyhedra of the zone as (first element number, offsets, nodes, faces); None if there are none.

    The cells come from the NFACE_n section, or from the parents of the NGON_n
    faces when it is left out.
    """
    loops = [section for section in sections if section.code == NGON]
    solids = [section for section in sections if section.code == NFACE]
    if not loops or (not solids and any(loop.parents is None for loop in loops)):
        if solids:
            raise FormatError("there are NFACE_n cells without NGON_n faces", where=where, mend=safe.DAMAGED)
        return None
    if len(solids) > 1:
        raise FormatError("there are several NFACE_n sections", where=where, mend="Export one of them.")
    number = np.concatenate([np.arange(loop.first, loop.last + 1) for loop in loops])
    sizes = np.concatenate([np.diff(loop.offsets) for loop in loops])
    face_offsets = np.concatenate([[0], np.cumsum(sizes)])
    face_nodes = np.concatenate([loop.nodes for loop in loops])
    if solids:
        held = np.abs(solids[0].nodes)
        cell_offsets, first = solids[0].offsets, solids[0].first
    else:
        held, cell_offsets, first = _from_parents(loops, number, cells, where)
    place = np.searchsorted(number, held)
    if (place >= len(number)).any() or (number[np.minimum(place, len(number) - 1)] != held).any():
        raise FormatError("a cell names a face that does not exist", where=where, mend=safe.DAMAGED)
    faces = Faces(face_offsets, face_nodes, cell_offsets, place)
    offsets, nodes = _cell_nodes(faces)
    return np.array(first), offsets, nodes, faces


def _from_parents(loops: list[Section], number: Array, cells: int, where: str) -> tuple[Array, Array, int]:
    both = np.concatenate([loop.parents for loop in loops if loop.parents is not None], axis=1)
    face = np.concatenate([number, number])
    owner = both.reshape(-1)
    face, owner = face[owner != 0], owner[owner != 0]
    if len(owner) == 0 or owner.min() < 1:
        raise FormatError("the faces have no parents", where=where, mend=safe.DAMAGED)
    first = int(owner.min())
    if int(owner.max()) - first + 1 != cells:
        raise FormatError(
            f"the parents of the faces name other cells than the {cells} of the zone",
            where=where,
            mend=safe.DAMAGED,
        )
    order = np.argsort(owner, kind="stable")
    counts = np.bincount(owner - first, minlength=cells)
    return face[order], np.concatenate([[0], np.cumsum(counts)]), first


def _cell_nodes(faces: Faces) -> tuple[Array, Array]:
    """Nodes of each polyhedron, every one once, in rising order."""
    sizes = np.diff(faces.face_offsets)[faces.cell_faces]
    cell = np.repeat(np.repeat(np.arange(len(faces.cell_offsets) - 1), np.diff(faces.cell_offsets)), sizes)
    starts = faces.face_offsets[faces.cell_faces]
    ends = np.cumsum(sizes)
    nodes = faces.face_nodes[
        np.arange(ends[-1] if len(ends) else 0) + np.repeat(starts - ends + sizes, sizes)
    ]
    order = np.lexsort((nodes, cell))
    cell, nodes = cell[order], nodes[order]
    new = np.ones(len(cell), dtype=bool)
    new[1:] = (np.diff(cell) != 0) | (np.diff(nodes) != 0)
    counts = np.bincount(cell[new], minlength=len(faces.cell_offsets) - 1)
    return np.concatenate([[0], np.cumsum(counts)]), nodes[new]
