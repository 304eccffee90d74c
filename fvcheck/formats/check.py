"""What every reader guarantees before it hands a piece over.

Readers of other libraries let indices out of range pass and crash on them
later; after `check_piece` none is left.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.mesh.piece import Array, Faces, NamedFaces, Piece
from fvcheck.mesh.stored import Stored, as_array

DAMAGED = "The file is damaged or incomplete; export it again."
# Cell types of the VTK file formats (https://docs.vtk.org, "VTK File Formats") and
# their node counts: the linear, quadratic and biquadratic cells of fixed size.
# fmt: off
NODE_COUNTS = {
    1: 1, 3: 2, 5: 3, 8: 4, 9: 4, 10: 4, 11: 8, 12: 8, 13: 6, 14: 5, 15: 10, 16: 12,
    21: 3, 22: 6, 23: 8, 24: 10, 25: 20, 26: 15, 27: 13, 28: 9, 29: 27, 30: 6, 31: 12,
    32: 18, 33: 24, 34: 7, 35: 4, 37: 19,
}
# fmt: on
# Types of any size and the least number of nodes: poly vertex, poly line, triangle strip,
# polygon, quadratic polygon, polyhedron.
LEAST_COUNTS = {2: 1, 4: 2, 6: 3, 7: 3, 36: 6, 42: 4}
_EXACT, _LEAST = np.full(256, -1, np.int64), np.zeros(256, np.int64)
for _kind, _count in NODE_COUNTS.items():
    _EXACT[_kind] = _LEAST[_kind] = _count
for _kind, _count in LEAST_COUNTS.items():
    _LEAST[_kind] = _count
_KNOWN = _LEAST > 0
_RUN = 1 << 16


def check_piece(piece: Piece, where: object) -> Piece:
    """The same piece, its arrays in native byte order and C order, if it can be trusted.

    Checked: shape and finiteness of the points; cell types known; offsets that
    start at 0, never fall and end at the length of ``nodes``; node counts by
    type; node numbers within 0 … n-1; array lengths; the faces of polyhedra and
    of patches. NaN in a data array is left in place for a later layer.

    ``where`` stands in the message, such as the file. Raises `FormatError`.
    """
    spot = f"{where}, {piece.name}" if piece.name else str(where)
    points = _points(piece.points, spot)
    types = _types(piece.types, spot)
    offsets = _offsets(piece.offsets, len(types), len(piece.nodes), "cell offsets", spot)
    nodes = _ids(piece.nodes, len(points), "node", "points", spot)
    _counts(types, offsets, spot)
    checked = replace(
        piece,
        points=points,
        types=types,
        offsets=offsets,
        nodes=nodes,
        point_data=_data(piece.point_data, len(points), "point", spot),
        cell_data=_data(piece.cell_data, len(types), "cell", spot),
        ghost=_ghost(piece.ghost, len(types), spot),
        faces=_faces(piece.faces, types, len(points), spot),
        patches={name: _patch(name, patch, len(points), spot) for name, patch in piece.patches.items()},
    )
    return checked


def _points(points: Array, spot: str) -> Array:
    points = np.asarray(points)
    if points.ndim != 2 or points.shape[1] != 3:
        raise FormatError(
            f"the points have the shape {points.shape} instead of (n, 3)", where=spot, mend=DAMAGED
        )
    if len(points) == 0:
        raise FormatError("there are no points", where=spot, mend="Export the mesh with its points.")
    if points.dtype.kind != "f":
        points = points.astype(np.float64)
    if points.dtype.itemsize not in (4, 8):
        points = points.astype(np.float64)
    points = _native(points)
    if not np.isfinite(points).all():
        first = int(np.argmin(np.isfinite(points).all(axis=1)))
        raise FormatError(
            f"point {first} has a coordinate that is no finite number", where=spot, mend=DAMAGED
        )
    return points


def _types(types: Array, spot: str) -> Array:
    types = np.asarray(types)
    if types.ndim != 1 or len(types) == 0:
        raise FormatError("there are no cells", where=spot, mend="Export the mesh with its cells.")
    known = _KNOWN[types] if types.dtype == np.uint8 else np.isin(types, np.flatnonzero(_KNOWN))
    if not known.all():
        first = int(np.argmin(known))
        raise FormatError(
            f"cell {first} has the cell type {types[first]}, which cannot be read",
            where=spot,
            mend="Export linear or quadratic cells.",
        )
    return np.ascontiguousarray(types, dtype=np.uint8)


def _offsets(offsets: Array, count: int, total: int, what: str, spot: str) -> Array:
    offsets = np.asarray(offsets)
    if offsets.shape != (count + 1,) or offsets.dtype.kind not in "iu":
        raise FormatError(f"the {what} do not fit {count} entries", where=spot, mend=DAMAGED)
    offsets = np.ascontiguousarray(offsets, dtype=np.int64)
    if offsets[0] != 0 or offsets[-1] != total or (offsets[1:] < offsets[:-1]).any():
        raise FormatError(
            f"the {what} do not run from 0 to {total} without falling", where=spot, mend=DAMAGED
        )
    return offsets


def _ids(ids: Array, limit: int, what: str, among: str, spot: str) -> Array:
    ids = np.asarray(ids)
    if ids.ndim != 1 or ids.dtype.kind not in "iu":
        raise FormatError(f"the {what} numbers are no list of integers", where=spot, mend=DAMAGED)
    if len(ids) and (ids.min() < 0 or ids.max() >= limit):
        wrong = (ids < 0) | (ids >= limit)
        first = int(np.argmax(wrong))
        raise FormatError(
            f"{what} number {ids[first]} lies outside the {limit} {among} of the mesh",
            where=spot,
            mend=DAMAGED,
        )
    return np.ascontiguousarray(ids, dtype=np.int64)


def _counts(types: Array, offsets: Array, spot: str) -> None:
    for begin in range(0, len(types), _RUN):  # run by run, so that no temporary is as large as the mesh
        kinds = types[begin : begin + _RUN]
        counts = np.diff(offsets[begin : begin + _RUN + 1])
        wrong = (counts < _LEAST[kinds]) | ((_EXACT[kinds] >= 0) & (counts != _EXACT[kinds]))
        if wrong.any():
            first = int(np.argmax(wrong))
            raise FormatError(
                f"cell {begin + first} of type {kinds[first]} has {counts[first]} nodes",
                where=spot,
                mend=DAMAGED,
            )


def _data(data: dict[str, Array], count: int, kind: str, spot: str) -> dict[str, Array]:
    return {name: _array(name, values, count, kind, spot) for name, values in data.items()}


def _array(name: str, values: Array, count: int, kind: str, spot: str) -> Array:
    values = as_array(values)
    if values.dtype.kind not in "iufb":
        raise FormatError(f"the {kind} array '{name}' holds no numbers", where=spot, mend=DAMAGED)
    if values.ndim not in (1, 2) or len(values) != count:
        raise FormatError(
            f"the {kind} array '{name}' has {len(values) if values.ndim else 0} values for {count} {kind}s",
            where=spot,
            mend="Export the array again for the whole mesh.",
        )
    return values if isinstance(values, Stored) else _native(values)


def _ghost(ghost: Array | None, count: int, spot: str) -> Array | None:
    if ghost is None:
        return None
    if np.shape(ghost) != (count,):
        raise FormatError(f"the ghost marks do not fit the {count} cells", where=spot, mend=DAMAGED)
    return np.ascontiguousarray(ghost, dtype=bool)


def _faces(faces: Faces | None, types: Array, points: int, spot: str) -> Faces | None:
    solid = types == 42
    if faces is None:
        if solid.any():
            raise FormatError("there are polyhedra without faces", where=spot, mend=DAMAGED)
        return None
    stored = len(faces.face_offsets) - 1
    face_offsets = _offsets(faces.face_offsets, stored, len(faces.face_nodes), "face offsets", spot)
    cell_offsets = _offsets(faces.cell_offsets, len(types), len(faces.cell_faces), "face lists", spot)
    if (np.diff(face_offsets) < 3).any():
        raise FormatError("a face of a polyhedron has fewer than 3 nodes", where=spot, mend=DAMAGED)
    if (np.diff(cell_offsets)[solid] < 4).any():
        raise FormatError("a polyhedron has fewer than 4 faces", where=spot, mend=DAMAGED)
    return Faces(
        face_offsets,
        _ids(faces.face_nodes, points, "face node", "points", spot),
        cell_offsets,
        _ids(faces.cell_faces, stored, "face", "faces", spot),
    )


def _patch(name: str, patch: NamedFaces, points: int, spot: str) -> NamedFaces:
    spot = f"{spot}, patch {name}"
    count = len(patch.offsets) - 1
    offsets = _offsets(patch.offsets, count, len(patch.nodes), "face offsets", spot)
    return replace(patch, offsets=offsets, nodes=_ids(patch.nodes, points, "node", "points", spot))


def _native(values: Array) -> Array:
    return np.ascontiguousarray(values, dtype=values.dtype.newbyteorder("="))
