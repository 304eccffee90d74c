"""Values of an HDF5 dataset that are read when they are wanted; the file is opened again for it."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.formats import hdf5_safe as safe
from fvcheck.mesh.piece import Array
from fvcheck.mesh.stored import stored


def later(
    data: Any,
    where: object,
    rows: tuple[int, int] | None = None,
    *,
    shape: tuple[int, ...] | None = None,
    window: tuple[slice, ...] = (),
) -> Array:
    """What `hdf5_safe.read` gives of a numeric dataset, with its errors, once it is wanted.

    window : what of the values read is taken, all where it is empty
    shape : what that is brought to, None for the shape that the rows have
    """
    total = safe.shape(data, where)
    path, name = Path(data.file.filename), str(data.name)
    final = shape or (total if rows is None else (rows[1] - rows[0], *total[1:]))

    def read() -> Array:
        with safe.open_hdf5(path) as file:
            values = safe.read(safe.dataset(file, name, where), where, rows)
        return np.ascontiguousarray(values[window]).reshape(final)

    return stored(final, safe.plain_kind(data.dtype), read)
