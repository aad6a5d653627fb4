"""XML as the packages of spreadsheets use it: safe parsing, namespaces of both kinds, escaping.

No entity is ever expanded and no document type declaration is accepted (ECMA-376 part 2 forbids them in parts).
"""

from __future__ import annotations

import re
from collections.abc import Iterator

from lxml import etree

from bridge.messages import FileRefused, say
from bridge.package.limits import Limits

MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
OFFICE_RELS = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
PACKAGE_RELS = "http://schemas.openxmlformats.org/package/2006/relationships"
CONTENT_TYPES = "http://schemas.openxmlformats.org/package/2006/content-types"
DRAWING = "http://schemas.openxmlformats.org/drawingml/2006/spreadsheetDrawing"
DRAWING_MAIN = "http://schemas.openxmlformats.org/drawingml/2006/main"
CHART = "http://schemas.openxmlformats.org/drawingml/2006/chart"
XML = "http://www.w3.org/XML/1998/namespace"

STRICT_MAIN = "http://purl.oclc.org/ooxml/spreadsheetml/main"
# Transitional -> strict (ECMA-376 part 1 against part 4). Package-level namespaces are the same in both.
_STRICT = {
    MAIN: STRICT_MAIN,
    OFFICE_RELS: "http://purl.oclc.org/ooxml/officeDocument/relationships",
    DRAWING: "http://purl.oclc.org/ooxml/drawingml/spreadsheetDrawing",
    DRAWING_MAIN: "http://purl.oclc.org/ooxml/drawingml/main",
    CHART: "http://purl.oclc.org/ooxml/drawingml/chart",
}
_TRANSITIONAL = {strict: transitional for transitional, strict in _STRICT.items()}

DECLARATION = '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n'


def in_kind(text: str, strict: bool) -> str:
    """Namespaces and relationship types of `text`, written as transitional, in the package's own kind."""
    if strict:
        for transitional, purl in _STRICT.items():
            text = text.replace(transitional, purl)
    return text


def transitional(uri: str) -> str:
    """A namespace or relationship type of either kind, as the transitional kind writes it."""
    for strict, other in _TRANSITIONAL.items():
        if uri.startswith(strict):
            return other + uri[len(strict) :]
    return uri


def parse(data: bytes, part: str, limits: Limits) -> etree._Element:
    """The root element of a part.

    Raises FileRefused: no XML, beyond the limits, with a document type, or in an encoding parts may not have.
    """
    text = as_utf8(data, part)
    nodes = text.count(b"<") + text.count(b'="') + text.count(b"='")
    if len(text) > limits.part or nodes > limits.nodes:
        raise FileRefused(say("unpacks-too-big", member=part))
    if b"<!DOCTYPE" in text or b"<!ENTITY" in text:
        raise FileRefused(say("part-with-doctype", part=part))
    parser = etree.XMLParser(resolve_entities=False, no_network=True, load_dtd=False, huge_tree=False)
    try:
        return etree.fromstring(text, parser)
    except (etree.XMLSyntaxError, ValueError) as error:
        raise FileRefused(say("part-damaged", part=part, detail="its XML cannot be read")) from error


_ENCODING = re.compile(rb"""^<\?xml[^>]*?\sencoding\s*=\s*["']([^"']*)["']""")
# Only encodings in which the text `<!DOCTYPE` looks as it does in ASCII.
_KNOWN = frozenset({b"utf-8", b"utf8", b"us-ascii", b"ascii", b"iso-8859-1", b"windows-1252", b"latin1"})


def as_utf8(data: bytes, part: str) -> bytes:
    """A part's text in an encoding that contains ASCII; UTF-16 is turned into UTF-8. Raises FileRefused for others."""
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        try:
            text = data.decode("utf-16")
        except UnicodeDecodeError as error:
            raise FileRefused(say("part-damaged", part=part, detail="its XML cannot be read")) from error
        return re.sub(r"^<\?xml[^>]*\?>", "", text).encode("utf-8", "replace")
    data = data.removeprefix(b"\xef\xbb\xbf")
    declared = _ENCODING.match(data)
    if declared and declared[1].strip().lower() not in _KNOWN:
        raise FileRefused(say("part-damaged", part=part, detail="its text is in an encoding workbooks may not use"))
    return data


def serialise(root: etree._Element) -> bytes:
    """A part's bytes, in UTF-8 with a declaration."""
    return etree.tostring(root, xml_declaration=True, encoding="UTF-8", standalone=True)


def same_meaning(one: etree._Element, other: etree._Element) -> bool:
    """Whether two parts have the same canonical form (C14N 1.0)."""
    try:
        return etree.tostring(one, method="c14n") == etree.tostring(other, method="c14n")
    except etree.C14NError:  # a relative namespace has no canonical form
        return etree.tostring(one) == etree.tostring(other)


def local(element: etree._Element) -> str:
    """An element's name without its namespace; empty for comments and processing instructions."""
    return etree.QName(element).localname if isinstance(element.tag, str) else ""


def namespace(element: etree._Element) -> str:
    """An element's namespace."""
    return etree.QName(element).namespace or ""


def children(parent: etree._Element, name: str = "*") -> Iterator[etree._Element]:
    """Child elements in the parent's own namespace, all or those called `name`."""
    return parent.iterchildren(f"{{{namespace(parent)}}}{name}")


def child(parent: etree._Element, name: str) -> etree._Element | None:
    """The first child element called `name` in the parent's own namespace."""
    return next(children(parent, name), None)


def insert_in_order(parent: etree._Element, element: etree._Element, order: tuple[str, ...]) -> None:
    """Put `element` among the parent's children at the place the schema's sequence `order` gives it.

    Elements the sequence does not know (alternate content) keep their place before it.
    """
    later = set(order[order.index(local(element)) + 1 :])
    for position, sibling in enumerate(parent):
        if local(sibling) in later:
            parent.insert(position, element)
            return
    parent.append(element)


def remove_element(element: etree._Element) -> None:
    """Take an element out, leaving the text after it where it is."""
    parent, before = element.getparent(), element.getprevious()
    if parent is None:
        return
    if element.tail:
        if before is None:
            parent.text = (parent.text or "") + element.tail
        else:
            before.tail = (before.tail or "") + element.tail
    parent.remove(element)


def relation_attributes(element: etree._Element) -> Iterator[str]:
    """The relationship ids that an element and its descendants use (`r:id`, `r:embed`, `r:link`, ...)."""
    for each in element.iter():
        for name, value in each.attrib.items():
            if str(name).startswith("{") and transitional(etree.QName(name).namespace or "") == OFFICE_RELS:
                yield str(value)


# --- text ------------------------------------------------------------------------------------------------------

# A text that looks like an escape of ST_Xstring (22.9.2.19) must be escaped itself, overlapping ones too.
_LOOKS_ESCAPED = re.compile(r"_(?=x[0-9A-Fa-f]{4}_)")
_ILLEGAL = re.compile("[\x00-\x08\x0b-\x1f\ufffe\uffff]")
_SURROGATE = re.compile("[\ud800-\udfff]")


def _markup(text: str) -> str:
    return text.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")


def legal(text: str) -> str:
    """A text in which characters that XML may not hold are written `_xHHHH_` (ST_Xstring, 22.9.2.19)."""
    text = _SURROGATE.sub("\N{REPLACEMENT CHARACTER}", text)
    return _ILLEGAL.sub(lambda found: f"_x{ord(found.group()):04X}_", text)


def xstring(text: str) -> str:
    """A text as element content of type ST_Xstring: characters XML may not hold are written `_xHHHH_`."""
    if "_x" in text:
        text = _LOOKS_ESCAPED.sub("_x005F_", text)
    return _markup(legal(text))


def attribute(text: str) -> str:
    """A text as an attribute's value (in double quotes) of type ST_Xstring."""
    return xstring(text).replace('"', "&quot;").replace("\n", "&#10;").replace("\t", "&#9;")


def formula(text: str) -> str:
    """A formula as element content. What merely looks like an escape stays: programs do not agree on reading it."""
    return _markup(legal(text))


def plain(text: str) -> str:
    """A text as element content where no escape exists (DrawingML): illegal characters become spaces."""
    return _markup(_ILLEGAL.sub(" ", _SURROGATE.sub("\N{REPLACEMENT CHARACTER}", text)))


def plain_attribute(text: str) -> str:
    """`plain` for an attribute's value in double quotes."""
    return plain(text).replace('"', "&quot;").replace("\n", "&#10;").replace("\t", "&#9;")
