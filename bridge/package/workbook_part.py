"""The workbook part's list of sheets (ECMA-376 part 1, 18.2.19 and 18.2.20) and what counts by position in it."""

from __future__ import annotations

import re
from collections.abc import Iterator

from lxml import etree

from bridge.package.names import shift_scopes
from bridge.package.package import relation_id
from bridge.package.xml import OFFICE_RELS, child, children, in_kind, namespace, remove_element

_MOST_SHEET_ID = 65_534


def sheet_elements(workbook: etree._Element) -> list[etree._Element]:
    """The `sheet` elements in tab order."""
    holder = child(workbook, "sheets")
    return [] if holder is None else list(children(holder, "sheet"))


def position_of(workbook: etree._Element, relation: str) -> int:
    """The position of the sheet with this relationship id. Raises ValueError if there is none."""
    return [relation_id(element) for element in sheet_elements(workbook)].index(relation)


def append_sheet(workbook: etree._Element, tab: str, relation: str, strict: bool) -> None:
    """Add a sheet at the end: no position changes, so nothing that counts by position has to."""
    holder = child(workbook, "sheets")
    assert holder is not None
    relations = in_kind(OFFICE_RELS, strict)
    declared = relations in workbook.nsmap.values()
    element = etree.SubElement(
        holder, f"{{{namespace(workbook)}}}sheet", nsmap=None if declared else {"r": relations}
    )  # fmt: skip
    element.set("name", tab)
    element.set("sheetId", str(_fresh_sheet_id(workbook)))
    element.set(f"{{{relations}}}id", relation)


def _fresh_sheet_id(workbook: etree._Element) -> int:
    """A number no sheet has and no custom view points at."""
    taken = {int(number) for number in _sheet_ids(workbook) if re.fullmatch(r"\d{1,9}", number)}
    following = max(taken, default=0) + 1
    return following if following <= _MOST_SHEET_ID else next(n for n in range(1, _MOST_SHEET_ID) if n not in taken)


def _sheet_ids(workbook: etree._Element) -> Iterator[str]:
    for element in sheet_elements(workbook):
        yield element.get("sheetId", "")
    for view in _custom_views(workbook):
        yield view.get("activeSheetId", "")


def _custom_views(workbook: etree._Element) -> list[etree._Element]:
    holder = child(workbook, "customWorkbookViews")
    return [] if holder is None else list(children(holder, "customWorkbookView"))


def remove_sheet(workbook: etree._Element, relation: str) -> None:
    """Take a sheet out; the active tab, the first tab shown, scopes and custom views keep pointing at the same sheets.

    What pointed at the removed sheet points at its visible neighbour.
    """
    position = position_of(workbook, relation)
    gone = sheet_elements(workbook)[position]
    remove_element(gone)
    shift_scopes(workbook, position)
    left = sheet_elements(workbook)
    neighbour = _visible_near(left, position)
    for view in _views(workbook):
        for name in ("activeTab", "firstSheet"):
            _shift(view, name, position, neighbour, len(left))
    for view in _custom_views(workbook):
        if view.get("activeSheetId") == gone.get("sheetId") and left:
            view.set("activeSheetId", left[neighbour].get("sheetId", ""))


def _views(workbook: etree._Element) -> list[etree._Element]:
    holder = child(workbook, "bookViews")
    return [] if holder is None else list(children(holder, "workbookView"))


def _shift(view: etree._Element, name: str, removed: int, neighbour: int, last: int) -> None:
    """Mend a position after a removal; one that pointed at no sheet (beyond `last`) stays as it was."""
    text = view.get(name, "")
    if not re.fullmatch(r"\d{1,9}", text) or not removed <= int(text) <= last:
        return
    view.set(name, str(neighbour if int(text) == removed else int(text) - 1))


def _visible_near(elements: list[etree._Element], position: int) -> int:
    """The visible sheet nearest to `position`, those before it first; 0 if there is none."""
    order = [*range(min(position, len(elements)) - 1, -1, -1), *range(position, len(elements))]
    return next((at for at in order if is_visible(elements[at])), 0)


def is_visible(element: etree._Element) -> bool:
    """Whether a sheet's tab can be seen."""
    return element.get("state", "visible") == "visible"
