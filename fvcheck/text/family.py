"""Ledgers of a family of surfaces: fluxes against position, and where they are level."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from rich.console import RenderableType
from rich.text import Text

from fvcheck.ledger import Ledger, Row
from fvcheck.text.console import LEFT, heading, plain_table, rich_characters, verdict_text
from fvcheck.text.numbers import decimals, exponent, scaled, short, unit

if TYPE_CHECKING:
    from fvcheck.routes.sweep import Plateau

_MEMBER = re.compile(r"(.*)@([-+0-9.eE]+)")


def families_of(ledgers: Sequence[Ledger]) -> tuple[dict[str, list[Ledger]], list[Ledger]]:
    """Ledgers of surfaces called NAME@POSITION by their NAME, and the others."""
    families: dict[str, list[Ledger]] = {}
    single = []
    for ledger in ledgers:
        found = _MEMBER.fullmatch(ledger.name)
        if found:
            families.setdefault(found[1], []).append(ledger)
        else:
            single.append(ledger)
    return families, single


def family_parts(name: str, members: Sequence[Ledger]) -> list[RenderableType]:
    """One table per family: the flux of each law through each member, and its level stretch."""
    positions = [float(ledger.name.rpartition("@")[2]) for ledger in members]
    labels = [row.label for row in members[0].rows if all(_has(ledger, row.label) for ledger in members)]
    rows = {label: [ledger[label] for ledger in members] for label in labels}
    levels = {label: _level(positions, column) for label, column in rows.items()}
    # A name of two words stands in two lines; the unit has a line of its own.
    powers = {label: exponent([row.flux for row in column]) for label, column in rows.items()}
    heads = []
    for label, column in rows.items():
        first, _, last = label.rpartition("-")
        heads.append(f"{first}\n{last}\n{unit(column[0].unit, powers[label], rich_characters())}")
    closed = any(ledger.closed for ledger in members)
    table = plain_table("\n\nposition", *heads, *([("\n\nverdict", LEFT)] if closed else []))
    for number, position in enumerate(positions):
        cells = []
        for label, column in rows.items():
            places = decimals([row.flux for row in column], powers[label])
            found = levels[label]
            flat = found is not None and found.start <= position <= found.end
            value = scaled(column[number].flux, powers[label], places)
            cells.append(f"{value} {'=' if flat else ' '}")
        verdict = [verdict_text(members[number].verdict)] if closed else []
        table.add_row(short(position), *cells, *verdict)
    out: list[RenderableType] = [heading(name, f"{len(members)} positions, net flux"), table]
    for label, found in levels.items():
        if found is not None:
            band = max(row.sampling_band for row in rows[label])
            scale = 10.0 ** powers[label]
            out.append(
                Text(
                    f"= {label} level from {short(found.start)} to {short(found.end)}: "
                    f"mean {short(found.mean / scale, 5)}, spread {short(found.spread / scale, 2)}, "
                    f"{'±' if rich_characters() else '+-'}data {short(band / scale, 2)}"
                )
            )
    return out


def _has(ledger: Ledger, label: str) -> bool:
    return any(row.label == label for row in ledger.rows)


def _level(positions: Sequence[float], column: Sequence[Row]) -> Plateau | None:
    from fvcheck.routes.sweep import plateau  # with all routes of forces, which few ledgers need

    size = float(np.median([0.5 * (row.inflow + row.outflow) for row in column]))
    return plateau(positions, [row.flux for row in column], [row.sampling_band for row in column], size)
