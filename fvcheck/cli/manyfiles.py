"""Commands that take several exports."""

from __future__ import annotations

from pathlib import Path

from fvcheck.cli.options import FluidOptions, Limits, Reading
from fvcheck.cli.settings import settle
from fvcheck.errors import SetupError
from fvcheck.settings import Settings, load_check


def files_and_settings(
    files: list[str] | None,
    reading: Reading,
    fluid: FluidOptions,
    surfaces: list[str] | None,
    limits: Limits,
) -> tuple[list[Path], Settings]:
    """The files of the command line, else those of the check file; and the settings."""
    if reading.step is not None:
        raise SetupError("--step has no meaning here", mend="Leave it out: all steps are taken.")
    if not files and reading.check is None:
        raise SetupError("no export is given", mend="Name FILES, or a check file with -c.")
    check = load_check(reading.check)
    named = [Path(name) for name in files] if files else list(check.case_files())
    return named, settle(named[0], reading, fluid, surfaces, limits, check)
