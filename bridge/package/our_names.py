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


def recorded_names(package: Package) -> set[str]:
    """The names for people's formulas that the last graft put in, case aside."""
    text = mark.texts(package.defined_names, mark.NAMES).get("", "")
    return {name.casefold() for name in text.split(",") if name}


def is_ours(name: Name, our_tabs: set[str], recorded: set[str]) -> bool:
    """Whether we put a name in: it is on record, or it speaks of nothing but our sheets (`our_tabs`, case aside)."""
    mentioned = {tab.casefold() for tab in names.sheets_mentioned(name.refers_to)}
    return mentioned <= our_tabs and (bool(mentioned) or name.name.casefold() in recorded)


def refuse_foreign(package: Package, wanted: Iterable[DefinedName], our_tabs: set[str]) -> None:
    """Refuse if the user has a name, or an Excel table, called like one of `wanted`."""
    recorded = recorded_names(package)
    present = {each.name.casefold(): each for each in package.defined_names if each.scope is None}
    tables = _table_names(package)
    for name in wanted:
        key = name.name.casefold()
        if key in present and not is_ours(present[key], our_tabs, recorded):
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
    tabs = {each.name.casefold() for each in package.sheets if each.ours} | {each.tab.casefold() for each in sheets}
    recorded = recorded_names(package)
    replaced = {each.name.casefold() for each in wanted}
    touched = {f"{kind}{mark.coded(each.role)}".casefold() for each in sheets for kind in (mark.SHEET, mark.LAID)}
    resting = (mark.SHEET, mark.LAID)
    gone = set()
    for name in names.read_names(workbook):
        key = name.name.casefold()
        of_people = key in replaced or (key in recorded and is_ours(name, tabs, recorded))
        hidden = key in touched or (mark.is_ours(key) and not key.startswith(resting))
        if name.scope is None and (of_people or hidden):
            gone.add(name.key)
    for each in sheets:
        position = workbook_part.position_of(workbook, each.relation)
        scoped = (mark.SHEET + mark.coded(each.role), names.PRINT_AREA, names.PRINT_TITLES, names.FILTER)
        gone |= {(kind.casefold(), position) for kind in scoped}
    names.drop_names(workbook, gone)


def drop_all(workbook: etree._Element, package: Package) -> None:
    """Take out every name of ours, and the marks that a copy of a sheet of ours took along."""
    tabs = {each.name.casefold() for each in package.sheets if each.ours}
    recorded = recorded_names(package)
    gone = set()
    for name in names.read_names(workbook):
        of_people = name.scope is None and name.name.casefold() in recorded and is_ours(name, tabs, recorded)
        if of_people or mark.is_ours(name.name):
            gone.add(name.key)
    names.drop_names(workbook, gone)
