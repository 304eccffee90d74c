"""Polygons made simple and counter-clockwise."""

from __future__ import annotations

import numpy as np

from fvcheck.errors import MeshError
from fvcheck.hints import Hint
from fvcheck.mesh.gather import Polygons

Array = np.ndarray


def tidy(points: Array, cells: Polygons, precision: float, hints: list[Hint], *, flat_file: bool) -> Polygons:
    """Drop repeated nodes and cells without area, turn clockwise cells, refuse crossing outlines.

    points (n, 2). Adds the hints "zero-area-cells" and, where only some cells
    are clockwise and the order is the file's own (``flat_file``), "clockwise-cells".
    """
    from fvcheck.kernels.polygons import (
        outline_faults,
        select,
        shape_measures,
        sound_triangles,
        without_repeats,
    )

    offsets, nodes = cells.offsets, cells.nodes
    if len(offsets) > 1 and sound_triangles(points, offsets, nodes, precision):
        return cells
    if _repeats(offsets, nodes):
        offsets, nodes = without_repeats(offsets, nodes)
    area, perimeter, size = shape_measures(points, offsets, nodes)
    # A stored coordinate is off by up to half a spacing; what that does to the area is no area.
    rounding = precision * size
    solid = np.abs(area) > rounding * perimeter
    if not solid.all():
        lost = int(np.count_nonzero(~solid))
        if lost == len(solid):
            raise MeshError("no cell has an area", mend="Export the cells of a plane mesh.")
        hints.append(Hint("zero-area-cells", f"{lost} cells without area are left out"))
    clockwise = area < 0
    turned = int(np.count_nonzero(clockwise & solid))
    if flat_file and 0 < turned < np.count_nonzero(solid):
        few = min(turned, int(np.count_nonzero(solid)) - turned)
        hints.append(Hint("clockwise-cells", f"{few} of {len(solid)} cells run the other way round; turned"))
    if turned or not solid.all():
        offsets, nodes = select(offsets, nodes, solid, clockwise)
    source = cells.source if solid.all() else cells.source[solid]
    if np.diff(offsets).max(initial=0) <= 3:  # triangles with an area are sound
        return Polygons(offsets, nodes, source)
    faults = outline_faults(points, offsets, nodes, 2 * rounding[solid])
    for cell in np.flatnonzero(faults).tolist():
        ring = points[nodes[offsets[cell] : offsets[cell + 1]]]
        if faults[cell] == 2 and _valid(ring):
            continue
        raise MeshError(
            f"the outline of cell {source[cell]} crosses or touches itself",
            where=f"near x = {ring[:, 0].mean():.6g}, y = {ring[:, 1].mean():.6g}",
            mend="Its nodes are in a wrong order, or the mesh is folded: repair the export.",
        )
    return Polygons(offsets, nodes, source)


def _repeats(offsets: Array, nodes: Array) -> bool:
    """Whether `without_repeats` would change anything."""
    sizes = np.diff(offsets)
    if len(sizes) == 0 or sizes.min() < 3 or (nodes[offsets[1:] - 1] == nodes[offsets[:-1]]).any():
        return True
    same = nodes[1:] == nodes[:-1]
    same[offsets[1:-1] - 1] = False  # the last node of a cell and the first of the next
    return bool(same.any())


def _valid(ring: Array) -> bool:
    from shapely import Polygon

    return bool(Polygon(ring).is_valid)
