"""Later snapshots of a transient file: reading the step whole, its rows alone, its whole ledger."""

from __future__ import annotations

import time
from pathlib import Path
from typing import Any

import numpy as np
from write_series import write_vtkhdf, write_xdmf

import fvcheck
from benchmarks.cases import FLUID, circle, make_grid
from benchmarks.section import Case, Ratio, Section
from benchmarks.timing import alternating
from fvcheck.recording import Recorder
from fvcheck.series import Series, open_series

LAWS = ("mass", "momentum")
TIMES = tuple(0.1 * k for k in range(8))


class _Cells:
    """What the writers ask of a mesh."""

    def __init__(self, grid: Any) -> None:
        self.points = np.asarray(grid.points)[:, :2]
        held = grid.GetCells()
        self.offsets, self.nodes = (
            np.asarray(part) for part in (held.GetOffsetsArray(), held.GetConnectivityArray())
        )


def measure(case: Case) -> dict[str, float]:
    """Of VTKHDF, plain and packed, and of XDMF with HDF5."""
    grid = make_grid(case.kind, case.cells)
    cells, data = _Cells(grid), {name: np.asarray(grid.point_data[name]) for name in ("U", "p", "T")}

    def load(time: float) -> dict[str, Any]:
        return {name: values * (1.0 + 0.1 * time) for name, values in data.items()}

    files = {
        "VTKHDF": write_vtkhdf(case.folder / "plain.vtkhdf", cells, TIMES, load, rows=25_000),
        "packed": write_vtkhdf(
            case.folder / "packed.vtkhdf", cells, TIMES, load, rows=25_000, compression="gzip"
        ),
        "XDMF": write_xdmf(case.folder / "run.xdmf", cells, TIMES, load),
    }
    figures = {"cells": float(grid.n_cells)}
    for name, path in files.items():
        figures |= {f"{name} {what}": value for what, value in _of_file(path).items()}
    return figures


def _of_file(path: Path) -> dict[str, float]:
    fluid = fvcheck.Fluid(**FLUID)
    run = open_series(path, fluid=fluid).steady()
    recorder = Recorder(run, [circle()], LAWS)
    taken = []
    for _ in TIMES:
        begin = time.perf_counter()
        recorder.take()
        taken.append(time.perf_counter() - begin)
    needed = recorder._needed()

    def rows() -> None:
        run.flow(len(TIMES) - 1, needed)

    def whole() -> None:
        Series(run.snapshots, run.reading, ()).flow(len(TIMES) - 1)

    def bare() -> None:
        # As a fresh process would: nothing of the mesh is kept from another step.
        fvcheck.open_flow(path, step=len(TIMES) - 1, fluid=fluid)

    times = alternating({"rows": rows, "whole read": bare, "fields and digest": whole}, 3)
    return {"snapshot": float(min(taken[2:])), **times}


SECTION = Section(
    "series",
    measure,
    tuple(
        ratio
        for name in ("VTKHDF", "packed", "XDMF")
        for ratio in (
            Ratio(f"{name}: rows / whole", f"{name} rows", f"{name} whole read", "≤ 0.05"),
            Ratio(f"{name}: snapshot / whole", f"{name} snapshot", f"{name} whole read", "≤ 0.05"),
        )
    ),
)
