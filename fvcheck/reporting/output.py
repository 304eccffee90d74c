"""Where a report may be written."""

from __future__ import annotations

from pathlib import Path

from fvcheck.errors import SetupError


def check_page_path(path: str | Path) -> None:
    """SetupError where no page can be written, before anything is computed."""
    path = Path(path)
    if path.is_dir() or not path.parent.is_dir():
        what = "this is a directory" if path.is_dir() else "there is no directory for the page"
        raise SetupError(what, where=path, mend="Give -o the path of a file, such as report.html.")


def folder_for(path: str | Path, what: str) -> Path:
    """The directory, made where its parent exists; SetupError where it cannot be."""
    path = Path(path)
    try:
        path.mkdir(exist_ok=True)
    except OSError as error:
        raise SetupError(
            f"the directory for {what} cannot be made: {error.strerror}", where=path, mend="Give another one."
        ) from None
    return path
