"""The control volume V = (inside of the drawn surface) ∩ (meshed domain), in pieces.

Everything behind the overlay works on lists of straight pieces and triangles,
each lying in one mesh triangle; it never asks again where the surface runs.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from fvcheck.errors import SurfaceError
from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.coincident import along_boundary, covered, label_coincident
from fvcheck.overlay.pieces import (
    DRAWN,
    Overlay,
    boundary_sides,
    edge_pieces,
    edge_triangles,
    join,
    select,
    triangles_of,
)
from fvcheck.surfaces import ControlSurface

if TYPE_CHECKING:
    from fvcheck.kernels.overlay import Cuts

Array = np.ndarray

# Grid cells across the surface, by the root of the number of mesh cells: fine enough
# that few cells are looked at in vain, small enough to fill in a millisecond.
_RESOLUTION, _COARSEST, _FINEST = 0.35, 64, 512


def lay_over(mesh: Mesh, surface: ControlSurface) -> Overlay:
    """Cut the mesh by a resolved control surface.

    Raises SurfaceError when no part of the surface lies in the domain.
    """
    if mesh.left_out and surface.text not in mesh.near:
        raise SurfaceError(
            f"the cells that control surface {surface.name or surface.kind!r} needs were not kept",
            where=f"the flow was opened near {', '.join(mesh.near)}",
            mend="Open it near all surfaces, or without near.",
        )
    if surface.kind == "domain":
        return _boundary_only(mesh, np.ones(len(mesh.boundary.edges), bool), np.arange(mesh.n_cells), True)
    if surface.kind == "patch":
        chosen = mesh.boundary.patch == mesh.boundary.names.index(surface.target)
        return _boundary_only(mesh, chosen, np.empty(0, np.int64), False)
    start, end = _segments(surface)
    if surface.closed:
        overlay = label_coincident(mesh, _cut(mesh, start, end, True, 1))
        # Only the sign of the area tells the fluid inside from the rounding of nothing.
        found = overlay.held_area(mesh) > 1e-12 * abs(surface.area or 0.0)
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
    from fvcheck.kernels.blocks import distinct, group_boxes
    from fvcheck.kernels.grid import INSIDE, NEAR, build_grid, classify_cells
    from fvcheck.kernels.overlay import cut_triangles, winding_numbers
    from fvcheck.kernels.threads import use_for

    # The same grid for a mesh cut down to what is near: pieces come in the same order then.
    cells = mesh.n_cells + mesh.left_out
    grid = build_grid(start, end, min(max(int(_RESOLUTION * cells**0.5), _COARSEST), _FINEST))
    use_for(mesh.n_cells)
    status = classify_cells(mesh.points, mesh.offsets, mesh.nodes, mesh.boxes, grid)
    near = np.flatnonzero(status == NEAR)
    enclosed_edges = status[mesh.boundary.cells] == INSIDE
    triangles, first = triangles_of(mesh, near)
    sides = boundary_sides(mesh, near, triangles, first)

    corners = distinct(triangles.ravel(), mesh.n_points)
    winding = np.zeros(mesh.n_points, np.int64) if closed else np.zeros(1, np.int64)
    if closed:
        winding[corners] = winding_numbers(mesh.points, corners, start, end, grid, shift)
    boxes = group_boxes(mesh.points, triangles, first)
    cuts = cut_triangles(
        mesh.points, triangles, first, boxes, sides, winding, start, end, grid, shift, closed
    )
    cell_of = np.repeat(near, np.diff(first))
    whole = np.empty(0, np.int64)
    if closed:
        cuts, uncut = _without_uncut(cuts, mesh.points[triangles].reshape(-1, 6), first)
        status[near[uncut]] = INSIDE  # their boundary edges are among the cuts already
        whole = np.flatnonzero(status == INSIDE)

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
    enclosed = _boundary_only(mesh, enclosed_edges, whole, True)
    return join(parts, enclosed)


def _without_uncut(cuts: Cuts, corners: Array, first: Array) -> tuple[Cuts, Array]:
    """The cuts without those cells that lie wholly inside after all, and the numbers of these.

    corners : (t, 6) of the triangles, group c in rows first[c]:first[c+1]
    """
    count = len(first) - 1
    group = np.repeat(np.arange(count), np.diff(first))
    of_area = group[cuts.area[:, 0]]
    full = (cuts.area[:, 1] == 1) & (cuts.area_corners == corners[cuts.area[:, 0]]).all(axis=1)
    whole = np.bincount(group[cuts.drawn[:, 0]], minlength=count) == 0
    # Each of its triangles once, and nothing else.
    for pieces in (of_area, of_area[full]):
        whole &= np.bincount(pieces, minlength=count) == np.diff(first)
    keep = ~whole[of_area]
    return cuts._replace(area_corners=cuts.area_corners[keep], area=cuts.area[keep]), np.flatnonzero(whole)


def _boundary_only(mesh: Mesh, chosen: Array, whole: Array, closed: bool) -> Overlay:
    """Whole boundary edges (chosen: bool per boundary edge), no drawn piece, no cut cell."""
    edge, triangle = edge_triangles(mesh, np.flatnonzero(chosen))
    ends = mesh.points[mesh.boundary.edges[edge]]
    return edge_pieces(mesh, edge, triangle, ends[:, 0], ends[:, 1], whole, closed)


def _open_line(mesh: Mesh, start: Array, end: Array) -> Overlay:
    """Pieces of an open line.

    A line along the domain boundary may be a rounding error inside or outside;
    its pieces are those of the boundary edges, in the drawn direction.
    """
    inside, along = _cut(mesh, start, end, False, 1), along_boundary(mesh, start, end)
    return join(select(inside, ~covered(mesh, inside, along)), along)
