"""The plane mesh: polygons over points, and its boundary."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Boundary:
    """Edges that belong to one cell only, fluid on their left.

    edges : (e, 2) int64, start and end point, so that the outward normal is
        (dy, -dx)
    cells : (e,) int64, the cell each edge belongs to
    patch : (e,) int64, index into ``names``
    names : patch names, in a fixed order
    """

    edges: Array
    cells: Array
    patch: Array
    names: tuple[str, ...]


@dataclass(frozen=True, eq=False, repr=False)
class Mesh:
    """Plane polygonal mesh, conforming and counter-clockwise.

    points : (n, 2) float64
    offsets : (m+1,) int64
    nodes : (k,) int64; cell i is the simple polygon
        ``nodes[offsets[i]:offsets[i+1]]``, counter-clockwise, mid-edge and
        hanging nodes included
    boundary : the domain boundary, every edge in exactly one patch
    bodies : names of those patches that close a hole in the domain

    Arrays are never edited; a change makes a new mesh.
    """

    points: Array
    offsets: Array
    nodes: Array
    boundary: Boundary
    bodies: tuple[str, ...] = ()
    kinds: dict[str, str] = field(default_factory=dict)
    """patch name -> type stated by the file (``BCWall`` …), where it states one."""
    left_out: int = 0
    points_left_out: int = 0
    """Cells and points not held, since no surface of ``near`` (spellings) needs them."""
    near: tuple[str, ...] = ()
    hollow: bool = False
    """Whether cells inside of these are among those not held."""

    def __repr__(self) -> str:
        return f"<Mesh of {self.n_cells} cells, {self.n_points} points, {', '.join(self.boundary.names)}>"

    @property
    def n_points(self) -> int:
        return len(self.points)

    @property
    def n_cells(self) -> int:
        return len(self.offsets) - 1

    @cached_property
    def bounds(self) -> tuple[float, float, float, float]:
        """(x0, y0, x1, y1) of all points."""
        low, high = self.points.min(axis=0), self.points.max(axis=0)
        return float(low[0]), float(low[1]), float(high[0]), float(high[1])

    @cached_property
    def areas(self) -> Array:
        """(m,) cell areas, positive."""
        from fvcheck.kernels.cells import polygon_areas

        return polygon_areas(self.points, self.offsets, self.nodes)

    @cached_property
    def boxes(self) -> Array:
        """(b, 4) bounding boxes of runs of consecutive cells, see `fvcheck.kernels.blocks`."""
        from fvcheck.kernels.blocks import block_boxes
        from fvcheck.kernels.threads import use_for

        use_for(self.n_cells)
        return block_boxes(self.points, self.offsets, self.nodes)

    @cached_property
    def boundary_by_cell(self) -> tuple[Array, Array]:
        """Numbers (e,) of the boundary edges sorted by cell, and these cells (e,)."""
        order = np.argsort(self.boundary.cells, kind="stable")
        return order, self.boundary.cells[order]

    @cached_property
    def boundary_rounding(self) -> float:
        """How far the boundary's points may be off by the digits they are stored with, judged by these."""
        points = self.points[self.boundary.edges]
        single = np.array_equal(points.astype(np.float32).astype(float), points)
        epsilon = float(np.finfo(np.float32 if single else np.float64).eps)
        return float(4.0 * epsilon * np.abs(points).max(initial=0.0))

    def patch_edges(self, name: str) -> Array:
        """(e, 2) directed edges of one patch, fluid on their left."""
        index = self.boundary.names.index(name)
        return self.boundary.edges[self.boundary.patch == index]
