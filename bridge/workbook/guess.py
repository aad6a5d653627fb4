"""First contact: which sheet holds the data, which column names the rows, which one orders them. Only guesses."""

from __future__ import annotations

import re
from collections.abc import Mapping

import numpy as np

from bridge.workbook.tables import DataColumn, Kind, State, Table

_LABEL_WORDS = re.compile(r"\b(name|id|no|nr|number|code|key|label|case|job|sample|item|ref|reference|address)\b", re.I)
_ORDER_WORDS = re.compile(r"\b(date|day|week|month|quarter|year|time|order|run|sequence|seq)\b", re.I)
_FILLED = 0.95


def data_sheet(tables: Mapping[str, Table]) -> Table | None:
    """The table that most looks like past cases: numbers in it, many filled cells, a table object preferred."""
    return max(tables.values(), key=_weight, default=None)


def label_column(table: Table) -> DataColumn | None:
    """The column that names the rows: all different, a text or named like one; the leftmost wins."""
    for column in table.columns:
        named = _LABEL_WORDS.search(column.name.replace("_", " ")) is not None
        wanted = column.kind is Kind.TEXT or (named and column.kind is Kind.NUMBER and _is_whole(column))
        if wanted and _filled(column) >= _FILLED and _all_different(column):
            return column
    return None


def order_column(table: Table) -> DataColumn | None:
    """The column of time or sequence: complete, and going up from row to row."""
    for column in table.columns:
        named = _ORDER_WORDS.search(column.name.replace("_", " ")) is not None
        wanted = column.kind is Kind.DATE or (named and column.kind is Kind.NUMBER)
        complete = wanted and len(column.numbers) > 2 and not np.isnan(column.numbers).any()
        if complete and column.kind in (Kind.DATE, Kind.NUMBER):
            steps = np.diff(column.numbers)
            if (steps >= 0).all() and (steps > 0).any():
                return column
    return None


def _weight(table: Table) -> tuple[bool, bool, int]:
    numbers = sum(int(np.count_nonzero(column.state == State.NUMBER)) for column in table.columns)
    usable = numbers > 2 and len(table.columns) > 1 and len(table.rows) > 2
    return usable, usable and table.excel_table is not None, numbers


def _filled(column: DataColumn) -> float:
    return float(np.mean(column.state != State.BLANK)) if len(column.state) else 0.0


def _is_whole(column: DataColumn) -> bool:
    there = column.numbers[~np.isnan(column.numbers)]
    return bool((there == np.floor(there)).all())


def _all_different(column: DataColumn) -> bool:
    texts = [text for text in column.texts if text]
    numbers = column.numbers[~np.isnan(column.numbers)]
    return len(set(texts)) == len(texts) and len(np.unique(numbers)) == len(numbers)
