"""``fvcheck inspect FILE``."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

from typer import Option

from fvcheck.cli.options import FluidOptions, OptionalFile, Output, Reading, spread
from fvcheck.errors import SetupError

_START = "A check file to begin from"


@spread
def command(
    reading: Reading,
    fluid: FluidOptions,
    output: Output,
    file: OptionalFile = None,
    start_check: Annotated[
        Path | None,
        Option(metavar="CHECK.toml", help="Write one, with comments.", rich_help_panel=_START),
    ] = None,
    force: Annotated[
        bool, Option("--force", help="Even where it is there already.", rich_help_panel=_START)
    ] = False,
) -> int:
    """Show what is in an export: mesh, fields and roles, patches, bodies, steps, suspicions."""
    from fvcheck.cli.output import check_target, show
    from fvcheck.cli.settings import settle
    from fvcheck.inspection import inspect_file
    from fvcheck.starting import write_start
    from fvcheck.text.inspection import inspection_text

    check_target(output)
    if force and start_check is None:
        raise SetupError("--force has no meaning here", mend="It goes with --start-check.")
    settings = settle(file, reading, fluid)
    step = "last" if settings.step == "all" else settings.step
    found = inspect_file(settings.file, step=step, **settings.reading)
    if start_check is not None:
        write_start(
            settings.file, start_check, force=force, step=settings.step, found=found, **settings.reading
        )
    written = "" if start_check is None or output.quiet else f"written: {start_check}\n"
    show(output, found.to_dict, lambda: inspection_text(found, quiet=output.quiet) + written)
    return 0
