"""Reader of Gmsh MSH files, versions 2.x, 4.0 and 4.1, text and binary.

The file is parsed here rather than by meshio, which raises on $ElementData that
stand beside boundary lines or on one of several cell types, ignores the ids of
the data (shuffled data would be silently wrong), keeps the last of several
steps only, and needs a second pass over the sections for all of this anyway.

Every step of $NodeData and $ElementData is one step of the export. Physical
groups of boundary cells become the names of the cell array ``gmsh:physical``;
in a mesh without groups the geometrical tags serve.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from pathlib import Path

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import cellblocks as cb
from fvcheck.formats import msh_mesh
from fvcheck.formats.check import DAMAGED, check_piece
from fvcheck.formats.msh_mesh import Elements, Lookup
from fvcheck.formats.msh_sections import Contents, Data, contents
from fvcheck.formats.msh_tokens import BinaryNumbers, Numbers, TextNumbers
from fvcheck.formats.timeline import Timeline, timeline
from fvcheck.hints import Hint
from fvcheck.mesh.piece import Array, Export, Piece

_PHYSICAL, _GEOMETRICAL = "gmsh:physical", "gmsh:geometrical"

Stored = dict[str, dict[tuple[int, ...], list[Data]]]


def sniff(head: bytes, path: Path) -> bool:
    """Whether a file begins like an MSH file; old versions too, for a clear refusal."""
    return head.lstrip().startswith((b"$MeshFormat", b"$Comments", b"$NOD", b"$PhysicalNames"))


def open_export(path: Path) -> Export:
    """Open an MSH file; the mesh is read at the first ``load``, data at each.

    Raises `FormatError` for what is no MSH file, is cut short, or has steps that
    do not fit each other.
    """
    toc = contents(path)
    for name in ("Nodes", "Elements"):
        if toc.find(name) is None:
            raise FormatError(f"there is no ${name}", where=path, mend="Save the mesh with its elements.")
    stored: Stored = {}
    for data in toc.data:
        label = f"{'node' if data.of_nodes else 'element'} data {data.name}"
        stored.setdefault(label, {}).setdefault((data.step,), []).append(data)
    clocks = {name: {key: _time(parts, path) for key, parts in own.items()} for name, own in stored.items()}
    line = timeline(clocks, path)
    skipped = tuple(
        Hint("array-not-read", f"'{name}' holds values at the corners of elements, which are not read")
        for name in sorted(set(toc.per_corner))
    )

    @lru_cache(maxsize=1)
    def mesh() -> _Mesh:
        return _read_mesh(path, toc)

    def load(step: int) -> Sequence[Piece]:
        return [_with_data(mesh(), stored, line, step, path, toc)]

    binary = "binary" if toc.order else "ascii"
    version = "2.2" if toc.version == "2" else toc.version
    return Export(path, f"Gmsh MSH {version}, {binary}", load, line.times, line.hints + skipped)


@dataclass(frozen=True, eq=False)
class _Mesh:
    piece: Piece
    node_at: Lookup
    cell_at: Lookup
    needed_nodes: Array
    needed_cells: Array


def _time(parts: list[Data], path: Path) -> float:
    if len({part.time for part in parts}) > 1:
        raise FormatError(f"array '{parts[0].name}' has two times at step {parts[0].step}", where=path)
    return parts[0].time


def _bytes(path: Path, start: int, stop: int) -> bytes:
    with path.open("rb") as stream:
        stream.seek(start)
        data = stream.read(stop - start)
    if len(data) != stop - start:
        raise FormatError("the file has become shorter while it was read", where=path)
    return data


def _numbers(data: bytes, toc: Contents, where: str) -> Numbers:
    if toc.order:
        return BinaryNumbers(data, toc.order, toc.size_bytes, where)
    return TextNumbers(data, where)


def _read_mesh(path: Path, toc: Contents) -> _Mesh:
    ids, points = _nodes(path, toc)
    node_at = Lookup(ids, "node", path)
    parts = _elements(path, toc)
    cell_at = Lookup(np.concatenate([part.ids for part in parts] or [ids[:0]]), "element", path)
    blocks = [cb.Block.of_table(part.kind, node_at(part.nodes, "an element")) for part in parts]
    types, offsets, nodes = cb.join(blocks)
    names: dict[tuple[int, int], str] = {}
    section = toc.find("PhysicalNames")
    if section is not None:
        text = _bytes(path, section.start, section.stop)
        names = msh_mesh.physical_names(text, f"{path}, $PhysicalNames")
    cell_data, tag_names = _groups(parts, names)
    piece = check_piece(Piece(points, types, offsets, nodes, cell_data=cell_data, tag_names=tag_names), path)
    top = cb.top_dimension(blocks)
    needed_cells = np.repeat([block.dimension == top for block in blocks], [len(block) for block in blocks])
    return _Mesh(piece, node_at, cell_at, cb.in_top_cells(blocks, len(points)), needed_cells)


def _nodes(path: Path, toc: Contents) -> tuple[Array, Array]:
    where = f"{path}, $Nodes"
    data = _section(path, toc, "Nodes")
    if toc.version != "2":
        return msh_mesh.nodes(_numbers(data, toc, where), toc.version, where)
    count, rest = _count_line(data, where)
    return msh_mesh.nodes_2(_numbers(rest, toc, where), count)


def _elements(path: Path, toc: Contents) -> list[Elements]:
    where = f"{path}, $Elements"
    data = _section(path, toc, "Elements")
    if toc.version == "2":
        count, rest = _count_line(data, where)
        if toc.order:
            return msh_mesh.elements_2_binary(_numbers(rest, toc, where), count, where)
        return msh_mesh.elements_2_text(rest, count, where)
    groups: dict[tuple[int, int], int] = {}
    for name in ("Entities", "PartitionedEntities"):
        if toc.find(name) is not None:
            spot = f"{path}, ${name}"
            source = _numbers(_section(path, toc, name), toc, spot)
            groups |= msh_mesh.entity_groups(source, toc.version, name.startswith("Part"))
    return msh_mesh.elements(_numbers(data, toc, where), toc.version, groups, where)


def _section(path: Path, toc: Contents, name: str) -> bytes:
    section = toc.find(name)
    return b"" if section is None else _bytes(path, section.start, section.stop)


def _count_line(data: bytes, where: str) -> tuple[int, bytes]:
    line, _, rest = data.partition(b"\n")
    if not line.strip().isdigit():
        raise FormatError("the number of entries cannot be read", where=where, mend=DAMAGED)
    return int(line), rest


def _groups(
    parts: list[Elements], names: dict[tuple[int, int], str]
) -> tuple[dict[str, Array], dict[str, dict[int, str]]]:
    """Tag arrays of the cells, and the names of those tags that mark boundaries.

    The same number may stand for a line group and for a surface group, so that
    only tags of boundary cells (one dimension below the cells) get names.
    """
    top = max((cb.dimension(part.kind) for part in parts), default=0)
    physical = np.concatenate([part.physical for part in parts] or [np.empty(0, dtype=np.int64)])
    geometrical = np.concatenate([part.geometrical for part in parts] or [physical])
    edge = [part for part in parts if cb.dimension(part.kind) == top - 1]
    tags = np.unique(np.concatenate([part.physical for part in edge] or [physical[:0]]))
    arrays = {_PHYSICAL: physical, _GEOMETRICAL: geometrical}
    if (tags != 0).any():
        named = {int(tag): names.get((top - 1, int(tag)), f"group {tag}") for tag in tags if tag}
        return arrays, {_PHYSICAL: named}
    tags = np.unique(np.concatenate([part.geometrical for part in edge] or [physical[:0]]))
    named = {int(tag): f"entity {tag}" for tag in tags if tag}
    return arrays, {_GEOMETRICAL: named} if named else {}


def _with_data(mesh: _Mesh, stored: Stored, line: Timeline, step: int, path: Path, toc: Contents) -> Piece:
    point_data: dict[str, Array] = {}
    cell_data = dict(mesh.piece.cell_data)
    for own in stored.values():
        parts = own[line.stored(own, step)]
        if parts[0].of_nodes:
            point_data[parts[0].name] = _values(parts, mesh.node_at, mesh.needed_nodes, path, toc)
        else:
            cell_data[parts[0].name] = _values(parts, mesh.cell_at, mesh.needed_cells, path, toc)
    return check_piece(replace(mesh.piece, point_data=point_data, cell_data=cell_data), path)


def _values(parts: list[Data], at: Lookup, needed: Array, path: Path, toc: Contents) -> Array:
    """One array by id, from the parts that partitions wrote; NaN where no needed value is missing.

    Nodes without cells and boundary cells may go without a value.
    """
    what = "NodeData" if parts[0].of_nodes else "ElementData"
    user = f"${what} '{parts[0].name}'"
    where = f"{path}, {user}"
    width = parts[0].components
    out = np.full((len(needed), width), np.nan)
    known = np.zeros(len(needed), dtype=bool)
    for part in parts:
        if part.components != width:
            raise FormatError("the number of components changes", where=where, mend=DAMAGED)
        source = _numbers(_bytes(path, part.start, part.stop), toc, where)
        ids, values = source.rows(part.count, ("i", 1), ("d", width))
        source.end()
        spots = at(ids[:, 0], user)
        if len(np.unique(spots)) < len(spots):
            raise FormatError("an id stands twice", where=where, mend=DAMAGED)
        again = known[spots]
        if not np.array_equal(out[spots[again]], values[again], equal_nan=True):
            raise FormatError("two partitions give different values", where=where, mend=DAMAGED)
        out[spots] = values
        known[spots] = True
    lost = int((needed & ~known).sum())
    if lost:
        raise FormatError(
            f"{user} misses {lost} of {int(needed.sum())} {'points' if parts[0].of_nodes else 'cells'}",
            where=path,
            mend="Export the array for the whole mesh.",
        )
    return out[:, 0] if width == 1 else out
