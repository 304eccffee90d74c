"""A 3D export one cell thick, reduced to the plane."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from fvcheck.errors import MeshError
from fvcheck.mesh.celltypes import POLYHEDRON, QUADRATIC_SOLIDS, SOLID_FACES, WEDGE_FACES, Part
from fvcheck.mesh.gather import Polygons, Raw
from fvcheck.mesh.piece import Piece
from fvcheck.mesh.plane import (
    AXES,
    NORMAL_COLUMN,
    Plane,
    at_level,
    check_name,
    main_directions,
    rotated_axes,
    slack,
)
from fvcheck.mesh.wedge import Wedge, find_wedge

Array = np.ndarray

_ADVICE = (
    "Export a plane mesh, a slice, or a run that is one cell thick; the sides of a wedge have to meet in a "
    "coordinate axis."
)
_FRONT, _BACK, _BETWEEN, _ELSEWHERE, _AXIS = 0, 1, 2, 3, 4


@dataclass(frozen=True, eq=False)
class Layer:
    """The front plane of a one-cell-thick export: its cells, which raw points lie in it, the thickness.

    wedge : where the planes meet in an axis; ``plane`` is then the mid plane, which
        the points have to be turned onto
    """

    plane: Plane
    cells: Polygons
    front: Array
    thickness: float
    wedge: Wedge | None = None


def flatten(pieces: Sequence[Piece], raw: Raw, wanted: str) -> Layer:
    """Take the front face of every 3D cell.

    The front plane is the one with the larger coordinate along the plane's
    normal. The planes may be parallel, or meet in a coordinate axis at a small
    angle. Raises MeshError when the points do not lie in two such planes or a
    cell does not reach from one to the other.
    """
    check_name(wanted)
    cells = raw.cells_of(3)
    kinds = np.unique(raw.types[cells]).tolist()
    tapered = next((kind for kind in kinds if kind not in SOLID_FACES and kind != POLYHEDRON), None)
    if tapered is not None and any(kind not in WEDGE_FACES and kind != POLYHEDRON for kind in kinds):
        raise _tapered(tapered)
    faces = _global_faces(pieces, raw)
    own = np.isin(np.arange(len(raw.points)), _nodes_of(raw, cells, faces))
    used = raw.points[own]
    tolerance = slack(used, raw.precision)
    between = any(kind in QUADRATIC_SOLIDS for kind in kinds)
    for name, axes in _directions(raw, cells, used, wanted) if tapered is None else ():
        heights = used @ axes[2] if name == "rotated" else used[:, NORMAL_COLUMN[name]] * axes[2].sum()
        low, high = float(heights.min()), float(heights.max())
        near = (heights - low <= tolerance) | (high - heights <= tolerance)
        if between:
            near |= np.abs(heights - 0.5 * (low + high)) <= tolerance
        if high - low > 4 * tolerance and near.all():
            break
    else:
        wedge = find_wedge(used, wanted, 4 * tolerance)
        if wedge is not None:
            return _of_wedge(raw, cells, faces, wedge, 4 * tolerance)
        if tapered is not None:
            raise _tapered(tapered)
        raise MeshError(
            "the 3D cells are not one cell thick: their points do not lie in two parallel planes"
            + ("" if wanted == "auto" else f" parallel to {wanted}"),
            mend=_ADVICE,
        )
    plane = at_level(name, axes, high)
    heights = raw.points @ axes[2]
    side = np.full(len(raw.points), _ELSEWHERE, np.int8)
    side[np.abs(heights - 0.5 * (low + high)) <= tolerance] = _BETWEEN
    side[np.abs(heights - low) <= tolerance] = _BACK
    side[np.abs(heights - high) <= tolerance] = _FRONT
    return Layer(plane, _front_cells(raw, cells, faces, side, SOLID_FACES), side == _FRONT, high - low)


def _of_wedge(raw: Raw, cells: Array, faces: _AllFaces, wedge: Wedge, tolerance: float) -> Layer:
    front, back, on_axis = wedge.sides(raw.points, tolerance)
    side = np.full(len(raw.points), _ELSEWHERE, np.int8)
    for mask, where in ((back, _BACK), (front, _FRONT), (on_axis, _AXIS)):
        side[mask] = where
    outlines = _front_cells(raw, cells, faces, side, WEDGE_FACES)
    return Layer(at_level(wedge.name, wedge.axes, 0.0), _simple(outlines), front | on_axis, 0.0, wedge)


def _simple(cells: Polygons) -> Polygons:
    """Outlines without the points that a collapsed cell lists twice in a row."""
    before = np.roll(cells.nodes, 1)
    before[cells.offsets[:-1]] = cells.nodes[cells.offsets[1:] - 1]
    keep = cells.nodes != before
    if keep.all():
        return cells
    offsets = np.concatenate([[0], np.cumsum(np.add.reduceat(keep.astype(np.int64), cells.offsets[:-1]))])
    return Polygons(offsets, cells.nodes[keep], cells.source)


def _tapered(kind: int) -> MeshError:
    return MeshError(
        f"3D cells of type {kind} (tetrahedra, pyramids or the like) cannot be one cell thick",
        mend=_ADVICE,
    )


def _directions(raw: Raw, cells: Array, used: Array, wanted: str) -> Iterator[tuple[str, Array]]:
    names = ("xy", "xz", "yz") if wanted == "auto" else (wanted,)
    for name in names:
        yield name, AXES[name]
    if wanted == "auto":
        # Two parallel copies of one point set: their normal is an axis of the covariance, to rounding.
        for direction in main_directions(used):
            yield "rotated", rotated_axes(direction)


@dataclass(frozen=True, eq=False)
class _AllFaces:
    """Faces of the polyhedra of all pieces, in raw point and cell numbers."""

    cell_offsets: Array
    cell_faces: Array
    face_offsets: Array
    face_nodes: Array


def _global_faces(pieces: Sequence[Piece], raw: Raw) -> _AllFaces:
    cell_offsets, cell_faces = [np.zeros(1, np.int64)], []
    face_offsets, face_nodes = [np.zeros(1, np.int64)], []
    n_faces = n_refs = n_nodes = 0
    for piece, base in zip(pieces, raw.point_start):
        faces = piece.faces
        if faces is None:
            cell_offsets.append(np.full(len(piece.types), n_refs))
            continue
        nodes = np.asarray(faces.face_nodes, np.int64)
        refs = np.asarray(faces.cell_faces, np.int64)
        offsets, starts = np.asarray(faces.face_offsets, np.int64), np.asarray(faces.cell_offsets, np.int64)
        for name, values, limit in (("node", nodes, len(piece.points)), ("face", refs, len(offsets) - 1)):
            if len(values) and (values.min() < 0 or values.max() >= limit):
                raise MeshError(f"a polyhedron uses a {name} that does not exist", where=piece.name or None)
        for values, count in ((offsets, len(nodes)), (starts, len(refs))):
            if len(values) == 0 or values[0] != 0 or values[-1] != count or (np.diff(values) < 0).any():
                raise MeshError("the face lists of polyhedra do not fit together", where=piece.name or None)
        if len(starts) != len(piece.types) + 1:
            raise MeshError("the face lists do not fit the number of cells", where=piece.name or None)
        cell_offsets.append(starts[1:] + n_refs)
        cell_faces.append(refs + n_faces)
        face_offsets.append(offsets[1:] + n_nodes)
        face_nodes.append(nodes + base)
        n_faces, n_refs, n_nodes = n_faces + len(offsets) - 1, n_refs + len(refs), n_nodes + len(nodes)
    none = np.zeros(0, np.int64)
    return _AllFaces(
        np.concatenate(cell_offsets),
        np.concatenate([none, *cell_faces]),
        np.concatenate(face_offsets),
        np.concatenate([none, *face_nodes]),
    )


def _nodes_of(raw: Raw, cells: Array, faces: _AllFaces) -> Array:
    """Points of 3D cells (with repeats); those of polyhedra from their faces."""
    mask = np.zeros(len(raw.types), bool)
    mask[cells[raw.types[cells] != POLYHEDRON]] = True
    plain = raw.nodes[np.repeat(mask, np.diff(raw.offsets))]
    mask = np.zeros(len(raw.types), bool)
    mask[cells[raw.types[cells] == POLYHEDRON]] = True
    of_cell = faces.cell_faces[np.repeat(mask, np.diff(faces.cell_offsets))]
    wanted = np.zeros(len(faces.face_offsets) - 1, bool)
    wanted[of_cell] = True
    return np.concatenate([plain, faces.face_nodes[np.repeat(wanted, np.diff(faces.face_offsets))]])


def _front_cells(
    raw: Raw, cells: Array, faces: _AllFaces, side: Array, faces_of: dict[int, tuple[int, list[Part]]]
) -> Polygons:
    from fvcheck.kernels.prisms import front_faces, front_faces_of_polyhedra

    solid = raw.types[cells] == POLYHEDRON
    kinds = sorted(faces_of)
    plain, poly = cells[~solid], cells[solid]
    sizes = raw.offsets[plain + 1] - raw.offsets[plain]
    expected = np.array([faces_of[kind][0] for kind in kinds])
    template = np.searchsorted(kinds, raw.types[plain])
    if (sizes != expected[template]).any():
        bad = int(plain[np.argmax(sizes != expected[template])])
        raise MeshError(f"cell {bad} has a wrong number of nodes for its type {raw.types[bad]}")
    every = [face for kind in kinds for face in faces_of[kind][1]]
    offsets, nodes = front_faces(
        plain,
        raw.offsets,
        raw.nodes,
        template,
        np.cumsum([0, *(len(faces_of[kind][1]) for kind in kinds)]),
        np.cumsum([0, *(len(face) for face in every)]),
        np.array([node for face in every for node in face]),
        side,
    )
    source = plain
    if len(poly):
        more_offsets, more_nodes = front_faces_of_polyhedra(
            faces.cell_offsets[poly],
            faces.cell_offsets[poly + 1],
            faces.cell_faces,
            faces.face_offsets,
            faces.face_nodes,
            side,
        )
        offsets = np.concatenate([offsets, more_offsets[1:] + offsets[-1]])
        nodes, source = np.concatenate([nodes, more_nodes]), np.concatenate([plain, poly])
    empty = np.diff(offsets) == 0
    if empty.any():
        raise MeshError(
            f"cell {source[np.argmax(empty)]} does not have one face in the front and one in the back plane",
            mend=_ADVICE,
        )
    return Polygons(offsets, nodes, source)
