"""Reader of the VTK XML formats: VTU, VTP, VTS, VTR, VTI, their parallel kinds, VTM.

Lists of files go down one way only - blocks, parallel files, files of data - so
that none can refer to itself.
"""

from __future__ import annotations

import math
import re
from collections import Counter
from collections.abc import Iterator
from dataclasses import replace
from functools import partial
from pathlib import Path

from fvcheck.errors import FormatError
from fvcheck.formats.check import DAMAGED
from fvcheck.formats.vtk_cells import GHOST_NAMES
from fvcheck.formats.xml_arrays import ArrayReader, attribute_int
from fvcheck.formats.xml_datasets import READERS, pieces_of
from fvcheck.formats.xml_scan import Document, Element, scan
from fvcheck.mesh.piece import Array, Export, Part, Piece

BLOCKS = (
    "vtkMultiBlockDataSet",
    "vtkMultiPieceDataSet",
    "vtkPartitionedDataSet",
    "vtkPartitionedDataSetCollection",
)


def sniff(head: bytes, path: Path) -> bool:
    """A ``VTKFile`` of any type but the list of a PVD."""
    kind = root_type(head)
    if kind is None:
        # A long document type may hide the root; the scan then says what is wrong with it.
        return b"<!DOCTYPE" in head and path.suffix.lower().startswith((".vt", ".pvt"))
    return kind != "Collection"


def root_type(head: bytes) -> str | None:
    """The ``type`` of the root element, empty if it states none; None if this is no VTK XML."""
    tag = re.search(rb"<VTKFile\b([^>]*)", head)
    if tag is None or not head.lstrip(b"\xef\xbb\xbf \t\r\n").startswith(b"<"):
        return None
    kind = re.search(rb"\btype\s*=\s*[\"']([^\"']*)", tag.group(1))
    return kind.group(1).decode("latin-1") if kind else ""


def open_export(path: Path) -> Export:
    """Open one VTK XML file; its time is the field array ``TimeValue``, if there is one.

    Raises `FormatError` for what is damaged, hostile or not supported; the arrays
    themselves are read by ``load``.
    """
    document = scan(path, stop_at="Piece")
    kind = document.type
    if kind not in (*BLOCKS, *READERS) and _pieces_type(kind) is None:
        raise FormatError(
            f"a VTK file of type '{kind}' cannot be read",
            where=path,
            mend=f"Readable types: {', '.join([*READERS, BLOCKS[0]])}.",
        )
    time = _time(document)
    listed = kind in BLOCKS or _pieces_type(kind) is not None
    return Export(
        path,
        f"VTK XML {kind}",
        lambda _step: load(path),
        () if time is None else (time,),
        parts=(lambda _step: parts(path)) if listed else None,
    )


def load(path: Path) -> list[Piece]:
    """All pieces of one VTK XML file with at least one cell, checked."""
    pieces = [piece for part in parts(path) for piece in part()]
    if not pieces:
        raise FormatError("the file holds no cells", where=path, mend="Export the mesh with its cells.")
    return pieces


def parts(path: Path, *, blocks: bool = True) -> Iterator[Part]:
    """What reads the pieces of each file that is listed, or of a file of data itself."""
    document = scan(path)
    if document.type in BLOCKS:
        if not blocks:
            raise FormatError("blocks within blocks of another file cannot be read", where=path, mend=DAMAGED)
        yield from _blocks(document)
        return
    kind = _pieces_type(document.type)
    if kind is not None:
        yield from _parallel(document, kind)
    else:
        yield partial(pieces_of, document)


def _time(document: Document) -> float | None:
    """The field array ``TimeValue`` of a file scanned up to its first piece, or of that piece's file."""
    fields = document.primary.first("FieldData")
    stored = fields.all("DataArray") if fields else []
    for element in stored:
        if element.attributes.get("Name") != "TimeValue":
            continue
        if any(other.attributes.get("format") == "appended" for other in stored):
            document = scan(document.path)  # the whole file, to know where its arrays start
            element = next(e for e in document.primary.walk() if e.attributes.get("Name") == "TimeValue")
        value = ArrayReader(document).values(element, None).ravel()
        return float(value[0]) if len(value) == 1 and math.isfinite(value[0]) else None
    piece = document.primary.first("Piece")
    if _pieces_type(document.type) is None or piece is None:
        return None
    source = scan(beside(document.path, piece.attributes.get("Source", ""), "piece"), stop_at="Piece")
    return _time(source) if source.type in READERS else None


def beside(path: Path, name: str, role: str) -> Path:
    """The file ``name`` that ``path`` refers to. Raises `FormatError` if it is not there."""
    other = path.parent / name
    if not name or "\0" in name or not other.is_file():
        raise FormatError(f"the {role} '{name}' is missing", where=path, mend="Copy it beside this file.")
    if other.stat().st_size == 0:
        raise FormatError(f"the {role} '{name}' is empty", where=path, mend="Export it again.")
    return other


def _pieces_type(kind: str) -> str | None:
    """The type of the pieces that a parallel file of type ``kind`` lists, None for other files."""
    rest = kind.removeprefix("P")
    return rest if rest != kind and rest in READERS else None


def _parallel(document: Document, kind: str) -> Iterator[Part]:
    sources = document.primary.all("Piece")
    if not sources:
        raise FormatError("no pieces are listed", where=document.path, mend=DAMAGED)
    for element in sources:
        source = beside(document.path, element.attributes.get("Source", ""), "piece")
        yield partial(_of_parallel, document, kind, source)


def _of_parallel(document: Document, kind: str, source: Path) -> list[Piece]:
    part = scan(source)
    if part.type != kind:
        raise FormatError(
            f"a piece of type '{part.type}' stands in a list of '{kind}'", where=source, mend=DAMAGED
        )
    return [_listed(document, piece, source) for piece in pieces_of(part)]


def _listed(document: Document, piece: Piece, source: Path) -> Piece:
    """The piece with the arrays that the parallel file lists; all of them have to be there."""
    kept: dict[str, dict[str, Array]] = {}
    for section, stored in (("PPointData", piece.point_data), ("PCellData", piece.cell_data)):
        kept[section] = {}
        head = document.primary.first(section)
        for element in head.all("PDataArray") if head else []:
            name = element.attributes.get("Name", "")
            if name in GHOST_NAMES or element.attributes.get("type") == "String":
                continue
            if name not in stored:
                where = f"{source}, listed in {document.path.name}"
                raise FormatError(f"array '{name}' is missing in this piece", where=where, mend=DAMAGED)
            values = stored[name]
            width = attribute_int(element, "NumberOfComponents", str(document.path), 1)
            if width != values.size // len(values):
                raise FormatError(
                    f"array '{name}' has other components in this piece", where=source, mend=DAMAGED
                )
            kept[section][name] = values
    return replace(piece, point_data=kept["PPointData"], cell_data=kept["PCellData"])


def _blocks(document: Document) -> Iterator[Part]:
    leaves = list(_leaves(document.primary, ()))
    last = Counter(names[-1] for names, _file in leaves if names)
    for names, file in leaves:
        # The last name says what a block is; the whole path only where that is ambiguous.
        name = "" if not names else names[-1] if last[names[-1]] == 1 else "/".join(names)
        source = beside(document.path, file, "block file")
        for part in parts(source, blocks=False):
            yield partial(_renamed, part, name)


def _renamed(part: Part, name: str) -> Iterator[Piece]:
    return (replace(piece, name=name) for piece in part())


def _leaves(element: Element, names: tuple[str, ...]) -> Iterator[tuple[tuple[str, ...], str]]:
    """(names on the way, file) of the blocks with a file, in order."""
    for child in element.children:
        if child.tag not in ("Block", "DataSet", "Piece", "Partitions"):
            continue
        name = child.attributes.get("name", "").strip()
        path = (*names, name) if name else names
        if "file" in child.attributes:
            yield path, child.attributes["file"]
        yield from _leaves(child, path)
