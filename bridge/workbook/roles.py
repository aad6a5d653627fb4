"""A model's entries beside the data columns -> which column does what."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from bridge.page.cells import address
from bridge.regression.spec import CategoryTerm, NumberTerm, Shape
from bridge.workbook import entries, facts, spelling
from bridge.workbook.asking import Asking, Used
from bridge.workbook.entries import Entry, Misread, Role
from bridge.workbook.request import GridRow
from bridge.workbook.tables import Kind, State

_SINGLE = (Role.WEIGHT, Role.LABEL, Role.ORDER, Role.GROUP)
_TERMS = (Role.PREDICTOR, Role.CATEGORY, Role.CANDIDATE)
_IDLE = (Role.LABEL, Role.ORDER, Role.GROUP)
_NEEDS_NUMBERS = {
    Role.RESPONSE: "the response",
    Role.PREDICTOR: "a predictor",
    Role.WEIGHT: "the weight",
    Role.ORDER: "the order column",
}


def read_roles(asking: Asking) -> list[Used]:
    """The columns used, in grid order; what is not understood becomes a problem."""
    used: list[Used] = []
    for row in asking.grid.column_rows:
        found = _read_row(asking, row)
        if found is not None:
            used.append(found)
    _check_repeats(asking, used)
    _check_sheets(asking, used)
    return used


def check_roles(asking: Asking, used: Sequence[Used]) -> None:
    """One response, no role twice, and every column fit for what it does."""
    responses = [one for one in used if one.entry.role is Role.RESPONSE]
    if not responses and not any(problem.key.startswith(("entry", "response")) for problem in asking.problems):
        asking.tell("no-response", asking.header_cell)
    if len(responses) > 1:
        _tell_two(asking, "two-responses", responses)
    for role in _SINGLE:
        same = [one for one in used if one.entry.role is role]
        if len(same) > 1:
            _tell_two(asking, "role-twice", same, role=role.value)
    for one in used:
        _check_kind(asking, one)


def terms(asking: Asking, used: Sequence[Used]) -> tuple[NumberTerm | CategoryTerm, ...]:
    """The model's terms, in grid order."""
    return tuple(_term(asking, one) for one in used if one.entry.role in _TERMS)


def with_role(used: Sequence[Used], role: Role) -> Used | None:
    """The first column with a role, or None."""
    return next((one for one in used if one.entry.role is role), None)


def is_category(one: Used) -> bool:
    """Whether a column enters as levels: said so, or a candidate that does not hold numbers."""
    if one.entry.role is Role.CANDIDATE:
        return one.column.kind in (Kind.TEXT, Kind.YES_NO) and one.entry.shape is Shape.AS_IS
    return one.entry.role is Role.CATEGORY


# --- one row -----------------------------------------------------------------------------------


def _read_row(asking: Asking, row: GridRow) -> Used | None:
    cell, value = asking.cell(row.row), asking.value(row.row)
    if asking.lacks_value(row.row):
        asking.is_asked = True
        asking.tell("entry-without-value", cell)
    if value is None or entries.is_unused(value):
        return None
    entry = entries.parse(value)
    if isinstance(entry, Misread):
        asking.is_asked = True
        asking.tell(entry.key, cell, **entry.fields)
        return None
    assert entry is not None
    asking.is_asked |= entry.role not in _IDLE
    return _resolved(asking, row, entry, cell)


def _resolved(asking: Asking, row: GridRow, entry: Entry, cell: str) -> Used | None:
    names = asking.arranged.names
    if not row.label:
        asking.tell("entry-without-column", cell, label_cell=address(row.row, asking.grid.label_column))
        return None
    place = names.resolve(row.label)
    if place is not None:
        table, column = names.columns[names.label(*place)]
        asking.entries.setdefault(column.name, cell)
        return Used(table, column, entry, cell)
    if not names.all:
        return None  # there is no data at all, which is said once
    label_cell = address(row.row, asking.grid.label_column)
    new = asking.arranged.renamed.get(row.label)
    if new is not None:
        asking.tell("column-renamed", label_cell, column=row.label, new=new)
    else:
        tell_unknown(asking, row.label, cell)
    return None


def tell_unknown(asking: Asking, label: str, cell: str) -> None:
    """There is no such column: with the nearest name, where one is near."""
    names = asking.arranged.names
    sheets = " or ".join(f'"{table.sheet}"' for table in names.tables[:3])
    asking.tell("column-unknown", cell, column=label, sheets=sheets, hint=spelling.did_you_mean(label, names.all))


# --- checks ------------------------------------------------------------------------------------


def _check_repeats(asking: Asking, used: list[Used]) -> None:
    """The same column in two rows, each with an entry."""
    seen: dict[tuple[str, str], Used] = {}
    for one in tuple(used):
        first = seen.setdefault((one.table.sheet, one.name), one)
        if first is one:
            continue
        roles = {first.entry.role, one.entry.role}
        both = Role.RESPONSE in roles and roles & set(_TERMS)
        key = "response-also-predictor" if both else "column-twice"
        asking.tell(key, one.cell, column=one.name, other=first.cell)
        used.remove(one)


def _check_sheets(asking: Asking, used: list[Used]) -> None:
    """All columns of a model come from one sheet: the response's."""
    working = [one for one in used if one.entry.role not in _IDLE]
    first = with_role(used, Role.RESPONSE) or next(iter(working or used), None)
    for one in tuple(used):
        if first is None or one.table is first.table:
            continue
        if one in working:
            fields = {"column": one.name, "sheet": one.table.sheet, "other": first.name, "first": first.table.sheet}
            asking.tell("two-sheets", one.cell, **fields)
        used.remove(one)


def _tell_two(asking: Asking, key: str, same: Sequence[Used], **fields: object) -> None:
    first, second = same[0], same[1]
    asking.tell(key, second.cell, first=first.name, second=second.name, other=first.cell, **fields)


def _check_kind(asking: Asking, one: Used) -> None:
    role = one.entry.role
    if one.column.kind is Kind.EMPTY:
        valueless = np.flatnonzero(one.column.state == State.NO_VALUE)
        if len(valueless):
            asking.tell_of_data("formula-without-value", one, valueless)
            return
        asking.tell("column-empty", one.cell, column=one.name, sheet=one.table.sheet)
        return
    number_role = role if role in _NEEDS_NUMBERS else None
    if role is Role.CANDIDATE and (one.entry.shape is not Shape.AS_IS or one.entry.degree > 1 or one.entry.bends):
        number_role = Role.PREDICTOR
    if number_role is None:
        return
    if one.column.kind is Kind.TEXT:
        instead = ' Write "category" to use its levels.' if number_role is Role.PREDICTOR else ""
        asking.tell("text-as-number", one.cell, column=one.name, role=_NEEDS_NUMBERS[number_role], instead=instead)
    elif one.column.kind is Kind.DATE and role is not Role.ORDER:
        asking.tell("date-as-number", one.cell, column=one.name)
    elif one.column.kind is Kind.YES_NO:
        asking.tell("yes-no-as-number", one.cell, column=one.name)


def _term(asking: Asking, one: Used) -> NumberTerm | CategoryTerm:
    entry = one.entry
    candidate = entry.candidate or entry.role is Role.CANDIDATE
    if not is_category(one):
        return NumberTerm(one.name, entry.shape, entry.degree, entry.bends, candidate)
    return CategoryTerm(one.name, _base(asking, one), candidate)


def _base(asking: Asking, one: Used) -> str | None:
    """The base level as the data write it; a level that differs only in case or outer spaces will do."""
    wanted = one.entry.base
    if wanted is None:
        return None
    levels = facts.levels(one.table, one.column)
    if wanted in levels:
        return wanted
    alike = [level for level in levels if level.strip().casefold() == wanted.strip().casefold()]
    if len(alike) == 1:
        return alike[0]
    asking.tell("base-unknown", one.cell, column=one.name, base=wanted, hint=spelling.did_you_mean(wanted, levels))
    return wanted
