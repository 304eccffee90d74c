"""The pieces of one VTK XML file: from the elements of the file to a `Piece` each.

The bytes are decoded here and not by VTK's own readers: those crash on damaged
connectivity, cut arrays that are too long, leave a missing array uninitialised
and answer with a message instead of an error, so that every count would have to
be checked against the file beforehand anyway.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.check import DAMAGED, check_piece
from fvcheck.formats.structured import block_cells
from fvcheck.formats.vtk_cells import (
    Cells,
    Group,
    ghost_cells,
    lattice,
    poly_cells,
    running_offsets,
    streamed_faces,
)
from fvcheck.formats.xml_arrays import ArrayReader, attribute_int
from fvcheck.formats.xml_scan import Document, Element
from fvcheck.mesh.piece import Array, Faces, Piece

MOST_POINTS = 1 << 31
# A grid is built from its extent alone; its arrays, compressed, are the only measure of it.
MOST_POINTS_PER_BYTE = 20
FREE_POINTS = 1_000_000


def pieces_of(document: Document) -> list[Piece]:
    """The pieces with at least one cell of a file that is no list of other files, checked.

    Raises `FormatError` for a type of file that cannot be read and for all damage
    that can be noticed.
    """
    if document.type not in READERS:
        raise FormatError(
            f"a VTK file of type '{document.type}' cannot be read", where=document.path, mend=DAMAGED
        )
    read = READERS[document.type]
    arrays = ArrayReader(document)
    found = [read(arrays, element) for element in document.primary.all("Piece")]
    return [check_piece(piece, document.path) for piece in found if piece is not None]


def _data(arrays: ArrayReader, piece: Element, section: str, tuples: int) -> dict[str, Array]:
    found: dict[str, Array] = {}
    head = piece.first(section)
    for element in head.all("DataArray") if head else []:
        name = element.attributes.get("Name", "") or f"unnamed {len(found)}"
        if "TimeStep" in element.attributes:
            mend = "Export one file per time, listed in a PVD file."
            raise FormatError("several times in one file cannot be read", where=arrays.path, mend=mend)
        if name in found:
            raise FormatError(f"there are two arrays '{name}' in {section}", where=arrays.path, mend=DAMAGED)
        if element.attributes.get("type") != "String":
            found[name] = arrays.later(element, tuples)
    return found


def _count(arrays: ArrayReader, piece: Element, name: str) -> int:
    count = attribute_int(piece, name, str(arrays.path), 0 if name.startswith("NumberOf") else None)
    if not 0 <= count < MOST_POINTS:
        raise FormatError(
            f"the file declares {name}={count}, which cannot be", where=arrays.path, mend=DAMAGED
        )
    return count


def _assemble(
    arrays: ArrayReader, piece: Element, points: Array, cells: Cells, faces: Faces | None = None
) -> Piece:
    point_data = _data(arrays, piece, "PointData", len(points))
    cell_data = _data(arrays, piece, "CellData", len(cells[0]))
    ghost = ghost_cells(point_data, cell_data, cells)
    return Piece(points, *cells, point_data, cell_data, ghost=ghost, faces=faces)


def _points(arrays: ArrayReader, piece: Element, count: int) -> Array:
    section = piece.first("Points")
    element = section.first("DataArray") if section else None
    if element is None:
        raise FormatError("there are no points", where=arrays.path, mend="Export the mesh with its points.")
    points = arrays.values(element, count)
    if points.ndim != 2 or points.shape[1] != 3:
        raise FormatError("the points do not have 3 components", where=arrays.path, mend=DAMAGED)
    return points


def _named(section: Element | None) -> dict[str, Element]:
    return {e.attributes.get("Name", ""): e for e in (section.all("DataArray") if section else [])}


def _connectivity(arrays: ArrayReader, found: dict[str, Element], count: int, what: str) -> Group:
    for name in ("connectivity", "offsets"):
        if name not in found:
            raise FormatError(f"there is no array '{name}' in <{what}>", where=arrays.path, mend=DAMAGED)
    ends = _whole(arrays, found["offsets"], count)
    nodes = _whole(arrays, found["connectivity"], None)
    return running_offsets(ends, len(nodes), "offsets", str(arrays.path)), nodes.astype(np.int64, copy=False)


def _whole(arrays: ArrayReader, element: Element, tuples: int | None) -> Array:
    values = arrays.values(element, tuples)
    if values.ndim != 1 or values.dtype.kind not in "iu":
        name = element.attributes.get("Name", "")
        raise FormatError(f"array '{name}' is no list of whole numbers", where=arrays.path, mend=DAMAGED)
    return values


def _unstructured(arrays: ArrayReader, piece: Element) -> Piece | None:
    points = _count(arrays, piece, "NumberOfPoints")
    count = _count(arrays, piece, "NumberOfCells")
    if points == 0 or count == 0:
        _refuse_hidden(arrays, piece, points)
        return None
    found = _named(piece.first("Cells"))
    offsets, nodes = _connectivity(arrays, found, count, "Cells")
    if "types" not in found:
        raise FormatError("there is no array 'types' in <Cells>", where=arrays.path, mend=DAMAGED)
    types = _whole(arrays, found["types"], count)
    coordinates = _points(arrays, piece, points)
    # Checked here already, since ghost marks are looked up by node and faces by cell type.
    bare = check_piece(Piece(coordinates, np.where(types == 42, 2, types), offsets, nodes), arrays.path)
    faces = _faces(arrays, found, types == 42) if (types == 42).any() else None
    return _assemble(arrays, piece, bare.points, (types, bare.offsets, bare.nodes), faces)


def _refuse_hidden(arrays: ArrayReader, piece: Element, points: int) -> None:
    """A piece declared empty may not hold values: that is a damaged count.

    One that has points, but no cells (a cloud of particles), is sound.
    """
    for section in piece.children:
        if points and section.tag in ("Points", "PointData"):
            continue
        for element in section.all("DataArray"):
            if len(arrays.values(element, None)):
                wrong = "a piece is declared empty, but holds values"
                raise FormatError(wrong, where=arrays.path, mend=DAMAGED)


def _faces(arrays: ArrayReader, found: dict[str, Element], solid: Array) -> Faces:
    where = str(arrays.path)
    if "faces" in found and "faceoffsets" in found:
        stream = _whole(arrays, found["faces"], None).astype(np.int64, copy=False)
        ends = _whole(arrays, found["faceoffsets"], len(solid)).astype(np.int64, copy=False)
        # An end belongs to polyhedra only, other cells have -1: a list starts where the last one ended.
        starts = np.zeros(len(solid), dtype=np.int64)
        starts[solid] = np.concatenate([[0], ends[solid][:-1]])
        running_offsets(ends[solid], len(stream), "face offsets", where)
        return streamed_faces(stream, starts, ends, solid, where)
    wanted = ("face_connectivity", "face_offsets", "polyhedron_to_faces", "polyhedron_offsets")
    if not all(name in found for name in wanted):
        raise FormatError("there are polyhedra, but no arrays of their faces", where=where, mend=DAMAGED)
    nodes, ends, lists, cell_ends = (_whole(arrays, found[name], None) for name in wanted)
    if len(cell_ends) != len(solid):
        wrong = f"'polyhedron_offsets' holds {len(cell_ends)} values for {len(solid)} cells"
        raise FormatError(wrong, where=where, mend=DAMAGED)
    return Faces(
        running_offsets(ends, len(nodes), "face offsets", where),
        nodes.astype(np.int64, copy=False),
        running_offsets(cell_ends, len(lists), "lists of faces", where),
        lists.astype(np.int64, copy=False),
    )


def _poly(arrays: ArrayReader, piece: Element) -> Piece | None:
    points = _count(arrays, piece, "NumberOfPoints")
    groups: dict[str, Group] = {}
    for tag in ("Verts", "Lines", "Polys", "Strips"):
        count = _count(arrays, piece, f"NumberOf{tag}")
        if count:
            groups[tag.lower()] = _connectivity(arrays, _named(piece.first(tag)), count, tag)
    if points == 0 or not groups:
        _refuse_hidden(arrays, piece, points)
        return None
    cells = poly_cells(groups)
    bare = check_piece(Piece(_points(arrays, piece, points), *cells), arrays.path)
    return _assemble(arrays, piece, bare.points, (bare.types, bare.offsets, bare.nodes))


def _extent(arrays: ArrayReader, piece: Element) -> list[tuple[int, int]]:
    text = piece.attributes.get("Extent", "").split()
    if len(text) != 6 or not all(re.fullmatch(r"-?[0-9]{1,9}", number) for number in text):
        raise FormatError(
            f"the extent '{' '.join(text)}' is not 6 whole numbers", where=arrays.path, mend=DAMAGED
        )
    bounds = [int(number) for number in text]
    spans = list(zip(bounds[::2], bounds[1::2]))
    if math.prod(max(0, high - low + 1) for low, high in spans) >= MOST_POINTS:
        raise FormatError(
            f"the extent '{' '.join(text)}' holds too many points", where=arrays.path, mend=DAMAGED
        )
    return spans


def _structured(arrays: ArrayReader, piece: Element, locate: Callable[[list[int]], Array]) -> Piece | None:
    """A piece on a grid; ``locate`` gives its points."""
    spans = _extent(arrays, piece)
    sizes = [high - low + 1 for low, high in spans]
    if min(sizes) < 1:
        _refuse_hidden(arrays, piece, 0)
        return None
    count = math.prod(sizes)
    if count > max(FREE_POINTS, MOST_POINTS_PER_BYTE * arrays.path.stat().st_size):
        wrong = f"the grid of {count} points is larger than its file can hold"
        raise FormatError(wrong, where=arrays.path, mend=DAMAGED)
    point_data = _data(arrays, piece, "PointData", count)
    cell_data = _data(arrays, piece, "CellData", math.prod(max(1, size - 1) for size in sizes))
    points = locate(sizes)
    cells = block_cells(tuple(sizes))
    ghost = ghost_cells(point_data, cell_data, cells)
    return Piece(points, *cells, point_data, cell_data, ghost=ghost)


def _curvilinear(arrays: ArrayReader, piece: Element) -> Piece | None:
    return _structured(arrays, piece, lambda sizes: _points(arrays, piece, math.prod(sizes)))


def _rectilinear(arrays: ArrayReader, piece: Element) -> Piece | None:
    def locate(sizes: list[int]) -> Array:
        section = piece.first("Coordinates")
        elements = section.all("DataArray") if section else []
        if len(elements) != 3:
            raise FormatError("there are not 3 arrays of coordinates", where=arrays.path, mend=DAMAGED)
        return lattice([arrays.values(element, size) for element, size in zip(elements, sizes)])

    return _structured(arrays, piece, locate)


def _image(arrays: ArrayReader, piece: Element) -> Piece | None:
    primary = arrays.document.primary
    origin = _numbers(arrays, primary, "Origin", [0.0, 0.0, 0.0])
    spacing = np.array(_numbers(arrays, primary, "Spacing", [1.0, 1.0, 1.0]))
    turn = np.array(_numbers(arrays, primary, "Direction", [1.0, 0, 0, 0, 1, 0, 0, 0, 1])).reshape(3, 3)
    lows = [low for low, _high in _extent(arrays, piece)]

    def locate(sizes: list[int]) -> Array:
        steps = [(low + np.arange(size)) * step for low, size, step in zip(lows, sizes, spacing)]
        return lattice(steps) @ turn.T + origin

    return _structured(arrays, piece, locate)


def _numbers(arrays: ArrayReader, element: Element, name: str, default: list[float]) -> list[float]:
    text = element.attributes.get(name)
    if text is None:
        return default
    try:
        values = [float(number) for number in text.split()]
    except ValueError:
        values = []
    if len(values) != len(default) or not all(map(math.isfinite, values)):
        raise FormatError(f"{name}='{text}' is not {len(default)} numbers", where=arrays.path, mend=DAMAGED)
    return values


READERS: dict[str, Callable[[ArrayReader, Element], Piece | None]] = {
    "UnstructuredGrid": _unstructured,
    "PolyData": _poly,
    "StructuredGrid": _curvilinear,
    "RectilinearGrid": _rectilinear,
    "ImageData": _image,
}
