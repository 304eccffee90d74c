"""From raw pieces to the plane mesh."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from fvcheck.errors import MeshError
from fvcheck.hints import Hint
from fvcheck.mesh.boundary import bodies, trace
from fvcheck.mesh.celltypes import polygons_of
from fvcheck.mesh.claims import FACE, LINE, collect
from fvcheck.mesh.edges import Edges, edges_of
from fvcheck.mesh.extrusion import flatten
from fvcheck.mesh.finder import Finder
from fvcheck.mesh.gather import Polygons, expand_cells, gather
from fvcheck.mesh.hanging import insert_hanging
from fvcheck.mesh.mesh import Boundary, Mesh
from fvcheck.mesh.piece import Piece
from fvcheck.mesh.plane import check_name, plane_of, slack
from fvcheck.mesh.sides import name_all
from fvcheck.mesh.soundness import check_joined, check_regions, seam_hints
from fvcheck.mesh.stitch import stitch
from fvcheck.mesh.tidy import tidy

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Assembly:
    """The plane mesh of an export, and where its points, cells and axes come from.

    point_source : (n_points,) raw point (points of all pieces behind one
        another) that gives each mesh point its data
    cell_source : (n_cells,) raw cell, likewise; several mesh cells share one
        where a cell was split
    plane : "xy", "xz", "yz" or "rotated"
    axes : (3, 3), rows e1, e2 and normal n = e1 × e2; a vector becomes ``axes @ vector``
    origin : (3,); plane coordinates are (raw - origin) @ e1, e2. It has no
        in-plane part, so that coordinates stay those of the file
    thickness : of a one-cell-thick export, else 0
    point_axes : as ``axes``, for data at points where those lie in another plane
        than the mesh: the front plane of a wedge
    wedge : of an export between two planes that meet in an axis, the coordinate
        (0, 1) that runs along it
    """

    mesh: Mesh
    point_source: Array
    cell_source: Array
    plane: str
    axes: Array
    origin: Array
    thickness: float
    hints: tuple[Hint, ...]
    point_axes: Array | None = None
    wedge: int | None = None


def assemble(pieces: Sequence[Piece], *, plane: str = "auto", keep_centres: bool = False) -> Assembly:
    """Build the plane mesh of ``pieces``.

    ``plane`` forces a coordinate plane. ``keep_centres`` (for point data) splits
    quadratic cells with a node inside, so that its value is kept; otherwise
    that node is dropped.

    Raises MeshError where the cells make no plane mesh: no 2D cells, not flat,
    not one cell thick, crossing outlines, overlapping cells, damaged lists;
    SetupError for an unknown ``plane``.
    """
    check_name(plane)
    hints: list[Hint] = []
    raw = gather(pieces)
    front, thickness, wedge = None, 0.0, None
    solid = bool((raw.dimension == 3).any())
    if solid:
        layer = flatten(pieces, raw, plane)
        where, cells, front, thickness = layer.plane, layer.cells, layer.front, layer.thickness
        wedge = layer.wedge
        if wedge is not None:
            raw = replace(raw, points=wedge.onto_middle(raw.points))
    else:
        flat = raw.cells_of(2)
        if len(flat) == 0:
            raise MeshError(
                "there are no 2D cells" + (", only lines" if (raw.dimension == 1).any() else ""),
                mend="Export the cells of the flow domain.",
            )
        cells = expand_cells(raw, flat, lambda kind, size: polygons_of(kind, size, keep_centres))
        used = np.zeros(len(raw.points), bool)
        used[cells.nodes] = True
        where = plane_of(raw.points if used.all() else raw.points[used], plane, raw.precision)
    points = where.coordinates(raw.points)
    cells = tidy(points, cells, raw.precision, hints, flat_file=not solid)
    claims = collect(pieces, raw, front)
    if wedge is not None:
        # Faces on the sides of a wedge reach the axis too, but are no boundary of the half plane.
        on_axis = points[:, 1 - wedge.axis] <= 4 * slack(points, raw.precision)
        off = ~on_axis[claims.ends].all(axis=1)
        claims = replace(
            claims,
            ends=claims.ends[off],
            patch=claims.patch[off],
            face=claims.face[off],
            origin=claims.origin[off],
        )
    cut = _cut_points(pieces)
    edges = _real_edges(cells, cut)
    seams = stitch(points, cells, edges, raw, pieces, claims, hints)
    number, finder, precision = seams.number, seams.finder, raw.precision
    del raw
    if seams.merged:
        del edges  # no two of each at a time
        merged = Polygons(cells.offsets, number[cells.nodes], cells.source)
        cells = tidy(points, merged, precision, hints, flat_file=False)
        del merged
        edges = _real_edges(cells, cut)
    check_joined(len(cells.source), len(edges.open), len(cells.nodes))
    filled = insert_hanging(points, cells, edges, finder, number, precision, hints)
    if filled is not cells:
        cells, edges = filled, _real_edges(filled, cut)
    mesh, point_source = _mesh(points, cells, edges, finder, number, hints)
    left_out = [sum(counts) for counts in zip(*((p.left_out, p.points_left_out) for p in pieces))]
    mesh = replace(mesh, left_out=left_out[0], points_left_out=left_out[1])
    return Assembly(
        mesh,
        point_source,
        cells.source,
        where.name,
        where.axes,
        where.origin,
        thickness,
        tuple(hints),
        point_axes=None if wedge is None else wedge.front_axes,
        wedge=None if wedge is None else wedge.axis,
    )


def _cut_points(pieces: Sequence[Piece]) -> Array:
    """(n,) raw points at which cells were left out."""
    return np.concatenate(
        [np.zeros(len(piece.points), bool) if piece.cut is None else piece.cut for piece in pieces]
    )


def _real_edges(cells: Polygons, cut: Array) -> Edges:
    """Open edges but those to cells left out."""
    edges = edges_of(cells, len(cut))
    return edges.without(cut) if cut.any() else edges


def _mesh(
    points: Array, cells: Polygons, edges: Edges, finder: Finder, number: Array, hints: list[Hint]
) -> tuple[Mesh, Array]:
    """Number the points, find the boundary and its patches."""
    from fvcheck.kernels.polygons import renumber

    if edges.crowded is not None:
        a, b, cell = edges.crowded
        x, y = 0.5 * (points[a] + points[b])
        raise MeshError(
            f"cells overlap: an edge of cell {cells.source[cell]} has more than one cell on a side",
            where=f"near x = {x:.6g}, y = {y:.6g}",
            mend="Leave out blocks that lie on one another, or repair the mesh.",
        )
    start, end, owner = edges.start, edges.end, edges.cell
    patch, met = finder.find(start, end, number)
    _hint_unmet(finder, met, hints)
    new_number, source, nodes = renumber(cells.nodes, len(points))
    rim = np.column_stack([new_number[start], new_number[end]])
    xy = np.ascontiguousarray(points[source])
    loops = trace(rim, xy)
    check_regions(xy, rim, loops)
    hints += seam_hints(xy, rim, loops, patch)
    present = [name for i, name in enumerate(finder.claims.names) if (patch == i).any()]
    index = np.array([present.index(n) if n in present else -1 for n in finder.claims.names] + [-1])
    patch, names = name_all(xy, rim, loops, index[patch], present)
    kinds = {name: kind for name, kind in finder.claims.kinds.items() if name in names}
    boundary = Boundary(rim, owner, patch, names)
    return Mesh(xy, cells.offsets, nodes, boundary, bodies(loops, patch, names), kinds), source


def _hint_unmet(finder: Finder, met: Array, hints: list[Hint]) -> None:
    """Say how many line cells and named faces are no edge of the boundary."""
    claims = finder.claims
    for origin, code, text in (
        (LINE, "inner-lines", "line cells lie inside the domain and mark no patch"),
        (FACE, "unknown-faces", "faces of named patches are no edges of the boundary"),
    ):
        mine = claims.origin == origin
        faces = np.setdiff1d(claims.face[mine], claims.face[mine & met])
        if len(faces):
            hints.append(Hint(code, f"{len(faces)} {text}"))
