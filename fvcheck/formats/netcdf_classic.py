"""Classic netCDF files (CDF-1, CDF-2, CDF-5), read by their published layout.

The netCDF libraries may end the process on a damaged header, and none of them
says whether the declared values lie inside the file. The layout is short: a
header with dimensions, attributes and variables, then big-endian values.
Source: Unidata, "NetCDF Classic Format Specification".
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from math import prod
from pathlib import Path

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.check import DAMAGED
from fvcheck.mesh.piece import Array

MAGIC = (b"CDF\x01", b"CDF\x02", b"CDF\x05")

_TYPES = (None, ">i1", "S1", ">i2", ">i4", ">f4", ">f8", ">u1", ">u2", ">u4", ">i8", ">u8")
_MOST_DIMENSIONS = 1024
_LARGE = 2**32 - 4


@dataclass(frozen=True)
class Variable:
    """Where a variable stands: first byte, shape, type; ``record`` if its first axis is unlimited."""

    shape: tuple[int, ...]
    dtype: np.dtype
    begin: int
    record: bool
    attributes: dict[str, str]

    @property
    def row_bytes(self) -> int:
        """Bytes of one record, or of the whole of a fixed variable, without padding."""
        return prod(self.shape[1:] if self.record else self.shape) * self.dtype.itemsize


class _Header:
    """The big-endian numbers and names at the beginning of the file, one after the other."""

    def __init__(self, data: np.memmap, path: Path) -> None:
        self._data, self._path = data, path
        self.at = 4
        self.version = int(data[3])

    def take(self, count: int) -> bytes:
        if count < 0 or self.at + count > len(self._data):
            raise self.wrong("the header ends too early")
        self.at += count
        return self._data[self.at - count : self.at].tobytes()

    def integer(self, size: int) -> int:
        return int.from_bytes(self.take(size), "big")

    def count(self) -> int:
        return self.integer(8 if self.version == 5 else 4)

    def name(self) -> str:
        length = self.count()
        text = self.take(length)
        if self.take(-length % 4).strip(b"\0"):
            raise self.wrong("a name in the header is damaged")
        try:
            name = text.decode("utf-8")
        except UnicodeDecodeError:
            raise self.wrong("a name in the header is damaged") from None
        if not name or not name.isprintable():
            raise self.wrong("a name in the header is damaged")
        return name

    def entries(self, tag: int) -> int:
        """Length of a list of dimensions (10), variables (11) or attributes (12)."""
        found, count = self.integer(4), self.count()
        if found != tag and (found, count) != (0, 0):
            raise self.wrong("a list in the header is damaged")
        return count

    def kind(self) -> np.dtype:
        code = self.integer(4)
        if not 1 <= code <= (11 if self.version == 5 else 6):
            raise self.wrong("a type in the header is unknown")
        return np.dtype(_TYPES[code])

    def attributes(self) -> dict[str, str]:
        """Attributes that hold text; numbers are passed over."""
        out = {}
        for _ in range(self.entries(12)):
            name, kind = self.name(), self.kind()
            size = self.count() * kind.itemsize
            value = self.take(size)
            self.take(-size % 4)
            if kind.kind == "S":
                out[name] = value.decode("utf-8", "replace").rstrip("\0 ")
        return out

    def wrong(self, what: str) -> FormatError:
        return FormatError(f"netCDF: {what}", where=self._path, mend=DAMAGED)


class ClassicStore:
    """Dimensions and variables of a classic netCDF file."""

    def __init__(self, data: np.memmap, path: Path) -> None:
        self._data, self._path = data, path
        header = _Header(data, path)
        self.records = header.count()
        self.dims: dict[str, int] = {}
        lengths = []
        for _ in range(header.entries(10)):
            name, length = header.name(), header.count()
            if name in self.dims:
                raise header.wrong(f"the dimension '{name}' stands twice")
            self.dims[name] = length or self.records
            lengths.append(length)
        self.attributes = header.attributes()
        self.variables = self._variables(header, lengths)
        self._stride = self._checked_stride(header)

    def _variables(self, header: _Header, lengths: list[int]) -> dict[str, Variable]:
        out: dict[str, Variable] = {}
        for _ in range(header.entries(11)):
            name, rank = header.name(), header.count()
            if rank > _MOST_DIMENSIONS:
                raise header.wrong(f"'{name}' has {rank} dimensions")
            axes = [header.count() for _ in range(rank)]
            if any(axis >= len(lengths) for axis in axes) or any(lengths[axis] == 0 for axis in axes[1:]):
                raise header.wrong(f"the dimensions of '{name}' are damaged")
            attributes, kind = header.attributes(), header.kind()
            stated = header.count()
            begin = header.integer(4 if header.version == 1 else 8)
            record = bool(axes) and lengths[axes[0]] == 0
            shape = tuple(lengths[axis] or self.records for axis in axes)
            if name in out:
                raise header.wrong(f"the variable '{name}' stands twice")
            out[name] = Variable(shape, kind, begin, record, attributes)
            size = out[name].row_bytes
            # Follows from the shape (padded or not); beyond 4 GB writers state what they like.
            if size < _LARGE and stated not in (size, size + -size % 4):
                raise header.wrong(f"the size of '{name}' does not follow from its shape")
        return out

    def _checked_stride(self, header: _Header) -> int:
        """Bytes from record to record, after checking that all values lie in the file, apart."""
        records = [v for v in self.variables.values() if v.record]
        padded = [v.row_bytes + -v.row_bytes % 4 for v in records]
        # A single record variable is not padded, says the specification.
        stride = records[0].row_bytes if len(records) == 1 else sum(padded)
        last = header.at
        fixed = sorted((v.begin, v.begin + v.row_bytes) for v in self.variables.values() if not v.record)
        first = sorted((v.begin, v.begin + v.row_bytes) for v in records)
        for begin, end in fixed + first:
            if begin < last:
                raise header.wrong("values stand on top of each other")
            last = end
        if records and self.records:
            last = first[-1][1] + (self.records - 1) * stride
        elif records:
            last = first[0][0]
        if last > len(self._data):
            raise header.wrong("the file is shorter than what it declares")
        # Rows and fixed values are padded to four bytes; more is a step that the header lacks, or a shift.
        if len(self._data) - last > 3:
            raise header.wrong("the file is longer than what it declares")
        return stride

    def __contains__(self, name: str) -> bool:
        return name in self.variables

    def dim(self, name: str) -> int | None:
        """Length of a dimension, or None."""
        return self.dims.get(name)

    def shape(self, name: str) -> tuple[int, ...]:
        """Shape of a variable."""
        return self._find(name).shape

    def numbers(self, name: str, row: int | None = None) -> Array:
        """Values of a numeric variable, or of one index of its first axis; native byte order."""
        found = self._find(name)
        if found.dtype.kind == "S":
            raise FormatError(f"'{name}' holds no numbers", where=self._path, mend=DAMAGED)
        values = self._values(found, name, row)
        return np.ascontiguousarray(values, dtype=found.dtype.newbyteorder("="))

    def words(self, name: str) -> list[str]:
        """The strings of a table of characters."""
        found = self._find(name)
        if found.dtype.kind != "S" or len(found.shape) != 2:
            raise FormatError(f"'{name}' holds no text", where=self._path, mend=DAMAGED)
        table = self._values(found, name, None)
        return [line.tobytes().split(b"\0")[0].decode("utf-8", "replace").strip() for line in table]

    def attribute(self, name: str, key: str) -> str:
        """A text attribute of a variable; empty if there is none."""
        return self._find(name).attributes.get(key, "")

    def _find(self, name: str) -> Variable:
        if name not in self.variables:
            raise FormatError(f"there is no variable '{name}'", where=self._path, mend=DAMAGED)
        return self.variables[name]

    def _values(self, found: Variable, name: str, row: int | None) -> Array:
        if row is not None and (not found.shape or not 0 <= row < found.shape[0]):
            raise FormatError(f"'{name}' has no step {row}", where=self._path, mend=DAMAGED)
        if not found.record:
            flat = self._data[found.begin : found.begin + found.row_bytes].view(found.dtype)
            whole = flat.reshape(found.shape)
            return whole if row is None else whole[row]
        rows = range(self.records) if row is None else (row,)
        parts = []
        for index in rows:
            begin = found.begin + index * self._stride
            parts.append(self._data[begin : begin + found.row_bytes].view(found.dtype))
        stack = np.stack(parts) if parts else np.empty((0, *found.shape[1:]), dtype=found.dtype)
        stack = stack.reshape((len(rows), *found.shape[1:]))
        return stack if row is None else stack[0]


@contextmanager
def open_classic(path: Path) -> Iterator[ClassicStore]:
    """A classic netCDF file. Raises `FormatError` for a damaged header or values outside the file."""
    try:
        data = np.memmap(path, dtype=np.uint8, mode="r")
    except (OSError, ValueError) as error:
        raise FormatError(f"the file cannot be opened: {error}", where=path, mend=DAMAGED) from None
    if len(data) < 8 or data[:4].tobytes() not in MAGIC:
        raise FormatError("this is no classic netCDF file", where=path, mend=DAMAGED)
    yield ClassicStore(data, path)
