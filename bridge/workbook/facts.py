"""The quiet facts beside a column's name in the request: its kind, how much of it is filled, its range."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np

from bridge.workbook import kinds
from bridge.workbook.tables import DataColumn, Kind, State, Table

_MOST_SHOWN = 3
_MOST_LETTERS = 28


@dataclass(frozen=True, slots=True)
class Facts:
    """The three texts shown."""

    kind: str
    filled: str
    range: str


def facts(table: Table, column: DataColumn) -> Facts:
    """What is said about a column: `number`, `118/120`, `4.5 to 310`."""
    filled = int(np.count_nonzero(column.state != State.BLANK))
    return Facts(column.kind.value, f"{filled}/{len(table.rows)}", _range(table, column))


def levels(table: Table, column: DataColumn) -> Counter[str]:
    """Each level of a column, as people see it, and how many rows have it."""
    if column.kind is Kind.TEXT and column.texts:
        counted = Counter(text for text in column.texts if text)
        others = np.flatnonzero(np.isin(column.state, (State.NUMBER, State.DATE, State.YES_NO))).tolist()
        counted.update(kinds.level_text(column, at, table.date1904) or "" for at in others)
        return counted
    values, counts = np.unique(column.numbers[~np.isnan(column.numbers)], return_counts=True)
    at = {float(value): row for row, value in enumerate(column.numbers.tolist())} if len(values) < 1000 else {}
    shown = [
        kinds.level_text(column, at[value], table.date1904) if value in at else kinds.number_text(value)
        for value in values.tolist()
    ]
    counted = Counter(dict(zip(map(str, shown), counts.tolist(), strict=True)))
    counted.update(text for text in column.texts if text)
    return counted


def _range(table: Table, column: DataColumn) -> str:
    if column.kind is Kind.EMPTY:
        return ""
    if column.kind in (Kind.TEXT, Kind.YES_NO):
        return _different(table, column)
    wanted = State.NUMBER if column.kind is Kind.NUMBER else State.DATE
    numbers = column.numbers[column.state == wanted]
    low, high = float(numbers.min()), float(numbers.max())
    first, last = (_shown(table, column.kind, value) for value in (low, high))
    return first if low == high else f"{first} to {last}"


def _shown(table: Table, kind: Kind, value: float) -> str:
    if kind is Kind.DATE:
        return kinds.date_text(value, table.date1904)
    return kinds.number_text(float(f"{value:.6g}"))


def _different(table: Table, column: DataColumn) -> str:
    names = _distinct(table, column)
    if len(names) > _MOST_SHOWN:
        all_different = len(names) == int(np.count_nonzero(column.state != State.BLANK))
        return f"{len(names)} different" if all_different else f"{len(names)} levels"
    listed = ", ".join(sorted(names))
    return listed if len(listed) <= _MOST_LETTERS else f"{len(names)} level{'s' if len(names) > 1 else ''}"


def _distinct(table: Table, column: DataColumn) -> set[str]:
    others = np.flatnonzero(np.isin(column.state, (State.NUMBER, State.DATE, State.YES_NO)))
    _, first = np.unique(column.numbers[others], return_index=True)
    shown = {kinds.level_text(column, int(others[at]), table.date1904) or "" for at in first.tolist()}
    return shown | {text for text in set(column.texts) if text}
