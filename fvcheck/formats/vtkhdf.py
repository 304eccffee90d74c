"""VTKHDF files, versions 1.0 to 2.x, by their published layout.

Layout: "VTKHDF format specification", https://docs.vtk.org. Partitions and time
steps lie one after the other in the same datasets; only the rows of the
step asked for are read.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.formats.check import check_piece
from fvcheck.formats.vtkhdf_data import PARTS, data_of, row_reader
from fvcheck.formats.vtkhdf_steps import steps_of
from fvcheck.mesh.piece import Export, Part, Piece

_COMPOSITE = ("PartitionedDataSetCollection", "MultiBlockDataSet")
# Marks of vtkGhostType that take a cell out: owned by another partition, refined, hidden.
_GHOST_BITS = 1 | 8 | 32


@dataclass(frozen=True)
class _Block:
    path: str
    name: str
    kind: str


def sniff(head: bytes, path: Path) -> bool:
    """Whether the file is HDF5 with a root group ``VTKHDF``."""
    return safe.is_hdf5(head) and safe.has_root(path, "VTKHDF")


def open_export(path: Path) -> Export:
    """Open a VTKHDF file: UnstructuredGrid, PolyData, ImageData or a collection of them.

    Raises `FormatError` when it is none of these, damaged, or stored in several files.
    """
    path = Path(path)
    with safe.open_hdf5(path) as file:
        root = safe.group(file, "VTKHDF", path)
        _check_version(root, path)
        blocks = _blocks(root, path)
        all_times = [steps_of(safe.group(file, block.path, path), path).times for block in blocks]
    times = max(all_times, key=len)
    if any(other not in ((), times) for other in all_times):
        raise FormatError(
            "the blocks have different time steps", where=path, mend="Export all blocks at the same times."
        )
    cache: dict[str, tuple[object, Piece]] = {}

    def load(step: int) -> Sequence[Piece]:
        with safe.open_hdf5(path) as file:
            pieces = [
                piece
                for block in blocks
                for part in _parts(file, block, step, path, cache)
                for piece in part()
            ]
        if not pieces:
            raise FormatError("there are no cells", where=path, mend="Export the mesh with its cells.")
        return pieces

    def parts(step: int) -> Iterator[Part]:
        with safe.open_hdf5(path) as file:
            for block in blocks:
                yield from _parts(file, block, step, path, None)

    single = blocks[0] if len(blocks) == 1 else None
    rows = None if single is None else row_reader(path, single.path, single.kind)
    return Export(path, "VTKHDF", load, times, parts=parts, rows=rows)


def _check_version(root: Any, path: Path) -> None:
    version = safe.attribute(root, "Version", path)
    if version is None or isinstance(version, str) or np.size(version) < 1 or version.dtype.kind not in "iu":
        raise FormatError("the group VTKHDF has no version", where=path, mend=safe.DAMAGED)
    if int(np.ravel(version)[0]) not in (1, 2):
        text = ".".join(str(part) for part in np.ravel(version))
        raise FormatError(f"VTKHDF version {text} is not known", where=path, mend="Export version 1 or 2.")


def _blocks(root: Any, path: Path) -> list[_Block]:
    kind = _kind(root, path)
    if kind not in _COMPOSITE:
        return [_Block("/VTKHDF", "", kind)]
    assembly = safe.member(root, "Assembly", path)
    titles = _titles(assembly, path) if assembly is not None and safe.is_group(assembly) else {}
    blocks = []
    for name in safe.names(root, path):
        if name == "Assembly":
            continue
        node = safe.member(root, name, path)
        if node is None or not safe.is_group(node) or safe.attribute(node, "Type", path) is None:
            continue
        index = safe.attribute(node, "Index", path)
        known = isinstance(index, np.ndarray) and index.size == 1 and index.dtype.kind in "iu"
        order = int(index.reshape(-1)[0]) if known else 0
        blocks.append((order, _Block(f"/VTKHDF/{name}", titles.get(name, name), _kind(node, path))))
    if not blocks:
        raise FormatError("the collection has no blocks", where=path, mend=safe.DAMAGED)
    return [block for _, block in sorted(blocks, key=lambda pair: pair[0])]


def _titles(assembly: Any, path: Path) -> dict[str, str]:
    """Names of the blocks in the tree of the assembly, by their group; the first if there are several."""
    titles: dict[str, str] = {}
    _collect(assembly, path, titles, set())
    return titles


def _collect(assembly: Any, path: Path, titles: dict[str, str], seen: set[Any]) -> None:
    if len(seen) > 500 or safe.identity(assembly, path) in seen:
        raise FormatError("the tree of the assembly has no end", where=path, mend=safe.DAMAGED)
    seen.add(safe.identity(assembly, path))
    for name in safe.names(assembly, path):
        target = safe.link_target(assembly, name, path)
        if target.startswith("/VTKHDF/"):
            titles.setdefault(target.removeprefix("/VTKHDF/").strip("/"), name)
            continue
        node = safe.member(assembly, name, path)
        if node is not None and safe.is_group(node):
            _collect(node, path, titles, seen)


def _kind(group: Any, path: Path) -> str:
    kind = safe.text_attribute(group, "Type", path)
    if kind in PARTS or (kind in _COMPOSITE and group.name == "/VTKHDF"):
        return kind
    raise FormatError(
        f"the data set type '{kind}' cannot be read",
        where=f"{path}, {group.name}",
        mend="Export an unstructured grid, polygonal data, an image, or a collection of them.",
    )


def _parts(
    file: Any, block: _Block, step: int, path: Path, cache: dict[str, tuple[object, Piece]] | None
) -> Iterator[Part]:
    """What reads each piece of a block, while ``file`` is open; ``cache`` keeps meshes for the next step."""
    group = safe.group(file, block.path, path)
    steps = steps_of(group, path)
    step = min(step, max(0, len(steps.times) - 1))
    parts = PARTS[block.kind](group, steps, step)
    for number, part in enumerate(parts):
        if part.cells == 0:
            continue
        name = block.name if len(parts) == 1 else f"{block.name}#{number}" if block.name else f"part {number}"
        yield partial(_read, group, steps, step, part, name, f"{path}, {block.path}", path, cache)


def _read(
    group: Any,
    steps: Any,
    step: int,
    part: Any,
    name: str,
    where: str,
    path: Path,
    cache: dict[str, tuple[object, Piece]] | None,
) -> list[Piece]:
    known = None if cache is None else cache.get(name)
    if known is not None and known[0] == part.key:
        mesh = known[1]
    else:
        mesh = check_piece(replace(part.mesh(), name=name), path)
        if cache is not None:
            cache[name] = (part.key, mesh)
    points = data_of(group, "PointData", steps, step, part, where)
    cells = data_of(group, "CellData", steps, step, part, where)
    points.pop("vtkGhostType", None)
    marks = cells.pop("vtkGhostType", None)
    ghost = None
    if marks is not None:
        if marks.dtype.kind not in "iu" or marks.ndim != 1:
            raise FormatError("vtkGhostType holds no marks", where=path, mend=safe.DAMAGED)
        ghost = (marks & _GHOST_BITS) != 0
    return [check_piece(replace(mesh, point_data=points, cell_data=cells, ghost=ghost), path)]
