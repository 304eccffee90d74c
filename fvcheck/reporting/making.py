"""A report: what was found about a run, as a page with figures and as files for other viewers."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Any

from fvcheck.flow import Flow
from fvcheck.laws import Law
from fvcheck.reporting.beside import Beside, beside_border
from fvcheck.reporting.border import Along, along_border, border_of
from fvcheck.reporting.diagnosis_pictures import map_drawings
from fvcheck.reporting.field_pictures import field_drawing, window_drawing
from fvcheck.reporting.flux_pictures import flux_drawing
from fvcheck.reporting.gathering import Gathered, Question, gather
from fvcheck.reporting.output import check_page_path, folder_for
from fvcheck.reporting.page import DRAWN_SURFACES, Drawings, page_html
from fvcheck.reporting.record import Record, record_of
from fvcheck.reporting.series_pictures import forces_drawing, history_drawings, study_drawing
from fvcheck.reporting.style import Drawing
from fvcheck.sources import Source
from fvcheck.surfaces import ControlSurface
from fvcheck.wholefile import write_whole

FIELDS = ("speed", "pressure", "temperature")
"""Fields that are drawn, where the flow has them."""


@dataclass(frozen=True, eq=False)
class Report:
    """What `report` found, and the page that shows it.

    found : the numbers; drawings : the figures; html : the page
    along : surface -> rows of its laws along its border, pieces in walking order
    beside : surface -> row label -> the imbalance of the volume beside each stretch of the border
    """

    found: Gathered
    drawings: tuple[Drawing, ...]
    along: Mapping[str, tuple[Along, ...]]
    beside: Mapping[str, Mapping[str, tuple[Beside, ...]]]
    record: Record
    html: str

    @property
    def verdict(self) -> str | None:
        """That of the result: the last snapshot's, the finest mesh's."""
        return self.found.result.verdict

    def to_dict(self) -> dict[str, Any]:
        """The result file, with forces, diagnosis, history and study where there are any."""
        found = self.found
        whole = found.history or found.study or found.result
        data = whole.to_dict()
        if found.forces is not None:
            data["forces"] = found.forces.to_dict()["forces"]
        if found.diagnosis is not None:
            data["diagnosis"] = found.diagnosis.to_dict()["diagnosis"]
        data["hints"] = [{"code": hint.code, "message": hint.message} for hint in found.hints]
        return data

    def write(self, path: str | Path) -> None:
        """Write the page, whole or not at all; SetupError where that cannot be."""
        check_page_path(path)
        write_whole(path, self.html.encode("utf-8"), "page")

    def write_figures(self, folder: str | Path) -> list[Path]:
        """Every figure as NAME.svg and NAME.png; the folder is made if need be."""
        place = folder_for(folder, "figures")
        out = []
        for drawing in self.drawings:
            for ending, data in (("svg", drawing.svg(inline=False).encode("utf-8")), ("png", drawing.png())):
                out.append(place / f"{drawing.name}.{ending}")
                write_whole(out[-1], data)
        return out

    def write_vtk(self, folder: str | Path) -> list[Path]:
        """Surfaces as VTP and quantities of cells as VTU, see `fvcheck.reporting.vtkout`."""
        from fvcheck.reporting.vtkout import write_vtk

        return write_vtk(folder_for(folder, "VTK files"), self.found, self.along)

    def _repr_html_(self) -> str:
        from html import escape

        return f'<iframe srcdoc="{escape(self.html)}" style="width: 100%; height: 40em; border: 0"></iframe>'


def report(
    files: str | Path | Flow | Sequence[str | Path],
    surfaces: Sequence[ControlSurface] | ControlSurface | None = None,
    laws: Iterable[str | Law] | None = None,
    *,
    path: str | Path | None = None,
    title: str | None = None,
    bodies: Sequence[str] | Mapping[str, Any] | None = None,
    tolerance: Mapping[str, float] | None = None,
    scale: Mapping[str, float] | None = None,
    sources: Sequence[Source] = (),
    about: tuple[float, float] = (0.0, 0.0),
    moment_about: tuple[float, float] | Mapping[str, tuple[float, float]] | None = None,
    wake_line: ControlSurface | Mapping[str, ControlSurface] | None = None,
    step: int | str | None = None,
    kind: str = "auto",
    steady: bool = False,
    beside: Sequence[str | Path] = (),
    date: datetime | None = None,
    on_part: Callable[[str], None] | None = None,
    **reading: Any,
) -> Report:
    """A self-contained page about one state, a series of them, or one case on several meshes.

    files : an export, snapshots, meshes, or a `Flow`; surfaces, laws, tolerance, scale, sources,
        about : as in `balance_all`
    path : where the page is written; without it nothing is
    bodies : patches whose forces are wanted, or patch -> reference as in `forces` (None for none)
    moment_about : point of their moments, or patch -> point; by default ``about``
    wake_line : across their wake, or patch -> line, as in `forces`
    step : one state of a file; by default all where it holds several
    kind : "state", "history" or "study" of ``files``; "auto" tells by steps and numbers of cells
    steady : snapshots are iterations, whatever times they carry
    beside : further files for the record, such as the check file
    date : of the record; now by default
    on_part : called with the name of each part before it is made
    reading : as in `open_flow`

    A row that is open brings a diagnosis. Raises what `balance_all`, `history` and
    `study` raise, SetupError where the page cannot be written.
    """
    if path is not None:
        check_page_path(path)
    tell = on_part or (lambda part: None)
    asked = Question(
        surfaces=(surfaces,) if isinstance(surfaces, ControlSurface) else tuple(surfaces or ()) or None,
        laws=None if laws is None else tuple(laws),
        tolerance=dict(tolerance or {}),
        scale=dict(scale or {}),
        sources=tuple(sources),
        about=about,
        bodies=_bodies(bodies),
        moment_about=about if moment_about is None else moment_about,
        wake_line=wake_line,
        step=step,
        kind=kind,
        steady=steady,
        reading=reading,
    )
    found = gather(files, asked, tell)
    along = _along(found)
    parts = _beside(found, along, tell)
    drawings = _drawings(found, along, parts)
    record = record_of([*found.files, *beside], date)
    name = title or Path(found.flow.case.file).name
    html = page_html(found, drawings, record, name, lambda drawing: tell(f"figure {drawing.name}"))
    made = Report(found, drawings.all, along, parts, record, html)
    if path is not None:
        made.write(path)
    return made


def _bodies(bodies: Sequence[str] | Mapping[str, Any] | None) -> Mapping[str, Any] | None:
    if bodies is None or isinstance(bodies, Mapping):
        return bodies or None
    return dict.fromkeys([bodies] if isinstance(bodies, str) else bodies) or None


def _along(found: Gathered) -> dict[str, tuple[Along, ...]]:
    out = {}
    for ledger, volume in zip(found.result.ledgers, found.volumes):
        border = border_of(volume.overlay)
        judged = {row.law for row in ledger.rows}
        out[ledger.name] = tuple(
            one for law in found.laws if law.name in judged for one in along_border(volume, law, border)
        )
    return out


def _beside(
    found: Gathered, along: Mapping[str, tuple[Along, ...]], tell: Callable[[str], None]
) -> dict[str, dict[str, tuple[Beside, ...]]]:
    """Of the surfaces that are drawn."""
    out = {}
    for ledger, volume in list(zip(found.result.ledgers, found.volumes))[:DRAWN_SURFACES]:
        if rows := along[ledger.name]:
            tell(f"parts of {ledger.name}")
            sources = found.question.sources
            out[ledger.name] = beside_border(volume, rows[0].border, ledger, found.laws, sources)
    return out


def _drawings(
    found: Gathered,
    along: Mapping[str, tuple[Along, ...]],
    parts: Mapping[str, Mapping[str, tuple[Beside, ...]]],
) -> Drawings:
    overlays = [(ledger.name, v.overlay) for ledger, v in zip(found.result.ledgers, found.volumes)]
    outlined = [(name, overlay) for name, overlay in overlays if name != "domain"][:DRAWN_SURFACES]
    fields = (field_drawing(found.flow, what, outlined) for what in FIELDS)
    fluxes: dict[str, tuple[Drawing, ...]] = {}
    for number, (name, rows) in enumerate(list(along.items())[:DRAWN_SURFACES], start=1):
        drawn = [
            flux_drawing(
                *(found.flow, name, one, f"flux-{number}-{row}"),
                parts.get(name, {}).get(one.label, ()),
                found.result[name][one.label].scale,
            )
            for row, one in enumerate(rows, start=1)
            if len(one.border.order)
        ]
        if rows and (mesh := window_drawing(found.flow, name, rows[0], f"mesh-{number}")) is not None:
            drawn.append(mesh)
        fluxes[name] = tuple(drawn)
    forced = {}
    if found.forces is not None:
        for number, body in enumerate(dict.fromkeys(e.body for e in found.forces.estimates), start=1):
            if (figure := forces_drawing(found.forces, number, body)) is not None:
                forced[body] = figure
    studied = None if found.study is None else study_drawing(found.study)
    return Drawings(
        fields=tuple(one for one in fields if one is not None),
        fluxes=fluxes,
        forces=forced,
        history=() if found.history is None else tuple(history_drawings(found.history)),
        study=() if studied is None else (studied,),
        maps=() if found.diagnosis is None else tuple(map_drawings(found.diagnosis, outlined)),
    )
