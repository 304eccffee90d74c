"""Files written whole or not at all."""

from __future__ import annotations

import os
import tempfile
from pathlib import Path

from fvcheck.errors import SetupError


def write_whole(path: str | Path, data: bytes, what: str = "file") -> None:
    """Write a file by way of a draft beside it; a reader never meets half of it.

    A link stays one, its target is replaced. A device or pipe is written to.
    SetupError, which names ``what``, where it cannot be written.
    """
    path = Path(path)
    try:
        if path.exists() and not path.is_file():
            path.write_bytes(data)
            return
        path = path.resolve()
        handle, draft = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
        try:
            with os.fdopen(handle, "wb") as stream:
                stream.write(data)
            # mkstemp makes files for their owner only; a result is like any other file.
            mask = os.umask(0)
            os.umask(mask)
            os.chmod(draft, 0o666 & ~mask)
            os.replace(draft, path)
        except BaseException:
            os.unlink(draft)
            raise
    except OSError as error:
        raise SetupError(f"the {what} cannot be written: {error.strerror}", where=path) from None
