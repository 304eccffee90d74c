"""The plane a mesh lies in."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.errors import MeshError, SetupError

Array = np.ndarray

FLAT = 1e-6
"""Largest deviation from the plane, as a share of the extent."""

AXES = {
    "xy": np.array([[1.0, 0, 0], [0, 1, 0], [0, 0, 1]]),
    "xz": np.array([[1.0, 0, 0], [0, 0, 1], [0, -1, 0]]),
    "yz": np.array([[0, 1.0, 0], [0, 0, 1], [1, 0, 0]]),
}
"""Rows e1, e2 and n = e1 × e2 of the coordinate planes."""

NORMAL_COLUMN = {"xy": 2, "xz": 1, "yz": 0}


@dataclass(frozen=True, eq=False)
class Plane:
    """name, axes (3, 3) rows e1, e2, n, and origin (3,) with no in-plane part."""

    name: str
    axes: Array
    origin: Array

    def coordinates(self, points: Array) -> Array:
        """(n, 2) in-plane coordinates; those of a coordinate plane are the stored ones, bit for bit."""
        if self.name in AXES:
            columns = [c for c in range(3) if c != NORMAL_COLUMN[self.name]]
            return np.ascontiguousarray(points[:, columns])
        return (points - self.origin) @ self.axes[:2].T


def at_level(name: str, axes: Array, level: float) -> Plane:
    """The plane of given axes whose points x have x @ n = level."""
    return Plane(name, axes, axes[2] * level)


def rotated_axes(normal: Array) -> Array:
    """Rows e1, e2, n: n's largest component positive, e1 the projection of the x axis (else of y)."""
    n = normal / np.linalg.norm(normal)
    n = n * np.sign(n[np.argmax(np.abs(n))])
    for axis in np.eye(3):
        e1 = axis - (axis @ n) * n
        if np.linalg.norm(e1) > 1e-3:
            break
    e1 = e1 / np.linalg.norm(e1)
    return np.array([e1, np.cross(n, e1), n])


def slack(points: Array, precision: float) -> float:
    """Distance within which points are coplanar: `FLAT` of the extent, and rounding far from the origin."""
    low, high = limits(points)
    return FLAT * float((high - low).max()) + 8 * precision * float(max(-low.min(), high.max()))


def limits(points: Array) -> tuple[Array, Array]:
    """Least and largest coordinates, column by column: several times faster than along the first axis."""
    columns = points.T
    return np.array([c.min() for c in columns]), np.array([c.max() for c in columns])


def main_directions(points: Array) -> Array:
    """Rows: directions of least to largest spread (eigenvectors of the covariance)."""
    centred = points - points.mean(axis=0)
    return np.linalg.eigh(centred.T @ centred)[1].T


def plane_of(points: Array, wanted: str, precision: float) -> Plane:
    """The plane through ``points`` (n, 3).

    ``wanted`` is "auto" or a coordinate plane. Raises MeshError when the points
    do not lie in one plane, or not in the wanted one; SetupError for an unknown name.
    """
    check_name(wanted)
    tolerance = slack(points, precision)
    low, high = limits(points)
    spread = high - low
    for name in ("xy", "xz", "yz") if wanted == "auto" else (wanted,):
        column = NORMAL_COLUMN[name]
        if spread[column] <= tolerance:
            middle = 0.5 * float(low[column] + high[column])
            return at_level(name, AXES[name], middle * AXES[name][2, column])
    if wanted != "auto":
        raise MeshError(
            f"the cells do not lie in the {wanted} plane:"
            f" they extend over {spread[NORMAL_COLUMN[wanted]]:.6g} normal to it",
            mend="Leave out the plane option, or name the plane of the run.",
        )
    axes = rotated_axes(main_directions(points)[0])
    heights = points @ axes[2]
    if np.ptp(heights) > 2 * tolerance:
        raise MeshError(
            f"the cells do not lie in one plane: they deviate by {np.ptp(heights) / 2:.3g}"
            f" over an extent of {spread.max():.6g}",
            mend="Export a plane mesh, or a slice of the run.",
        )
    return at_level("rotated", axes, 0.5 * float(heights.min() + heights.max()))


def check_name(wanted: str) -> None:
    """Refuse a plane option that is none."""
    if wanted != "auto" and wanted not in AXES:
        raise SetupError(f"unknown plane '{wanted}'", mend="Use auto, xy, xz or yz.")
