"""Strict JSON (RFC 8259), written whole or not at all."""

from __future__ import annotations

import json
import math
import os
import tempfile
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from fvcheck.errors import SetupError


def dumps(data: Mapping[str, Any]) -> str:
    """The text of ``data``: numpy values as plain ones, numbers that are none as null, one line end.

    >>> print(dumps({"a": float("nan"), "b": (1, 2.5)}), end="")
    {
      "a": null,
      "b": [
        1,
        2.5
      ]
    }
    """
    return json.dumps(_plain(data), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def write(path: str | Path, data: Mapping[str, Any]) -> None:
    """Write ``data`` to ``path``; a reader never meets half a file.

    A link stays one, its target is replaced. A device or pipe is written to.
    SetupError where it cannot be written.
    """
    text, path = dumps(data), Path(path)
    try:
        if path.exists() and not path.is_file():
            path.write_text(text, encoding="utf-8")
            return
        path = path.resolve()
        handle, draft = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
        try:
            with os.fdopen(handle, "w", encoding="utf-8") as stream:
                stream.write(text)
            # mkstemp makes files for their owner only; a result is like any other file.
            mask = os.umask(0)
            os.umask(mask)
            os.chmod(draft, 0o666 & ~mask)
            os.replace(draft, path)
        except BaseException:
            os.unlink(draft)
            raise
    except OSError as error:
        raise SetupError(f"the JSON file cannot be written: {error.strerror}", where=path) from None


def _plain(value: Any) -> Any:
    if hasattr(value, "tolist"):  # numpy arrays and scalars
        value = value.tolist()
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {str(key): _plain(inner) for key, inner in value.items()}
    if isinstance(value, Sequence) and not isinstance(value, str):
        return [_plain(inner) for inner in value]
    return value
