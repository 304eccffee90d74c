"""A diagnosis as text: words first, numbers after."""

from __future__ import annotations

from rich.console import RenderableType
from rich.text import Text

from fvcheck.diagnosis import Diagnosis
from fvcheck.diagnosis.cause import Told
from fvcheck.diagnosis.naming import Why
from fvcheck.diagnosis.where import Place
from fvcheck.laws import find_law
from fvcheck.ledger import Result
from fvcheck.text.console import (
    FOLDED,
    LEFT,
    heading,
    hint_lines,
    paragraph,
    plain_table,
    render,
    rich_characters,
    verdict_text,
)
from fvcheck.text.numbers import percent, short


def diagnosis_text(
    found: Diagnosis, tried: tuple[Told, Result, Result] | None = None, quiet: bool = False
) -> str:
    """What the ledgers say, law by law; where, why, what a trial gave; then the hints."""
    words: list[RenderableType] = []
    for why in found.why:
        words.append(paragraph((f"{why.law}: ", "bold"), body=_sentence(found, why)))
    if quiet:
        return render(words)
    case = found.case
    parts: list[RenderableType] = [
        heading(str(case["file"]), f"{case['cells']} cells, {case['location']} data"),
        Text(),
        *words,
        Text(),
    ]
    if any(why.named for why in found.why):
        parts += [heading("why"), *_why(found), Text()]
    if any(place.regions for place in found.where):
        parts += [heading("where"), _where(found), Text()]
    if tried is not None:
        parts += [*_tried(*tried), Text()]
    parts += hint_lines(found.hints)
    return render(parts)


def _sentence(found: Diagnosis, why: Why) -> str:
    text = found.sentence(why)
    places = [place for place in found.where if place.law == why.law and place.kind != "nowhere"]
    if not places:
        return text + "."
    return f"{text}. " + " ".join(_lies(place) for place in places)


def _lies(place: Place) -> str:
    name = "It" if place.component is None else f"Along {place.component} it"
    if place.kind == "spread":
        return f"{name} is spread over the domain."
    first = place.regions[0]
    at = f"({short(first.centre[0])}, {short(first.centre[1])})"
    more = len(place.regions) - 1
    others = f", and in {more} more" if more else ""
    beside = f", along {first.patch}" if place.kind == "along a patch" and first.patch else ""
    return f"{name} sits near {at}{beside}, {short(first.size, 3)} across{others}."


def _why(found: Diagnosis) -> list[RenderableType]:
    out: list[RenderableType] = []
    for why in found.why:
        for c in why.named:
            if c.told is None:
                continue
            low, high = c.told.interval
            after = "" if why.next_left is None else f"; next {percent(100 * why.next_left)} %"
            out += [
                paragraph((f"{why.law}: ", "bold"), body=c.told.cause),
                paragraph(
                    body=f"coefficient {short(c.told.coefficient, 5)}, from {short(low, 5)} to "
                    f"{short(high, 5)}; leaves {percent(100 * c.fit.left)} % of the squares{after}",
                    indent=2,
                ),
                paragraph(("set ", "dim"), body=c.told.setting or "(no setting expresses it)", indent=2),
            ]
    return out


def _where(found: Diagnosis) -> RenderableType:
    data = "±data" if rich_characters() else "+-data"
    table = plain_table(
        ("law", FOLDED), "x", "y", "across", "amount", data, ("unit", LEFT), "share %", ("along", LEFT)
    )
    for place in found.where:
        name = place.law if place.component is None else f"{place.law}-{place.component}"
        for r in place.regions:
            table.add_row(
                name,
                short(r.centre[0]),
                short(r.centre[1]),
                short(r.size, 3),
                short(r.amount),
                short(r.band, 2),
                find_law(place.law).unit if found.cells.flow.case.per_metre else "",
                percent(100 * r.share),
                r.patch or "",
            )
    return table


def _tried(told: Told, before: Result, after: Result) -> list[RenderableType]:
    table = plain_table(("surface", FOLDED), ("row", LEFT), "before %", ("", LEFT), "after %", ("", LEFT))
    for old, new in zip(before.ledgers, after.ledgers):
        for a, b in zip(old.rows, new.rows):
            table.add_row(
                old.name,
                a.label,
                percent(a.imbalance_percent),
                verdict_text(a.verdict),
                percent(b.imbalance_percent),
                verdict_text(b.verdict),
            )
    return [heading("try", told.setting), table]
