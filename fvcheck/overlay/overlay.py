"""The control volume V = (inside of the drawn surface) ∩ (meshed domain), in pieces.

Everything behind the overlay works on lists of straight pieces and triangles,
each lying in one mesh triangle; it never asks again where the surface runs.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.errors import SurfaceError
from fvcheck.mesh.mesh import Mesh
from fvcheck.surfaces import ControlSurface

Array = np.ndarray

DRAWN = -1
"""Value of `Overlay.patch` for pieces that the analyst drew inside the fluid."""

# Grid cells across the surface: fine enough that few cells are looked at in
# vain on a million-cell mesh, small enough to fill in a millisecond.
_RESOLUTION = 256


@dataclass(frozen=True, eq=False)
class Overlay:
    """Pieces of the border of V, and V itself.

    start, end : (n, 2) piece ends; V lies on the left, so the outward normal
        times the length is (dy, -dx)
    triangle : (n, 3) mesh points of the triangle that holds the piece
    cell : (n,) its mesh cell
    patch : (n,) index into ``mesh.boundary.names``, `DRAWN` for drawn pieces
    winding : (n,) how often V covers the piece (1, except where surfaces overlap)
    whole : (w,) cells that lie entirely inside
    corners : (c, 3, 2) signed triangles that make up the cut part of V
    corner_triangle : (c, 3), corner_cell : (c,), corner_weight : (c,)
    closed : whether there is a volume at all
    """

    start: Array
    end: Array
    triangle: Array
    cell: Array
    patch: Array
    winding: Array
    whole: Array
    corners: Array
    corner_triangle: Array
    corner_cell: Array
    corner_weight: Array
    closed: bool

    @property
    def normals(self) -> Array:
        """(n, 2) outward normal times length."""
        step = self.end - self.start
        return np.column_stack([step[:, 1], -step[:, 0]]) * self.winding[:, None]

    @property
    def lengths(self) -> Array:
        """(n,) piece lengths."""
        return np.hypot(*(self.end - self.start).T)

    @property
    def corner_areas(self) -> Array:
        """(c,) signed areas, weight included: summed with the whole cells they are V's area."""
        a, b, c = self.corners[:, 0], self.corners[:, 1], self.corners[:, 2]
        u, v = b - a, c - a
        return 0.5 * self.corner_weight * (u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0])

    def area(self, mesh: Mesh) -> float:
        """Area of V."""
        return float(mesh.areas[self.whole].sum() + self.corner_areas.sum())


def lay_over(mesh: Mesh, surface: ControlSurface) -> Overlay:
    """Cut the mesh by a resolved control surface.

    Raises SurfaceError when no part of the surface lies in the domain.
    """
    if surface.kind == "domain":
        return _boundary_only(mesh, np.ones(len(mesh.boundary.edges), bool), np.arange(mesh.n_cells), True)
    if surface.kind == "patch":
        chosen = mesh.boundary.patch == mesh.boundary.names.index(surface.target)
        return _boundary_only(mesh, chosen, np.empty(0, np.int64), False)
    start, end = _segments(surface)
    if surface.closed:
        overlay = _label_coincident(mesh, _cut(mesh, start, end, True, 1))
        # Only the sign of the area tells the fluid inside from the rounding of nothing.
        found = overlay.area(mesh) > 1e-12 * abs(surface.area or 0.0)
    else:
        overlay = _open_line(mesh, start, end)
        found = len(overlay.start) > 0
    if not found:
        x0, y0, x1, y1 = mesh.bounds
        raise SurfaceError(
            f"control surface {surface.name or surface.kind!r} lies outside the domain",
            where=f"the mesh covers x {x0:.6g} to {x1:.6g}, y {y0:.6g} to {y1:.6g}",
            mend="Draw it where there is fluid; fvcheck inspect shows the mesh and its patches.",
        )
    return overlay


def _segments(surface: ControlSurface) -> tuple[Array, Array]:
    starts, ends = [], []
    for ring in surface.rings:
        ring = np.ascontiguousarray(ring, float)
        starts.append(ring if surface.closed else ring[:-1])
        ends.append(np.roll(ring, -1, axis=0) if surface.closed else ring[1:])
    return np.concatenate(starts), np.concatenate(ends)


def _cut(mesh: Mesh, start: Array, end: Array, closed: bool, shift: int) -> Overlay:
    from fvcheck.kernels.grid import INSIDE, NEAR, build_grid, classify_cells
    from fvcheck.kernels.overlay import cut_triangles, winding_numbers
    from fvcheck.kernels.triangulate import triangulate_cells

    grid = build_grid(start, end, _RESOLUTION)
    status = classify_cells(mesh.points, mesh.offsets, mesh.nodes, grid)
    near = np.flatnonzero(status == NEAR)
    whole = np.flatnonzero(status == INSIDE) if closed else np.empty(0, np.int64)
    triangles, first = triangulate_cells(mesh.points, mesh.offsets, mesh.nodes, near)
    sides = _sides(mesh, near, triangles, first)

    corners = np.unique(triangles)
    winding = np.zeros(mesh.n_points, np.int64) if closed else np.zeros(1, np.int64)
    if closed:
        winding[corners] = winding_numbers(mesh.points, corners, start, end, grid, shift)
    boxes = _boxes(mesh.points, triangles, first)
    cuts = cut_triangles(
        mesh.points, triangles, first, boxes, sides, winding, start, end, grid, shift, closed
    )
    cell_of = np.repeat(near, np.diff(first))

    drawn = np.full(len(cuts.drawn), DRAWN)
    edge_patch = mesh.boundary.patch[cuts.edge[:, 1]]
    triangle = np.concatenate([cuts.drawn[:, 0], cuts.edge[:, 0]])
    ends = np.concatenate([cuts.drawn_ends, cuts.edge_ends])
    parts = Overlay(
        start=ends[:, :2],
        end=ends[:, 2:],
        triangle=triangles[triangle],
        cell=cell_of[triangle],
        patch=np.concatenate([drawn, edge_patch]),
        winding=np.concatenate([np.ones(len(drawn), np.int64), cuts.edge[:, 2]]),
        whole=whole,
        corners=cuts.area_corners.reshape(-1, 3, 2),
        corner_triangle=triangles[cuts.area[:, 0]],
        corner_cell=cell_of[cuts.area[:, 0]],
        corner_weight=cuts.area[:, 1],
        closed=closed,
    )
    if not closed:
        return parts
    enclosed = _boundary_only(mesh, status[mesh.boundary.cells] == INSIDE, whole, True)
    return _join(parts, enclosed)


def _boundary_only(mesh: Mesh, chosen: Array, whole: Array, closed: bool) -> Overlay:
    """Whole boundary edges (chosen: bool per boundary edge), no drawn piece, no cut cell."""
    from fvcheck.kernels.triangulate import triangulate_cells

    index = np.flatnonzero(chosen)
    index = index[np.argsort(mesh.boundary.cells[index], kind="stable")]
    cells = np.unique(mesh.boundary.cells[index])
    triangles, first = triangulate_cells(mesh.points, mesh.offsets, mesh.nodes, cells)
    sides = _sides(mesh, cells, triangles, first)
    row, column = np.nonzero(sides >= 0)
    edge = sides[row, column]
    keep = chosen[edge]
    row, edge = row[keep], edge[keep]
    ends = mesh.points[mesh.boundary.edges[edge]]
    none = np.empty(0, np.int64)
    return Overlay(
        start=ends[:, 0],
        end=ends[:, 1],
        triangle=triangles[row],
        cell=mesh.boundary.cells[edge],
        patch=mesh.boundary.patch[edge],
        winding=np.ones(len(edge), np.int64),
        whole=whole,
        corners=np.empty((0, 3, 2)),
        corner_triangle=np.empty((0, 3), np.int64),
        corner_cell=none,
        corner_weight=none,
        closed=closed,
    )


def _sides(mesh: Mesh, cells: Array, triangles: Array, first: Array) -> Array:
    """(t, 3) number of the boundary edge on each triangle side, or -1."""
    from fvcheck.kernels.overlay import find_sides

    order = np.argsort(mesh.boundary.cells, kind="stable")
    sorted_cells = mesh.boundary.cells[order]
    low = np.searchsorted(sorted_cells, cells, "left")
    count = np.searchsorted(sorted_cells, cells, "right") - low
    edge_first = np.concatenate([[0], np.cumsum(count)])
    picked = order[np.repeat(low - edge_first[:-1], count) + np.arange(edge_first[-1])]
    local = find_sides(triangles, first, edge_first, mesh.boundary.edges[picked])
    if len(picked) == 0:
        return local
    return np.where(local >= 0, picked[np.maximum(local, 0)], -1)


def _boxes(points: Array, triangles: Array, first: Array) -> Array:
    """(cells, 4) bounding boxes x0, y0, x1, y1 of groups of triangles."""
    if len(triangles) == 0:
        return np.zeros((len(first) - 1, 4))
    corners = points[triangles]
    # reduceat cannot take empty groups; they are never looked at either.
    at = np.minimum(first[:-1], len(triangles) - 1)
    low = np.minimum.reduceat(corners.min(axis=1), at)
    high = np.maximum.reduceat(corners.max(axis=1), at)
    return np.hstack([low, high])


def _open_line(mesh: Mesh, start: Array, end: Array) -> Overlay:
    """Pieces of an open line.

    Where the line runs along the domain boundary, the infinitesimal translation
    moves it in or out; what one direction loses the other one finds.
    """
    plus = _cut(mesh, start, end, False, 1)
    minus = _cut(mesh, start, end, False, -1)
    if abs(plus.lengths.sum() - minus.lengths.sum()) <= 1e-12 * plus.lengths.sum():
        return plus
    middle = 0.5 * (minus.start + minus.end)
    covered = _covered(middle, plus.start, plus.end)
    return _join(plus, _select(minus, ~covered))


def _covered(points: Array, start: Array, end: Array) -> Array:
    """(n,) bool: which points lie on one of the segments, to 1e-9 of its length."""
    out = np.zeros(len(points), bool)
    for a, b in zip(start, end):
        length = np.hypot(*(b - a))
        t = (b - a) / length
        along = (points - a) @ t
        across = (points - a) @ np.array([t[1], -t[0]])
        out |= (along > 0) & (along < length) & (np.abs(across) < 1e-9 * length)
    return out


def _label_coincident(mesh: Mesh, overlay: Overlay) -> Overlay:
    """Give drawn pieces that lie on the domain boundary, in its direction, to its patch.

    Whether a surface drawn along a wall comes out a rounding error inside or
    outside of it is chance; this makes the ledger the same in both cases. It
    moves no piece, so it cannot open the volume.
    """
    boundary = mesh.boundary
    order = np.argsort(boundary.cells, kind="stable")
    sorted_cells = boundary.cells[order]
    drawn = np.flatnonzero(overlay.patch == DRAWN)
    low = np.searchsorted(sorted_cells, overlay.cell[drawn], "left")
    count = np.searchsorted(sorted_cells, overlay.cell[drawn], "right") - low
    if count.sum() == 0:
        return overlay
    pair_piece = np.repeat(drawn, count)
    pair_edge = order[np.repeat(low - np.cumsum(count) + count, count) + np.arange(count.sum())]
    a, b = (mesh.points[boundary.edges[pair_edge, k]] for k in (0, 1))
    along = b - a
    length = np.hypot(*along.T)
    tangent = along / length[:, None]
    normal = np.column_stack([tangent[:, 1], -tangent[:, 0]])
    p, q = overlay.start[pair_piece], overlay.end[pair_piece]
    # Meshes stored in single precision are off a drawn line by their own rounding.
    reach = np.abs(mesh.points[boundary.edges]).max() if len(boundary.edges) else 0.0
    slack = 1e-9 * length + 4.0 * _coordinate_epsilon(mesh) * reach
    on = (np.abs(np.sum((p - a) * normal, axis=1)) <= slack) & (
        np.abs(np.sum((q - a) * normal, axis=1)) <= slack
    )
    same_way = np.sum((q - p) * tangent, axis=1) > 0
    patch = overlay.patch.copy()
    patch[pair_piece[on & same_way]] = boundary.patch[pair_edge[on & same_way]]
    return _replace(overlay, patch=patch)


def _coordinate_epsilon(mesh: Mesh) -> float:
    """Relative precision the coordinates were stored with, judged by the boundary points."""
    points = mesh.points[mesh.boundary.edges]
    single = np.array_equal(points.astype(np.float32).astype(float), points)
    return float(np.finfo(np.float32 if single else np.float64).eps)


_PIECE_FIELDS = ("start", "end", "triangle", "cell", "patch", "winding")


def _replace(overlay: Overlay, **changes: Array) -> Overlay:
    from dataclasses import replace

    return replace(overlay, **changes)


def _select(overlay: Overlay, keep: Array) -> Overlay:
    return _replace(overlay, **{name: getattr(overlay, name)[keep] for name in _PIECE_FIELDS})


def _join(first: Overlay, second: Overlay) -> Overlay:
    """Line pieces of both; the volume of the first."""
    return _replace(
        first,
        **{n: np.concatenate([getattr(first, n), getattr(second, n)]) for n in _PIECE_FIELDS},
    )
