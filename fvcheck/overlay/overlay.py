"""The control volume V = (inside of the drawn surface) ∩ (meshed domain), in pieces.

Everything behind the overlay works on lists of straight pieces and triangles,
each lying in one mesh triangle; it never asks again where the surface runs.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.errors import MeshError, SurfaceError
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


def triangles_of(mesh: Mesh, cells: Array) -> tuple[Array, Array]:
    """Triangles (t, 3) of chosen cells, those of ``cells[j]`` in rows first[j]:first[j+1]; first (c+1,).

    Raises MeshError for a cell whose outline crosses itself: without its
    triangles it would be missing from every sum.
    """
    from fvcheck.kernels.triangulate import triangulate_cells

    triangles, first = triangulate_cells(mesh.points, mesh.offsets, mesh.nodes, cells)
    empty = np.flatnonzero(np.diff(first) == 0)
    if len(empty):
        cell = cells[empty[0]]
        x, y = mesh.points[mesh.nodes[mesh.offsets[cell] : mesh.offsets[cell + 1]]].mean(axis=0)
        raise MeshError(
            f"{len(empty)} cells near the control surface are no simple polygons",
            where=f"cell {cell} near x {x:.6g}, y {y:.6g}",
            mend="Repair the mesh, or keep the surface away from them.",
        )
    return triangles, first


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
    from fvcheck.kernels.threads import use_for

    grid = build_grid(start, end, _RESOLUTION)
    use_for(mesh.n_cells)
    status = classify_cells(mesh.points, mesh.offsets, mesh.nodes, grid)
    near = np.flatnonzero(status == NEAR)
    whole = np.flatnonzero(status == INSIDE) if closed else np.empty(0, np.int64)
    triangles, first = triangles_of(mesh, near)
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
    edge, triangle = _edge_triangles(mesh, np.flatnonzero(chosen))
    ends = mesh.points[mesh.boundary.edges[edge]]
    return _edge_pieces(mesh, edge, triangle, ends[:, 0], ends[:, 1], whole, closed)


def _edge_triangles(mesh: Mesh, chosen: Array) -> tuple[Array, Array]:
    """Boundary edges (e,), those chosen sorted by cell, and the triangle (e, 3) each lies on."""
    cells = np.unique(mesh.boundary.cells[chosen])
    triangles, first = triangles_of(mesh, cells)
    sides = _sides(mesh, cells, triangles, first)
    row, column = np.nonzero(sides >= 0)
    edge = sides[row, column]
    keep = np.isin(edge, chosen)
    return edge[keep], triangles[row[keep]]


def _edge_pieces(
    mesh: Mesh, edge: Array, triangle: Array, start: Array, end: Array, whole: Array, closed: bool
) -> Overlay:
    """Pieces start→end (n, 2) of the boundary edges ``edge`` (n,)."""
    none = np.empty(0, np.int64)
    return Overlay(
        start=start,
        end=end,
        triangle=triangle,
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

    A line along the domain boundary may be a rounding error inside or outside;
    its pieces are those of the boundary edges, in the drawn direction.
    """
    inside, along = _cut(mesh, start, end, False, 1), _along_boundary(mesh, start, end)
    return _join(_select(inside, ~_covered(mesh, inside, along)), along)


def _covered(mesh: Mesh, pieces: Overlay, by: Overlay) -> Array:
    """(n,) bool: which pieces have their middle on one of the others."""
    middle = 0.5 * (pieces.start + pieces.end)
    out = np.zeros(len(middle), bool)
    for a, b, slack in zip(by.start, by.end, _slack(mesh, by.lengths)):
        t = (b - a) / np.hypot(*(b - a))
        place, across = (middle - a) @ t, (middle - a) @ np.array([t[1], -t[0]])
        out |= (place > 0.0) & (place < np.hypot(*(b - a))) & (np.abs(across) <= slack)
    return out


def _along_boundary(mesh: Mesh, start: Array, end: Array) -> Overlay:
    """Parts of boundary edges that segments run along, in the direction of the segments."""
    a, b = (mesh.points[mesh.boundary.edges[:, k]] for k in (0, 1))
    slack = _slack(mesh, np.hypot(*(b - a).T))
    low, high = np.minimum(a, b) - slack[:, None], np.maximum(a, b) + slack[:, None]
    edges, begins, ends = [np.empty(0, np.int64)], [np.empty((0, 2))], [np.empty((0, 2))]
    for p, q in zip(start, end):
        near = (low <= np.maximum(p, q)).all(axis=1) & (high >= np.minimum(p, q)).all(axis=1)
        edge = np.flatnonzero(near)
        side = b[edge] - a[edge]
        length = np.hypot(*side.T)
        # Fractions along the edge and distances from it of the segment's two ends.
        fp, fq = (np.sum((x - a[edge]) * side, axis=1) / length**2 for x in (p, q))
        dp, dq = (
            (side[:, 0] * (x - a[edge])[:, 1] - side[:, 1] * (x - a[edge])[:, 0]) / length for x in (p, q)
        )
        f0, f1 = np.clip(fp, 0.0, 1.0), np.clip(fq, 0.0, 1.0)
        run = np.where(fp != fq, fq - fp, 1.0)
        d0, d1 = dp + (dq - dp) * (f0 - fp) / run, dp + (dq - dp) * (f1 - fp) / run
        on = (np.maximum(np.abs(d0), np.abs(d1)) <= slack[edge]) & (np.abs(f1 - f0) > 1e-9)
        # Of both faces of a plate without thickness, that with the fluid on the left.
        middle = a[edge] + 0.5 * (f0 + f1)[:, None] * side
        t = (middle - p) @ (q - p)
        reach = 0.5 * np.abs(f1 - f0) * np.abs(side @ (q - p))
        same = on & (f1 > f0)
        on &= (f1 > f0) | ~(np.abs(t[:, None] - t[same]) < reach[same]).any(axis=1)
        edges.append(edge[on])
        begins.append(a[edge[on]] + f0[on, None] * side[on])
        ends.append(a[edge[on]] + f1[on, None] * side[on])
    found = np.concatenate(edges)
    edge, triangle = _edge_triangles(mesh, np.unique(found))
    of_edge = np.zeros(len(a), np.int64)
    of_edge[edge] = np.arange(len(edge))
    pieces = triangle[of_edge[found]]
    none = np.empty(0, np.int64)
    return _edge_pieces(mesh, found, pieces, np.concatenate(begins), np.concatenate(ends), none, False)


def _label_coincident(mesh: Mesh, overlay: Overlay) -> Overlay:
    """Give drawn pieces that lie on the domain boundary, in its direction, to its patch.

    Whether a surface drawn along a wall comes out a rounding error inside or
    outside of it is chance; this makes the ledger the same in both cases. It
    moves no piece, so it cannot open the volume.
    """
    piece, edge, on, same_way = _coincident(mesh, overlay)
    patch = overlay.patch.copy()
    patch[piece[on & same_way]] = mesh.boundary.patch[edge[on & same_way]]
    return _replace(overlay, patch=patch)


def _coincident(mesh: Mesh, overlay: Overlay) -> tuple[Array, Array, Array, Array]:
    """Pairs of a drawn piece and a boundary edge of its cell.

    Returns (piece, edge, on, same_way): numbers, whether the piece lies on the
    edge, whether it runs in the edge's direction.
    """
    boundary = mesh.boundary
    order = np.argsort(boundary.cells, kind="stable")
    sorted_cells = boundary.cells[order]
    drawn = np.flatnonzero(overlay.patch == DRAWN)
    low = np.searchsorted(sorted_cells, overlay.cell[drawn], "left")
    count = np.searchsorted(sorted_cells, overlay.cell[drawn], "right") - low
    piece = np.repeat(drawn, count)
    edge = order[np.repeat(low - np.cumsum(count) + count, count) + np.arange(count.sum())]
    a, b = (mesh.points[boundary.edges[edge, k]] for k in (0, 1))
    length = np.hypot(*(b - a).T)
    tangent = (b - a) / length[:, None]
    normal = np.column_stack([tangent[:, 1], -tangent[:, 0]])
    p, q = overlay.start[piece], overlay.end[piece]
    slack = _slack(mesh, length)
    middle = np.sum((0.5 * (p + q) - a) * tangent, axis=1)
    on = (
        (np.abs(np.sum((p - a) * normal, axis=1)) <= slack)
        & (np.abs(np.sum((q - a) * normal, axis=1)) <= slack)
        & (middle >= 0.0)
        & (middle <= length)
    )
    return piece, edge, on, np.sum((q - p) * tangent, axis=1) > 0


def _slack(mesh: Mesh, length: Array) -> Array:
    """Distance within which a piece lies on a boundary edge of that length.

    Meshes stored in single precision are off a drawn line by their own rounding.
    """
    reach = np.abs(mesh.points[mesh.boundary.edges]).max(initial=0.0)
    return 1e-9 * length + 4.0 * _coordinate_epsilon(mesh) * reach


def _coordinate_epsilon(mesh: Mesh) -> float:
    """Relative precision the coordinates were stored with, judged by the boundary points."""
    points = mesh.points[mesh.boundary.edges]
    single = np.array_equal(points.astype(np.float32).astype(float), points)
    return float(np.finfo(np.float32 if single else np.float64).eps)


_PIECE_FIELDS = ("start", "end", "triangle", "cell", "patch", "winding")


def _replace(overlay: Overlay, **changes: Array) -> Overlay:
    from dataclasses import replace

    return replace(overlay, **changes)  # type: ignore[arg-type]


def _select(overlay: Overlay, keep: Array) -> Overlay:
    return _replace(overlay, **{name: getattr(overlay, name)[keep] for name in _PIECE_FIELDS})


def _join(first: Overlay, second: Overlay) -> Overlay:
    """Line pieces of both; the volume of the first."""
    return _replace(
        first,
        **{n: np.concatenate([getattr(first, n), getattr(second, n)]) for n in _PIECE_FIELDS},
    )
