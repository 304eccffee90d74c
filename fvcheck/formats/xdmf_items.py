"""The heavy data of an XDMF file: DataItems with values in the XML, in HDF5 or in binary files."""

from __future__ import annotations

from contextlib import ExitStack
from math import prod
from pathlib import Path, PurePosixPath
from typing import Any, Literal

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_rows
from fvcheck.formats import hdf5_safe as safe
from fvcheck.formats.xdmf_tree import Element
from fvcheck.mesh.piece import Array

_KINDS = {
    "float": "f",
    "double": "f",
    "int": "i",
    "uint": "u",
    "char": "i",
    "uchar": "u",
    "short": "i",
    "long": "i",
}
_WIDTHS = {"double": 8, "char": 1, "uchar": 1, "short": 2, "long": 8}
_ENDIAN: dict[str, Literal["=", "<", ">"]] = {"": "=", "native": "=", "little": "<", "big": ">"}

_HDF = ("HDF", "HDF5", "H5")


class Items:
    """Reads DataItems; HDF5 files stay open until the reader is closed (use as a context)."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self._stack = ExitStack()
        self._files: dict[Path, Any] = {}

    def __enter__(self) -> Items:
        return self

    def __exit__(self, *_: object) -> None:
        self._stack.close()

    def where(self, element: Element) -> str:
        """The place of an element, for messages."""
        return f"{self.path}, line {element.line}"

    def only(self, element: Element, count: int = 1) -> list[Element]:
        """The DataItems of an element; raises `FormatError` when they are not ``count``."""
        items = element.all("DataItem")
        if len(items) != count:
            raise FormatError(
                f"'{element.tag}' has {len(items)} DataItems instead of {count}", where=self.where(element)
            )
        return items

    def read(self, item: Element) -> Array:
        """The values, in the shape of ``Dimensions``. Raises `FormatError`."""
        where = self.where(item)
        kind = item.get("ItemType", "Type", default="Uniform").lower()
        if kind == "hyperslab":
            return self._slab(item, where)
        if kind != "uniform":
            raise FormatError(
                f"a DataItem of the type '{item.get('ItemType', 'Type')}' cannot be read",
                where=where,
                mend="Write the values out as a plain DataItem.",
            )
        if any(child.tag != "Information" for child in item.children):
            raise FormatError("a plain DataItem holds other elements", where=where)
        shape = dimensions(item, "Dimensions", where)
        form = item.get("Format", default="XML").upper()
        if form == "XML":
            return self._inline(item, shape, where)
        if form in _HDF:
            return self._hdf(item, where)
        if form == "BINARY":
            return self._binary(item, shape, where)
        raise FormatError(f"the format '{form}' of a DataItem cannot be read", where=where)

    def declared(self, item: Element) -> tuple[tuple[int, ...], np.dtype] | None:
        """Shape and kind of plain values in HDF5, as `read` gives them; None where only reading tells."""
        plain = item.get("ItemType", "Type", default="Uniform").lower() == "uniform"
        if not plain or item.get("Format", default="XML").upper() not in _HDF or item.children:
            return None
        where = self.where(item)
        data = self._dataset(item, where)
        if not safe.is_numeric(data, where):
            return None
        return self._hdf_shape(item, data, where), safe.plain_kind(data.dtype)

    def _inline(self, item: Element, shape: tuple[int, ...], where: str) -> Array:
        text = item.text
        kind = _dtype(item, where)
        if not item.get("Precision") and kind.kind == "f":
            kind = np.dtype(np.float64)
        if kind.kind in "iu":
            kind = np.dtype(np.int64)
        tokens = text.replace("D", "E").replace("d", "e").split() if kind.kind == "f" else text.split()
        if shape and len(tokens) != prod(shape):
            raise FormatError(
                f"{prod(shape)} values are declared, {len(tokens)} are there",
                where=where,
                mend="The file is damaged or incomplete; export it again.",
            )
        if "_" in text:
            raise FormatError("a value is no number", where=where)
        try:
            values = np.array(tokens, dtype=str).astype(kind) if tokens else np.empty(0, dtype=kind)
        except (ValueError, OverflowError) as error:
            raise FormatError(f"a value is no number: {str(error)[:80]}", where=where) from None
        return values.reshape(shape or (len(tokens),))

    def _dataset(self, item: Element, where: str) -> Any:
        text = item.text.strip()
        if "|" in text or "\n" in text:
            raise FormatError("several or partial data sets in one DataItem cannot be read", where=where)
        name, colon, inner = text.rpartition(":")
        if not colon or not inner.strip("/ "):
            raise FormatError(f"'{text[:80]}' is no FILE.h5:/DATASET", where=where)
        path = self.beside(name.strip(), where)
        if path not in self._files:
            self._files[path] = self._stack.enter_context(safe.open_hdf5(path))
        return safe.dataset(self._files[path], inner.strip(), path)

    def beside(self, name: str, where: str) -> Path:
        """A file named in the XML; it must lie in the folder of the XDMF file or below."""
        pure = PurePosixPath(name)
        folder = self.path.resolve().parent
        if not name or "\0" in name or pure.is_absolute() or ".." in pure.parts or "\\" in name:
            outside = True
        else:
            try:
                outside = not (folder / pure).resolve().is_relative_to(folder)
            except (OSError, RuntimeError):
                outside = True
        if outside:
            raise FormatError(
                f"the data file '{name[:120]}' is not in the folder of the XDMF file",
                where=where,
                mend="Put both files into one folder and name the data file without a path.",
            )
        return self.path.parent / pure

    def _hdf(self, item: Element, where: str) -> Array:
        data = self._dataset(item, where)
        return safe.read(data, where).reshape(self._hdf_shape(item, data, where))

    def _hdf_shape(self, item: Element, data: Any, where: str) -> tuple[int, ...]:
        """The declared dimensions, else those of the data set; FormatError where these do not go together."""
        shape = dimensions(item, "Dimensions", where)
        found = safe.shape(data, where)
        if not fits(shape, found):
            raise FormatError(
                f"the dimensions {shape} are declared, the data set has {found}",
                where=where,
                mend="The file is damaged or incomplete; export it again.",
            )
        return shape or found

    def read_rows(self, item: Element, count: int, rows: Array) -> Array | None:
        """Rows (k,) or (k, c), increasing, of plain values in HDF5; None for what must be read whole.

        count : how many rows there are
        """
        kind = item.get("ItemType", "Type", default="Uniform").lower()
        form = item.get("Format", default="XML").upper()
        if kind != "uniform" or form not in _HDF or item.children or len(rows) == 0:
            return None
        where = self.where(item)
        data = self._dataset(item, where)
        found = safe.shape(data, where)
        declared = dimensions(item, "Dimensions", where)
        if found[:1] != (count,) or len(found) > 2 or not fits(declared, found):
            return None
        values = hdf5_rows.read_rows(data, where, rows)
        return values[:, 0] if values.ndim == 2 and values.shape[1] == 1 else values

    def _binary(self, item: Element, shape: tuple[int, ...], where: str) -> Array:
        path = self.beside(item.text.strip(), where)
        endian = item.get("Endian").lower()
        if endian not in _ENDIAN or item.get("Compression", default="Raw").lower() != "raw" or not shape:
            raise FormatError(
                "this binary DataItem cannot be read", where=where, mend="Store the values in HDF5."
            )
        kind = _dtype(item, where).newbyteorder(_ENDIAN[endian])
        seek = _integers(item.get("Seek", default="0"), where)[0]
        try:
            size = path.stat().st_size
            if prod(shape) * kind.itemsize > size - seek:
                raise FormatError(
                    f"{prod(shape)} values are declared, the file '{path.name}' is too short", where=where
                )
            values = np.fromfile(path, dtype=kind, count=prod(shape), offset=seek)
        except OSError as error:
            raise FormatError(
                f"the file '{path.name}' cannot be read: {error.strerror}", where=where
            ) from None
        return values.astype(kind.newbyteorder("=")).reshape(shape)

    def _slab(self, item: Element, where: str) -> Array:
        """A HyperSlab: start, stride and count per axis of a data set; only these values are read."""
        selection, source = self.only(item, 2)
        numbers = self.read(selection)
        shape = dimensions(source, "Dimensions", where)
        if source.get("ItemType", default="Uniform").lower() != "uniform" or numbers.size != 3 * len(shape):
            raise FormatError(
                "this HyperSlab cannot be read", where=where, mend="Write the values out plainly."
            )
        start, stride, count = (tuple(int(n) for n in row) for row in numbers.reshape(3, -1))
        inside = [
            a >= 0 and s >= 1 and c >= 1 and a + s * (c - 1) < n
            for a, s, c, n in zip(start, stride, count, shape)
        ]
        if not all(inside):
            raise FormatError(f"a HyperSlab reaches beyond the dimensions {shape}", where=where)
        window = tuple(slice(a, a + s * (c - 1) + 1, s) for a, s, c in zip(start, stride, count))
        if source.get("Format", default="XML").upper() in _HDF:
            data = self._dataset(source, where)
            found = safe.shape(data, where)
            if found == shape:
                values = safe.read(data, where, window)
            else:
                values = self.read(source)[window]
        else:
            values = self.read(source)[window]
        declared = dimensions(item, "Dimensions", where)
        if declared and prod(declared) != values.size:
            raise FormatError(
                f"the dimensions {declared} are declared, the HyperSlab has {values.shape}", where=where
            )
        return np.ascontiguousarray(values).reshape(declared or values.shape)


def fits(declared: tuple[int, ...], found: tuple[int, ...]) -> bool:
    """Whether a data set may be read as the declared dimensions: as many values, rows not exchanged."""
    if not declared:
        return True
    short, full = [n for n in declared if n != 1], [n for n in found if n != 1]
    return prod(declared) == prod(found) and (len(short) < 2 or len(full) < 2 or short[-1] == full[-1])


def _integers(text: str, where: str) -> tuple[int, ...]:
    parts = text.split()
    if not all(part.isascii() and part.isdigit() and len(part) < 19 for part in parts):
        raise FormatError(f"'{text[:60]}' is no list of counts", where=where)
    return tuple(int(part) for part in parts)


def dimensions(element: Element, name: str, where: str) -> tuple[int, ...]:
    """An attribute that holds counts, or () if it is not there."""
    found = _integers(element.get(name), where)
    if len(found) > 6:
        raise FormatError(f"'{name}' has {len(found)} axes", where=where)
    return found


def _dtype(item: Element, where: str) -> np.dtype[Any]:
    name = item.get("NumberType", "DataType", default="Float").lower()
    kind = _KINDS.get(name)
    width = item.get("Precision", default=str(_WIDTHS.get(name, 4)))
    if kind is None or width not in (("4", "8") if kind == "f" else ("1", "2", "4", "8")):
        raise FormatError(f"the number type '{name}' of precision '{width[:20]}' cannot be read", where=where)
    return np.dtype(f"{kind}{width}")
