"""What the user placed on our sheets, and what becomes of it when a sheet is laid out anew.

Decided per kind:

    carried over   charts, pictures and drawn objects (where they stand); comments, threaded ones too (at their
                   cell); links that lead outside (at their cell); header, footer and the pictures in them; a
                   background picture; sheet protection; page breaks; custom properties; named views; the zoom and
                   the paper size; a column width, as long as the layout gives that column the width it had; print
                   area and repeated rows where the user changed ours; the sheet's place, visibility, tab text,
                   macro module; names scoped to the sheet
    in the way     Excel tables, pivot tables, queries, form controls, embedded objects, slicers, timelines,
                   sparklines, scenarios, anything of a kind not known here: the sheet is not replaced, and the
                   message says what is in the way
    laid out anew  cell contents (the user's entries come back through the layout), cell formats, conditional
                   formats, data validation, filters, sorting, groups, hidden rows and columns, row heights,
                   margins and orientation, printer settings, custom views' settings for the sheet

Where a sheet of ours is taken out (strip), charts, pictures, drawn objects, comments and whatever is in the way above
stop that too; the rest goes with the sheet.

Our own charts are told by their names; where a program lost those, by the cells they plot.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from lxml import etree

from bridge.messages import FileRefused, say
from bridge.package import drawing, mark, outline, xml
from bridge.package.archive import part_key, unpacked
from bridge.package.charts import fingerprint_in
from bridge.package.mark import LaidOut
from bridge.package.names import PRINT_AREA, PRINT_TITLES, Name, without_sheets
from bridge.package.package import Package, SheetEntry, relation_id
from bridge.package.relationships import Relationship
from bridge.package.worksheet import Kept

# Relationships that belong to a sheet without any element that says so.
_SILENT = {"comments": "a comment", "threadedComment": "a threaded comment", "namedSheetView": "a named view"}
_CARRIED = ("drawing", "vmlDrawing", "image", "customProperty", "hyperlink", *_SILENT)
_RENEWED = ("printerSettings",)
_IN_THE_WAY = {
    "table": "an Excel table",
    "pivotTable": "a pivot table",
    "queryTable": "a query",
    "control": "a form control",
    "ctrlProp": "a form control",
    "oleObject": "an embedded object",
    "package": "an embedded object",
    "slicer": "a slicer",
    "timeline": "a timeline",
}
_IN_THE_WAY_ELEMENTS = {
    "sparklineGroups": "sparklines",
    "scenarios": "scenarios",
    "slicerList": "a slicer",
    "timelineRefs": "a timeline",
    "oleObjects": "an embedded object",
    "controls": "a form control",
    "tableParts": "an Excel table",
}
_SAME_WIDTH = 0.3  # characters; programs round a width they save again
_ENOUGH_COLUMNS = 3


@dataclass(frozen=True, slots=True)
class UserObject:
    """Something of the user's on one of our sheets: `kind` in words, and whether a new layout carries it over."""

    sheet: str
    kind: str
    carried: bool


@dataclass(frozen=True, slots=True)
class Standing:
    """What stands on a sheet that is to be replaced.

    `relations` are the sheet's relationships that stay. `drawing` leads to what is drawn on it, `drawing_root`: there
    `our_anchors` hold our charts, whose parts are `our_charts`, and `user_anchors` the user's objects.
    `print_names` hold the user's print area and titles; `own_print` tells which of the two the user has changed
    (also by taking them away).
    """

    kept: Kept
    relations: tuple[Relationship, ...] = ()
    drawing: Relationship | None = None
    drawing_root: etree._Element | None = None
    our_charts: tuple[str, ...] = ()
    our_anchors: tuple[etree._Element, ...] = ()
    user_anchors: tuple[etree._Element, ...] = ()
    print_names: tuple[Name, ...] = ()
    own_print: frozenset[str] = frozenset()
    objects: tuple[UserObject, ...] = ()


NOTHING = Standing(Kept())


def user_objects(package: Package) -> tuple[UserObject, ...]:
    """What the user placed on our sheets, sheet by sheet. Raises FileRefused if a sheet of ours is damaged."""
    return tuple(each for sheet in package.sheets if sheet.ours for each in standing(package, sheet).objects)


def refuse_in_the_way(objects: Iterable[UserObject]) -> None:
    """Refuse to replace a sheet that holds something which cannot be carried over."""
    for each in objects:
        if not each.carried:
            raise FileRefused(say("user_objects_on_our_sheet", sheet=each.sheet, what=each.kind))


def standing(package: Package, entry: SheetEntry, new_widths: Mapping[int, float] | None = None) -> Standing:
    """What stands on the sheet `entry`, which is ours or becomes ours.

    `new_widths` are the widths a new layout states; a width the user set is kept where the layout did not change it.
    """
    member = package.parts[part_key(entry.part)]
    pieces = unpacked(member, package.limits.member)
    root = xml.parse(outline.without_rows(pieces, entry.part, package.limits), entry.part, package.limits)
    record = _record(package, entry)
    relations = package.relationships(entry.part)
    on_drawing = _drawing(package, entry, root, relations, record)
    fragments, links = outline.fragments(root), outline.outside_links(root)
    used = {each for text in (*fragments.values(), *links) for each in xml.relation_attributes(etree.fromstring(text))}
    stay = tuple(each for each in relations if each.id in used or each.kind in _SILENT)
    widths = _user_widths(root, record, new_widths)
    print_names, own_print = _print_names(package, entry, record)
    found = _Found(entry.name)
    found.anchors(on_drawing)
    found.relations(relations)
    found.elements(root, fragments, links)
    found.rest(widths, own_print)
    kept = Kept(
        selected=entry.position == package.active_tab and entry.state == "visible" and outline.is_selected(root),
        zoom=outline.zoom(root),
        code_name=outline.attribute(root, "sheetPr", "codeName"),
        paper=outline.paper(root),
        widths=widths,
        fragments=fragments,
        links=links,
    )
    return Standing(
        kept=kept,
        relations=stay,
        drawing=on_drawing.relation,
        drawing_root=on_drawing.root,
        our_charts=on_drawing.charts,
        our_anchors=on_drawing.ours,
        user_anchors=on_drawing.users,
        print_names=print_names,
        own_print=own_print,
        objects=found.objects(),
    )


def _record(package: Package, entry: SheetEntry) -> LaidOut | None:
    """What the last layout gave the sheet; None if nothing is known."""
    if entry.ours is None:
        return None
    text = mark.texts(package.defined_names, mark.LAID).get(mark.coded(entry.ours))
    return None if text is None else mark.laid_out(text)


# --- drawings ------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _OnDrawing:
    relation: Relationship | None = None
    root: etree._Element | None = None
    ours: tuple[etree._Element, ...] = ()
    users: tuple[etree._Element, ...] = ()
    charts: tuple[str, ...] = ()


def _drawing(
    package: Package,
    entry: SheetEntry,
    root: etree._Element,
    relations: tuple[Relationship, ...],
    record: LaidOut | None,
) -> _OnDrawing:
    element = xml.child(root, "drawing")
    wanted = "" if element is None else relation_id(element)
    relation = next((each for each in relations if each.id == wanted and each.kind == "drawing"), None)
    if relation is None or relation.part is None or part_key(relation.part) not in package.parts:
        return _OnDrawing()
    drawn = xml.parse(package.read(relation.part), relation.part, package.limits)
    targets = {each.id: each.part for each in package.relationships(relation.part) if each.part}
    anchors = list(drawing.anchors(drawn))
    ours = _our_anchors(package, entry, anchors, targets, record)
    charts = tuple(part for each in ours if (part := targets.get(drawing.chart_relation(each))))
    return _OnDrawing(relation, drawn, tuple(ours), tuple(each for each in anchors if each not in ours), charts)


def _our_anchors(
    package: Package,
    entry: SheetEntry,
    anchors: list[etree._Element],
    targets: Mapping[str, str],
    record: LaidOut | None,
) -> list[etree._Element]:
    """The anchors that hold charts of ours, each chart counted once: what is there twice is the user's copy."""
    if entry.ours is None:
        return []
    pattern = re.compile(re.escape(entry.ours) + r" chart \d{1,4}\Z")
    prints = {id(each): _fingerprint(package, targets.get(drawing.chart_relation(each))) for each in anchors}
    left = Counter(record.charts if record else ())
    ours, seen = [], set()
    for anchor in anchors:
        name = drawing.object_name(anchor)
        if pattern.match(name) and name not in seen and prints[id(anchor)]:
            seen.add(name)
            ours.append(anchor)
            left[prints[id(anchor)]] -= 1
    for anchor in anchors:
        if anchor not in ours and left[prints[id(anchor)]] > 0:
            ours.append(anchor)
            left[prints[id(anchor)]] -= 1
    return ours


def _fingerprint(package: Package, part: str | None) -> str:
    """What a chart plots; empty for anything that is no readable chart."""
    if part is None or part_key(part) not in package.parts:
        return ""
    try:
        return fingerprint_in(xml.parse(package.read(part), part, package.limits))
    except FileRefused:
        return ""


# --- widths and print area -----------------------------------------------------------------------------------------


def _user_widths(
    root: etree._Element, record: LaidOut | None, new_widths: Mapping[int, float] | None
) -> dict[int, float]:
    """Widths the user set, in columns to which the new layout gives what the last one gave."""
    if record is None:
        return {}
    new = record.widths if new_widths is None else new_widths
    stated = dict(outline.custom_widths(root))
    factor = _programs_factor(stated, record.widths)
    kept = {}
    for column, width in stated.items():
        was, would = record.widths.get(column), new.get(column)
        if was is None or would is None:
            keep = was is None and would is None
        else:
            keep = abs(was - would) <= _SAME_WIDTH < abs(width - was * factor)
        if keep:
            kept[column] = width
    return kept


def _programs_factor(stated: Mapping[int, float], given: Mapping[int, float]) -> float:
    """By what a program multiplied all widths when it saved them with another default font; 1 unless most agree."""
    ratios = sorted(stated[column] / width for column, width in given.items() if column in stated and width > 0)
    if len(ratios) < _ENOUGH_COLUMNS:
        return 1.0
    middle = ratios[len(ratios) // 2]
    alike = sum(abs(ratio / middle - 1) < 0.02 for ratio in ratios)
    return middle if alike > len(ratios) / 2 else 1.0


def _print_names(
    package: Package, entry: SheetEntry, record: LaidOut | None
) -> tuple[tuple[Name, ...], frozenset[str]]:
    given = {PRINT_AREA: record.print_area, PRINT_TITLES: record.print_titles} if record else {}
    now = {each.name: each for each in package.defined_names if each.scope == entry.position}
    own = set()
    for kind in (PRINT_AREA, PRINT_TITLES):
        text = without_sheets(now[kind].refers_to) if kind in now else ""
        if text != given.get(kind, text if record else ""):
            own.add(kind)
    return tuple(now[kind] for kind in sorted(own) if kind in now), frozenset(own)


class _Found:
    """Gathers what is found, each kind once."""

    def __init__(self, sheet: str) -> None:
        self._sheet = sheet
        self._kinds: dict[str, bool] = {}

    def _add(self, kind: str, carried: bool) -> None:
        self._kinds[kind] = self._kinds.get(kind, True) and carried

    def anchors(self, on_drawing: _OnDrawing) -> None:
        for each in on_drawing.users:
            self._add(f"a {drawing.describe(each)}", True)

    def relations(self, relations: Iterable[Relationship]) -> None:
        for each in relations:
            if each.kind in _SILENT:
                self._add(_SILENT[each.kind], True)
            elif each.kind in _IN_THE_WAY:
                self._add(_IN_THE_WAY[each.kind], False)
            elif each.kind not in (*_CARRIED, *_RENEWED):
                self._add(f"something of an unknown kind ({each.kind[:40]})", False)

    def elements(self, root: etree._Element, fragments: Mapping[str, str], links: tuple[str, ...]) -> None:
        words = {
            "sheetProtection": "sheet protection",
            "headerFooter": "a header or footer",
            "rowBreaks": "page breaks",
            "colBreaks": "page breaks",
            "picture": "a background picture",
            "customProperties": "custom properties",
        }
        for name in fragments:
            if name in words:
                self._add(words[name], True)
        if links:
            self._add("a link", True)
        for element in root.iter():
            word = _IN_THE_WAY_ELEMENTS.get(xml.local(element))
            if word and len(element):
                self._add(word, False)

    def rest(self, widths: Mapping[int, float], own_print: frozenset[str]) -> None:
        if widths:
            self._add("column widths", True)
        if PRINT_AREA in own_print:
            self._add("a print area", True)
        if PRINT_TITLES in own_print:
            self._add("repeated print rows", True)

    def objects(self) -> tuple[UserObject, ...]:
        return tuple(UserObject(self._sheet, kind, carried) for kind, carried in self._kinds.items())
