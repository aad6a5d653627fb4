"""XML: what is refused, what is escaped, where elements go."""

from __future__ import annotations

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st
from lxml import etree

from bridge.messages import FileRefused
from bridge.package import xml
from bridge.package.limits import Limits
from bridge.package.relationships import relationships_part, relative, resolve

LIMITS = Limits()


def decoded(text: str) -> str:
    """ST_Xstring read as ECMA-376 part 1, 22.9.2.19 says: `_xHHHH_` stands for the character, left to right."""
    return re.sub(r"_x([0-9A-Fa-f]{4})_", lambda found: chr(int(found[1], 16)), text)


@given(st.text())
def test_any_text_reads_back_from_an_element(text: str) -> None:
    element = etree.fromstring(f"<t>{xml.xstring(text)}</t>".encode())
    assert decoded("".join(element.itertext())) == re.sub("[\ud800-\udfff]", "\ufffd", text)


@given(st.text())
def test_any_text_reads_back_from_an_attribute(text: str) -> None:
    element = etree.fromstring(f'<t a="{xml.attribute(text)}"/>'.encode())
    assert decoded(element.get("a", "")) == re.sub("[\ud800-\udfff]", "\ufffd", text)


@given(st.text(st.characters(codec="utf-16", categories=["L", "N", "P", "S", "Zs", "Cc"])))
def test_any_text_makes_sound_xml_everywhere(text: str) -> None:
    for escape in (xml.xstring, xml.formula, xml.plain):
        etree.fromstring(f"<t>{escape(text)}</t>".encode())
    etree.fromstring(f'<t a="{xml.plain_attribute(text)}"/>'.encode())


@pytest.mark.parametrize(
    ("text", "escaped"),
    [
        ("a & b < c", "a &amp; b &lt; c"),
        ("bell \x07", "bell _x0007_"),
        ("line\r\n", "line_x000D_\n"),
        ("_x0041_", "_x005F_x0041_"),
        ("_x0041_x0042_", "_x005F_x0041_x005F_x0042_"),
        ("_xray_", "_xray_"),
        ("=1+1", "=1+1"),
    ],
)
def test_escapes(text: str, escaped: str) -> None:
    assert xml.xstring(text) == escaped


def test_a_formula_keeps_what_looks_like_an_escape() -> None:
    assert xml.formula('"_x0041_"&A1') == '"_x0041_"&amp;A1'


@pytest.mark.parametrize(
    "data",
    [
        b'<!DOCTYPE a [<!ENTITY b "c">]><a>&b;</a>',
        b'<?xml version="1.0"?><!DOCTYPE a SYSTEM "http://example.org/a.dtd"><a/>',
        '<!DOCTYPE a [<!ENTITY b SYSTEM "file:///etc/hostname">]><a>&b;</a>'.encode("utf-16"),
    ],
)
def test_document_types_are_refused(data: bytes) -> None:
    with pytest.raises(FileRefused) as refusal:
        xml.parse(data, "x.xml", LIMITS)
    assert refusal.value.problem.key == "part-with-doctype"


@pytest.mark.parametrize(
    "data",
    [b"", b"text", b"<a>", b"<a></b>", b"<a/><b/>", b'<?xml version="1.0" encoding="UTF-7"?><a/>', b"\xff\xfe\x00",
     b'<?xml version="1.0" encoding="IBM037"?><a/>', b"<a>&unknown;</a>", b"<a>" * 300 + b"</a>" * 300],
)  # fmt: skip
def test_damaged_xml_is_refused(data: bytes) -> None:
    with pytest.raises(FileRefused) as refusal:
        xml.parse(data, "x.xml", LIMITS)
    assert refusal.value.problem.key == "part-damaged"


@pytest.mark.parametrize("fill", [b"<a/>", b'<a b=""/>', b"<a b='' c='' d=''/>"])
def test_more_nodes_than_a_part_may_have_are_refused_before_the_tree_is_built(fill: bytes) -> None:
    with pytest.raises(FileRefused) as refusal:
        xml.parse(b"<r>" + fill * 1000 + b"</r>", "x.xml", Limits(nodes=900))
    assert refusal.value.problem.key == "unpacks-too-big"


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "latin-1"])
def test_encodings(encoding: str) -> None:
    declared = {"utf-8-sig": "utf-8", "latin-1": "iso-8859-1"}.get(encoding, encoding)
    data = f'<?xml version="1.0" encoding="{declared}"?><a b="é"/>'.encode(encoding)
    assert xml.parse(data, "x.xml", LIMITS).get("b") == "é"


def test_elements_go_where_the_sequence_wants_them() -> None:
    order = ("one", "two", "three", "four")
    root = etree.fromstring('<r xmlns="n"><one/><other xmlns="m"/><four/></r>')
    xml.insert_in_order(root, etree.Element("{n}three"), order)
    xml.insert_in_order(root, etree.Element("{n}two"), order)
    assert [xml.local(each) for each in root] == ["one", "other", "two", "three", "four"]


def test_removing_an_element_leaves_the_text_after_it() -> None:
    root = etree.fromstring("<r>a<x/>b<y/>c</r>")
    xml.remove_element(root[1])
    xml.remove_element(root[0])
    assert etree.tostring(root) == b"<r>abc</r>"


def test_the_same_meaning_is_seen_through_prefixes_of_attributes_order_and_quotes() -> None:
    one = etree.fromstring("<a xmlns='urn:n' b='1' c='2'/>")
    assert xml.same_meaning(one, etree.fromstring('<a c="2" xmlns="urn:n" b="1"></a>'))
    assert not xml.same_meaning(one, etree.fromstring('<a c="2" xmlns="urn:n" b="2"/>'))
    relative_namespace = etree.fromstring("<a xmlns='../n'/>")
    assert xml.same_meaning(relative_namespace, relative_namespace)


# --- relationships -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("source", "target", "part"),
    [
        ("xl/workbook.xml", "worksheets/sheet1.xml", "xl/worksheets/sheet1.xml"),
        ("xl/workbook.xml", "/xl/worksheets/sheet1.xml", "xl/worksheets/sheet1.xml"),
        ("xl/worksheets/sheet1.xml", "../drawings/drawing1.xml", "xl/drawings/drawing1.xml"),
        ("", "xl/workbook.xml", "xl/workbook.xml"),
        ("my data/book.xml", "my%20sheet.xml", "my data/my sheet.xml"),
        ("xl/workbook.xml", "worksheets\\sheet1.xml", "xl/worksheets/sheet1.xml"),
        ("xl/workbook.xml", "../../../etc/passwd", "etc/passwd"),
        ("xl/drawings/drawing1.xml", "#Sheet1!A1", "xl/drawings/drawing1.xml"),
    ],
)
def test_targets(source: str, target: str, part: str) -> None:
    assert resolve(source, target) == part


@given(
    st.sampled_from(["book.xml", "xl/book.xml", "a/b/c.xml"]), st.sampled_from(["x.xml", "xl/s/x.xml", "a/b/d/x.xml"])
)
def test_a_relative_target_leads_there(source: str, part: str) -> None:
    assert resolve(source, relative(source, part)) == part


@pytest.mark.parametrize(
    ("part", "its_relationships"),
    [("", "_rels/.rels"), ("book.xml", "_rels/book.xml.rels"), ("xl/book.xml", "xl/_rels/book.xml.rels")],
)
def test_relationship_parts(part: str, its_relationships: str) -> None:
    assert relationships_part(part) == its_relationships
