"""Unstructured grids of VTKHDF files, polyhedra included."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from fvcheck.formats import hdf5_safe as safe
from fvcheck.formats.vtkhdf_steps import (
    Part,
    Steps,
    counts_of,
    expect_rows,
    first_offset,
    points_of,
    rows_of,
    same_length,
)
from fvcheck.mesh.piece import Array, Faces, Piece


def unstructured_parts(group: Any, steps: Steps, step: int) -> list[Part]:
    """Partitions of an UnstructuredGrid at a step."""
    where = f"{group.file.filename}, {group.name}"
    points = counts_of(group, "NumberOfPoints", where)
    cells = counts_of(group, "NumberOfCells", where)
    ids = counts_of(group, "NumberOfConnectivityIds", where)
    first, count = steps.parts(step, min(len(points), len(cells), len(ids)))
    if steps.group is None:
        same_length(where, len(points), NumberOfCells=cells, NumberOfConnectivityIds=ids)
        expect_rows(group, "Points", int(points.sum()), where)
        expect_rows(group, "Types", int(cells.sum()), where)
        expect_rows(group, "Connectivity", int(ids.sum()), where)
        expect_rows(group, "Offsets", int(cells.sum()) + len(cells), where)
    p0 = p = steps.start("PointOffsets", step, points, first)
    c0 = c = steps.start("CellOffsets", step, cells, first)
    k = steps.start("ConnectivityIdOffsets", step, ids, first)
    faces = _face_rows(group, steps, step, first, cells, where)
    parts = []
    for index in range(first, first + count):
        n, m, size = int(points[index]), int(cells[index]), int(ids[index])
        mesh = _unstructured(
            group, (p, n), (c, m), first_offset(c, cells, index), (k, size), faces, index, where
        )
        last = first + count
        parts.append(
            Part(
                (p, n, c, m, k, size, index if faces else 0),
                mesh,
                n,
                m,
                p,
                c,
                int(points[first:last].sum()),
                int(cells[first:last].sum()),
                p - p0,
                c - c0,
            )
        )
        p, c, k = p + n, c + m, k + size
    return parts


def _unstructured(
    group: Any,
    points: tuple[int, int],
    cells: tuple[int, int],
    offset_row: int,
    ids: tuple[int, int],
    faces: dict[int, tuple[int, ...]],
    index: int,
    where: str,
) -> Callable[[], Piece]:
    def mesh() -> Piece:
        types = rows_of(group, "Types", *cells, where)
        return Piece(
            points=points_of(group, *points, where),
            types=types,
            offsets=rows_of(group, "Offsets", offset_row, cells[1] + 1, where),
            nodes=rows_of(group, "Connectivity", *ids, where),
            faces=_faces(group, faces[index], cells[1], where)
            if index in faces and (types == 42).any()
            else None,
        )

    return mesh


def _face_rows(
    group: Any, steps: Steps, step: int, first: int, cells: Array, where: str
) -> dict[int, tuple[int, ...]]:
    """Per partition: first row and count of faces, their nodes, cells' faces; first row of cell offsets."""
    if safe.member(group, "NumberOfFaces", where) is None:
        return {}
    counts = [
        counts_of(group, name, where)
        for name in ("NumberOfFaces", "NumberOfFaceConnectivityIds", "NumberOfPolyhedronToFaceIds")
    ]
    last = min(len(values) for values in counts)
    f = first_offset(steps.start("FaceOffsetsOffsets", step, counts[0], first), counts[0], first)
    n = steps.start("FaceConnectivityOffsets", step, counts[1], first)
    h = steps.start("PolyhedronToFaceIdOffsets", step, counts[2], first)
    c = first_offset(steps.start("CellOffsets", step, cells, first), cells, first)
    rows: dict[int, tuple[int, ...]] = {}
    for index in range(first, last):
        face, node, held = (int(values[index]) for values in counts)
        rows[index] = (f, face, n, node, h, held, c)
        f, n, h, c = f + face + 1, n + node, h + held, c + int(cells[index]) + 1
    return rows


def _faces(group: Any, rows: tuple[int, ...], cells: int, where: str) -> Faces:
    f, face, n, node, h, held, c = rows
    return Faces(
        face_offsets=rows_of(group, "FaceOffsets", f, face + 1, where),
        face_nodes=rows_of(group, "FaceConnectivity", n, node, where),
        cell_offsets=rows_of(group, "PolyhedronOffsets", c, cells + 1, where),
        cell_faces=rows_of(group, "PolyhedronToFaces", h, held, where),
    )
