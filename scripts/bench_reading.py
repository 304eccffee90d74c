"""The reading part of `bench.py`: whole commands in fresh processes against bare reads of the same files.

    python scripts/bench_reading.py [--cells 1e6] [--partitioned 1e7] [--parts 16] [--json FILE]

`single` compares the whole command on one VTU file with a VTK read of it.
`partitioned` writes a mesh in square parts (.pvtu) and compares the whole command
with reading all parts one after another: by VTK and by fvcheck's own readers,
which also check what they read; and its peak with that of reading the largest part.
Memory is the peak of the resident set. The process itself counts, its libraries
included: ``floor MB`` is the same command on a few cells.
"""

from __future__ import annotations

import argparse
import json
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parent.parent
SURFACE = "circle(0.5,0.45,0.3)"
TOLD = ("--density", "1", "--viscosity", "0.01", "--law", "mass,momentum", "-q")
VTK_READ = """
import sys
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader
for path in sys.argv[1:]:
    reader = vtkXMLUnstructuredGridReader()
    reader.SetFileName(path)
    reader.Update()
"""
SMALL_PARENT = """
import resource, subprocess, sys, time
begin = time.perf_counter()
status = subprocess.run(sys.argv[1:], stdout=subprocess.DEVNULL).returncode
seconds = time.perf_counter() - begin
print(status, seconds, resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024)
"""
OWN_READ = """
import sys
from pathlib import Path
from fvcheck.formats.registry import open_export
for path in sys.argv[1:]:
    open_export(Path(path)).load(0)
"""


def process(*arguments: str, rounds: int = 3) -> tuple[float, float]:
    """Least time [s] and peak memory [MB] of a few fresh Python processes."""
    rows = []
    for _ in range(rounds):
        # A forked child starts with the peak of its parent, so the parent must be a small one.
        run = subprocess.run(
            [sys.executable, "-c", SMALL_PARENT, sys.executable, *arguments],
            capture_output=True,
            text=True,
            check=True,
            cwd=ROOT,
        )
        status, seconds, peak = (float(word) for word in run.stdout.split())
        if status not in (0, 1, 3):  # verdicts
            raise RuntimeError(f"{arguments} ended with {status:g}")
        rows.append((seconds, peak))
    return min(row[0] for row in rows), min(row[1] for row in rows)


def command(path: Path, rounds: int = 3) -> tuple[float, float]:
    """The whole command: balance of one circle."""
    return process("-m", "fvcheck", "balance", str(path), "-s", SURFACE, *TOLD, rounds=rounds)


def square(count: int, corner: tuple[float, float] = (0.0, 0.0), size: float = 1.0):
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


def single(path: Path, small: Path) -> dict[str, float]:
    """The whole command on one file, against a VTK read of it."""
    row: dict[str, float] = {}
    row["command"], row["command MB"] = command(path)
    row["vtk read"], row["vtk read MB"] = process("-c", VTK_READ, str(path))
    row["first verdict"], row["floor MB"] = command(small)
    row["command / read"] = row["command"] / row["vtk read"]
    row["memory / read"] = row["command MB"] / row["vtk read MB"]
    return row


def partitioned(count: int, parts: int) -> dict[str, float]:
    """The whole command on a partitioned file, against reading its parts."""
    row: dict[str, float] = {}
    with tempfile.TemporaryDirectory() as name:
        whole, files = write_parts(Path(name), count, parts)
        every = [str(path) for path in files]
        row["command"], row["command MB"] = command(whole, 2)
        row["read parts"], _ = process("-c", OWN_READ, *every, rounds=2)
        row["vtk read parts"], _ = process("-c", VTK_READ, *every, rounds=2)
        _, row["read largest MB"] = process("-c", OWN_READ, every[0], rounds=2)
        _, row["vtk read largest MB"] = process("-c", VTK_READ, every[0], rounds=2)
        _, row["command on largest MB"] = process(
            "-m", "fvcheck", "balance", every[0], "-s", "circle(0.12,0.12,0.05)", *TOLD, rounds=2
        )
    row["command / read parts"] = row["command"] / row["read parts"]
    row["command / vtk read parts"] = row["command"] / row["vtk read parts"]
    row["memory / read largest"] = row["command MB"] / row["read largest MB"]
    row["memory / command on largest"] = row["command MB"] / row["command on largest MB"]
    return row


def show(title: str, row: dict[str, float]) -> None:
    print(title)
    for name, value in row.items():
        unit = "" if " / " in name else " MB" if name.endswith("MB") else " s"
        print(f"  {name:28s} {value:10.4g}{unit}")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--cells", type=float, default=1e6, help="triangles of the single file")
    parser.add_argument("--partitioned", type=float, default=1e7, help="triangles in parts; 0 leaves it out")
    parser.add_argument("--parts", type=int, default=16)
    parser.add_argument("--json", type=Path)
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as name:
        path, small = Path(name) / "single.vtu", Path(name) / "small.vtu"
        square(int(options.cells)).save(path)
        square(3000).save(small)
        command(small, 1)  # compiled loops are there from now on
        rows = {"single": single(path, small)}
    show(f"one file of {options.cells:.0e} triangles", rows["single"])
    if options.partitioned:
        rows["partitioned"] = partitioned(int(options.partitioned), options.parts)
        title = f"{options.partitioned:.0e} triangles in {options.parts} parts"
        show(title, rows["partitioned"])
    if options.json:
        options.json.write_text(json.dumps(rows, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
