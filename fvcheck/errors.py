"""What can go wrong, as one family.

FvcheckError
├── FormatError    the file cannot be read, or holds something no reader may trust
├── MeshError      cells and points do not make a plane mesh
├── FieldError     an array or a role is missing, ambiguous or of the wrong length
├── SurfaceError   a control surface cannot be drawn or lies outside the domain
└── SetupError     an option, a law, a fluid or a check file cannot be used

Library code raises these; only the command line turns them into text and an
exit status.
"""

from __future__ import annotations

from collections.abc import Iterable

LARGEST = 1e50
"""Beyond every number of a flow, in any units; products of several such are numbers still."""


class FvcheckError(Exception):
    """An error that says what is wrong, where, and how to mend it.

    The text reads ``WHAT (WHERE). HOW TO MEND IT``, on one line.
    """

    def __init__(self, what: str, *, where: object = None, mend: str = "") -> None:
        self.what = " ".join(str(what).split()).rstrip(".")
        self.where = "" if where is None else " ".join(str(where).split())
        self.mend = " ".join(mend.split())
        super().__init__(str(self))

    def __str__(self) -> str:
        text = self.what + (f" ({self.where})" if self.where else "") + "."
        return f"{text} {self.mend}" if self.mend else text


class FormatError(FvcheckError):
    """The file cannot be read, or holds something no reader may trust."""


class MeshError(FvcheckError):
    """Cells and points do not make a plane mesh."""


class FieldError(FvcheckError):
    """An array or a role is missing, ambiguous or of the wrong length."""


class SurfaceError(FvcheckError):
    """A control surface cannot be drawn, or lies outside the domain."""


class SetupError(FvcheckError):
    """An option, a law, a fluid or a check file cannot be used."""


def nearest(word: str, known: Iterable[str]) -> str:
    """``Did you mean 'x'?`` for the spelling in ``known`` closest to ``word``, else an empty text."""
    from difflib import get_close_matches

    by_lower = {name.lower(): name for name in known}
    close = get_close_matches(word.lower(), by_lower, n=1, cutoff=0.5)
    return f"Did you mean {by_lower[close[0]]!r}?" if close else ""
