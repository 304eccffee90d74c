"""The XML part of a VTK XML file, read with distrust.

Scanned with expat up to the appended data. Document types and entities are
refused, so are deep nesting and masses of elements; a file that was cut short
does not pass. The long texts of data arrays, nearly all of a file, are passed by:
only their places are kept.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import BinaryIO
from xml.parsers import expat

from fvcheck.errors import FormatError
from fvcheck.formats.check import DAMAGED

MOST_DEPTH = 30
MOST_ELEMENTS = 500_000
CHUNK = 1 << 20
LONG = 4096
"""Texts of data arrays longer than this are passed by."""
_TAG = re.compile(rb"""<DataArray(?:[^<>"']|"[^<"]*"|'[^<']*')*>""")
TAIL = re.compile(rb"</AppendedData\s*>\s*</VTKFile\s*>\s*\Z")


@dataclass(eq=False)
class Element:
    """One XML element; ``text`` is kept for data arrays only.

    place : of a text that was passed by, where it starts and ends in the file
    """

    tag: str
    attributes: dict[str, str]
    children: list[Element] = field(default_factory=list)
    text: list[str] = field(default_factory=list)
    place: tuple[int, int] | None = None

    def all(self, tag: str) -> list[Element]:
        """The direct children with this tag."""
        return [child for child in self.children if child.tag == tag]

    def first(self, tag: str) -> Element | None:
        """The first direct child with this tag, or None."""
        return next((child for child in self.children if child.tag == tag), None)

    def walk(self) -> Iterator[Element]:
        """This element and everything below it."""
        yield self
        for child in self.children:
            yield from child.walk()


@dataclass(frozen=True)
class Appended:
    """Where the appended data stand in the file: bytes ``start`` (after the underscore) to ``end``."""

    raw: bool
    start: int
    end: int


@dataclass(frozen=True, eq=False)
class Document:
    """A scanned file: its root element ``VTKFile`` and its appended data, if any.

    state : of the file when it was scanned, see `state_of`
    """

    path: Path
    root: Element
    appended: Appended | None
    state: tuple[int, int]

    @property
    def type(self) -> str:
        """The kind of data set, such as ``UnstructuredGrid``."""
        return self.root.attributes.get("type", "")

    @property
    def primary(self) -> Element:
        """The element that holds the data set. Raises `FormatError` when it is missing."""
        found = self.root.first(self.type)
        if found is None:
            raise FormatError(
                f"there is no element <{self.type or 'of the data set'}>", where=self.path, mend=DAMAGED
            )
        return found


class _Stop(Exception):
    """Ends the scan where the rest is of no interest, or is no XML."""


class _Scanner:
    def __init__(self, path: Path, stop_at: str) -> None:
        self.path = path
        self.stop_at = stop_at
        self.stack: list[Element] = []
        self.root: Element | None = None
        self.count = 0
        self.appended_at: int | None = None
        self.appended_raw = False
        self.latest: Element | None = None
        self.skipped = 0  # bytes and lines passed by, which expat does not count
        self.skipped_lines = 0
        self.parser = expat.ParserCreate()
        self.parser.buffer_text = True
        self.parser.buffer_size = CHUNK  # long texts in few parts
        self.parser.StartElementHandler = self.start
        self.parser.EndElementHandler = self.end
        self.parser.CharacterDataHandler = self.characters
        self.parser.StartDoctypeDeclHandler = self.doctype
        self.parser.EntityDeclHandler = self.doctype

    def run(self, stream: BinaryIO) -> None:
        """Feed a file to expat, without the long texts of its data arrays."""
        at, buffer = 0, b""  # the bytes at hand, and where the first of them stands
        passing: Element | None = None
        while chunk := stream.read(CHUNK):
            buffer += chunk
            fed = 0
            while True:
                if passing is not None:
                    end = buffer.find(b"<", fed)
                    stop = len(buffer) if end < 0 else end
                    self._pass(passing, buffer[fed:stop], at + fed)
                    fed = stop
                    passing = None if end >= 0 else passing
                tag = None if passing else _TAG.search(buffer, fed)
                if tag is None:
                    break
                self.latest = None
                self.parser.Parse(buffer[fed : tag.end()], False)
                fed = tag.end()
                # None is new where the tag stands in a comment; one that is closed already has no text.
                new = self.stack[-1] if self.stack and self.stack[-1] is self.latest else None
                if new is not None and new.tag == "DataArray" and buffer.find(b"<", fed, fed + LONG) < 0:
                    passing = new
            rest = len(buffer)
            last = buffer.rfind(b"<", max(fed, rest - LONG))
            if last >= 0 and b">" not in buffer[last:]:
                rest = last  # a tag that the next bytes complete
            self.parser.Parse(buffer[fed:rest], False)
            at, buffer = at + rest, buffer[rest:]
        self.parser.Parse(buffer, True)

    def _pass(self, element: Element, text: bytes, at: int) -> None:
        start = at if element.place is None else element.place[0]
        element.place = start, at + len(text)
        self.skipped += len(text)
        self.skipped_lines += text.count(b"\n")

    def start(self, tag: str, attributes: dict[str, str]) -> None:
        self.count += 1
        if len(self.stack) >= MOST_DEPTH or self.count > MOST_ELEMENTS:
            raise FormatError(
                "the XML is nested too deep or holds too many elements", where=self.path, mend=DAMAGED
            )
        element = self.latest = Element(tag, attributes)
        if not self.stack:
            if tag != "VTKFile":
                raise FormatError(
                    f"the XML starts with <{tag}> instead of <VTKFile>", where=self.path, mend=DAMAGED
                )
            self.root = element
        else:
            self.stack[-1].children.append(element)
        if tag == "AppendedData":
            self.appended_at = self.parser.CurrentByteIndex + self.skipped
            self.appended_raw = attributes.get("encoding", "base64") == "raw"
            raise _Stop
        if tag == self.stop_at:
            raise _Stop
        self.stack.append(element)

    def end(self, _tag: str) -> None:
        self.stack.pop()

    def characters(self, text: str) -> None:
        if self.stack and self.stack[-1].tag == "DataArray":
            self.stack[-1].text.append(text)

    def doctype(self, *_details: object) -> None:
        raise FormatError(
            "the XML declares a document type or entities, which a data file never needs",
            where=self.path,
            mend="Export the file again; do not trust where this one comes from.",
        )


def scan(path: Path, stop_at: str = "") -> Document:
    """Scan the XML of a VTK file, or only what stands before the first ``<stop_at>``.

    Raises `FormatError` for XML that is not well-formed, is cut short or hostile.
    """
    scanner = _Scanner(path, stop_at)
    try:
        state = state_of(path)
        with path.open("rb") as stream:
            scanner.run(stream)
    except _Stop:
        pass
    except expat.ExpatError as error:
        line, what = error.lineno + scanner.skipped_lines, expat.ErrorString(error.code)
        raise FormatError(
            f"the XML is damaged or cut short in line {line}: {what}",
            where=path,
            mend="Export the file again.",
        ) from None
    except (OSError, ValueError, LookupError) as error:
        raise FormatError(f"the file cannot be read: {error}", where=path, mend=DAMAGED) from None
    if scanner.root is None:
        raise FormatError("the file holds no XML element", where=path, mend="Export it again.")
    appended = None
    if scanner.appended_at is not None:
        appended = _locate(path, scanner.appended_at, scanner.appended_raw)
    return Document(path, scanner.root, appended, state)


def state_of(path: Path) -> tuple[int, int]:
    """What tells that a file was written anew: its time of change and its size; zeros where it is gone."""
    try:
        found = path.stat()
    except OSError:
        return 0, 0
    return found.st_mtime_ns, found.st_size


def _locate(path: Path, tag_at: int, raw: bool) -> Appended:
    size = path.stat().st_size
    with path.open("rb") as stream:
        stream.seek(tag_at)
        opening = re.match(rb"<AppendedData[^>]*>\s*_", stream.read(4096))
        tail_at = max(tag_at, size - 4096)
        stream.seek(tail_at)
        closing = TAIL.search(stream.read())
    if opening is None:
        raise FormatError("the appended data do not start with an underscore", where=path, mend=DAMAGED)
    if closing is None:
        raise FormatError(
            "the file ends before its appended data do",
            where=path,
            mend="It was cut short; export or copy it again.",
        )
    return Appended(raw, tag_at + opening.end(), tail_at + closing.start())
