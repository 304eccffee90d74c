"""The whole command on a mesh in 16 parts against reading these parts, each in a fresh process.

Parts are squares of triangles, whatever the kind of the case; our own readers also check what they read.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from benchmarks.cases import CIRCLE, told
from benchmarks.plain import READ
from benchmarks.section import Case, Ratio, Section
from benchmarks.timing import process

PARTS = 16

OWN_READ = """
import sys
from pathlib import Path
import numpy as np
from fvcheck.formats.registry import open_export
for path in sys.argv[1:]:
    for piece in open_export(Path(path)).load(0):
        for values in piece.point_data.values():  # read when they are wanted
            np.asarray(values)
"""


def square(count: int, corner: tuple[float, float] = (0.0, 0.0), size: float = 1.0) -> Any:
    """About ``count`` triangles over a square, a Taylor-Green field at their points, as a VTK grid."""
    import pyvista

    n = round((count / 2) ** 0.5)
    x, y = np.meshgrid(*(low + size * np.linspace(0, 1, n + 1) for low in corner))
    # Inner points are moved about; those on the rim stay, so that parts fit together.
    inside = np.zeros(x.shape)
    inside[1:-1, 1:-1] = 0.2 * size / n
    rng = np.random.default_rng(0)
    x, y = (part + inside * rng.uniform(-1, 1, part.shape) for part in (x, y))
    number = np.arange(x.size).reshape(x.shape)
    a, b, c, d = number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1]
    triangles = np.concatenate([np.stack([p.ravel() for p in t], axis=1) for t in ((a, b, c), (a, c, d))])
    cells = np.column_stack([np.full(len(triangles), 3), triangles]).ravel()
    points = np.column_stack([x.ravel(), y.ravel(), np.zeros(x.size)])
    grid = pyvista.UnstructuredGrid(cells, np.full(len(triangles), 5, np.uint8), points)
    k = 2 * np.pi
    u, v = np.sin(k * x) * np.cos(k * y), -np.cos(k * x) * np.sin(k * y)
    grid.point_data["U"] = np.column_stack([u.ravel(), v.ravel(), np.zeros(x.size)])
    grid.point_data["p"] = 0.25 * (np.cos(2 * k * x) + np.cos(2 * k * y)).ravel()
    return grid


def write_parts(folder: Path, count: int, parts: int) -> tuple[Path, list[Path]]:
    """A partitioned file of ``parts`` (a square number) squares, and the files of these."""
    side = round(parts**0.5)
    files = []
    for i in range(side * side):
        path = folder / f"part-{i:03d}.vtu"
        square(count // side**2, ((i % side) / side, (i // side) / side), 1.0 / side).save(path)
        files.append(path)
    listed = "\n".join(f'<Piece Source="{path.name}"/>' for path in files)
    text = (
        '<?xml version="1.0"?><VTKFile type="PUnstructuredGrid" version="0.1" byte_order="LittleEndian">'
        '<PUnstructuredGrid GhostLevel="0"><PPoints><PDataArray type="Float64" NumberOfComponents="3"/>'
        '</PPoints><PPointData><PDataArray type="Float64" Name="U" NumberOfComponents="3"/>'
        f'<PDataArray type="Float64" Name="p"/></PPointData>{listed}</PUnstructuredGrid></VTKFile>'
    )
    whole = folder / "parts.pvtu"
    whole.write_text(text, encoding="utf-8")
    return whole, files


def measure(case: Case) -> dict[str, float]:
    """Times and peaks of the command, of reading all parts, and of the largest part alone."""
    whole, files = write_parts(case.folder, case.cells, PARTS)
    every = [str(path) for path in files]
    read = ["-c", READ.format("vtkXMLUnstructuredGridReader")]
    figures = {}
    figures["command"], figures["command MB"] = process(told(whole, CIRCLE), 2)
    figures["read parts"], _ = process(["-c", OWN_READ, *every], 2)
    figures["vtk read parts"], _ = process([*read, *every], 2)
    _, figures["read largest MB"] = process(["-c", OWN_READ, every[0]], 2)
    _, figures["vtk read largest MB"] = process([*read, every[0]], 2)
    figures["command on largest"], figures["command on largest MB"] = process(
        told(files[0], (0.12, 0.12, 0.05)), 2
    )
    figures["command, 2 workers"], figures["command, 2 workers MB"] = process(
        [*told(whole, CIRCLE), "--workers", "2"], 2
    )
    return figures


SECTION = Section(
    "parts",
    measure,
    (
        Ratio("command / read parts", "command", "read parts", "≤ 1.3"),
        Ratio("command / vtk read parts", "command", "vtk read parts"),
        Ratio("memory / read largest", "command MB", "read largest MB", "≤ 2"),
        Ratio("memory / command on largest", "command MB", "command on largest MB"),
    ),
)
