"""The mesh of the demo case: a channel with a tilted bar, triangles between layers of quadrangles.

Quadrangles line the walls and the bar and fill the two ends of the channel;
triangles, finest at the bar and in its wake, fill what lies between. Lengths in
metres, x along the channel, the lower wall at y = 0.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from .mesh import Mesh, build_mesh
from .placement import along, fill, graded

Array = np.ndarray
MM = 1e-3


@dataclass(frozen=True)
class Bar:
    """A rectangle with rounded corners, turned by ``angle`` degrees (nose up against the stream)."""

    x: float = 16 * MM
    y: float = 7.4 * MM
    length: float = 4 * MM
    thickness: float = 2.4 * MM
    radius: float = 0.6 * MM
    angle: float = 25.0

    @property
    def axes(self) -> Array:
        """(2, 2) rows: unit vectors along the length and across it."""
        turn = np.radians(-self.angle)
        return np.array([[np.cos(turn), np.sin(turn)], [-np.sin(turn), np.cos(turn)]])

    def distance(self, points: Array) -> Array:
        """Distance to the surface, negative inside the bar."""
        local = np.abs((points - [self.x, self.y]) @ self.axes.T)
        past = local - (np.array([self.length, self.thickness]) / 2 - self.radius)
        return np.linalg.norm(np.maximum(past, 0), axis=1) + np.minimum(past.max(axis=1), 0) - self.radius

    def surface(self, n: int, even_at: float) -> tuple[Array, Array]:
        """(n, 2) points on the surface, counter-clockwise, and the outward unit normals there.

        They are evenly spaced not on the surface but at the height ``even_at`` above
        it, which crowds them at the corners, where the flow changes fastest.
        """
        half = np.array([self.length, self.thickness]) / 2 - self.radius
        # Quarter by quarter: a side, then the arc that follows it. The normal's angle grows along arcs only.
        corners = np.array([[1, -1], [1, 1], [-1, 1], [-1, -1], [1, -1]]) * half
        sides = np.linalg.norm(np.diff(corners, axis=0), axis=1)
        lengths = np.column_stack([sides, np.full(4, 0.5 * np.pi * (self.radius + even_at))]).ravel()
        ends = np.concatenate([[0], np.cumsum(lengths)])
        s = ends[-1] * (np.arange(n) + 0.5) / n
        piece = np.searchsorted(ends, s, side="right") - 1
        share = (s - ends[piece]) / lengths[piece]
        quarter, on_arc = np.divmod(piece, 2)
        turned = 0.5 * np.pi * (quarter + on_arc * share)
        normal = np.column_stack([np.cos(turned), np.sin(turned)])
        along_side = np.where(on_arc, 1, share)[:, None]
        centre = (1 - along_side) * corners[quarter] + along_side * corners[quarter + 1]
        return (centre + self.radius * normal) @ self.axes + [self.x, self.y], normal @ self.axes


@dataclass(frozen=True)
class Duct:
    """A straight channel around a bar, and how finely it is meshed.

    ``h`` scales all cells: with half of it there are about four times as many.
    """

    length: float = 56 * MM
    height: float = 16 * MM
    bar: Bar = field(default_factory=Bar)
    h: float = 1.0
    seed: int = 2

    wall_layer = 1.2 * MM
    bar_layer = 0.7 * MM
    triangles_from = 4 * MM
    triangles_to = 40 * MM

    def size(self, points: Array) -> Array:
        """Wanted edge length: fine at the bar, less so in its wake, coarse elsewhere."""
        bar = self.bar
        wake = points - [bar.x, bar.y]
        wake[:, 0] -= np.clip(wake[:, 0], 0, 14 * MM)
        near = 0.34 * MM + 0.16 * np.maximum(bar.distance(points) - self.bar_layer, 0)
        behind = 0.46 * MM + 0.15 * np.linalg.norm(wake, axis=1)
        return self.h * np.minimum(np.minimum(near, behind), 1.0 * MM)

    def mesh(self) -> Mesh:
        """Patches inlet (x = 0), outlet (x = length), wall and bar.

        Raises ValueError if the triangles do not fit to the layers.
        """
        grid, quads, frame = self._grid()
        around, layers = self._layers_around_bar()
        points = np.concatenate([grid, around.reshape(-1, 2)])
        layers += len(grid)
        outermost = len(points) - around.shape[1] + np.arange(around.shape[1])

        edge = np.concatenate([frame, outermost])
        low, high = grid[frame].min(axis=0), grid[frame].max(axis=0)

        def depth(at: Array) -> Array:
            to_frame = np.minimum(at - low, high - at).min(axis=1)
            return np.minimum(to_frame, self.bar.distance(at) - self.bar_layer)

        filled, triangles = fill(points[edge], depth, self.size, self.seed)
        number = np.concatenate([edge, len(points) + np.arange(len(filled) - len(edge))])
        mesh = build_mesh(
            np.concatenate([points, filled[len(edge) :]]),
            [quads, layers, number[triangles]],
            ("inlet", "outlet", "wall", "bar"),
            self._patch_at,
        )
        whole = self.length * self.height
        if abs(mesh.volume.sum() + polygon_area(around[0]) - whole) > 1e-10 * whole:
            raise ValueError("the triangles do not fit to the layers of quadrangles: try another seed")
        return mesh

    def _grid(self) -> tuple[Array, Array, Array]:
        """Crossings of the grid lines, quadrangles of walls and ends, and the nodes around the triangles."""
        low, high = self.wall_layer, self.height - self.wall_layer

        def spacing(x: Array) -> Array:
            return np.maximum(self.size(np.column_stack([x, np.full(x.size, low)])), 0.55 * self.h * MM)

        stops = [0, self.triangles_from, self.triangles_to, self.length]
        x = np.unique(np.concatenate([along(a, b, spacing) for a, b in pairwise(stops)]))
        left, right = np.searchsorted(x, stops[1:3])
        rows = along(low, high, lambda y: np.full(y.size, 0.72 * self.h * MM))
        layer = graded(self.wall_layer, 2.0, round(4 / self.h))
        y = np.concatenate([layer, rows[1:-1], self.height - layer[::-1]])
        below, above = np.searchsorted(y, [rows[0], rows[-1]])

        number = np.arange(y.size * x.size).reshape(y.size, x.size)
        quads = np.stack([number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1]], axis=-1)
        outside = np.ones(quads.shape[:2], dtype=bool)
        outside[below:above, left:right] = False
        frame = np.concatenate(
            [
                number[below, left:right],
                number[below:above, right],
                number[above, right:left:-1],
                number[above:below:-1, left],
            ]
        )
        return np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2), quads[outside], frame

    def _layers_around_bar(self) -> tuple[Array, Array]:
        """(rings, n, 2) points from the bar outward, and the quadrangles between them."""
        foot, normal = self.bar.surface(round(60 / self.h), even_at=0.35 * MM)
        heights = graded(self.bar_layer, 2.5, round(5 / self.h))
        points = foot + heights[:, None, None] * normal
        ring = np.arange(points[..., 0].size).reshape(points.shape[:2])
        ring = np.column_stack([ring, ring[:, 0]])
        quads = np.stack([ring[:-1, :-1], ring[1:, :-1], ring[1:, 1:], ring[:-1, 1:]], axis=-1)
        return points, quads.reshape(-1, 4)

    def _patch_at(self, middle: Array) -> Array:
        x, y = middle.T
        gaps = np.column_stack(
            [x, self.length - x, np.minimum(y, self.height - y), self.bar.distance(middle)]
        )
        return np.abs(gaps).argmin(axis=1)


def polygon_area(corners: Array) -> float:
    """Area inside (n, 2) counter-clockwise corners."""
    following = np.roll(corners, -1, axis=0)
    return 0.5 * float((corners[:, 0] * following[:, 1] - corners[:, 1] * following[:, 0]).sum())
