"""Arrays of a file that are known by shape and kind, and read when their values are wanted."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, cast

import numpy as np
from numpy.lib.mixins import NDArrayOperatorsMixin

from fvcheck.errors import FormatError

Array = np.ndarray


class Stored(NDArrayOperatorsMixin):
    """Stands for an array among the data of a `Piece`; its shape and kind cost nothing.

    Whatever else is done with it reads it, once; ``numpy.asarray`` gives the array itself.

    shape, dtype : of the array, as the file declares them
    read : gives it, C-ordered and in native byte order, checked; may raise FormatError
    """

    def __init__(self, shape: tuple[int, ...], dtype: np.dtype, read: Callable[[], Array]) -> None:
        self.shape, self.dtype = shape, dtype
        self._read = read
        self._values: Array | None = None

    @property
    def ndim(self) -> int:
        return len(self.shape)

    @property
    def size(self) -> int:
        return int(np.prod(self.shape))

    def __len__(self) -> int:
        return self.shape[0]

    def __array__(self, dtype: Any = None, copy: bool | None = None) -> Array:
        self._values = self.passing()
        return np.array(self._values, dtype=dtype) if copy else np.asarray(self._values, dtype=dtype)

    def __getitem__(self, key: Any) -> Any:
        return np.asarray(self)[key]

    def __array_ufunc__(self, ufunc: np.ufunc, method: str, *inputs: Any, **options: Any) -> Any:
        read = [np.asarray(one) if isinstance(one, Stored) else one for one in inputs]
        return getattr(ufunc, method)(*read, **options)

    def __getattr__(self, name: str) -> Any:
        if name.startswith("_"):
            raise AttributeError(name)
        return getattr(np.asarray(self), name)

    def __reduce__(self) -> tuple[Any, ...]:
        return np.asarray, (np.asarray(self),)  # to another process goes what it stands for

    def passing(self) -> Array:
        """The values, not kept for the next time."""
        if self._values is not None:
            return self._values
        try:
            return self._read()
        except MemoryError:
            raise FormatError(
                f"there is not enough memory for an array of the shape {self.shape}",
                mend="Check the size of the file; export less of the domain.",
            ) from None


def stored(shape: tuple[int, ...], dtype: np.dtype, read: Callable[[], Array]) -> Array:
    """A `Stored` array, typed as what it stands for."""
    return cast(Array, Stored(shape, dtype, read))


def at_rows(values: Array, rows: Array) -> Array:
    """``values[rows]``; of a stored array one that is read when it is wanted, and then not held whole."""
    if not isinstance(values, Stored):
        return values[rows]
    source: Stored = values
    count = int(np.count_nonzero(rows)) if rows.dtype == bool else len(rows)
    return stored((count, *source.shape[1:]), source.dtype, lambda: source.passing()[rows])


def as_array(values: Any) -> Array:
    """An array, or a stored one as it is, for questions about shape and kind alone."""
    return cast(Array, values) if isinstance(values, Stored) else np.asarray(values)
