"""Forces as text: the routes side by side, with their bands and how far they are apart."""

from __future__ import annotations

from collections.abc import Sequence

from rich.console import RenderableType
from rich.text import Text

from fvcheck.routes import Estimate, Forces
from fvcheck.routes.sweep import Sweep
from fvcheck.text.console import FOLDED, LEFT, heading, hint_lines, plain_table, render, rich_characters
from fvcheck.text.numbers import MISSING, decimals, exponent, scaled, short, unit


def forces_text(found: Forces, quiet: bool = False) -> str:
    """Per body the routes, what they differ by, coefficients, sweeps; then the hints."""
    bodies = list(dict.fromkeys(e.body for e in found.estimates))
    parts: list[RenderableType] = []
    if not quiet:
        case = found.case
        parts += [heading(str(case["file"]), f"{case['cells']} cells, {case['location']} data"), Text()]
    for body in bodies:
        mine = [e for e in found.estimates if e.body == body]
        if quiet:
            parts.append(_summary(mine))
            continue
        x, y = mine[0].moment_about
        where = "about the axis" if case.get("axis") else f"about ({short(x)}, {short(y)})"
        parts.append(heading(body, f"force of the fluid on it, moment {where}"))
        parts += [*_routes(mine, found.unit), Text()]
        if any(e.coefficients for e in mine):
            parts += [_coefficients(mine), Text()]
    if not quiet:
        for sweep in found.sweeps:
            parts += [*_sweep(sweep, found.unit), Text()]
        parts += hint_lines(found.hints)
    return render(parts)


def _summary(mine: Sequence[Estimate]) -> Text:
    known = [e for e in mine if not e.refused] or mine
    best = next((e for name in ("band", "control-surface") for e in known if e.method == name), known[0])
    return Text(f"{best.body}: drag {short(best.drag)}, lift {short(best.lift)} by {best.label}")


def _routes(mine: Sequence[Estimate], name: str) -> list[RenderableType]:
    rich = rich_characters()
    data, mesh = ("±data", "±mesh") if rich else ("+-data", "+-mesh")
    power = exponent([v for e in mine for v in (e.drag, e.lift)])
    torque = exponent([e.moment for e in mine])
    table = plain_table(
        ("\nroute", FOLDED | {"min_width": 16}),
        *(f"\n{title}" for title in ("drag", data, mesh, "lift", data, mesh)),
        "moment\n" + (f"1e{torque}" if torque else ""),
        f"\n{data}",
    )
    places = decimals([v for e in mine for v in (e.drag, e.lift)], power)

    def half(e: Estimate, number: str, kind: str, at: int) -> str:
        value = e.bands.get(number, {}).get(kind)
        return MISSING if value is None else short(value / 10.0**at, 2)

    for e in mine:
        table.add_row(
            e.label,
            scaled(e.drag, power, places),
            half(e, "drag", "sampling", power),
            half(e, "drag", "resolution", power),
            scaled(e.lift, power, places),
            half(e, "lift", "sampling", power),
            half(e, "lift", "resolution", power),
            scaled(e.moment, torque, decimals([e.moment], torque)),
            half(e, "moment", "sampling", torque),
        )
    out: list[RenderableType] = [table]
    apart = []
    for number in ("drag", "lift"):
        known = [v for e in mine if (v := getattr(e, number)) is not None]
        if len(known) > 1:
            gap = max(known) - min(known)
            size = max(abs(v) for v in known)
            share = f", {100 * gap / size:.2g} %" if size > 0 else ""
            apart.append(f"{number} {short(gap / 10.0**power, 3)}{share}")
    label = f"forces in {unit(name, power, rich)}"
    out.append(Text(label + ("; routes apart by: " + "; ".join(apart) if apart else ""), style="dim"))
    assumed = dict.fromkeys((e.method, e.assumptions) for e in mine if e.assumptions)
    for method, text in assumed:
        out.append(Text(f"{method} takes for granted: {text}", style="dim"))
    return out


def _coefficients(mine: Sequence[Estimate]) -> RenderableType:
    data = "±data" if rich_characters() else "+-data"
    table = plain_table(
        ("coefficients", FOLDED | {"min_width": 16}), "drag", data, "lift", data, "moment", data
    )
    for e in mine:
        c = e.coefficients
        if c is None or e.refused:
            continue
        numbers = [c[name] for name in ("drag", "drag_band", "lift", "lift_band", "moment", "moment_band")]
        table.add_row(e.label, *(short(v, 5 if k % 2 == 0 else 2) for k, v in enumerate(numbers)))
    return table


def _sweep(sweep: Sweep, name: str) -> list[RenderableType]:
    data = "±data" if rich_characters() else "+-data"
    power = exponent([v for e in sweep.estimates for v in (e.drag, e.lift)])
    places = decimals([v for e in sweep.estimates for v in (e.drag, e.lift)], power)
    levels = {number: sweep.plateau(number) for number in ("drag", "lift")}
    table = plain_table("position", "drag", data, ("", LEFT), "lift", data, ("", LEFT))
    for position, e in zip(sweep.positions, sweep.estimates):
        cells = [short(position)]
        for number in ("drag", "lift"):
            found, half = levels[number], e.bands.get(number, {}).get("sampling")
            flat = found is not None and found.start <= position <= found.end
            cells += [
                scaled(getattr(e, number), power, places),
                MISSING if half is None else short(half / 10.0**power, 2),
                "=" if flat else "",
            ]
        table.add_row(*cells)
    out: list[RenderableType] = [
        heading(f"{sweep.body}: {sweep.family}", f"in {unit(name, power, rich_characters())}"),
        table,
    ]
    for number, found in levels.items():
        if found is not None:
            where = f"level from {short(found.start)} to {short(found.end)}, {found.count} positions"
            mean = f"mean {short(found.mean / 10.0**power, 5)}, spread {short(found.spread / 10.0**power, 2)}"
            out.append(Text(f"= {number} {where}: {mean}"))
    return out
