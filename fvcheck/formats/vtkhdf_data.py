"""The arrays of VTKHDF data sets at one step, whole or by single rows."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.formats.hdf5_later import later
from fvcheck.formats.hdf5_rows import read_rows
from fvcheck.formats.vtkhdf_mesh import unstructured_parts
from fvcheck.formats.vtkhdf_steps import Part, Steps, steps_of
from fvcheck.formats.vtkhdf_surfaces import image_parts, poly_parts
from fvcheck.mesh.piece import Array, RowReader, Wanted

PARTS = {"UnstructuredGrid": unstructured_parts, "PolyData": poly_parts, "ImageData": image_parts}
"""Type of a data set -> what lists its partitions at a step."""


def row_reader(path: Path, block: str, kind: str) -> RowReader:
    """How single rows of the only block of a file are read.

    All steps share its arrays, so that the places of the mesh tell the layout.
    """

    tables: dict[str, Array | None] = {}  # of all steps: read once

    @cache
    def layout(step: int) -> object:
        with safe.open_hdf5(path) as file:
            group = safe.group(file, block, path)
            cells = safe.member(group, "CellData", path)
            if safe.is_group(cells) and safe.member(cells, "vtkGhostType", path) is not None:
                return None  # which cells count is written anew for each step
            return tuple(part.key for part in _parts(group, kind, step, path, tables)[1])

    def read(step: int, wanted: Mapping[str, Wanted]) -> dict[str, dict[str, Array]]:
        out: dict[str, dict[str, Array]] = {}
        with safe.open_hdf5(path) as file:
            group = safe.group(file, block, path)
            steps, parts = _parts(group, kind, step, path, tables)
            for location, part in wanted.items():
                out[location] = _wanted(group, location, steps, step, parts, part, f"{path}, {block}")
        return out

    return RowReader(layout, read)


def _parts(
    group: Any, kind: str, step: int, path: Path, tables: dict[str, Array | None]
) -> tuple[Steps, list[Part]]:
    """The steps, and those partitions of one that have cells."""
    steps = replace(steps_of(group, path), known=tables)
    step = min(step, max(0, len(steps.times) - 1))
    return steps, [part for part in PARTS[kind](group, steps, step) if part.cells]


def _wanted(
    group: Any, location: str, steps: Steps, step: int, parts: list[Part], wanted: Wanted, where: str
) -> dict[str, Array]:
    """The wanted values at one location, part by part."""
    kind = f"{location.capitalize()}Data"
    found, begin = [], 0
    for part in parts:
        end = begin + (part.points if location == "point" else part.cells)
        rows = wanted.rows
        if rows is not None:
            rows = rows[np.searchsorted(rows, begin) : np.searchsorted(rows, end)] - begin
        found.append(data_of(group, kind, steps, step, part, where, wanted.names, rows))
        begin = end
    return {
        name: np.concatenate([values[name] for values in found])
        for name in wanted.names
        if all(name in values for values in found)
    }


def data_of(
    group: Any,
    kind: str,
    steps: Steps,
    step: int,
    part: Part,
    where: str,
    names: Collection[str] | None = None,
    rows: Array | None = None,
) -> dict[str, Array]:
    """The ``PointData`` or ``CellData`` arrays of one part at one step; whole ones are read when wanted.

    names, rows : where not all are wanted; rows increase, from 0 within the part
    """
    node = safe.member(group, kind, where)
    if node is None:
        return {}
    if not safe.is_group(node):
        raise FormatError(f"{kind} is no group", where=where, mend=safe.DAMAGED)
    count = part.points if kind == "PointData" else part.cells
    start, total = (
        (part.first_point, part.all_points) if kind == "PointData" else (part.first_cell, part.all_cells)
    )
    arrays = {}
    for name in safe.names(node, where):
        if names is not None and name not in names:
            continue
        data = safe.member(node, name, where)
        if not safe.is_dataset(data):
            raise FormatError(f"the array '{name}' is no dataset", where=where, mend=safe.DAMAGED)
        if not safe.is_numeric(data, where):
            continue
        if part.shape is not None:
            values = _image_array(data, part, kind, steps, step, where)
            arrays[name] = values if rows is None else np.asarray(values)[rows]
            continue
        shape = safe.shape(data, where)
        if len(shape) not in (1, 2):
            raise FormatError(f"the array '{name}' has {len(shape)} axes", where=where, mend=safe.DAMAGED)
        first = start
        if steps.group is None:
            if shape[0] != total:
                raise FormatError(
                    f"the array '{name}' has {shape[0]} values for {total} {kind[:-4].lower()}s",
                    where=where,
                    mend="Export the array again for the whole mesh.",
                )
        else:
            own = steps.data_start(kind, name, step, total)
            first = start if own is None else own + part.before(kind)
        arrays[name] = (
            later(data, where, (first, first + count))
            if rows is None
            else read_rows(data, where, first + rows)
        )
    return arrays


def _image_array(data: Any, part: Part, kind: str, steps: Steps, step: int, where: str) -> Array:
    """An array of an image: axes (time,) z, y, x(, component), flat axes present or not."""
    count = part.points if kind == "PointData" else part.cells
    found = safe.shape(data, where)
    rows = None
    if steps.group is not None:
        first = steps.data_start(kind, data.name.rsplit("/", 1)[-1], step, 1)
        first = step if first is None else first
        rows = (first, first + 1)
        found = found[1:]
    assert part.shape is not None
    sizes = part.shape if kind == "PointData" else tuple(max(1, n - 1) for n in part.shape)
    flat = [n for n in sizes[::-1] if n > 1]
    for components in (False, True):
        axes = found[:-1] if components else found
        if [n for n in axes if n > 1] == flat and (not components or found[-1] <= 9):
            return later(data, where, rows, shape=(count, found[-1]) if components else (count,))
    raise FormatError(
        f"the array '{data.name}' has the shape {found} for {sizes} values", where=where, mend=safe.DAMAGED
    )
