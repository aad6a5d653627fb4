"""The zip container, read from its central directory and written so that untouched members keep their packed bytes.

PKWARE's APPNOTE 6.3 as ECMA-376 part 2 (Open Packaging Conventions) uses it. The central directory is the truth:
sizes, checks and names come from there, so that members written as a stream (with data descriptors) and zip64
marks need no special care later. Bytes before the archive and the archive's comment are kept.
"""

from __future__ import annotations

import struct
import zlib
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from itertools import pairwise

from bridge.messages import FileRefused, say
from bridge.package.limits import Limits

STORED, DEFLATED = 0, 8
_ENCRYPTED, _DESCRIPTOR, _UTF8 = 0x1, 0x8, 0x800
_ZIP64_EXTRA = 0x0001
_LOCAL = struct.Struct("<4s5H3L2H")
_CENTRAL = struct.Struct("<4s6H3L5H2L")
_END = struct.Struct("<4s4H2LH")
_END64 = struct.Struct("<4sQ2H2L4Q")
_LOCATOR = struct.Struct("<4sLQL")
_FULL16, _FULL32 = 0xFFFF, 0xFFFFFFFF
_CHUNK = 1 << 20
_MOST_PER_BYTE = 1032  # deflate's own limit (RFC 1951: 258 bytes in 2 bits)
_MADE_TIME, _MADE_DATE = 0, (0 << 9) | (1 << 5) | 1  # 1980-01-01 00:00: the same input gives the same bytes


@dataclass(frozen=True, slots=True)
class Member:
    """One member as the central directory describes it; `packed` are its bytes as they stand in the archive."""

    name: str
    raw_name: bytes
    packed: bytes | memoryview
    size: int
    crc: int
    method: int = DEFLATED
    flags: int = 0
    time: int = _MADE_TIME
    date: int = _MADE_DATE
    made_by: int = 20
    needs: int = 20
    internal: int = 0
    external: int = 0
    extra: bytes = b""
    local_extra: bytes = b""
    comment: bytes = b""

    @property
    def is_folder(self) -> bool:
        """Whether this is a folder's entry, which is no part."""
        return self.name.endswith("/")


@dataclass(frozen=True, slots=True)
class Archive:
    """A zip archive: members in the directory's order, what stands before it, and its comment."""

    members: tuple[Member, ...]
    before: bytes = b""
    comment: bytes = b""


def read_archive(data: bytes, limits: Limits) -> Archive:
    """The archive in `data`.

    Raises FileRefused: not a zip, damaged, encrypted or overlapping members, beyond `limits`.
    """
    if len(data) > limits.file:
        raise FileRefused(say("file-too-big", size=len(data) // (1 << 20), limit=limits.file // (1 << 20)))
    try:
        end = _find_end(data)
        members, first = _members(data, end, limits)
    except (struct.error, IndexError, UnicodeDecodeError) as error:
        raise FileRefused(say("zip-damaged", detail="its list of members cannot be read")) from error
    _check_sizes(members, limits)
    return Archive(members, bytes(data[:first]), end.comment)


@dataclass(frozen=True, slots=True)
class _End:
    """Where the central directory stands; `shift` is how many bytes precede the archive."""

    start: int
    size: int
    count: int
    shift: int
    comment: bytes


def _find_end(data: bytes) -> _End:
    """The end record: the last one whose directory really is where it says."""
    at = len(data)
    lowest = max(0, len(data) - _END.size - _FULL16)
    while (at := data.rfind(b"PK\x05\x06", lowest, at)) >= 0:
        end = _end_at(data, at)
        if end is not None:
            return end
    raise FileRefused(say("zip-damaged", detail="its list of members is missing or cut off"))


def _end_at(data: bytes, at: int) -> _End | None:
    if at + _END.size > len(data):
        return None
    _, _, _, _, count, size, offset, length = _END.unpack_from(data, at)
    comment = data[at + _END.size : at + _END.size + length]
    directory_end = at
    if _FULL16 in (count,) or _FULL32 in (size, offset):
        wide = _end64(data, at)
        if wide is not None:
            count, size, offset, directory_end = wide
    start = directory_end - size
    shift = start - offset
    if start < 0 or shift < 0 or (count and data[start : start + 4] != b"PK\x01\x02"):
        return None
    return _End(start, size, count, shift, bytes(comment))


def _end64(data: bytes, at: int) -> tuple[int, int, int, int] | None:
    """Count, size and offset of the directory, and where it ends, from the zip64 end record."""
    locator = at - _LOCATOR.size
    if locator < 0 or data[locator : locator + 4] != b"PK\x06\x07":
        return None
    # The locator's own offset does not know of bytes put before the archive: look just before it instead.
    record = data.rfind(b"PK\x06\x06", max(0, locator - _END64.size - _FULL16), locator)
    if record < 0:
        return None
    *_, count, size, offset = _END64.unpack_from(data, record)
    return count, size, offset, record


def _members(data: bytes, end: _End, limits: Limits) -> tuple[tuple[Member, ...], int]:
    """The members, and where the first of them begins."""
    if end.count > limits.members:
        raise FileRefused(say("too-many-members", count=end.count, limit=limits.members))
    members: list[Member] = []
    spans: list[tuple[int, int]] = []
    at, view = end.start, memoryview(data)
    for _ in range(end.count):
        member, local, at = _central_entry(data, at)
        first = end.shift + local
        body = _body_start(data, first, member)
        last = body + len(member.packed)  # `packed` is a placeholder of the right length until here
        spans.append((first, last))
        members.append(replace(member, packed=view[body:last], local_extra=_local_extra(data, first)))
    if at > end.start + end.size:
        raise FileRefused(say("zip-damaged", detail="its list of members is longer than it says"))
    _check_spans(spans, end.start)
    return tuple(members), spans[0][0] if spans else end.shift


def _central_entry(data: bytes, at: int) -> tuple[Member, int, int]:
    """One directory entry: the member (its `packed` only as long as it will be), local offset, next entry."""
    (signature, made_by, needs, flags, method, time, date, crc, packed, size, name_length, extra_length,
     comment_length, _disk, internal, external, local) = _CENTRAL.unpack_from(data, at)  # fmt: skip
    if signature != b"PK\x01\x02":
        raise FileRefused(say("zip-damaged", detail="its list of members is broken off"))
    at += _CENTRAL.size
    raw_name = data[at : at + name_length]
    extra = data[at + name_length : at + name_length + extra_length]
    comment = data[at + name_length + extra_length : at + name_length + extra_length + comment_length]
    packed, size, local = _wide_sizes(extra, packed, size, local)
    if packed > len(data):
        raise FileRefused(say("zip-damaged", detail="a member is cut off"))
    name = _checked_name(raw_name, flags)
    if flags & _ENCRYPTED:
        raise FileRefused(say("zip-encrypted", member=name))
    member = Member(
        name, raw_name, memoryview(data)[:packed], size, crc, method, flags & ~_DESCRIPTOR, time, date,
        made_by, needs, internal, external, _without_zip64(extra), b"", comment,
    )  # fmt: skip
    return member, local, at + name_length + extra_length + comment_length


def _checked_name(raw: bytes, flags: int) -> str:
    """The member's name with forward slashes. Names that would lead out of the package are refused."""
    name = raw.decode("utf-8" if flags & _UTF8 else "cp437", "replace").replace("\\", "/")
    if not name or "\0" in name or ".." in name.split("/") or (len(name) > 1 and name[1] == ":"):
        raise FileRefused(say("zip-bad-name", member=repr(name)[:80]))
    return name


def _extras(extra: bytes) -> Iterator[tuple[int, bytes]]:
    """The fields of an extra block as (tag, whole field); a malformed rest comes as tag -1."""
    at = 0
    while at + 4 <= len(extra):
        tag, length = struct.unpack_from("<2H", extra, at)
        if at + 4 + length > len(extra):
            break
        yield tag, extra[at : at + 4 + length]
        at += 4 + length
    if at < len(extra):
        yield -1, extra[at:]


def _without_zip64(extra: bytes) -> bytes:
    return b"".join(field for tag, field in _extras(extra) if tag != _ZIP64_EXTRA)


def _wide_sizes(extra: bytes, packed: int, size: int, local: int) -> tuple[int, int, int]:
    """Sizes and offset with the zip64 field's figures in place of those that read 0xFFFFFFFF."""
    for tag, whole in _extras(extra):
        if tag == _ZIP64_EXTRA:
            figures = iter(struct.unpack(f"<{(len(whole) - 4) // 8}Q", whole[4 : 4 + (len(whole) - 4) // 8 * 8]))
            size = next(figures, size) if size == _FULL32 else size
            packed = next(figures, packed) if packed == _FULL32 else packed
            local = next(figures, local) if local == _FULL32 else local
    return packed, size, local


def _body_start(data: bytes, first: int, member: Member) -> int:
    """Where a member's packed bytes begin: the local header's own lengths count, they differ from the directory's."""
    if data[first : first + 4] != b"PK\x03\x04":
        raise FileRefused(say("zip-damaged", detail=f"the member {member.name} is not where it should be"))
    *_, name_length, extra_length = _LOCAL.unpack_from(data, first)
    name_at = first + _LOCAL.size
    # Two names for one member would let two readers see two different packages.
    if data[name_at : name_at + name_length].replace(b"\\", b"/") != member.raw_name.replace(b"\\", b"/"):
        raise FileRefused(say("zip-damaged", detail=f"the member {member.name} has two names"))
    return int(name_at + name_length + extra_length)


def _local_extra(data: bytes, first: int) -> bytes:
    *_, name_length, extra_length = _LOCAL.unpack_from(data, first)
    at = first + _LOCAL.size + name_length
    return _without_zip64(data[at : at + extra_length])


def _check_spans(spans: list[tuple[int, int]], end: int) -> None:
    """Members may not overlap each other or the directory (packed bytes shared by many members are a bomb)."""
    spans.sort()
    for (_, last), (following, _) in pairwise([*spans, (end, end)]):
        if last > following:
            raise FileRefused(say("zip-damaged", detail="two members share the same bytes, or one is cut off"))


def _check_sizes(members: tuple[Member, ...], limits: Limits) -> None:
    for member in members:
        too_dense = member.size > limits.small and member.size > limits.ratio * max(1, len(member.packed))
        if member.size > limits.member or too_dense:
            raise FileRefused(say("unpacks-too-big", member=member.name))
    if sum(member.size for member in members) > limits.total:
        raise FileRefused(say("unpacks-too-big", member="the workbook as a whole"))


def unpacked(member: Member, limit: int) -> Iterator[bytes]:
    """A member's content in pieces of at most a mebibyte.

    Raises FileRefused as soon as it is longer than its directory entry or `limit` says, is damaged, or is packed
    in a way the format does not allow; whoever takes all pieces knows that length and checksum are right.
    """
    crc, length = 0, 0
    try:
        for piece in _inflated(member):
            length += len(piece)
            if length > member.size or length > limit:
                raise FileRefused(say("unpacks-too-big", member=member.name))
            crc = zlib.crc32(piece, crc)
            yield piece
    except zlib.error as error:
        raise FileRefused(say("part-damaged", part=member.name, detail="it cannot be unpacked")) from error
    if length != member.size or crc != member.crc:
        raise FileRefused(say("part-damaged", part=member.name, detail="its checksum is wrong"))


def _inflated(member: Member) -> Iterator[bytes]:
    if member.method == STORED:
        for at in range(0, len(member.packed), _CHUNK):
            yield bytes(member.packed[at : at + _CHUNK])
    elif member.method == DEFLATED:
        inflater = zlib.decompressobj(-zlib.MAX_WBITS)
        for at in range(0, len(member.packed), _CHUNK // 16):
            rest: bytes | memoryview = member.packed[at : at + _CHUNK // 16]
            while rest and not inflater.eof:
                yield inflater.decompress(rest, _CHUNK)
                rest = inflater.unconsumed_tail
        yield inflater.flush()
    else:
        raise FileRefused(say("part-damaged", part=member.name, detail="it is packed in a way workbooks may not use"))


def content(member: Member, limit: int) -> bytes:
    """A member's whole content; raises as `unpacked` does."""
    if member.size > limit:
        raise FileRefused(say("unpacks-too-big", member=member.name))
    return b"".join(unpacked(member, limit))


def readable(member: Member) -> Iterator[bytes]:
    """A member's content in pieces, as far as it can be unpacked and no longer than its directory entry says."""
    length = 0
    try:
        for piece in _inflated(member):
            length += len(piece)
            if length > member.size:
                return
            yield piece
    except (zlib.error, FileRefused):
        return


def check_length(member: Member, limits: Limits) -> None:
    """Raise FileRefused if a member unpacks to more than its directory entry says; other damage is not looked for."""
    if member.method != DEFLATED or len(member.packed) * _MOST_PER_BYTE <= limits.small:
        return
    length = 0
    try:
        for piece in _inflated(member):
            length += len(piece)
            if length > member.size:
                raise FileRefused(say("unpacks-too-big", member=member.name))
    except zlib.error:
        return


def packed(name: str, pieces: Iterable[bytes], level: int = 6) -> Member:
    """A new member with this content, deflated while it is made, dated 1980-01-01."""
    deflater = zlib.compressobj(level, DEFLATED, -zlib.MAX_WBITS)
    out, crc, size = [], 0, 0
    for piece in pieces:
        crc = zlib.crc32(piece, crc)
        size += len(piece)
        out.append(deflater.compress(piece))
    out.append(deflater.flush())
    return Member(name, name.encode("ascii"), b"".join(out), size, crc)


def same_content(one: Member, other: Member) -> bool:
    """Whether two sound members unpack to the same bytes."""
    if (one.size, one.crc) != (other.size, other.crc):
        return False
    if one.method == other.method and one.packed == other.packed:
        return True
    return content(one, one.size) == content(other, other.size)


def write_archive(archive: Archive) -> bytes:
    """The archive as bytes: each member's packed bytes, checksum, method, time and name as they are."""
    out: list[bytes | memoryview] = [archive.before]
    at = len(archive.before)
    directory: list[bytes] = []
    for member in archive.members:
        directory.append(_directory_entry(member, at))
        header = _local_header(member)
        out += [header, member.packed]
        at += len(header) + len(member.packed)
    entries = b"".join(directory)
    if at + len(entries) >= _FULL32 or len(directory) >= _FULL16:
        raise FileRefused(say("file-too-big", size=at // (1 << 20), limit=_FULL32 // (1 << 20)))
    count = len(directory)
    out += [entries, _END.pack(b"PK\x05\x06", 0, 0, count, count, len(entries), at, len(archive.comment))]
    return b"".join([*out, archive.comment])


def _local_header(member: Member) -> bytes:
    fixed = _LOCAL.pack(
        b"PK\x03\x04", member.needs, member.flags, member.method, member.time, member.date, member.crc,
        len(member.packed), member.size, len(member.raw_name), len(member.local_extra),
    )  # fmt: skip
    return fixed + member.raw_name + member.local_extra


def _directory_entry(member: Member, at: int) -> bytes:
    fixed = _CENTRAL.pack(
        b"PK\x01\x02", member.made_by, member.needs, member.flags, member.method, member.time, member.date,
        member.crc, len(member.packed), member.size, len(member.raw_name), len(member.extra), len(member.comment),
        0, member.internal, member.external, at,
    )  # fmt: skip
    return fixed + member.raw_name + member.extra + member.comment


def by_part_name(members: Iterable[Member]) -> Mapping[str, Member]:
    """Members by part name (no leading slash, letters' case aside). Raises FileRefused for two of one name."""
    found: dict[str, Member] = {}
    for member in members:
        key = part_key(member.name)
        if key in found:
            raise FileRefused(say("duplicate-members", member=member.name))
        found[key] = member
    return found


def part_key(name: str) -> str:
    """What two names of the same part have in common (part names are compared without case)."""
    return name.lstrip("/").lower()
