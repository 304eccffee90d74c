"""The same quantities over meshes: observed order, extrapolated value, grid convergence index."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable, Sequence
from dataclasses import asdict, dataclass
from functools import partial
from itertools import chain
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.balancing import balance_all, default_surfaces
from fvcheck.convergence import Convergence, grid_convergence
from fvcheck.errors import FvcheckError, SetupError
from fvcheck.flow import Flow, flow_of_export
from fvcheck.hints import Hint
from fvcheck.laws import Law
from fvcheck.ledger import SCHEMA, Ledger, Result
from fvcheck.notebook import html_hints, html_line, html_table
from fvcheck.recording import reaction
from fvcheck.series import file_list
from fvcheck.surfaces import ControlSurface, name_all
from fvcheck.tasks import each_done
from fvcheck.version import __version__


@dataclass(frozen=True)
class Quantity:
    """One number over the meshes.

    surface, name, unit : which; ``name`` is a row's label with ``imbalance`` or ``flux``,
        or the port and what of it
    scale : of an imbalance, the scale of its row on the finest mesh; else None
    sampling_bands : of each value, from fine to coarse: differences below them are noise of reading
    convergence : what the finest value is worth
    standard_uncertainty : root sum of squares of u_num and half the finest sampling band
    """

    surface: str
    name: str
    unit: str
    scale: float | None
    sampling_bands: tuple[float, ...]
    convergence: Convergence
    standard_uncertainty: float


@dataclass(frozen=True)
class Study:
    """Results on several meshes, from fine to coarse, and what they say together.

    sizes : representative cell size of each, √(area / cells) [m]
    missing : quantities that not every mesh could give
    """

    results: tuple[Result, ...]
    sizes: tuple[float, ...]
    quantities: tuple[Quantity, ...]
    missing: tuple[str, ...] = ()
    hints: tuple[Hint, ...] = ()

    def __getitem__(self, key: tuple[str, str]) -> Quantity:
        """``study["box", "mass imbalance"]``; SetupError where there is none."""
        for quantity in self.quantities:
            if (quantity.surface, quantity.name) == key:
                return quantity
        have = ", ".join(f"{q.surface}: {q.name}" for q in self.quantities)
        raise SetupError(f"the study has no {key[1]!r} of {key[0]!r}", mend=f"There are: {have}.")

    def to_dict(self) -> dict[str, Any]:
        """The result file: that of the finest mesh, and all under ``study``."""
        return self.results[0].to_dict() | {
            "schema": SCHEMA,
            "version": __version__,
            "study": {
                "meshes": [
                    {"case": result.case, "size": size, "verdict": result.verdict}
                    for result, size in zip(self.results, self.sizes)
                ],
                "quantities": [asdict(quantity) for quantity in self.quantities],
                "missing": list(self.missing),
            },
            "hints": [asdict(hint) for hint in self.hints],
        }

    def _repr_html_(self) -> str:
        titles = (
            "surface",
            "quantity",
            "unit",
            "finest",
            "next",
            "kind",
            "order",
            "extrapolated",
            "±95 % mesh",
            "±data",
        )
        rows = [
            (
                *(q.surface, q.name, q.unit, *q.convergence.values[:2], q.convergence.kind),
                *(q.convergence.order, q.convergence.extrapolated, q.convergence.band, q.sampling_bands[0]),
            )
            for q in self.quantities
        ]
        cells = ", ".join(str(result.case["cells"]) for result in self.results)
        head = html_line(f"{len(self.results)} meshes", f"{cells} cells")
        return head + html_table(titles, rows) + html_hints(self.hints)


def study(
    files: Sequence[str | Path | Flow] | str | Path,
    surfaces: Sequence[ControlSurface] | ControlSurface | None = None,
    laws: Iterable[str | Law] | None = None,
    *,
    step: int | str = "last",
    tolerance: dict[str, float] | None = None,
    scale: dict[str, float] | None = None,
    sources: Sequence[Any] = (),
    about: tuple[float, float] = (0.0, 0.0),
    on_case: Callable[[Result, int], None] | None = None,
    workers: int | None = None,
    scheduler: str | None = None,
    **reading: Any,
) -> Study:
    """Imbalances and fluxes of one case on two or more meshes, in any order.

    files : exports, or flows; the rest as in `balance_all` and `open_flow`
    on_case : called with each result and the number of all, for a progress bar
    workers, scheduler : files are read and balanced there, as in `fvcheck.tasks.each_done`

    Without surfaces: the whole domain, and one around each body at the distance
    that suits the first mesh. Raises SetupError for fewer than two meshes or two
    of the same size, and what `balance` and `open_flow` raise.
    """
    given = [files] if isinstance(files, str | Path) else list(files)
    named = [f for f in given if not isinstance(f, Flow)]
    cases: list[Any] = [f for f in given if isinstance(f, Flow)] + (file_list(named) if named else [])
    if len(cases) < 2:
        raise SetupError("a study needs two or more meshes, better three", mend="Name one FILE for each.")
    chosen = [surfaces] if isinstance(surfaces, ControlSurface) else surfaces
    names = None if laws is None else list(laws)
    if chosen is None:
        cases[0] = _flow(cases[0], step, reading)
        chosen = default_surfaces(cases[0])
    judged = {"tolerance": tolerance, "scale": scale, "sources": sources, "about": about}
    function = partial(_balanced, step, reading, list(name_all(chosen)), names, judged)
    spread = [number for number, case in enumerate(cases) if not isinstance(case, Flow)]
    elsewhere = each_done(function, [cases[n] for n in spread], workers=workers, scheduler=scheduler)
    by_number: dict[int, tuple[float, Result]] = {}
    for number, pair in chain(
        ((n, function(case)) for n, case in enumerate(cases) if isinstance(case, Flow)),
        ((spread[n], pair) for n, pair in elsewhere),
    ):
        if isinstance(pair, FvcheckError):
            raise pair
        by_number[number] = pair
        if on_case is not None:
            on_case(pair[1], len(cases))
    found = [by_number[number] for number in range(len(cases))]
    hints = dict.fromkeys(hint for _, result in found for hint in result.hints)
    found.sort(key=lambda pair: pair[0])
    sizes, results = tuple(size for size, _ in found), tuple(result for _, result in found)
    quantities, missing = _quantities(results, sizes)
    hints |= dict.fromkeys(_remarks(sizes, quantities, missing))
    return Study(results, sizes, quantities, missing, tuple(hints))


def _flow(case: Flow | Path, step: int | str, reading: dict[str, Any]) -> Flow:
    from fvcheck.formats.registry import open_export

    return case if isinstance(case, Flow) else flow_of_export(open_export(case), step=step, **reading)


def _balanced(
    step: int | str,
    reading: dict[str, Any],
    surfaces: Sequence[ControlSurface],
    laws: Sequence[str | Law] | None,
    judged: dict[str, Any],
    case: Flow | Path,
) -> tuple[float, Result]:
    """Cell size and ledgers of one mesh."""
    flow = _flow(case, step, reading)
    return mesh_size(flow), balance_all(flow, surfaces, laws, **judged)


def mesh_size(flow: Flow) -> float:
    """Representative cell size √(Σ area / cells) (Celik et al. 2008) [m]."""
    return float(np.sqrt(flow.mesh.areas.sum() / flow.mesh.n_cells))


def _quantities(
    results: Sequence[Result], sizes: Sequence[float]
) -> tuple[tuple[Quantity, ...], tuple[str, ...]]:
    out, missing = [], []
    for number, ledger in enumerate(results[0].ledgers):
        ledgers = [result.ledgers[number] for result in results]
        per_mesh = [_numbers(one) for one in ledgers]
        for name in dict.fromkeys(name for one in per_mesh for name in one):
            if not all(name in one for one in per_mesh):
                missing.append(f"{ledger.name}: {name}")
                continue
            values = [one[name][0] for one in per_mesh]
            if not any(values):
                continue  # no flow through a wall, say: there is nothing to study
            bands = tuple(one[name][1] for one in per_mesh)
            found = grid_convergence(values, sizes)
            total = float(np.hypot(found.uncertainty, 0.5 * bands[0]))
            _, _, unit, scale = per_mesh[0][name]
            out.append(Quantity(ledger.name, name, unit, scale, bands, found, total))
    return tuple(out), tuple(missing)


def _numbers(ledger: Ledger) -> dict[str, tuple[float, float, str, float | None]]:
    """Name -> value, sampling band, unit, scale of an imbalance."""
    out: dict[str, tuple[float, float, str, float | None]] = {}
    for row in ledger.rows:
        if row.imbalance is not None:
            out[f"{row.label} imbalance"] = (row.imbalance, row.sampling_band, row.unit, row.scale)
        if (row.inflow or row.outflow) and row.flux != row.imbalance:
            out[f"{row.label} flux"] = (row.flux, row.sampling_band, row.unit, None)
        if row.law == "momentum" and row.boundary:
            out[f"{row.label} force"] = (reaction(row), row.sampling_band, row.unit, None)
        for patch, amount in row.patches.items():
            out[f"{row.label} of {patch}"] = (amount, row.sampling_band, row.unit, None)
    return out


def _remarks(sizes: Sequence[float], quantities: Sequence[Quantity], missing: Sequence[str]) -> list[Hint]:
    out = []
    if len(sizes) == 2:
        out.append(
            Hint("two-meshes", "two meshes show no order: second order is assumed, with the wide factor of 3")
        )
    small = [f"{b / a:.3g}" for a, b in itertools.pairwise(sizes) if b / a < 1.3]
    if small:
        out.append(
            Hint(
                "close-meshes", f"the cell size grows by {', '.join(small)} only; 1.3 or more is recommended"
            )
        )
    odd = [f"{q.surface}: {q.name}" for q in quantities if q.convergence.kind == "diverging"]
    if odd:
        out.append(Hint("no-convergence", f"differences grow with refinement: {_some(odd)}"))
    noisy = [
        f"{q.surface}: {q.name}"
        for q in quantities
        if abs(q.convergence.values[1] - q.convergence.values[0]) < max(q.sampling_bands[:2])
        and q.convergence.kind != "still"
    ]
    if noisy:
        out.append(
            Hint("study-within-bands", f"meshes differ by less than the sampling bands: {_some(noisy)}")
        )
    if missing:
        out.append(Hint("study-incomplete", f"not every mesh gives {_some(missing)}"))
    return out


def _some(names: Sequence[str]) -> str:
    return ", ".join(names[:3]) + (f" and {len(names) - 3} more" if len(names) > 3 else "")
