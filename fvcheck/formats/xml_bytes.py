"""The bytes of one data array, any range of them: in memory, in the file as they are, or in base64.

Large arrays are decoded range by range, so that neither their text nor their packed
bytes are ever held whole.
"""

from __future__ import annotations

import binascii
import os
from typing import BinaryIO, Protocol

SPACE = b" \t\r\n\v\f"
_EDGE = 4096
MUCH = 1 << 17
"""Letters from which on a compiled loop is worth its loading."""


class Untidy(Exception):
    """Base64 that cannot be taken range by range: broken into lines, padded within, or damaged."""


class Source(Protocol):
    """Bytes 0 … ``size``."""

    @property
    def size(self) -> int: ...

    def read(self, begin: int, end: int) -> memoryview:
        """The bytes of a range within the size; Untidy where they are not to be had so."""

    def behind(self, head: int) -> Source:
        """The same from byte ``head`` on; in base64 a head may be encoded, and padded, apart."""


class Held:
    """Bytes in memory."""

    def __init__(self, blob: bytes | memoryview) -> None:
        self._view = memoryview(blob)

    @property
    def size(self) -> int:
        return len(self._view)

    def read(self, begin: int, end: int) -> memoryview:
        return self._view[begin:end]

    def behind(self, head: int) -> Held:
        return Held(self._view[head:])


class Raw:
    """Bytes ``start`` … ``stop`` of a file."""

    def __init__(self, file: BinaryIO, start: int, stop: int) -> None:
        self._file, self._start, self._stop = file, start, stop

    @property
    def size(self) -> int:
        return self._stop - self._start

    def read(self, begin: int, end: int) -> memoryview:
        return memoryview(os.pread(self._file.fileno(), end - begin, self._start + begin))

    def behind(self, head: int) -> Raw:
        return Raw(self._file, self._start + head, self._stop)


class Coded:
    """Base64 between bytes ``start`` and ``stop`` of a file, less the first ``lead`` bytes in it."""

    def __init__(self, file: BinaryIO, start: int, stop: int, lead: int = 0) -> None:
        self._file, self._start, self._stop, self._lead = file, start, stop, lead
        length = stop - start
        if length % 4:
            raise Untidy
        padding = self._text(max(start, stop - 2), stop).count(b"=")
        self._size = max(0, length // 4 * 3 - padding - lead)

    @classmethod
    def trimmed(cls, file: BinaryIO, start: int, stop: int) -> Coded:
        """The same without the space around it."""
        head = os.pread(file.fileno(), min(_EDGE, stop - start), start)
        tail_at = max(start, stop - _EDGE)
        tail = os.pread(file.fileno(), stop - tail_at, tail_at)
        if stop > start and not (head.strip(SPACE) and tail.strip(SPACE)):
            raise Untidy
        first = start + len(head) - len(head.lstrip(SPACE))
        return cls(file, first, stop - len(tail) + len(tail.rstrip(SPACE)))

    @property
    def size(self) -> int:
        return self._size

    def _text(self, start: int, stop: int) -> bytes:
        return os.pread(self._file.fileno(), stop - start, start)

    def read(self, begin: int, end: int) -> memoryview:
        begin, end = begin + self._lead, end + self._lead
        start, stop = self._start + begin // 3 * 4, self._start + (end + 2) // 3 * 4
        data = _undone(self._text(start, stop))
        data = data[begin % 3 : begin % 3 + end - begin]
        if len(data) < end - begin:
            raise Untidy
        return data

    def behind(self, head: int) -> Coded:
        end = self._start + (head + 2) // 3 * 4
        if head % 3 == 0 or self._text(end - 1, end) == b"=":
            return Coded(self._file, end, self._stop)
        return Coded(self._file, self._start + head // 3 * 4, self._stop, head % 3)


def _undone(text: bytes) -> memoryview:
    """What base64 encodes; Untidy where it is not only that."""
    if len(text) >= MUCH and len(text) % 4 == 0 and not text.endswith(b"="):
        import numpy as np

        from fvcheck.kernels.base64 import VALUE, decode

        out = np.empty(len(text) // 4 * 3, np.uint8)
        if not decode(np.frombuffer(text, np.uint8), VALUE, out):
            raise Untidy
        return out.data
    try:
        return memoryview(binascii.a2b_base64(text, strict_mode=True))
    except binascii.Error:
        raise Untidy from None
