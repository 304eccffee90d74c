"""``fvcheck gate CHECK.toml …``."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

from typer import Argument, Option

from fvcheck.cli.options import Output, spread
from fvcheck.errors import SetupError

_RUN, _SHOW = "Running", "Output"


@spread
def command(
    output: Output,
    checks: Annotated[
        list[str] | None, Argument(metavar="CHECK.toml …", help="Check files, or patterns of them.")
    ] = None,
    check: Annotated[
        list[str] | None,
        Option("-c", "--check", metavar="CHECK.toml", help="A check file too.", rich_help_panel=_RUN),
    ] = None,
    workers: Annotated[
        int | None,
        Option(metavar="N", min=1, help="Processes; default one per processor.", rich_help_panel=_RUN),
    ] = None,
    scheduler: Annotated[
        str | None,
        Option(metavar="ADDRESS", help="Workers of a Dask scheduler.", rich_help_panel=_RUN),
    ] = None,
    time_limit: Annotated[
        float | None,
        Option(metavar="SECONDS", help="A case that takes longer has failed.", rich_help_panel=_RUN),
    ] = None,
    update_baseline: Annotated[
        bool,
        Option("--update-baseline", help="Write baselines; do not compare.", rich_help_panel=_RUN),
    ] = False,
    no_diagnosis: Annotated[
        bool, Option("--no-diagnosis", help="No diagnosis of open rows.", rich_help_panel=_RUN)
    ] = False,
    junit: Annotated[
        Path | None, Option(metavar="PATH", help="Write JUnit XML.", rich_help_panel=_SHOW)
    ] = None,
    markdown: Annotated[
        Path | None,
        Option(metavar="PATH", help="Write a summary for a pull request.", rich_help_panel=_SHOW),
    ] = None,
) -> int:
    """Everything that check files ask for: verdicts, expectations, baselines; for pipelines.

    Whatever is missing is a failure. Exit status: 2 before 1 before 3 before 0.
    """
    from fvcheck.cli.output import check_target, show
    from fvcheck.cli.progress import progress, say_first_use
    from fvcheck.gating import gate
    from fvcheck.text.gate import gate_text
    from fvcheck.wholefile import write_whole

    check_target(output)
    for path, option in ((junit, "--junit"), (markdown, "--markdown")):
        if path is not None and (path.is_dir() or not path.parent.is_dir()):
            raise SetupError(f"there is no place for {option}", where=path, mend="Give the path of a file.")
    say_first_use()
    with progress("check files", output.quiet or output.json == "-") as advance:
        found = gate(
            [*(checks or ()), *(check or ())],
            workers=workers,
            scheduler=scheduler,
            update_baseline=update_baseline,
            diagnosis=not no_diagnosis,
            time_limit=time_limit,
            on_case=lambda _outcome, total: advance(total),
        )
    if junit is not None:
        write_whole(junit, found.junit().encode("utf-8"), "JUnit file")
    if markdown is not None:
        write_whole(markdown, found.markdown().encode("utf-8"), "summary")
    show(output, found.to_dict, lambda: gate_text(found, output.quiet))
    return found.status
