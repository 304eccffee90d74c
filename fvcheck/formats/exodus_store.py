"""The variables of an Exodus II file, classic netCDF or netCDF-4, behind one interface."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Protocol

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe
from fvcheck.mesh.piece import Array

_MOST_TEXT = 1 << 24


class Store(Protocol):
    """Reads variables by name; every method raises `FormatError` for what is missing or damaged."""

    def __contains__(self, name: str) -> bool: ...

    def dim(self, name: str) -> int | None:
        """Length of a dimension, or None if there is none of this name."""

    def shape(self, name: str) -> tuple[int, ...]:
        """Shape of a variable."""

    def numbers(self, name: str, row: int | None = None) -> Array:
        """All values, or those at one index of the first axis; native byte order."""

    def words(self, name: str) -> list[str]:
        """The strings of a table of characters."""

    def attribute(self, name: str, key: str) -> str:
        """A text attribute of a variable; empty if there is none."""


class Hdf5Store:
    """A netCDF-4 file as the HDF5 file it is: dimensions and variables are datasets of the root."""

    def __init__(self, file: Any, path: Path) -> None:
        self._file, self._path = file, path

    def __contains__(self, name: str) -> bool:
        return hdf5_safe.member(self._file, name, self._path) is not None

    def dim(self, name: str) -> int | None:
        if name not in self:
            return None
        shape = self.shape(name)
        return shape[0] if shape else None

    def shape(self, name: str) -> tuple[int, ...]:
        return hdf5_safe.shape(hdf5_safe.dataset(self._file, name, self._path), self._path)

    def numbers(self, name: str, row: int | None = None) -> Array:
        data = hdf5_safe.dataset(self._file, name, self._path)
        if row is None:
            return hdf5_safe.read(data, self._path)
        return hdf5_safe.read(data, self._path, (row, row + 1))[0]

    def words(self, name: str) -> list[str]:
        data = hdf5_safe.dataset(self._file, name, self._path)
        shape = hdf5_safe.shape(data, self._path)
        try:
            fits = data.dtype == np.dtype("S1") and len(shape) == 2 and shape[0] * shape[1] <= _MOST_TEXT
            table = np.asarray(data[()]) if fits else None
        except (OSError, RuntimeError, LookupError, ValueError, TypeError):
            table = None
        if table is None:
            raise FormatError(f"'{name}' holds no text", where=self._path, mend=hdf5_safe.DAMAGED)
        return [line.tobytes().split(b"\0")[0].decode("utf-8", "replace").strip() for line in table]

    def attribute(self, name: str, key: str) -> str:
        data = hdf5_safe.dataset(self._file, name, self._path)
        value = hdf5_safe.attribute(data, key, self._path)
        return value if isinstance(value, str) else ""


@contextmanager
def open_store(path: Path) -> Iterator[Store]:
    """The file as a `Store`. Raises `FormatError` when it is no netCDF file or a damaged one."""
    from fvcheck.formats.netcdf_classic import MAGIC, open_classic

    try:
        with path.open("rb") as stream:
            head = stream.read(4)
    except OSError as error:
        raise FormatError(f"the file cannot be opened: {error.strerror}", where=path) from None
    if head in MAGIC:
        with open_classic(path) as classic:
            yield classic
    else:
        with hdf5_safe.open_hdf5(path) as file:
            yield Hdf5Store(file, path)
