"""Single rows of HDF5 datasets, without reading what lies between them.

The library reads a list of rows one by one and slowly. Where values are stored
as they are, they are fetched from their places in the file; of packed ones,
the chunks that hold a wanted row are unpacked, each once.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.mesh.piece import Array

# Bytes between two rows that are read along, since that costs no more than a further read.
_GAP = 1 << 14


def read_rows(data: Any, where: object, rows: Array) -> Array:
    """What `hdf5_safe.read` gives at rows (k,), which increase.

    Raises FormatError as it does, and where a row lies outside.
    """
    total = safe.shape(data, where)
    if not total or (len(rows) and not 0 <= rows[0] <= rows[-1] < total[0]):
        last, there = int(rows[-1]) if len(rows) else 0, total[0] if total else 1
        raise FormatError(
            f"values up to {last} are asked for, {there} are there",
            where=f"{where}, {data.name}",
            mend=safe.DAMAGED,
        )
    if len(rows) == 0:
        return safe.read(data, where, (0, 0))
    safe.trust(data, where, (int(rows[0]), int(rows[-1]) + 1))
    blocks = _blocks(data, total, rows)
    if blocks is None:
        return _by_library(data, where, total, rows)
    return _from_file(data, where, total, rows, *blocks)


def _blocks(data: Any, total: tuple[int, ...], rows: Array) -> tuple[int, Array, Array] | None:
    """Rows of a block of storage, the blocks that hold wanted rows, and where in the file each begins.

    None where values are packed, or where rows lie in parts.
    """
    import h5py

    plain = hasattr(os, "preadv") and data.file.driver == "sec2" and data.file.userblock_size == 0
    layout = data.id.get_create_plist()
    if not plain or layout.get_nfilters():
        return None
    if layout.get_layout() == h5py.h5d.CONTIGUOUS:
        begin = data.id.get_offset()
        return None if begin is None else (total[0], np.zeros(1, np.int64), np.array([begin]))
    if layout.get_layout() != h5py.h5d.CHUNKED or tuple(data.chunks[1:]) != total[1:]:
        return None
    size, rest = int(data.chunks[0]), (0,) * (len(total) - 1)
    of_row = rows // size
    touched = of_row[np.concatenate([[0], np.flatnonzero(np.diff(of_row)) + 1])]
    begins = [data.id.get_chunk_info_by_coord((int(k) * size, *rest)).byte_offset for k in touched]
    return None if None in begins else (size, touched, np.array(begins, np.int64))


def _from_file(
    data: Any,
    where: object,
    total: tuple[int, ...],
    rows: Array,
    size: int,
    blocks: Array,
    begins: Array,
) -> Array:
    width = data.dtype.itemsize * int(np.prod(total[1:], dtype=np.int64))
    block, within = np.divmod(rows, size)
    apart = (np.diff(rows) * width > _GAP) | (np.diff(block) != 0)
    first = np.concatenate([[0], np.flatnonzero(apart) + 1])
    last = np.concatenate([first[1:], [len(rows)]]) - 1
    lengths = within[last] - within[first] + 1
    places = begins[np.searchsorted(blocks, block[first])] + within[first] * width
    ends = np.cumsum(lengths)
    starts = ends - lengths
    stored = np.empty(int(ends[-1]), np.dtype((np.void, width)))
    buffer = stored.view(np.uint8).data
    spot = f"{where}, {data.name}"
    file = os.open(data.file.filename, os.O_RDONLY)
    try:
        for place, at, to in zip(
            places.tolist(), (width * (ends - lengths)).tolist(), (width * ends).tolist()
        ):
            if os.preadv(file, [buffer[at:to]], place) != to - at:
                raise FormatError("the values end too early", where=spot, mend=safe.DAMAGED)
    except OSError as error:
        raise FormatError(f"the values cannot be read: {error.strerror}", where=spot) from None
    finally:
        os.close(file)
    run = np.repeat(np.arange(len(first)), last - first + 1)
    taken = stored[starts[run] + within - within[first][run]]
    return safe.plain(taken.view(data.dtype).reshape(len(rows), *total[1:]))


def _by_library(data: Any, where: object, total: tuple[int, ...], rows: Array) -> Array:
    kept = []
    for begin, end in _ranges(data, total, rows):
        mine = rows[np.searchsorted(rows, begin) : np.searchsorted(rows, end)]
        kept.append(safe.read(data, where, (begin, end))[mine - begin])
    return np.concatenate(kept)


def _ranges(data: Any, total: tuple[int, ...], rows: Array) -> Iterator[tuple[int, int]]:
    """Ranges that hold all rows; whole chunks, so that none is unpacked twice."""
    size = int(data.chunks[0]) if data.chunks else max(1, _GAP // max(1, data.dtype.itemsize))
    touched = np.unique(rows // size)
    for run in np.split(touched, np.flatnonzero(np.diff(touched) > 1) + 1):
        yield int(run[0]) * size, min((int(run[-1]) + 1) * size, total[0])
