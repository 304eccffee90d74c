"""Reader of PVD files: a list of VTK XML files with their times."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace
from functools import partial
from pathlib import Path

from fvcheck.errors import FormatError
from fvcheck.formats import vtk_xml
from fvcheck.formats.check import DAMAGED
from fvcheck.formats.xml_scan import Element, scan
from fvcheck.mesh.piece import Export, Part, Piece


def sniff(head: bytes, path: Path) -> bool:
    """A ``VTKFile`` of the type ``Collection``."""
    return vtk_xml.root_type(head) == "Collection"


def open_export(path: Path) -> Export:
    """Open a PVD file: one step per time, made of all files listed for it.

    Raises `FormatError` for an empty list, a time that is no number, and listed
    files that are missing or are lists themselves.
    """
    entries = [entry for group in scan(path).root.all("Collection") for entry in group.all("DataSet")]
    if not entries:
        raise FormatError("the list of files is empty", where=path, mend="Export at least one step.")
    steps: dict[float, list[tuple[Path, str]]] = {}
    for entry in entries:
        file = vtk_xml.beside(path, entry.attributes.get("file", ""), "listed file")
        steps.setdefault(_time(entry, path), []).append((file, _name(entry)))
    for files in steps.values():
        if len({file for file, _name in files}) < len(files):
            raise FormatError("a file is listed twice for one time", where=path, mend=DAMAGED)
    times = tuple(sorted(steps))
    stated = any("timestep" in entry.attributes for entry in entries)
    return Export(
        path,
        "PVD",
        lambda step: _load(path, steps[times[step]]),
        times if stated else (),
        parts=lambda step: _parts(path, steps[times[step]]),
    )


def _time(entry: Element, path: Path) -> float:
    text = entry.attributes.get("timestep", "0")
    try:
        time = float(text)
    except ValueError:
        time = math.nan
    if not math.isfinite(time):
        raise FormatError(f"the time '{text}' is no number", where=path, mend=DAMAGED)
    return time


def _name(entry: Element) -> str:
    return entry.attributes.get("name", "").strip() or entry.attributes.get("group", "").strip()


def _load(path: Path, files: Sequence[tuple[Path, str]]) -> list[Piece]:
    return [piece for part in _parts(path, files) for piece in part()]


def _parts(path: Path, files: Sequence[tuple[Path, str]]) -> Iterator[Part]:
    for file, name in files:
        with file.open("rb") as stream:
            kind = vtk_xml.root_type(stream.read(4096))
        if kind is None or kind == "Collection":
            raise FormatError(
                f"the listed file '{file.name}' is no VTK XML file of data", where=path, mend=DAMAGED
            )
        for part in vtk_xml.parts(file):
            yield partial(_named, part, name)


def _named(part: Part, name: str) -> Iterator[Piece]:
    for piece in part():
        yield replace(piece, name="/".join(word for word in (name, piece.name) if word))
