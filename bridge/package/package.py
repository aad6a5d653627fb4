"""A workbook's package, opened once into a frozen value: which sheets it has, whose they are, what they hold.

Nothing here changes a file; `bridge.package.graft` and `bridge.package.strip` make new bytes from a `Package`.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field

from lxml import etree

from bridge.messages import FileRefused, say
from bridge.package import mark, refusals
from bridge.package.archive import (
    Archive,
    Member,
    by_part_name,
    check_length,
    content,
    part_key,
    read_archive,
    unpacked,
)
from bridge.package.content_types import PART as CONTENT_TYPES_PART
from bridge.package.content_types import ContentTypes, content_types, read_root
from bridge.package.limits import Limits
from bridge.package.names import Name, read_names
from bridge.package.relationships import OFFICE_DOCUMENT, Relationship, read_relationships, relationships_part
from bridge.package.xml import OFFICE_RELS, STRICT_MAIN, child, children, local, namespace, parse, transitional

_TRUE = ("1", "true", "on")


@dataclass(frozen=True, slots=True)
class SheetEntry:
    """One sheet of the workbook, in tab order.

    `name` is what the tab says, `state` visible, hidden or veryHidden, `part` the name of its part (empty: missing),
    `kind` worksheet, chartsheet, dialogsheet or another word of the format; `ours` our name for it if it bears our
    mark. `sheet_id` and `relation` are the workbook's own numbers for it, `position` counts from zero.
    """

    name: str
    state: str
    part: str
    kind: str
    ours: str | None
    sheet_id: int
    relation: str
    position: int
    _is_empty: Callable[[str], bool] = field(repr=False, compare=False)

    @property
    def empty(self) -> bool:
        """Whether no cell holds anything and nothing is placed on the sheet (read when asked for)."""
        return self.kind == "worksheet" and bool(self.part) and self._is_empty(self.part)


@dataclass(frozen=True, slots=True)
class TableEntry:
    """An Excel table: its name for formulas, its cells (`A1:F40`), how many header and totals rows these include."""

    name: str
    ref: str
    header_rows: int
    totals_rows: int


@dataclass(frozen=True)
class Package:
    """An opened workbook. `parts` holds the members by part key; `state` the texts that the last
    graft stored, `active_tab` the position of the sheet it opens at."""

    data: bytes = field(repr=False)
    limits: Limits
    archive: Archive = field(repr=False)
    parts: Mapping[str, Member] = field(repr=False)
    types: ContentTypes = field(repr=False)
    workbook_part: str
    workbook_relationships: tuple[Relationship, ...] = field(repr=False)
    strict: bool
    sheets: tuple[SheetEntry, ...]
    defined_names: tuple[Name, ...] = field(repr=False)
    state: Mapping[str, str]
    active_tab: int

    @classmethod
    def open(cls, data: bytes, limits: Limits = Limits()) -> Package:  # noqa: B008 (frozen)
        """The package in `data`. Raises FileRefused, with a reason of its own for each kind of file left alone."""
        refusals.refuse_other_containers(data)
        archive = read_archive(data, limits)
        parts = by_part_name(member for member in archive.members if not member.is_folder)
        refusals.refuse_other_packages(parts)
        reader = _Reader(parts, limits)
        types = content_types(read_root(reader.part(CONTENT_TYPES_PART), limits))
        root = reader.relationships("")
        refusals.refuse_signed(parts, types, root)
        workbook_part = _workbook_part(root, parts, types)
        relationships = reader.relationships(workbook_part)
        refusals.refuse_revision_log(relationships)
        workbook = parse(reader.part(workbook_part), workbook_part, limits)
        _refuse_workbook(workbook)
        _check_shared_parts(relationships, parts, limits)
        names = read_names(workbook)
        return cls(
            data=data,
            limits=limits,
            archive=archive,
            parts=parts,
            types=types,
            workbook_part=workbook_part,
            workbook_relationships=relationships,
            strict=namespace(workbook) == STRICT_MAIN,
            sheets=_sheets(workbook, relationships, names, reader),
            defined_names=names,
            state=mark.texts(names, mark.STATE),
            active_tab=_active_tab(workbook),
        )

    def entry(self, tab: str) -> SheetEntry | None:
        """The sheet whose tab says `tab` (case aside), or None."""
        wanted = tab.casefold()
        return next((sheet for sheet in self.sheets if sheet.name.casefold() == wanted), None)

    def of_role(self, role: str) -> SheetEntry | None:
        """Our sheet `role`, whatever its tab says, or None."""
        return next((sheet for sheet in self.sheets if sheet.ours == role), None)

    def read(self, part: str) -> bytes:
        """The content of a small part (bounded by `limits.part`). Raises FileRefused if missing or damaged."""
        return _Reader(self.parts, self.limits).part(part)

    def relationships(self, part: str) -> tuple[Relationship, ...]:
        """The relationships of a part (empty name: of the package). Raises FileRefused if damaged."""
        return _Reader(self.parts, self.limits).relationships(part)

    def worksheet_xml(self, tab: str) -> bytes:
        """The unpacked part of the sheet whose tab says `tab`, bounded by `limits.member`.

        Raises FileRefused if it is missing, damaged or unpacks to more than it says; KeyError for an unknown tab.
        """
        member = self._worksheet(tab)
        return content(member, self.limits.member)

    def tables(self, tab: str) -> tuple[TableEntry, ...]:
        """The Excel tables on a sheet. Raises FileRefused if a table's part is damaged; KeyError for an unknown tab."""
        self._worksheet(tab)
        entry = self.entry(tab)
        assert entry is not None
        return tuple(self._tables_of(entry))

    def shared_strings(self) -> bytes:
        """The unpacked shared texts, bounded by `limits.member`; empty where the workbook has none.

        Raises FileRefused if the part is damaged or unpacks to more than it says.
        """
        for relation in self.workbook_relationships:
            if relation.kind == "sharedStrings" and relation.part and part_key(relation.part) in self.parts:
                return content(self.parts[part_key(relation.part)], self.limits.member)
        return b""

    def _tables_of(self, entry: SheetEntry) -> Iterable[TableEntry]:
        for relation in self.relationships(entry.part):
            if relation.kind == "table" and relation.part and part_key(relation.part) in self.parts:
                root = parse(self.read(relation.part), relation.part, self.limits)
                yield TableEntry(
                    root.get("displayName") or root.get("name") or "",
                    root.get("ref", ""),
                    _count(root.get("headerRowCount"), 1),
                    _count(root.get("totalsRowCount"), 0),
                )

    def _worksheet(self, tab: str) -> Member:
        entry = self.entry(tab)
        if entry is None:
            raise KeyError(tab)
        member = self.parts.get(part_key(entry.part))
        if member is None:
            raise FileRefused(say("part-missing", part=entry.part or f"the sheet {tab}"))
        return member


class _Reader:
    """Reads small parts and relationships while a package is being opened."""

    def __init__(self, parts: Mapping[str, Member], limits: Limits) -> None:
        self.parts, self.limits = parts, limits

    def part(self, name: str) -> bytes:
        member = self.parts.get(part_key(name))
        if member is None:
            raise FileRefused(say("part-missing", part=name))
        return content(member, self.limits.part)

    def relationships(self, source: str) -> tuple[Relationship, ...]:
        name = relationships_part(source)
        data = self.part(name) if part_key(name) in self.parts else None
        return read_relationships(data, source, self.limits)

    def is_empty(self, part: str) -> bool:
        return is_empty_sheet(unpacked(self.parts[part_key(part)], self.limits.member))


# What fills a cell (a value, a text, a formula) or places something on a sheet.
_FILLS = re.compile(
    rb"<(?:[\w.-]+:)?(?:v|f|is|drawing|legacyDrawing|picture|oleObjects|controls|tableParts|pivotTableDefinition)[\s/>]"
)


def is_empty_sheet(pieces: Iterable[bytes]) -> bool:
    """Whether a worksheet's text, taken in pieces, holds no cell content and nothing placed on it."""
    seam = b""
    for piece in pieces:
        text = seam + piece
        if b"\0" in text or _FILLS.search(text):  # NUL: UTF-16, which is not worth a second reader; take it as filled
            return False
        seam = text[-64:]
    return True


def _count(text: str | None, default: int) -> int:
    return int(text) if text is not None and text.isdecimal() and len(text) < 9 else default


def _workbook_part(root: Iterable[Relationship], parts: Mapping[str, Member], types: ContentTypes) -> str:
    found = next((each.part for each in root if each.type == OFFICE_DOCUMENT and each.part), None)
    if found is None or part_key(found) not in parts:
        raise FileRefused(say("no-workbook-part"))
    refusals.refuse_workbook_type(types.of(found), found)
    return found


def _refuse_workbook(workbook: etree._Element) -> None:
    if local(workbook) != "workbook" or child(workbook, "sheets") is None:
        raise FileRefused(say("no-workbook-part"))
    protection = child(workbook, "workbookProtection")
    if protection is not None and protection.get("lockStructure") in _TRUE:
        raise FileRefused(say("locked-structure"))


def _active_tab(workbook: etree._Element) -> int:
    """The position of the sheet the workbook opens at."""
    views = child(workbook, "bookViews")
    view = None if views is None else child(views, "workbookView")
    return 0 if view is None else _count(view.get("activeTab"), 0)


def _check_shared_parts(relationships: Iterable[Relationship], parts: Mapping[str, Member], limits: Limits) -> None:
    """The parts that every reader unpacks whole must be no longer than they say."""
    for relation in relationships:
        if relation.kind in ("sharedStrings", "styles") and relation.part and part_key(relation.part) in parts:
            check_length(parts[part_key(relation.part)], limits)


def _sheets(
    workbook: etree._Element, relationships: Iterable[Relationship], names: tuple[Name, ...], reader: _Reader
) -> tuple[SheetEntry, ...]:
    holder = child(workbook, "sheets")
    assert holder is not None
    elements = list(children(holder, "sheet"))
    by_id = {each.id: each for each in relationships}
    ours = mark.owners([element.get("name", "") for element in elements], names)
    found = []
    for position, element in enumerate(elements):
        relation = by_id.get(relation_id(element))
        part = relation.part if relation and relation.part and part_key(relation.part) in reader.parts else ""
        kind = relation.kind if relation else "missing"
        found.append(
            SheetEntry(
                element.get("name", ""),
                element.get("state", "visible"),
                part,
                kind,
                ours.get(position) if kind == "worksheet" and part else None,
                _count(element.get("sheetId"), 0),
                relation_id(element),
                position,
                reader.is_empty,
            )
        )
    return tuple(found)


def relation_id(element: etree._Element) -> str:
    """The `r:id` of an element, whichever kind of namespace it is in; empty if it has none."""
    for name, value in element.attrib.items():
        qualified = etree.QName(name)
        if qualified.localname == "id" and transitional(qualified.namespace or "") == OFFICE_RELS:
            return str(value)
    return ""
