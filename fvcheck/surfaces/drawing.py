"""Outlines from files and from well-known text."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import SurfaceError
from fvcheck.surfaces.rings import polygon_rings, polyline

Array = np.ndarray

MAX_BYTES = 64_000_000
"""A drawing of a control surface is small; a field file given by mistake is not."""

WKT_WORD = re.compile(
    r"\s*(POINT|LINESTRING|LINEARRING|POLYGON|MULTI[A-Z]+|GEOMETRYCOLLECTION)\b", re.IGNORECASE
)
_CLOSED = {"Polygon": True, "MultiPolygon": True, "LineString": False, "MultiLineString": False}


def read_drawing(path: Path) -> tuple[tuple[Array, ...], bool]:
    """(rings, closed) of a GeoJSON, WKT or two-column CSV file, told apart by content.

    SurfaceError if it cannot be read or holds anything but outlines.
    """
    text = _read(path)
    if not text.strip():
        raise SurfaceError("The drawing is empty", where=path)
    try:
        if text.lstrip().startswith(("{", "[")):
            return _geojson_rings(text)
        return wkt_rings(text) if WKT_WORD.match(text) else _csv_rings(text)
    except SurfaceError as error:
        raise SurfaceError(
            error.what, where=", ".join(filter(None, [str(path), error.where])), mend=error.mend
        ) from None


def wkt_rings(text: str) -> tuple[tuple[Array, ...], bool]:
    """(rings, closed) of well-known text (OGC 06-103r4, section 7)."""
    import shapely

    try:
        with np.errstate(invalid="ignore"):  # a NaN in the text gets its own error below
            shape = shapely.from_wkt(text.strip())
    except (shapely.errors.GEOSException, UnicodeError, ValueError) as error:
        reason = str(error).removeprefix("ParseException: ")
        raise SurfaceError(
            f"The WKT text cannot be read: {reason}", mend="Write for example POLYGON ((0 0, 1 0, 1 1, 0 0))."
        ) from None
    # The mapping holds nested coordinate lists, the same for WKT and GeoJSON.
    return _shape_rings([_mapping(shape)])


def _mapping(shape: Any) -> dict[str, Any]:
    if shape.is_empty:
        raise SurfaceError(f"The {shape.geom_type} is empty")
    return dict(shape.__geo_interface__)


def _geojson_rings(text: str) -> tuple[tuple[Array, ...], bool]:
    """GeoJSON, RFC 7946: a geometry, a Feature or a FeatureCollection."""
    try:
        return _shape_rings(list(_geometries(json.loads(text))))
    except json.JSONDecodeError as error:
        raise SurfaceError(
            f"The JSON text is broken: {error.msg}", where=f"line {error.lineno}, column {error.colno}"
        ) from None
    except RecursionError:
        raise SurfaceError("The JSON text is nested too deeply") from None


def _geometries(node: Any) -> Iterator[dict[str, Any]]:
    if not isinstance(node, dict) or not isinstance(node.get("type"), str):
        raise SurfaceError("This is no GeoJSON: an object with a type is missing")
    match node["type"]:
        case "FeatureCollection" | "GeometryCollection" as kind:
            members = node.get("features" if kind == "FeatureCollection" else "geometries")
            if not isinstance(members, list):
                raise SurfaceError(f"The {kind} has no list of members")
            for member in members:
                yield from _geometries(member)
        case "Feature":
            yield from _geometries(node.get("geometry"))
        case _:
            yield node


def _shape_rings(shapes: list[dict[str, Any]]) -> tuple[tuple[Array, ...], bool]:
    polygons: list[list[Any]] = []
    lines: list[Any] = []
    for shape in shapes:
        kind, coordinates = shape["type"], shape.get("coordinates")
        if kind not in _CLOSED:
            raise SurfaceError(
                f"A {kind} is no control surface", mend="Draw polygons (closed) or linestrings (open)."
            )
        members = coordinates if kind.startswith("Multi") else [coordinates]
        if not isinstance(members, list | tuple) or not members:
            raise SurfaceError(f"The {kind} has no coordinates")
        if not _CLOSED[kind]:
            lines += members
        elif all(isinstance(member, list | tuple) and member for member in members):
            polygons += members
        else:
            raise SurfaceError(f"The {kind} has no coordinates")
    if polygons and lines:
        raise SurfaceError("The drawing mixes polygons and lines", mend="Keep them in a file each.")
    if not polygons and not lines:
        raise SurfaceError("The drawing is empty")
    if lines:
        return tuple(polyline(line, "The line") for line in lines), False
    return polygon_rings(polygons, "The polygon"), True


def _csv_rings(text: str) -> tuple[tuple[Array, ...], bool]:
    points: list[list[float]] = []
    header = True
    for number, line in enumerate(text.splitlines(), start=1):
        cells = _cells(line)
        if not cells:
            continue
        values = [_number(cell) for cell in cells]
        if header and all(value is None for value in values):
            header = False
            continue
        header = False
        if len(values) != 2 or None in values:
            raise SurfaceError(
                f"A point needs two numbers x, y, not {line.strip()[:60]!r}", where=f"line {number}"
            )
        points.append([value for value in values if value is not None])
    if not points:
        raise SurfaceError("There is no GeoJSON, WKT or two-column table of points in it")
    if len(points) > 2 and points[0] == points[-1]:
        return polygon_rings([[points]], "The polygon"), True
    return (polyline(points, "The line"),), False


def _cells(line: str) -> list[str]:
    line = line.split("#")[0].strip()
    if ";" in line:
        # Where semicolons separate, a comma is the decimal mark of many countries.
        cells = [cell.replace(",", ".") for cell in line.split(";")]
    else:
        cells = line.split(",") if "," in line else line.split()
    return [cell.strip().strip('"') for cell in cells]


def _number(cell: str) -> float | None:
    try:
        return float(cell)
    except ValueError:
        return None


def _read(path: Path) -> str:
    try:
        if not path.is_file():
            raise SurfaceError("There is no such file", where=path)
        if path.stat().st_size > MAX_BYTES:
            raise SurfaceError("The file is too large for a drawing", where=path)
        return path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise SurfaceError("The drawing is no text", where=path, mend="Give GeoJSON, WKT or CSV.") from None
    except (OSError, ValueError) as error:
        raise SurfaceError(f"The file cannot be read: {error}", where=path) from None
