"""What a column holds, counted from the states of its cells, and how people see single values."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from bridge.workbook.columns import day_of
from bridge.workbook.tables import DataColumn, Kind, State, Table

_KINDS = ((State.TEXT, Kind.TEXT), (State.NUMBER, Kind.NUMBER), (State.DATE, Kind.DATE), (State.YES_NO, Kind.YES_NO))


def kind(state: NDArray[np.uint8]) -> Kind:
    """What most of the filled cells hold; a tie goes to text. Errors and formulas without a value do not count."""
    counts = [(int(np.count_nonzero(state == one)), kind) for one, kind in _KINDS]
    most, found = max(counts, key=lambda pair: pair[0])
    return found if most else Kind.EMPTY


def number_text(value: float) -> str:
    """A number as a cell shows it: `4`, `0.1`, `1E+20`; at most 15 digits."""
    if value == int(value) and abs(value) < 1e15:
        return str(int(value))
    return f"{value:.15g}".replace("e", "E")


def date_text(serial: float, date1904: bool = False) -> str:
    """A date serial as `2026-12-01`, with the time where there is one; a number where the calendar has no such day."""
    day = day_of(serial, date1904)
    if day is None:
        return number_text(serial)
    minutes = round((serial - serial // 1) * 1440)
    if minutes in (0, 1440):
        return day.isoformat()
    return f"{day.isoformat()} {minutes // 60:02}:{minutes % 60:02}"


def level_text(column: DataColumn, at: int, date1904: bool = False) -> str | None:
    """What people see in data row `at`, as the name of a level; None where there is nothing to name."""
    state = column.state[at]
    if state == State.TEXT:
        return column.texts[at]
    if state == State.NUMBER:
        return number_text(float(column.numbers[at]))
    if state == State.DATE:
        return date_text(float(column.numbers[at]), date1904)
    if state == State.YES_NO:
        return "TRUE" if column.numbers[at] else "FALSE"
    return None


def cell_text(table: Table, column: DataColumn, at: int) -> str:
    """What people see in data row `at`, for a message; `an error` and the like where there is no value."""
    words = {State.BLANK: "nothing", State.ERROR: "an error", State.NO_VALUE: "a formula without a value"}
    return level_text(column, at, table.date1904) or words[State(int(column.state[at]))]
