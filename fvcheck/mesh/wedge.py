"""A 3D export between two planes that meet in a coordinate axis: a slice of an axisymmetric run."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.mesh.plane import AXES, NORMAL_COLUMN

Array = np.ndarray

# Widest angle between the planes that is taken as a wedge, and the narrowest that can be told from flat.
_WIDEST, _NARROWEST = np.radians(45.0), np.radians(0.01)


@dataclass(frozen=True, eq=False)
class Wedge:
    """The mid plane of a wedge and what turns onto it.

    name : of the mid plane: a coordinate plane, else "rotated"
    axes : (3, 3) rows e1, e2, n of the mid plane; ``front_axes`` of the front one,
        which lies on the side of n
    axis : 0 or 1, which of e1, e2 is the axis; the other one is radial
    half_angle : between the mid plane and either side
    """

    name: str
    axes: Array
    front_axes: Array
    axis: int
    half_angle: float

    def onto_middle(self, points: Array) -> Array:
        """(n, 3) points turned about the axis onto the mid plane; radii are kept."""
        along, radial = self.axes[self.axis], self.axes[1 - self.axis]
        height = points @ along
        radius = np.linalg.norm(points - height[:, None] * along, axis=1)
        return height[:, None] * along + radius[:, None] * radial

    def sides(self, points: Array, tolerance: float) -> tuple[Array, Array, Array]:
        """Masks (n,) of points in the front plane, in the back plane, and on the axis."""
        radial = self.axes[1 - self.axis]
        across = points @ self.axes[2]
        along = points @ radial
        on_axis = np.hypot(along, across) <= tolerance
        front, back = (
            (np.abs(across * np.cos(a) - along * np.sin(a)) <= tolerance) & (along > 0) & ~on_axis
            for a in (self.half_angle, -self.half_angle)
        )
        return front, back, on_axis


def find_wedge(points: Array, wanted: str, tolerance: float) -> Wedge | None:
    """The wedge that all ``points`` (n, 3) lie on the sides of; None where there is none.

    wanted : "auto", or the coordinate plane that the mid plane must be nearest to
    """
    for d in range(3):
        wedge = _about(points, d, tolerance)
        if wedge is not None and wanted in ("auto", _layout(wedge.axes)):
            front, back, on_axis = wedge.sides(points, tolerance)
            if front.any() and back.any() and (front | back | on_axis).all():
                return wedge
    return None


def _layout(axes: Array) -> str:
    """The coordinate plane nearest to given axes."""
    normal = int(np.argmax(np.abs(axes[2])))
    return next(name for name, column in NORMAL_COLUMN.items() if column == normal)


def _about(points: Array, d: int, tolerance: float) -> Wedge | None:
    """The narrowest wedge about coordinate axis ``d`` that holds all points, if it is narrow."""
    e, f = (d + 1) % 3, (d + 2) % 3
    away = np.hypot(points[:, e], points[:, f]) > tolerance
    if not away.any():
        return None
    turn = points[away, e] + 1j * points[away, f]
    turn /= np.abs(turn)
    mean = turn.mean()
    if abs(mean) < 0.5:
        return None
    angle = np.angle(turn / mean)
    low, high = float(angle.min()), float(angle.max())
    if not _NARROWEST < high - low < _WIDEST:
        return None
    middle = mean / abs(mean) * np.exp(0.5j * (low + high))
    radial, along = np.zeros(3), np.eye(3)[d]
    radial[[e, f]] = middle.real, middle.imag
    nearest = e if abs(middle.real) >= abs(middle.imag) else f
    exact = 1.0 - radial[nearest] < 1e-12
    if exact:
        radial = np.eye(3)[nearest]
    # The coordinates keep the order of the nearest coordinate plane.
    name = next(n for n, column in NORMAL_COLUMN.items() if column == 3 - d - nearest)
    axis = 0 if AXES[name][0, d] == 1.0 else 1
    rows = (along, radial) if axis == 0 else (radial, along)
    normal = np.cross(*rows)
    half = 0.5 * (high - low)
    front = np.cos(half) * radial + np.sin(half) * normal
    front_rows = (along, front) if axis == 0 else (front, along)
    return Wedge(
        name if exact else "rotated",
        np.array([*rows, normal]),
        np.array([*front_rows, np.cross(*front_rows)]),
        axis,
        half,
    )
