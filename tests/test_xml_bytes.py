"""Ranges of the bytes of an array, against the whole of it as the standard library decodes it."""

import base64

import numpy as np
import pytest

from fvcheck.errors import FormatError
from fvcheck.formats.xml_arrays import ArrayReader
from fvcheck.formats.xml_bytes import Coded, Held, Raw, Untidy
from fvcheck.formats.xml_scan import LONG, scan

BLOB = np.random.default_rng(3).bytes(1000)


@pytest.mark.parametrize("head", [0, 4, 8, 12, 13])
@pytest.mark.parametrize("apart", [True, False])
def test_any_range_of_base64_is_what_the_whole_holds(tmp_path, head, apart):
    parts = [BLOB[:head], BLOB[head:]] if apart else [BLOB]
    text = b"\n  " + b"".join(base64.b64encode(part) for part in parts) + b"\n "
    path = tmp_path / "a"
    path.write_bytes(b"<a>" + text + b"</a>")
    with path.open("rb") as file:
        body = Coded.trimmed(file, 3, 3 + len(text)).behind(head)
        assert body.size == len(BLOB) - head
        for begin, end in ((0, body.size), (0, 0), (1, 2), (2, 700), (5, 300), (body.size - 1, body.size)):
            assert bytes(body.read(begin, end)) == BLOB[head + begin : head + end]


def test_raw_and_held_bytes_are_those_of_the_file(tmp_path):
    path = tmp_path / "a"
    path.write_bytes(BLOB)
    with path.open("rb") as file:
        for source in (Raw(file, 10, 900), Held(BLOB[10:900])):
            assert source.size == 890
            assert bytes(source.behind(5).read(2, 80)) == BLOB[17:95]


@pytest.mark.parametrize("text", [b"AAAA\nAAA", b"AA==AAAA", b"A*AA", b"   ", b"AAAAA"])
def test_base64_that_is_not_in_one_run_is_left_to_the_slow_way(tmp_path, text):
    path = tmp_path / "a"
    path.write_bytes(text)
    with path.open("rb") as file, pytest.raises(Untidy):
        source = Coded.trimmed(file, 0, len(text))
        source.read(0, source.size)


def document(tmp_path, text, before=""):
    path = tmp_path / "a.vtu"
    path.write_text(
        f'<VTKFile type="UnstructuredGrid" header_type="UInt32">{before}<UnstructuredGrid>'
        f'<DataArray type="Int32" Name="n" format="binary">{text}</DataArray></UnstructuredGrid></VTKFile>'
    )
    return scan(path)


VALUES = np.arange(5000, dtype="<i4")
PACKED = np.uint32(VALUES.nbytes).tobytes() + VALUES.tobytes()


@pytest.mark.parametrize("width", [None, 76, 4000])
@pytest.mark.parametrize("before", ["", '<!-- <DataArray type="Int8"> -->' + " " * 2 * LONG, " " * (1 << 20)])
def test_long_text_is_passed_by_and_read_from_its_place(tmp_path, width, before):
    text = base64.b64encode(PACKED).decode()
    if width:
        text = "\n".join(text[at : at + width] for at in range(0, len(text), width))
    found = document(tmp_path, text, before)
    (element,) = found.primary.all("DataArray")
    assert element.place is not None
    assert not "".join(element.text)
    assert np.array_equal(ArrayReader(found).values(element, 5000), VALUES)


def test_long_text_that_is_no_base64_is_refused(tmp_path):
    found = document(tmp_path, base64.b64encode(PACKED).decode().replace("A", "*", 1))
    with pytest.raises(FormatError, match="base64"):
        ArrayReader(found).values(found.primary.all("DataArray")[0], 5000)


def test_a_line_of_damaged_xml_is_counted_with_the_text_passed_by(tmp_path):
    with pytest.raises(FormatError, match="line 301:"):
        document(tmp_path, "\n" * 300 + " " * LONG + "</wrong>")
