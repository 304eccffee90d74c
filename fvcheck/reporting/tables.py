"""Tables of a report: titles, and cells that know the number behind their text."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from fvcheck.ledger import Ledger, Result, Row
from fvcheck.reporting.style import plain
from fvcheck.routes import Estimate, Forces
from fvcheck.text.numbers import percent, short
from fvcheck.verdict import CLOSED, MESH_LIMITED, OPEN, UNDECIDED

MARK = {CLOSED: "✓", UNDECIDED: "?", MESH_LIMITED: "△", OPEN: "✗"}
"""A sign for each verdict, so that colour is not needed to see it."""


@dataclass(frozen=True)
class Cell:
    """``text`` as shown; ``value`` the number behind it; ``kind`` "number", "word", "verdict" or "gauge"."""

    text: str
    value: float | None = None
    kind: str = "word"
    gauge: Gauge | None = None


@dataclass(frozen=True)
class Gauge:
    """Where an imbalance lies between its limits: places from 0 to 100, limits at 25 and 75."""

    at: float
    low: float
    high: float
    beyond: str


@dataclass(frozen=True)
class Table:
    """A table with a caption; the first cell of a row is its heading."""

    caption: str
    titles: tuple[str, ...]
    rows: tuple[tuple[Cell, ...], ...]


def word(text: object) -> Cell:
    return Cell(plain(text))


def number(value: float | None, text: str | None = None) -> Cell:
    """A number as `short` shows it, or as ``text``."""
    return Cell(short(value, 5) if text is None else text, value, "number")


def in_percent(value: float | None) -> Cell:
    return Cell(percent(value), value, "number")


def verdict(value: str | None) -> Cell:
    return Cell(value or "–", None, "verdict" if value else "word")


def table(caption: str, titles: Sequence[str], rows: Iterable[Sequence[Cell]]) -> Table:
    """Columns that hold nothing in any row are left out."""
    whole = [tuple(row) for row in rows]
    keep = [k for k in range(len(titles)) if k == 0 or any(_holds(row[k]) for row in whole)]
    return Table(caption, tuple(titles[k] for k in keep), tuple(tuple(row[k] for k in keep) for row in whole))


def _holds(cell: Cell) -> bool:
    return cell.value is not None or cell.gauge is not None or cell.text not in ("", "-", "–")


def _share(value: float | None, row: Row) -> float | None:
    return None if value is None or not row.scale else 100.0 * value / row.scale


def gauge(row: Row) -> Cell:
    """The imbalance and its sampling band on a scale from −2 to 2 limits."""
    value, limit, band = row.imbalance_percent, row.tolerance_percent, _share(row.sampling_band, row)
    if value is None or not limit or band is None or not math.isfinite(value):
        return Cell("")

    def place(number: float) -> float:
        return min(max(50.0 + 25.0 * number / float(limit), 0.0), 100.0)

    beyond = "left" if value < -2 * limit else "right" if value > 2 * limit else ""
    return Cell("", None, "gauge", Gauge(place(value), place(value - band), place(value + band), beyond))


def _judged(row: Row) -> list[Cell]:
    return [
        in_percent(row.imbalance_percent),
        in_percent(_share(row.sampling_band, row)),
        in_percent(_share(row.resolution_band, row)),
        in_percent(row.tolerance_percent),
        gauge(row),
        verdict(row.verdict),
    ]


_JUDGED = ("imbalance %", "±data %", "±mesh %", "limit %", "−limit … +limit", "verdict")


def overview(result: Result) -> Table | None:
    """Every judged row of every surface; None where none is."""
    rows = [
        [word(ledger.name), word(_label(row)), *_judged(row)]
        for ledger in result.ledgers
        for row in ledger.rows
        if row.verdict is not None
    ]
    if not rows:
        return None
    return table("All rows, in percent of the scale of each", ("surface", "law", *_JUDGED), rows)


def _label(row: Row) -> str:
    return f"{row.label} ≥ 0" if row.inequality else row.label


def amounts(ledger: Ledger) -> Table:
    """What crosses, and what is left over, in the unit of each law."""
    titles = (
        "law", "unit", "in", "out", "net flux", "boundary", "storage", "source", "imbalance", "scale",
    )  # fmt: skip
    names = ("inflow", "outflow", "flux", "boundary", "storage", "source", "imbalance", "scale")
    rows = [
        [word(_label(row)), word(row.unit), *(number(getattr(row, name)) for name in names)]
        for row in ledger.rows
    ]
    return table("What crosses: imbalance = storage + net flux + boundary − source", titles, rows)


def certainty(ledger: Ledger) -> Table:
    """How sure each row is: bands in the unit of the law, and what linear interpolation gives."""
    titles = ("law", "unit", "±data", "±mesh", "of it ±rounding", "of it ±time", "linear imbalance",
              "linear %", "imbalance %", "limit %", "verdict")  # fmt: skip
    rows = [
        [
            word(_label(row)),
            word(row.unit),
            number(row.sampling_band, short(row.sampling_band, 3)),
            number(row.resolution_band, short(row.resolution_band, 3)),
            number(row.rounding_band, short(row.rounding_band, 2)),
            number(row.time_band, short(row.time_band, 2)),
            number(row.linear_imbalance),
            in_percent(_share(row.linear_imbalance, row)),
            in_percent(row.imbalance_percent),
            in_percent(row.tolerance_percent),
            verdict(row.verdict),
        ]
        for row in ledger.rows
    ]
    return table("How sure: sampling band (±data), resolution band (±mesh)", titles, rows)


def origins(ledger: Ledger) -> Table:
    """Drawn fluxes by mechanism, boundary by patch."""
    parts = tuple(dict.fromkeys(name for row in ledger.rows for name in row.parts))
    patches = tuple(dict.fromkeys(name for row in ledger.rows for name in row.patches))
    rows = [
        [
            word(_label(row)),
            word(row.unit),
            *(number(row.parts[name]) if name in row.parts else Cell("–") for name in parts),
            *(number(row.patches[name]) if name in row.patches else Cell("–") for name in patches),
        ]
        for row in ledger.rows
    ]
    titles = ("law", "unit", *parts, *(f"at {plain(name)}" for name in patches))
    return table("What is drawn by mechanism, the boundary by patch", titles, rows)


def ports(ledger: Ledger) -> Table | None:
    """Stretches that flow passes; None where there are none."""
    if not ledger.ports:
        return None
    titles = ("port", "area", "mass flow [kg/s]", "velocity [m/s]", "total pressure [Pa]", "temperature [K]",
              "u² factor", "u³ factor")  # fmt: skip
    names = ("area", "mass_flow", "mean_velocity", "total_pressure", "temperature", "momentum_factor",
             "kinetic_energy_factor")  # fmt: skip
    rows = [
        [word(port.patch or port.piece or ""), *(number(getattr(port, name)) for name in names)]
        for port in ledger.ports
    ]
    return table("Ports", titles, rows)


def routes(found: Forces, body: str) -> list[Table]:
    """The routes to a body's force side by side, and coefficients where a reference is known."""
    mine = [e for e in found.estimates if e.body == body]
    name = "N" if found.case.get("depth") is not None or found.case.get("axis") else "N/m"
    titles = ["route"]
    for what in ("drag", "lift"):
        titles += [f"{what} [{name}]", "±data", "±mesh"]
    titles += ["moment [N m]" if name == "N" else "moment [N m/m]", "±data", "±mesh"]
    rows = []
    for e in mine:
        cells = [word(f"{e.label}: {e.refused}" if e.refused else e.label)]
        for what in ("drag", "lift", "moment"):
            cells.append(number(getattr(e, what)))
            cells += [_band(e, what, kind) for kind in ("sampling", "resolution")]
        rows.append(cells)
    out = [table(f"Force of the fluid on {plain(body)}, by route", titles, rows)]
    if any(e.coefficients for e in mine):
        names = [
            (f"{what}{band}", k) for what in ("drag", "lift", "moment") for band, k in (("", 5), ("_band", 2))
        ]
        rows = [
            [word(e.label), *(number(e.coefficients[n], short(e.coefficients[n], k)) for n, k in names)]
            for e in mine
            if e.coefficients and not e.refused
        ]
        out.append(
            table("Coefficients", ("route", "drag", "±data", "lift", "±data", "moment", "±data"), rows)
        )
    return out


def _band(e: Estimate, what: str, kind: str) -> Cell:
    value = e.bands.get(what, {}).get(kind)
    return number(value, short(value, 2))
