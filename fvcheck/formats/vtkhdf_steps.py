"""Partitions and time steps of VTKHDF data sets: where their rows lie."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.mesh.piece import Array, Piece


@dataclass(frozen=True)
class Steps:
    """The group ``Steps`` of a transient data set; ``group`` is None for a single state.

    known : tables read so far, by name
    """

    group: Any
    times: tuple[float, ...]
    where: str
    known: dict[str, Array | None] = field(default_factory=dict)

    def table(self, name: str, columns: int = 1) -> Array | None:
        """The offsets ``name`` as (steps, columns), or None if the file has none."""
        if name not in self.known:
            self.known[name] = self._read(name, columns)
        return self.known[name]

    def _read(self, name: str, columns: int) -> Array | None:
        if self.group is None or (data := safe.member(self.group, name, self.where)) is None:
            return None
        values = safe.read(data, self.where)
        # Some writers add a last entry, the end of the last step.
        stated = (len(self.times) * columns, (len(self.times) + 1) * columns)
        if values.size not in stated or values.dtype.kind not in "iu" or (values.astype(int) < 0).any():
            raise FormatError(
                f"'{name}' does not fit {len(self.times)} time steps", where=self.where, mend=safe.DAMAGED
            )
        return values.astype(np.int64).reshape(-1, columns)[: len(self.times)]

    def parts(self, step: int, stored: int) -> tuple[int, int]:
        """First partition of a step and the number of its partitions."""
        if self.group is None:
            return 0, stored
        offsets, counts = self.table("PartOffsets"), self.table("NumberOfParts")
        first = 0 if offsets is None else int(offsets[step, 0])
        count = (stored if offsets is None else 1) if counts is None else int(counts[step, 0])
        if not 0 <= first < first + count <= stored:
            raise FormatError(
                f"step {step} has the partitions {first} to {first + count}, the file has {stored}",
                where=self.where,
                mend=safe.DAMAGED,
            )
        return first, count

    def start(
        self, name: str, step: int, counts: Array, first: int, column: int = 0, columns: int = 1
    ) -> int:
        """Row at which a step begins: as stated, else behind all partitions before ``first``."""
        table = self.table(name, columns)
        if table is None:
            return int(counts[:first].sum())
        rows = np.unique(table[:, column])
        if len(rows) > 1 and len(counts) == len(self.times) and np.diff(rows).min() < counts.min():
            raise FormatError(f"time steps overlap in '{name}'", where=self.where, mend=safe.DAMAGED)
        return int(table[step, column])

    def data_start(self, kind: str, name: str, step: int, count: int) -> int | None:
        """Row at which an array of a step begins, or None if the file does not say.

        ``count``: rows of the step; steps may share rows, but not in part.
        """
        table = self.table(f"{kind}Offsets/{name}")
        if table is None:
            return None
        mine = int(table[step, 0])
        gaps = np.abs(table[:, 0] - mine)
        later = table[:, 0] > mine
        if ((gaps > 0) & (gaps < count) & later).any():
            raise FormatError(f"time steps overlap in '{kind}/{name}'", where=self.where, mend=safe.DAMAGED)
        return mine


def steps_of(group: Any, path: Path) -> Steps:
    """The time steps of a data set. Raises `FormatError` where they do not make sense."""
    node = safe.member(group, "Steps", path)
    where = f"{path}, {group.name}/Steps"
    if node is None:
        return Steps(None, (), where)
    if not safe.is_group(node):
        raise FormatError("Steps is no group", where=where, mend=safe.DAMAGED)
    values = safe.read(safe.dataset(node, "Values", where), where).reshape(-1)
    count = safe.attribute(node, "NSteps", where)
    known = isinstance(count, np.ndarray) and count.size == 1 and count.dtype.kind in "iu"
    if not known or int(count.reshape(-1)[0]) != len(values):
        raise FormatError(
            f"NSteps is {count}, but there are {len(values)} times", where=where, mend=safe.DAMAGED
        )
    if len(values) == 0 or not np.isfinite(values).all():
        raise FormatError("the times are no finite numbers", where=where, mend=safe.DAMAGED)
    return Steps(node, tuple(float(value) for value in values), where)


@dataclass(frozen=True)
class Part:
    """One partition at one step: its rows, and how to build its mesh.

    ``first_point``/``first_cell``: rows in arrays without offsets of their own;
    ``all_points``/``all_cells``: rows of the whole step; ``points_before``,
    ``cells_before``: rows of this step's partitions before this one. ``key``
    is the same for steps with the same mesh. ``shape``: points per axis of an image.
    """

    key: object
    mesh: Callable[[], Piece]
    points: int
    cells: int
    first_point: int = 0
    first_cell: int = 0
    all_points: int = 0
    all_cells: int = 0
    points_before: int = 0
    cells_before: int = 0
    shape: tuple[int, ...] | None = None

    def before(self, kind: str) -> int:
        """Rows of this step before this partition, for ``PointData`` or ``CellData``."""
        return self.points_before if kind == "PointData" else self.cells_before


def counts_of(group: Any, name: str, where: object) -> Array:
    """A list of counts per partition. Raises `FormatError` when one is negative."""
    values = safe.read(safe.dataset(group, name, where), where).reshape(-1)
    if values.dtype.kind not in "iu" or len(values) == 0 or (values.astype(np.int64) < 0).any():
        raise FormatError(f"'{name}' holds no counts", where=where, mend=safe.DAMAGED)
    return values.astype(np.int64)


def same_length(where: object, stored: int, **lists: Array) -> None:
    for name, values in lists.items():
        if len(values) != stored:
            raise FormatError(
                f"'{name}' has {len(values)} entries for {stored} partitions", where=where, mend=safe.DAMAGED
            )


def expect_rows(group: Any, name: str, rows: int, where: object) -> None:
    shape = safe.shape(safe.dataset(group, name, where), where)
    if (shape[0] if shape else 1) != rows:
        raise FormatError(
            f"'{name}' has {shape[0] if shape else 1} rows instead of {rows}", where=where, mend=safe.DAMAGED
        )


def rows_of(group: Any, name: str, first: int, count: int, where: object) -> Array:
    return safe.read(safe.dataset(group, name, where), where, (first, first + count))


def points_of(group: Any, first: int, count: int, where: object) -> Array:
    points = rows_of(group, "Points", first, count, where)
    if points.ndim != 2 or points.shape[1] != 3:
        raise FormatError(f"the points have the shape {points.shape}", where=where, mend=safe.DAMAGED)
    return points


def first_offset(cell_start: int, counts: Array, index: int) -> int:
    """Row of a partition's first offset: every partition stored before has one offset more than cells."""
    before = np.concatenate([[0], np.cumsum(counts)])
    if before[index] != cell_start and cell_start in before:
        index = int(np.argmax(before == cell_start))
    return cell_start + index
