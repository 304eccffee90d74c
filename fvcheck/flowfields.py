"""The arrays of an export on its plane mesh, and the roles they play there."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from fvcheck.errors import FieldError
from fvcheck.fieldnames import VECTORS
from fvcheck.fields import Field, choose_fields
from fvcheck.hints import Hint
from fvcheck.mesh.assemble import Assembly
from fvcheck.mesh.piece import Piece
from fvcheck.mesh.stored import Stored, as_array, at_rows, stored
from fvcheck.rim import line_cells, with_rim

Array = np.ndarray


def mesh_arrays(pieces: Sequence[Piece], assembly: Assembly) -> tuple[dict[str, Array], dict[str, Array]]:
    """Arrays of an export at the points and at the cells of its plane mesh."""
    return (
        _joined(pieces, "point_data", assembly.point_source),
        _joined(pieces, "cell_data", assembly.cell_source),
    )


def read_fields(
    pieces: Sequence[Piece], assembly: Assembly, told: Mapping[str, str | Sequence[str]]
) -> tuple[dict[str, Field], tuple[Hint, ...]]:
    """Role -> field of what is told and what known names say, vectors in the axes of the plane.

    Cell fields come with the values that line cells give on the boundary. FieldError
    where no array has a known meaning, and as `choose_fields` says.
    """
    mesh = assembly.mesh
    point_data, cell_data = mesh_arrays(pieces, assembly)
    chosen, hints = choose_fields(point_data, cell_data, told, n_points=mesh.n_points, n_cells=mesh.n_cells)
    if not chosen:
        names = ", ".join(sorted({*point_data, *cell_data})) or "none"
        raise FieldError(
            "no array of a known meaning",
            where=f"arrays: {names}",
            mend="Name them with --field velocity=NAME …",
        )
    for role, field in chosen.items():
        chosen[role] = replace(field, values=in_plane(role, field, assembly))
    if not any(field.location == "cell" for field in chosen.values()):
        return chosen, hints
    edges, lines = line_cells(pieces, assembly)
    chosen, more = with_rim(
        chosen,
        mesh,
        edges,
        _joined(pieces, "cell_data", lines),
        lambda role, field: in_plane(role, field, assembly),
    )
    return chosen, hints + more


def in_plane(role: str, field: Field, assembly: Assembly) -> Array:
    """Values of a field; of a vector the components (n, 3) along the axes of the plane."""
    if role.removeprefix("rate:") not in VECTORS:
        return field.values
    if len(field.slots) == 2 and field.slots == (0, 1) and assembly.plane != "xy":
        if "," in field.name:
            raise FieldError(
                f"{role} has components along x and y, but the run lies in the {assembly.plane} plane",
                where=field.name,
                mend=f"Name the components of that plane with --field {role}=V1,V2,V3.",
            )
        # An array of two components can only mean the two of the plane.
        return field.values
    if field.location == "point" and assembly.point_axes is not None:
        return _turn(field.values, assembly.point_axes)
    return _turn(field.values, assembly.axes)


def _turn(values: Array, axes: Array) -> Array:
    """Vectors (n, 3) in the axes of the plane; the plain x-y plane costs nothing."""
    if np.array_equal(axes, np.eye(3)):
        return values
    return (values @ axes.T.astype(values.dtype)).astype(values.dtype)


def _joined(pieces: Sequence[Piece], kind: str, source: Array) -> dict[str, Array]:
    """Arrays that every contributing piece holds, taken at ``source`` (numbers over all pieces)."""
    sizes = [len(p.points) if kind == "point_data" else len(p.types) for p in pieces]
    first = np.concatenate([[0], np.cumsum(sizes)])
    used = np.unique(np.searchsorted(first, source, side="right") - 1)
    if len(used) == 0:
        return {}
    names = set.intersection(*(set(getattr(pieces[u], kind)) for u in used))
    # Most meshes take every value where it stands: nothing is copied then.
    as_stored = len(used) == 1 and np.array_equal(source, np.arange(first[used[0]], first[used[0] + 1]))
    if as_stored:
        return dict(getattr(pieces[used[0]], kind))
    # Pieces that give nothing stay out, so numbers must skip them.
    skipped = np.zeros(len(pieces), np.int64)
    skipped[used] = first[used] - np.concatenate([[0], np.cumsum([sizes[u] for u in used])[:-1]])
    piece_of = np.searchsorted(first, source, side="right") - 1
    rows = source - skipped[piece_of]
    out = {}
    for name in getattr(pieces[used[0]], kind):
        if name not in names:
            continue
        parts = [as_array(getattr(pieces[u], kind)[name]) for u in used]
        if len({part.shape[1:] for part in parts}) == 1:
            out[name] = _behind_one_another(parts, rows)
    return out


def _behind_one_another(parts: list[Array], rows: Array) -> Array:
    """Rows of arrays put behind one another; read when they are wanted where one of these is."""
    if len(parts) == 1:
        return at_rows(parts[0], rows)

    def joined() -> Array:
        return np.concatenate([np.asarray(part) for part in parts])[rows]

    if not any(isinstance(part, Stored) for part in parts):
        return joined()
    return stored((len(rows), *parts[0].shape[1:]), np.result_type(*(part.dtype for part in parts)), joined)
