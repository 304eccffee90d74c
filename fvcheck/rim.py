"""Values that a file gives on the domain boundary itself, beside those of its cells.

Exports of cell-centred runs often carry line cells along the patches. Their data
may be the boundary values of the run, copies of the cells behind them, or
filler; only the first are worth anything to a fit.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace

import numpy as np

from fvcheck.fields import Field, choose_fields
from fvcheck.hints import Hint
from fvcheck.mesh.assemble import Assembly
from fvcheck.mesh.mesh import Mesh
from fvcheck.mesh.piece import Piece

Array = np.ndarray

_LINE = 3  # VTK_LINE

_CONDITIONS = ("velocity", "temperature")

# A boundary value may differ from the cell behind it by so many times what the
# cells around differ among themselves; filler, such as zeros, differs by far more.
_PLAUSIBLE = 2.0


def line_cells(pieces: Sequence[Piece], assembly: Assembly) -> tuple[Array, Array]:
    """Boundary edges that a two-node line cell lies on, and its number over all raw cells."""
    from scipy.spatial import cKDTree

    middles, numbers, first = [], [], 0
    for piece in pieces:
        lines = np.flatnonzero(piece.types == _LINE)
        ends = piece.nodes[piece.offsets[lines][:, None] + np.arange(2)]
        flat = (np.asarray(piece.points, float) - assembly.origin) @ assembly.axes[:2].T
        middles.append(flat[ends].mean(axis=1))
        numbers.append(first + lines)
        first += len(piece.types)
    raw, places = np.concatenate(numbers), np.concatenate(middles)
    mesh = assembly.mesh
    ends = mesh.points[mesh.boundary.edges]
    if len(raw) == 0 or len(ends) == 0:
        return np.empty(0, np.int64), np.empty(0, np.int64)
    distance, nearest = (np.asarray(part) for part in cKDTree(places).query(ends.mean(axis=1)))
    on = distance < 1e-3 * np.hypot(*(ends[:, 1] - ends[:, 0]).T)
    return np.flatnonzero(on), raw[nearest[on]]


def with_rim(
    fields: Mapping[str, Field],
    mesh: Mesh,
    edges: Array,
    line_data: Mapping[str, Array],
    in_plane: Callable[[str, Field], Array],
) -> tuple[dict[str, Field], tuple[Hint, ...]]:
    """The fields, those at cells with the boundary values that are believable.

    edges : (k,) boundary edges; line_data : name -> array (k, …) there;
    in_plane : values of a field along the axes of the plane. Believed patch by
    patch: values that repeat the cells behind say nothing, values far outside
    of what the cells around hold are filler. A pressure on the boundary is no
    condition of the run but its solver's own extrapolation, so it stays out.
    """
    out, hints = dict(fields), []
    for role, field in fields.items():
        given = all(name in line_data for name in field.name.split(","))
        if field.location != "cell" or not given or not (role in _CONDITIONS or role.startswith("scalar:")):
            continue
        # Alone, since other arrays of the file may claim other roles together.
        alone = {name: line_data[name] for name in field.name.split(",")}
        lines = choose_fields({}, alone, {role: field.name})[0][role]
        values = in_plane(role, lines)
        rim = np.full((len(mesh.boundary.edges), *field.values.shape[1:]), np.nan)
        believed = []
        for number, name in enumerate(mesh.boundary.names):
            here = mesh.boundary.patch[edges] == number
            if here.any() and _believable(mesh, field.values, edges[here], values[here]):
                rim[edges[here]] = values[here]
                believed.append(name)
        if believed:
            out[role] = replace(field, rim=rim)
            where = ", ".join(believed)
            hints.append(Hint("patch-values", f"{role} on {where} is taken from the line cells of the file"))
    return out, tuple(hints)


def _believable(mesh: Mesh, values: Array, edges: Array, at_edges: Array) -> bool:
    behind = values[mesh.boundary.cells[edges]]
    step = np.abs(at_edges - behind).reshape(len(edges), -1).max(axis=1)
    if not np.isfinite(step).all() or np.all(step == 0.0):
        return False
    return bool(np.mean(step <= _PLAUSIBLE * _variation(mesh, values, edges)) > 0.9)


def _variation(mesh: Mesh, values: Array, edges: Array) -> Array:
    """(k,) largest difference among the cells within two rings of each edge's two points.

    One ring would hold only the cells along a wall, all as far from it.
    """
    from fvcheck.kernels.neighbours import ring_range

    data = np.ascontiguousarray(values, float).reshape(mesh.n_cells, -1)
    low, high = ring_range(mesh.offsets, mesh.nodes, mesh.n_points, False, data)
    low, _ = ring_range(mesh.offsets, mesh.nodes, mesh.n_points, True, low)
    _, high = ring_range(mesh.offsets, mesh.nodes, mesh.n_points, True, high)
    ends = mesh.boundary.edges[edges]
    return (high[ends].max(axis=1) - low[ends].min(axis=1)).max(axis=1)
