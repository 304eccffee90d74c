"""Reader of legacy VTK files, text and binary, versions 2.0 to 5.1."""

from __future__ import annotations

import math
from itertools import pairwise
from pathlib import Path

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.check import check_piece
from fvcheck.formats.legacy_keywords import AXES, MOST_POINTS, LegacyScan
from fvcheck.formats.legacy_scan import END, Cursor
from fvcheck.formats.structured import block_cells
from fvcheck.formats.vtk_cells import Cells, ghost_cells, lattice, poly_cells, streamed_faces
from fvcheck.hints import Hint
from fvcheck.mesh.piece import Array, Export, Faces, Piece


def sniff(head: bytes, path: Path) -> bool:
    """The first line names the format."""
    return head.startswith(b"# vtk DataFile")


def open_export(path: Path) -> Export:
    """Open a legacy VTK file; its time is the field array ``TimeValue`` or ``TIME``, if there is one.

    Raises `FormatError` for what is damaged or not supported.
    """
    head = LegacyScan(Cursor(path))
    head.run(head_only=True)
    times = () if head.time is None else (head.time,)
    hints: tuple[Hint, ...] = ()
    if head.cursor.text and not head.cursor.data.endswith(b"\n"):
        message = f"{path} does not end with a line end: if it was cut there, its last number is wrong"
        hints = (Hint("no-line-end", message),)
    return Export(path, f"legacy VTK {head.dataset}", lambda _step: [_load(path)], times, hints)


def _load(path: Path) -> Piece:
    scan = LegacyScan(Cursor(path))
    scan.run()
    return check_piece(_piece(scan), path)


def _piece(scan: LegacyScan) -> Piece:
    point_data, cell_data = scan.data["POINT_DATA"], scan.data["CELL_DATA"]
    if not point_data and not cell_data:
        # Mostly a file cut short; this also keeps a grid from growing larger than its file.
        raise FormatError("there are no arrays at points or cells", where=scan.path, mend=END)
    faces = None
    if scan.dataset == "UNSTRUCTURED_GRID":
        points = _some(scan, scan.points, "POINTS")
        cells, faces = _listed(scan)
    elif scan.dataset == "POLYDATA":
        points = _some(scan, scan.points, "POINTS")
        cells = poly_cells(scan.cells)
    else:
        sizes = _sizes(scan)
        _same_count(scan, "POINT_DATA", math.prod(sizes))
        _same_count(scan, "CELL_DATA", math.prod(max(1, size - 1) for size in sizes))
        points = _lattice(scan, sizes)
        cells = block_cells(tuple(sizes))
    _same_count(scan, "POINT_DATA", len(points))
    _same_count(scan, "CELL_DATA", len(cells[0]))
    check_piece(Piece(points, *cells, faces=faces), scan.path)  # before ghost marks are looked up by node
    ghost = ghost_cells(point_data, cell_data, cells)
    return Piece(points, *cells, point_data, cell_data, ghost=ghost, faces=faces)


def _some(scan: LegacyScan, values: Array | None, what: str) -> Array:
    if values is None:
        raise FormatError(f"{what} is missing", where=scan.path, mend=END)
    return values


def _same_count(scan: LegacyScan, section: str, count: int) -> None:
    if scan.counts.get(section, count) != count:
        wrong = f"{section} declares {scan.counts[section]} values, the mesh asks for {count}"
        raise FormatError(wrong, where=scan.path, mend=END)


def _listed(scan: LegacyScan) -> tuple[Cells, Faces | None]:
    """Cells of an unstructured grid; a polyhedron's list holds its faces."""
    types = _some(scan, scan.types, "CELL_TYPES")
    if "cells" not in scan.cells:
        raise FormatError("CELLS is missing", where=scan.path, mend=END)
    offsets, nodes = scan.cells["cells"]
    if len(offsets) - 1 != len(types):
        wrong = f"there are {len(offsets) - 1} cells, but {len(types)} cell types"
        raise FormatError(wrong, where=scan.path, mend=END)
    solid = types == 42
    if not solid.any():
        return (types, offsets, nodes), None
    faces = streamed_faces(nodes, offsets[:-1], offsets[1:], solid, str(scan.path))
    own = [nodes[start:end] for start, end in pairwise(offsets)]
    face_starts = faces.face_offsets[faces.cell_offsets]
    for cell in np.flatnonzero(solid).tolist():
        own[cell] = np.unique(faces.face_nodes[face_starts[cell] : face_starts[cell + 1]])
    ends = np.cumsum([0, *(len(ids) for ids in own)])
    return (types, ends, np.concatenate(own)), faces


def _sizes(scan: LegacyScan) -> list[int]:
    """Points per axis of a structured data set."""
    if "EXTENT" in scan.numbers:
        bounds = scan.numbers["EXTENT"]
        sizes = [high - low + 1 for low, high in zip(bounds[::2], bounds[1::2])]
    elif "DIMENSIONS" in scan.numbers:
        sizes = scan.numbers["DIMENSIONS"]
    else:
        raise FormatError("DIMENSIONS is missing", where=scan.path, mend=END)
    if min(sizes) < 1 or math.prod(sizes) >= MOST_POINTS or any(size != int(size) for size in sizes):
        raise FormatError(f"the dimensions {sizes} are not possible", where=scan.path, mend=END)
    return [int(size) for size in sizes]


def _lattice(scan: LegacyScan, sizes: list[int]) -> Array:
    if scan.dataset == "STRUCTURED_GRID":
        points = _some(scan, scan.points, "POINTS")
        if len(points) != math.prod(sizes):
            wrong = f"there are {len(points)} points for the dimensions {sizes}"
            raise FormatError(wrong, where=scan.path, mend=END)
        return points
    if scan.dataset == "RECTILINEAR_GRID":
        axes = [_some(scan, scan.axes.get(name), name) for name in AXES]
        if [len(axis) for axis in axes] != sizes:
            raise FormatError("the coordinates do not fit the dimensions", where=scan.path, mend=END)
        return lattice(axes)
    origin = scan.numbers.get("ORIGIN")
    spacing = scan.numbers.get("SPACING", scan.numbers.get("ASPECT_RATIO"))
    if origin is None or spacing is None:
        raise FormatError("ORIGIN or SPACING is missing", where=scan.path, mend=END)
    first = scan.numbers.get("EXTENT", [0.0] * 6)[::2]
    steps = zip(origin, first, sizes, spacing)
    return lattice([start + (low + np.arange(size)) * step for start, low, size, step in steps])
