"""``fvcheck study FILE FILE FILE … -s SURFACE …``."""

from __future__ import annotations

from dataclasses import replace
from typing import Annotated

from typer import Argument

from fvcheck.cli.options import FluidOptions, Limits, Output, Reading, Spread, SurfaceList, spread

INCOMPLETE = 2


@spread
def command(
    limits: Limits,
    reading: Reading,
    fluid: FluidOptions,
    output: Output,
    run: Spread,
    files: Annotated[
        list[str] | None,
        Argument(metavar="FILE FILE …", help="One export for each mesh, three or more, in any order."),
    ] = None,
    surface: SurfaceList = None,
) -> int:
    """The same quantities over meshes: observed order, extrapolated value, grid convergence index.

    Exit status: 0, or 2 where a quantity could not be had on every mesh.
    """
    from fvcheck.cli.manyfiles import files_and_settings
    from fvcheck.cli.output import check_target, show
    from fvcheck.cli.progress import progress
    from fvcheck.meshstudy import study
    from fvcheck.text.study import study_text

    check_target(output)
    step = reading.step or "last"
    named, settings = files_and_settings(files, replace(reading, step=None), fluid, surface, limits)
    with progress("meshes", output.quiet or output.json == "-") as advance:
        found = study(
            named,
            settings.surfaces,
            settings.laws,
            step=step,
            **settings.judged,
            on_case=lambda _result, total: advance(total),
            workers=run.workers,
            scheduler=run.scheduler,
            **settings.reading,
        )
    show(output, found.to_dict, lambda: study_text(found, output.quiet))
    return INCOMPLETE if found.missing else 0
