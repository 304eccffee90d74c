"""Hints: what was noticed beside the result, each with a stable code.

A hint never changes a number. Its code leads to a page of ``fvcheck explain``:
what was seen, why it matters, what to do.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Hint:
    """One remark: ``code`` from `PAGES`, ``message`` with the numbers and the place."""

    code: str
    message: str


@dataclass(frozen=True)
class Page:
    """The explanation of a code: what was seen, why it matters, what to do."""

    seen: str
    why: str
    do: str


PAGES: dict[str, Page] = {
    "one-step-array": Page(
        "An array is stored at one step only, others at several.",
        "Its values are taken at every step. If it changes in time, all steps but one are wrong.",
        "Export every array that changes at each step.",
    ),
    "array-not-read": Page(
        "An array holds values at the corners or at Gauss points of elements.",
        "Such values have no single number per point or cell, so the array is left out.",
        "Export it at points or as one value per cell if a law needs it.",
    ),
}
