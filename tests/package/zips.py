"""Reading and rebuilding packages with the standard library alone, so that tests do not check ours with ours."""

from __future__ import annotations

import io
import posixpath
import struct
import zipfile
from urllib.parse import unquote

from lxml import etree

RELS = "http://schemas.openxmlformats.org/package/2006/relationships"


def members(data: bytes) -> dict[str, bytes]:
    """All members' unpacked content by name (a member that cannot be unpacked: its packed bytes)."""
    with zipfile.ZipFile(io.BytesIO(data)) as archive:
        found = {}
        for info in archive.infolist():
            try:
                found[info.filename.replace("\\", "/")] = archive.read(info)
            except (zipfile.BadZipFile, OSError, RuntimeError, ValueError, EOFError):
                found[info.filename] = raw(data)[info.filename][-1]
            except Exception as error:  # zlib.error
                found[info.filename] = repr(error).encode()
        return found


def raw(data: bytes) -> dict[str, tuple[int, int, int, tuple[int, ...], bytes]]:
    """Per member: method, checksum, size, time and packed bytes."""
    with zipfile.ZipFile(io.BytesIO(data)) as archive:
        found = {}
        for info in archive.infolist():
            name_length, extra_length = struct.unpack_from("<2H", data, info.header_offset + 26)
            at = info.header_offset + 30 + name_length + extra_length
            packed = data[at : at + info.compress_size]
            name = info.filename.replace("\\", "/")
            found[name] = (info.compress_type, info.CRC, info.file_size, info.date_time, packed)
        return found


def build(parts: dict[str, bytes]) -> bytes:
    """A plain zip of these parts."""
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in parts.items():
            archive.writestr(zipfile.ZipInfo(name, (2020, 1, 1, 0, 0, 0)), content, zipfile.ZIP_DEFLATED)
    return out.getvalue()


def edited(data: bytes, part: str, old: str, new: str) -> bytes:
    """A copy in which `old`, which must occur, reads `new` in `part`."""
    parts = members(data)
    text = parts[part].decode()
    assert old in text, f"{old!r} is not in {part}"
    parts[part] = text.replace(old, new, 1).encode()
    return build(parts)


def relations_of(parts: dict[str, bytes], source: str) -> dict[str, tuple[str, str, bool]]:
    """Relationships of a part: id -> (last word of the type, part meant or outside target, inside)."""
    folder, _, base = source.rpartition("/")
    name = f"{folder}/_rels/{base}.rels".lstrip("/")
    data = next((content for part, content in parts.items() if part.lower() == name.lower()), None)
    if data is None:
        return {}
    found = {}
    for each in etree.fromstring(data):
        if not isinstance(each.tag, str):
            continue
        target = each.get("Target", "")
        inside = each.get("TargetMode") != "External"
        if inside:
            plain = unquote(target.split("#")[0]).replace("\\", "/")
            target = posixpath.normpath(posixpath.join("/" + folder, plain)).lstrip("/") if plain else source
        found[each.get("Id", "")] = (each.get("Type", "").rsplit("/", 1)[-1], target, inside)
    return found


def workbook_part(parts: dict[str, bytes]) -> str:
    """The workbook part's name."""
    return next(target for kind, target, _ in relations_of(parts, "").values() if kind == "officeDocument")


def sheet_parts(parts: dict[str, bytes]) -> list[tuple[str, str]]:
    """(tab, part) in tab order."""
    book = workbook_part(parts)
    relations = relations_of(parts, book)
    root = etree.fromstring(part(parts, book))
    found = []
    for element in root.iter("{*}sheet"):
        if etree.QName(element.getparent()).localname == "sheets":
            id_ = next((v for k, v in element.attrib.items() if k.endswith("}id")), "")
            found.append((element.get("name", ""), relations.get(id_, ("", "", False))[1]))
    return found


def part(parts: dict[str, bytes], name: str) -> bytes:
    """A part's content, its name compared without case."""
    return next(content for each, content in parts.items() if each.lower() == name.lower())
