"""The balance as text: per surface what is left over and how sure that is, then what crosses."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from fvcheck.ledger import Ledger, Port, Result, Row
from fvcheck.pages import VERDICTS
from fvcheck.text.console import (
    FOLDED,
    LEFT,
    STYLE,
    heading,
    hint_lines,
    marked,
    paragraph,
    plain_table,
    render,
    rich_characters,
    verdict_text,
)
from fvcheck.text.family import families_of, family_parts
from fvcheck.text.numbers import MISSING, decimals, exponent, gauge, percent, scaled, short, unit
from fvcheck.verdict import CLOSED, MEANING
from fvcheck.verdict import VERDICTS as ORDER


def result_text(result: Result, patches: bool = False, quiet: bool = False) -> str:
    """All ledgers of a result, the ports, the hints and the verdict."""
    if quiet:
        return render(verdict_line(result.verdict))
    parts: list[RenderableType] = [_case_line(result), Text()]
    families, single = families_of(result.ledgers)
    for ledger in single:
        parts += [*ledger_parts(ledger, patches=patches), Text()]
    for name, members in families.items():
        parts += [*family_parts(name, members), Text()]
    parts += hint_lines(result.hints)
    if result.hints:
        parts.append(Text())
    parts += _verdict(result)
    return render(parts)


def steps_text(results: Sequence[Result], patches: bool = False, quiet: bool = False) -> str:
    """The results of several steps, one behind the other."""
    if quiet or len(results) == 1:
        return "".join(result_text(result, patches, quiet) for result in results)
    table = plain_table("step", "time", ("worst of its rows", FOLDED), ("verdict", LEFT))
    for result in results:
        name, row = worst_row(result)
        table.add_row(
            str(result.case["step"]),
            short(result.case["time"]),
            _told(name, row),
            verdict_text(result.verdict),
        )
    return "\n".join([*(result_text(result, patches) for result in results), render([table])])


def worst_row(result: Result) -> tuple[str, Row | None]:
    """(surface, row) with the worst verdict, among equals the one furthest beyond its tolerance."""
    judged = [(ledger.name, row) for ledger in result.ledgers for row in ledger.rows if row.verdict]
    if not judged:
        return "", None
    return max(
        judged,
        key=lambda item: (ORDER.index(str(item[1].verdict)), excess(item[1])),
    )


def excess(row: Row) -> float:
    """Imbalance in tolerances."""
    return abs(row.imbalance_percent or 0.0) / (row.tolerance_percent or 1.0)


def _told(name: str, row: Row | None) -> str:
    if row is None:
        return MISSING
    return f"{row.label} of {name}: {percent(row.imbalance_percent)} % against {row.tolerance_percent:g} %"


def _case_line(result: Result) -> Text:
    case = result.case
    facts = [f"{case['cells']} cells, {case['location']} data"]
    if case.get("time") is not None:
        facts.append(f"step {case['step']}, time {short(case['time'])}")
    return heading(str(case["file"]), *facts)


def ledger_parts(ledger: Ledger, amounts: bool = True, patches: bool = False) -> Iterator[RenderableType]:
    """Heading and tables of one control surface; ``amounts`` are the fluxes themselves."""
    facts = [ledger.kind]
    if ledger.area is not None:
        facts.append(f"area {short(ledger.area)} m{'²' if rich_characters() else '2'}")
    facts.append(f"length {short(ledger.length)} m")
    if (full := ledger.degrees.get("3", 1.0)) < 0.995:
        facts.append(f"degree 3 on {100 * full:.0f} %")
    yield heading(ledger.name, *facts)
    if ledger.closed:
        yield _judgement(ledger.rows)
    if not amounts:
        return
    if ledger.closed:
        yield Text()
    yield _amounts(ledger.rows) if ledger.closed else _fluxes(ledger.rows)
    if patches:
        yield Text()
        yield _origins(ledger.rows)
    if ledger.ports:
        yield Text()
        yield _ports(ledger.ports, per_metre=any(row.unit.endswith("/m") for row in ledger.rows))


def _judgement(rows: Sequence[Row]) -> Table:
    """Imbalance, bands and tolerance in percent of the scale; the gauge; the verdict."""
    sign = "±" if rich_characters() else "+-"
    table = plain_table(
        ("\nlaw", LEFT | {"min_width": 14}),
        "imbalance\n% of scale",
        f"{sign}data\n%",
        f"{sign}mesh\n%",
        "limit\n%",
        ("\n  -[ limit ]+", LEFT),
        ("\nverdict", LEFT),
    )
    for row in rows:
        per = None if not row.scale or row.imbalance_percent is None else 100.0 / row.scale
        table.add_row(
            f"{row.label} >= 0" if row.inequality else row.label,
            percent(row.imbalance_percent),
            percent(None if per is None else per * row.sampling_band),
            percent(None if per is None else per * row.resolution_band),
            short(row.tolerance_percent),
            Text(
                gauge(
                    row.imbalance_percent,
                    (per or 0.0) * row.sampling_band,
                    row.tolerance_percent,
                    rich=rich_characters(),
                ),
                style=STYLE.get(row.verdict or "", ""),
            ),
            verdict_text(row.verdict),
        )
    return table


def _amounts(rows: Sequence[Row]) -> Table:
    """What crosses the surface and its enclosed border, per law in one power of ten."""
    storage = any(row.storage for row in rows)
    columns = ["in", "out", "boundary", "source", *(["storage"] if storage else []), "imbalance", "scale"]
    table = plain_table(("", LEFT | {"min_width": 14}), *columns, *([] if storage else [("unit", LEFT)]))
    for row in rows:
        values = [row.inflow, row.outflow, row.boundary, row.source]
        values += [*([row.storage] if storage else []), row.imbalance, row.scale]
        cells, label = _in_one_unit(row, values)
        # With a storage column the unit has no room beside: it goes below the law.
        if storage:
            table.add_row(f"{row.label}\n  {label}", *cells)
        else:
            table.add_row(row.label, *cells, label)
    return table


def _fluxes(rows: Sequence[Row]) -> Table:
    """Of an open line or a patch."""
    sign = "±" if rich_characters() else "+-"
    table = plain_table(("law", LEFT | {"min_width": 14}), "in", "out", "net", f"{sign}data", ("unit", LEFT))
    for row in rows:
        cells, label = _in_one_unit(row, [row.inflow, row.outflow, row.flux, row.sampling_band])
        table.add_row(row.label, *cells, label)
    return table


def _in_one_unit(row: Row, values: Sequence[float | None]) -> tuple[list[str], str]:
    power = exponent(values)
    places = decimals(values, power)
    cells = [scaled(value, power, places) for value in values]
    return cells, unit(row.unit, power, rich_characters())


def _origins(rows: Sequence[Row]) -> Table:
    """Each law's fluxes by mechanism and by patch."""
    table = plain_table(("law", LEFT), ("through", LEFT), ("by", FOLDED), "net outward", ("unit", LEFT))
    for row in rows:
        # Of the whole domain nothing is drawn.
        by = [("drawn", name, value) for name, value in row.parts.items() if any(row.parts.values())]
        by += [("boundary", name, value) for name, value in row.patches.items()]
        power = exponent(value for _, _, value in by)
        places = decimals([value for _, _, value in by], power)
        for number, (where, name, value) in enumerate(by):
            label = unit(row.unit, power, rich_characters())
            table.add_row(row.label if number == 0 else "", where, name, scaled(value, power, places), label)
        if row.linear_imbalance is not None and row.scale:
            table.add_row(
                "",
                "all",
                "linear interpolation",
                f"{percent(100 * row.linear_imbalance / row.scale)} %",
                "imbalance",
            )
    return table


def _ports(ports: Sequence[Port], per_metre: bool) -> Table:
    table = plain_table(
        ("\nport", FOLDED | {"min_width": 8}),
        "area\nm" if per_metre else f"area\nm{'²' if rich_characters() else '2'}",
        "mass flow\nkg/s",
        "velocity\nm/s",
        "total pressure\nPa",
        "temperature\nK",
        "u2\nfactor",
        "u3\nfactor",
    )
    for port in ports:
        table.add_row(
            port.patch or port.piece or "",
            short(port.area),
            short(port.mass_flow),
            short(port.mean_velocity),
            short(port.total_pressure),
            short(port.temperature),
            short(port.momentum_factor),
            short(port.kinetic_energy_factor),
        )
    return table


def verdict_line(verdict: str | None) -> list[RenderableType]:
    """The verdict and its meaning in one sentence."""
    if verdict is None:
        return [Text("no verdict: fluxes through open surfaces only")]
    head = (("verdict ", "bold"), (marked(verdict), STYLE[verdict]))
    return [paragraph(*head, body=f": {MEANING[verdict]}")]


def _verdict(result: Result) -> list[RenderableType]:
    lines = verdict_line(result.verdict)
    name, row = worst_row(result)
    if row is None or result.verdict is None:
        return lines
    if result.verdict != CLOSED:
        lines.append(paragraph(("worst  ", "dim"), body=_told(name, row), indent=2, by=7))
    lines.append(paragraph(("do     ", "dim"), body=VERDICTS[result.verdict].do, indent=2, by=7))
    return lines
