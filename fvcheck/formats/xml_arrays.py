"""Data arrays of a VTK XML file: text, base64, raw; plain or in compressed blocks.

The layout is that of the published file formats (https://docs.vtk.org, "VTK File
Formats"). A size is never believed: the number of values that the mesh asks for,
the size in the array's header and the bytes in the file have to agree before
memory is taken.
"""

from __future__ import annotations

import binascii
import lzma
import os
import re
import zlib
from bisect import bisect_right
from collections.abc import Callable
from itertools import accumulate

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.check import DAMAGED
from fvcheck.formats.number_text import parse
from fvcheck.formats.xml_bytes import SPACE, Coded, Held, Raw, Source, Untidy
from fvcheck.formats.xml_scan import Document, Element, state_of
from fvcheck.mesh.piece import Array
from fvcheck.mesh.stored import stored

TYPES = {
    f"{kind}{bits}": f"{code}{bits // 8}"
    for kind, code in (("Int", "i"), ("UInt", "u"))
    for bits in (8, 16, 32, 64)
}
TYPES |= {"Float32": "f4", "Float64": "f8"}
MOST_COMPONENTS = 1000
# Fields and meshes shrink to a tenth at best, constant arrays to a thousandth: what a whole
# file may expand to is this many times its size, or the fixed number of bytes if that is more.
MOST_RATIO = 100
FREE_BYTES = 1 << 28
RUN = 1 << 18
"""Bytes of a file that are decoded at a time: few enough to stay in the cache of a core."""
WORTH_THREADS = 4
"""Runs from which on they are unpacked by several threads; decompressors let others run meanwhile."""
Buffer = bytes | memoryview


def _inflate(block: Buffer, size: int) -> bytes:
    machine = zlib.decompressobj()
    data = machine.decompress(block, size + 1)
    return data if machine.eof else b""


def _unxz(block: Buffer, size: int) -> bytes:
    machine = lzma.LZMADecompressor(format=lzma.FORMAT_XZ, memlimit=1 << 28)
    data = machine.decompress(block, max_length=size + 1)
    return data if machine.eof else b""


def _unlz4(block: Buffer, size: int) -> bytes:
    from vtkmodules.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkCommonCore import vtkCommand
    from vtkmodules.vtkIOCore import vtkLZ4DataCompressor

    machine = vtkLZ4DataCompressor()
    # With an observer the message goes there, and not to standard error.
    machine.AddObserver(vtkCommand.ErrorEvent, lambda *_event: None)
    data = machine.Uncompress(block, len(block), size)
    return b"" if data is None else vtk_to_numpy(data).tobytes()


COMPRESSORS: dict[str, Callable[[Buffer, int], bytes]] = {
    "vtkZLibDataCompressor": _inflate,
    "vtkLZMADataCompressor": _unxz,
    "vtkLZ4DataCompressor": _unlz4,
}


class ArrayReader:
    """Reads the data arrays of one scanned document."""

    def __init__(self, document: Document) -> None:
        self.document = document
        self.path = document.path
        attributes = document.root.attributes
        order = attributes.get("byte_order", "LittleEndian")
        header = attributes.get("header_type", "UInt32")
        compressor = attributes.get("compressor", "")
        if order not in ("LittleEndian", "BigEndian"):
            raise FormatError(f"unknown byte order '{order}'", where=self.path, mend=DAMAGED)
        if header not in ("UInt32", "UInt64"):
            raise FormatError(f"unknown header type '{header}'", where=self.path, mend=DAMAGED)
        if compressor and compressor not in COMPRESSORS:
            raise FormatError(
                f"unknown compressor '{compressor}'", where=self.path, mend="Export with zlib, lz4 or lzma."
            )
        self.order = "<" if order == "LittleEndian" else ">"
        self.word = np.dtype(self.order + TYPES[header])
        self.expand = COMPRESSORS.get(compressor)
        self.left = max(FREE_BYTES, MOST_RATIO * self.path.stat().st_size)
        self.starts = sorted(
            {
                self._offset(element)
                for element in document.root.walk()
                if element.tag in ("DataArray", "Array") and element.attributes.get("format") == "appended"
            }
        )
        if self.starts and self.starts[0] != 0:
            raise FormatError("no array starts where the appended data do", where=self.path, mend=DAMAGED)

    def declared(self, element: Element) -> tuple[np.dtype, int]:
        """Kind and components of an array, as declared. Raises `FormatError` if these cannot be."""
        where = self._where(element)
        kind = element.attributes.get("type", "")
        if kind not in TYPES:
            raise FormatError(f"values of the type '{kind}' cannot be read", where=where, mend=DAMAGED)
        components = attribute_int(element, "NumberOfComponents", where, 1)
        if not 1 <= components <= MOST_COMPONENTS:
            raise FormatError(f"the array declares {components} components", where=where, mend=DAMAGED)
        return np.dtype(TYPES[kind]), components

    def later(self, element: Element, tuples: int) -> Array:
        """The array as `values` gives it, read when it is wanted."""
        dtype, components = self.declared(element)
        shape = (tuples,) if components == 1 else (tuples, components)
        return stored(shape, dtype, lambda: self.values(element, tuples))

    def values(self, element: Element, tuples: int | None) -> Array:
        """The array, (n,) or (n, c), in native byte order.

        ``tuples`` is the n that the mesh asks for; None when only the array itself
        can tell. Raises `FormatError` when what is stored differs from it.
        """
        where = self._where(element)
        dtype, components = self.declared(element)
        if state_of(self.path) != self.document.state:
            raise FormatError("the file was written anew meanwhile", where=where, mend="Read it again.")
        want = None if tuples is None else tuples * components
        form = element.attributes.get("format", "ascii")
        if form == "ascii":
            flat = parse(self._text(element).decode("ascii", "replace"), dtype, where)
        elif form in ("binary", "appended"):
            flat = self._binary(element, form == "appended", dtype, want, where)
        else:
            raise FormatError(f"unknown data format '{form}'", where=where, mend=DAMAGED)
        if want is not None:
            _demand(len(flat), want, where)
        if len(flat) % components:
            raise FormatError(
                f"{len(flat)} values do not fill tuples of {components}", where=where, mend=DAMAGED
            )
        return flat if components == 1 else flat.reshape(-1, components)

    def _where(self, element: Element) -> str:
        return f"{self.path}, array '{element.attributes.get('Name', '')}'"

    def _text(self, element: Element) -> bytes:
        """The text of an element; what is no ASCII stays wrong."""
        if element.place is None:
            return "".join(element.text).encode("ascii", "replace")
        return self._bytes(*element.place)

    def _bytes(self, start: int, stop: int) -> bytes:
        with self.path.open("rb") as stream:
            stream.seek(start)
            return stream.read(stop - start)

    def _offset(self, element: Element) -> int:
        offset = attribute_int(element, "offset", str(self.path))
        appended = self.document.appended
        if appended is None:
            raise FormatError(
                "arrays refer to appended data, which are missing", where=self.path, mend=DAMAGED
            )
        if not 0 <= offset < appended.end - appended.start:
            name = element.attributes.get("Name", "")
            raise FormatError(
                f"array '{name}' starts at byte {offset}, beyond the data", where=self.path, mend=DAMAGED
            )
        return offset

    def _region(self, element: Element) -> tuple[int, int]:
        """Where in the file the array's bytes start, and where those of the next one do."""
        appended = self.document.appended
        assert appended is not None  # the constructor has refused it otherwise
        offset = self._offset(element)
        place = bisect_right(self.starts, offset)
        stop = appended.start + self.starts[place] if place < len(self.starts) else appended.end
        return appended.start + offset, stop

    def _base64(self, text: bytes, where: str) -> bytes:
        """Header and data may be encoded apart, each with its own padding."""
        text = text.strip()
        if any(bytes([space]) in text for space in SPACE):
            text = text.translate(None, SPACE)
        view, begin, parts = memoryview(text), 0, []
        try:
            while begin < len(text):
                end = text.find(b"=", begin)
                end = len(text) if end < 0 else end + 1 + (text[end + 1 : end + 2] == b"=")
                parts.append(binascii.a2b_base64(view[begin:end], strict_mode=True))
                begin = end
            return parts[0] if len(parts) == 1 else b"".join(parts)
        except (binascii.Error, ValueError) as error:
            raise FormatError(f"the data are no base64: {error}", where=where, mend=DAMAGED) from None

    def _binary(
        self, element: Element, appended: bool, dtype: np.dtype, want: int | None, where: str
    ) -> Array:
        place = self._region(element) if appended else element.place
        if place is not None:
            raw = appended and self.document.appended is not None and self.document.appended.raw
            with self.path.open("rb") as file:
                try:
                    source = Raw(file, *place) if raw else Coded.trimmed(file, *place)
                    return self._unpacked(source, dtype, want, where)
                except Untidy:
                    pass  # taken whole below, where a fault is told
        text = self._text(element) if place is None else self._bytes(*place)
        return self._unpacked(Held(self._base64(text, where)), dtype, want, where)

    def _unpacked(self, source: Source, dtype: np.dtype, want: int | None, where: str) -> Array:
        if source.size == 0 and want == 0:
            return np.empty(0, dtype=dtype)
        decode = self._plain if self.expand is None else self._blocks
        data, rest, used = decode(source, dtype, want, where)
        if used < rest.size and bytes(rest.read(used, rest.size)).strip(b" \t\r\n\0"):
            raise FormatError("there are more bytes than the array declares", where=where, mend=DAMAGED)
        stored_as = np.dtype(self.order + dtype.str[1:])
        return data.view(stored_as).astype(dtype, copy=False)

    def _words(self, source: Source, count: int, where: str) -> list[int]:
        if source.size < count * self.word.itemsize:
            raise FormatError("the data end within their header", where=where, mend=DAMAGED)
        return np.frombuffer(source.read(0, count * self.word.itemsize), dtype=self.word).tolist()

    def _plain(
        self, source: Source, dtype: np.dtype, want: int | None, where: str
    ) -> tuple[Array, Source, int]:
        """The bytes of an array that is not compressed; what holds them, and how many it takes there."""
        (size,) = self._words(source, 1, where)
        _demand_size(size, dtype, want, where)
        body = source.behind(self.word.itemsize)
        if size > body.size:
            raise FormatError(f"{size} bytes are declared, {body.size} are there", where=where, mend=DAMAGED)
        out = np.empty(size, np.uint8)
        for at in range(0, size, RUN):
            end = min(size, at + RUN)
            out.data[at:end] = body.read(at, end)
        return out, body, size

    def _blocks(
        self, source: Source, dtype: np.dtype, want: int | None, where: str
    ) -> tuple[Array, Source, int]:
        """The same of an array in compressed blocks, each put where it belongs."""
        (count,) = self._words(source, 1, where)
        if count == 0:
            _demand_size(0, dtype, want, where)
            return np.empty(0, np.uint8), source, min(source.size, 3 * self.word.itemsize)
        if count > source.size:
            raise FormatError(
                f"{count} blocks are declared, more than there are bytes", where=where, mend=DAMAGED
            )
        _count, full, last, *packed = self._words(source, 3 + count, where)
        sizes = [full] * (count - 1) + [last or full]
        _demand_size(sum(sizes), dtype, want, where)
        body = source.behind((3 + count) * self.word.itemsize)
        ends = list(accumulate(packed, initial=0))
        if ends[-1] > body.size:
            raise FormatError("the blocks declare more than the file holds", where=where, mend=DAMAGED)
        self.left -= sum(sizes)
        if self.left < 0:
            raise FormatError(f"the file expands to {MOST_RATIO} times its size", where=where, mend=DAMAGED)
        out = np.empty(sum(sizes), np.uint8)
        places = list(accumulate(sizes, initial=0))

        def unpack(blocks: range) -> None:
            begin = ends[blocks.start]
            run = body.read(begin, ends[blocks.stop])
            for block in blocks:
                packed_block = run[ends[block] - begin : ends[block + 1] - begin]
                out.data[places[block] : places[block + 1]] = self._block(packed_block, sizes[block], where)

        runs = _runs(ends)
        if len(runs) < WORTH_THREADS:
            for blocks in runs:
                unpack(blocks)
        else:
            from concurrent.futures import ThreadPoolExecutor

            with ThreadPoolExecutor(min(4, os.cpu_count() or 1)) as pool:
                list(pool.map(unpack, runs))
        return out, body, ends[-1]

    def _block(self, block: memoryview, size: int, where: str) -> bytes:
        assert self.expand is not None
        try:
            data = self.expand(block, size)
        except (zlib.error, lzma.LZMAError) as error:
            raise FormatError(f"a compressed block is damaged: {error}", where=where, mend=DAMAGED) from None
        if len(data) != size:
            raise FormatError("a compressed block is damaged or of another size", where=where, mend=DAMAGED)
        return data


def _runs(ends: list[int]) -> list[range]:
    """Blocks, given where each starts and the last one ends, as many at a time as make a run."""
    runs, first = [], 0
    while first < len(ends) - 1:
        beyond = max(first + 1, bisect_right(ends, ends[first] + RUN) - 1)
        runs.append(range(first, beyond))
        first = beyond
    return runs


def attribute_int(element: Element, name: str, where: str, default: int | None = None) -> int:
    """A whole number among the attributes. Raises `FormatError` if it is none or missing."""
    text = element.attributes.get(name)
    if text is None and default is not None:
        return default
    if text is None or not re.fullmatch(r"\s*[-+]?[0-9]{1,18}\s*", text):
        raise FormatError(
            f"<{element.tag}> has {name}='{text or ''}', no whole number", where=where, mend=DAMAGED
        )
    return int(text)


def _demand(found: int, want: int, where: str) -> None:
    if found != want:
        raise FormatError(
            f"the array holds {found} values, the mesh asks for {want}",
            where=where,
            mend=DAMAGED,
        )


def _demand_size(size: int, dtype: np.dtype, want: int | None, where: str) -> None:
    if size % dtype.itemsize:
        raise FormatError(
            f"{size} bytes are no whole number of {dtype.name} values", where=where, mend=DAMAGED
        )
    if want is not None:
        _demand(size // dtype.itemsize, want, where)
