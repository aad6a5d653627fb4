"""Data tables: typed columns that know which cell each value came from."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum, StrEnum

import numpy as np
from numpy.typing import NDArray


class Kind(StrEnum):
    """What a column mostly holds."""

    NUMBER = "number"
    TEXT = "text"
    DATE = "date"
    YES_NO = "yes/no"
    EMPTY = "empty"


class State(IntEnum):
    """What one cell holds."""

    BLANK = 0
    NUMBER = 1
    TEXT = 2
    DATE = 3
    YES_NO = 4
    ERROR = 5
    NO_VALUE = 6  # a formula without a stored value


@dataclass(frozen=True, slots=True)
class DataColumn:
    """One column of a table.

    `name` is the header as people read it (trimmed, line breaks as spaces), unique in the table; a blank header
    is named after its column letters (`column D`), a repeated one gets ` (2)`. `unit` is what stands in the header's
    last (…) or […]. `index` is the zero-based column on the sheet.
    `numbers` (n,): the number, a date's serial, 1/0 for yes/no; NaN where there is none.
    `texts`: per row the text, or None; the tuple is empty for a column without any text. An empty text in a BLANK row
    is a cell that holds a text in which nothing can be seen (spreadsheet programs count such a cell as filled).
    `state` (n,) holds a `State` per row. `filled` counts the cells from the first data row to the end of the sheet
    that hold anything, whatever stands under the table included; None where that is not known.
    """

    name: str
    index: int
    kind: Kind
    numbers: NDArray[np.float64]
    texts: tuple[str | None, ...]
    state: NDArray[np.uint8]
    unit: str | None = None
    filled: int | None = None


@dataclass(frozen=True, slots=True)
class Table:
    """A data sheet's table. Row numbers are the one-based rows people see.

    `header_row` one-based; `rows` (n,) the sheet row of each data row (wholly empty rows are not data rows);
    `hidden` (n,) True where the sheet row is hidden or filtered out. `excel_table` its name, if it is one.
    `date1904`: date serials count from 1904, not from 1900.
    """

    sheet: str
    header_row: int
    rows: NDArray[np.int64]
    hidden: NDArray[np.bool_]
    columns: tuple[DataColumn, ...]
    excel_table: str | None = None
    date1904: bool = False

    def column(self, name: str) -> DataColumn | None:
        """The column called `name` (case and outer spaces aside), or None."""
        wanted = name.strip().casefold()
        for column in self.columns:
            if column.name.casefold() == wanted:
                return column
        return None
