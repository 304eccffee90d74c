"""Meshes and lines with data as VTK's XML (VTU, VTP), for any viewer that reads it.

Arrays are written in binary (base64, 64-bit headers), their names without
characters that a reader may stumble over.
"""

from __future__ import annotations

import base64
from collections.abc import Mapping
from xml.sax.saxutils import quoteattr

import numpy as np

Array = np.ndarray

_POLYGON = 7

_KINDS = {"f": "Float64", "i": "Int64", "u": "UInt8", "b": "UInt8"}

_TYPES = {"Float64": "<f8", "Int64": "<i8", "UInt8": "u1"}


def polygons(
    points: Array,
    offsets: Array,
    nodes: Array,
    cell_data: Mapping[str, Array],
    point_data: Mapping[str, Array] | None = None,
) -> bytes:
    """A VTU of polygons nodes[offsets[i]:offsets[i+1]] over points (n, 2)."""
    lines = [
        *_open("UnstructuredGrid"),
        f'<Piece NumberOfPoints="{len(points)}" NumberOfCells="{len(offsets) - 1}">',
        *_points(points),
        "<Cells>",
        _array("connectivity", nodes),
        _array("offsets", offsets[1:]),
        _array("types", np.full(len(offsets) - 1, _POLYGON, np.uint8)),
        "</Cells>",
        "<PointData>",
        *(_array(name, values) for name, values in (point_data or {}).items()),
        "</PointData>",
    ]
    return _close(lines, "UnstructuredGrid", cell_data)


def segments(ends: Array, data: Mapping[str, Array]) -> bytes:
    """A VTP of straight pieces, ends (n, 2, 2)."""
    n = len(ends)
    lines = [
        *_open("PolyData"),
        f'<Piece NumberOfPoints="{2 * n}" NumberOfVerts="0" NumberOfLines="{n}" NumberOfStrips="0" '
        'NumberOfPolys="0">',
        *_points(ends.reshape(-1, 2)),
        "<Lines>",
        _array("connectivity", np.arange(2 * n)),
        _array("offsets", 2 * np.arange(1, n + 1)),
        "</Lines>",
    ]
    return _close(lines, "PolyData", data)


def _open(kind: str) -> list[str]:
    return [
        '<?xml version="1.0"?>',
        f'<VTKFile type="{kind}" version="1.0" byte_order="LittleEndian" header_type="UInt64">',
        f"<{kind}>",
    ]


def _points(points: Array) -> list[str]:
    whole = np.column_stack([points, np.zeros(len(points))])
    return ["<Points>", _array("points", whole), "</Points>"]


def _close(lines: list[str], kind: str, data: Mapping[str, Array]) -> bytes:
    arrays = [_array(name, values) for name, values in data.items()]
    end = ["</CellData>", "</Piece>", f"</{kind}>", "</VTKFile>"]
    return "\n".join([*lines, "<CellData>", *arrays, *end, ""]).encode()


def _array(name: str, values: Array) -> str:
    values = np.asarray(values)
    kind = _KINDS[values.dtype.kind] if values.dtype != np.int64 else "Int64"
    raw = np.ascontiguousarray(values, _TYPES[kind]).tobytes()
    text = base64.b64encode(np.uint64(len(raw)).astype("<u8").tobytes() + raw).decode()
    components = f' NumberOfComponents="{values.shape[1]}"' if values.ndim == 2 else ""
    safe = "".join(letter if letter.isprintable() else "?" for letter in name)
    return (
        f'<DataArray type="{kind}" Name={quoteattr(safe)}{components} format="binary">\n{text}\n</DataArray>'
    )
