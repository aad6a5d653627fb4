"""Cells as people and links name them."""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from bridge.page.cells import column_letters, quoted
from bridge.workbook.tables import DataColumn, Table

REQUEST = "fit request"


def place(sheet: str, cell: str) -> str:
    """`Refits!C17`, with the sheet in quotes where it needs them; the form is also a link's target."""
    plain = re.fullmatch(r"[^\W\d]\w*", sheet) is not None
    looks_like_cell = re.fullmatch(r"[A-Za-z]{1,3}\d+|(?:[Rr]\d*)?(?:[Cc]\d*)?|(?i:true|false)", sheet) is not None
    return f"{sheet if plain and not looks_like_cell else quoted(sheet)}!{cell}"


def data_cell(table: Table, column: DataColumn, at: int) -> str:
    """The cell of data row `at` (zero-based among the table's rows) in a column of the table."""
    return place(table.sheet, f"{column_letters(column.index)}{int(table.rows[at])}")


def data_cells(table: Table, column: DataColumn, rows: Sequence[int] | NDArray[np.intp], most: int = 3) -> str:
    """Several cells of a column: `Refits!C17, C60 and 4 more`."""
    first = [data_cell(table, column, int(at)) for at in rows[:1]]
    others = [f"{column_letters(column.index)}{int(table.rows[int(at)])}" for at in rows[1:most]]
    more = len(rows) - most
    return ", ".join([*first, *others]) + (f" and {more} more" if more > 0 else "")


def request_cell(cell: str) -> str:
    """A cell of the request named from outside that sheet."""
    return place(REQUEST, cell)
