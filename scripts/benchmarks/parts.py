"""The whole command on a mesh in 16 parts against reading these parts, each in a fresh process.

Parts are squares of triangles, whatever the kind of the case; see `bench_reading`.
"""

from __future__ import annotations

from bench_reading import partitioned

from benchmarks.section import Case, Ratio, Section

PARTS = 16


def measure(case: Case) -> dict[str, float]:
    """Times and peaks of the command, of reading all parts, and of the largest part alone."""
    return {name: value for name, value in partitioned(case.cells, PARTS).items() if " / " not in name}


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
