"""Strict JSON (RFC 8259), written whole or not at all."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from fvcheck.wholefile import write_whole


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
    """Write ``data`` to ``path`` (`fvcheck.wholefile`); SetupError where it cannot be written."""
    write_whole(path, dumps(data).encode("utf-8"), "JSON file")


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
