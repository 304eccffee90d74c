"""Files written whole or not at all."""

from __future__ import annotations

import os
import tempfile
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


def write_whole(path: str | Path, data: bytes) -> None:
    """Write a file by way of a draft beside it; a link stays one. SetupError where it cannot be written."""
    path = Path(path)
    try:
        if path.exists() and not path.is_file():
            path.write_bytes(data)  # a device or pipe
            return
        path = path.resolve()
        handle, draft = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
        try:
            with os.fdopen(handle, "wb") as file:
                file.write(data)
            mask = os.umask(0)
            os.umask(mask)
            os.chmod(draft, 0o666 & ~mask)
            os.replace(draft, path)
        except BaseException:
            os.unlink(draft)
            raise
    except OSError as error:
        raise SetupError(f"the file cannot be written: {error.strerror}", where=path) from None
