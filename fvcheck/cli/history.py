"""``fvcheck history FILE|FILES… -s SURFACE …``."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

from typer import Argument, Option

from fvcheck.cli.options import FluidOptions, Limits, Output, Reading, Spread, SurfaceList, number, spread
from fvcheck.errors import SetupError

if TYPE_CHECKING:
    from fvcheck.settings import Settings

_OVER, _WATCH, _SHOW = "Over the steps", "Watching", "Output"


@spread
def command(
    limits: Limits,
    reading: Reading,
    fluid: FluidOptions,
    output: Output,
    run: Spread,
    files: Annotated[
        list[str] | None,
        Argument(metavar="FILES", help="A file with steps, files, or a pattern; a directory with --follow."),
    ] = None,
    surface: SurfaceList = None,
    steady: Annotated[
        bool,
        Option("--steady", help="Steps are iterations, whatever times they carry.", rich_help_panel=_OVER),
    ] = False,
    forces: Annotated[
        bool,
        Option("--forces", help="Forces too, on the bodies of the check file or all.", rich_help_panel=_OVER),
    ] = False,
    body: Annotated[
        list[str] | None,
        Option(metavar="NAME", help="Forces on this body. Repeatable.", rich_help_panel=_OVER),
    ] = None,
    reference_length: Annotated[
        str | None, Option(metavar="L", help="For the Strouhal number.", rich_help_panel=_OVER)
    ] = None,
    reference_velocity: Annotated[
        str | None, Option(metavar="U", help="For the Strouhal number.", rich_help_panel=_OVER)
    ] = None,
    follow: Annotated[
        bool, Option("--follow", help="Watch a run that still writes.", rich_help_panel=_WATCH)
    ] = False,
    every: Annotated[str, Option(metavar="SECONDS", help="Between two looks.", rich_help_panel=_WATCH)] = "1",
    limit: Annotated[
        int | None,
        Option(metavar="N", min=1, help="End after so many snapshots.", rich_help_panel=_WATCH),
    ] = None,
    patience: Annotated[
        str | None,
        Option(metavar="SECONDS", help="End when nothing new comes for so long.", rich_help_panel=_WATCH),
    ] = None,
    to_the_end: Annotated[
        bool, Option("--to-the-end", help="Go on when all has settled.", rich_help_panel=_WATCH)
    ] = False,
    csv: Annotated[
        str | None,
        Option(metavar="PATH", help="Write all numbers as CSV; - is standard output.", rich_help_panel=_SHOW),
    ] = None,
    plot: Annotated[
        Path | None, Option(metavar="PNG|SVG", help="Draw imbalances and fluxes.", rich_help_panel=_SHOW)
    ] = None,
) -> int:
    """The ledger over time steps or iterations: has it settled, does it swing?

    With times, what the volume stores counts. The exit status is that of the last step.
    """
    from fvcheck.charts import check_plot_path, save_history
    from fvcheck.cli.manyfiles import files_and_settings
    from fvcheck.cli.output import check_target, show
    from fvcheck.cli.progress import progress
    from fvcheck.following import follow as watch
    from fvcheck.overtime import Entry
    from fvcheck.text.history import history_text, line_text
    from fvcheck.timeseries import history
    from fvcheck.verdict import EXIT_STATUS
    from fvcheck.wholefile import write_whole

    check_target(output)
    _check_csv(csv, output)
    if plot is not None:
        check_plot_path(plot)
    reference = _reference(reference_length, reference_velocity)
    named, settings = files_and_settings(files, reading, fluid, surface, limits)
    judged: dict[str, Any] = {**settings.judged, "reference": reference}
    wanted = _bodies(forces, body, settings, follow)
    silent = output.quiet or "-" in (output.json, csv)
    if follow and (run.workers or run.scheduler):
        raise SetupError("a run that still writes is followed here", mend="Leave --workers or --follow out.")
    if follow:
        interval = number(every, "--every", "--every SECONDS")
        if interval <= 0:
            raise SetupError(f"--every is {every}", mend="Give a positive number of seconds.")

        def tell(entry: Entry) -> None:
            if not silent:
                print(line_text(entry), flush=True)

        found = watch(
            named if len(named) > 1 else named[0],
            settings.surfaces,
            settings.laws,
            every=interval,
            limit=limit,
            patience=None if patience is None else number(patience, "--patience", "--patience SECONDS"),
            until_settled=not to_the_end,
            steady=steady or settings.steady,
            on_step=tell,
            settings=judged,
            reading=settings.reading,
        )
    else:
        with progress("snapshots", silent) as advance:
            found = history(
                named,
                settings.surfaces,
                settings.laws,
                steady=steady or settings.steady,
                bodies=wanted,
                forces={
                    "about": settings.moment_about(wanted or None),
                    "reference": {k: v for k, v in settings.bodies.items() if v is not None} or None,
                    "wake_line": settings.wakes,
                },
                on_step=lambda _entry, total: advance(_steps(total, wanted)),
                on_force=lambda total: advance(_steps(total, wanted)),
                workers=run.workers,
                scheduler=run.scheduler,
                **judged,
                **settings.reading,
            )
    if plot is not None:
        save_history(found, plot)
    if csv not in (None, "-"):
        write_whole(str(csv), found.to_csv().encode("utf-8"), "CSV")
    if csv == "-":
        show(output, found.to_dict, found.to_csv)
    else:
        show(output, found.to_dict, lambda: history_text(found, output.quiet))
    return 0 if found.verdict is None else EXIT_STATUS[found.verdict]


def _bodies(forces: bool, body: list[str] | None, settings: Settings, follow: bool) -> list[str] | None:
    """The bodies whose forces are wanted, none named for all; None for no forces."""
    if not (forces or body):
        return None
    if follow:
        raise SetupError(
            "forces need the snapshots behind, which a run that still writes lacks",
            mend="Leave --follow out, or take the force from the momentum row of a surface.",
        )
    return body or list(settings.bodies)


def _steps(total: int, bodies: list[str] | None) -> int:
    """Of the progress bar: for forces, snapshots are gone through once more."""
    return total if bodies is None else 2 * total


def _reference(length: str | None, velocity: str | None) -> tuple[float, float] | None:
    if length is None and velocity is None:
        return None
    if length is None or velocity is None:
        raise SetupError(
            "a Strouhal number needs two references",
            mend="Give --reference-length and --reference-velocity.",
        )
    both = (
        number(length, "--reference-length", "a number"),
        number(velocity, "--reference-velocity", "a number"),
    )
    if min(both) <= 0:
        raise SetupError("a reference is not positive", mend="Give positive numbers.")
    return both


def _check_csv(csv: str | None, output: Output) -> None:
    if csv == "-" and output.json == "-":
        raise SetupError("JSON and CSV cannot both go to standard output", mend="Give one of them a path.")
    if csv not in (None, "-"):
        path = Path(str(csv))
        if path.is_dir() or not path.parent.is_dir():
            raise SetupError("the CSV cannot be written there", where=path, mend="Give the path of a file.")
