"""``fvcheck diagnose FILE``."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Annotated, Any

from typer import Option

from fvcheck.cli.options import FluidOptions, Limits, OptionalFile, Output, Reading, SurfaceList, spread
from fvcheck.errors import SetupError

_HELP = "Diagnosis"


@spread
def command(
    limits: Limits,
    reading: Reading,
    fluid: FluidOptions,
    output: Output,
    file: OptionalFile = None,
    surface: SurfaceList = None,
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
    found = diagnose(flow, settings.laws, sources=settings.sources, previous=previous)
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


def replace_hints(found: Any, quiet: bool) -> Any:
    """Without hints where only the last line is wanted."""
    return replace(found, hints=()) if quiet else found
