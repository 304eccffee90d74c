"""How fast fvcheck is, against the plain script one would write with general libraries, both in one run.

    python scripts/bench.py [--cells 1e4 1e5 1e6] [--json FILE]

Per mesh, kernels warm and the mesh in memory: the ledger of one circle (mass and
momentum with bands; the same with the kinetic energy, which needs every cell
inside), one pass over the mesh arrays, VTK point sampling along the circle with
its cell locator and trapezoid sums, VTK clip and integration of one volume term.
Then, in processes of their own: the whole command against a bare VTK read of the
same file, time and peak memory. Times are the best of a few rounds; what counts
is the ratios, since both sides met the same machine at the same moment.
"""

from __future__ import annotations

import argparse
import json
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT))

import fvcheck  # noqa: E402  (from this checkout, installed or not)

CIRCLE = (0.5, 0.45, 0.3)
FLUID = {"density": 1.0, "viscosity": 0.01}


def make_mesh(count: int):
    """About ``count`` irregular triangles over the unit square with a Taylor-Green field, as a VTK grid."""
    import pyvista

    n = round((count / 2) ** 0.5)
    rng = np.random.default_rng(0)
    x, y = np.meshgrid(np.linspace(0, 1, n + 1), np.linspace(0, 1, n + 1))
    inside = np.zeros(x.shape)
    inside[1:-1, 1:-1] = 0.2 / n
    x, y = (part + inside * rng.uniform(-1, 1, part.shape) for part in (x, y))
    points = np.column_stack([x.ravel(), y.ravel(), np.zeros(x.size)])
    number = np.arange(x.size).reshape(x.shape)
    a, b, c, d = number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1]
    triangles = np.concatenate(
        [np.stack([p.ravel() for p in corners], axis=1) for corners in ((a, b, c), (a, c, d))]
    )
    cells = np.column_stack([np.full(len(triangles), 3), triangles])
    grid = pyvista.UnstructuredGrid(cells.ravel(), np.full(len(triangles), 5, np.uint8), points)
    k = 2 * np.pi
    u, v = np.sin(k * x) * np.cos(k * y), -np.cos(k * x) * np.sin(k * y)
    grid.point_data["U"] = np.column_stack([u.ravel(), v.ravel(), np.zeros(x.size)])
    grid.point_data["p"] = 0.25 * (np.cos(2 * k * x) + np.cos(2 * k * y)).ravel()
    return grid


def best(function: Callable[[], object], rounds: int = 3) -> float:
    """Shortest time of a few calls [s]; the first one also warms what is compiled on demand."""
    times = []
    for _ in range(rounds + 1):
        begin = time.perf_counter()
        function()
        times.append(time.perf_counter() - begin)
    return min(times[1:])


def one_pass(flow: fvcheck.Flow) -> Callable[[], object]:
    """One pass over coordinates and connectivity: what any look at every cell must cost."""
    from fvcheck.kernels.cells import polygon_areas

    mesh = flow.mesh
    return lambda: polygon_areas(mesh.points, mesh.offsets, mesh.nodes)


def point_sampling(grid) -> Callable[[], object]:
    """Fluxes by VTK's probe along the circle, four points for each cell it meets, trapezoid sums."""
    import vtk
    from vtk.util.numpy_support import vtk_to_numpy

    x, y, r = CIRCLE
    size = np.sqrt(1.0 / grid.n_cells)
    count = int(4 * 2 * np.pi * r / size)
    angle = 2 * np.pi * np.arange(count + 1) / count
    line = vtk.vtkPoints()
    for a in angle:
        line.InsertNextPoint(x + r * np.cos(a), y + r * np.sin(a), 0.0)
    places = vtk.vtkPolyData()
    places.SetPoints(line)
    normal = np.column_stack([np.cos(angle), np.sin(angle)])

    def run() -> tuple[float, float]:
        probe = vtk.vtkProbeFilter()
        locator = vtk.vtkStaticCellLocator()
        locator.SetDataSet(grid)
        locator.BuildLocator()
        probe.SetCellLocatorPrototype(locator)  # the name that also older VTK know
        probe.SetInputData(places)
        probe.SetSourceData(grid)
        probe.Update()
        data = probe.GetOutput().GetPointData()
        u, p = vtk_to_numpy(data.GetArray("U"))[:, :2], vtk_to_numpy(data.GetArray("p"))
        through = np.sum(u * normal, axis=1)
        step = 2 * np.pi * r / count
        momentum = (u[:, 0] * through + p * normal[:, 0])[:-1].sum() * step
        return float(through[:-1].sum() * step), float(momentum)

    return run


def clip_and_integrate(grid) -> Callable[[], object]:
    """A volume term by VTK: gradients, clip by the circle, integration."""
    import vtk

    def run() -> float:
        gradient = vtk.vtkGradientFilter()
        gradient.SetInputData(grid)
        gradient.SetInputScalars(0, "U")
        cylinder = vtk.vtkSphere()
        cylinder.SetCenter(CIRCLE[0], CIRCLE[1], 0.0)
        cylinder.SetRadius(CIRCLE[2])
        clip = vtk.vtkClipDataSet()
        clip.SetInputConnection(gradient.GetOutputPort())
        clip.SetClipFunction(cylinder)
        clip.InsideOutOn()
        total = vtk.vtkIntegrateAttributes()
        total.SetInputConnection(clip.GetOutputPort())
        total.Update()
        return float(total.GetOutput().GetPointData().GetArray("Gradients").GetTuple(0)[0])

    return run


def process(code: list[str]) -> tuple[float, float]:
    """Time [s] and peak memory [MB] of a fresh Python process."""
    wrapper = (
        "import resource, subprocess, sys, time; b = time.perf_counter(); "
        "subprocess.run(sys.argv[1:], stdout=subprocess.DEVNULL, check=False); "
        "print(time.perf_counter() - b, resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024)"
    )
    rows = []
    for _ in range(3):
        run = subprocess.run(
            [sys.executable, "-c", wrapper, sys.executable, *code],
            capture_output=True,
            text=True,
            cwd=ROOT,
            check=True,
        )
        rows.append(tuple(float(word) for word in run.stdout.split()))
    return min(row[0] for row in rows), max(row[1] for row in rows)


def measure(count: int, folder: Path) -> dict[str, float]:
    """All figures of one mesh."""
    grid = make_mesh(count)
    path = folder / f"{count}.vtu"
    grid.save(path)
    flow = fvcheck.open_flow(path, fluid=fvcheck.Fluid(**FLUID))
    circle = fvcheck.ControlSurface.circle(*CIRCLE, name="c")
    row: dict[str, float] = {"cells": flow.mesh.n_cells}
    row["pass"] = best(one_pass(flow), 5)
    row["ledger"] = best(lambda: fvcheck.balance(flow, circle, ["mass", "momentum"]), 5)
    row["with energy"] = best(
        lambda: fvcheck.balance(flow, circle, ["mass", "momentum", "kinetic-energy"]), 1
    )
    row["vtk sampling"] = best(point_sampling(grid), 3)
    row["vtk clip"] = best(clip_and_integrate(grid), 1)
    surface = f"circle{CIRCLE}".replace(" ", "")
    told = ["--density", "1", "--viscosity", "0.01", "--law", "mass,momentum", "-q"]
    row["command"], row["command MB"] = process(["-m", "fvcheck", "balance", str(path), "-s", surface, *told])
    read = (
        "import sys; from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader as R; "
        "r = R(); r.SetFileName(sys.argv[1]); r.Update()"
    )
    row["vtk read"], row["vtk read MB"] = process(["-c", read, str(path)])
    return row


RATIOS = {
    "sampling / ledger": ("vtk sampling", "ledger"),
    "ledger / pass": ("ledger", "pass"),
    "clip / energy": ("vtk clip", "with energy"),
    "command / read": ("command", "vtk read"),
    "memory / read": ("command MB", "vtk read MB"),
}


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--cells", type=float, nargs="+", default=[1e4, 1e5, 1e6])
    parser.add_argument("--json", type=Path)
    options = parser.parse_args()
    rows = []
    with tempfile.TemporaryDirectory() as folder:
        for count in options.cells:
            row = measure(int(count), Path(folder))
            row |= {name: row[top] / row[bottom] for name, (top, bottom) in RATIOS.items()}
            rows.append(row)
            print(f"{row['cells']:.0f} triangles")
            for name, value in row.items():
                unit = "" if name in RATIOS or name == "cells" else " MB" if name.endswith("MB") else " s"
                print(f"  {name:18s} {value:10.4g}{unit}")
    if len(rows) > 1:
        growth = np.polyfit(np.log([r["cells"] for r in rows]), np.log([r["ledger"] for r in rows]), 1)[0]
        print(f"ledger grows with cells to the power {growth:.2f}")
    print(f"peak memory of this process {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MB")
    if options.json:
        options.json.write_text(json.dumps(rows, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
