"""Deterministic meshes of every kind an export may have, and exact data on them.

Generators take a domain (x0, y0, x1, y1), a target size h and a seed, and return
``Cells(points, offsets, nodes)``, plain arrays of counter-clockwise polygons.
"""

from trial_meshes.averages import cell_averages, cell_integrals, cut_along, point_values
from trial_meshes.cells import Cells, from_lists, from_table, mapped, shuffled
from trial_meshes.graded import annulus, boundary_layer, channel, quadtree, with_hole
from trial_meshes.plane import merged, mixed, polygons, quads, triangles

__all__ = [
    "Cells",
    "annulus",
    "boundary_layer",
    "cell_averages",
    "cell_integrals",
    "channel",
    "cut_along",
    "from_lists",
    "from_table",
    "mapped",
    "merged",
    "mixed",
    "point_values",
    "polygons",
    "quads",
    "quadtree",
    "shuffled",
    "triangles",
    "with_hole",
]
