"""The defined names the bridge puts in: people's (`fit_A_n`), print areas, marks and what must be remembered."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from lxml import etree

from bridge.messages import FileRefused, say
from bridge.package import mark, names, workbook_part
from bridge.package.mark import LaidOut
from bridge.package.names import Name
from bridge.package.package import Package
from bridge.page.sheet import DefinedName


@dataclass(frozen=True, slots=True)
class Marked:
    """A sheet just put in: its role, tab and relationship, what its layout gave it, its print area and titles."""

    role: str
    tab: str
    relation: str
    laid: LaidOut
    print_names: tuple[Name, ...]


@dataclass(frozen=True, slots=True)
class Ownership:
    """What tells our names for people's formulas from the user's (all case aside).

    `ours` and `users` are tab texts; `recorded` the names that the last graft put in.
    """

    ours: frozenset[str]
    users: frozenset[str]
    recorded: frozenset[str]

    def has(self, name: Name) -> bool:
        """Whether we put a name in: it is on record and the user has not pointed it at a sheet of theirs since, or it
        speaks of nothing but our sheets."""
        mentioned = {tab.casefold() for tab in names.sheets_mentioned(name.refers_to)}
        if name.name.casefold() in self.recorded:
            return not mentioned & self.users
        return bool(mentioned) and mentioned <= self.ours

    def put_in(self, name: Name) -> bool:
        """Whether a name is one that the last graft put in for people's formulas."""
        return name.scope is None and name.name.casefold() in self.recorded and self.has(name)


def ownership(package: Package, becoming: Iterable[str] = ()) -> Ownership:
    """What is known about a package's names; `becoming` are tab texts of sheets that become ours."""
    ours = {sheet.name.casefold() for sheet in package.sheets if sheet.ours} | {tab.casefold() for tab in becoming}
    text = mark.texts(package.defined_names, mark.NAMES).get("", "")
    return Ownership(
        frozenset(ours),
        frozenset(sheet.name.casefold() for sheet in package.sheets) - ours,
        frozenset(name.casefold() for name in text.split(",") if name),
    )


def refuse_foreign(package: Package, wanted: Iterable[DefinedName], becoming: Iterable[str]) -> None:
    """Refuse if the user has a name, or an Excel table, called like one of `wanted`.

    `becoming` are the tab texts of sheets that become ours. Raises ValueError for what can be no name at all.
    """
    owned = ownership(package, becoming)
    present = {each.name.casefold(): each for each in package.defined_names if each.scope is None}
    tables = _table_names(package)
    for name in wanted:
        if not names.is_valid(name.name):
            raise ValueError(f"{name.name!r} can be no defined name")
        key = name.name.casefold()
        if key in present and not owned.has(present[key]):
            raise FileRefused(say("name-not-ours", name=name.name, refers_to=present[key].refers_to[:80]))
        if key in tables:
            raise FileRefused(say("name-not-ours", name=name.name, refers_to=f'a table on "{tables[key]}"'))


def _table_names(package: Package) -> dict[str, str]:
    """Excel tables' names, case aside, with the sheet they are on; a table that cannot be read is passed over."""
    found = {}
    for entry in package.sheets:
        try:
            tables = package.tables(entry.name) if entry.part else ()
        except FileRefused:
            continue
        found.update({table.name.casefold(): entry.name for table in tables})
    return found


def renew(
    workbook: etree._Element,
    package: Package,
    sheets: Sequence[Marked],
    wanted: Sequence[DefinedName],
    texts: Mapping[str, str],
) -> None:
    """Take our old names out of the workbook part and put the new ones at the end of its list.

    `texts` are what must be remembered, by whole name. Names of sheets of ours that are not in `sheets` stay.
    """
    _drop_old(workbook, package, sheets, wanted)
    names.append_names(workbook, [Name(each.name, each.refers_to, None, each.hidden, each.comment) for each in wanted])
    positions = {each.relation: workbook_part.position_of(workbook, each.relation) for each in sheets}
    for each in sheets:
        scoped = [Name(name.name, name.refers_to, positions[each.relation]) for name in each.print_names]
        names.append_names(workbook, scoped)
    for each in sheets:
        names.append_names(workbook, mark.marks(each.role, each.tab, positions[each.relation]))
        names.append_names(workbook, mark.constants(mark.LAID + mark.coded(each.role), each.laid.text()))
    for name, text in texts.items():
        names.append_names(workbook, mark.constants(name, text))


def _drop_old(
    workbook: etree._Element, package: Package, sheets: Sequence[Marked], wanted: Sequence[DefinedName]
) -> None:
    owned = ownership(package, (each.tab for each in sheets))
    replaced = {each.name.casefold() for each in wanted}
    touched = {f"{kind}{mark.coded(each.role)}".casefold() for each in sheets for kind in (mark.SHEET, mark.LAID)}
    resting = (mark.SHEET, mark.LAID)
    gone = set()
    for name in names.read_names(workbook):
        key = name.name.casefold()
        hidden = key in touched or (mark.is_ours(key) and not key.startswith(resting))
        if name.scope is None and (key in replaced or hidden or owned.put_in(name)):
            gone.add(name.key)
    for each in sheets:
        position = workbook_part.position_of(workbook, each.relation)
        scoped = (mark.SHEET + mark.coded(each.role), names.PRINT_AREA, names.PRINT_TITLES, names.FILTER)
        gone |= {(kind.casefold(), position) for kind in scoped}
    names.drop_names(workbook, gone)


def drop_all(workbook: etree._Element, package: Package) -> None:
    """Take out every name of ours, and the marks that a copy of a sheet of ours took along."""
    owned = ownership(package)
    present = names.read_names(workbook)
    names.drop_names(workbook, {name.key for name in present if mark.is_ours(name.name) or owned.put_in(name)})
