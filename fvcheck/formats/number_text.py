"""Numbers written as text, as VTK's ASCII files hold them.

Library parsers stop at the first odd token and return what they had, or split it
in two: the tokens are counted apart.
"""

from __future__ import annotations

import re
import warnings

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.mesh.piece import Array

# The first character of a token that is no number.
_REAL = r"[-+]?(?:(?:\d+\.?\d*|\.\d+)(?:[eEdD][-+]?\d+)?|(?i:nan|inf|infinity))(?!\S)"
_WHOLE = r"[-+]?\d+(?!\S)"
NO_REAL = re.compile(rf"(?<!\S)(?!{_REAL})\S", re.ASCII)
NO_WHOLE = re.compile(rf"(?<!\S)(?!{_WHOLE})\S", re.ASCII)


def parse(text: str, dtype: np.dtype, where: str) -> Array:
    """All numbers of ``text``, separated by white space, as a new array of ``dtype``.

    ``1D+5`` is read as ``1e5``; NaN and infinities are kept. Raises `FormatError`
    for a token that is no number (a word, ``1,5``, ``1.5-103``) and for integers
    beyond the range of the type.
    """
    if not text.strip():
        return np.empty(0, dtype=dtype)
    if dtype.kind == "f":
        plain = text.replace("d", "e").replace("D", "e") if "d" in text or "D" in text else text
        with np.errstate(over="ignore"):  # beyond the range of float32: infinite
            return _parsed(plain, np.float64, NO_REAL, where).astype(dtype, copy=False)
    values = _parsed(text, np.int64, NO_WHOLE, where)
    low, high = int(values.min()), int(values.max())
    limits = np.iinfo(dtype)
    # The parser stops at the limits of 64 bits, so these themselves are out of range.
    if low < limits.min or high > limits.max or high == np.iinfo(np.int64).max:
        raise FormatError(f"a number lies beyond the range of {dtype.name}", where=where)
    return values.astype(dtype, copy=False)


def _parsed(text: str, dtype: type, odd: re.Pattern[str], where: str) -> Array:
    with warnings.catch_warnings():
        warnings.simplefilter("error", DeprecationWarning)  # what an odd token gave before numpy 2.3
        try:
            values: Array = np.fromstring(text, dtype=dtype, sep=" ")
        except (ValueError, DeprecationWarning):
            values = np.empty(0, dtype=dtype)
    # Every token gives a number or more, so equal counts mean one number each.
    if len(values) == _tokens(text):
        return values
    found = odd.search(text)
    token = text[found.start() : found.start() + 40].split() if found else []
    shown = "".join(char if char.isprintable() else "?" for char in "".join(token[:1]))
    raise FormatError(
        f"'{shown}' stands where a {'whole ' if dtype is np.int64 else ''}number belongs",
        where=where,
        mend="Export in binary form, or with a point as decimal sign.",
    )


def _tokens(text: str) -> int:
    solid = np.frombuffer(text.encode(), dtype=np.uint8) > ord(" ")
    return int(solid[0]) + int(np.count_nonzero(solid[1:] & ~solid[:-1]))
