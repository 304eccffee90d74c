"""Is the boundary that was found the boundary of the flow? Blocks that overlap, seams that stayed open."""

from __future__ import annotations

import numpy as np

from fvcheck.errors import MeshError
from fvcheck.hints import Hint
from fvcheck.mesh.boundary import Loops, ring_area
from fvcheck.mesh.stitch import WIDER

Array = np.ndarray

FACING = 0.02
"""Open edges nearer to one another than this share of their length look like one seam."""
NARROW = 1e-3
"""Area over squared perimeter below which a hole looks like a gap; a plate of 1 % thickness has 2.5e-3."""
OVERLAP = 1e-3
MOST_REGIONS = 2000
"""A mesh in more parts than this is no mesh of a flow; naming all their sides would take minutes."""


def check_joined(n_cells: int, n_open: int, n_half_edges: int) -> None:
    """Refuse a mesh nearly all of whose half-edges are open, before anything is searched along them."""
    if n_cells > MOST_REGIONS and n_open > 0.9 * n_half_edges:
        raise _falls_apart(n_cells)


def _falls_apart(count: int) -> MeshError:
    return MeshError(
        f"the mesh falls apart into {count} regions: neighbouring cells do not share points",
        mend="Export more digits of the coordinates, or cells with shared points.",
    )


def check_regions(points: Array, edges: Array, loops: Loops) -> None:
    """Refuse a mesh that falls apart, or whose separate regions lie on one another.

    points (n, 2), edges (e, 2) of the boundary. Only the loops are compared, so
    the cost is that of the boundary; a region in a hole of another is fine.
    Raises MeshError.
    """
    outer = np.flatnonzero(~loops.hole)
    if len(outer) > MOST_REGIONS:
        raise _falls_apart(len(outer))
    if len(outer) < 2:
        return
    import shapely

    def filled(which: Array) -> Array:
        rings = [points[edges[loops.chain(c), 0]] for c in which.tolist()]
        return shapely.make_valid(
            np.array([shapely.Polygon(ring) for ring in rings if len(ring) > 2], object)
        )

    shapes, empty = filled(outer), filled(np.flatnonzero(loops.hole))
    first, second = shapely.STRtree(shapes).query(shapes, predicate="intersects")
    first, second = first[first < second], second[first < second]
    common = shapely.intersection(shapes[first], shapes[second])
    least = OVERLAP * np.minimum(shapely.area(shapes[first]), shapely.area(shapes[second]))
    common = common[shapely.area(common) > least]
    if len(common) == 0:
        return
    common = shapely.difference(common, shapely.union_all(empty))
    if (shapely.area(common) > least.min()).any():
        place = common[np.argmax(shapely.area(common))].representative_point()
        raise MeshError(
            "parts of the mesh overlap",
            where=f"near x = {place.x:.6g}, y = {place.y:.6g}",
            mend="Leave out overlapping blocks, or export a mesh that covers the domain once.",
        )


def seam_hints(points: Array, edges: Array, loops: Loops, patch: Array) -> list[Hint]:
    """Say where edges that no patch of the file covers (``patch`` -1) look like seams that stayed open."""
    out = []
    bare = patch < 0
    count = _facing(points, edges[bare])
    if count:
        text = f"{count} boundary edges face another edge within {FACING:.0%} of their length"
        out.append(Hint("open-seams", text))
    covered = np.zeros(len(loops), bool)
    covered[loops.of_edge()[~bare]] = True
    narrow = 0
    for c in np.flatnonzero(loops.hole & ~covered).tolist():
        ring = points[edges[loops.chain(c), 0]]
        perimeter = float(np.linalg.norm(np.roll(ring, -1, axis=0) - ring, axis=1).sum())
        narrow += 0 < abs(ring_area(ring)) < NARROW * perimeter**2
    if narrow:
        out.append(Hint("narrow-holes", f"{narrow} holes are so narrow that they may be gaps between blocks"))
    return out


def _facing(points: Array, edges: Array) -> int:
    """Number of edges whose middle lies close to that of another, not on it, running the other way."""
    from fvcheck.kernels.vicinity import crowds

    if len(edges) < 2:
        return 0
    step = points[edges[:, 1]] - points[edges[:, 0]]
    length = np.hypot(*step.T)
    middle = points[edges].mean(axis=1)
    x, y = np.ascontiguousarray(middle.T)
    if crowds(x, y, x, y, WIDER * FACING * length).max() < 2:
        return 0  # nothing is near enough; loading the tree takes longer than the count
    from scipy.spatial import cKDTree

    found = cKDTree(middle).query(middle, k=2, distance_upper_bound=FACING * float(length.max()))
    distance, other = (np.asarray(column)[:, 1] for column in found)
    near = other < len(edges)
    a, b = np.flatnonzero(near), other[near]
    close = (distance[near] > 1e-12 * length[a]) & (
        distance[near] < FACING * np.minimum(length[a], length[b])
    )
    opposite = (step[a] * step[b]).sum(axis=1) < -0.9 * length[a] * length[b]
    return int(np.count_nonzero(close & opposite))
