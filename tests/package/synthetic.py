"""Packages made for what the corpus lacks: kinds of content, ways to write a zip, and files to be refused.

All contents are invented. `python -m tests.package.synthetic` puts them through the corpus's questions and prints the
same table.
"""

from __future__ import annotations

import io
import re
import struct
import sys
import zipfile
from collections.abc import Callable

from tests.package import corpus, samples, zips

_OFFICE = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
_MICROSOFT = "http://schemas.microsoft.com/office"
_MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
_SHEET1, _BOOK, _STYLES = "xl/worksheets/sheet1.xml", "xl/workbook.xml", "xl/styles.xml"
_TYPES = "[Content_Types].xml"

Parts = dict[str, bytes]


def base() -> Parts:
    """A plain workbook's parts."""
    return zips.members(samples.plain_workbook())


def swap(parts: Parts, part: str, old: str, new: str) -> None:
    """Replace a text that must be there once."""
    text = parts[part].decode()
    assert old in text, f"{old} is not in {part}"
    parts[part] = text.replace(old, new, 1).encode()


def add(parts: Parts, name: str, content: str | bytes, type_: str, source: str, relation: str) -> str:
    """Add a part with its content type, and a relationship to it from `source`; the relationship's id."""
    parts[name] = content.encode() if isinstance(content, str) else content
    swap(parts, _TYPES, "</Types>", f'<Override PartName="/{name}" ContentType="{type_}"/></Types>')
    return relate(parts, source, relation, f"/{name}")


def relate(parts: Parts, source: str, relation: str, target: str, mode: str = "") -> str:
    """Add a relationship; its id."""
    folder, _, base_name = source.rpartition("/")
    name = f"{folder}/_rels/{base_name}.rels".lstrip("/")
    if name not in parts:
        parts[name] = f'<Relationships xmlns="{zips.RELS}"></Relationships>'.encode()
    id_ = f"rId{parts[name].count(b'<Relationship ') + 100}"
    row = f'<Relationship Id="{id_}" Type="{relation}" Target="{target}"{mode}/>'
    swap(parts, name, "</Relationships>", row + "</Relationships>")
    return id_


# --- kinds of content ----------------------------------------------------------------------------------------------


def slicer_and_timeline() -> bytes:
    """A slicer with its cache and a timeline with its cache, on the user's sheet and in the workbook's extensions."""
    parts = base()
    x14, x15 = (
        "http://schemas.microsoft.com/office/spreadsheetml/2009/9/main",
        ("http://schemas.microsoft.com/office/spreadsheetml/2010/11/main"),
    )
    slicer = add(parts, "xl/slicers/slicer1.xml", f'<slicers xmlns="{x14}"><slicer name="Hull" cache="Slicer_Hull" '
                 'rowHeight="1"/></slicers>', "application/vnd.ms-excel.slicer+xml", _SHEET1,
                 f"{_MICROSOFT}/2007/relationships/slicer")  # fmt: skip
    cache = add(parts, "xl/slicerCaches/slicerCache1.xml", f'<slicerCacheDefinition xmlns="{x14}" name="Slicer_Hull" '
                'sourceName="Hull"/>', "application/vnd.ms-excel.slicerCache+xml", _BOOK,
                f"{_MICROSOFT}/2007/relationships/slicerCache")  # fmt: skip
    timeline = add(parts, "xl/timelines/timeline1.xml", f'<timelines xmlns="{x15}"><timeline name="Day" '
                   'cache="Day1"/></timelines>', "application/vnd.ms-excel.timeline+xml", _SHEET1,
                   f"{_MICROSOFT}/2011/relationships/timeline")  # fmt: skip
    swap(parts, _SHEET1, "</worksheet>",
         f'<extLst><ext uri="{{A8765BA9-456A-4dab-B4F3-ACF838C121DE}}" xmlns:x14="{x14}"><x14:slicerList>'
         f'<x14:slicer r:id="{slicer}"/></x14:slicerList></ext><ext uri="{{7E03D99C-DC04-49d9-9315-930204A7B6E9}}" '
         f'xmlns:x15="{x15}"><x15:timelineRefs><x15:timelineRef r:id="{timeline}"/></x15:timelineRefs></ext></extLst>'
         "</worksheet>")  # fmt: skip
    swap(parts, _BOOK, "</workbook>",
         f'<extLst><ext uri="{{BBE1A952-AA13-448e-AADC-164F8A28A991}}" xmlns:x14="{x14}"><x14:slicerCaches>'
         f'<x14:slicerCache r:id="{cache}"/></x14:slicerCaches></ext></extLst></workbook>')  # fmt: skip
    return zips.build(parts)


def extended_chart() -> bytes:
    """A chart of a later kind (chartex) in a drawing with alternatives, next to a fallback shape."""
    parts = base()
    cx, mc = f"{_MICROSOFT}/drawing/2014/chartex", "http://schemas.openxmlformats.org/markup-compatibility/2006"
    xdr = "http://schemas.openxmlformats.org/drawingml/2006/spreadsheetDrawing"
    a = "http://schemas.openxmlformats.org/drawingml/2006/main"
    drawing = (
        f'<xdr:wsDr xmlns:xdr="{xdr}" xmlns:a="{a}"><xdr:twoCellAnchor><xdr:from><xdr:col>1</xdr:col><xdr:colOff>0'
        "</xdr:colOff><xdr:row>1</xdr:row><xdr:rowOff>0</xdr:rowOff></xdr:from><xdr:to><xdr:col>6</xdr:col><xdr:colOff>"
        f'0</xdr:colOff><xdr:row>12</xdr:row><xdr:rowOff>0</xdr:rowOff></xdr:to><mc:AlternateContent xmlns:mc="{mc}">'
        f'<mc:Choice xmlns:cx1="{_MICROSOFT}/drawing/2015/9/8/chartex" Requires="cx1"><xdr:graphicFrame macro="">'
        '<xdr:nvGraphicFramePr><xdr:cNvPr id="2" name="Chart 1"/><xdr:cNvGraphicFramePr/></xdr:nvGraphicFramePr>'
        f'<xdr:xfrm><a:off x="0" y="0"/><a:ext cx="0" cy="0"/></xdr:xfrm><a:graphic><a:graphicData uri="{cx}">'
        f'<cx:chart xmlns:cx="{cx}" xmlns:r="{_OFFICE}" r:id="rId100"/></a:graphicData></a:graphic></xdr:graphicFrame>'
        "</mc:Choice><mc:Fallback/></mc:AlternateContent><xdr:clientData/></xdr:twoCellAnchor></xdr:wsDr>"
    )
    id_ = add(parts, "xl/drawings/drawing1.xml", drawing,
              "application/vnd.openxmlformats-officedocument.drawing+xml", _SHEET1, f"{_OFFICE}/drawing")  # fmt: skip
    add(parts, "xl/charts/chartEx1.xml", f'<cx:chartSpace xmlns:cx="{cx}"><cx:chart/></cx:chartSpace>',
        "application/vnd.ms-office.chartex+xml", "xl/drawings/drawing1.xml",
        f"{_MICROSOFT}/2014/relationships/chartEx")  # fmt: skip
    swap(parts, _SHEET1, "</worksheet>", f'<drawing r:id="{id_}"/></worksheet>')
    return zips.build(parts)


def threaded_comments() -> bytes:
    """A threaded comment with the person who wrote it, and the plain comment older programs show."""
    parts = base()
    space = f"{_MICROSOFT}/spreadsheetml/2018/threadedcomments".replace("office/spreadsheetml", "office/spreadsheetml")
    person = "{11111111-2222-3333-4444-555555555555}"
    add(parts, "xl/persons/person.xml", f'<personList xmlns="{space}"><person displayName="An Estimator" '
        f'id="{person}"/></personList>', "application/vnd.ms-excel.person+xml", _BOOK,
        f"{_MICROSOFT}/2017/10/relationships/person")  # fmt: skip
    add(parts, "xl/threadedComments/threadedComment1.xml",
        f'<ThreadedComments xmlns="{space}"><threadedComment ref="B2" personId="{person}" id="{person}"><text>why so '
        "long?</text></threadedComment></ThreadedComments>", "application/vnd.ms-excel.threadedcomments+xml", _SHEET1,
        f"{_MICROSOFT}/2017/10/relationships/threadedComment")  # fmt: skip
    add(parts, "xl/comments1.xml", f'<comments xmlns="{_MAIN}"><authors><author>x</author></authors><commentList>'
        '<comment ref="B2" authorId="0"><text><t>why so long?</t></text></comment></commentList></comments>',
        "application/vnd.openxmlformats-officedocument.spreadsheetml.comments+xml", _SHEET1,
        f"{_OFFICE}/comments")  # fmt: skip
    return zips.build(parts)


def date_in_format_zero() -> bytes:
    """The format that cells without one get is a date."""
    parts = base()
    old = re.search(r"<cellXfs.*?</cellXfs>", parts[_STYLES].decode())
    assert old
    new = re.sub(r'numFmtId="0"', 'numFmtId="14"', old[0], count=1)
    swap(parts, _STYLES, old[0], new.replace(' xfId="0"', ' xfId="0" applyNumberFormat="1"', 1))
    return zips.build(parts)


def general_is_a_date() -> bytes:
    """Number format 0 itself is redefined as a date."""
    parts = base()
    swap(
        parts,
        _STYLES,
        "<fonts",
        '<numFmts count="1"><numFmt numFmtId="0" formatCode="yyyy\\-mm\\-dd"/></numFmts><fonts',
    )
    return zips.build(parts)


def no_styles() -> bytes:
    """No styles part at all."""
    parts = base()
    del parts[_STYLES]
    for name in (_TYPES, "xl/_rels/workbook.xml.rels"):
        parts[name] = re.sub(r"<(Override|Relationship) [^>]*styles[^>]*>", "", parts[name].decode()).encode()
    parts[_SHEET1] = re.sub(r' s="\d+"', "", parts[_SHEET1].decode()).encode()
    return zips.build(parts)


def bare_styles() -> bytes:
    """A styles part without a single list, and one list with a wrong count elsewhere would be next."""
    parts = base()
    parts[_STYLES] = f'<styleSheet xmlns="{_MAIN}"/>'.encode()
    return zips.build(parts)


def wrong_counts() -> bytes:
    """Lists whose stated counts are wrong, or are not stated."""
    parts = base()
    text = (
        parts[_STYLES]
        .decode()
        .replace('<fonts count="1"', '<fonts count="7"')
        .replace('<cellXfs count="1"', "<cellXfs")
    )
    parts[_STYLES] = text.encode()
    return zips.build(parts)


def strict() -> bytes:
    """Everything in the strict namespaces."""
    parts = base()
    for name in parts:
        if name.endswith((".xml", ".rels")) and name != _TYPES:
            text = parts[name].decode()
            for old, new in (
                (_MAIN, "http://purl.oclc.org/ooxml/spreadsheetml/main"),
                (_OFFICE, "http://purl.oclc.org/ooxml/officeDocument/relationships"),
                ("http://schemas.openxmlformats.org/drawingml/2006/main", "http://purl.oclc.org/ooxml/drawingml/main"),
            ):
                text = text.replace(old, new)
            parts[name] = text.encode()
    swap(parts, _BOOK, "<workbook ", '<workbook conformance="strict" ')
    return zips.build(parts)


def prefixed() -> bytes:
    """Every main element with a prefix, relationships under an odd one."""
    parts = base()
    for name in (_BOOK, _STYLES, _SHEET1):
        text = re.sub(r"<(/?)(\w)", r"<\1x:\2", parts[name].decode().partition("?>")[2])
        text = text.replace(f'xmlns="{_MAIN}"', f'xmlns:x="{_MAIN}"').replace("xmlns:r=", "xmlns:rel=")
        parts[name] = text.replace(" r:id=", " rel:id=").encode()
    return zips.build(parts)


def odd_places() -> bytes:
    """The workbook in a folder of another name, its parts beside it and at the top, absolute and escaped targets."""
    parts = base()
    moved = {
        _BOOK: "my data/the book.xml",
        "xl/_rels/workbook.xml.rels": "my data/_rels/the book.xml.rels",
        _SHEET1: "my data/first.xml",
        "xl/worksheets/sheet2.xml": "second.xml",
        _STYLES: "looks/styles.xml",
    }
    out = {moved.get(name, name): content for name, content in parts.items()}
    swap(out, "_rels/.rels", 'Target="xl/workbook.xml"', 'Target="/my%20data/the%20book.xml"')
    rels = "my data/_rels/the book.xml.rels"
    swap(out, rels, 'Target="worksheets/sheet1.xml"', 'Target="first.xml"')
    swap(out, rels, 'Target="worksheets/sheet2.xml"', 'Target="/second.xml"')
    swap(out, rels, 'Target="styles.xml"', 'Target="../looks/styles.xml"')
    for name in ("theme/theme1.xml", "sharedStrings.xml"):
        swap(out, rels, f'Target="{name}"', f'Target="/xl/{name}"')
    for old, new in moved.items():
        if f'PartName="/{old}"' in out[_TYPES].decode():
            swap(out, _TYPES, f'PartName="/{old}"', f'PartName="/{new.replace(" ", "%20")}"')
    return zips.build(out)


def capitals() -> bytes:
    """Part names that differ in case from what relationships and content types say; content types not first."""
    parts = base()
    out = {name.replace("worksheets", "WorkSheets"): content for name, content in parts.items() if name != _TYPES}
    return zips.build({**out, _TYPES: parts[_TYPES]})


def utf16() -> bytes:
    """Workbook part and styles in UTF-16."""
    parts = base()
    for name in (_BOOK, _STYLES):
        text = parts[name].decode().replace("UTF-8", "UTF-16")
        parts[name] = text.encode("utf-16")
    return zips.build(parts)


def custom_views_and_chain() -> bytes:
    """Custom views by sheet id, sheet ids unlike positions, a calculation chain, a hidden sheet, scoped names."""
    parts = base()
    swap(parts, _BOOK, 'sheetId="1"', 'sheetId="17"')
    swap(parts, _BOOK, 'sheetId="2"', 'sheetId="5" state="hidden"')
    guid = "{AAAAAAAA-BBBB-CCCC-DDDD-EEEEEEEEEEEE}"
    swap(parts, _BOOK, "</sheets>", "</sheets><definedNames><definedName name=\"mine\" localSheetId=\"1\">Notes!$A$1"
         '</definedName><definedName name="mine">Refits!$B$2</definedName></definedNames>')  # fmt: skip
    swap(parts, _BOOK, "</workbook>", f'<customWorkbookViews><customWorkbookView name="v" guid="{guid}" '
         'windowWidth="9" windowHeight="9" activeSheetId="17"/></customWorkbookViews></workbook>')  # fmt: skip
    add(parts, "xl/calcChain.xml", f'<calcChain xmlns="{_MAIN}"><c r="B10" i="17" l="1"/><c r="B10" i="5"/>'
        "</calcChain>",
        "application/vnd.openxmlformats-officedocument.spreadsheetml.calcChain+xml", _BOOK,
        f"{_OFFICE}/calcChain")  # fmt: skip
    return zips.build(parts)


def macros() -> bytes:
    """A macro workbook whose macro project is signed (the package is not)."""
    parts = base()
    swap(parts, _TYPES, "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet.main+xml",
         "application/vnd.ms-excel.sheet.macroEnabled.main+xml")  # fmt: skip
    add(parts, "xl/vbaProject.bin", b"\xd0\xcf\x11\xe0 not a real project", "application/vnd.ms-office.vbaProject",
        _BOOK, f"{_MICROSOFT}/2006/relationships/vbaProject")  # fmt: skip
    add(parts, "xl/vbaProjectSignature.bin", b"signed", "application/vnd.ms-office.vbaProjectSignature",
        "xl/vbaProject.bin", f"{_MICROSOFT}/2006/relationships/vbaProjectSignature")  # fmt: skip
    return zips.build(parts)


def strange_names() -> bytes:
    """Tabs with quotes, markup, commas and letters of many scripts."""
    return samples.plain_workbook("It's so", 'a <b> & "c"', "Größe, 尺寸", "=1+1", "x!y")


def dangling() -> bytes:
    """Overrides for missing parts under names a new part would get, and a part that nothing leads to."""
    parts = base()
    for name in ("xl/worksheets/sheet3.xml", "xl/drawings/drawing1.xml", "xl/charts/chart1.xml"):
        swap(parts, _TYPES, "</Types>", f'<Override PartName="/{name}" ContentType="application/xml"/></Types>')
    parts["xl/left/over.xml"] = b"<x/>"
    return zips.build(parts)


# --- ways to write a zip -------------------------------------------------------------------------------------------


def streamed() -> bytes:
    """Written to a pipe: sizes only in data descriptors."""

    class Pipe(io.RawIOBase):
        def __init__(self) -> None:
            self.data = bytearray()

        def writable(self) -> bool:
            return True

        def write(self, data: bytes) -> int:  # type: ignore[override]
            self.data += data
            return len(data)

    pipe = Pipe()
    with zipfile.ZipFile(pipe, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in base().items():
            archive.writestr(name, content)
    return bytes(pipe.data)


def zip64() -> bytes:
    """Zip64 marks in local headers, in the directory, and an end record of that kind."""
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in base().items():
            with archive.open(name, "w", force_zip64=True) as member:
                member.write(content)
    return _wide_directory(out.getvalue())


def _wide_directory(data: bytes) -> bytes:
    """The same archive with sizes and offsets of its directory moved into zip64 fields."""
    end = data.rfind(b"PK\x05\x06")
    count, _, offset = struct.unpack_from("<HLL", data, end + 10)
    directory, at = b"", offset
    for _ in range(count):
        fixed = bytearray(data[at : at + 46])
        packed, size = struct.unpack_from("<LL", fixed, 20)
        name_length, extra_length, comment_length = struct.unpack_from("<HHH", fixed, 28)
        (local,) = struct.unpack_from("<L", fixed, 42)
        name = data[at + 46 : at + 46 + name_length]
        wide = struct.pack("<HHQQQ", 1, 24, size, packed, local)
        struct.pack_into("<LL", fixed, 20, 0xFFFFFFFF, 0xFFFFFFFF)
        struct.pack_into("<HHH", fixed, 28, name_length, len(wide), 0)
        struct.pack_into("<L", fixed, 42, 0xFFFFFFFF)
        directory += bytes(fixed) + name + wide
        at += 46 + name_length + extra_length + comment_length
    record = struct.pack("<4sQ2H2L4Q", b"PK\x06\x06", 44, 45, 45, 0, 0, count, count, len(directory), offset)
    locator = struct.pack("<4sLQL", b"PK\x06\x07", 0, offset + len(directory), 1)
    last = struct.pack("<4s4H2LH", b"PK\x05\x06", 0, 0, 0xFFFF, 0xFFFF, 0xFFFFFFFF, 0xFFFFFFFF, 0)
    return data[:offset] + directory + record + locator + last


def leading_junk() -> bytes:
    """Bytes before the archive, whose offsets do not count them."""
    return b"#!/bin/sh\nexit 0\n" + zips.build(base())


def leading_junk_zip64() -> bytes:
    """The same with zip64 records."""
    return b"junk before it" * 3 + zip64()


def commented() -> bytes:
    """An archive comment."""
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in base().items():
            archive.writestr(name, content)
        archive.comment = b"a comment that is longer than the end record it follows"
    return out.getvalue()


def stored_with_extras() -> bytes:
    """Members that are not packed, with extra fields, comments, folders and an odd system."""
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w", zipfile.ZIP_STORED) as archive:
        archive.writestr("xl/", b"")
        for name, content in base().items():
            info = zipfile.ZipInfo(name, (1999, 12, 31, 23, 59, 58))
            info.extra, info.comment, info.create_system = struct.pack("<HH4s", 0x7777, 4, b"abcd"), b"note", 3
            archive.writestr(info, content)
    return out.getvalue()


# --- to be refused -------------------------------------------------------------------------------------------------


def signed() -> bytes:
    """A signed package."""
    parts = base()
    add(parts, "_xmlsignatures/origin.sigs", b"", "application/vnd.openxmlformats-package.digital-signature-origin", "",
        "http://schemas.openxmlformats.org/package/2006/relationships/digital-signature/origin")  # fmt: skip
    return zips.build(parts)


def many_formats() -> bytes:
    """As many cell formats as the format allows."""
    parts = base()
    old = re.search(r"<cellXfs.*?</cellXfs>", parts[_STYLES].decode())
    assert old
    xf = '<xf numFmtId="0" fontId="0" fillId="0" borderId="0" xfId="0"/>'
    swap(parts, _STYLES, old[0], f'<cellXfs count="64000">{xf * 64_000}</cellXfs>')
    return zips.build(parts)


def entity_bomb() -> bytes:
    """Entities of entities in the workbook part."""
    parts = base()
    bomb = '<!DOCTYPE b [<!ENTITY a "aaaaaaaaaa">' + "".join(
        f'<!ENTITY a{n} "{f"&a{n - 1 if n else str()};" * 10}">' for n in range(9)
    )
    swap(parts, _BOOK, "<workbook", f"{bomb}]><workbook")
    swap(parts, _BOOK, 'name="Refits"', 'name="&a8;"')
    return zips.build(parts)


def outside_entity() -> bytes:
    """An entity that would read a file of the computer's."""
    parts = base()
    swap(parts, _BOOK, "<workbook", '<!DOCTYPE b [<!ENTITY x SYSTEM "file:///etc/hostname">]><workbook')
    return zips.build(parts)


def climbing_name() -> bytes:
    """A member whose name leads out of the package."""
    return zips.build({**base(), "../../evil.xml": b"<x/>"})


def _twice(name: str) -> bytes:
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as archive:
        for each, content in base().items():
            archive.writestr(each, content)
        info = zipfile.ZipInfo(name)
        archive.writestr(info, b"<x/>")
    return out.getvalue()


def same_name_twice() -> bytes:
    """Two members that differ in case alone."""
    return _twice("XL/Workbook.xml")


def bomb() -> bytes:
    """A sheet that unpacks to a thousand times its size."""
    return zips.build({**base(), _SHEET1: b" " * (64 << 20)})


def lying_bomb() -> bytes:
    """Shared texts that say they are short and unpack to very much."""
    data = zips.build({**base(), "xl/sharedStrings.xml": b" " * (64 << 20)})
    return data.replace(struct.pack("<L", 64 << 20), struct.pack("<L", 1000))


def wrong_kind() -> bytes:
    """A package whose main part is a text document."""
    parts = base()
    swap(parts, _TYPES, "spreadsheetml.sheet.main", "wordprocessingml.document.main")
    return zips.build(parts)


def no_workbook() -> bytes:
    """A package whose main part is missing."""
    parts = base()
    del parts[_BOOK]
    return zips.build(parts)


def locked() -> bytes:
    """A workbook with protected structure."""
    parts = base()
    swap(parts, _BOOK, "<bookViews>", '<workbookProtection lockStructure="1"/><bookViews>')
    return zips.build(parts)


def foreign_sheet() -> bytes:
    """A filled sheet of the user's with one of our names."""
    return samples.plain_workbook("Refits", "FIT rows")


def foreign_name() -> bytes:
    """A name of the user's called like one of ours."""
    parts = base()
    swap(parts, _BOOK, "</sheets>", '</sheets><definedNames><definedName name="Fit_a_N">Refits!$B$2</definedName>'
         "</definedNames>")  # fmt: skip
    return zips.build(parts)


def encrypted_member() -> bytes:
    """A member with the zip's own encryption mark."""
    data = bytearray(zips.build(base()))
    at = data.find(b"PK\x01\x02")
    data[at + 8] |= 1
    return bytes(data)


def compound(stream: str) -> bytes:
    """The beginning of a compound file (MS-CFB) and the name of a stream in it."""
    return b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(504) + stream.encode("utf-16-le")


KEPT: dict[str, Callable[[], bytes]] = {
    each.__name__: each
    for each in (
        slicer_and_timeline, extended_chart, threaded_comments, date_in_format_zero, general_is_a_date, no_styles,
        bare_styles, wrong_counts, strict, prefixed, odd_places, capitals, utf16, custom_views_and_chain, macros,
        strange_names, dangling, streamed, zip64, leading_junk, leading_junk_zip64, commented, stored_with_extras,
    )
}  # fmt: skip

REFUSED: dict[str, tuple[Callable[[], bytes], str]] = {
    "nothing": (lambda: b"", "empty-file"),
    "text": (lambda: b"a,b\n1,2\n", "not-a-workbook"),
    "protected": (lambda: compound("EncryptedPackage"), "password-protected"),
    "older": (lambda: compound("Workbook"), "older-format"),
    "opendocument": (lambda: zips.build({"mimetype": b"x", "content.xml": b"<x/>"}), "opendocument"),
    "other zip": (lambda: zips.build({"a.txt": b"x"}), "no-content-types"),
    "cut off": (lambda: zips.build(base())[:-200], "not-a-workbook"),
    "signed": (signed, "signed"),
    "many formats": (many_formats, "too-many-formats"),
    "entity bomb": (entity_bomb, "part-with-doctype"),
    "outside entity": (outside_entity, "part-with-doctype"),
    "climbing name": (climbing_name, "zip-bad-name"),
    "same name twice": (same_name_twice, "duplicate-members"),
    "bomb": (bomb, "unpacks-too-big"),
    "lying bomb": (lying_bomb, "unpacks-too-big"),
    "wrong kind": (wrong_kind, "no-workbook-part"),
    "no workbook": (no_workbook, "no-workbook-part"),
    "locked": (locked, "locked-structure"),
    "foreign sheet": (foreign_sheet, "sheet-not-ours"),
    "foreign name": (foreign_name, "name-not-ours"),
    "encrypted member": (encrypted_member, "zip-encrypted"),
}  # fmt: skip


def main() -> int:
    """Put all of them through the corpus's questions and print the table."""
    tally = corpus.Tally()
    for name, make in KEPT.items():
        corpus.examine(name, make(), tally, audit=True)
    for name, (make, _) in REFUSED.items():
        corpus.examine(name, make(), tally)
    print(corpus.table(tally))
    return 0 if tally.sound else 1


if __name__ == "__main__":
    sys.exit(main())
