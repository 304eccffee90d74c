"""HDF5 files nobody has to trust: opened, walked and read with bounds.

The library follows links into other files and storage outside the file without
asking, believes a declared size that the file cannot hold, and hands out fill
values for data that were never written. Everything here refuses that with a
`FormatError`; whatever else the library raises becomes one, too.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from itertools import product
from math import prod
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.mesh.piece import Array

SIGNATURE = b"\x89HDF\r\n\x1a\n"
DAMAGED = "The file is damaged or incomplete; export it again."
_LINK_DEPTH = 16
# The best that deflate can do is 1032 : 1 (RFC 1951: 258 bytes from two bits).
_BEST_RATIO = 1100
_SLACK = 1 << 20
_RAISED = (OSError, RuntimeError, LookupError, ValueError, TypeError, OverflowError, MemoryError)


def is_hdf5(head: bytes) -> bool:
    """Whether the first bytes of a file are those of an HDF5 file (a user block may come first)."""
    return any(head[start : start + 8] == SIGNATURE for start in (0, 512, 1024, 2048))


def has_root(path: Path, name: str) -> bool:
    """Whether the HDF5 file can be opened and its root has a member ``name``. Never raises `FormatError`."""
    try:
        with open_hdf5(path) as file, _guard(path):
            return name in file
    except FormatError:
        return False


@contextmanager
def open_hdf5(path: Path) -> Iterator[Any]:
    """The file, opened for reading as ``h5py.File``. Raises `FormatError` when it cannot be."""
    import h5py

    try:
        file = h5py.File(path, "r", locking=False)
    except FileNotFoundError:
        raise FormatError(
            "there is no such file", where=path, mend="Keep it beside the file that names it."
        ) from None
    except _RAISED as error:
        text = "it ends too early" if "truncated" in str(error) else "the library refuses it"
        raise FormatError(f"the HDF5 file cannot be opened: {text}", where=path, mend=DAMAGED) from None
    with file:
        yield file


@contextmanager
def _guard(where: object) -> Iterator[None]:
    """Turn what the library raises on damaged contents into a `FormatError`."""
    try:
        yield
    except MemoryError:
        raise FormatError(
            "there is not enough memory for what the file declares", where=where, mend=DAMAGED
        ) from None
    except _RAISED as error:
        text = " ".join(str(error).split())[:120]
        raise FormatError(f"the HDF5 contents cannot be read: {text}", where=where, mend=DAMAGED) from None


def root(file: Any, where: object) -> Any:
    """The root group of an open file."""
    with _guard(where):
        return file["/"]


def is_group(node: Any) -> bool:
    """Whether a member is a group (and not a dataset)."""
    import h5py

    return isinstance(node, h5py.Group)


def is_dataset(node: Any) -> bool:
    """Whether a member is a dataset."""
    import h5py

    return isinstance(node, h5py.Dataset)


def names(group: Any, where: object) -> list[str]:
    """Names of the members of a group, in the order the file keeps."""
    with _guard(where):
        return [str(name) for name in group]


def member(group: Any, name: str, where: object, depth: int = 0) -> Any:
    """The member ``name`` of a group (a path with ``/`` goes deeper), or None if there is none.

    Links inside the file are followed, links into other files refused.
    """
    import h5py

    if depth > _LINK_DEPTH:
        raise FormatError(f"links lead in a circle at {name}", where=where)
    node = group
    if name.startswith("/"):
        with _guard(where):
            node = root(group.file, where)
    for part in (piece for piece in name.split("/") if piece not in ("", ".")):
        if not isinstance(node, h5py.Group):
            return None
        with _guard(where):
            link = node.get(part, getlink=True) if _linked(node, part) else None
        if link is None:
            return None
        if isinstance(link, h5py.ExternalLink):
            raise FormatError(
                f"'{name}' is a link into another file ({link.filename})",
                where=where,
                mend="Export everything into one file.",
            )
        if isinstance(link, h5py.SoftLink):
            node = member(node, str(link.path), where, depth + 1)
            if node is None:
                raise FormatError(f"the link '{part}' leads nowhere", where=where, mend=DAMAGED)
            continue
        with _guard(where):
            node = node[part]
    return node


def identity(node: Any, where: object) -> object:
    """What tells a member apart however it was reached."""
    import h5py

    with _guard(where):
        return h5py.h5o.get_info(node.id).addr


def link_target(group: Any, name: str, where: object) -> str:
    """Path that a link inside the file points at; empty if the member is no such link."""
    import h5py

    with _guard(where):
        link = group.get(name, getlink=True)
    return str(link.path) if isinstance(link, h5py.SoftLink) else ""


def _linked(group: Any, name: str) -> bool:
    return bool(group.id.links.exists(name.encode()))


def group(parent: Any, name: str, where: object) -> Any:
    """The group ``name``; raises `FormatError` when it is missing or no group."""
    found = member(parent, name, where)
    if found is None or not is_group(found):
        raise FormatError(f"there is no group '{name}'", where=where, mend=DAMAGED)
    return found


def dataset(parent: Any, name: str, where: object) -> Any:
    """The dataset ``name``; raises `FormatError` when it is missing or no dataset."""
    found = member(parent, name, where)
    if not is_dataset(found):
        raise FormatError(f"there is no dataset '{name}'", where=where, mend=DAMAGED)
    return found


def attribute(node: Any, name: str, where: object) -> Any:
    """An attribute as numpy array or str, or None if there is none."""
    with _guard(where):
        if name not in node.attrs:
            return None
        if node.attrs.get_id(name).get_storage_size() > _SLACK:
            raise FormatError(f"the attribute '{name}' is too large", where=where, mend=DAMAGED)
        value = node.attrs[name]
    if isinstance(value, bytes):
        return value.decode("utf-8", "replace").rstrip("\0 ")
    if isinstance(value, str):
        return value.rstrip("\0 ")
    value = np.asarray(value)
    if value.dtype.kind in "SO" and value.size == 1:
        single = value.reshape(-1)[0]
        return single.decode("utf-8", "replace").rstrip("\0 ") if isinstance(single, bytes) else str(single)
    return value


def text_attribute(node: Any, name: str, where: object) -> str:
    """An attribute that holds text; empty if there is none or it holds something else."""
    value = attribute(node, name, where)
    return value if isinstance(value, str) else ""


def shape(data: Any, where: object) -> tuple[int, ...]:
    """Shape of a dataset; () for a single value."""
    if not is_dataset(data):
        raise FormatError(f"'{data.name}' is no dataset", where=where, mend=DAMAGED)
    with _guard(where):
        found = data.shape
    if found is None:
        raise FormatError("a dataset is empty", where=f"{where}, {data.name}", mend=DAMAGED)
    return tuple(int(n) for n in found)


def is_numeric(data: Any, where: object) -> bool:
    """Whether a dataset holds plain integers, floats or booleans."""
    with _guard(where):
        return data.dtype.kind in "iufb"


def read(data: Any, where: object, rows: tuple[int, int] | slice | tuple[slice, ...] | None = None) -> Array:
    """The values of a numeric dataset, native byte order, C order.

    ``rows``: first and one past the last index of the first axis, a tuple of
    slices with known bounds, or None for everything. Raises `FormatError` when
    the range lies outside, the values lie outside the file, were never written,
    or the declared size is more than the file can hold.
    """
    spot = f"{where}, {_name(data)}"
    total = shape(data, spot)
    if not is_numeric(data, spot):
        raise FormatError("numbers are expected here", where=spot)
    if isinstance(rows, tuple) and rows and not isinstance(rows[0], slice):
        first, last = int(rows[0]), int(rows[1])
        if not total or not 0 <= first <= last <= total[0]:
            raise FormatError(
                f"values {first} to {last} are asked for, {total[0] if total else 1} are there",
                where=spot,
                mend=DAMAGED,
            )
        if first == last:
            return np.empty((0, *total[1:]), dtype=data.dtype.newbyteorder("="))
        window: tuple[slice, ...] = (slice(first, last),)
    else:
        window = rows or ()  # type: ignore[assignment]
    if prod(total) == 0:
        return np.empty(total, dtype=data.dtype.newbyteorder("="))
    with _guard(spot):
        _trust(data, total, window, spot)
        values = np.asarray(data[window] if window else data[()])
        return plain(values)


def trust(data: Any, where: object, rows: tuple[int, int]) -> None:
    """What `read` checks before it reads a range of rows within the dataset, and the same errors."""
    spot = f"{where}, {_name(data)}"
    total = shape(data, spot)
    if not is_numeric(data, spot):
        raise FormatError("numbers are expected here", where=spot)
    with _guard(spot):
        _trust(data, total, (slice(*rows),), spot)


def _name(data: Any) -> str:
    return str(data.name or "a dataset").replace("/ data", "")


def plain(values: Array) -> Array:
    """In native byte order, C order and a width that numpy computes in."""
    return np.ascontiguousarray(values, dtype=plain_kind(values.dtype))


def plain_kind(kind: np.dtype) -> np.dtype:
    """The kind that `plain` brings values to."""
    kind = kind.newbyteorder("=")
    if kind.kind == "f" and kind.itemsize not in (4, 8):
        return np.dtype(np.float32 if kind.itemsize < 4 else np.float64)
    return kind


def _trust(data: Any, total: tuple[int, ...], window: tuple[slice, ...], spot: str) -> None:
    """Refuse storage outside the file, values never written and sizes the file cannot hold."""
    import h5py

    layout = data.id.get_create_plist()
    if layout.get_external_count() or layout.get_layout() == h5py.h5d.VIRTUAL:
        raise FormatError(
            "the values are stored in another file", where=spot, mend="Export everything into one file."
        )
    stored = int(data.id.get_storage_size())
    declared = prod(total) * data.dtype.itemsize
    if stored == 0:
        raise FormatError("the values were never written", where=spot, mend=DAMAGED)
    if layout.get_layout() != h5py.h5d.CHUNKED:
        if stored < declared or declared > data.file.id.get_filesize():
            raise FormatError(f"{declared} bytes are declared, {stored} are there", where=spot, mend=DAMAGED)
        return
    chunk = tuple(int(n) for n in data.chunks)
    ratio = _BEST_RATIO if layout.get_nfilters() else 1
    size = int(data.file.id.get_filesize())
    largest = max(declared, prod(chunk) * data.dtype.itemsize)
    if stored > size or largest > max(ratio, 64) * stored + _SLACK:
        raise FormatError(
            f"{largest} bytes are declared, more than the {stored} stored can hold", where=spot, mend=DAMAGED
        )
    grid = [range(-(-n // c)) for n, c in zip(total, chunk)]
    held = int(data.id.get_num_chunks())
    if held >= prod(len(axis) for axis in grid):
        return
    for axis, span in enumerate(window):
        grid[axis] = range(span.start // chunk[axis], -(-span.stop // chunk[axis]))
    missing = prod(len(axis) for axis in grid) > held
    for index in () if missing else product(*grid):
        info = data.id.get_chunk_info_by_coord(tuple(i * c for i, c in zip(index, chunk)))
        missing = missing or info.byte_offset is None
    if missing:
        raise FormatError("a part of the values was never written", where=spot, mend=DAMAGED)
