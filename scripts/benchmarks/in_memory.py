"""Ledgers of a mesh in memory, loops warm, against VTK and one pass over the mesh arrays."""

from __future__ import annotations

from dataclasses import replace

import fvcheck
from benchmarks.cases import circle, flow_of, make_grid
from benchmarks.plain import clip_and_integrate, point_sampling
from benchmarks.section import Case, Ratio, Section
from benchmarks.timing import alternating, peak

LINE = ("mass", "momentum", "heat")


def measure(case: Case) -> dict[str, float]:
    """The ledger of a circle with bands; the first on its mesh; with a volume term; the pass; VTK."""
    from fvcheck.kernels.cells import polygon_areas
    from fvcheck.kernels.threads import use_for

    grid = make_grid(case.kind, case.cells)
    flow, surface = flow_of(grid), circle()
    mesh = flow.mesh
    use_for(0)  # one thread for the pass, as VTK has and as ledgers of this size take
    fvcheck.balance(flow, surface, [*LINE, "kinetic-energy"])  # what is compiled now is no one's memory
    after_reading = peak()
    quick = alternating(
        {
            "pass": lambda: polygon_areas(mesh.points, mesh.offsets, mesh.nodes),
            "ledger": lambda: fvcheck.balance(flow, surface, LINE),
            # A fresh mesh knows nothing yet, so that the pass that finds its boxes is in it.
            "first ledger": lambda: fvcheck.balance(replace(flow, mesh=replace(mesh)), surface, LINE),
            "with volume term": lambda: fvcheck.balance(flow, surface, [*LINE, "kinetic-energy"]),
        },
        9,
    )
    memory = peak() - after_reading
    slow = alternating(
        {"vtk sampling": point_sampling(grid), "vtk clip": clip_and_integrate(grid)},
        3 if case.cells < 3e6 else 1,
    )
    figures = {"cells": float(mesh.n_cells), **quick, **slow}
    figures["volume term"] = quick["with volume term"] - quick["ledger"]
    return figures | {"ledgers beyond the mesh MB": memory}


SECTION = Section(
    "in memory",
    measure,
    (
        Ratio("sampling / ledger", "vtk sampling", "ledger", "≥ 4"),
        Ratio("ledger / pass", "ledger", "pass", "≤ 15"),
        Ratio("first ledger / pass", "first ledger", "pass"),
        Ratio("clip / volume term", "vtk clip", "volume term", "≥ 30"),
    ),
    growth=(("ledger", 0.6), ("pass", 1.0), ("vtk sampling", 1.0)),
)
