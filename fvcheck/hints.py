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


PAGES: dict[str, Page] = {}
