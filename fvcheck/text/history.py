"""A history as text: the steps, what each number does over them, the balance over all of them."""

from __future__ import annotations

import math
from collections.abc import Iterator

from rich.console import RenderableType
from rich.text import Text

from fvcheck.ledger import Ledger
from fvcheck.overtime import Entry, History
from fvcheck.text.console import (
    FOLDED,
    LEFT,
    heading,
    hint_lines,
    plain_table,
    render,
    rich_characters,
    verdict_text,
)
from fvcheck.text.ledger import verdict_line
from fvcheck.text.numbers import percent, short
from fvcheck.trends import Trend

# Lines of the table of steps; what is between is in the CSV and JSON.
_LINES = 24

# Columns of numbers beside step, time and verdict that 80 columns hold.
_COLUMNS = 5
_ROUTES = 6

_ABBREVIATED = {"momentum": "mom.", "kinetic-energy": "kinetic", "total-energy": "energy", "angular": "ang."}


def history_text(history: History, quiet: bool = False) -> str:
    """Steps, trends, totals, hints and the verdict."""
    if quiet:
        return render(verdict_line(history.verdict))
    last = history.entries[-1].result
    facts = [history.counted, f"{last.case['cells']} cells, {last.case['location']} data"]
    parts: list[RenderableType] = [heading(str(last.case["file"]), *facts), Text()]
    for number, ledger in enumerate(last.ledgers):
        parts += [*_steps(history, number, ledger), Text()]
    parts += [*_forces(history)]
    if history.trends:
        parts += [*_trends(history)]
    if history.totals:
        parts += [*_totals(history), Text()]
    parts += hint_lines(history.hints)
    if history.hints:
        parts.append(Text())
    if history.ended:
        parts.append(Text(f"ended: {history.ended}"))
    parts += verdict_line(history.verdict)
    return render(parts)


def line_text(entry: Entry) -> str:
    """One snapshot in one line, for a run that is watched."""
    at = f"time {short(entry.time)}" if entry.time is not None else f"iteration {entry.number}"
    words = []
    for ledger in entry.result.ledgers:
        numbers = ", ".join(
            f"{row.label} {percent(row.imbalance_percent)} %"
            if row.imbalance is not None
            else f"{row.label} {short(row.flux)} {row.unit}"
            for row in ledger.rows
        )
        words.append(f"{ledger.name}: {numbers}")
    line = f"{at}  {'; '.join(words)}  {entry.result.verdict or ''}".rstrip()
    return "".join(letter if letter.isprintable() else "?" for letter in line)


def _steps(history: History, number: int, ledger: Ledger) -> Iterator[RenderableType]:
    rows = ledger.rows[:_COLUMNS]
    what = "imbalance, % of scale" if ledger.closed else "net flux"
    yield heading(ledger.name, ledger.kind, what)
    first = "time" if history.unsteady else "iteration"
    table = plain_table("step", first, *(_heading(row.label) for row in rows), ("verdict", LEFT))
    chosen = shown(len(history.entries), _LINES)
    for k in chosen:
        entry = history.entries[k]
        mine = entry.result.ledgers[number]
        cells = [
            percent(r.imbalance_percent) if ledger.closed else short(r.flux) for r in mine.rows[:_COLUMNS]
        ]
        at = short(entry.time) if history.unsteady else str(entry.number)
        table.add_row(str(k), at, *cells, verdict_text(mine.verdict))
    yield table
    left = len(history.entries) - len(chosen)
    if left or len(ledger.rows) > _COLUMNS:
        yield Text(f"({left} steps between are in --csv and --json, with all laws)", style="dim")


def _forces(history: History) -> Iterator[RenderableType]:
    """Drag and lift of each body, step by step, route beside route."""
    for body in history.bodies:
        told = history.routes_of(body)
        routes = told[:_ROUTES]
        heads = [_broken(route) for route in routes]
        lines = max((head.count("\n") for head in heads), default=0)
        for number in ("drag", "lift"):
            values = [history.force_values(body, route, number)[0] for route in routes]
            yield heading(body, f"{number} by route, {history.forces[-1].unit_of(number)}")
            first = "time" if history.unsteady else "iteration"
            titles = ("step", first, *heads)
            table = plain_table(*("\n" * (lines - title.count("\n")) + title for title in titles))
            for k in shown(len(history.entries), _LINES):
                entry = history.entries[k]
                at = short(entry.time) if history.unsteady else str(entry.number)
                mine = [None if math.isnan(of_route[k]) else of_route[k] for of_route in values]
                table.add_row(str(k), at, *(short(value) for value in mine))
            yield table
            if len(told) > len(routes):
                yield Text(f"({len(told) - len(routes)} more routes are in --csv and --json)", style="dim")
            yield Text()


def _broken(route: str) -> str:
    """A route in lines that a column of numbers has room for."""
    method, _, place = route.partition(" ")
    return "\n".join([*method.replace("-", "-\n").split("\n"), *([place[:10]] if place else [])])


def _heading(label: str) -> str:
    for word, less in _ABBREVIATED.items():
        label = label.replace(word, less)
    return label


def shown(count: int, lines: int) -> list[int]:
    """Numbers of the steps that are listed: evenly spread, the first and last among them."""
    if count <= lines:
        return list(range(count))
    return sorted({round(k * (count - 1) / (lines - 1)) for k in range(lines)})


def _trends(history: History) -> Iterator[RenderableType]:
    sign = "±" if rich_characters() else "+-"
    for name in dict.fromkeys(trend.surface for trend in history.trends):
        mine = [trend for trend in history.trends if trend.surface == name]
        strouhal = any(trend.strouhal is not None for trend in mine)
        table = plain_table(
            (f"\n{name}", FOLDED | {"min_width": 20}),
            "\nlevel",
            "drift\n/ step",
            "\nmean",
            f"\n{sign}95 %",
            "ampli-\ntude",
            "Strouhal\nnumber" if strouhal else "\nperiod",
            ("\nsettled", LEFT),
        )
        for trend in mine:
            table.add_row(
                f"{trend.name} [{trend.unit}]",
                short(trend.level),
                f"{trend.drift:.1e}",
                short(trend.mean),
                short(trend.mean_band, 2),
                short(trend.amplitude, 3),
                _period(trend, strouhal),
                "yes" if trend.settled else "no",
            )
        yield table
        yield Text()


def _period(trend: Trend, strouhal: bool) -> str:
    return short(trend.strouhal if strouhal else trend.period)


def _totals(history: History) -> Iterator[RenderableType]:
    """The balance between the first and last time."""
    sign = "±" if rich_characters() else "+-"
    for name, totals in history.totals.items():
        if not totals:
            continue
        yield heading(name, f"from time {short(totals[0].start)} to {short(totals[0].end)}")
        table = plain_table(
            ("law", LEFT | {"min_width": 14}), "change", "passed out", "imbalance", "%", f"{sign}data %",
            ("unit", LEFT), ("verdict", LEFT),
        )  # fmt: skip
        for total in totals:
            label = total.law if total.component is None else f"{total.law}-{total.component}"
            per = 100.0 / total.scale if total.scale > 0 else 0.0
            table.add_row(
                label,
                short(total.change),
                short(total.passed),
                short(total.imbalance),
                percent(total.imbalance_percent),
                percent(per * total.sampling_band),
                total.unit,
                verdict_text(total.verdict),
            )
        yield table
