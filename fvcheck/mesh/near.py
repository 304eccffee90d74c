"""What a control surface needs of a piece: the rest of it need not be held.

A ledger looks at the cells that its surface cuts, at some rings of cells around
them, at the cells inside if a law integrates over them, and at the boundary of the
domain, whose patches and bodies are named by all of it. So of each piece of a
partitioned export are kept the cells near a surface, those inside where they are
wanted, and those along the open edges of the piece, which are boundary or seam:
that is known only when all pieces are there. The edges at
which other cells are left out start at points marked in `Piece.cut`; they lie
rings away from any open edge of the whole piece, so that neither seams nor
boundary ever meet them.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np

from fvcheck.hints import Hint
from fvcheck.mesh.assemble import Assembly
from fvcheck.mesh.celltypes import polygons_of
from fvcheck.mesh.edges import edges_of
from fvcheck.mesh.gather import Polygons, Raw, expand_cells, gather
from fvcheck.mesh.mesh import Boundary, Mesh
from fvcheck.mesh.piece import NamedFaces, Piece
from fvcheck.mesh.plane import check_name, plane_of
from fvcheck.mesh.stored import at_rows
from fvcheck.mesh.tidy import tidy

Array = np.ndarray
Segments = tuple[Array, Array, bool]
"""Starts (s, 2) and ends (s, 2) of a surface's straight parts, and whether it bounds a volume."""


class Drawn(Protocol):
    """What is asked of a control surface, see `fvcheck.surfaces.ControlSurface`."""

    @property
    def kind(self) -> str: ...
    @property
    def rings(self) -> tuple[Array, ...]: ...
    @property
    def closed(self) -> bool: ...
    @property
    def text(self) -> str: ...


RINGS = 9
"""Rings of cells kept around: fits take five, two more where data are one-sided, one for a jump's range."""
_GRID = 256


def are_drawn(surfaces: Sequence[Drawn] | None) -> bool:
    """Whether there are surfaces, and all of them known without the mesh."""
    return all(surface.rings for surface in surfaces or ()) and bool(surfaces)


def near_pieces(pieces: Iterable[Piece], surfaces: Sequence[Drawn], plane: str) -> Iterator[Piece]:
    """The pieces, each cut down to what ``surfaces`` need before the next one is read."""
    return map(Cutter.of(surfaces, plane, True), pieces)


@dataclass(frozen=True, eq=False)
class Cutter:
    """Cuts a piece down to what surfaces need of it; without surfaces to its rim.

    inside : whether the cells inside of them are needed, or only those near their lines.
        What is not drawn runs along boundary, which is kept anyway
    """

    segments: tuple[Segments, ...]
    plane: str
    inside: bool

    @staticmethod
    def of(surfaces: Sequence[Drawn], plane: str, inside: bool) -> Cutter:
        """Raises SetupError for an unknown ``plane``."""
        check_name(plane)
        return Cutter(tuple(_segments(surface) for surface in surfaces if surface.rings), plane, inside)

    def __call__(self, piece: Piece) -> Piece:
        return _near(piece, self.segments, self.plane, self.inside)


def _segments(surface: Drawn) -> Segments:
    rings = [np.asarray(ring, float) for ring in surface.rings]
    if surface.closed:
        return np.concatenate(rings), np.concatenate([np.roll(ring, -1, axis=0) for ring in rings]), True
    return np.concatenate([ring[:-1] for ring in rings]), np.concatenate([ring[1:] for ring in rings]), False


def _near(piece: Piece, surfaces: Sequence[Segments], plane: str, inside: bool) -> Piece:
    """What is needed of a piece; one that is not sound and plane is left whole, for `assemble` to judge."""
    raw = gather([piece])
    flat = raw.cells_of(2)
    if len(flat) == 0 or (raw.dimension == 3).any():
        return piece
    cells = expand_cells(raw, flat, lambda kind, size: polygons_of(kind, size, False))
    used = np.zeros(len(raw.points), bool)
    used[cells.nodes] = True
    where = plane_of(raw.points if used.all() else raw.points[used], plane, raw.precision)
    points = where.coordinates(raw.points)
    hints: list[Hint] = []
    cells = tidy(points, cells, raw.precision, hints, flat_file=True)
    edges = edges_of(cells, len(points))
    if hints or edges.crowded is not None or 2 * len(edges.open) > len(cells.nodes):
        return piece
    kept = np.zeros(len(raw.types), bool)
    wanted = _wanted(points, cells, edges.start, surfaces, inside)
    if wanted.all():
        return piece
    kept[cells.source[wanted]] = True
    return _cut_down(piece, raw, kept)


def one_cell(piece: Piece) -> Piece | None:
    """The first plane cell of a piece, with its data; None where there is none, or a solid one."""
    raw = gather([piece])
    flat = raw.cells_of(2)
    if len(flat) == 0 or (raw.dimension == 3).any():
        return None
    kept = np.zeros(len(raw.types), bool)
    kept[flat[0]] = True
    alone = replace(raw, dimension=np.where(raw.dimension == 2, 2, -1))  # without lines
    return _cut_down(replace(piece, patches={}), alone, kept)


def lone(pieces: Sequence[Piece], *, plane: str, keep_centres: bool) -> Assembly:
    """What `assemble` makes of `one_cell`, without the search for boundary and hanging nodes."""
    raw = gather(pieces)
    where = plane_of(raw.points, plane, raw.precision)
    none = np.empty(0, np.int64)
    rim = Boundary(none.reshape(0, 2), none, none, ())
    mesh = Mesh(where.coordinates(raw.points), raw.offsets, raw.nodes, rim)
    number = np.arange(len(raw.points))
    return Assembly(mesh, number, number[:1], where.name, where.axes, where.origin, 0.0, ())


def _wanted(points: Array, cells: Polygons, rim: Array, surfaces: Sequence[Segments], within: bool) -> Array:
    """(m,) cells within `RINGS` of a surface or of the ``rim`` points; ``within``: or inside of one."""
    from fvcheck.kernels.blocks import block_boxes, grow_rings
    from fvcheck.kernels.grid import INSIDE, NEAR, build_grid, classify_cells
    from fvcheck.kernels.threads import use_for

    use_for(len(cells.source))
    boxes = block_boxes(points, cells.offsets, cells.nodes)
    inside, seeds = np.zeros(len(cells.source), bool), np.zeros(len(points), bool)
    seeds[rim] = True
    for start, end, closed in surfaces:
        status = classify_cells(points, cells.offsets, cells.nodes, boxes, build_grid(start, end, _GRID))
        seeds |= _points(cells, status == NEAR, len(points))
        if within and closed:
            inside |= status == INSIDE
    near, _ = grow_rings(points, cells.offsets, cells.nodes, boxes, np.flatnonzero(seeds), RINGS)
    return inside | (near > 0)


def _points(cells: Polygons, which: Array, n_points: int) -> Array:
    """(n,) points of the cells ``which`` (m,) bool, few of them."""
    out = np.zeros(n_points, bool)
    chosen = np.flatnonzero(which)
    first, sizes = cells.offsets[chosen], cells.offsets[chosen + 1] - cells.offsets[chosen]
    place = np.arange(sizes.sum()) + np.repeat(first - (np.cumsum(sizes) - sizes), sizes)
    out[cells.nodes[place]] = True
    return out


def _cut_down(piece: Piece, raw: Raw, kept: Array) -> Piece:
    """The piece with the 2D cells ``kept``, all lines and patches, and the points that these use."""
    dropped = (raw.dimension == 2) & ~kept
    sizes = np.diff(raw.offsets)
    here, gone = np.zeros(len(raw.points), bool), np.zeros(len(raw.points), bool)
    here[raw.nodes[np.repeat(kept, sizes)]] = True
    gone[raw.nodes[np.repeat(dropped, sizes)]] = True
    cut, lost = here & gone, gone & ~here
    kept = kept | (raw.dimension == 0) | (raw.dimension == 1)
    nodes = raw.nodes[np.repeat(kept, sizes)]
    used = np.zeros(len(raw.points), bool)
    used[nodes] = True
    for patch in piece.patches.values():
        used[patch.nodes] = True
    short = np.int32 if max(len(raw.nodes), len(used)) < 1 << 31 else np.int64
    number = (np.cumsum(used) - 1).astype(short)

    def renumbered(patch: NamedFaces) -> NamedFaces:
        return replace(patch, nodes=number[patch.nodes])

    return replace(
        piece,
        points=piece.points[used],
        types=raw.types[kept],
        offsets=np.concatenate([[0], np.cumsum(sizes[kept])]).astype(short),
        nodes=number[nodes],
        point_data={name: at_rows(values, used) for name, values in piece.point_data.items()},
        cell_data={name: at_rows(values, kept) for name, values in piece.cell_data.items()},
        ghost=None,
        faces=None,
        patches={name: renumbered(patch) for name, patch in piece.patches.items()},
        cut=cut[used],
        left_out=int(np.count_nonzero(dropped)),
        points_left_out=int(np.count_nonzero(lost)),
    )
