"""The calculation chain (ECMA-376 part 1, 18.6): our own sheets' entries leave it, the rest stays.

An entry for a cell that holds no formula any more is damage to some programs; a missing entry is rebuilt by all.
"""

from __future__ import annotations

from lxml import etree

from bridge.package.xml import children, remove_element


def without_sheets(root: etree._Element, sheet_ids: set[int]) -> bool:
    """Take the entries of these sheets out of the chain's root; False if nothing is left.

    An entry without a sheet id belongs to the sheet of the entry before it, so the id is put where that one went.
    """
    sheet: str | None = None  # whose entry this is
    inherited: str | None = None  # whose it would be without the removed ones
    level = False  # a removed entry began a new dependency level
    left = 0
    for entry in list(children(root, "c")):
        own = entry.get("i")
        sheet = sheet if own is None else own
        if sheet is not None and sheet.isdecimal() and int(sheet[:9]) in sheet_ids:
            level = level or entry.get("l") in ("1", "true")
            remove_element(entry)
            continue
        if own is None and sheet is not None and sheet != inherited:
            entry.set("i", sheet)
        if level:
            entry.set("l", "1")
        inherited, level, left = sheet, False, left + 1
    return left > 0
