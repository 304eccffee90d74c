"""Compute fvcheck's bundled demo case and write it to ``meshes/``.

    python scripts/make_demo.py [--out DIR] [--only coarse|fine] [--quick]

One VTU file per state, and ``demo-solver.json`` with what the solver itself sums
over its faces: the truth that a reader of the exported cell values has to recover.
``--quick`` tries everything out on a far coarser mesh.
"""

from __future__ import annotations

import argparse
import json
import time
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any

from demo_solver.case import REFERENCE, Case
from demo_solver.export import write_vtu
from demo_solver.solver import Relaxation, Solver, State
from demo_solver.sums import report, residuals

MESHES = Path(__file__).resolve().parent.parent / "meshes"
CLOSED = 1e-10
"""Relative net flux through the boundary that a converged run may leave."""


@dataclass(frozen=True)
class Run:
    """How one mesh is run: its cell size, relaxation, and the iterations to keep on the way."""

    h: float
    relaxation: Relaxation
    keep: tuple[int, ...] = ()


RUNS = {
    # Cautious relaxation: the march to convergence is long enough to be looked at.
    "coarse": Run(1.0, Relaxation(velocity=0.5, pressure=0.15), (5, 20, 50, 100, 200, 400)),
    "fine": Run(0.5, Relaxation(velocity=0.7, pressure=0.3)),
}


def converge(case: Case, solver: Solver, keep: tuple[int, ...]) -> list[tuple[int, State]]:
    """The states after the iterations in ``keep``, and the last one.

    Iterates until rounding stops the residuals from falling. Raises RuntimeError
    if that takes more than 10,000 iterations.
    """
    kept = []
    before = float("inf")
    for iteration, state in enumerate(solver.march(case.start(solver)), start=1):
        if iteration in keep:
            kept.append((iteration, state))
        if iteration % 100 == 0:
            worst = max(residuals(case, solver.mesh, solver.fluxes(state, case.inlet_temperature)).values())
            if worst < CLOSED and worst > 0.5 * before:
                return [*kept, (iteration, state)]
            before = worst
        if iteration == 10_000:
            break
    raise RuntimeError(f"not converged after {iteration} iterations: residual {before:.1e}")


def run(name: str, settings: Run, out: Path) -> dict[str, Any]:
    """Compute one mesh, write its files, check its balances; the solver's sums by file name."""
    case = Case()
    case = replace(case, duct=replace(case.duct, h=settings.h))
    begin = time.perf_counter()
    solver = case.solver(case.duct.mesh(), settings.relaxation)
    states = converge(case, solver, settings.keep)
    seconds = time.perf_counter() - begin
    print(f"{name}: {solver.mesh.n_cells} cells, {states[-1][0]} iterations, {seconds:.0f} s")

    found = {}
    for iteration, state in states:
        last = iteration == states[-1][0]
        path = out / (f"demo-{name}.vtu" if last else f"demo-{name}-{iteration:04d}.vtu")
        write_vtu(path, solver, state, iteration)
        result = {"iterations": iteration, "converged": last, **report(case, solver, state)}
        found[path.name] = result
        print_result(path.name, result)
    if max(result["closure"].values()) > CLOSED:
        raise RuntimeError(f"{name}: the converged run does not conserve: {result['closure']}")
    return found


def print_result(name: str, result: dict[str, Any]) -> None:
    """Two lines: what the bar feels, and how well each law closes over the domain."""
    (drag, lift), heat = result["bar"]["force"], result["bar"]["heat_rate"]
    open_by = ", ".join(f"{law} {value:.1e}" for law, value in result["closure"].items())
    print(f"  {name:22s} drag {drag:.6e} N/m, lift {lift:.6e} N/m, heat {heat:.6f} W/m")
    print(f"  {'':22s} relative net flux through the boundary: {open_by}")


def main() -> None:
    parser = argparse.ArgumentParser(description="Compute the demo case of fvcheck.")
    parser.add_argument("--out", type=Path, default=MESHES, metavar="DIR", help="default: meshes/")
    parser.add_argument("--only", choices=list(RUNS), help="one mesh only")
    parser.add_argument("--quick", action="store_true", help="a far coarser mesh, to try the program out")
    options = parser.parse_args()

    options.out.mkdir(parents=True, exist_ok=True)
    runs = {"quick": Run(2.0, Relaxation(), (5, 50))} if options.quick else RUNS
    if options.only and not options.quick:
        runs = {options.only: runs[options.only]}
    target = options.out / "demo-solver.json"
    known = json.loads(target.read_text()) if options.only and target.exists() else {"states": {}}
    for name, settings in runs.items():
        known["states"].update(run(name, settings, options.out))
    sums = {
        "about": ABOUT,
        "case": asdict(Case()),
        "reference": REFERENCE,
        "states": dict(sorted(known["states"].items())),
    }
    target.write_text(json.dumps(sums, indent=1, allow_nan=False) + "\n")


ABOUT = (
    "Sums over the faces of the demo solver, per metre of depth, SI units, positive out of the fluid. Heat "
    "carried by the stream counts from the inlet temperature. Residuals are sums over cells of absolute "
    "imbalances, over the throughflow of mass, momentum and heat. The reference is an independent solution "
    "of high order, scripts/reference_demo.py."
)


if __name__ == "__main__":
    main()
