"""Nodes, elements and groups of an MSH file, versions 2.x, 4.0 and 4.1."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import cellblocks as cb
from fvcheck.formats.check import DAMAGED
from fvcheck.formats.msh_tokens import Numbers, integers, parse, token_starts, whole
from fvcheck.mesh.piece import Array

_MOST_TAGS = 10_000

# Element type -> (VTK type, nodes, for each node in VTK's order its place in Gmsh's), from the
# chapters on node ordering of the Gmsh reference manual and of the VTK file formats.
_HEX20 = (*range(8), 8, 11, 13, 9, 16, 18, 19, 17, 10, 12, 14, 15)
_PRISM15 = (*range(6), 6, 9, 7, 12, 14, 13, 8, 10, 11)
ELEMENTS: dict[int, tuple[int, int, tuple[int, ...] | None]] = {
    1: (cb.LINE, 2, None),
    2: (cb.TRIANGLE, 3, None),
    3: (cb.QUAD, 4, None),
    4: (cb.TETRA, 4, None),
    5: (cb.HEXAHEDRON, 8, None),
    6: (cb.WEDGE, 6, None),
    7: (cb.PYRAMID, 5, None),
    8: (cb.LINE3, 3, None),
    9: (cb.TRIANGLE6, 6, None),
    10: (cb.QUAD9, 9, None),
    12: (cb.HEXAHEDRON27, 27, (*_HEX20, 22, 23, 21, 24, 20, 25, 26)),
    13: (cb.WEDGE18, 18, (*_PRISM15, 15, 17, 16)),
    15: (cb.VERTEX, 1, None),
    16: (cb.QUAD8, 8, None),
    17: (cb.HEXAHEDRON20, 20, _HEX20),
    18: (cb.WEDGE15, 15, _PRISM15),
}


@dataclass(frozen=True, eq=False)
class Elements:
    """Elements of one type: ids (m,), physical and geometrical tags (m,), node ids (m, k) in VTK's order."""

    kind: int
    ids: Array
    physical: Array
    geometrical: Array
    nodes: Array


class Lookup:
    """Places of ids in a list of distinct, positive ids."""

    def __init__(self, ids: Array, what: str, where: object) -> None:
        self._what, self._where = what, where
        self._order = np.argsort(ids, kind="stable")
        self._sorted = ids[self._order]
        if len(ids) and self._sorted[0] < 1:
            raise FormatError(f"{what} number {self._sorted[0]} is not positive", where=where, mend=DAMAGED)
        twice = np.flatnonzero(np.diff(self._sorted) == 0)
        if len(twice):
            raise FormatError(
                f"{what} number {self._sorted[twice[0]]} stands twice", where=where, mend=DAMAGED
            )

    def __call__(self, wanted: Array, user: str) -> Array:
        """Places of the wanted ids; raises `FormatError`, naming the user, for an id that is not there."""
        spot = np.searchsorted(self._sorted, wanted)
        spot[spot == len(self._sorted)] = 0
        lost = self._sorted[spot] != wanted if len(self._sorted) else np.ones(wanted.shape, dtype=bool)
        if lost.any():
            number = wanted[lost].flat[0]
            raise FormatError(
                f"{user} refers to {self._what} {number}, which the file does not hold",
                where=self._where,
                mend=DAMAGED,
            )
        return self._order[spot]


def physical_names(text: bytes, where: object) -> dict[tuple[int, int], str]:
    """(dimension, tag) -> name, from $PhysicalNames."""
    lines = [line.strip() for line in text.decode("utf-8", "replace").splitlines() if line.strip()]
    names = {}
    try:
        for line in lines[1:]:
            dim, tag, name = line.split(None, 2)
            names[int(dim), int(tag)] = name.strip().strip('"').strip()
        whole_list = int(lines[0]) == len(lines) - 1 and all(name.isprintable() for name in names.values())
    except (ValueError, IndexError):
        whole_list = False
    if not whole_list:
        raise FormatError("the physical names cannot be read", where=where, mend=DAMAGED)
    return names


def entity_groups(source: Numbers, version: str, partitioned: bool) -> dict[tuple[int, int], int]:
    """(dimension, entity) -> first physical tag, from $Entities or $PartitionedEntities."""
    if partitioned:
        _, ghosts = integers(source, "s", 2)
        source.rows(ghosts, ("i", 2))
    counts = integers(source, "s", 4)
    groups = {}
    for dim, count in enumerate(counts):
        for _ in range(count):
            (tag,) = integers(source, "i", 1)
            if partitioned:
                source.rows(1, ("i", 2))
                source.rows(1, ("i", integers(source, "s", 1)[0]))
            source.rows(1, ("d", 3 if dim == 0 and version == "4.1" else 6))
            physical = integers(source, "i", integers(source, "s", 1)[0])
            if physical:
                groups[dim, tag] = abs(physical[0])
            if dim:
                source.rows(1, ("i", integers(source, "s", 1)[0]))
    source.end()
    return groups


def nodes(source: Numbers, version: str, where: object) -> tuple[Array, Array]:
    """Node ids (n,) and coordinates (n, 3), from $Nodes of version 4."""
    header = integers(source, "s", 4 if version == "4.1" else 2)
    ids, points = [], []
    for _ in range(header[0]):
        # 4.1: dimension, tag, parametric; 4.0: tag, dimension, parametric
        head = integers(source, "i", 3)
        dim = head[0] if version == "4.1" else head[1]
        if dim not in (0, 1, 2, 3):
            raise FormatError(f"a node block has the dimension {dim}", where=where, mend=DAMAGED)
        (count,) = integers(source, "s", 1)
        extra = dim if head[2] else 0
        if version == "4.1":
            (own,) = source.rows(count, ("s", 1))
            (xyz,) = source.rows(count, ("d", 3 + extra))
        else:
            own, xyz = source.rows(count, ("i", 1), ("d", 3 + extra))
        ids.append(own[:, 0])
        points.append(xyz[:, :3])
    source.end()
    return _counted(ids, header[1], "nodes", where), np.concatenate(points) if points else np.empty((0, 3))


def nodes_2(source: Numbers, declared: int) -> tuple[Array, Array]:
    """Node ids (n,) and coordinates (n, 3), from $Nodes of version 2."""
    ids, points = source.rows(declared, ("i", 1), ("d", 3))
    source.end()
    return ids[:, 0], points


def elements(
    source: Numbers, version: str, groups: Mapping[tuple[int, int], int], where: object
) -> list[Elements]:
    """Elements by block, from $Elements of version 4."""
    header = integers(source, "s", 4 if version == "4.1" else 2)
    out = []
    for _ in range(header[0]):
        # 4.1: dimension, tag, type; 4.0: tag, dimension, type
        head = integers(source, "i", 3)
        dim, tag = head[:2] if version == "4.1" else (head[1], head[0])
        (count,) = integers(source, "s", 1)
        width = _known(head[2], where)[1]
        if version == "4.1":
            (table,) = source.rows(count, ("s", 1 + width))
        else:
            (table,) = source.rows(count, ("i", 1 + width))
        physical = np.full(count, groups.get((dim, tag), 0), dtype=np.int64)
        out.append(
            _made(head[2], table[:, 0], physical, np.full(count, tag, dtype=np.int64), table[:, 1:], where)
        )
    source.end()
    _counted([one.ids for one in out], header[1], "elements", where)
    return out


def elements_2_binary(source: Numbers, declared: int, where: object) -> list[Elements]:
    """Elements by block, from a binary $Elements of version 2."""
    out: list[Elements] = []
    read = 0
    while read < declared:
        kind, count, tags = integers(source, "i", 3)
        if count < 1 or not 0 <= tags <= _MOST_TAGS:
            raise FormatError("an element block has an impossible header", where=where, mend=DAMAGED)
        (table,) = source.rows(count, ("i", 1 + tags + _known(kind, where)[1]))
        out.append(_split_2(kind, table[:, 0], table[:, 1:], tags, where))
        read += count
    source.end()
    _counted([one.ids for one in out], declared, "elements", where)
    return out


def elements_2_text(text: bytes, declared: int, where: object) -> list[Elements]:
    """Elements by type and number of tags, from a text $Elements of version 2: one element per line."""
    flat = whole(parse(text, where), where)
    ends = np.flatnonzero(np.frombuffer(text, dtype=np.uint8) == 10)
    starts = np.unique(np.concatenate([[0], np.searchsorted(token_starts(text), ends)]))
    starts = starts[starts < len(flat)]
    lengths = np.diff(np.append(starts, len(flat)))
    _counted([starts], declared, "elements", where)
    if not len(starts):
        return []
    if lengths.min() < 4:
        raise FormatError("an element line is too short", where=where, mend=DAMAGED)
    kinds, tags = flat[starts + 1], flat[starts + 2]
    out = []
    for kind in np.unique(kinds).tolist():
        _known(kind, where)
    if tags.min() < 0 or tags.max() > _MOST_TAGS:
        raise FormatError("an element has an impossible number of tags", where=where, mend=DAMAGED)
    # One number for type and number of tags: many times faster than unique rows of two.
    for both in np.unique(kinds * (_MOST_TAGS + 1) + tags).tolist():
        kind, count = divmod(both, _MOST_TAGS + 1)
        rows = np.flatnonzero((kinds == kind) & (tags == count))
        width = 3 + count + _known(kind, where)[1]
        if (lengths[rows] != width).any():
            raise FormatError(
                f"an element line of type {kind} has the wrong length", where=where, mend=DAMAGED
            )
        table = flat[starts[rows][:, None] + np.arange(width)]
        out.append(_split_2(kind, table[:, 0], table[:, 3:], count, where))
    return out


def _split_2(kind: int, ids: Array, rest: Array, tags: int, where: object) -> Elements:
    none = np.zeros(len(ids), dtype=np.int64)
    physical = np.abs(rest[:, 0]) if tags > 0 else none
    return _made(kind, ids, physical, rest[:, 1] if tags > 1 else none, rest[:, tags:], where)


def _made(
    kind: int, ids: Array, physical: Array, geometrical: Array, table: Array, where: object
) -> Elements:
    vtk, _, order = _known(kind, where)
    return Elements(vtk, ids, physical, geometrical, table if order is None else table[:, list(order)])


def _known(kind: int, where: object) -> tuple[int, int, tuple[int, ...] | None]:
    if kind not in ELEMENTS:
        raise FormatError(
            f"element type {kind} cannot be read", where=where, mend="Save the mesh at order 1 or 2."
        )
    return ELEMENTS[kind]


def _counted(parts: list[Array], declared: int, what: str, where: object) -> Array:
    count = sum(len(part) for part in parts)
    if count != declared:
        raise FormatError(f"{declared} {what} are declared, {count} are there", where=where, mend=DAMAGED)
    return np.concatenate(parts) if parts else np.empty(0, dtype=np.int64)
