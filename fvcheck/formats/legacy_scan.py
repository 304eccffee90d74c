"""Words, lines and blocks of numbers of a legacy VTK file.

Every block is measured against what the file still holds before it is read:
VTK's own reader fills up what a truncated text file lacks with whatever is in
memory.
"""

from __future__ import annotations

from pathlib import Path
from urllib.parse import unquote

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.number_text import parse
from fvcheck.mesh.piece import Array

# Data types of the format; binary files are big-endian and keep vtkIdType in 4 bytes.
TYPES = {
    "char": "i1",
    "signed_char": "i1",
    "unsigned_char": "u1",
    "short": "i2",
    "unsigned_short": "u2",
    "int": "i4",
    "unsigned_int": "u4",
    "long": "i8",
    "unsigned_long": "u8",
    "vtkidtype": "i4",
    "vtktypeint8": "i1",
    "vtktypeuint8": "u1",
    "vtktypeint16": "i2",
    "vtktypeuint16": "u2",
    "vtktypeint32": "i4",
    "vtktypeuint32": "u4",
    "vtktypeint64": "i8",
    "vtktypeuint64": "u8",
    "float": "f4",
    "double": "f8",
    "vtktypefloat32": "f4",
    "vtktypefloat64": "f8",
}
END = "Export the file again; it was cut short or damaged."


class Cursor:
    """A place in the bytes of a legacy VTK file, past its three header lines.

    Raises `FormatError` when the header is not that of the format, and in every
    method when the file does not hold what is asked for.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        try:
            self.data = path.read_bytes()
        except OSError as error:
            raise FormatError(f"the file cannot be opened: {error.strerror}", where=path, mend=END) from None
        head = self.data[:1024].split(b"\n", 3)
        if len(head) < 4 or not head[0].startswith(b"# vtk DataFile Version"):
            raise FormatError("this is no legacy VTK file", where=path, mend=END)
        kind = head[2].strip().upper()
        if kind not in (b"ASCII", b"BINARY"):
            raise FormatError("the third line says neither ASCII nor BINARY", where=path, mend=END)
        self.text = kind == b"ASCII"
        self.at = sum(len(line) + 1 for line in head[:3])

    def words(self) -> list[str]:
        """The words of the next line that is not blank; empty at the end of the file."""
        while self.at < len(self.data):
            stop = self.data.find(b"\n", self.at)
            stop = len(self.data) if stop < 0 else stop
            line = self.data[self.at : stop]
            self.at = stop + 1
            if line.strip():
                # A line of keywords is short; anything else is binary data out of place.
                return line[:1000].decode("utf-8", "replace").split()
        return []

    def skip_block(self) -> None:
        """Go past the lines up to the next blank one (the block METADATA)."""
        while self.at < len(self.data):
            stop = self.data.find(b"\n", self.at)
            stop = len(self.data) if stop < 0 else stop
            line = self.data[self.at : stop]
            self.at = stop + 1
            if not line.strip():
                return

    def peek(self) -> str:
        """The first word of the next line that is not blank, in capitals, without going there."""
        here = self.at
        words = self.words()
        self.at = here
        return words[0].upper() if words else ""

    def values(self, count: int, kind: str, what: str) -> Array:
        """The next ``count`` numbers of the data type ``kind``, in native byte order."""
        where = f"{self.path}, {what}"
        if kind.lower() == "bit":
            return self._bits(count, where)
        if kind.lower() not in TYPES:
            raise FormatError(f"unknown data type '{kind}'", where=where, mend=END)
        dtype = np.dtype(TYPES[kind.lower()])
        if self.text:
            wide = np.dtype("i8") if kind.lower() == "vtkidtype" else dtype
            return self._parsed(count, wide, where)
        self._demand(count, count * dtype.itemsize, where)
        found = np.frombuffer(self.data, dtype=np.dtype(f">{dtype.str[1:]}"), count=count, offset=self.at)
        self.at += count * dtype.itemsize
        return found.astype(dtype)

    def skip_strings(self, count: int, what: str) -> None:
        """Go past ``count`` strings: one per line, or each behind its length."""
        where = f"{self.path}, {what}"
        self._demand(count, count, where)
        for _string in range(count):
            if self.text:
                stop = self.data.find(b"\n", self.at)
                self.at = len(self.data) if stop < 0 else stop + 1
                continue
            self._demand(1, 1, where)
            # The two highest bits of the first byte tell how many bytes the length takes.
            width = 8 >> (self.data[self.at] >> 6)
            self._demand(width, width, where)
            length = int.from_bytes(self.data[self.at : self.at + width], "big") & (
                (1 << (8 * width - 2)) - 1
            )
            self.at += width + length

    def _demand(self, count: int, size: int, where: str) -> None:
        left = len(self.data) - self.at
        if count < 0 or size > left:
            raise FormatError(f"{count} values are declared, but the file ends before", where=where, mend=END)

    def _parsed(self, count: int, dtype: np.dtype, where: str) -> Array:
        # A number takes a character, and a space but for the last.
        self._demand(count, 2 * count - 1, where)
        size = 16 * count + 256
        while True:
            window = np.frombuffer(self.data, np.uint8, min(size, len(self.data) - self.at), self.at)
            solid = window > ord(" ")
            solid[1:] &= ~solid[:-1].copy()
            starts = np.flatnonzero(solid)
            if len(starts) > count or size >= len(window) == len(self.data) - self.at:
                break
            size *= 2
        if len(starts) < count:
            wrong = f"{count} values are declared, but the file ends after {len(starts)}"
            raise FormatError(wrong, where=where, mend=END)
        stop = self.at + int(starts[count]) if len(starts) > count else len(self.data)
        found = parse(self.data[self.at : stop].decode("latin-1"), dtype, where)
        self.at = stop
        return found

    def _bits(self, count: int, where: str) -> Array:
        if self.text:
            return self._parsed(count, np.dtype("u1"), where)
        size = (count + 7) // 8
        self._demand(count, size, where)
        packed = np.frombuffer(self.data, np.uint8, size, self.at)
        self.at += size
        return np.unpackbits(packed, count=count)


def decode_name(word: str) -> str:
    """An array name as it was before the writer put %20 and the like into it."""
    return unquote(word)
