"""Is a zip whole: does its list of members stand, and does every member unpack to its checksum?

A workbook that is being written in place, or of which a synchroniser has fetched only a part, fails here.
The list is read from the end of the file (APPNOTE 6.3, 4.3.12 to 4.3.16), by a function that reads at a place, so
that a look into a large file need not hold it in memory.
"""

from __future__ import annotations

import struct
import zlib
from collections.abc import Callable, Iterator
from dataclasses import dataclass

STORED, DEFLATED = 0, 8
_END = struct.Struct("<4s4H2LH")
_END64 = struct.Struct("<4sQ2H2L4Q")
_CENTRAL = struct.Struct("<4s6H3L5H2L")
_LOCAL = struct.Struct("<4s5H3L2H")
_ENCRYPTED = 0x1
_CHUNK = 1 << 20
_MOST_MEMBERS = 100_000
_LARGEST_LIST = 64 << 20
UNPACKED_LIMIT = 4 << 30

ReadAt = Callable[[int, int], bytes]


class BrokenZip(Exception):
    """Not a whole zip; the text says what is missing."""


class TooMuch(Exception):
    """Members that unpack to more than anybody's workbook holds."""


@dataclass(frozen=True, slots=True)
class Member:
    """One entry of the list; `at` is where its local header stands. Sizes in bytes."""

    name: bytes
    method: int
    flags: int
    crc: int
    packed: int
    size: int
    at: int


def members(read_at: ReadAt, length: int) -> tuple[Member, ...]:
    """The list of members of a zip of `length` bytes. Raises BrokenZip."""
    start, size, count, shift = _list_place(read_at, length)
    if count > _MOST_MEMBERS or size > _LARGEST_LIST:
        raise BrokenZip("the list of members is too long")
    listing = read_at(start, size)
    if len(listing) != size:
        raise BrokenZip("the list of members is cut off")
    try:
        return tuple(_entries(listing, count, shift))
    except struct.error as error:
        raise BrokenZip("the list of members is broken") from error


def body(read_at: ReadAt, member: Member) -> tuple[int, int]:
    """Where a member's packed bytes begin and end. Raises BrokenZip."""
    header = read_at(member.at, _LOCAL.size)
    if len(header) != _LOCAL.size or header[:4] != b"PK\x03\x04":
        raise BrokenZip("a member is not where the list says")
    *_, name_length, extra_length = _LOCAL.unpack(header)
    first = member.at + _LOCAL.size + name_length + extra_length
    return first, first + member.packed


def check(data: bytes) -> None:
    """Unpack every member once, piece by piece, and compare size and checksum.

    Members packed in other ways than ECMA-376 part 2 allows, or encrypted, are left for others to judge.
    Raises BrokenZip, or TooMuch when more than `UNPACKED_LIMIT` bytes would come out.
    """
    view = memoryview(data)

    def read_at(at: int, count: int) -> bytes:
        return data[at : at + count]

    found = members(read_at, len(data))
    if sum(member.size for member in found) > UNPACKED_LIMIT:
        raise TooMuch
    end = 0
    for (first, last), member in sorted(((body(read_at, each), each) for each in found), key=lambda pair: pair[0]):
        if first < end or last > len(data):
            raise BrokenZip("members overlap or are cut off")
        end = last
        _check_member(view[first:last], member)


def _check_member(packed: memoryview, member: Member) -> None:
    if member.flags & _ENCRYPTED or member.method not in (STORED, DEFLATED):
        return
    crc, size = 0, 0
    for piece in unpacked(packed, member.method):
        crc, size = zlib.crc32(piece, crc), size + len(piece)
        if size > member.size:
            break
    if size != member.size or crc != member.crc:
        raise BrokenZip("a member does not agree with its checksum")


def unpacked(packed: memoryview | bytes, method: int) -> Iterator[bytes | memoryview]:
    """A member's content in pieces of at most a mebibyte. Raises BrokenZip."""
    if method == STORED:
        yield from (packed[at : at + _CHUNK] for at in range(0, len(packed), _CHUNK))
        return
    inflate = zlib.decompressobj(-zlib.MAX_WBITS)
    try:
        for at in range(0, len(packed), _CHUNK):
            waiting: bytes | memoryview = packed[at : at + _CHUNK]
            while waiting:
                yield inflate.decompress(waiting, _CHUNK)
                waiting = inflate.unconsumed_tail
        yield inflate.flush()
    except zlib.error as error:
        raise BrokenZip("a member cannot be unpacked") from error


def _list_place(read_at: ReadAt, length: int) -> tuple[int, int, int, int]:
    """Start, size and count of the list, and how many bytes stand before the archive."""
    tail_at = max(0, length - _END.size - 0xFFFF)
    tail = read_at(tail_at, length - tail_at)
    at = len(tail)
    while (at := tail.rfind(b"PK\x05\x06", 0, at)) >= 0:
        if at + _END.size > len(tail):
            continue
        *_, count, size, offset, comment = _END.unpack_from(tail, at)
        if at + _END.size + comment > len(tail):
            continue
        end = tail_at + at
        if count == 0xFFFF or 0xFFFFFFFF in (size, offset):
            count, size, offset, end = _wide(read_at, end, (count, size, offset, end))
        shift = end - size - offset
        if shift >= 0:
            return end - size, size, count, shift
    raise BrokenZip("the end is missing")


def _wide(read_at: ReadAt, end: int, narrow: tuple[int, int, int, int]) -> tuple[int, int, int, int]:
    """Count, size, offset of the list and where it ends, from the zip64 records before the end record."""
    at = end - 20 - _END64.size
    if at < 0:
        return narrow
    record = read_at(at, _END64.size)
    if record[:4] != b"PK\x06\x06":
        return narrow
    *_, count, size, offset = _END64.unpack(record)
    return count, size, offset, at


def _entries(listing: bytes, count: int, shift: int) -> Iterator[Member]:
    at = 0
    for _ in range(count):
        (signature, _, _, flags, method, _, _, crc, packed, size, name_length, extra_length, comment_length,
         _, _, _, local) = _CENTRAL.unpack_from(listing, at)  # fmt: skip
        if signature != b"PK\x01\x02":
            raise BrokenZip("the list of members is broken")
        name_at = at + _CENTRAL.size
        extra_at = name_at + name_length
        extra = listing[extra_at : extra_at + extra_length]
        size, packed, local = _wide_entry(extra, (size, packed, local))
        yield Member(listing[name_at:extra_at], method, flags, crc, packed, size, shift + local)
        at = extra_at + extra_length + comment_length


def _wide_entry(extra: bytes, values: tuple[int, int, int]) -> tuple[int, int, int]:
    """Unpacked size, packed size and place, from the zip64 extra field where the narrow ones overflow."""
    if 0xFFFFFFFF not in values:
        return values
    at = 0
    while at + 4 <= len(extra):
        kind, length = struct.unpack_from("<2H", extra, at)
        if kind == 1:
            wide = iter(struct.unpack_from(f"<{length // 8}Q", extra, at + 4))
            full = [next(wide, value) if value == 0xFFFFFFFF else value for value in values]
            return full[0], full[1], full[2]
        at += 4 + length
    return values
