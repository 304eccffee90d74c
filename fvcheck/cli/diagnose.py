"""``fvcheck diagnose FILE``."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

from typer import Option

from fvcheck.cli.options import FluidOptions, Limits, OptionalFile, Output, Reading, SurfaceList, spread
from fvcheck.errors import SetupError

if TYPE_CHECKING:
    from fvcheck.hints import Hint
    from fvcheck.surfaces import ControlSurface

_HELP = "Diagnosis"


@spread
def command(
    limits: Limits,
    reading: Reading,
    fluid: FluidOptions,
    output: Output,
    file: OptionalFile = None,
    surface: SurfaceList = None,
    region: Annotated[
        str | None,
        Option(metavar="SHAPE", help='Only cells within, such as "box(0, 0, 1, 1)".', rich_help_panel=_HELP),
    ] = None,
    attempt: Annotated[
        bool,
        Option("--try", help="Balance again with the first proposal: before, after.", rich_help_panel=_HELP),
    ] = False,
    vtu: Annotated[
        Path | None,
        Option("--vtu", metavar="FILE", help="Write the imbalance per cell.", rich_help_panel=_HELP),
    ] = None,
) -> int:
    """Where an imbalance sits, and which set-up error would close the ledger.

    With --try, -s gives the surfaces that are balanced before and after.
    """
    from fvcheck.cli.output import check_target, show
    from fvcheck.cli.settings import settle
    from fvcheck.diagnosis import diagnose, try_cause
    from fvcheck.diagnosis.mapping import write_map
    from fvcheck.flow import flow_of_export, step_number
    from fvcheck.formats.registry import open_export
    from fvcheck.text.diagnosis import diagnosis_text

    check_target(output)
    if vtu is not None and (vtu.is_dir() or not vtu.parent.is_dir()):
        raise SetupError("there is no place for the map", where=vtu, mend="Give --vtu the path of a file.")
    settings = settle(file, reading, fluid, surface, limits)
    if settings.step == "all":
        raise SetupError("a diagnosis is of one step", mend="Give --step a number, or leave it out.")
    export = open_export(settings.file)
    step = step_number(export, settings.step)
    flow = flow_of_export(export, step=step, **settings.reading)
    previous = None
    if step > 0 and export.times:
        previous = flow_of_export(export, step=step - 1, **settings.reading)
    laws, left_out = (settings.laws, ()) if limits.law else _diagnosed(settings.laws)
    found = diagnose(flow, laws, sources=settings.sources, previous=previous, region=_region(region))
    found = replace(found, hints=(*found.hints, *left_out))
    tried = None
    if attempt and found.proposals:
        law, candidate = found.proposals[0]
        assert candidate.told is not None
        tried = (
            candidate.told,
            *try_cause(
                flow,
                candidate.told,
                settings.surfaces,
                [law],
                tolerance=settings.tolerance,
                scale=settings.scale,
                sources=settings.sources,
            ),
        )
    if vtu is not None:
        write_map(vtu, found)

    def data() -> dict[str, Any]:
        out = found.to_dict()
        if tried is not None:
            told, before, after = tried
            out["surfaces"] = before.to_dict()["surfaces"]
            out["diagnosis"]["try"] = {"setting": told.setting, "surfaces": after.to_dict()["surfaces"]}
        return out

    show(output, data, lambda: diagnosis_text(replace_hints(found, output.quiet), tried, output.quiet))
    return 1 if found.open else 0


def _diagnosed(laws: list[str] | None) -> tuple[list[str] | None, tuple[Hint, ...]]:
    """Of the laws of a check file, which are there to be balanced, those that are diagnosed."""
    from fvcheck.diagnosis.diagnosing import LAWS
    from fvcheck.hints import Hint

    if laws is None or not set(laws) & set(LAWS):
        return laws, ()
    hints = [Hint("law-left-out", f"{law} is not diagnosed") for law in laws if law not in LAWS]
    return [law for law in laws if law in LAWS], tuple(hints)


def _region(text: str | None) -> ControlSurface | None:
    from fvcheck.surfaces import ControlSurface

    return None if text is None else ControlSurface.parse(text)


def replace_hints(found: Any, quiet: bool) -> Any:
    """Without hints where only the last line is wanted."""
    return replace(found, hints=()) if quiet else found
