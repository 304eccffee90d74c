"""Points and element blocks of an Exodus II file.

Source of names and numberings: Schoof and Yarberry, "EXODUS II: A Finite
Element Data Model", SAND92-2137.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import cellblocks as cb
from fvcheck.formats.check import DAMAGED
from fvcheck.formats.exodus_store import Store
from fvcheck.mesh.piece import Array, Faces

_MOST_SETS = 100_000
# (beginnings of the element name) -> nodes -> VTK type. Longer names come first.
_TRIANGLES = {3: cb.TRIANGLE, 6: cb.TRIANGLE6, 7: cb.TRIANGLE7}
_QUADS = {4: cb.QUAD, 8: cb.QUAD8, 9: cb.QUAD9}
_LINES = {2: cb.LINE, 3: cb.LINE3}
_KINDS: tuple[tuple[tuple[str, ...], dict[int, int]], ...] = (
    (("TRISHELL", "TSHELL", "TRI"), _TRIANGLES),
    (("QUAD",), _QUADS),
    (("SHELL",), {2: cb.LINE} | _TRIANGLES | _QUADS),
    (("BAR", "BEAM", "TRUSS", "EDGE", "LINE", "ROD"), _LINES),
    (("HEX",), {8: cb.HEXAHEDRON, 20: cb.HEXAHEDRON20, 27: cb.HEXAHEDRON27}),
    (("WEDGE", "PENTA"), {6: cb.WEDGE, 15: cb.WEDGE15, 18: cb.WEDGE18}),
    (("TET",), {4: cb.TETRA}),
    (("PYR",), {5: cb.PYRAMID}),
    (("SPHERE", "CIRCLE", "POINT", "NODE", "PARTICLE"), {1: cb.VERTEX}),
)
# For each node in VTK's order its place in the file: Exodus numbers the vertical edges before the top ones.
_ORDER = {
    cb.HEXAHEDRON20: (*range(12), 16, 17, 18, 19, 12, 13, 14, 15),
    cb.HEXAHEDRON27: (*range(12), 16, 17, 18, 19, 12, 13, 14, 15, 23, 24, 25, 26, 21, 22, 20),
    cb.WEDGE15: (*range(9), 12, 13, 14, 9, 10, 11),
    cb.WEDGE18: (*range(9), 12, 13, 14, 9, 10, 11, 15, 16, 17),
}


@dataclass(frozen=True, eq=False)
class ElementBlock:
    """An element block: its place in the file (from 1), id, name and cells."""

    number: int
    id: int
    name: str
    element: str
    cells: cb.Block
    cell_faces: tuple[Array, Array] | None = None
    """Of polyhedra: face numbers (from 0) and the offsets of each cell in them."""


def points(store: Store, path: Path) -> Array:
    """(n, 3) coordinates; z = 0 in a plane file."""
    dims = store.dim("num_dim")
    count = store.dim("num_nodes")
    if dims not in (2, 3):
        raise FormatError(f"the mesh has {dims or 'no'} dimensions", where=path, mend="Export a 2D mesh.")
    if "coordx" in store:
        axes = [store.numbers(f"coord{axis}") for axis in "xyz"[:dims]]
    else:
        axes = list(store.numbers("coord"))
    if len(axes) != dims or any(axis.shape != (count,) or axis.dtype.kind != "f" for axis in axes):
        raise FormatError(f"the coordinates do not fit the {count} nodes", where=path, mend=DAMAGED)
    out = np.zeros((len(axes[0]), 3), dtype=np.result_type(*axes, np.float32))
    for column, axis in enumerate(axes):
        out[:, column] = axis
    if (np.abs(out) > 9.9e36).any():
        raise FormatError("some coordinates were never written", where=path, mend=DAMAGED)
    return out


def blocks(store: Store, path: Path) -> list[ElementBlock]:
    """All element blocks, empty ones included, in the order of the file."""
    count = store.dim("num_el_blk") or 0
    ids = ids_of(store, "eb_prop1", count, path)
    names = names_of(store, "eb_names", count, ids, "block", path)
    out = [_block(store, i + 1, ids[i], names[i], path) for i in range(count)]
    total, declared = sum(len(block.cells) for block in out), store.dim("num_elem")
    if total == 0 or (declared is not None and declared != total):
        raise FormatError(
            f"{declared} elements are declared, the blocks hold {total}", where=path, mend=DAMAGED
        )
    return out


def _block(store: Store, number: int, ident: int, name: str, path: Path) -> ElementBlock:
    spot = f"{path}, {name}"
    size = store.dim(f"num_el_in_blk{number}")
    connect = f"connect{number}" if f"connect{number}" in store else f"facconn{number}"
    if connect not in store:
        # The status is 0 for a block that is empty on purpose.
        status = store.numbers("eb_status") if "eb_status" in store else np.ones(0)
        if size or (size is None and (len(status) < number or status[number - 1] != 0)):
            raise FormatError("the elements of a block have no nodes", where=spot, mend=DAMAGED)
        none = cb.Block(cb.TRIANGLE, np.empty(0, dtype=np.int64), np.zeros(1, dtype=np.int64))
        return ElementBlock(number, ident, name, "", none)
    element = store.attribute(connect, "elem_type").upper()
    values = store.numbers(connect)
    if values.dtype.kind not in "iu":
        raise FormatError("the node numbers are no whole numbers", where=spot, mend=DAMAGED)
    table = values.astype(np.int64) - 1
    if element.startswith(("NSIDED", "NFACED")):
        offsets = _counts(store, f"ebepecnt{number}", len(table.reshape(-1)), size, spot)
        if element.startswith("NSIDED"):
            return ElementBlock(
                number, ident, name, element, cb.Block(cb.POLYGON, table.reshape(-1), offsets)
            )
        return _polyhedra(store, number, ident, name, table.reshape(-1), offsets, path)
    if table.ndim != 2 or (size is not None and len(table) != size):
        raise FormatError("the node lists do not fit the elements of the block", where=spot, mend=DAMAGED)
    kind = _kind(element, table.shape[1], spot)
    if kind in _ORDER:
        table = np.ascontiguousarray(table[:, list(_ORDER[kind])])
    return ElementBlock(number, ident, name, element, cb.Block.of_table(kind, table))


def _kind(element: str, nodes: int, spot: str) -> int:
    for beginnings, kinds in _KINDS:
        if element.startswith(beginnings):
            if nodes in kinds:
                return kinds[nodes]
            break
    raise FormatError(
        f"elements '{element}' with {nodes} nodes cannot be read",
        where=spot,
        mend="Export triangles, quadrilaterals, polygons, or hexahedra and wedges one cell thick.",
    )


def _counts(store: Store, name: str, total: int, size: int | None, spot: str) -> Array:
    """Offsets from the numbers of entries per element."""
    counts = store.numbers(name)
    if counts.ndim != 1 or counts.dtype.kind not in "iu" or (counts < 0).any():
        raise FormatError(f"'{name}' cannot be read", where=spot, mend=DAMAGED)
    if int(counts.sum(dtype=np.int64)) != total or (size is not None and len(counts) != size):
        raise FormatError("the node lists do not fit the elements of the block", where=spot, mend=DAMAGED)
    return np.concatenate([[0], np.cumsum(counts, dtype=np.int64)])


def _polyhedra(
    store: Store, number: int, ident: int, name: str, cell_faces: Array, offsets: Array, path: Path
) -> ElementBlock:
    """Cells by their faces; the nodes of a cell are those of its faces, each once."""
    face_nodes, face_offsets = _face_blocks(store, path)
    if len(cell_faces) and (cell_faces.min() < 0 or cell_faces.max() >= len(face_offsets) - 1):
        raise FormatError("a face number lies outside the faces", where=f"{path}, {name}", mend=DAMAGED)
    cells = len(offsets) - 1
    owner = np.repeat(np.arange(cells), np.diff(offsets))
    sizes = np.diff(face_offsets)[cell_faces]
    starts = np.repeat(face_offsets[cell_faces], sizes)
    within = np.arange(int(sizes.sum())) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    pairs = np.unique(np.stack([np.repeat(owner, sizes), face_nodes[starts + within]], axis=1), axis=0)
    ends = np.searchsorted(pairs[:, 0], np.arange(cells + 1)).astype(np.int64)
    block = cb.Block(cb.POLYHEDRON, np.ascontiguousarray(pairs[:, 1]), ends)
    return ElementBlock(number, ident, name, "NFACED", block, (cell_faces, offsets))


def _face_blocks(store: Store, path: Path) -> tuple[Array, Array]:
    """Nodes (from 0) and offsets of the faces of all face blocks."""
    nodes, offsets = [], [np.zeros(1, dtype=np.int64)]
    for number in range(1, (store.dim("num_fa_blk") or 0) + 1):
        flat = store.numbers(f"fbconn{number}").reshape(-1).astype(np.int64) - 1
        own = _counts(store, f"fbepecnt{number}", len(flat), None, f"{path}, face block {number}")
        nodes.append(flat)
        offsets.append(own[1:] + offsets[-1][-1])
    if not nodes:
        raise FormatError("there are polyhedra without faces", where=path, mend=DAMAGED)
    return np.concatenate(nodes), np.concatenate(offsets)


def faces(store: Store, found: Sequence[ElementBlock], path: Path) -> Faces | None:
    """Faces of the polyhedra, over all cells of the piece; None without polyhedra."""
    if all(block.cell_faces is None for block in found):
        return None
    nodes, offsets = _face_blocks(store, path)
    lists, sizes = [], []
    for block in found:
        own = block.cell_faces or (
            np.empty(0, dtype=np.int64),
            np.zeros(len(block.cells) + 1, dtype=np.int64),
        )
        lists.append(own[0])
        sizes.append(np.diff(own[1]))
    ends = np.concatenate([[0], np.cumsum(np.concatenate(sizes), dtype=np.int64)])
    return Faces(offsets, nodes, ends, np.concatenate(lists))


def ids_of(store: Store, name: str, count: int, path: Path) -> list[int]:
    """The stored ids of ``count`` blocks or sets; 1, 2, … where there are none."""
    if count > _MOST_SETS:
        raise FormatError(f"{count} blocks or sets are declared ('{name}')", where=path, mend=DAMAGED)
    if name not in store:
        return list(range(1, count + 1))
    ids = store.numbers(name).reshape(-1)
    if len(ids) != count:
        raise FormatError(f"'{name}' has {len(ids)} ids for {count}", where=path, mend=DAMAGED)
    return [int(one) for one in ids]


def names_of(store: Store, name: str, count: int, ids: list[int], what: str, path: Path) -> list[str]:
    """The stored names, distinct; where there is none, what it is with its id."""
    words = store.words(name) if name in store else []
    if not all(word.isprintable() for word in words):
        raise FormatError(f"the names '{name}' are damaged", where=path, mend=DAMAGED)
    out: dict[str, None] = {}
    for i in range(count):
        word = words[i] if i < len(words) and words[i] else f"{what} {ids[i]}"
        out[word if word not in out else f"{word} ({what} {i + 1})"] = None
    return list(out)
