"""The page: sections of words, tables and drawings, put into the template."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from importlib.resources import files

from fvcheck.hints import PAGES, Hint, Page
from fvcheck.ledger import Row
from fvcheck.pages import VERDICTS
from fvcheck.reporting.gathering import Gathered
from fvcheck.reporting.record import Record
from fvcheck.reporting.series_tables import (
    diagnosis_tables,
    diagnosis_words,
    steps,
    study_tables,
    totals,
    trends,
)
from fvcheck.reporting.setup_tables import setup_tables, spelled
from fvcheck.reporting.style import DARK, VARIABLES, Drawing, minus, plain
from fvcheck.reporting.tables import MARK, Table, amounts, certainty, origins, overview, ports, routes
from fvcheck.text.ledger import worst_row
from fvcheck.text.numbers import MISSING, percent, short
from fvcheck.verdict import CLOSED, MEANING

CAUTIONS = (
    "A closed balance is necessary, not sufficient. A run with a wrong geometry, a wrong boundary value or "
    "an unfit turbulence model can conserve perfectly.",
    "Validation against measurements, studies over meshes and models, local codes and licensed practice "
    "decide what a result may be used for. This report replaces none of them.",
    "Bands speak of sampling and of the mesh, not of the physics of the model; a verdict holds for the "
    "control surfaces and tolerances named here and for no others.",
    "The set-up is shown as it was understood. Compare it with that of the run before relying on a number.",
)

DRAWN_SURFACES = 8
"""Surfaces whose fluxes are drawn; more would fill a book."""


@dataclass(frozen=True)
class Section:
    """One section: heading, paragraphs, tables and drawings in this order; then parts of its own.

    beside : tables may stand side by side
    """

    anchor: str
    title: str
    paragraphs: tuple[str, ...] = ()
    tables: tuple[Table, ...] = ()
    drawings: tuple[Drawing, ...] = ()
    drawings_first: bool = False
    beside: bool = False
    parts: tuple[Section, ...] = ()


@dataclass(frozen=True)
class Explained:
    """Hints of one code with its page."""

    code: str
    messages: tuple[str, ...]
    page: Page | None


@dataclass(frozen=True)
class Drawings:
    """All drawings of a report by where they belong."""

    fields: tuple[Drawing, ...] = ()
    fluxes: dict[str, tuple[Drawing, ...]] = field(default_factory=dict)
    forces: dict[str, Drawing] = field(default_factory=dict)
    history: tuple[Drawing, ...] = ()
    study: tuple[Drawing, ...] = ()
    maps: tuple[Drawing, ...] = ()

    @property
    def all(self) -> tuple[Drawing, ...]:
        """In the order of the page."""
        fluxes = (one for of_surface in self.fluxes.values() for one in of_surface)
        return (*self.maps, *self.fields, *fluxes, *self.forces.values(), *self.history, *self.study)


def page_html(
    found: Gathered, drawings: Drawings, record: Record, title: str, on_figure: Callable[[Drawing], None]
) -> str:
    """The whole page as text; ``on_figure`` is called before each figure is drawn."""
    from jinja2 import Environment, StrictUndefined
    from markupsafe import Markup

    def svg(drawing: Drawing) -> Markup:
        on_figure(drawing)
        return Markup(drawing.svg())

    environment = Environment(
        autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True
    )
    environment.filters["svg"] = svg
    environment.filters["plain"] = plain
    environment.filters["minus"] = lambda text: "–" if text == MISSING else minus(text)
    folder = files("fvcheck.reporting") / "templates"
    template = environment.from_string((folder / "report.html").read_text(encoding="utf-8"))
    light = {name: colour for colour, name in VARIABLES.items()}
    return template.render(
        css=Markup((folder / "report.css").read_text(encoding="utf-8")),
        light=light,
        dark=DARK,
        title=plain(title),
        head=_head(found),
        overview=overview(found.result),
        sections=_sections(found, drawings),
        hints=_explained(found.hints),
        cautions=CAUTIONS,
        record=record,
        mark=MARK,
    )


def _explained(hints: Sequence[Hint]) -> list[Explained]:
    by_code: dict[str, list[str]] = {}
    for hint in hints:
        by_code.setdefault(hint.code, []).append(hint.message)
    return [Explained(code, tuple(messages), PAGES.get(code)) for code, messages in by_code.items()]


@dataclass(frozen=True)
class Head:
    """The verdict in words."""

    verdict: str | None
    meaning: str
    worst: str
    do: str
    facts: tuple[str, ...]


def _head(found: Gathered) -> Head:
    result, case = found.result, found.flow.case
    facts = [f"{found.flow.mesh.n_cells} cells", f"{found.flow.location} data"]
    if found.history is not None:
        facts.append(f"{found.history.counted}, the verdict is that of the last")
    if found.study is not None:
        facts.append(f"{len(found.study.sizes)} meshes, the verdict is that of the finest")
    if case.time is not None:
        facts.append(f"time {short(case.time)}")
    facts.append(f"{len(result.ledgers)} control surface{'s' if len(result.ledgers) > 1 else ''}")
    if result.verdict is None:
        return Head(
            None, "fluxes through open surfaces only: there is nothing to judge", "", "", tuple(facts)
        )
    surface, row = worst_row(result)
    worst = _worst(surface, row, result.verdict)
    return Head(result.verdict, MEANING[result.verdict], worst, VERDICTS[result.verdict].do, tuple(facts))


def _worst(surface: str, row: Row | None, verdict: str) -> str:
    if row is None:
        return ""
    lead = "Closest to its limit" if verdict == CLOSED else "Worst"
    limit = f"{row.tolerance_percent:g} %"
    sampling, mesh = (
        percent(100.0 * band / row.scale) if row.scale else "–"
        for band in (row.sampling_band, row.resolution_band)
    )
    return (
        f"{lead}: {row.label} of “{plain(surface)}”, {percent(row.imbalance_percent)} % of its scale against "
        f"a limit of {limit} (sampling band ±{sampling} %, resolution band ±{mesh} %)."
    )


def _sections(found: Gathered, drawings: Drawings) -> list[Section]:
    out = []
    if found.diagnosis is not None:
        words = [f"{law}: {text}" for law, text in diagnosis_words(found.diagnosis)]
        out.append(
            Section(
                "why", "Where and why", tuple(words), tuple(diagnosis_tables(found.diagnosis)), drawings.maps
            )
        )
    if found.left_out:
        out.append(Section("left-out", "Left out", tuple(map(plain, found.left_out))))
    if drawings.fields:
        out.append(
            Section("field", "The field", drawings=drawings.fields, paragraphs=(
                "Control surfaces are heavy lines with their names; patches are named beside the boundary.",
            ))
        )  # fmt: skip
    out.append(_surfaces(found, drawings))
    if found.forces is not None:
        out.append(_forces(found, drawings))
    if found.history is not None:
        tables = [*steps(found.history), *_one(trends(found.history)), *totals(found.history)]
        out.append(
            Section("history", "Over the steps", (), tuple(tables), drawings.history, drawings_first=True)
        )
    if found.study is not None:
        out.append(
            Section(
                "study", "Over the meshes",
                ("Dots: values with sampling bands. Diamond: extrapolated to cell size zero; beside it the "
                 "finest value with its band of 95 %.",),
                tuple(study_tables(found.study)), drawings.study, drawings_first=True,
            )
        )  # fmt: skip
    out.append(Section("set-up", "Set-up as understood", (), tuple(setup_tables(found)), beside=True))
    return out


def _one(table: Table | None) -> list[Table]:
    return [] if table is None else [table]


def _surfaces(found: Gathered, drawings: Drawings) -> Section:
    parts = []
    for number, (ledger, volume) in enumerate(zip(found.result.ledgers, found.volumes), start=1):
        facts = f"{spelled(volume.surface)}, border {short(ledger.length)} m"
        if ledger.area is not None:
            facts += f", area {short(ledger.area)} m²"
        if len(facts) > 300:
            facts = facts[:297] + "…"
        tables = [amounts(ledger), certainty(ledger), origins(ledger), *_one(ports(ledger))]
        parts.append(
            Section(
                f"surface-{number}", plain(ledger.name), (plain(facts),), tuple(tables),
                drawings.fluxes.get(ledger.name, ()),
            )
        )  # fmt: skip
    words = [
        "Fluxes count outward positive. Numbers are shown short; the result file (--json) has all digits.",
        "In the drawings arrows point the way that each quantity is carried, for a closed surface without "
        "what none feels (the mean pressure). Letters mark places on the border, the same as below the "
        "curves; grey stretches are walls and other boundary. The bars show where on the border the bands "
        "come from.",
        "An imbalance is a sum over the whole border, no place on it has a share of its own. The lowest "
        "panel therefore divides the volume into the parts nearest to each stretch between two letters: "
        "their imbalances add up to that of the whole, and a part with more than its resolution band is "
        "where something is missing or not yet settled.",
    ]
    if len(found.volumes) > DRAWN_SURFACES:
        words.append(f"Fluxes are drawn for the first {DRAWN_SURFACES} surfaces.")
    return Section("surfaces", "Control surfaces", tuple(words), parts=tuple(parts))


def _forces(found: Gathered, drawings: Drawings) -> Section:
    assert found.forces is not None
    parts = []
    for number, body in enumerate(dict.fromkeys(e.body for e in found.forces.estimates), start=1):
        mine = [e for e in found.forces.estimates if e.body == body]
        assumed = dict.fromkeys(
            f"{e.method} takes for granted: {plain(e.assumptions)}" for e in mine if e.assumptions
        )
        figure = drawings.forces.get(body)
        parts.append(
            Section(
                f"body-{number}", plain(body), tuple(assumed), tuple(routes(found.forces, body)),
                () if figure is None else (figure,), drawings_first=True,
            )
        )  # fmt: skip
    return Section(
        "forces", "Forces on bodies",
        ("Independent routes side by side. Where they are further apart than their bands, a hint says so.",),
        parts=tuple(parts),
    )  # fmt: skip
