"""``fvcheck report CHECK.toml|FILE -o X.html``."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Annotated

from typer import Argument, Option

from fvcheck.cli.options import FluidOptions, Limits, Output, Reading, SurfaceList, spread
from fvcheck.errors import SetupError

_PAGE = "Page"


@spread
def command(
    limits: Limits,
    reading: Reading,
    fluid: FluidOptions,
    output: Output,
    files: Annotated[
        list[str] | None,
        Argument(metavar="CHECK.toml|FILES", help="A check file; or an export, snapshots, several meshes."),
    ] = None,
    surface: SurfaceList = None,
    page: Annotated[
        Path,
        Option(
            "-o", "--output", metavar="X.html", help="The page; default report.html.", rich_help_panel=_PAGE
        ),
    ] = Path("report.html"),
    figures: Annotated[
        Path | None,
        Option(metavar="DIR", help="Write every figure as PNG and SVG.", rich_help_panel=_PAGE),
    ] = None,
    vtk: Annotated[
        Path | None,
        Option(metavar="DIR", help="Write surfaces as VTP and cells as VTU.", rich_help_panel=_PAGE),
    ] = None,
    body: Annotated[
        list[str] | None,
        Option(
            metavar="NAME",
            help="Forces on it; default those of the check file. Repeatable.",
            rich_help_panel=_PAGE,
        ),
    ] = None,
    title: Annotated[
        str | None,
        Option(metavar="TEXT", help="Of the page; default the file's name.", rich_help_panel=_PAGE),
    ] = None,
    kind: Annotated[
        str,
        Option(metavar="auto|state|history|study", help="What the files are.", rich_help_panel=_PAGE),
    ] = "auto",
    steady: Annotated[
        bool,
        Option("--steady", help="Steps are iterations, whatever times they carry.", rich_help_panel=_PAGE),
    ] = False,
) -> int:
    """A page with verdicts, tables, figures and the set-up, for the file and for others.

    Several files are snapshots of a run where their meshes are alike, else meshes of
    one case. The exit status is that of the verdict.
    """
    from fvcheck.cli.output import check_target, show
    from fvcheck.cli.progress import progress
    from fvcheck.cli.settings import settle
    from fvcheck.reporting import report
    from fvcheck.reporting.output import check_page_path, folder_for
    from fvcheck.settings import load_check
    from fvcheck.text.console import render
    from fvcheck.text.ledger import verdict_line
    from fvcheck.verdict import EXIT_STATUS

    check_target(output)
    check_page_path(page)
    for folder, what in ((figures, "figures"), (vtk, "VTK files")):
        if folder is not None:
            folder_for(folder, what)
    named, path = _told(files, reading.check)
    check = load_check(path)
    named = named or list(check.case_files())
    settings = settle(named[0], replace(reading, check=path), fluid, surface, limits, check)
    # Left open, the step is for the report to choose.
    told = reading.step is not None or "step" in check.case.model_fields_set
    names = body or list(settings.bodies)
    silent = output.quiet or output.json == "-"
    with progress("report", silent) as advance:
        made = report(
            [str(name) for name in named],
            settings.surfaces,
            settings.laws,
            title=title,
            bodies={name: settings.bodies.get(name) for name in names},
            moment_about=settings.moment_about(names),
            wake_line=settings.wakes,
            **settings.judged,
            step=str(settings.step) if told else None,
            kind=kind,
            steady=steady or settings.steady,
            beside=[] if path is None else [path],
            on_part=lambda part: advance(None),
            **settings.reading,
        )
        if figures is not None:
            made.write_figures(figures)
        if vtk is not None:
            made.write_vtk(vtk)
        made.write(page)
    show(
        output,
        made.to_dict,
        lambda: render(verdict_line(made.verdict)) + ("" if output.quiet else f"written: {page}\n"),
    )
    return 0 if made.verdict is None else EXIT_STATUS[made.verdict]


def _told(files: list[str] | None, check: Path | None) -> tuple[list[Path], Path | None]:
    """The exports that are named, and the check file: one that is given as a FILE counts as such."""
    named = [Path(name) for name in files or ()]
    checks = [path for path in named if path.suffix.lower() == ".toml"]
    if len(checks) + (check is not None) > 1:
        raise SetupError("a report is of one check file", mend="Name one; fvcheck gate takes several.")
    named = [path for path in named if path not in checks]
    check = checks[0] if checks else check
    if not named and check is None:
        raise SetupError("no export is given", mend="Name a check file or FILES.")
    return named, check
