"""Figures of histories, as PNG or SVG, by matplotlib without a screen."""

from __future__ import annotations

from io import BytesIO
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import SetupError
from fvcheck.overtime import History
from fvcheck.wholefile import write_whole

KINDS = (".png", ".svg", ".pdf")

# Lines are told apart by their marks as well as by colour.
_MARKS = "osD^vPX*"

# More marks than this on a line would run into one another.
_MOST_MARKS = 25


def check_plot_path(path: str | Path) -> None:
    """SetupError where no figure can be written."""
    path = Path(path)
    if path.suffix.lower() not in KINDS:
        raise SetupError(
            f"a figure cannot be written as {path.suffix or 'a file without ending'!r}",
            where=path,
            mend=f"Use one of {', '.join(KINDS)}.",
        )
    if path.is_dir() or not path.parent.is_dir():
        raise SetupError("the figure cannot be written there", where=path, mend="Give the path of a file.")


def history_figure(history: History) -> Any:
    """A matplotlib Figure over the steps: of each surface imbalance with its band and net flux, of each
    body drag and lift by every route."""
    from matplotlib.figure import Figure

    ledgers = history.entries[-1].result.ledgers
    bodies = history.bodies
    count = len(ledgers) + len(bodies)
    figure = Figure(figsize=(10, 0.6 + 3.2 * count), layout="constrained")
    panels = figure.subplots(count, 2, squeeze=False, sharex=True)
    steps = history.steps
    every = max(1, len(steps) // _MOST_MARKS)
    for (left, right), ledger in zip(panels, ledgers):
        for number, row in enumerate(ledger.rows):
            style: dict[str, Any] = {
                "marker": _MARKS[number % len(_MARKS)],
                "markersize": 4,
                "markevery": every,
                "color": f"C{number % 10}",
                "label": row.label,
            }
            if row.imbalance is not None:
                scale = history.values(ledger.name, row.label, "scale")
                percent = history.values(ledger.name, row.label, "imbalance_percent")
                band = history.values(ledger.name, row.label, "sampling_band")
                with np.errstate(divide="ignore", invalid="ignore"):
                    half = np.where(scale > 0, 100.0 * band / scale, np.nan)
                left.plot(steps, percent, **style)
                left.fill_between(
                    steps, percent - half, percent + half, color=style["color"], alpha=0.15, lw=0
                )
            right.plot(steps, history.values(ledger.name, row.label, "flux"), **style)
        left.axhline(0.0, color="0.5", lw=0.8)
        left.set_title(f"{ledger.name}: imbalance and sampling band", fontsize=10)
        left.set_ylabel("% of the scale")
        right.set_title(f"{ledger.name}: net flux through what is drawn", fontsize=10)
        right.legend(fontsize=8, frameon=False)
        for panel in (left, right):
            panel.grid(alpha=0.25)
    for pair, body in zip(panels[len(ledgers) :], bodies):
        _draw_forces(pair, history, body, every)
    for panel in panels[-1]:
        panel.set_xlabel("time" if history.unsteady else "iteration")
    return figure


def _draw_forces(pair: Any, history: History, body: str, every: int) -> None:
    labels = history.routes_of(body)
    for panel, name in zip(pair, ("drag", "lift")):
        for number, label in enumerate(labels):
            values, half = history.force_values(body, label, name)
            style: dict[str, Any] = {
                "marker": _MARKS[number % len(_MARKS)],
                "markersize": 4,
                "markevery": every,
                "color": f"C{number % 10}",
                "label": label,
            }
            panel.plot(history.steps, values, **style)
            panel.fill_between(
                history.steps, values - half, values + half, color=style["color"], alpha=0.15, lw=0
            )
        panel.set_title(f"{body}: {name} and sampling band", fontsize=10)
        panel.set_ylabel(history.forces[-1].unit)
        panel.grid(alpha=0.25)
    pair[1].legend(fontsize=8, frameon=False)


def save_history(history: History, path: str | Path) -> None:
    """Write the figure; the ending says in which format. SetupError where that cannot be."""
    check_plot_path(path)
    drawn = BytesIO()
    history_figure(history).savefig(drawn, format=Path(path).suffix.lstrip(".").lower(), dpi=150)
    write_whole(path, drawn.getvalue(), "figure")
