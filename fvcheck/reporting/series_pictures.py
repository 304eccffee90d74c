"""Plots over time, iterations, meshes and routes."""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial
from typing import Any

import numpy as np

from fvcheck.ledger import Ledger
from fvcheck.meshstudy import Quantity, Study
from fvcheck.overtime import History
from fvcheck.reporting.style import GRID, INK, MARKS, MUTED, SERIES, Drawing, plain
from fvcheck.routes import Estimate, Forces
from fvcheck.text.numbers import exponent, percent, short, unit

Array = np.ndarray

# More marks than this on a line run into one another; more panels fill pages.
_MARKED, _PANELS = 25, 12


def history_drawings(history: History) -> list[Drawing]:
    """Imbalance with its bands and tolerance, and net flux, over the steps: one drawing per surface."""
    out = []
    for number, ledger in enumerate(history.entries[-1].result.ledgers, start=1):
        kind = "time" if history.unsteady else "iteration"
        words = f"{plain(ledger.name)} over {len(history.entries)} {kind}s. " + " ".join(
            f"{row.label}: from {percent(_first(history, ledger, row.label))} % to "
            f"{percent(row.imbalance_percent)} % of its scale."
            for row in ledger.rows
            if row.imbalance is not None
        )
        title = f"{plain(ledger.name)} over the {kind}s"
        draw = partial(_history, history, ledger)
        out.append(Drawing(f"history-{number}", title, words, draw))
    for number, body in enumerate(history.bodies, start=1):
        if history.routes_of(body):
            out.append(_forces_over_steps(history, body, number))
    return out


def _forces_over_steps(history: History, body: str, number: int) -> Drawing:
    """Drag and lift by every route, one panel each."""
    name, steps = history.forces[-1].unit, f"{_over(history)}s"
    told = []
    for route in history.routes_of(body):
        drag, lift = (history.force_values(body, route, what)[0] for what in ("drag", "lift"))
        told.append(f"{route}: drag {_range(drag)}, lift {_range(lift)} {name}.")
    words = f"Drag and lift on {plain(body)} over {len(history.entries)} {steps}, by route. "

    def draw() -> Any:
        from matplotlib.figure import Figure

        figure = Figure(figsize=(9.6, 5.2), layout="constrained")
        panels = figure.subplots(2, 1, sharex=True)
        for panel, what in zip(panels, ("drag", "lift")):
            lines = {route: history.force_values(body, route, what) for route in history.routes_of(body)}
            power = exponent([v for values, _ in lines.values() for v in values.tolist() if np.isfinite(v)])
            for k, (route, (values, half)) in enumerate(lines.items()):
                values, half, look = values / 10.0**power, half / 10.0**power, _look(history, k)
                panel.plot(history.steps, values, label=plain(route)[:34], **look)
                panel.fill_between(
                    history.steps, values - half, values + half, color=look["color"], alpha=0.16, lw=0
                )
            panel.set_title(f"{what}, sampling bands shaded")
            panel.set_ylabel(unit(name, power, True))
            panel.grid(True, lw=0.6)
        panels[0].legend(loc="center left", bbox_to_anchor=(1.0, 0.5))
        panels[1].set_xlabel(_over(history))
        return figure

    title = f"Force on {plain(body)} over the {steps}"
    return Drawing(f"force-history-{number}", title, words + plain(" ".join(told)), draw)


def _range(values: Array) -> str:
    return f"{short(float(np.nanmin(values)))} to {short(float(np.nanmax(values)))}"


def _first(history: History, ledger: Ledger, label: str) -> float | None:
    return history.entries[0].result[ledger.name][label].imbalance_percent


def _history(history: History, ledger: Ledger) -> Any:
    from matplotlib.figure import Figure

    rows = ledger.rows
    lines = -(-len(rows) // 3)
    judged = ledger.closed
    heights = [2.8, *[1.9] * lines] if judged else [1.9] * lines
    figure = Figure(figsize=(9.6, sum(heights)), layout="constrained")
    grid = figure.add_gridspec(len(heights), 3, height_ratios=heights)
    if judged:
        _imbalances(figure.add_subplot(grid[0, :]), history, ledger)
    for number, row in enumerate(rows):
        panel = figure.add_subplot(grid[int(judged) + number // 3, number % 3])
        flux = history.values(ledger.name, row.label, "flux")
        power = exponent(flux.tolist())
        panel.plot(history.steps, flux / 10.0**power, **_look(history, number))
        panel.set_title(f"{row.label}: net flux", fontsize=8.5)
        panel.set_ylabel(unit(row.unit, power, True))
        panel.grid(True, lw=0.6)
        panel.locator_params(nbins=5)
        panel.set_xlabel(_over(history))
    return figure


def _over(history: History) -> str:
    return "time" if history.unsteady else "iteration"


def _look(history: History, number: int) -> dict[str, Any]:
    return {
        "marker": MARKS[number % len(MARKS)],
        "markersize": 4.2,
        "markevery": max(1, len(history.entries) // _MARKED),
        "color": SERIES[number % len(SERIES)],
    }


def _imbalances(panel: Any, history: History, ledger: Ledger) -> None:
    """All rows with their sampling bands; logarithmic beyond the limits where they start far out."""
    largest = 0.0
    for number, row in enumerate(ledger.rows):
        value = history.values(ledger.name, row.label, "imbalance_percent")
        scale = history.values(ledger.name, row.label, "scale")
        with np.errstate(divide="ignore", invalid="ignore"):
            half = 100.0 * history.values(ledger.name, row.label, "sampling_band") / scale
        if not np.isfinite(value).any():
            continue
        largest = max(largest, float(np.nanmax(np.abs(value))))
        look = _look(history, number)
        panel.plot(history.steps, value, label=row.label, **look)
        panel.fill_between(history.steps, value - half, value + half, color=look["color"], alpha=0.16, lw=0)
    limits = sorted({row.tolerance_percent for row in ledger.rows if row.tolerance_percent})
    for limit in limits[:3]:
        for sign in (-1.0, 1.0):
            panel.axhline(sign * limit, color=MUTED, lw=0.9, ls=(0, (2, 2)))
    panel.axhline(0.0, color=INK, lw=0.8)
    title = "imbalance, sampling bands shaded, limits dotted"
    if limits and largest > 15.0 * limits[-1]:
        panel.set_yscale("symlog", linthresh=2.0 * limits[-1])
        ends = [2.0 * limits[-1] * 10.0**k for k in range(1 + int(np.log10(largest / limits[-1])))]
        panel.set_yticks([*(-end for end in reversed(ends)), 0.0, *ends])
        panel.yaxis.set_major_formatter(lambda value, place: f"{value:g}".replace("-", "−"))
        panel.minorticks_off()
        title += f"; beyond ±{ends[0]:g} % logarithmic"
    panel.set_title(title)
    panel.set_ylabel("% of the scale")
    panel.set_xlabel(_over(history))
    panel.grid(True, lw=0.6)
    panel.legend(loc="center left", bbox_to_anchor=(1.0, 0.5))


def study_drawing(study: Study) -> Drawing | None:
    """Quantities against cell size with bands, and what they go to at size zero."""
    # Imbalances of all surfaces first, then what passes them.
    chosen = sorted(study.quantities, key=lambda q: "imbalance" not in q.name)[:_PANELS]
    if not chosen:
        return None
    words = f"{len(chosen)} quantities on {len(study.sizes)} meshes. " + " ".join(
        f"{plain(q.surface)}, {plain(q.name)}: {short(q.convergence.values[0])} {q.unit} on the finest mesh, "
        f"±{short(q.convergence.band, 2)}."
        for q in chosen[:3]
    )
    words += " The table has all."

    def draw() -> Any:
        from matplotlib.figure import Figure

        rows = -(-len(chosen) // 3)
        figure = Figure(figsize=(9.6, 2.5 * rows + 0.2), layout="constrained")
        panels = figure.subplots(rows, 3, squeeze=False)
        for panel, quantity in zip(panels.flat, chosen):
            _study_panel(panel, quantity)
        for panel in panels.flat[len(chosen) :]:
            panel.set_axis_off()
        return figure

    return Drawing("study", "Quantities over the meshes", words, draw)


def _study_panel(panel: Any, quantity: Quantity) -> None:
    found = quantity.convergence
    per = 100.0 / quantity.scale if quantity.scale else None
    power = 0 if per else exponent([*found.values, found.extrapolated])
    factor = per or 10.0**-power
    sizes, values = np.array(found.sizes), np.array(found.values) * factor
    bands = np.array(quantity.sampling_bands)[: len(sizes)] * factor
    panel.errorbar(
        sizes[: len(bands)], values[: len(bands)], yerr=bands, color=SERIES[0], marker="o", ms=5, capsize=3,
        label="sampling band",
    )  # fmt: skip
    if found.extrapolated is not None:
        panel.plot([0.0], [found.extrapolated * factor], "D", ms=5.5, mfc="none", color=SERIES[1])
        panel.errorbar([0.0], [values[0]], yerr=[found.band * factor], color=SERIES[1], capsize=5, lw=1.2)
    panel.set_xlim(-0.06 * sizes.max(), 1.08 * sizes.max())
    panel.set_title(f"{plain(quantity.surface)[:22]}\n{plain(quantity.name)[:30]}", fontsize=8.5)
    panel.set_ylabel("% of the scale" if per else unit(quantity.unit, power, True))
    panel.set_xlabel("cell size [m]")
    panel.grid(True, lw=0.6)
    panel.locator_params(nbins=5)


def forces_drawing(found: Forces, number: int, body: str) -> Drawing | None:
    """Drag and lift on a body by every route, with both bands."""
    mine = [e for e in found.estimates if e.body == body and e.drag is not None]
    if not mine:
        return None
    name = found.unit
    words = f"Drag and lift on {plain(body)} by {len(mine)} routes. " + " ".join(
        f"{plain(e.label)}: drag {short(e.drag)} ±{short(e.band('drag'), 2)}, "
        f"lift {short(e.lift)} ±{short(e.band('lift'), 2)} {name}."
        for e in mine
    )

    def draw() -> Any:
        from matplotlib.figure import Figure

        figure = Figure(figsize=(9.6, 0.9 + 0.36 * len(mine)), layout="constrained")
        panels = figure.subplots(1, 2, sharey=True)
        for panel, what in zip(panels, ("drag", "lift")):
            _routes(panel, mine, what, name)
        panels[0].set_yticks(range(len(mine)), [plain(e.label)[:34] for e in mine])
        panels[0].set_ylim(len(mine) - 0.4, -0.6)
        return figure

    return Drawing(f"forces-{number}", f"Force on {plain(body)} by route", words, draw)


def _routes(panel: Any, mine: Sequence[Estimate], what: str, name: str) -> None:
    values = [getattr(e, what) for e in mine]
    power = exponent(values)
    for row, (e, value) in enumerate(zip(mine, values)):
        if value is None:
            continue
        for kind, width, alpha in (("resolution", 9.0, 0.25), ("sampling", 4.0, 0.65)):
            half = e.band(what, kind)
            if np.isfinite(half):
                low, high = ((value + sign * half) / 10.0**power for sign in (-1.0, 1.0))
                panel.plot(
                    [low, high], [row, row], lw=width, alpha=alpha, color=SERIES[0], solid_capstyle="butt"
                )
        panel.plot([value / 10.0**power], [row], "o", ms=4.5, color=INK)
    panel.set_title(f"{what}: value, sampling band (heavy), resolution band (light)", fontsize=8.5)
    panel.set_xlabel(unit(name, power, True))
    panel.grid(True, axis="x", lw=0.6, color=GRID)
    panel.locator_params(axis="x", nbins=5)
    panel.set_axisbelow(True)
