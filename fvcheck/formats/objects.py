"""Meshes that are in memory already, as objects of meshio."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import cellblocks as cb
from fvcheck.formats.check import check_piece
from fvcheck.mesh.piece import Array, NamedFaces, Piece

_WHERE = "meshio mesh"
# meshio keeps the node order of VTK, but for the handedness of the linear wedge.
_KINDS = {
    "vertex": cb.VERTEX,
    "line": cb.LINE,
    "line3": cb.LINE3,
    "triangle": cb.TRIANGLE,
    "triangle6": cb.TRIANGLE6,
    "triangle7": cb.TRIANGLE7,
    "quad": cb.QUAD,
    "quad8": cb.QUAD8,
    "quad9": cb.QUAD9,
    "polygon": cb.POLYGON,
    "tetra": cb.TETRA,
    "pyramid": cb.PYRAMID,
    "wedge": cb.WEDGE,
    "wedge15": cb.WEDGE15,
    "wedge18": cb.WEDGE18,
    "hexahedron": cb.HEXAHEDRON,
    "hexahedron20": cb.HEXAHEDRON20,
    "hexahedron27": cb.HEXAHEDRON27,
}
# Integer cell arrays whose ids mark patches.
_TAGS = ("gmsh:physical", "cell_tags", "medit:ref")


def piece_from_meshio(mesh: Any) -> Piece:
    """The piece of a ``meshio.Mesh``.

    Point and cell data keep their names. Physical groups (``field_data`` with
    ``gmsh:physical``) and the families of MED files name the ids of their cell
    array; other ``cell_sets`` of boundary cells, and ``point_sets``, become
    patches. Raises `FormatError` for what cannot be read.
    """
    try:
        points, stored = np.asarray(mesh.points), list(mesh.cells)
        pairs = [(str(block.type), block.data) for block in stored]
    except (AttributeError, TypeError):
        raise FormatError(
            "this is no meshio mesh", where=_WHERE, mend="Pass what meshio.read returns."
        ) from None
    blocks = [_block(kind, data) for kind, data in pairs]
    types, offsets, nodes = cb.join(blocks)
    cell_data = {
        str(name): _joined(str(name), parts, blocks) for name, parts in (mesh.cell_data or {}).items()
    }
    tag_names = _tag_names(mesh, cell_data, blocks)
    piece = Piece(
        _points(points),
        types,
        offsets,
        nodes,
        point_data={str(name): _flat(str(name), values) for name, values in (mesh.point_data or {}).items()},
        cell_data=cell_data,
        patches=_patches(mesh, blocks, {name for names in tag_names.values() for name in names.values()}),
        tag_names=tag_names,
    )
    return check_piece(piece, _WHERE)


def _points(points: Array) -> Array:
    if points.ndim != 2 or points.shape[1] not in (2, 3) or points.dtype.kind not in "iuf":
        raise FormatError(f"the points have the shape {points.shape} instead of (n, 2 or 3)", where=_WHERE)
    dtype = points.dtype if points.dtype in (np.float32, np.float64) else np.dtype(np.float64)
    out = np.zeros((len(points), 3), dtype=dtype)
    out[:, : points.shape[1]] = points
    return out


def _block(kind: str, data: Any) -> cb.Block:
    # Polygons of n corners may come as "polygon" or, from some readers, as "polygonN".
    name = "polygon" if kind.startswith("polygon") else kind
    if name not in _KINDS:
        raise FormatError(
            f"cells of type '{kind}' cannot be read", where=_WHERE, mend="Export linear or quadratic cells."
        )
    try:
        rows = [np.asarray(row).reshape(-1) for row in data] if name == "polygon" else None
        table = np.concatenate(rows) if rows else np.asarray(data)
    except ValueError:
        raise FormatError(f"the {kind} cells are no table of node numbers", where=_WHERE) from None
    if rows is not None:
        table = table if rows else np.empty(0, dtype=np.int64)
        offsets = np.concatenate([[0], np.cumsum([len(row) for row in rows], dtype=np.int64)])
        return cb.Block(cb.POLYGON, _ids(table, kind, 1), offsets.astype(np.int64))
    return cb.Block.of_table(_KINDS[name], _ids(table, kind, 2))


def _ids(table: Array, kind: str, axes: int) -> Array:
    if table.ndim != axes or (table.dtype.kind not in "iu" and table.size):
        raise FormatError(f"the {kind} cells are no table of node numbers", where=_WHERE)
    return table.astype(np.int64)


def _flat(name: str, values: Any) -> Array:
    """(n,) or (n, c): tensors of rank two are laid flat."""
    try:
        array = np.asarray(values)
    except ValueError:
        raise FormatError(f"the array '{name}' is no table of numbers", where=_WHERE) from None
    if array.ndim == 3:
        return array.reshape(len(array), -1)
    return array[:, 0] if array.ndim == 2 and array.shape[1] == 1 else array


def _joined(name: str, parts: Any, blocks: Sequence[cb.Block]) -> Array:
    """One array over all cells; NaN on boundary blocks for which none is given."""
    arrays = [None if part is None else _flat(name, part) for part in parts]
    if len(arrays) != len(blocks):
        raise FormatError(
            f"the cell array '{name}' has {len(arrays)} parts for {len(blocks)} cell blocks", where=_WHERE
        )
    given = [array for array in arrays if array is not None and array.size]
    top = cb.top_dimension(blocks)
    out = []
    for block, array in zip(blocks, arrays):
        if array is None or (not array.size and len(block)):
            if block.dimension == top and len(block):
                raise FormatError(f"the cell array '{name}' is missing on a cell block", where=_WHERE)
            shape = given[0].shape[1:] if given else ()
            array = np.full((len(block), *shape), np.nan)
        if len(array) != len(block) or (given and array.shape[1:] != given[0].shape[1:] and len(block)):
            raise FormatError(
                f"the cell array '{name}' has {len(array)} values for {len(block)} cells",
                where=_WHERE,
                mend="Give one value per cell of each block.",
            )
        if len(block):
            out.append(array)
    return np.concatenate(out) if out else np.empty(0)


def _tag_names(
    mesh: Any, cell_data: dict[str, Array], blocks: Sequence[cb.Block]
) -> dict[str, dict[int, str]]:
    """Names of the ids that boundary cells carry, for each integer array that marks patches."""
    top = cb.top_dimension(blocks)
    edge = np.repeat([b.dimension == top - 1 for b in blocks], [len(b) for b in blocks])
    out = {}
    for name in _TAGS:
        if name not in cell_data or cell_data[name].dtype.kind not in "iu" or cell_data[name].ndim != 1:
            continue
        known = _known(mesh, name, top - 1)
        used = [int(tag) for tag in np.unique(cell_data[name][edge]) if tag]
        if used:
            out[name] = {tag: known.get(tag, f"group {tag}") for tag in used}
    return out


def _known(mesh: Any, name: str, dimension: int) -> dict[int, str]:
    """id -> name as the mesh states them."""
    if name == "cell_tags":
        return {
            int(tag): str(groups[0])
            for tag, groups in (getattr(mesh, "cell_tags", None) or {}).items()
            if groups
        }
    out = {}
    for label, entry in (mesh.field_data or {}).items():
        numbers = np.asarray(entry).reshape(-1)
        if len(numbers) == 2 and numbers.dtype.kind in "iu" and int(numbers[1]) == dimension:
            out[int(numbers[0])] = str(label)
    return out


def _patches(mesh: Any, blocks: Sequence[cb.Block], named: set[str]) -> dict[str, NamedFaces]:
    """Sets of boundary cells by the nodes of their cells, and point sets by their vertices."""
    top = cb.top_dimension(blocks)
    out: dict[str, NamedFaces] = {}
    for label, parts in (getattr(mesh, "cell_sets", None) or {}).items():
        # Sets with a "gmsh:" name hold meshio's own notes, not groups of the user.
        if label in named or str(label).startswith("gmsh:"):
            continue
        tables: list[Array] = []
        for block, part in zip(blocks, parts):
            if part is None or block.dimension != top - 1:
                continue
            for cell in _members(part, len(block), str(label)):
                tables.append(block.nodes[None, block.offsets[cell] : block.offsets[cell + 1]])
        if tables:
            out[str(label)] = cb.faces_of_tables(tables)
    for label, part in (getattr(mesh, "point_sets", None) or {}).items():
        if label not in named and str(label) not in out:
            out[str(label)] = cb.faces_of_vertices(_members(part, len(mesh.points), str(label)))
    return out


def _members(part: Any, count: int, label: str) -> Array:
    """Indices of a set, given as indices or as marks."""
    array = np.asarray(part).reshape(-1)
    if array.dtype == bool and len(array) == count:
        return np.flatnonzero(array)
    if not array.size:
        return np.empty(0, dtype=np.int64)
    # Some readers keep the indices as whole floats.
    whole = array.dtype.kind in "iuf" and (array == np.floor(array)).all()
    if not whole or array.min() < 0 or array.max() >= count:
        raise FormatError(f"the set '{label}' has members outside the mesh", where=_WHERE)
    return array.astype(np.int64)
