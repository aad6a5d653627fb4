"""The row filters of a model: `use rows where` a column `is` a `value`, twice over."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from datetime import date, datetime
from typing import Any

from bridge.workbook import grid as grids
from bridge.workbook import roles
from bridge.workbook.asking import Asking
from bridge.workbook.columns import serial_of
from bridge.workbook.entries import number
from bridge.workbook.request import Filter, Scalar
from bridge.workbook.settings import AND_WHERE, IS, VALUE, WHERE, two_values
from bridge.workbook.tables import DataColumn, Kind, Table

_IN_ORDER = ("at least", "at most", "above", "below", "between")
_YES = {"yes": True, "true": True, "1": True, "no": False, "false": False, "0": False}


@dataclass(frozen=True, slots=True)
class Typed:
    """A setting as read, and its cell."""

    meaning: Any
    cell: str


def read_filters(asking: Asking, table: Table | None, typed: Mapping[str, Typed]) -> tuple[Filter, ...]:
    """The filters that are whole; whatever is wrong with one becomes a problem."""
    return tuple(_filters(asking, table, typed))


def _filters(asking: Asking, table: Table | None, typed: Mapping[str, Typed]) -> Iterator[Filter]:
    for where, prefix in ((WHERE, ""), (AND_WHERE, "and ")):
        column, comparison, value = (typed.get(key) for key in (where, f"{prefix}{IS}", f"{prefix}{VALUE}"))
        if column is None:
            extra = comparison or value
            if extra is not None:
                asking.tell("filter-without-column", extra.cell, where=where)
            continue
        if f"{prefix}{IS}" in asking.entries and comparison is None:
            continue  # it was not understood, which is said already
        found = _column(asking, table, column)
        if found is None or table is None:
            continue
        words = comparison.meaning if comparison is not None else "equals"
        if value is None:
            asking.tell("filter-without-value", column.cell, column=found.name)
            continue
        values = _values(asking, table, found, words, value)
        if values is not None:
            yield Filter(found.name, words, values, column.cell)


def _column(asking: Asking, table: Table | None, typed: Typed) -> DataColumn | None:
    label = grids.shown(typed.meaning)
    place = asking.arranged.names.resolve(label)
    if place is None:
        roles.tell_unknown(asking, label, typed.cell)
        return None
    own = table.column(place[1]) if table is not None else None
    if table is None or own is None or (place[0] != table.sheet and "!" in label):
        sheet = table.sheet if table is not None else ""
        asking.tell("filter-other-sheet", typed.cell, column=label, sheet=sheet)
        return None
    return own


def _values(
    asking: Asking, table: Table, column: DataColumn, comparison: str, typed: Typed
) -> tuple[Scalar, ...] | None:
    if comparison in _IN_ORDER and column.kind in (Kind.TEXT, Kind.YES_NO):
        asking.tell("filter-order-on-text", typed.cell, column=column.name, comparison=comparison)
        return None
    parts: tuple[Scalar, ...] = (typed.meaning,)
    if comparison == "between":
        ends = two_values(typed.meaning)
        if ends is None:
            asking.tell("filter-between", typed.cell, typed=grids.shown(typed.meaning))
            return None
        parts = ends
    read = [_value(table, column, part) for part in parts]
    for part, value in zip(parts, read, strict=True):
        if value is None:
            kind = {Kind.DATE: "a date", Kind.YES_NO: "yes or no"}.get(column.kind, "a number")
            asking.tell("filter-value", typed.cell, typed=grids.shown(part), column=column.name, kind=kind)
            return None
    values = [value for value in read if value is not None]
    return tuple(sorted(values, key=float)) if comparison == "between" else tuple(values)


def _value(table: Table, column: DataColumn, typed: Scalar) -> Scalar | None:
    """A typed value in the column's own terms; None where it cannot be one."""
    if column.kind in (Kind.TEXT, Kind.EMPTY):
        return typed if isinstance(typed, str) else grids.shown(typed)
    if column.kind is Kind.YES_NO:
        return _YES.get(grids.shown(typed).casefold())
    if isinstance(typed, bool):
        return None
    if not isinstance(typed, str):
        return float(typed)
    return _serial(typed, table.date1904) if column.kind is Kind.DATE else number(typed)


def _serial(typed: str, date1904: bool) -> float | None:
    """A date written year first (2026-12-01, 2026-12), or as a plain serial."""
    text = typed.strip()
    for shape in ("%Y-%m-%d", "%Y-%m-%d %H:%M", "%Y-%m", "%Y/%m/%d", "%d.%m.%Y"):
        try:
            moment = datetime.strptime(text, shape)
        except ValueError:
            continue
        whole = moment.hour == moment.minute == 0
        return serial_of(date(moment.year, moment.month, moment.day) if whole else moment, date1904)
    return number(text)
