"""The numbers of a section of an MSH file, text or binary, behind one interface."""

from __future__ import annotations

import warnings
from typing import Protocol

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.check import DAMAGED
from fvcheck.mesh.piece import Array

_EXACT = 2**53


class Numbers(Protocol):
    """Reads on through a section; ``kind`` is 'i' (int), 's' (size) or 'd' (double)."""

    def rows(self, count: int, *layout: tuple[str, int]) -> list[Array]:
        """``count`` rows of the given columns: one (count, width) array per (kind, width)."""

    def end(self) -> None:
        """Raise `FormatError` unless everything has been read."""


def integers(source: Numbers, kind: str, count: int) -> list[int]:
    """The next ``count`` integers."""
    return [int(value) for value in source.rows(1, (kind, count))[0][0]]


def parse(text: bytes, where: object) -> Array:
    """All numbers of a text as float64; every token must be one number.

    numpy's parser takes ``1.5-103`` for two numbers, so that tokens are counted too.
    """
    words = len(token_starts(text))
    if not words:
        return np.empty(0)
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            values = np.fromstring(text, dtype=np.float64, sep=" ")
    except (DeprecationWarning, ValueError):
        raise FormatError("something is no number", where=where, mend=DAMAGED) from None
    if len(values) != words:
        raise FormatError("something is no number", where=where, mend=DAMAGED)
    return values


def token_starts(text: bytes) -> Array:
    """Positions at which the words of a text begin."""
    space = np.frombuffer(text, dtype=np.uint8) <= 32
    begins = ~space
    begins[1:] &= space[:-1]
    return np.flatnonzero(begins)


def whole(values: Array, where: object) -> Array:
    """int64 of numbers that were read as float64; they must be whole and below 2**53."""
    # Written so that NaN fails too.
    if not (np.abs(values) < _EXACT).all() or (values != np.floor(values)).any():
        raise FormatError("something that counts or numbers is no whole number", where=where, mend=DAMAGED)
    return values.astype(np.int64)


class TextNumbers:
    """Numbers of a text section."""

    def __init__(self, text: bytes, where: object) -> None:
        self._values = parse(text, where)
        self._at = 0
        self._where = where

    def rows(self, count: int, *layout: tuple[str, int]) -> list[Array]:
        width = sum(columns for _, columns in layout)
        _room(count, width, len(self._values) - self._at, self._where)
        table = self._values[self._at : self._at + count * width].reshape(count, width)
        self._at += count * width
        out, column = [], 0
        for kind, columns in layout:
            part = table[:, column : column + columns]
            out.append(part if kind == "d" else whole(part, self._where))
            column += columns
        return out

    def end(self) -> None:
        if self._at != len(self._values):
            raise FormatError("there is more than the section declares", where=self._where, mend=DAMAGED)


class BinaryNumbers:
    """Numbers of a binary section; ``order`` is '<' or '>', ``size`` the bytes of a size."""

    def __init__(self, data: bytes, order: str, size: int, where: object) -> None:
        self._data = data
        self._at = 0
        self._types = {"i": f"{order}i4", "s": f"{order}u{size}", "d": f"{order}f8"}
        self._where = where

    def rows(self, count: int, *layout: tuple[str, int]) -> list[Array]:
        width = sum(np.dtype(self._types[kind]).itemsize * columns for kind, columns in layout)
        _room(count, width, len(self._data) - self._at, self._where)
        # An empty column, as the parameters of a node that has none, is no field of a record.
        fields = [(str(i), self._types[k], (n,)) for i, (k, n) in enumerate(layout) if n]
        record = np.dtype(fields)
        table = np.frombuffer(self._data, record, count, self._at) if fields else None
        self._at += count * width
        out = []
        for index, (kind, columns) in enumerate(layout):
            if columns and table is not None:
                values = table[str(index)]
                if kind == "s" and values.size and values.max() >= _EXACT:
                    raise FormatError("a count or number is absurdly large", where=self._where, mend=DAMAGED)
            else:
                values = np.empty((count, 0))
            out.append(values.astype(np.float64 if kind == "d" else np.int64))
        return out

    def end(self) -> None:
        if self._data[self._at :].strip():
            raise FormatError("there is more than the section declares", where=self._where, mend=DAMAGED)


def _room(count: int, width: int, left: int, where: object) -> None:
    if count < 0 or width < 0 or count * width > left:
        raise FormatError(
            f"{count} entries are declared, more than the section holds", where=where, mend=DAMAGED
        )
