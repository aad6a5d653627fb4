"""What must hold in any sound package, and what public validators miss: `faults` lists what does not.

Written with the standard library and lxml alone. Each fault begins with its check's name; `tests/package/
test_invariants.py` seeds every one of them and expects it to be found.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field

from lxml import etree

from tests.package import zips

# Ids of built-in number formats, the locales' own ones included (ECMA-376 part 1, 18.8.30).
BUILT_IN = set(range(82))


@dataclass
class Opened:
    """A package taken apart."""

    parts: dict[str, bytes]
    book: str
    workbook: etree._Element
    sheets: list[tuple[str, str]]
    styles: etree._Element | None
    trees: dict[str, etree._Element] = field(default_factory=dict)

    def tree(self, part: str) -> etree._Element | None:
        """A part's root; None if missing or no XML."""
        if part not in self.trees:
            data = next((content for name, content in self.parts.items() if name.lower() == part.lower()), None)
            if data is None:
                return None
            try:
                self.trees[part] = etree.fromstring(data, etree.XMLParser(resolve_entities=False, huge_tree=True))
            except etree.XMLSyntaxError:
                return None
        return self.trees[part]

    def list_of(self, name: str) -> list[etree._Element]:
        """The items of a list of the styles part (alternatives count once)."""
        if self.styles is None:
            return []
        holder = next((each for each in self.styles if local(each) == name), None)
        return [] if holder is None else [each for each in holder if isinstance(each.tag, str)]


def local(element: etree._Element) -> str:
    return etree.QName(element).localname if isinstance(element.tag, str) else ""


def opened(data: bytes) -> Opened:
    parts = zips.members(data)
    book = zips.workbook_part(parts)
    workbook = etree.fromstring(zips.part(parts, book))
    relations = zips.relations_of(parts, book)
    styles_part = next((target for kind, target, _ in relations.values() if kind == "styles"), None)
    found = Opened(parts, book, workbook, zips.sheet_parts(parts), None)
    if styles_part:
        found.styles = found.tree(styles_part)
    return found


def faults(data: bytes) -> list[str]:
    """Everything wrong with a package, each as `check: what`."""
    package = opened(data)
    return [f"{name}: {what}" for name, check in CHECKS.items() for what in check(package)]


# --- styles --------------------------------------------------------------------------------------------------------


def _cell_formats(package: Opened) -> Iterator[str]:
    count = max(1, len(package.list_of("cellXfs")))
    for tab, part in package.sheets:
        root = package.tree(part)
        for element in () if root is None else root.iter("{*}c", "{*}row", "{*}col"):
            text = element.get("style" if local(element) == "col" else "s")
            if text is not None and not 0 <= int(text) < count:
                yield f"{tab}: {local(element)} {element.get('r') or element.get('min')} has format {text} of {count}"


def _highlight_formats(package: Opened) -> Iterator[str]:
    count = len(package.list_of("dxfs"))
    for tab, part in package.sheets:
        root = package.tree(part)
        for element in () if root is None else root.iter("{*}cfRule"):
            text = element.get("dxfId")
            if text is not None and not 0 <= int(text) < count:
                yield f"{tab}: dxfId {text} of {count}"


def _format_pieces(package: Opened) -> Iterator[str]:
    sizes = {name: len(package.list_of(name)) for name in ("fonts", "fills", "borders", "cellStyleXfs")}
    known = BUILT_IN | {int(each.get("numFmtId", "-1")) for each in package.list_of("numFmts")}
    limits = {"fontId": sizes["fonts"], "fillId": sizes["fills"], "borderId": sizes["borders"]}
    for number, xf in enumerate(package.list_of("cellXfs")):
        for name, limit in limits.items():
            text = xf.get(name)
            if text is not None and not 0 <= int(text) < limit:
                yield f"format {number}: {name} {text} of {limit}"
        if xf.get("numFmtId") is not None and int(xf.get("numFmtId", "")) not in known:
            yield f"format {number}: numFmtId {xf.get('numFmtId')}"
        if xf.get("xfId") is not None and sizes["cellStyleXfs"] and int(xf.get("xfId", "")) >= sizes["cellStyleXfs"]:
            yield f"format {number}: xfId {xf.get('xfId')} of {sizes['cellStyleXfs']}"


def _number_format_ids(package: Opened) -> Iterator[str]:
    for number, times in Counter(each.get("numFmtId") for each in package.list_of("numFmts")).items():
        if times > 1:
            yield f"numFmtId {number} is given {times} times"


# --- workbook ------------------------------------------------------------------------------------------------------


def _positions(package: Opened) -> Iterator[str]:
    count = len(package.sheets)
    for name in package.workbook.iter("{*}definedName"):
        scope = name.get("localSheetId")
        if scope is not None and not 0 <= int(scope) < count:
            yield f"localSheetId {scope} of {name.get('name')}"
    for view in package.workbook.iter("{*}workbookView"):
        for attribute in ("activeTab", "firstSheet"):
            text = view.get(attribute)
            if text is not None and not 0 <= int(text) < count:
                yield f"{attribute} {text} of {count}"


def _names(package: Opened) -> Iterator[str]:
    names = [(each.get("name", ""), each.get("localSheetId")) for each in package.workbook.iter("{*}definedName")]
    for (name, scope), times in Counter((name.casefold(), scope) for name, scope in names).items():
        if times > 1:
            yield f"{name} (scope {scope}) is defined {times} times"
    for name, _ in names:
        wrong = not re.fullmatch(r"(?:[^\W\d]|[_\\])(?:\w|[._\\?])*", name) or len(name) > 255
        if wrong or re.fullmatch(r"[A-Za-z]{1,3}[0-9]{1,7}|[RrCc]|[Rr][0-9]*[Cc][0-9]*", name):
            yield f"{name!r} is no valid name"


def _tabs(package: Opened) -> Iterator[str]:
    for tab, times in Counter(tab.casefold() for tab, _ in package.sheets).items():
        if times > 1:
            yield f"{times} tabs say {tab!r}"
    for tab, _ in package.sheets:
        if not 0 < len(tab) <= 31 or re.search(r"[\[\]:*?/\\]", tab) or tab[0] == "'" or tab[-1] == "'":
            yield f"the tab {tab!r} is not allowed"


def _sheet_ids(package: Opened) -> Iterator[str]:
    ids = Counter(each.get("sheetId") for each in package.workbook.iter("{*}sheet"))
    for number, times in ids.items():
        if times > 1:
            yield f"sheetId {number} is given {times} times"
    for view in package.workbook.iter("{*}customWorkbookView"):
        if view.get("activeSheetId") not in ids:
            yield f"a custom view points at sheetId {view.get('activeSheetId')}"


def _selected(package: Opened) -> Iterator[str]:
    selected = []
    for tab, part in package.sheets:
        root = package.tree(part)
        views = [] if root is None else list(root.iter("{*}sheetView"))
        if any(view.get("tabSelected") in ("1", "true") for view in views):
            selected.append(tab)
    if len(selected) > 1:
        yield f"{', '.join(selected)} are selected together"


# --- parts ---------------------------------------------------------------------------------------------------------


def _overrides(package: Opened) -> Iterator[str]:
    root = etree.fromstring(zips.part(package.parts, "[Content_Types].xml"))
    overrides = Counter(each.get("PartName", "").lstrip("/").lower() for each in root.iter("{*}Override"))
    defaults = {each.get("Extension", "").lower() for each in root.iter("{*}Default")}
    for part, times in overrides.items():
        if times > 1:
            yield f"{part} has {times} overrides"
        if part not in {name.lstrip("/").lower() for name in package.parts}:
            yield f"an override names {part}, which is missing"
    for name in package.parts:
        if name.lower() == "[content_types].xml" or name.endswith("/"):
            continue
        if name.lstrip("/").lower() not in overrides and name.rpartition(".")[2].lower() not in defaults:
            yield f"{name} has no content type"
    typed = {"worksheet": "worksheet+xml", "chart": "chart+xml", "drawing": "drawing+xml", "styles": "styles+xml"}
    types = {
        each.get("PartName", "").lstrip("/").lower(): each.get("ContentType", "") for each in root.iter("{*}Override")
    }
    for source in package.parts:
        for kind, target, inside in _relations(package, source):
            if inside and kind in typed and not types.get(target.lower(), "").endswith(typed[kind]):
                yield f"{target} is a {kind} but its type is {types.get(target.lower())}"


def _relations(package: Opened, source: str) -> Iterator[tuple[str, str, bool]]:
    try:
        yield from zips.relations_of(package.parts, source).values()
    except etree.XMLSyntaxError:
        return


def _targets(package: Opened) -> Iterator[str]:
    present = {name.lower() for name in package.parts}
    for source in ["", *package.parts]:
        for kind, target, inside in _relations(package, source):
            if inside and target.lower().lstrip("/") not in present:
                yield f"{source or 'the package'} has a {kind} relationship to {target}, which is missing"


def _relation_ids(package: Opened) -> Iterator[str]:
    for part in package.parts:
        if not re.search(r"(?:worksheets|chartsheets|drawings|charts)/[^/]*\.xml$", part):
            continue
        root = package.tree(part)
        if root is None:
            continue
        known = set(zips.relations_of(package.parts, part))
        for element in root.iter():
            for name, value in element.attrib.items() if isinstance(element.tag, str) else ():
                space = etree.QName(name).namespace or ""
                if "officeDocument" in space and space.endswith("/relationships") and value and value not in known:
                    yield f"{part}: {local(element)} uses {value}, which is no relationship of it"


def _orphans(package: Opened) -> Iterator[str]:
    reached, waiting = set(), [""]
    while waiting:
        source = waiting.pop()
        if source.lower() in reached:
            continue
        reached.add(source.lower())
        waiting += [target.lstrip("/") for _, target, inside in _relations(package, source) if inside]
    for name in package.parts:
        plain = name.lower()
        if plain.endswith("/") or plain == "[content_types].xml" or plain in reached:
            continue
        folder, _, base = plain.rpartition("/")
        owner = f"{folder.removesuffix('_rels').rstrip('/')}/{base.removesuffix('.rels')}".lstrip("/")
        if folder.endswith("_rels") and owner in reached:
            continue
        yield f"nothing leads to {name}"


# --- sheets --------------------------------------------------------------------------------------------------------


def balanced(formula: str) -> bool:
    """Whether quotes, parentheses, braces and brackets of a formula close."""
    depth: list[str] = []
    closing = {")": "(", "}": "{", "]": "["}
    quote = ""
    for sign in formula:
        if quote:
            quote = "" if sign == quote else quote
        elif sign in "\"'":
            quote = sign
        elif sign in "({[":
            depth.append(sign)
        elif sign in closing and (not depth or depth.pop() != closing[sign]):
            return False
    return not quote and not depth and len(formula) <= 8192


def _formulas(package: Opened) -> Iterator[str]:
    for tab, part in package.sheets:
        root = package.tree(part)
        if root is None:
            continue
        for element in root.iter("{*}f", "{*}formula", "{*}formula1", "{*}formula2"):
            if not balanced("".join(element.itertext())):
                yield f"{tab}: {''.join(element.itertext())[:60]!r} does not close"
    for name in package.workbook.iter("{*}definedName"):
        if not balanced("".join(name.itertext())):
            yield f"the name {name.get('name')} does not close"


def _chain(package: Opened) -> Iterator[str]:
    relations = zips.relations_of(package.parts, package.book)
    part = next((target for kind, target, _ in relations.values() if kind == "calcChain"), None)
    root = package.tree(part) if part else None
    if root is None:
        return
    by_id = {}
    for element, (_, sheet) in zip(package.workbook.iter("{*}sheet"), package.sheets, strict=False):
        tree = package.tree(sheet)
        cells = () if tree is None else tree.iter("{*}c")
        by_id[element.get("sheetId")] = {c.get("r") for c in cells if any(local(each) == "f" for each in c)}
    sheet = ""
    for entry in root:
        if local(entry) == "c":
            sheet = entry.get("i") or sheet
            if entry.get("r") not in by_id.get(sheet, set()):
                yield f"an entry for {entry.get('r')} on sheetId {sheet}, which holds no formula"


def _merged(package: Opened) -> Iterator[str]:
    for tab, part in package.sheets:
        root = package.tree(part)
        taken: set[tuple[int, int]] = set()
        for element in () if root is None else root.iter("{*}mergeCell"):
            cells = set(_cells(element.get("ref", "A1")))
            if cells & taken:
                yield f"{tab}: {element.get('ref')} overlaps another"
            taken |= cells


def _cells(ref: str) -> Iterator[tuple[int, int]]:
    corners = [re.fullmatch(r"([A-Z]+)([0-9]+)", each) for each in ref.replace("$", "").split(":")]
    places = [(int(each[2]), _column(each[1])) for each in corners if each]
    if not places:
        return
    (top, left), (bottom, right) = places[0], places[-1]
    if (bottom - top + 1) * (right - left + 1) <= 100_000:
        yield from ((row, column) for row in range(top, bottom + 1) for column in range(left, right + 1))


def _column(letters: str) -> int:
    number = 0
    for letter in letters:
        number = number * 26 + ord(letter) - 64
    return number


def _order(package: Opened) -> Iterator[str]:
    """Rows ascend, cells ascend in their row and stand in it."""
    for tab, part in package.sheets:
        root = package.tree(part)
        last_row = 0
        for row in () if root is None else root.iter("{*}row"):
            number = int(row.get("r", last_row + 1))
            if number <= last_row:
                yield f"{tab}: row {number} after row {last_row}"
            last_row, last = number, 0
            for cell in row:
                match = re.fullmatch(r"([A-Z]+)([0-9]+)", cell.get("r", "")) if local(cell) == "c" else None
                if match is None:
                    continue
                if int(match[2]) != number or _column(match[1]) <= last:
                    yield f"{tab}: cell {cell.get('r')} out of place in row {number}"
                last = _column(match[1])


CHECKS: dict[str, Callable[[Opened], Iterator[str]]] = {
    "cell formats": _cell_formats,
    "highlight formats": _highlight_formats,
    "format pieces": _format_pieces,
    "number format ids": _number_format_ids,
    "positions": _positions,
    "names": _names,
    "tabs": _tabs,
    "sheet ids": _sheet_ids,
    "selected tabs": _selected,
    "content types": _overrides,
    "targets": _targets,
    "relationship ids": _relation_ids,
    "orphans": _orphans,
    "formulas": _formulas,
    "calculation chain": _chain,
    "merged cells": _merged,
    "cell order": _order,
}


def faults_of_ours(data: bytes, tabs: set[str]) -> list[str]:
    """What must hold on our own sheets besides: inline texts, stored values, explicit formats, finite numbers."""
    package = opened(data)
    return [f"{tab}: {what}" for tab, part in package.sheets if tab in tabs for what in _ours(package.tree(part))]


def _ours(root: etree._Element | None) -> Iterator[str]:
    assert root is not None
    for cell in root.iter("{*}c"):
        where = cell.get("r")
        kinds = [local(each) for each in cell]
        if cell.get("t") == "s":
            yield f"{where} uses the shared texts"
        if cell.get("s") is None:
            yield f"{where} has no format of its own"
        if "f" in kinds and (kinds != ["f", "v"] or (cell.get("t") != "str" and not "".join(cell[1].itertext()))):
            yield f"{where} is a formula without a stored value"
        if "v" in kinds and cell.get("t") is None:
            text = "".join(cell[-1].itertext())
            if not re.fullmatch(r"-?[0-9]+(\.[0-9]+)?(e[+-]?[0-9]+)?", text):
                yield f"{where} holds {text!r} as a number"
    for element in root.iter("{*}dataValidation"):
        text = "".join(element[0].itertext()) if len(element) else ""
        if text.startswith('"') and len(text) > 257:
            yield f"the list at {element.get('sqref')} is too long"
