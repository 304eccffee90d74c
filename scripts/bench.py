"""How fast fvcheck is, against the plain script one would write with general libraries, both in one run.

    python scripts/bench.py [--cells 1e4 … 1e7] [--kind triangles polygons] [--section NAME …] [--json FILE]

Each section (a module of ``scripts/benchmarks``) makes its case and measures it in a
process of its own. What counts is the ratios, since both sides met the same machine
at the same moment; times are the best of a few rounds.
"""

from __future__ import annotations

import argparse
import json
import os
import platform
import subprocess
import sys
import tempfile
from pathlib import Path
from typing import Any

import numpy as np

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE), str(HERE.parent)]  # this checkout, installed or not

from benchmarks import command, in_memory, parts, series  # noqa: E402
from benchmarks.section import Case, Section  # noqa: E402
from benchmarks.timing import peak  # noqa: E402

SECTIONS: dict[str, Section] = {
    module.SECTION.name: module.SECTION for module in (in_memory, command, parts, series)
}


def measured(section: Section, kind: str, cells: int) -> dict[str, float]:
    """Figures and ratios of one case, from a process of its own."""
    run = subprocess.run(
        [sys.executable, __file__, "--child", section.name, "--kind", kind, "--cells", str(cells)],
        stdout=subprocess.PIPE,
        text=True,
        check=True,
    )
    figures: dict[str, float] = json.loads(run.stdout.splitlines()[-1])
    return figures | {ratio.name: figures[ratio.top] / figures[ratio.bottom] for ratio in section.ratios}


def child(name: str, kind: str, cells: int) -> None:
    with tempfile.TemporaryDirectory() as folder:
        figures = SECTIONS[name].measure(Case(kind, cells, Path(folder)))
    print(json.dumps(figures | {"peak MB": peak()}))


def table(section: Section, rows: list[dict[str, Any]]) -> None:
    """Figures down, cases across."""
    targets = {ratio.name: ratio.target for ratio in section.ratios}
    heads = [f"{row['wanted']:.0e} {row['kind']}".replace("e+0", "e") for row in rows]
    print(f"\n{section.name:28s}" + "".join(f"{head:>16s}" for head in heads))
    for name in rows[0]:
        if name not in ("kind", "wanted", "section"):
            unit = "" if name in targets or name == "cells" else " MB" if name.endswith("MB") else " s"
            label = f"{name} {targets.get(name, '')}".strip()
            print(f"  {label:26s}" + "".join(f"{row[name]:14.4g}{unit:2s}" for row in rows))
    for figure, limit in section.growth:
        for kind in sorted({row["kind"] for row in rows}):
            mine = [row for row in rows if row["kind"] == kind]
            if len(mine) > 1:
                size, value = (np.log([row[key] for row in mine]) for key in ("wanted", figure))
                print(
                    f"  {figure} on {kind} grows by the power {np.polyfit(size, value, 1)[0]:.2f} (≤ {limit})"
                )


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--cells", type=float, nargs="+", default=[1e4, 1e5, 1e6])
    parser.add_argument("--kind", nargs="+", default=["triangles"], choices=("triangles", "polygons"))
    parser.add_argument("--section", nargs="+", default=list(SECTIONS), choices=list(SECTIONS))
    parser.add_argument("--json", type=Path)
    parser.add_argument("--child", help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.child:
        child(options.child, options.kind[0], int(options.cells[0]))
        return
    print(f"{platform.machine()}, {os.cpu_count()} cores, load {os.getloadavg()[0]:.1f}")
    everything: list[dict[str, Any]] = []
    for name in options.section:
        rows = [
            {"section": name, "kind": kind, "wanted": cells, **measured(SECTIONS[name], kind, int(cells))}
            for kind in options.kind
            for cells in options.cells
        ]
        table(SECTIONS[name], rows)
        everything += rows
    if options.json:
        options.json.write_text(json.dumps(everything, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
