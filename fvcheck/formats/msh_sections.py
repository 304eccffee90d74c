"""What an MSH file is made of: its version, its sections and the headers of its data."""

from __future__ import annotations

import math
import mmap
import re
from dataclasses import dataclass
from pathlib import Path

from fvcheck.errors import FormatError
from fvcheck.formats.check import DAMAGED

_MARK = re.compile(rb"\$([A-Za-z0-9_]{1,80})[ \t]*\r?\n")
_VERSIONS = ("2", "2.0", "2.1", "2.2", "4", "4.0", "4.1")
_DATA = ("NodeData", "ElementData")
_HEADER_BYTES = 8192


@dataclass(frozen=True)
class Section:
    """The bytes ``start`` … ``stop`` between $Name and $EndName."""

    name: str
    start: int
    stop: int


@dataclass(frozen=True)
class Data:
    """One $NodeData or $ElementData: its header, and where its rows (id, values) stand."""

    of_nodes: bool
    name: str
    step: int
    time: float
    components: int
    count: int
    start: int
    stop: int


@dataclass(frozen=True)
class Contents:
    """``version`` is "2", "4.0" or "4.1"; ``order`` is "" for text, else the byte order of numpy."""

    version: str
    order: str
    size_bytes: int
    sections: tuple[Section, ...]
    data: tuple[Data, ...]
    per_corner: tuple[str, ...]
    """Names of $ElementNodeData, which are not read."""

    def find(self, name: str) -> Section | None:
        """The one section of this name, or None."""
        return next((section for section in self.sections if section.name == name), None)


def contents(path: Path) -> Contents:
    """Scan a file for its sections. Raises `FormatError` for anything that is no MSH file, or cut short."""
    try:
        with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as raw:
            return _contents(raw, path)
    except (OSError, ValueError) as error:  # mmap refuses an empty file with ValueError
        raise FormatError(
            f"the file cannot be opened: {error}", where=path, mend="Export it again."
        ) from None


def _contents(raw: mmap.mmap, path: Path) -> Contents:
    sections = _sections(raw, path)
    for name in ("MeshFormat", "Entities", "PartitionedEntities", "PhysicalNames", "Nodes", "Elements"):
        if sum(section.name == name for section in sections) > 1:
            raise FormatError(f"there is more than one ${name}", where=path, mend=DAMAGED)
    first = next((section for section in sections if section.name == "MeshFormat"), None)
    if first is None:
        raise FormatError(
            "there is no $MeshFormat", where=path, mend="Save the mesh as MSH version 2.2 or 4.1."
        )
    version, order, size = _format(raw[first.start : first.stop], path)
    data = tuple(_data(raw, section, path) for section in sections if section.name in _DATA)
    corner = [_data(raw, section, path).name for section in sections if section.name == "ElementNodeData"]
    return Contents(version, order, size, sections, data, tuple(corner))


def _sections(raw: mmap.mmap, path: Path) -> tuple[Section, ...]:
    sections: list[Section] = []
    at, size = 0, len(raw)
    while True:
        while at < size and raw[at] <= 32:
            at += 1
        if at == size:
            return tuple(sections)
        mark = _MARK.match(raw, at)
        if mark is None:
            raise FormatError(f"no section begins at byte {at}", where=path, mend=DAMAGED)
        name = mark[1].decode()
        close = b"$End" + mark[1]
        stop = raw.find(close, mark.end())
        while stop >= 0 and stop + len(close) < size and raw[stop + len(close)] > 32:
            stop = raw.find(close, stop + 1)
        if stop < 0:
            raise FormatError(f"${name} has no end; the file is cut short", where=path, mend=DAMAGED)
        sections.append(Section(name, mark.end(), stop))
        at = stop + len(close)


def _format(text: bytes, path: Path) -> tuple[str, str, int]:
    line, _, rest = text.partition(b"\n")
    words = line.decode("latin-1").split()
    if len(words) != 3 or words[0] not in _VERSIONS:
        raise FormatError(
            f"MSH version {words[0] if words else '?'} cannot be read",
            where=path,
            mend="Save the mesh as MSH version 2.2 or 4.1.",
        )
    version = "2" if words[0][0] == "2" else words[0]
    version = "4.0" if version == "4" else version
    if words[1] == "0" and words[2] in ("4", "8"):
        return version, "", int(words[2])
    if words[1] == "1" and words[2] in ("4", "8"):
        one = rest[:4]
        if one in (b"\1\0\0\0", b"\0\0\0\1"):
            return version, "<" if one[0] else ">", int(words[2])
    raise FormatError("$MeshFormat cannot be read", where=path, mend=DAMAGED)


def _data(raw: mmap.mmap, section: Section, path: Path) -> Data:
    """The header: string tags, real tags, whole-number tags, each after their count, one per line."""
    at = section.start
    where = f"{path}, ${section.name}"
    limit = min(section.stop, section.start + _HEADER_BYTES)

    def line() -> str:
        nonlocal at
        end = raw.find(b"\n", at, limit)
        if end < 0:
            raise FormatError("the header of the data is cut short", where=where, mend=DAMAGED)
        text = raw[at:end].decode("utf-8", "replace").strip()
        at = end + 1
        return text

    try:
        strings = [line().strip('"').strip() for _ in range(int(line()))]
        reals = [float(line()) for _ in range(int(line()))]
        numbers = [int(line()) for _ in range(int(line()))]
    except ValueError:
        raise FormatError("the header of the data cannot be read", where=where, mend=DAMAGED) from None
    name = strings[0] if strings else ""
    time = reals[0] if reals else 0.0
    if len(numbers) < 3 or not 1 <= numbers[1] <= 100 or numbers[2] < 0 or not math.isfinite(time):
        raise FormatError("the header of the data cannot be read", where=where, mend=DAMAGED)
    of_nodes = section.name == "NodeData"
    name = name or ("node data" if of_nodes else "element data")
    return Data(of_nodes, name, numbers[0], time, numbers[1], numbers[2], at, section.stop)
