"""What a section of the benchmark is: figures of a case, ratios of them with their targets."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import NamedTuple


class Case(NamedTuple):
    """kind : "triangles" or "polygons"; cells : about how many; folder : for files, empty at first."""

    kind: str
    cells: int
    folder: Path


@dataclass(frozen=True)
class Ratio:
    """Figure ``top`` over figure ``bottom``, and what it must reach on 10⁶ triangles, such as "≤ 15"."""

    name: str
    top: str
    bottom: str
    target: str = ""


@dataclass(frozen=True)
class Section:
    """measure : case -> figures [s], or [MB] where the name ends in MB, in a process of its own

    growth : figure -> the largest exponent that it may grow with from 10⁴ to 10⁷ cells
    """

    name: str
    measure: Callable[[Case], dict[str, float]]
    ratios: tuple[Ratio, ...] = ()
    growth: tuple[tuple[str, float], ...] = ()
