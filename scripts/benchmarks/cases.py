"""Meshes of any size over the unit square, with a Taylor–Green flow and a temperature at points."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np

import fvcheck

Array = np.ndarray

CIRCLE = (0.5, 0.45, 0.3)
FLUID = {"density": 1.0, "viscosity": 0.01, "specific_heat": 1000.0, "conductivity": 0.1}
KINDS = ("triangles", "polygons")

_TRIANGLE, _POLYGON = 5, 7


def make_grid(kind: str, count: int) -> Any:
    """About ``count`` irregular cells as a pyvista grid."""
    import pyvista

    points, offsets, nodes = _triangles(count) if kind == "triangles" else _polygons(count)
    sizes = np.diff(offsets)
    cells = np.empty(len(nodes) + len(sizes), np.int64)
    at = offsets[:-1] + np.arange(len(sizes))
    cells[at] = sizes
    cells[np.delete(np.arange(len(cells)), at)] = nodes
    of_type = _TRIANGLE if kind == "triangles" else _POLYGON
    grid = pyvista.UnstructuredGrid(
        cells, np.full(len(sizes), of_type, np.uint8), np.column_stack([points, np.zeros(len(points))])
    )
    (x, y), k = points.T, 2 * np.pi
    u, v = np.sin(k * x) * np.cos(k * y), -np.cos(k * x) * np.sin(k * y)
    grid.point_data["U"] = np.column_stack([u, v, np.zeros(len(u))])
    grid.point_data["p"] = 0.25 * (np.cos(2 * k * x) + np.cos(2 * k * y))
    grid.point_data["T"] = 300.0 + np.sin(3 * x) * np.cos(2 * y)
    return grid


def flow_of(grid: Any) -> fvcheck.Flow:
    return fvcheck.Flow.from_pyvista(grid, fluid=fvcheck.Fluid(**FLUID))


def circle() -> fvcheck.ControlSurface:
    return fvcheck.ControlSurface.circle(*CIRCLE, name="c")


def told(path: Path, circle: tuple[float, float, float]) -> list[str]:
    """Arguments of Python for ``fvcheck balance`` of a circle: mass and momentum."""
    surface = f"circle({','.join(map(str, circle))})"
    fluid = ("--density", "1", "--viscosity", "0.01")
    return ["-m", "fvcheck", "balance", str(path), "-s", surface, *fluid, "--law", "mass,momentum", "-q"]


def _jittered(x: Array, y: Array, by: tuple[float, float]) -> Array:
    """Points (n, 2) of a lattice (rows, columns), the inner ones moved by up to ``by``."""
    rng = np.random.default_rng(0)
    inside = np.zeros(x.shape)
    inside[1:-1, 1:-1] = 1.0
    moved = (part + inside * b * rng.uniform(-1, 1, part.shape) for part, b in zip((x, y), by))
    return np.column_stack([part.ravel() for part in moved])


def _triangles(count: int) -> tuple[Array, Array, Array]:
    """Points, offsets, nodes of a jittered lattice, each square halved."""
    n = round((count / 2) ** 0.5)
    x, y = np.meshgrid(np.linspace(0, 1, n + 1), np.linspace(0, 1, n + 1))
    number = np.arange(x.size).reshape(x.shape)
    a, b, c, d = number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1]
    nodes = np.stack([a, b, c, a, c, d], axis=-1).ravel()
    return _jittered(x, y, (0.2 / n, 0.2 / n)), np.arange(0, len(nodes) + 1, 3), nodes


def _polygons(count: int) -> tuple[Array, Array, Array]:
    """Points, offsets, nodes of hexagons like the bricks of a wall, quadrilaterals at its ends."""
    n = round(count**0.5)
    x, y = np.meshgrid(np.linspace(0, 1, 2 * n + 1), np.linspace(0, 1, n + 1))
    rows = []
    for j in range(n):
        cuts = np.unique(np.concatenate([[0], np.arange(j % 2, 2 * n + 1, 2), [2 * n]]))
        for a, b in pairwise(cuts.tolist()):
            bottom = j * (2 * n + 1) + np.arange(a, b + 1)
            rows.append(np.concatenate([bottom, bottom[::-1] + 2 * n + 1]))
    offsets = np.concatenate([[0], np.cumsum([len(row) for row in rows])])
    return _jittered(x, y, (0.1 / n, 0.2 / n)), offsets, np.concatenate(rows)
