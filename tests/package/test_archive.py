"""The zip container, checked against Python's own zipfile."""

from __future__ import annotations

import io
import struct
import zipfile
import zlib
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bridge.messages import FileRefused
from bridge.package.archive import (
    Archive,
    Member,
    content,
    packed,
    read_archive,
    readable,
    same_content,
    unpacked,
    write_archive,
)
from bridge.package.limits import Limits
from tests.package import samples, synthetic, zips

LIMITS = Limits()


def _key_of(refusal: pytest.ExceptionInfo[FileRefused]) -> str:
    return refusal.value.problem.key


@pytest.mark.parametrize(
    "make", [synthetic.streamed, synthetic.zip64, synthetic.leading_junk, synthetic.leading_junk_zip64,
             synthetic.commented, synthetic.stored_with_extras]
)  # fmt: skip
def test_written_again_every_member_keeps_what_zipfile_sees(make) -> None:  # type: ignore[no-untyped-def]
    data = make()
    again = write_archive(read_archive(data, LIMITS))
    assert zips.raw(again) == zips.raw(data)
    with zipfile.ZipFile(io.BytesIO(data)) as old, zipfile.ZipFile(io.BytesIO(again)) as new:
        assert new.testzip() is None
        assert new.comment == old.comment
        for was, now in zip(old.infolist(), new.infolist(), strict=True):
            assert (was.external_attr, was.comment, was.create_system) == (
                now.external_attr,
                now.comment,
                now.create_system,
            )
    assert write_archive(read_archive(again, LIMITS)) == again


def test_leading_bytes_and_comment_are_kept() -> None:
    again = write_archive(read_archive(synthetic.leading_junk(), LIMITS))
    assert again.startswith(b"#!/bin/sh\nexit 0\nPK\x03\x04")
    assert b"longer than the end record" in write_archive(read_archive(synthetic.commented(), LIMITS))


def test_an_end_mark_inside_the_comment_is_not_taken_for_the_end() -> None:
    data = zips.build({"a.xml": b"<a/>"})
    comment = b"see PK\x05\x06 here, and enough text behind it to look like a record"
    data = data[:-2] + struct.pack("<H", len(comment)) + comment
    archive = read_archive(data, LIMITS)
    assert [member.name for member in archive.members] == ["a.xml"]
    assert archive.comment == comment


@given(
    st.dictionaries(
        st.text("abcdefgh/", min_size=1, max_size=12).filter(lambda name: not name.startswith("/")),
        st.binary(max_size=3000),
        max_size=6,
    ),
    st.booleans(),
)
@settings(max_examples=60, deadline=None)
def test_any_zip_reads_back(parts: dict[str, bytes], stored: bool) -> None:
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w", zipfile.ZIP_STORED if stored else zipfile.ZIP_DEFLATED) as archive:
        for name, data in parts.items():
            archive.writestr(name, data)
    members = read_archive(out.getvalue(), LIMITS).members
    assert {member.name: content(member, 1 << 20) for member in members} == parts


@given(st.lists(st.binary(max_size=5000), max_size=8), st.sampled_from([1, 3, 6, 9]))
@settings(max_examples=60, deadline=None)
def test_packed_pieces_unpack_to_the_whole(pieces: list[bytes], level: int) -> None:
    member = packed("x.xml", pieces, level)
    whole = b"".join(pieces)
    assert content(member, 1 << 20) == whole
    assert member.crc == zlib.crc32(whole)
    assert same_content(member, packed("y.xml", [whole], 1))
    assert not same_content(member, packed("y.xml", [whole, b"!"]))


def test_long_members_come_in_small_pieces() -> None:
    member = packed("x.xml", [b"abcd" * (3 << 20)])
    pieces = list(unpacked(member, 1 << 30))
    assert max(map(len, pieces)) <= 1 << 20
    assert b"".join(pieces) == b"abcd" * (3 << 20)


@pytest.mark.parametrize("change", [{"size": 11}, {"size": 9}, {"crc": 1}])
def test_a_member_that_lies_about_itself_is_refused(change: dict[str, int]) -> None:
    with pytest.raises(FileRefused):
        content(replace(packed("x.xml", [b"0123456789"]), **change), 1 << 20)  # type: ignore[arg-type]


def test_a_member_longer_than_it_says_stops_early() -> None:
    member = replace(packed("x.xml", [bytes(50 << 20)]), size=10)
    with pytest.raises(FileRefused) as refusal:
        content(member, 1 << 30)
    assert _key_of(refusal) == "unpacks-too-big"
    assert sum(map(len, readable(member))) <= 10


def test_a_damaged_member_is_refused_only_when_read() -> None:
    data = bytearray(zips.build({"a.xml": b"<a>text</a>" * 50, "b.xml": b"<b/>"}))
    at = data.find(b"a.xml") + 8
    data[at] ^= 0xFF
    archive = read_archive(bytes(data), LIMITS)
    with pytest.raises(FileRefused) as refusal:
        content(archive.members[0], 1 << 20)
    assert _key_of(refusal) == "part-damaged"
    assert zips.raw(write_archive(archive))["a.xml"] == zips.raw(bytes(data))["a.xml"]


def test_methods_workbooks_may_not_use_are_refused_only_when_read() -> None:
    member = Member("x", b"x", b"abc", 3, zlib.crc32(b"abc"), method=14)
    with pytest.raises(FileRefused):
        content(member, 100)
    assert write_archive(Archive((member,)))


@pytest.mark.parametrize("name", ["../x.xml", "xl/../../x", "C:x.xml", "a\\..\\..\\b"])
def test_names_that_lead_out_are_refused(name: str) -> None:
    with pytest.raises(FileRefused) as refusal:
        read_archive(zips.build({"a.xml": b"", name: b"x"}), LIMITS)
    assert _key_of(refusal) == "zip-bad-name"


def test_members_that_share_bytes_are_refused() -> None:
    data = bytearray(zips.build({"a.xml": b"<a/>", "b.xml": b"<a/>"}))
    first, second = (found for found in (data.find(b"PK\x01\x02"), data.rfind(b"PK\x01\x02")))
    data[second + 42 : second + 46] = data[first + 42 : first + 46]
    data[second + 46 : second + 51] = b"a.xml"
    with pytest.raises(FileRefused) as refusal:
        read_archive(bytes(data), LIMITS)
    assert _key_of(refusal) == "zip-damaged"


def test_two_names_for_one_member_are_refused() -> None:
    data = bytearray(zips.build({"a.xml": b"<a/>"}))
    data[30:35] = b"b.xml"
    with pytest.raises(FileRefused) as refusal:
        read_archive(bytes(data), LIMITS)
    assert "two names" in refusal.value.problem.text


@pytest.mark.parametrize(
    ("limits", "key"),
    [
        (Limits(file=100), "file-too-big"),
        (Limits(members=3), "too-many-members"),
        (Limits(member=500), "unpacks-too-big"),
        (Limits(total=3000), "unpacks-too-big"),
        (Limits(small=100, ratio=2), "unpacks-too-big"),
    ],
)
def test_bounds(limits: Limits, key: str) -> None:
    with pytest.raises(FileRefused) as refusal:
        read_archive(samples.plain_workbook(), limits)
    assert _key_of(refusal) == key


@pytest.mark.parametrize("length", [21, 22, 60, 500])
def test_a_cut_archive_is_refused(length: int) -> None:
    data = samples.plain_workbook()
    with pytest.raises(FileRefused):
        read_archive(data[-length:-3], LIMITS)
    with pytest.raises(FileRefused):
        read_archive(data[:length], LIMITS)
