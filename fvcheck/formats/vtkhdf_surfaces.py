"""Polygonal data and images of VTKHDF files."""

from __future__ import annotations

from collections.abc import Callable
from math import prod
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.formats.structured import block_cells
from fvcheck.formats.vtkhdf_steps import (
    Part,
    Steps,
    counts_of,
    expect_rows,
    first_offset,
    points_of,
    rows_of,
)
from fvcheck.mesh.piece import Piece

# Groups of polygonal data in the order of their cells, with the VTK type by number of nodes.
_POLY_GROUPS: tuple[tuple[str, dict[int, int], int], ...] = (
    ("Vertices", {1: 1}, 2),
    ("Lines", {2: 3}, 4),
    ("Polygons", {3: 5, 4: 9}, 7),
    ("Strips", {}, 6),
)


def poly_parts(group: Any, steps: Steps, step: int) -> list[Part]:
    """Partitions of a PolyData at a step: vertices, lines and polygons, in this order."""
    where = f"{group.file.filename}, {group.name}"
    points = counts_of(group, "NumberOfPoints", where)
    first, count = steps.parts(step, len(points))
    if steps.group is None:
        expect_rows(group, "Points", int(points.sum()), where)
    kinds = []
    for column, (name, exact, other) in enumerate(_POLY_GROUPS):
        if safe.member(group, name, where) is None:
            continue
        node = safe.group(group, name, where)
        cells, ids = (
            counts_of(node, "NumberOfCells", where),
            counts_of(node, "NumberOfConnectivityIds", where),
        )
        if min(len(cells), len(ids)) < first + count:
            raise FormatError(f"'{name}' has too few partitions", where=where, mend=safe.DAMAGED)
        if name == "Strips" and cells.any():
            raise FormatError(
                "there are triangle strips", where=where, mend="Turn them into triangles before the export."
            )
        if steps.group is None:
            expect_rows(node, "Connectivity", int(ids.sum()), where)
            expect_rows(node, "Offsets", int(cells.sum()) + len(cells), where)
        c = steps.start("CellOffsets", step, cells, first, column, 4)
        k = steps.start("ConnectivityIdOffsets", step, ids, first, column, 4)
        kinds.append((node, exact, other, cells, ids, c, k))
    p0 = p = steps.start("PointOffsets", step, points, first)
    c0 = c_all = sum(kind[5] for kind in kinds)
    last = first + count
    totals = int(points[first:last].sum()), sum(int(kind[3][first:last].sum()) for kind in kinds)
    parts = []
    for index in range(first, last):
        rows = []
        for node, exact, other, cells, ids, c, k in kinds:
            c, k = c + int(cells[first:index].sum()), k + int(ids[first:index].sum())
            rows.append(
                (node, exact, other, first_offset(c, cells, index), int(cells[index]), k, int(ids[index]))
            )
        n, m = int(points[index]), sum(row[4] for row in rows)
        key = (p, n, *(row[3:] for row in rows))
        parts.append(
            Part(key, _poly(group, (p, n), rows, where), n, m, p, c_all, *totals, p - p0, c_all - c0)
        )
        p, c_all = p + n, c_all + m
    return parts


def _poly(group: Any, points: tuple[int, int], rows: list[Any], where: str) -> Callable[[], Piece]:
    def mesh() -> Piece:
        types, sizes, nodes = [], [], []
        for node, exact, other, offset_row, count, start, size in rows:
            if count == 0:
                continue
            offsets = rows_of(node, "Offsets", offset_row, count + 1, where).astype(np.int64)
            if offsets[0] != 0 or offsets[-1] != size or (np.diff(offsets) < 0).any():
                raise FormatError(
                    "cell offsets fall or do not fit", where=f"{where}, {node.name}", mend=safe.DAMAGED
                )
            width = np.diff(offsets)
            kind = np.full(count, other, dtype=np.uint8)
            for number, cell in exact.items():
                kind[width == number] = cell
            types.append(kind)
            sizes.append(width)
            nodes.append(rows_of(node, "Connectivity", start, size, where).astype(np.int64))
        return Piece(
            points=points_of(group, *points, where),
            types=np.concatenate(types),
            offsets=np.concatenate([[0], np.cumsum(np.concatenate(sizes))]),
            nodes=np.concatenate(nodes),
        )

    return mesh


def image_parts(group: Any, steps: Steps, step: int) -> list[Part]:
    """The one partition of an ImageData."""
    where = f"{group.file.filename}, {group.name}"
    values = []
    for name, size, standard in (
        ("WholeExtent", 6, None),
        ("Origin", 3, np.zeros(3)),
        ("Spacing", 3, np.ones(3)),
        ("Direction", 9, np.eye(3)),
    ):
        value = safe.attribute(group, name, where)
        value = standard if value is None else value
        if not isinstance(value, np.ndarray) or value.size != size or value.dtype.kind not in "iuf":
            raise FormatError(f"the image has no usable '{name}'", where=where, mend=safe.DAMAGED)
        values.append(value.reshape(-1))
    extent = [int(limit) for limit in values[0]]
    lows, shape = extent[::2], tuple(high - low + 1 for low, high in zip(extent[::2], extent[1::2]))
    if min(shape) < 1 or prod(shape) > max(1 << 16, 1100 * int(group.file.id.get_filesize())):
        raise FormatError(f"the image has the extent {extent}", where=where, mend=safe.DAMAGED)

    def mesh() -> Piece:
        axes = [np.arange(n) + low for n, low in zip(shape, lows)]
        z, y, x = np.meshgrid(axes[2], axes[1], axes[0], indexing="ij")
        index = np.stack([x.reshape(-1), y.reshape(-1), z.reshape(-1)], axis=1) * values[2].astype(float)
        types, offsets, nodes = block_cells(shape)
        points = values[1].astype(float) + index @ values[3].astype(float).reshape(3, 3).T
        return Piece(points=points, types=types, offsets=offsets, nodes=nodes)

    cells = prod(max(1, n - 1) for n in shape)
    return [Part(tuple(extent), mesh, prod(shape), cells, shape=shape)]
