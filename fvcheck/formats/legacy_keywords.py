"""The keywords of a legacy VTK file, one after the other.

They are those of the published description (https://docs.vtk.org, "VTK File
Formats", "Simple Legacy Formats"); a word that is none of them is an error, for
it is where miscounted data end.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.legacy_scan import END, Cursor, decode_name
from fvcheck.formats.vtk_cells import Group, listed_cells, running_offsets
from fvcheck.mesh.piece import Array

DATASETS = ("UNSTRUCTURED_GRID", "POLYDATA", "STRUCTURED_GRID", "RECTILINEAR_GRID", "STRUCTURED_POINTS")
GROUPS = {"VERTICES": "verts", "LINES": "lines", "POLYGONS": "polys", "TRIANGLE_STRIPS": "strips"}
AXES = ("X_COORDINATES", "Y_COORDINATES", "Z_COORDINATES")
TIMES = ("TimeValue", "TIME")
# Attributes whose line is "keyword name type", and their components.
FIXED = {"VECTORS": 3, "NORMALS": 3, "TENSORS": 9, "TENSORS6": 6, "GLOBAL_IDS": 1, "PEDIGREE_IDS": 1}
FIXED |= {"EDGE_FLAGS": 1}
MOST_POINTS = 1 << 31
MOST_COMPONENTS = 1000


@dataclass(eq=False)
class LegacyScan:
    """What the keywords of one file have told so far.

    ``points`` as stored, ``cells`` by group ("cells", "verts", …), ``numbers`` of
    the lines such as DIMENSIONS, ``counts`` and ``data`` by section.
    """

    cursor: Cursor
    dataset: str = ""
    time: float | None = None
    points: Array | None = None
    cells: dict[str, Group] = field(default_factory=dict)
    types: Array | None = None
    numbers: dict[str, list[float]] = field(default_factory=dict)
    axes: dict[str, Array] = field(default_factory=dict)
    counts: dict[str, int] = field(default_factory=dict)
    data: dict[str, dict[str, Array]] = field(default_factory=lambda: {"POINT_DATA": {}, "CELL_DATA": {}})
    active: str = ""

    @property
    def path(self) -> Path:
        return self.cursor.path

    def run(self, *, head_only: bool = False) -> None:
        """Go through the file, or its head: up to the first keyword behind the global fields."""
        while words := self.cursor.words():
            key = words[0].upper()
            if head_only and self.dataset and key not in ("FIELD", "METADATA"):
                return
            handler = HANDLERS.get(key)
            if handler is None:
                wrong = f"'{printable(words[0])}' stands where a keyword belongs"
                if words[0][0] in "+-.0123456789":
                    wrong += ", behind the last value declared"
                raise FormatError(wrong, where=self.path, mend=END)
            if key not in ("DATASET", "FIELD", "METADATA") and not self.dataset:
                raise FormatError(f"{key} stands before DATASET", where=self.path, mend=END)
            handler(self, key, words[1:])
        if not self.dataset:
            raise FormatError("there is no data set", where=self.path, mend=END)

    def whole(self, words: list[str], place: int, what: str) -> int:
        """A count among the words of a line."""
        text = words[place] if place < len(words) else ""
        if not re.fullmatch(r"[0-9]{1,18}", text) or int(text) >= MOST_POINTS:
            raise FormatError(f"{what} '{printable(text)}' is no possible number", where=self.path, mend=END)
        return int(text)

    def word(self, words: list[str], place: int, what: str) -> str:
        if place >= len(words):
            raise FormatError(f"the line of {what} is too short", where=self.path, mend=END)
        return words[place]

    def array(self, tuples: int, components: int, kind: str, what: str) -> Array:
        if not 1 <= components <= MOST_COMPONENTS:
            raise FormatError(f"{what} declares {components} components", where=self.path, mend=END)
        flat = self.cursor.values(tuples * components, kind, what)
        return flat if components == 1 else flat.reshape(tuples, components)

    def once(self, key: str, seen: object) -> None:
        if seen:
            raise FormatError(f"{key} stands there twice", where=self.path, mend=END)

    def store(self, name: str, values: Array) -> None:
        if not self.active:
            raise FormatError(f"array '{name}' belongs to no data set", where=self.path, mend=END)
        if name in self.data[self.active]:
            raise FormatError(f"there are two arrays '{name}' in {self.active}", where=self.path, mend=END)
        self.data[self.active][name] = values


def printable(word: str) -> str:
    return "".join(c if c.isprintable() and c != "\ufffd" else "?" for c in word[:40])


def _dataset(scan: LegacyScan, key: str, words: list[str]) -> None:
    scan.once(key, scan.dataset)
    scan.dataset = scan.word(words, 0, key).upper()
    if scan.dataset not in DATASETS:
        raise FormatError(
            f"a data set of type '{printable(scan.dataset)}' cannot be read",
            where=scan.path,
            mend=f"Readable types: {', '.join(DATASETS)}.",
        )


def _points(scan: LegacyScan, key: str, words: list[str]) -> None:
    scan.once(key, scan.points is not None)
    scan.points = scan.array(scan.whole(words, 0, key), 3, scan.word(words, 1, key), key)


def _cells(scan: LegacyScan, key: str, words: list[str]) -> None:
    name = GROUPS.get(key, "cells")
    scan.once(key, name in scan.cells)
    count, size = scan.whole(words, 0, key), scan.whole(words, 1, key)
    where = f"{scan.path}, {key}"
    if scan.cursor.peek() != "OFFSETS":
        scan.cells[name] = listed_cells(scan.cursor.values(size, "int", key), count, where)
        return
    offsets = _offsets_part(scan, "OFFSETS", count)
    nodes = _offsets_part(scan, "CONNECTIVITY", size)
    if count == 0 or offsets[0] != 0:
        raise FormatError("the offsets do not start at 0", where=where, mend=END)
    scan.cells[name] = (
        running_offsets(offsets[1:], size, "offsets", where),
        nodes.astype(np.int64, copy=False),
    )


def _offsets_part(scan: LegacyScan, part: str, count: int) -> Array:
    words = scan.cursor.words()
    if not words or words[0].upper() != part:
        raise FormatError(f"{part} is missing", where=scan.path, mend=END)
    values = scan.cursor.values(count, scan.word(words, 1, part), part)
    if values.dtype.kind not in "iu":
        raise FormatError(f"{part} holds no whole numbers", where=scan.path, mend=END)
    return values


def _cell_types(scan: LegacyScan, key: str, words: list[str]) -> None:
    scan.once(key, scan.types is not None)
    scan.types = scan.cursor.values(scan.whole(words, 0, key), "int", key)


def _numbers(scan: LegacyScan, key: str, words: list[str]) -> None:
    scan.once(key, key in scan.numbers)
    try:
        scan.numbers[key] = [float(word) for word in words]
    except ValueError:
        raise FormatError(
            f"the line of {key} holds a word that is no number", where=scan.path, mend=END
        ) from None
    if len(words) != (6 if key == "EXTENT" else 3) or not all(map(math.isfinite, scan.numbers[key])):
        raise FormatError(f"the line of {key} is damaged", where=scan.path, mend=END)


def _axis(scan: LegacyScan, key: str, words: list[str]) -> None:
    scan.once(key, key in scan.axes)
    scan.axes[key] = scan.cursor.values(scan.whole(words, 0, key), scan.word(words, 1, key), key)


def _section(scan: LegacyScan, key: str, words: list[str]) -> None:
    scan.active = key
    count = scan.whole(words, 0, key)
    if scan.counts.setdefault(key, count) != count:
        raise FormatError(f"{key} is declared with two lengths", where=scan.path, mend=END)


def _count(scan: LegacyScan, key: str) -> int:
    if not scan.active:
        raise FormatError(f"{key} stands before POINT_DATA or CELL_DATA", where=scan.path, mend=END)
    return scan.counts[scan.active]


def _scalars(scan: LegacyScan, key: str, words: list[str]) -> None:
    name, kind = decode_name(scan.word(words, 0, key)), scan.word(words, 1, key)
    components = scan.whole(words, 2, key) if len(words) > 2 else 1
    if scan.cursor.peek() == "LOOKUP_TABLE":
        scan.cursor.words()
    scan.store(name, scan.array(_count(scan, key), components, kind, f"array '{name}'"))


def _fixed(scan: LegacyScan, key: str, words: list[str]) -> None:
    name, kind = decode_name(scan.word(words, 0, key)), scan.word(words, 1, key)
    scan.store(name, scan.array(_count(scan, key), FIXED[key], kind, f"array '{name}'"))


def _texture(scan: LegacyScan, key: str, words: list[str]) -> None:
    name, kind = decode_name(scan.word(words, 0, key)), scan.word(words, 2, key)
    scan.store(name, scan.array(_count(scan, key), scan.whole(words, 1, key), kind, f"array '{name}'"))


def _colors(scan: LegacyScan, key: str, words: list[str]) -> None:
    """Colours are no field: read past them."""
    table = key == "LOOKUP_TABLE"
    count = scan.whole(words, 1, key)
    tuples, components = (count, 4) if table else (_count(scan, key), count)
    scan.array(tuples, components, "float" if scan.cursor.text else "unsigned_char", key)


def _field(scan: LegacyScan, key: str, words: list[str]) -> None:
    for _array in range(scan.whole(words, 1, key)):
        line = scan.cursor.words()
        while line and line[0].upper() == "METADATA":
            scan.cursor.skip_block()
            line = scan.cursor.words()
        if len(line) == 1 and line[0] == "NULL_ARRAY":
            continue
        name = decode_name(scan.word(line, 0, key))
        components, tuples = scan.whole(line, 1, name), scan.whole(line, 2, name)
        kind = scan.word(line, 3, key)
        if kind.lower() == "string":
            scan.cursor.skip_strings(components * tuples, f"array '{name}'")
            continue
        if scan.active and tuples != scan.counts[scan.active]:
            wrong = f"array '{name}' declares {tuples} values, {scan.active} {scan.counts[scan.active]}"
            raise FormatError(wrong, where=scan.path, mend=END)
        values = scan.array(tuples, components, kind, f"array '{name}'")
        if scan.active:
            scan.store(name, values)
        elif name in TIMES and values.size == 1 and math.isfinite(values.flat[0]):
            scan.time = float(values.flat[0])


def _metadata(scan: LegacyScan, key: str, words: list[str]) -> None:
    scan.cursor.skip_block()


HANDLERS: dict[str, Callable[[LegacyScan, str, list[str]], None]] = {
    "DATASET": _dataset,
    "POINTS": _points,
    **dict.fromkeys(("CELLS", *GROUPS), _cells),
    "CELL_TYPES": _cell_types,
    **dict.fromkeys(("DIMENSIONS", "EXTENT", "ORIGIN", "SPACING", "ASPECT_RATIO"), _numbers),
    **dict.fromkeys(AXES, _axis),
    **dict.fromkeys(("POINT_DATA", "CELL_DATA"), _section),
    "SCALARS": _scalars,
    **dict.fromkeys(FIXED, _fixed),
    "TEXTURE_COORDINATES": _texture,
    **dict.fromkeys(("COLOR_SCALARS", "LOOKUP_TABLE"), _colors),
    "FIELD": _field,
    "METADATA": _metadata,
}
