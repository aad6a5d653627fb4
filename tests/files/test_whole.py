"""Whole or torn: judged against zipfile's own writing, and real workbooks of other projects."""

import io
import struct
import zipfile
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bridge.files import whole
from bridge.files.peek import Look, peek
from tests.stress.zips import saved, with_result

CORPUS = Path(__file__).resolve().parents[2].parent / "shared" / "corpus"


def zipped(members: dict[str, bytes], method: int = zipfile.ZIP_DEFLATED, streamed: bool = False) -> bytes:
    made = io.BytesIO()

    class NoSeek(io.RawIOBase):  # makes zipfile write data descriptors, as streaming writers do
        def writable(self) -> bool:
            return True

        def write(self, data) -> int:
            return made.write(data)

    with zipfile.ZipFile(NoSeek() if streamed else made, "w", method) as book:
        for name, data in members.items():
            book.writestr(name, data)
    return made.getvalue()


@settings(deadline=None, max_examples=60)
@given(
    st.dictionaries(
        st.text(min_size=1, max_size=8).filter(str.isalnum), st.binary(max_size=3000), min_size=1, max_size=5
    ),
    st.sampled_from([zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED]),
    st.booleans(),
    st.data(),
)
def test_whole_as_written_torn_when_cut(members, method, streamed, data):
    book = zipped(members, method, streamed)
    whole.check(book)
    cut = data.draw(st.integers(0, len(book) - 1))
    with pytest.raises(whole.BrokenZip):
        whole.check(book[:cut])


@settings(deadline=None, max_examples=60)
@given(st.binary(min_size=50, max_size=2000), st.data())
def test_a_changed_byte_of_content_is_noticed(content, data):
    book = bytearray(zipped({"part": content}, zipfile.ZIP_STORED))
    at = book.find(content) + data.draw(st.integers(0, len(content) - 1))
    book[at] ^= 0xFF
    with pytest.raises(whole.BrokenZip):
        whole.check(bytes(book))


def test_a_new_beginning_over_an_old_end_is_torn():
    # Overwritten in place without truncation, and caught half-way: the end record is the old one and valid.
    old, new = saved(1, padding=8000), saved(2, padding=8000)
    assert len(old) == len(new)
    with pytest.raises(whole.BrokenZip):
        whole.check(new[:4000] + old[4000:])


def test_zip64_marks_are_understood():
    made = io.BytesIO()
    with zipfile.ZipFile(made, "w") as book, book.open("part", "w", force_zip64=True) as part:
        part.write(b"x" * 1000)
    whole.check(made.getvalue())


def test_what_would_unpack_to_too_much_is_not_unpacked(monkeypatch):
    monkeypatch.setattr(whole, "UNPACKED_LIMIT", 1 << 20)
    with pytest.raises(whole.TooMuch):
        whole.check(zipped({"part": b"\0" * (2 << 20)}))


def test_a_member_that_unpacks_to_more_than_it_says_is_broken_off():
    book = bytearray(zipped({"part": b"\0" * (8 << 20)}))
    central = book.rfind(b"PK\x01\x02")
    struct.pack_into("<L", book, central + 24, 1000)  # claims 1,000 bytes
    with pytest.raises(whole.BrokenZip):
        whole.check(bytes(book))


def test_overlapping_members_are_refused():
    book = bytearray(zipped({"one": b"a" * 500, "two": b"a" * 500}, zipfile.ZIP_STORED))
    first, second = book.find(b"PK\x01\x02"), book.rfind(b"PK\x01\x02")
    book[second + 42 : second + 46] = book[first + 42 : first + 46]
    with pytest.raises(whole.BrokenZip):
        whole.check(bytes(book))


@pytest.mark.skipif(not CORPUS.is_dir(), reason="the collection of workbooks (../shared/corpus) is not here")
def test_real_workbooks_agree_with_zipfile():
    judged = 0
    for path in sorted(CORPUS.rglob("*.xls[xm]")):
        data = path.read_bytes()
        try:
            with zipfile.ZipFile(io.BytesIO(data)) as book:
                sound = book.testzip() is None
        except (zipfile.BadZipFile, NotImplementedError, RuntimeError, EOFError):
            continue
        judged += sound
        if sound:
            whole.check(data)
    assert judged > 100


def test_peek(tmp_path):
    path = tmp_path / "book.xlsx"

    def look(data: bytes) -> Look:
        path.write_bytes(data)
        return peek(path)

    asks, plain = saved(1), zipped({"xl/workbook.xml": b"<workbook><sheet name='Data'/></workbook>"})
    assert look(asks) is Look.ASKS
    assert look(with_result(asks)) is Look.ASKS
    assert look(plain) is Look.QUIET
    assert look(zipped({"xl/workbook.xml": b"<sheet name='FIT Request'/>"})) is Look.ASKS
    assert (
        look(zipped({"xl/workbook.xml": b"<sheet name='Anfrage'/><definedName name='_savefit.sheet.fit_request'>"}))
        is Look.ASKS
    )
    assert look(zipped({"xl/workbook.xml": b"<sheet name='fit&#32;request'/>"})) is Look.ASKS
    assert look(zipped({"xl/workbook.xml": "<sheet name='fit request'/>".encode("utf-16")})) is Look.ASKS
    assert look(zipped({"xl/book.bin": b"-"})) is Look.ASKS, "nothing to tell by: a worker looks properly"
    assert look(b"") is Look.TORN
    assert look(plain[:-5]) is Look.TORN
    assert look(b"\0" * 5000) is Look.TORN
    assert look(b"\xd0\xcf\x11\xe0" + b"x" * 600) is Look.ASKS


def test_peek_reads_little_of_a_large_part(tmp_path):
    path = tmp_path / "bomb.xlsx"
    path.write_bytes(zipped({"xl/workbook.xml": b" " * (64 << 20)}))
    assert peek(path) is Look.ASKS
