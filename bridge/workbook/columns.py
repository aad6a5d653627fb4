"""Cells in batches of rows -> one typed column each, so that a number never stays a Python object."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date, datetime, time, timedelta
from itertools import islice

import numpy as np
from numpy.typing import NDArray

from bridge.workbook.tables import State

BATCH = 4096
_MOST_SHARED = 10_000  # texts kept once each; a column with more different ones is not a category

_NAN = float("nan")
_CODES = {
    float: State.NUMBER,
    int: State.NUMBER,
    bool: State.YES_NO,
    str: State.TEXT,
    date: State.DATE,
    datetime: State.DATE,
    time: State.DATE,
    timedelta: State.DATE,
}
_DATE_TYPES = (date, time, timedelta)
_DATES: set[type] = {date, datetime, time, timedelta}
_ORDINAL_0 = date(1899, 12, 30).toordinal()
DAYS_TO_1904 = 1462  # serial of 1 January 1904 in the 1900 system
FIRST_SURE_DATE = date(1900, 3, 1)  # before it the 1900 system's days are off by one or shared


@dataclass(frozen=True, slots=True)
class CellColumn:
    """A whole column of a sheet from row 1 on. `numbers` (n,), `state` (n,), `texts` n entries or none at all.

    Whole days have their serial of the 1900 system in `numbers`, other dates NaN until their serials are known.
    """

    numbers: NDArray[np.float64]
    state: NDArray[np.uint8]
    texts: tuple[str | None, ...]


@dataclass(frozen=True, slots=True)
class Dates:
    """Date cells by zero-based (row, column): the first whole day whose serial is sure but for the date system, and
    those (moments, times, days before March 1900) whose serials must be looked up, with a stand-in."""

    sure: tuple[int, int] | None
    unsure: Mapping[tuple[int, int], date | time | timedelta]


@dataclass
class _Growing:
    numbers: list[NDArray[np.float64]] = field(default_factory=list)
    state: list[NDArray[np.uint8]] = field(default_factory=list)
    texts: list[Sequence[str | None] | int] = field(default_factory=list)  # a count stands for that many None
    known: dict[str, str] = field(default_factory=dict)


def gather(rows: Iterable[Sequence[object]], first: int, width: int) -> tuple[tuple[CellColumn, ...], Dates]:
    """Columns of a sheet from column A on, given its rows from row 1 on, and the date cells met.

    `rows` have `width` cells each, the first of them in the zero-based column `first`. The cell reader's empty text
    means that nothing can be seen in the cell.
    """
    growing = [_Growing() for _ in range(width)]
    sure: tuple[int, int] | None = None
    unsure: dict[tuple[int, int], date | time | timedelta] = {}
    start = 0
    for batch in _batches(rows):
        for at, cells in enumerate(zip(*batch, strict=True)):
            if not _grow(growing[at], cells) & _DATES:
                continue
            for row, cell in enumerate(cells, start):
                if isinstance(cell, _DATE_TYPES) and not _is_sure(cell):
                    unsure[(row, first + at)] = cell
                elif sure is None and isinstance(cell, date):
                    sure = (row, first + at)
        start += len(batch)
    empty = [CellColumn(np.full(start, _NAN), np.zeros(start, np.uint8), ()) for _ in range(first)]
    return (*empty, *(_column(one) for one in growing)), Dates(sure, unsure)


def _is_sure(cell: object) -> bool:
    return type(cell) is date and cell >= FIRST_SURE_DATE


def _batches(rows: Iterable[Sequence[object]]) -> Iterator[list[Sequence[object]]]:
    remaining = iter(rows)
    while batch := list(islice(remaining, BATCH)):
        yield batch


def _grow(column: _Growing, cells: Sequence[object]) -> set[type]:
    """Add a batch of cells to its column; the types met."""
    kinds = set(map(type, cells))
    if kinds <= {float, int}:
        column.numbers.append(np.array(cells, dtype=np.float64))
        column.state.append(np.full(len(cells), State.NUMBER, dtype=np.uint8))
        column.texts.append(len(cells))
        return kinds
    texts: Sequence[str | None] | int = len(cells)
    if kinds == {str}:
        state = np.full(len(cells), State.TEXT, dtype=np.uint8)
    else:
        state = np.fromiter((_CODES.get(type(cell), State.TEXT) for cell in cells), np.uint8, len(cells))
    if str in kinds:
        known = column.known
        texts = [(known.get(cell) or _seen(cell, known)) if type(cell) is str else None for cell in cells]
        if None in texts or "" in texts:
            seen = np.fromiter(map(bool, texts), np.bool_, len(cells))
            state[(state == State.TEXT) & ~seen] = State.BLANK
        texts = texts if texts.count(None) < len(cells) else len(cells)
    column.numbers.append(_numbers(cells, kinds))
    column.state.append(state)
    column.texts.append(texts)
    return kinds


def _numbers(cells: Sequence[object], kinds: set[type]) -> NDArray[np.float64]:
    if kinds & _DATES:
        return np.fromiter(map(_number, cells), np.float64, len(cells))
    if not kinds & {float, int, bool}:
        return np.full(len(cells), _NAN)
    return np.fromiter((cell if isinstance(cell, (float, int)) else _NAN for cell in cells), np.float64, len(cells))


def _number(cell: object) -> float:
    if isinstance(cell, (float, int)):
        return float(cell)
    return float(cell.toordinal() - _ORDINAL_0) if type(cell) is date and cell >= FIRST_SURE_DATE else _NAN


def _seen(text: str, known: dict[str, str]) -> str | None:
    """A text met for the first time, to be one object with its equals; empty where only spaces would be seen.

    None for the empty text, which is what the reader says of a blank cell.
    """
    if not text:
        return None
    if text.isspace():
        return ""
    if len(known) < _MOST_SHARED:
        known[text] = text
    return text


def _column(growing: _Growing) -> CellColumn:
    if not growing.numbers:
        return CellColumn(np.empty(0), np.empty(0, np.uint8), ())
    numbers = np.concatenate(growing.numbers)
    state = np.concatenate(growing.state)
    state[(state == State.NUMBER) & ~np.isfinite(numbers)] = State.ERROR
    return CellColumn(numbers, state, _joined(growing.texts))


def _joined(parts: list[Sequence[str | None] | int]) -> tuple[str | None, ...]:
    if all(isinstance(part, int) for part in parts):
        return ()
    joined: list[str | None] = []
    for part in parts:
        joined.extend([None] * part if isinstance(part, int) else part)
    return tuple(joined)


# --- dates -------------------------------------------------------------------------------------


def epoch(date1904: bool) -> date:
    """The day whose serial is 0."""
    return date(1904, 1, 1) if date1904 else date(1899, 12, 30)


def day_of(serial: float, date1904: bool = False) -> date | None:
    """The day of a serial, or None where the calendar has none (before March 1900, beyond 9999)."""
    try:
        day = epoch(date1904) + timedelta(days=int(serial // 1))
    except (OverflowError, ValueError):
        return None
    return day if date1904 or day >= FIRST_SURE_DATE else None


def serial_of(moment: date | time | timedelta, date1904: bool = False) -> float:
    """The serial of a day, a moment, a time of day or a length of time."""
    if isinstance(moment, timedelta):
        return moment / timedelta(days=1)
    clock = moment if isinstance(moment, (datetime, time)) else time()
    part = timedelta(hours=clock.hour, minutes=clock.minute, seconds=clock.second, microseconds=clock.microsecond)
    whole = moment.toordinal() - epoch(date1904).toordinal() if isinstance(moment, date) else 0
    return whole + part / timedelta(days=1)
