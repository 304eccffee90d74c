"""Tables of histories, studies and diagnoses, and what a diagnosis says in words."""

from __future__ import annotations

from fvcheck.diagnosis import Diagnosis
from fvcheck.diagnosis.where import Place
from fvcheck.laws import find_law
from fvcheck.meshstudy import Study
from fvcheck.overtime import History
from fvcheck.reporting.diagnosis_pictures import label_of
from fvcheck.reporting.style import plain
from fvcheck.reporting.tables import Table, in_percent, number, table, verdict, word
from fvcheck.text.history import shown
from fvcheck.text.numbers import percent, short

# Lines of the table of snapshots; what lies between is in the JSON and CSV of fvcheck history.
_LINES = 60


def steps(history: History) -> list[Table]:
    """Imbalance in percent of every row, snapshot after snapshot; one table per surface."""
    out = []
    chosen = shown(len(history.entries), _LINES)
    first = "time" if history.unsteady else "iteration"
    for number_, ledger in enumerate(history.entries[-1].result.ledgers):
        rows = []
        for k in chosen:
            entry = history.entries[k]
            mine = entry.result.ledgers[number_]
            at = entry.time if history.unsteady else entry.number
            cells = [
                in_percent(row.imbalance_percent) if ledger.closed else number(row.flux) for row in mine.rows
            ]
            rows.append([word(k), number(at), *cells, verdict(mine.verdict)])
        left = len(history.entries) - len(chosen)
        what = "imbalance, % of scale" if ledger.closed else "net flux"
        more = f"; {left} steps between are left out" if left else ""
        titles = ("step", first, *(row.label for row in ledger.rows), "verdict")
        out.append(table(f"{plain(ledger.name)}: {what}{more}", titles, rows))
    return out


def trends(history: History) -> Table | None:
    """What each quantity does over the steps."""
    if not history.trends:
        return None
    titles = ("surface", "quantity", "unit", "level", "drift / step", "mean", "±95 %", "amplitude", "period",
              "Strouhal number", "settled")  # fmt: skip
    rows = [
        [
            word(t.surface), word(t.name), word(t.unit), number(t.level), number(t.drift, f"{t.drift:.1e}"),
            number(t.mean), number(t.mean_band, short(t.mean_band, 2)), number(t.amplitude),
            number(t.period), number(t.strouhal), word("yes" if t.settled else "no"),
        ]
        for t in history.trends
    ]  # fmt: skip
    return table("Has it settled, does it swing", titles, rows)


def totals(history: History) -> list[Table]:
    """The balance from the first to the last time."""
    out = []
    for name, found in history.totals.items():
        if not found:
            continue
        titles = ("law", "unit", "change of content", "passed out", "imbalance", "imbalance %", "±data",
                  "±mesh", "limit %", "verdict")  # fmt: skip
        rows = [
            [
                word(t.law if t.component is None else f"{t.law}-{t.component}"), word(t.unit),
                number(t.change), number(t.passed), number(t.imbalance), in_percent(t.imbalance_percent),
                number(t.sampling_band, short(t.sampling_band, 2)),
                number(t.resolution_band, short(t.resolution_band, 2)),
                in_percent(t.tolerance_percent), verdict(t.verdict),
            ]
            for t in found
        ]  # fmt: skip
        when = f"from time {short(found[0].start)} to {short(found[0].end)}"
        out.append(table(f"{plain(name)}: the balance {when}", titles, rows))
    return out


def study_tables(study: Study) -> list[Table]:
    """The meshes, and each quantity with order, extrapolated value and uncertainty."""
    meshes = [
        [
            word(r.case["file"]),
            number(r.case["cells"], str(r.case["cells"])),
            number(size),
            verdict(r.verdict),
        ]
        for r, size in zip(study.results, study.sizes)
    ]
    titles = ("surface", "quantity", "unit", *(f"mesh {k + 1}" for k in range(len(study.sizes))), "kind",
              "order", "extrapolated", "GCI %", "±95 % mesh", "±data", "u")  # fmt: skip
    rows = []
    for q in study.quantities:
        c = q.convergence
        values = [*c.values, *[None] * (len(study.sizes) - len(c.values))]
        rows.append(
            [
                word(q.surface), word(q.name), word(q.unit), *(number(v) for v in values), word(c.kind),
                number(c.order, "–" if c.order is None else f"{c.order:.2f}"), number(c.extrapolated),
                in_percent(None if c.gci is None else 100.0 * c.gci),
                number(c.band, short(c.band, 2)), number(q.sampling_bands[0], short(q.sampling_bands[0], 2)),
                number(q.standard_uncertainty, short(q.standard_uncertainty, 2)),
            ]
        )  # fmt: skip
    return [
        table("Meshes, fine to coarse", ("file", "cells", "cell size [m]", "verdict"), meshes),
        table("Quantities over the meshes", titles, rows),
    ]


def diagnosis_words(found: Diagnosis) -> list[tuple[str, str]]:
    """(law, what its ledgers say and where it sits) in sentences."""
    out = []
    for why in found.why:
        text = found.sentence(why)
        text = f"{text[:1].upper()}{text[1:]}."
        for place in found.where:
            if place.law == why.law and place.kind != "nowhere":
                text += f" {_lies(place)}"
        out.append((why.law, text))
    return out


def _lies(place: Place) -> str:
    name = "It" if place.component is None else f"Along {place.component} it"
    if place.kind == "spread":
        return f"{name} is spread over the domain."
    if not place.regions:
        return f"{name} is {place.kind}."
    first = place.regions[0]
    at = f"({short(first.centre[0])}, {short(first.centre[1])})"
    more = len(place.regions) - 1
    others = f", and in {more} more place{'s' if more > 1 else ''}" if more else ""
    beside = f", along {plain(first.patch)}" if first.patch else ""
    return f"{name} sits near {at}{beside}, {short(first.size, 3)} m across{others}."


def diagnosis_tables(found: Diagnosis) -> list[Table]:
    """Causes that are named, and places that stand out."""
    out = []
    causes = [
        [
            word(why.law), word(c.told.cause), number(c.told.coefficient), number(c.told.interval[0]),
            number(c.told.interval[1]), in_percent(100.0 * c.fit.left), word(c.told.setting or "–"),
        ]
        for why in found.why
        for c in why.named
        if c.told is not None
    ]  # fmt: skip
    if causes:
        titles = ("law", "cause", "coefficient", "from", "to", "leaves %", "set")
        out.append(table("Why: set-up errors that would explain it", titles, causes))
    per_metre = found.cells.flow.case.per_metre
    places = []
    for place in found.where:
        unit = find_law(place.law).unit
        for k, r in enumerate(place.regions, start=1):
            places.append(
                [
                    word(label_of(place)), word(k), number(r.centre[0]), number(r.centre[1]),
                    number(r.size, short(r.size, 3)), number(r.amount), number(r.band, short(r.band, 2)),
                    word(unit if per_metre else unit.removesuffix("/m")),
                    number(100.0 * r.share, percent(100.0 * r.share)), word(r.patch or "–"),
                ]
            )  # fmt: skip
    if places:
        heads = ("law", "place", "x", "y", "across", "amount", "±data", "unit", "share %", "along")
        out.append(table("Where: places that stand out", heads, places))
    return out
