"""What a graft did to the user's part of a workbook: nothing, or a list of it.

Compares two packages with the standard library and lxml alone.
"""

from __future__ import annotations

import hashlib
import re
from collections import Counter
from collections.abc import Iterator

from lxml import etree

from tests.package import zips

OUR_TABS = {"fit request", "fit rows"}


def _shared(parts: dict[str, bytes]) -> dict[str, str]:
    """The parts that may be amended: role -> name in lower case."""
    book = zips.workbook_part(parts)
    folder, _, base = book.rpartition("/")
    found = {
        "types": "[content_types].xml",
        "workbook": book.lower(),
        "relations": f"{folder}/_rels/{base}.rels".lstrip("/").lower(),
    }
    for kind, target, _ in zips.relations_of(parts, book).values():
        if kind in ("styles", "calcChain"):
            found.setdefault(kind, target.lower())
    return found


def changed_members(before: bytes, after: bytes) -> list[str]:
    """Members that are lost or whose packed bytes, checksum, method or time differ, the shared parts aside."""
    shared = set(_shared(zips.members(before)).values())
    old, new = zips.raw(before), zips.raw(after)
    return [f"{name} is {'changed' if name in new else 'lost'}" for name in old
            if name.lstrip("/").lower() not in shared and new.get(name) != old[name]]  # fmt: skip


def changed_shared(before: bytes, after: bytes, our_tabs: set[str] = OUR_TABS) -> list[str]:
    """What of the user's differs in the shared parts."""
    old, new = zips.members(before), zips.members(after)
    shared = _shared(old)
    out = [*_types(old, new), *_styles(old, new, shared.get("styles"))]
    for role in ("workbook", "relations"):
        was, now = _root(old, shared[role]), _root(new, shared[role])
        if was is None or now is None:
            out.append(f"{role} is lost")
            continue
        if role == "workbook":
            _without_ours(now, our_tabs)
            _without_ours(was, set())
        else:
            _without_new_relations(was, now)
        _without_positions(was)
        _without_positions(now)
        if _canonical(was) != _canonical(now):
            out.append(f"the rest of {role} differs")
    return out + _meaning(old, new)  # the positions left out are compared there, by what they point at


def changed_after_strip(before: bytes, after: bytes) -> list[str]:
    """What differs from the original after our sheets were put in and taken out again."""
    old, new = zips.members(before), zips.members(after)
    shared = set(_shared(old).values())
    out = changed_members(before, after)
    out += [f"{name} is left over" for name in new if name not in old]
    for name in old:
        if name.lstrip("/").lower() in shared and name in new and old[name] != new[name]:
            was, now = etree.fromstring(old[name]), etree.fromstring(new[name])
            _without_positions(was, only_first=True)
            _without_positions(now, only_first=True)
            if _canonical(was) != _canonical(now):
                out.append(f"{name} differs")
        elif name.lstrip("/").lower() in shared and name not in new:
            out.append(f"{name} is lost")
    return out


def _root(parts: dict[str, bytes], name: str | None) -> etree._Element | None:
    data = next((content for each, content in parts.items() if each.lstrip("/").lower() == name), None)
    return None if data is None else etree.fromstring(data)


def _canonical(root: etree._Element) -> bytes:
    return etree.tostring(root, method="c14n", exclusive=True)


def _take(element: etree._Element) -> None:
    parent = element.getparent()
    assert parent is not None
    parent.remove(element)


def _without_ours(workbook: etree._Element, our_tabs: set[str]) -> None:
    tabs = [each.get("name") for each in workbook.iter("{*}sheet")]
    for element in list(workbook.iter("{*}sheet")):
        if element.get("name") in our_tabs:
            _take(element)
    for element in list(workbook.iter("{*}definedName")):
        scope = element.get("localSheetId")
        scoped_to_ours = (
            scope is not None and scope.isdecimal() and int(scope) < len(tabs) and tabs[int(scope)] in our_tabs
        )
        if re.match(r"fit_|_savefit\.", element.get("name", "")) or scoped_to_ours:
            _take(element)
    for element in list(workbook.iter("{*}definedNames")):
        if len(element) == 0:
            _take(element)


def _without_positions(workbook: etree._Element, only_first: bool = False) -> None:
    """Drop what counts by position; with `only_first`, only where it says the first sheet, which is the default."""
    for element in workbook.iter("{*}workbookView", "{*}definedName"):
        for name in ("activeTab", "firstSheet", "localSheetId"):
            if not only_first or (name != "localSheetId" and element.get(name) == "0"):
                element.attrib.pop(name, None)


def _without_new_relations(was: etree._Element, now: etree._Element) -> None:
    known = {each.get("Id") for each in was.iter("{*}Relationship")}
    for element in list(now.iter("{*}Relationship")):
        if element.get("Id") not in known:
            _take(element)


def _types(old: dict[str, bytes], new: dict[str, bytes]) -> Iterator[str]:
    def rows(parts: dict[str, bytes]) -> Counter[tuple[str | None, ...]]:
        root = etree.fromstring(zips.part(parts, "[Content_Types].xml"))
        return Counter(
            (str(e.tag), e.get("PartName"), e.get("Extension"), e.get("ContentType")) for e in root.iter("{*}*")
        )

    if rows(old) - rows(new):
        yield f"content types are lost: {rows(old) - rows(new)}"


def _styles(old: dict[str, bytes], new: dict[str, bytes], name: str | None) -> Iterator[str]:
    was, now = _root(old, name), _root(new, name)
    if was is None:
        return
    assert now is not None
    lists = {etree.QName(each).localname: each for each in now if isinstance(each.tag, str)}
    grown = ("numFmts", "fonts", "fills", "borders", "cellStyleXfs", "cellXfs", "cellStyles", "dxfs")
    for holder in was:
        if not isinstance(holder.tag, str):
            continue
        kind = etree.QName(holder).localname
        mine = lists.get(kind)
        if mine is None:
            yield f"styles: {kind} is lost"
        elif kind in grown:
            before, after = [_canonical(each) for each in holder], [_canonical(each) for each in mine]
            if after[: len(before)] != before:
                yield f"styles: the user's {kind} are no prefix of the new ones"
        elif _canonical(holder) != _canonical(mine):
            yield f"styles: {kind} differs"


def _meaning(old: dict[str, bytes], new: dict[str, bytes]) -> list[str]:
    """Sheet order, the active sheet, what names are scoped to, what custom views open."""
    was, now = _points(old), _points(new)
    tabs = [tab for tab in now["tabs"] if tab in was["tabs"]]
    out = [] if tabs == was["tabs"] else [f"the sheets' order is {tabs}, it was {was['tabs']}"]
    for what in ("active", "first", "views"):
        if was[what] != now[what]:
            out.append(f"{what}: {now[what]} instead of {was[what]}")
    if Counter(was["names"]) - Counter(now["names"]):
        out.append(f"names: {Counter(was['names']) - Counter(now['names'])}")
    return out


def _points(parts: dict[str, bytes]) -> dict[str, list]:  # type: ignore[type-arg]
    root = etree.fromstring(zips.part(parts, zips.workbook_part(parts)))
    tabs = [tab for tab, _ in zips.sheet_parts(parts)]
    ids = {each.get("sheetId"): each.get("name") for each in root.iter("{*}sheet")}

    def at(text: str | None) -> str | None:
        return tabs[int(text)] if text is not None and text.isdecimal() and int(text) < len(tabs) else text

    views = list(root.iter("{*}workbookView"))
    return {
        "tabs": tabs,
        "active": [at(each.get("activeTab", "0")) for each in views],
        "first": [at(each.get("firstSheet", "0")) for each in views],
        "views": [ids.get(each.get("activeSheetId")) for each in root.iter("{*}customWorkbookView")],
        "names": [
            (each.get("name"), at(each.get("localSheetId")), "".join(each.itertext()))
            for each in root.iter("{*}definedName")
        ],
    }


# --- census --------------------------------------------------------------------------------------------------------

_SHEET_KINDS = (
    "conditionalFormatting", "dataValidations", "sparklineGroups", "ignoredErrors", "protectedRanges", "tableParts",
    "customSheetViews", "AlternateContent", "sheetProtection", "hyperlinks", "mergeCells", "autoFilter",
    "legacyDrawing",
)  # fmt: skip
_BOOK_KINDS = ("workbookProtection", "fileSharing", "ext", "calcPr", "pivotCache", "externalReference", "workbookPr")


def census(data: bytes, our_tabs: set[str] = OUR_TABS) -> Counter[tuple[str, str]]:
    """How often each kind of content occurs, as (kind, hash of its content): parts by the relationship that leads to
    them, elements of the user's sheets, stored values of formulas, names, elements of the workbook."""
    parts = zips.members(data)
    ours = _closure(parts, [part for tab, part in zips.sheet_parts(parts) if tab in our_tabs])
    found: Counter[tuple[str, str]] = Counter()
    for source in ["", *parts]:
        if source in ours:
            continue
        try:
            relations = zips.relations_of(parts, source)
        except etree.XMLSyntaxError:
            continue
        for kind, target, inside in relations.values():
            content = (
                next((c for n, c in parts.items() if n.lower() == target.lower()), b"") if inside else target.encode()
            )
            if target not in ours and kind not in ("styles", "officeDocument", "calcChain"):
                found[kind, _hash(content)] += 1
    for tab, part in zips.sheet_parts(parts):
        if tab not in our_tabs:
            _count_elements(found, parts, part, _SHEET_KINDS)
    _count_elements(found, parts, zips.workbook_part(parts), _BOOK_KINDS)
    return found


def _closure(parts: dict[str, bytes], starts: list[str]) -> set[str]:
    found, waiting = set(), list(starts)
    while waiting:
        part = waiting.pop()
        if part not in found:
            found.add(part)
            waiting += [target for _, target, inside in zips.relations_of(parts, part).values() if inside]
    return found


def _count_elements(
    found: Counter[tuple[str, str]], parts: dict[str, bytes], part: str, kinds: tuple[str, ...]
) -> None:
    data = next((content for name, content in parts.items() if name.lower() == part.lower()), None)
    if data is None:
        return
    try:
        root = etree.fromstring(data, etree.XMLParser(resolve_entities=False, huge_tree=True))
    except etree.XMLSyntaxError:
        return
    for element in root.iter("{*}*"):
        kind = etree.QName(element).localname
        if kind in kinds:
            found[kind, _hash(_canonical(element))] += 1
        elif kind == "f":
            value = element.getnext()
            found["cached formula value", _hash(b"" if value is None else _canonical(value))] += 1


def _hash(content: bytes) -> str:
    return hashlib.sha256(content).hexdigest()[:16]
