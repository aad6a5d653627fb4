"""Defined names (ECMA-376 part 1, 18.2.5 and 18.2.6): reading them, writing them, and which sheets they mention."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from lxml import etree

from bridge.package.xml import child, children, insert_in_order, legal, namespace, remove_element

PRINT_AREA = "_xlnm.Print_Area"
PRINT_TITLES = "_xlnm.Print_Titles"
FILTER = "_xlnm._FilterDatabase"

# The sequence of CT_Workbook (18.2.27).
WORKBOOK_ORDER = (
    "fileVersion",
    "fileSharing",
    "workbookPr",
    "workbookProtection",
    "bookViews",
    "sheets",
    "functionGroups",
    "externalReferences",
    "definedNames",
    "calcPr",
    "oleSize",
    "customWorkbookViews",
    "pivotCaches",
    "smartTagPr",
    "smartTagTypes",
    "webPublishing",
    "fileRecoveryPr",
    "webPublishObjects",
    "extLst",
)


@dataclass(frozen=True, slots=True)
class Name:
    """A defined name. `scope` is the position of the sheet it belongs to, None for the whole workbook."""

    name: str
    refers_to: str
    scope: int | None = None
    hidden: bool = False
    comment: str = ""

    @property
    def key(self) -> tuple[str, int | None]:
        """What must be unique: the name (case aside) within its scope."""
        return self.name.casefold(), self.scope


def elements(workbook: etree._Element) -> Iterator[etree._Element]:
    """The `definedName` elements of the workbook's root element."""
    holder = child(workbook, "definedNames")
    return iter(()) if holder is None else children(holder, "definedName")


def scope_of(element: etree._Element) -> int | None:
    """The position a name's element is scoped to; None for the workbook (or where the position is no number)."""
    text = element.get("localSheetId")
    return int(text) if text is not None and text.strip().isdecimal() and len(text) < 9 else None


def read_name(element: etree._Element) -> Name:
    """One element as a value."""
    return Name(
        element.get("name", ""),
        "".join(str(text) for text in element.itertext()),
        scope_of(element),
        element.get("hidden") in ("1", "true", "on"),
        element.get("comment", ""),
    )


def read_names(workbook: etree._Element) -> tuple[Name, ...]:
    """All defined names, in order."""
    return tuple(read_name(element) for element in elements(workbook))


def append_names(workbook: etree._Element, names: Iterable[Name]) -> None:
    """Add names at the end of the list, which is made where the schema wants it if there is none."""
    names = list(names)
    holder = child(workbook, "definedNames")
    if holder is None and names:
        holder = etree.Element(f"{{{namespace(workbook)}}}definedNames", nsmap=None)
        insert_in_order(workbook, holder, WORKBOOK_ORDER)
    for name in names:
        assert holder is not None
        holder.append(_element(workbook, name))


def _element(workbook: etree._Element, name: Name) -> etree._Element:
    element = etree.Element(f"{{{namespace(workbook)}}}definedName", {"name": name.name})
    if name.comment:
        element.set("comment", legal(name.comment)[:255])
    if name.scope is not None:
        element.set("localSheetId", str(name.scope))
    if name.hidden:
        element.set("hidden", "1")
    element.text = legal(name.refers_to)
    return element


def drop_names(workbook: etree._Element, keys: set[tuple[str, int | None]]) -> None:
    """Take out the names with these keys; the emptied list stays until `drop_empty_list`."""
    for element in list(elements(workbook)):
        if read_name(element).key in keys:
            remove_element(element)


def drop_empty_list(workbook: etree._Element) -> None:
    """Take out the list of names if it has none."""
    holder = child(workbook, "definedNames")
    if holder is not None and len(holder) == 0:
        remove_element(holder)


# A quoted sheet, a text literal (which may look like a sheet), a sheet that needs no quotes.
_SHEET = re.compile(r"""'((?:[^']|'')+)'!|"(?:[^"]|"")*"|([^\s'!(),;:+\-*/^&=<>"{}]+)!""")


def sheets_mentioned(refers_to: str) -> tuple[str, ...]:
    """The sheets a formula's references name, as their tabs read, in order; `#REF!` names none."""
    found = []
    for match in _SHEET.finditer(refers_to):
        name = match[1].replace("''", "'") if match[1] else match[2]
        if name and name != "#REF":
            found.append(name)
    return tuple(found)


def without_sheets(refers_to: str) -> str:
    """A reference's cells alone: `'fit rows'!$A$1:$C$9` becomes `A1:C9`."""
    cells = _SHEET.sub(lambda match: "" if match[1] or match[2] else match[0], refers_to)
    return cells.replace("$", "").replace(" ", "")


def shift_scopes(workbook: etree._Element, removed: int) -> None:
    """After the sheet at position `removed` went: its own names go, later scopes move up by one."""
    for element in list(elements(workbook)):
        scope = scope_of(element)
        if scope == removed:
            remove_element(element)
        elif scope is not None and scope > removed:
            element.set("localSheetId", str(scope - 1))


# 18.2.5: letters, digits, periods and underscores; not a cell address, not R or C.
_VALID = re.compile(r"[^\W\d]|[_\\]")
_REST = re.compile(r"(?:\w|[._\\?])*\Z")
_A1 = re.compile(r"\A[A-Za-z]{1,3}[0-9]{1,7}\Z")
_R1C1 = re.compile(r"\A[Rr][0-9]*(?:[Cc][0-9]*)?\Z|\A[Cc][0-9]*\Z")


def is_valid(name: str) -> bool:
    """Whether a text may be a defined name: at most 255 characters and nothing that reads as an address."""
    return (
        0 < len(name) <= 255
        and _VALID.match(name) is not None
        and _REST.match(name[1:]) is not None
        and _A1.match(name) is None
        and _R1C1.match(name) is None
        and name.casefold() not in ("true", "false")
    )
