"""A family of control surfaces: one shape swept over positions.

``around(pier, 0.2 .. 1.0, 9)``: where a number may stand, ``a .. b`` stands for
equal steps from a to b; the last argument is how many. Several ranges run together.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from fvcheck.errors import SurfaceError
from fvcheck.surfaces.spelling import parse
from fvcheck.surfaces.surface import ControlSurface

MOST = 2000
"""Members of a family; far more than a plot can show."""

FORM = "KIND(…, a .. b, …, COUNT), such as around(pier, 0.2 .. 1.0, 9) or line(1 .. 3 0, 1 .. 3 1, 5)"

_NUMBER = r"[+-]?(?:\d+(?:\.\d+)?|\.\d+)(?:[eE][+-]?\d+)?"
_RANGE = re.compile(rf"(?<![\w./])({_NUMBER})\s*\.\.\s*({_NUMBER})(?![\w./])", re.ASCII)
_COUNT = re.compile(r"(.*),\s*(\d+)\s*\)\s*", re.ASCII | re.DOTALL)


@dataclass(frozen=True)
class Family:
    """Members (`ControlSurface`) at positions: the values of the first range."""

    text: str
    positions: tuple[float, ...]
    surfaces: tuple[ControlSurface, ...]


def is_family(text: str) -> bool:
    """Whether a spelling holds a range."""
    return _RANGE.search(text) is not None


def parse_family(text: str, *, base: str | Path | None = None) -> Family:
    """The family of a spelling; members are called ``NAME@POSITION``. SurfaceError shows the right form."""
    if not is_family(text):
        raise SurfaceError("a family needs a range of numbers", where=text, mend=f"Write {FORM}.")
    shape, at, motion = text.partition("@")
    found = _COUNT.fullmatch(shape)
    if found is None or not 2 <= int(found[2]) <= MOST:
        raise SurfaceError(
            f"a family ends with how many members it has, 2 to {MOST}", where=text, mend=f"Write {FORM}."
        )
    spelled, count = f"{found[1]}){at}{motion}", int(found[2])
    surfaces, positions = [], []
    for share in np.linspace(0.0, 1.0, count).tolist():
        seen: list[float] = []

        def value(match: re.Match[str], share: float = share, seen: list[float] = seen) -> str:
            start, end = float(match[1]), float(match[2])
            seen.append(start + share * (end - start))
            return repr(seen[-1])

        surface = parse(_RANGE.sub(value, spelled), base=base)
        positions.append(seen[0])
        surfaces.append(replace(surface, name=f"{surface.name or surface.kind}@{seen[0]:.6g}"))
    return Family(text, tuple(positions), tuple(surfaces))
