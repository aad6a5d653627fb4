"""A worksheet's part without its rows: what it states around them, for laying the sheet out anew."""

from __future__ import annotations

import copy
import re
from collections.abc import Iterable, Iterator

from lxml import etree

from bridge.messages import FileRefused, say
from bridge.package import xml
from bridge.package.limits import Limits
from bridge.package.package import relation_id

A4 = "9"
_TRUE = ("1", "true", "on")
_MOST_COLUMNS = 1000
# Elements that are kept whole when a sheet is laid out anew.
_KEPT_ELEMENTS = (
    "sheetProtection",
    "protectedRanges",
    "headerFooter",
    "rowBreaks",
    "colBreaks",
    "customProperties",
    "legacyDrawing",
    "legacyDrawingHF",
    "picture",
)


_ROWS_BEGIN = re.compile(rb"<((?:[\w.-]+:)?)sheetData(?:\s[^>]*?)?(/?)>")
_ROWS_END = re.compile(rb"</(?:[\w.-]+:)?sheetData\s*>")


def without_rows(pieces: Iterable[bytes], part: str, limits: Limits) -> bytes:
    """A worksheet's text with its rows left out, so that a long sheet is never held as a tree or as a whole."""
    head, text, skipping, skipped = b"", b"", False, False
    for piece in pieces:
        text += piece
        if not skipped and not skipping:
            begin = _ROWS_BEGIN.search(text)
            if begin and begin[2]:
                skipped = True
            elif begin:
                head, text, skipping = text[: begin.end()], text[begin.end() :], True
        if skipping:
            end = _ROWS_END.search(text)
            if end:
                text, skipping, skipped = head + text[end.start() :], False, True
            else:
                text = text[-64:]
        if len(text) > limits.part:
            raise FileRefused(say("unpacks-too-big", member=part))
    return head + text if skipping else text


# --- elements ------------------------------------------------------------------------------------------------------


def _clean(element: etree._Element) -> str:
    """An element as text, free of extensions that the new part's root would have to announce."""
    holder = etree.Element("holder")
    inner = copy.deepcopy(element)
    inner.tail = None
    main = xml.namespace(element)
    for each in list(inner.iter()):
        if not isinstance(each.tag, str) or xml.namespace(each) != main:
            if each is not inner:
                xml.remove_element(each)
            continue
        for name in list(each.attrib):
            space = etree.QName(name).namespace
            if space and xml.transitional(space) != xml.OFFICE_RELS:
                del each.attrib[name]
    holder.append(inner)
    etree.cleanup_namespaces(holder)
    return etree.tostring(inner, encoding="unicode")


def fragments(root: etree._Element) -> dict[str, str]:
    """The elements that are kept whole, as text by local name."""
    found = {}
    for name in _KEPT_ELEMENTS:
        element = xml.child(root, name)
        if element is not None and _says_something(name, element):
            found[name] = _clean(element)
    return found


def _says_something(name: str, element: etree._Element) -> bool:
    """An empty header and footer is what programs write when there is none."""
    return name != "headerFooter" or any((text or "").strip() for text in element.itertext())


def outside_links(root: etree._Element) -> tuple[str, ...]:
    """The links that lead out of the workbook, as elements' texts."""
    holder = xml.child(root, "hyperlinks")
    links = () if holder is None else xml.children(holder, "hyperlink")
    return tuple(_clean(each) for each in links if relation_id(each))


def attribute(root: etree._Element, element: str, name: str) -> str:
    """An attribute of a child element; empty if there is none."""
    found = xml.child(root, element)
    return "" if found is None else found.get(name, "")


def _view(root: etree._Element) -> etree._Element | None:
    views = xml.child(root, "sheetViews")
    return None if views is None else xml.child(views, "sheetView")


def is_selected(root: etree._Element) -> bool:
    """Whether the sheet's tab is selected."""
    view = _view(root)
    return view is not None and view.get("tabSelected") in _TRUE


def zoom(root: etree._Element) -> str:
    """The zoom in per cent; empty where it is 100 or none is stated."""
    view = _view(root)
    text = "" if view is None else view.get("zoomScale", "")
    return text if text.isdecimal() and len(text) < 4 and 10 <= int(text) <= 400 and text != "100" else ""


def paper(root: etree._Element) -> str:
    """The paper size's number; empty for the program's default. A4 where the sheet says nothing of pages."""
    setup = xml.child(root, "pageSetup")
    if setup is None:
        return A4
    text = setup.get("paperSize", "")
    return text if text.isdecimal() and len(text) < 4 else ""


def custom_widths(root: etree._Element) -> Iterator[tuple[int, float]]:
    """Zero-based columns with a width of their own, and the width the file states."""
    holder = xml.child(root, "cols")
    for column in () if holder is None else xml.children(holder, "col"):
        try:
            first, last = int(column.get("min", "")), int(column.get("max", ""))
            width = float(column.get("width", ""))
        except ValueError:
            continue
        if column.get("customWidth") in _TRUE and 0 < width <= 255 and first <= last:
            for number in range(max(1, first), min(last, _MOST_COLUMNS) + 1):
                yield number - 1, width
