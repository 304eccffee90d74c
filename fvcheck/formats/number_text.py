"""Numbers written as text, as VTK's ASCII files hold them.

Every token is looked at before it is converted: library parsers stop at the
first odd one and return what they had, or split it in two.
"""

from __future__ import annotations

import re

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.mesh.piece import Array

# A token that is no number: the first character of a token, not followed by a whole number.
_REAL = r"[-+]?(?:(?:\d+\.?\d*|\.\d+)(?:[eEdD][-+]?\d{1,4})?|(?i:nan|inf|infinity))(?!\S)"
_WHOLE = r"[-+]?\d{1,18}(?!\S)"
NO_REAL = re.compile(rf"(?<!\S)(?!{_REAL})\S")
NO_WHOLE = re.compile(rf"(?<!\S)(?!{_WHOLE})\S")


def parse(text: str, dtype: np.dtype, where: str) -> Array:
    """All numbers of ``text``, separated by white space, as a new array of ``dtype``.

    ``1D+5`` is read as ``1e5``; NaN and infinities are kept. Raises `FormatError`
    for a token that is no number (a word, ``1,5``, ``1.5-103``) and for integers
    beyond the range of the type.
    """
    real = dtype.kind == "f"
    odd = (NO_REAL if real else NO_WHOLE).search(text)
    if odd is not None:
        token = text[odd.start() : odd.start() + 40].split()[0]
        raise FormatError(
            f"'{token}' stands where {'a number' if real else 'a whole number'} belongs",
            where=where,
            mend="Export in binary form, or with a point as decimal sign.",
        )
    if not text or text.isspace():
        return np.empty(0, dtype=dtype)
    if real:
        if "d" in text or "D" in text:
            text = text.replace("d", "e").replace("D", "e")
        return np.fromstring(text, dtype=np.float64, sep=" ").astype(dtype, copy=False)
    values = np.fromstring(text, dtype=np.int64, sep=" ")
    limits = np.iinfo(dtype)
    if len(values) and (values.min() < limits.min or values.max() > limits.max):
        raise FormatError(f"a number lies beyond the range of {dtype.name}", where=where)
    return values.astype(dtype, copy=False)
