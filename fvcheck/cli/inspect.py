"""``fvcheck inspect FILE``."""

from __future__ import annotations

from fvcheck.cli.options import FluidOptions, OptionalFile, Output, Reading, spread


@spread
def command(reading: Reading, fluid: FluidOptions, output: Output, file: OptionalFile = None) -> int:
    """Show what is in an export: mesh, fields and roles, patches, bodies, steps, suspicions."""
    from fvcheck.cli.output import check_target, show
    from fvcheck.cli.settings import settle
    from fvcheck.inspection import inspect_file
    from fvcheck.text.inspection import inspection_text

    check_target(output)
    settings = settle(file, reading, fluid)
    step = "last" if settings.step == "all" else settings.step
    found = inspect_file(settings.file, step=step, **settings.reading)
    show(output, found.to_dict, lambda: inspection_text(found, quiet=output.quiet))
    return 0
