"""Side sets and node sets of an Exodus II file, as patches.

Source of the numbering of sides: Schoof and Yarberry, "EXODUS II: A Finite
Element Data Model", SAND92-2137, table of side numbers.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import cellblocks as cb
from fvcheck.formats.check import DAMAGED
from fvcheck.formats.exodus_mesh import ElementBlock, ids_of, names_of
from fvcheck.formats.exodus_store import Store
from fvcheck.mesh.piece import Array, Faces, NamedFaces

_QUAD_KINDS = (cb.QUAD, cb.QUAD8, cb.QUAD9)
_TRI = ((0, 1), (1, 2), (2, 0))
_TRI_MID = ((0, 1, 3), (1, 2, 4), (2, 0, 5))
_QUAD = ((0, 1), (1, 2), (2, 3), (3, 0))
_QUAD_MID = ((0, 1, 4), (1, 2, 5), (2, 3, 6), (3, 0, 7))
_HEX = ((0, 1, 5, 4), (1, 2, 6, 5), (2, 3, 7, 6), (0, 4, 7, 3), (0, 3, 2, 1), (4, 5, 6, 7))
_WEDGE = ((0, 1, 4, 3), (1, 2, 5, 4), (0, 3, 5, 2), (0, 2, 1), (3, 4, 5))
# Corner nodes of side 1, 2, … of each cell type; mid-nodes follow for edges.
_SIDES: dict[int, tuple[tuple[int, ...], ...]] = {
    cb.LINE: ((0, 1), (0, 1)),
    cb.LINE3: ((0, 1, 2), (0, 1, 2)),
    cb.TRIANGLE: _TRI,
    cb.TRIANGLE6: _TRI_MID,
    cb.TRIANGLE7: _TRI_MID,
    cb.QUAD: _QUAD,
    cb.QUAD8: _QUAD_MID,
    cb.QUAD9: _QUAD_MID,
    cb.HEXAHEDRON: _HEX,
    cb.HEXAHEDRON20: _HEX,
    cb.HEXAHEDRON27: _HEX,
    cb.WEDGE: _WEDGE,
    cb.WEDGE15: _WEDGE,
    cb.WEDGE18: _WEDGE,
}


def patches(
    store: Store, found: Sequence[ElementBlock], solid: Faces | None, path: Path
) -> dict[str, NamedFaces]:
    """Side sets, then node sets whose name no side set has."""
    out: dict[str, NamedFaces] = {}
    count = store.dim("num_side_sets") or 0
    ids = ids_of(store, "ss_prop1", count, path)
    sets = {}
    for i, name in enumerate(names_of(store, "ss_names", count, ids, "side set", path)):
        if f"elem_ss{i + 1}" in store:
            sets[name] = _side_set(store, i + 1, name, path)
        elif store.dim(f"num_side_ss{i + 1}"):
            raise FormatError(f"side set '{name}' has no sides", where=path, mend=DAMAGED)
    shifts = _shifts(store, found, list(sets.values()))
    for name, (elements, sides) in sets.items():
        out[name] = _faces(found, shifts, solid, elements, sides, f"{path}, side set {name}")
    count = store.dim("num_node_sets") or 0
    ids = ids_of(store, "ns_prop1", count, path)
    for i, name in enumerate(names_of(store, "ns_names", count, ids, "node set", path)):
        if f"node_ns{i + 1}" in store and name not in out:
            out[name] = cb.faces_of_vertices(
                store.numbers(f"node_ns{i + 1}").reshape(-1).astype(np.int64) - 1
            )
        elif store.dim(f"num_nod_ns{i + 1}") and name not in out:
            raise FormatError(f"node set '{name}' has no nodes", where=path, mend=DAMAGED)
    return out


def _side_set(store: Store, number: int, name: str, path: Path) -> tuple[Array, Array]:
    """Element numbers (from 0) and side numbers (from 1)."""
    elements, sides = store.numbers(f"elem_ss{number}"), store.numbers(f"side_ss{number}")
    fits = elements.ndim == 1 and elements.shape == sides.shape
    fits = fits and store.dim(f"num_side_ss{number}") in (None, len(sides))
    if not fits or elements.dtype.kind not in "iu" or sides.dtype.kind not in "iu":
        raise FormatError(f"side set '{name}' cannot be read", where=path, mend=DAMAGED)
    return elements.astype(np.int64) - 1, sides.astype(np.int64)


def _shifts(store: Store, found: Sequence[ElementBlock], sets: list[tuple[Array, Array]]) -> list[int]:
    """For each block, how far the numbers of its edges are shifted.

    In three dimensions the sides 1 and 2 of a shell or a triangle are its two
    faces and the edges follow from 3 on. Writers of plane meshes with a z
    coordinate often number edges from 1 all the same; then 1 or 2 occur.
    """
    if store.dim("num_dim") == 2:
        return [0] * len(found)
    ends = np.cumsum([len(block.cells) for block in found])
    used: list[set[int]] = [set() for _ in found]
    for elements, sides in sets:
        owner = np.searchsorted(ends, elements, side="right")
        for index in np.unique(owner[owner < len(found)]):
            used[index] |= set(np.unique(sides[owner == index]).tolist())
    shifts = []
    for block, seen in zip(found, used):
        by_face = block.cells.kind in _QUAD_KINDS and block.element.startswith("QUAD")
        if block.cells.dimension != 2 or block.cells.kind == cb.POLYGON:
            shifts.append(0)
        elif by_face:
            shifts.append(2 if any(side > 4 for side in seen) else 0)
        else:
            shifts.append(0 if seen & {1, 2} else 2)
    return shifts


def _faces(
    found: Sequence[ElementBlock],
    shifts: list[int],
    solid: Faces | None,
    elements: Array,
    sides: Array,
    spot: str,
) -> NamedFaces:
    ends = np.cumsum([len(block.cells) for block in found])
    if len(elements) and (elements.min() < 0 or elements.max() >= ends[-1]):
        raise FormatError("an element number lies outside the elements", where=spot, mend=DAMAGED)
    owner = np.searchsorted(ends, elements, side="right")
    tables: list[Array] = []
    for index in np.unique(owner):
        block, shift = found[index], shifts[index]
        mine = owner == index
        local = elements[mine] - (ends[index] - len(block.cells))
        tables.extend(_block_sides(block, local, sides[mine] - 1 - shift, solid, spot))
    return cb.faces_of_tables(tables)


def _block_sides(
    block: ElementBlock, local: Array, sides: Array, solid: Faces | None, spot: str
) -> list[Array]:
    """Tables (sides, nodes per side) of the given sides (from 0) of the given cells of a block."""
    cells = block.cells
    starts = cells.offsets[local]
    counts = np.diff(cells.offsets)[local]
    if cells.kind == cb.POLYGON:
        _within(sides, counts, spot)
        after = (sides + 1) % counts
        return [np.stack([cells.nodes[starts + sides], cells.nodes[starts + after]], axis=1)]
    if block.cell_faces is not None and solid is not None:
        numbers, offsets = block.cell_faces
        _within(sides, np.diff(offsets)[local], spot)
        chosen = numbers[offsets[local] + sides]
        return [solid.face_nodes[None, solid.face_offsets[j] : solid.face_offsets[j + 1]] for j in chosen]
    corners = _SIDES.get(cells.kind)
    if corners is None:
        raise FormatError(f"sides of elements '{block.element}' cannot be read", where=spot)
    _within(sides, np.full(len(sides), len(corners)), spot)
    return [
        cells.nodes[starts[sides == side][:, None] + np.array(own)]
        for side, own in enumerate(corners)
        if (sides == side).any()
    ]


def _within(sides: Array, counts: Array, spot: str) -> None:
    if ((sides < 0) | (sides >= counts)).any():
        raise FormatError("a side number does not fit its element", where=spot, mend=DAMAGED)
