"""``fvcheck balance FILE -s SURFACE …``."""

from __future__ import annotations

from typing import Annotated

from typer import Option

from fvcheck.cli.options import (
    FluidOptions,
    Limits,
    OptionalFile,
    Output,
    Reading,
    Spread,
    SurfaceList,
    spread,
)


@spread
def command(
    limits: Limits,
    reading: Reading,
    fluid: FluidOptions,
    output: Output,
    run: Spread,
    file: OptionalFile = None,
    surface: SurfaceList = None,
    patches: Annotated[
        bool,
        Option("--patches", help="Split fluxes by mechanism and by patch.", rich_help_panel="Output"),
    ] = False,
) -> int:
    """Balance mass, momentum and energy over control surfaces.

    Without -s: the whole domain, and a surface around each body.
    """
    from fvcheck.balancing import balance_all
    from fvcheck.cli.output import check_target, history_data, show
    from fvcheck.cli.settings import settle
    from fvcheck.flow import Flow, step_number, stored_flow
    from fvcheck.formats.registry import open_export
    from fvcheck.opening import open_near
    from fvcheck.text.ledger import result_text, steps_text
    from fvcheck.verdict import EXIT_STATUS, worst

    check_target(output)
    settings = settle(file, reading, fluid, surface, limits)
    export = open_export(settings.file)
    numbers = range(export.steps) if settings.step == "all" else [step_number(export, settings.step)]

    def flow_at(number: int) -> Flow:
        if settings.step != "all" and export.steps > 1:  # held against another state as a whole
            return stored_flow(export, step=number, **settings.reading)
        return open_near(
            export,
            settings.surfaces,
            settings.laws,
            step=number,
            workers=run.workers,
            scheduler=run.scheduler,
            **settings.reading,
        )

    results = [
        balance_all(
            flow_at(number),
            settings.surfaces,
            settings.laws,
            **settings.judged,
        )
        for number in numbers
    ]
    verdict = worst(result.verdict for result in results)
    if settings.step == "all":
        show(output, lambda: history_data(results), lambda: steps_text(results, patches, output.quiet))
    else:
        show(output, results[0].to_dict, lambda: result_text(results[0], patches, output.quiet))
    return 0 if verdict is None else EXIT_STATUS[verdict]
