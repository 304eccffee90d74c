"""Zones of a CGNS base: their meshes and their solutions."""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import prod

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.formats.cgns_elements import NFACE, NGON, Section, read_sections, solid_cells
from fvcheck.formats.cgns_patches import Condition, Elements, joined, structured_patch
from fvcheck.formats.cgns_tree import Node
from fvcheck.formats.hdf5_later import later
from fvcheck.formats.structured import block_cells
from fvcheck.mesh.piece import Array, Piece
from fvcheck.mesh.stored import stored

_COORDINATES = ("CoordinateX", "CoordinateY", "CoordinateZ")
_TAGS = "Section"
# Locations of a solution that no law uses.
_ELSEWHERE = ("FaceCenter", "IFaceCenter", "JFaceCenter", "KFaceCenter", "EdgeCenter")


@dataclass(frozen=True)
class Size:
    """Points and cells of a zone; per axis, the fastest first, if it is structured."""

    structured: bool
    points: tuple[int, ...]
    cells: tuple[int, ...]


def size_of(zone: Node) -> Size:
    """Type and size of a zone. Raises `FormatError` when they are missing or contradict each other."""
    kind = zone.first("ZoneType_t")
    text = "" if kind is None else kind.text()
    if text not in ("Structured", "Unstructured"):
        raise FormatError(
            f"the zone type is '{text}'" if text else "the zone has no ZoneType",
            where=zone.where,
            mend=safe.DAMAGED,
        )
    shape, values = zone.shape(), zone.integers()
    axes = values.size // 3
    structured = text == "Structured"
    if values.size != 3 * axes or axes not in ((2, 3) if structured else (1,)) or shape[0] != 3:
        raise FormatError(f"the zone sizes have the shape {shape}", where=zone.where, mend=safe.DAMAGED)
    points, cells = (tuple(int(n) for n in row) for row in values.reshape(3, axes)[:2])
    wrong = any(n < 1 for n in points) or any(n < 0 for n in cells)
    if structured:
        wrong = wrong or any(n != 1 and m != n - 1 for n, m in zip(points, cells))
        cells = tuple(max(1, n - 1) for n in points)
        wrong = wrong or sum(n > 1 for n in points) < 2
    if wrong:
        raise FormatError(
            f"the zone declares {points} points and {cells} cells", where=zone.where, mend=safe.DAMAGED
        )
    return Size(structured, points, cells)


def read_mesh(
    zone: Node, grid: str, cell_dimension: int, found: list[Condition], names: dict[tuple[str, str], str]
) -> Piece:
    """Points, cells and patches of a zone. ``grid``: name of its GridCoordinates_t node."""
    size = size_of(zone)
    points = _points(zone, grid, size)
    if size.structured:
        types, offsets, nodes = block_cells(size.points)
        listed = [(names[c.name, c.family], structured_patch(c, size.points)) for c in found]
        patches = joined([(name, patch) for name, patch in listed if patch is not None])
        return Piece(points, types, offsets, nodes, patches=patches)
    return _unstructured(zone, points, size.cells[0], cell_dimension, found, names)


def _unstructured(
    zone: Node,
    points: Array,
    cells: int,
    cell_dimension: int,
    found: list[Condition],
    names: dict[tuple[str, str], str],
) -> Piece:
    sections = read_sections(zone)
    if not sections:
        raise FormatError(
            "the zone has no elements", where=zone.where, mend="Export the mesh with its elements."
        )
    solid = None
    if cell_dimension == 3 or any(section.code == NFACE for section in sections):
        solid = solid_cells(sections, cells, zone.where)
    dimension = 3 if solid else max(int(section.dimension.max()) for section in sections)
    elements = Elements(sections, dimension, len(points))
    listed = [(names[c.name, c.family], elements.patch(c)) for c in found]
    patches = joined([(name, patch) for name, patch in listed if patch is not None])
    extra = [
        (number, section)
        for number, section in enumerate(sections)
        if number not in elements.used and not (solid and section.code in (NGON, NFACE))
    ]
    if solid:
        if any((section.dimension == 3).any() and section.code != NFACE for section in sections):
            raise FormatError(
                "polyhedra and other solid elements lie in one zone",
                where=zone.where,
                mend="Export polyhedra only.",
            )
        _, offsets, nodes, faces = solid
        mesh = Piece(points, np.full(len(offsets) - 1, 42, dtype=np.uint8), offsets, nodes, faces=faces)
    else:
        picked = [_pick(section, section.dimension == dimension) for section in sections]
        mesh = Piece(points, *_concatenate(picked))
    if len(mesh.types) != cells:
        raise FormatError(
            f"the zone declares {cells} cells, its sections hold {len(mesh.types)}",
            where=zone.where,
            mend=safe.DAMAGED,
        )
    return _with_lines(replace(mesh, patches=patches), extra, dimension)


def _pick(section: Section, mask: Array) -> tuple[Array, Array, Array]:
    """(types, sizes, nodes) of some elements of a section."""
    sizes = np.diff(section.offsets)
    if mask.all():
        return section.types, sizes, section.nodes
    return section.types[mask], sizes[mask], section.nodes[np.repeat(mask, sizes)]


def _concatenate(picked: list[tuple[Array, Array, Array]]) -> tuple[Array, Array, Array]:
    types, sizes, nodes = (np.concatenate([part[k] for part in picked]) for k in range(3))
    return types, np.concatenate([[0], np.cumsum(sizes)]), nodes


def _with_lines(mesh: Piece, extra: list[tuple[int, Section]], dimension: int) -> Piece:
    """The mesh, and behind its cells the boundary elements without a condition, marked by their section."""
    kept = [(number, section, section.dimension == dimension - 1) for number, section in extra]
    kept = [(number, section, mask) for number, section, mask in kept if mask.any()]
    if not kept:
        return mesh
    picked = [_pick(section, mask) for _, section, mask in kept]
    types, offsets, nodes = _concatenate([(mesh.types, np.diff(mesh.offsets), mesh.nodes), *picked])
    tags = np.zeros(len(types), dtype=np.int64)
    tags[len(mesh.types) :] = np.repeat(
        [number + 1 for number, _, _ in kept], [len(part[0]) for part in picked]
    )
    faces = mesh.faces
    if faces is not None:
        ends = np.full(len(types) - len(mesh.types), faces.cell_offsets[-1])
        faces = replace(faces, cell_offsets=np.concatenate([faces.cell_offsets, ends]))
    return replace(
        mesh,
        types=types,
        offsets=offsets,
        nodes=nodes,
        faces=faces,
        cell_data={_TAGS: tags},
        tag_names={_TAGS: {number + 1: section.name for number, section, _ in kept}},
    )


def _points(zone: Node, grid: str, size: Size) -> Array:
    node = zone.child(grid, "GridCoordinates_t")
    if node is None:
        raise FormatError(
            f"there are no coordinates '{grid}'", where=zone.where, mend="Export the mesh with its points."
        )
    names = [child.name for child in node.children("DataArray_t")]
    present = [name for name in _COORDINATES if name in names]
    if len(present) < 2:
        raise FormatError(
            f"two Cartesian coordinates are expected, there are {names[:4]}",
            where=node.where,
            mend="Export the coordinates as CoordinateX, CoordinateY, CoordinateZ.",
        )
    if not size.structured and any(_rind(node, 1)):
        raise FormatError(
            "the coordinates hold rind points", where=node.where, mend="Export without rind points."
        )
    axes = {}
    for name in present:
        child = node.child(name, "DataArray_t")
        assert child is not None
        axes[name] = _values(child, size.points, _rind(node, len(size.points)))
    kind = np.result_type(*axes.values())
    points = np.zeros((prod(size.points), 3), dtype=kind if kind.kind == "f" else np.float64)
    for name, values in axes.items():
        points[:, _COORDINATES.index(name)] = values
    return points


def _rind(node: Node, axes: int) -> list[int]:
    rind = node.first("Rind_t")
    if rind is None:
        return [0] * (2 * axes)
    planes = [int(n) for n in rind.integers(2 * axes)]
    if min(planes) < 0:
        raise FormatError("the numbers of rind planes are negative", where=rind.where, mend=safe.DAMAGED)
    return planes


def _values(node: Node, size: tuple[int, ...], rind: list[int]) -> Array:
    """A data array without its rind planes, flat, the first axis fastest."""
    return np.asarray(_later(node, size, rind))


def _later(node: Node, size: tuple[int, ...], rind: list[int]) -> Array:
    """The same, read when it is wanted."""
    full = tuple(n + low + high for n, low, high in zip(size, rind[::2], rind[1::2]))[::-1]
    if node.shape() != full:
        raise FormatError(
            f"the array has the shape {node.shape()[::-1]} instead of {full[::-1]}",
            where=node.where,
            mend="Export the array again for the whole zone.",
        )
    window = tuple(slice(low, low + n) for n, low in zip(size, rind[::2]))[::-1]
    return later(node.dataset(), node.where, window=window, shape=(prod(size),))


def read_solutions(zone: Node, wanted: list[str] | None) -> tuple[dict[str, Array], dict[str, Array]]:
    """(point data, cell data) of the solutions called ``wanted``, or of all of them.

    Arrays of one name in several solutions are told apart as ``SOLUTION/NAME``.
    """
    size = size_of(zone)
    solutions = list(zone.children("FlowSolution_t"))
    if wanted is not None:
        known = {node.name for node in solutions}
        missing = [name for name in wanted if name not in known]
        if missing:
            raise FormatError(f"there is no solution '{missing[0]}'", where=zone.where, mend=safe.DAMAGED)
        solutions = [node for node in solutions if node.name in wanted]
    entries: list[tuple[bool, Node, Node]] = []
    for solution in solutions:
        location = solution.first("GridLocation_t")
        place = "Vertex" if location is None else location.text()
        partial = any(solution.child(name) is not None for name in ("PointList", "PointRange"))
        if partial or place in _ELSEWHERE:
            continue
        if place not in ("Vertex", "CellCenter"):
            raise FormatError(
                f"the location of a solution is '{place}'", where=solution.where, mend=safe.DAMAGED
            )
        for array in solution.children("DataArray_t"):
            data = array.dataset()
            if data is not None and safe.is_numeric(data, array.where):
                entries.append((place == "Vertex", solution, array))
    result: tuple[dict[str, Array], dict[str, Array]] = ({}, {})
    keys = [(at_points, array.name) for at_points, _, array in entries]
    for at_points, solution, array in entries:
        alone = keys.count((at_points, array.name)) == 1
        sizes = size.points if at_points else size.cells
        into = result[0] if at_points else result[1]
        into[array.name if alone else f"{solution.name}/{array.name}"] = _later(
            array, sizes, _rind(solution, len(sizes))
        )
    return result


def filled(data: dict[str, Array], cells: int) -> dict[str, Array]:
    """Cell arrays made as long as the cells of the piece: NaN (or 0) on the boundary elements behind."""
    result = {}
    for name, values in data.items():
        result[name] = values if cells == len(values) else _filled(values, cells)
    return result


def _filled(values: Array, cells: int) -> Array:
    filler = np.nan if values.dtype.kind == "f" else 0

    def read() -> Array:
        return np.concatenate([values, np.full(cells - len(values), filler, values.dtype)])

    return stored((cells,), values.dtype, read)
