"""The readable formats, and which of them a file is.

The content decides, never the ending of the name. A reader module is loaded
when a file is asked about, not before, and exposes

    sniff(head: bytes, path: Path) -> bool   head: the first 4096 bytes of the file
    open_export(path: Path) -> Export
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from functools import partial
from importlib import import_module
from pathlib import Path

from fvcheck.errors import FormatError
from fvcheck.mesh.piece import Export, Part, Piece

HEAD_BYTES = 4096


@dataclass(frozen=True)
class Format:
    """A family of files: what it is called, usual endings, how to know it and open it."""

    name: str
    suffixes: tuple[str, ...]
    sniff: Callable[[bytes, Path], bool]
    open: Callable[[Path], Export]


def _entry(module: str, name: str, *suffixes: str) -> Format:
    """A `Format` whose reader, ``fvcheck.formats.<module>``, is imported at its first use."""
    where = f"fvcheck.formats.{module}"
    return Format(
        name,
        suffixes,
        lambda head, path: import_module(where).sniff(head, path),
        lambda path: import_module(where).open_export(path),
    )


# The HDF5 families stand together; each looks at the root groups of the file.
FORMATS: tuple[Format, ...] = (
    _entry("pvd", "PVD", ".pvd"),
    _entry("vtk_xml", "VTK XML", ".vtu", ".vtp", ".vts", ".vtr", ".vti", ".vtm", ".pvtu"),
    _entry("vtk_legacy", "legacy VTK", ".vtk"),
    _entry("vtkhdf", "VTKHDF", ".vtkhdf", ".hdf"),
    _entry("cgns", "CGNS", ".cgns"),
    _entry("exodus", "Exodus II", ".exo", ".e", ".ex2", ".g"),
    _entry("med", "MED", ".med"),
    _entry("xdmf", "XDMF", ".xdmf", ".xmf"),
    _entry("msh", "Gmsh MSH", ".msh"),
)


def readable() -> str:
    """The readable formats in one phrase, for messages."""
    return ", ".join(f"{form.name} ({' '.join(form.suffixes)})" for form in FORMATS)


def head_of(path: Path) -> bytes:
    """The first bytes of a file that exists, is a file and is not empty.

    Raises `FormatError` otherwise.
    """
    if not path.exists():
        raise FormatError("there is no such file", where=path, mend="Check the path.")
    if path.is_dir():
        raise FormatError("this is a directory, not a file", where=path, mend="Name one of the files in it.")
    if not path.is_file():
        raise FormatError("this is no regular file", where=path, mend="Save the export to a file first.")
    try:
        with path.open("rb") as stream:
            head = stream.read(HEAD_BYTES)
    except OSError as error:
        raise FormatError(f"the file cannot be opened: {error.strerror}", where=path) from None
    if not head:
        raise FormatError("the file is empty", where=path, mend="Export it again.")
    return head


def _within_memory(export: Export) -> Export:
    """The export, its reading with a message for what the memory cannot hold."""

    def short() -> FormatError:
        return FormatError(
            "there is not enough memory for what the file declares",
            where=export.path,
            mend="Check its size; export less of the domain.",
        )

    def load(step: int) -> Sequence[Piece]:
        try:
            return export.load(step)
        except MemoryError:
            raise short() from None

    def whole(part: Part) -> list[Piece]:
        try:
            return list(part())
        except MemoryError:
            raise short() from None

    def parts(step: int) -> Iterator[Part]:
        assert export.parts is not None
        try:
            for part in export.parts(step):
                yield partial(whole, part)
        except MemoryError:
            raise short() from None

    return replace(export, load=load, parts=None if export.parts is None else parts)


def open_export(path: str | Path) -> Export:
    """Open a file with the reader that its content asks for.

    Raises `FormatError` when it cannot be opened or no reader knows it.
    """
    path = Path(path)
    head = head_of(path)
    for form in FORMATS:
        if form.sniff(head, path):
            return _within_memory(form.open(path))
    claimed = [form.name for form in FORMATS if path.suffix.lower() in form.suffixes]
    what = f"the content is not that of {claimed[0]}" if claimed else "no reader knows this kind of file"
    raise FormatError(what, where=path, mend=f"Export the case as one of: {readable()}.")
