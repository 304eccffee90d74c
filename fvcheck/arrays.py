"""The arrays of an export, at points and at cells, and their values as a role wants them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

from fvcheck.errors import FieldError
from fvcheck.fieldnames import is_vector
from fvcheck.hints import Hint
from fvcheck.mesh.stored import as_array

Array = np.ndarray
Location = Literal["point", "cell"]
Data = Mapping[str, Array]

LOCATIONS: tuple[Location, ...] = ("cell", "point")
"""The cells first: point copies of a finite-volume run are averages."""


@dataclass(frozen=True, eq=False)
class Field:
    """An array that plays a role.

    name : of the array; ``"u,v"`` for one put together from components
    location : "point" or "cell"
    values : (n,) or, for vectors, (n, 3): the x, y, z parts as in the file, in
        the precision of the file; NaN where the file has it
    slots : which of the three parts the file gives; the others are zero
    rim : of a cell field, values (e,) or (e, 3) that the file gives on the edges
        of the domain boundary, NaN where it gives none of its own
    rows : (k,), increasing, which points or cells ``values`` are of; None for all
    """

    name: str
    location: Location
    values: Array
    slots: tuple[int, ...] = ()
    rim: Array | None = None
    rows: Array | None = None

    def at(self, numbers: Array) -> Array:
        """Values at points or cells of the mesh; IndexError for one that the field was not read at."""
        if self.rows is None:
            return self.values[numbers]
        place = np.minimum(np.searchsorted(self.rows, numbers), len(self.rows) - 1)
        if not np.array_equal(self.rows[place], numbers):
            raise IndexError(f"{self.name} was read at {len(self.rows)} {self.location}s only")
        return self.values[place]


@dataclass(frozen=True)
class Candidate:
    """Arrays, one or one per component, that may play a role."""

    location: Location
    names: tuple[str, ...]
    slots: tuple[int, ...]

    @property
    def name(self) -> str:
        return ",".join(self.names)


class Arrays:
    """The arrays of an export at both locations, and what may be asked of them."""

    def __init__(
        self, point_data: Data, cell_data: Data, n_points: int | None = None, n_cells: int | None = None
    ) -> None:
        self._data: dict[Location, Data] = {"cell": cell_data, "point": point_data}
        self._sizes: dict[Location, int | None] = {"cell": n_cells, "point": n_points}

    def at(self, location: Location) -> Data:
        return self._data[location]

    def where(self, name: str) -> list[Location]:
        """Locations that have the array, the cells first."""
        return [location for location in self._data if name in self._data[location]]

    def components(self, location: Location, name: str) -> int:
        """Number of components, 0 where the array is no list of numbers."""
        values = as_array(self.at(location)[name])
        if values.dtype.kind not in "fiu" or values.ndim not in (1, 2):
            return 0
        return 1 if values.ndim == 1 else values.shape[1]

    def field(self, role: str, candidate: Candidate, hints: list[Hint]) -> Field:
        """The candidate's values, checked; a hint where some are not finite."""
        values = self.values(role, candidate)
        size = self._sizes[candidate.location]
        if size is not None and len(values) != size:
            raise FieldError(
                f"Array {candidate.name!r} has {len(values)} values, the mesh {size} {candidate.location}s",
                where=f"role {role}",
            )
        bad = int(np.count_nonzero(~np.isfinite(values)))
        if bad:
            hints.append(
                Hint(
                    "nan-values",
                    f"{candidate.location} array {candidate.name!r} ({role}) holds {bad} of {values.size} "
                    "values that are NaN or infinite.",
                )
            )
        return Field(candidate.name, candidate.location, values, candidate.slots)

    def values(self, role: str, candidate: Candidate) -> Array:
        """(n,) or (n, 3) values of a candidate; FieldError where they do not fit the role."""
        columns = [self._column(role, candidate.location, name) for name in candidate.names]
        if not is_vector(role):
            return columns[0][:, 0]
        if len(columns) == 1 and columns[0].shape[1] == 3:
            return columns[0]
        if len({len(column) for column in columns}) > 1:
            sizes = ", ".join(f"{name}: {len(column)}" for name, column in zip(candidate.names, columns))
            raise FieldError(f"The components of the {role} differ in length", where=sizes)
        parts = np.concatenate(columns, axis=1)
        vector = np.zeros((len(parts), 3), dtype=parts.dtype)
        vector[:, list(candidate.slots)] = parts
        return vector

    def _column(self, role: str, location: Location, name: str) -> Array:
        if self.components(location, name) == 0:
            values = as_array(self.at(location)[name])
            raise FieldError(
                f"Array {name!r} ({values.dtype}, shape {values.shape}) is no list of numbers per {location}",
                where=f"role {role}",
            )
        values = np.asarray(self.at(location)[name])
        values = values[:, None] if values.ndim == 1 else values
        # Float precision is kept, since it bounds the imbalance that can be told from rounding.
        if values.dtype.kind != "f" or values.dtype.itemsize > 8:
            return values.astype(np.float64)
        return values.astype(values.dtype.newbyteorder("="), copy=False)
