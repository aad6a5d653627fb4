"""Where on a sheet the table is: its header row, its columns, its data rows.

A sheet may hold title lines above the table, notes below it and other blocks beside it. Columns that touch form a
block; blocks that share their header row and length are one table with empty columns between.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import groupby

import numpy as np
from numpy.typing import NDArray

from bridge.workbook import headers
from bridge.workbook.columns import CellColumn
from bridge.workbook.kinds import date_text, number_text
from bridge.workbook.tables import State

_LOOK_AT = 60  # rows in which a header is looked for
_LEAST_COVERAGE = 0.5  # of the columns that a header row has a text in
_NEARLY_BEST = 0.75
_YEARS = (1900.0, 2100.0)
_WIDEST_MERGE = 1000

Merge = tuple[tuple[int, int], tuple[int, int]]


@dataclass(frozen=True, slots=True)
class SheetCells:
    """A whole sheet in columns, from row 1 and column A on. `hidden` (n,); `merges` zero-based corner positions."""

    name: str
    columns: tuple[CellColumn, ...]
    hidden: NDArray[np.bool_]
    merges: tuple[Merge, ...] = ()
    date1904: bool = False

    @property
    def height(self) -> int:
        """Rows of the sheet, from the first."""
        return len(self.hidden)

    def text(self, row: int, column: int) -> str | None:
        """The text in a cell; None where it holds none."""
        texts = self.columns[column].texts
        return texts[row] if texts else None


@dataclass(frozen=True, slots=True)
class Region:
    """A table found. Zero-based sheet rows and columns; `units` is a row of units under the header, if there is one."""

    header: int | None
    columns: tuple[int, ...]
    rows: NDArray[np.int64]
    names: tuple[str, ...]
    units: tuple[str | None, ...]
    cells: int  # filled cells below the header


def find(cells: SheetCells) -> Region | None:
    """The sheet's table: the block with most filled cells among those that have a header; None where there is none."""
    if not cells.columns or not cells.height:
        return None
    filled = np.stack([column.state != State.BLANK for column in cells.columns])
    found = [region for group in _touching(filled) if (region := _region(cells, filled, group)) is not None]
    joined = _joined(cells, filled, found)
    return max(joined, key=lambda region: region.cells, default=None)


def within(cells: SheetCells, first: tuple[int, int], last: tuple[int, int], has_header: bool) -> Region | None:
    """The table in a given rectangle (a table object's, totals aside); None where it holds no data row."""
    width = range(first[1], min(last[1], len(cells.columns) - 1) + 1)
    columns = tuple(width)
    start = first[0] + int(has_header)
    stop = min(last[0] + 1, cells.height)
    if not columns or start >= stop:
        return None
    body = np.stack([cells.columns[at].state[start:stop] != State.BLANK for at in columns])
    rows = np.flatnonzero(body.any(axis=0)).astype(np.int64) + start
    if not len(rows):
        return None
    header = first[0] if has_header else None
    texts = _header_texts(cells, header, columns) if header is not None else [None] * len(columns)
    names = headers.names(texts, columns)
    units = tuple(headers.unit(name) for name in names)
    return Region(header, columns, rows, names, units, int(np.count_nonzero(body)))


# --- blocks of columns -------------------------------------------------------------------------


def _touching(filled: NDArray[np.bool_]) -> list[tuple[int, ...]]:
    used = np.any(filled, axis=1).tolist()
    runs = groupby(range(len(used)), key=lambda at: used[at])
    return [tuple(run) for is_used, run in runs if is_used]


def _joined(cells: SheetCells, filled: NDArray[np.bool_], found: Sequence[Region]) -> list[Region]:
    joined: list[Region] = []
    for region in found:
        before = joined[-1] if joined else None
        if before is not None and _belong_together(before, region):
            together = _region(cells, filled, (*before.columns, *region.columns))
            joined[-1] = together if together is not None and together.header == region.header else before
        else:
            joined.append(region)
    return joined


def _belong_together(left: Region, right: Region) -> bool:
    slack = max(2, len(left.rows) // 10)
    return left.header == right.header and abs(int(left.rows[-1]) - int(right.rows[-1])) <= slack


def _region(cells: SheetCells, filled: NDArray[np.bool_], columns: tuple[int, ...]) -> Region | None:
    part = filled[list(columns)]
    head = _header(cells, part, columns)
    if head is None:
        return None
    below = part[:, head + 1 :]
    if not below.any():
        return None
    heading, units_row = _second_line(cells, part, columns, head)
    header = heading if heading is not None else head
    start = (units_row if units_row is not None else header) + 1
    kept = [at for at in range(len(columns)) if part[at, header] or part[at, start:].any()]
    kept_columns = tuple(columns[at] for at in kept)
    rows = _data_rows(cells, part[kept], kept_columns, start)
    if not len(rows):
        return None
    region = _named(cells, header, kept_columns, rows, units_row)
    return replace(region, cells=int(np.count_nonzero(part[kept][:, start:])))


def _named(
    cells: SheetCells, header: int, columns: tuple[int, ...], rows: NDArray[np.int64], units_row: int | None
) -> Region:
    spans = _spanning(cells.merges, header - 1)
    above = [cells.text(*spans[at]) if at in spans else None for at in columns] if spans else []
    names = headers.names(_header_texts(cells, header, columns), columns, above)
    units = [headers.unit(name) for name in names]
    if units_row is not None:
        units = [own or _bare_unit(cells.text(units_row, at)) for own, at in zip(units, columns, strict=True)]
    return Region(header, columns, rows, names, tuple(units), 0)


def _bare_unit(text: str | None) -> str | None:
    return text.strip().strip("()[]").strip() or None if text and not headers.is_dash(text) else None


def _header_texts(cells: SheetCells, row: int, columns: Sequence[int]) -> list[str | None]:
    """The header over each column: its own cell's, or that of the merged cells it is a part of."""
    origins = _covering(cells.merges, row)
    shown = ((_shown(cells, row, at), origins.get(at)) for at in columns)
    return [_shown(cells, *origin) if text is None and origin is not None else text for text, origin in shown]


def _shown(cells: SheetCells, row: int, column: int) -> str | None:
    state, number = cells.columns[column].state[row], float(cells.columns[column].numbers[row])
    if state == State.NUMBER:
        return number_text(number)
    if state == State.DATE:
        return date_text(number, cells.date1904)
    return cells.text(row, column)


# --- the header row ----------------------------------------------------------------------------


def _header(cells: SheetCells, part: NDArray[np.bool_], columns: tuple[int, ...]) -> int | None:
    """The zero-based row of the names: texts over most columns, nothing but texts (or years), data below."""
    rows = np.flatnonzero(part.any(axis=0))[:_LOOK_AT].tolist()
    covered = {row: _coverage(cells, part, columns, row) for row in rows}
    wordy = {row: _is_wordy(cells, columns, row) for row in rows}
    data = [row for row in rows if not wordy[row]]
    first_data = next((row for row in data if covered[row] >= _LEAST_COVERAGE), data[0] if data else None)
    candidates = [
        row
        for row in rows
        if wordy[row]
        and covered[row] >= _LEAST_COVERAGE
        and (first_data is None or row < first_data)
        and (len(columns) == 1 or np.count_nonzero(part[:, row]) > 1)
    ]
    if first_data is not None:
        candidates = _next_to(candidates, rows, first_data) or candidates
    best = max((covered[row] for row in candidates), default=0.0)
    return next((row for row in candidates if covered[row] >= _NEARLY_BEST * best), None)


def _next_to(candidates: Sequence[int], rows: Sequence[int], first_data: int) -> list[int]:
    """The candidates that no empty row parts from the first data row."""
    top = first_data
    while top - 1 in rows:
        top -= 1
    return [row for row in candidates if row >= top]


def _is_wordy(cells: SheetCells, columns: tuple[int, ...], row: int) -> bool:
    texts = 0
    for at in columns:
        state, number = cells.columns[at].state[row], float(cells.columns[at].numbers[row])
        texts += state == State.TEXT
        is_year = state == State.NUMBER and _YEARS[0] <= number <= _YEARS[1] and number == int(number)
        if state in (State.NUMBER, State.DATE, State.YES_NO) and not is_year:
            return False
    return texts > 0


def _coverage(cells: SheetCells, part: NDArray[np.bool_], columns: tuple[int, ...], row: int) -> float:
    merged = _covering(cells.merges, row)
    covered = sum(bool(part[at, row]) or column in merged for at, column in enumerate(columns))
    return covered / len(columns)


def _covering(merges: Sequence[Merge], row: int) -> Mapping[int, tuple[int, int]]:
    """Columns that merged cells cover in `row`, and the position of the cell that holds the content."""
    covering: dict[int, tuple[int, int]] = {}
    for (top, left), (bottom, right) in merges:
        if top <= row <= bottom:
            covering.update(dict.fromkeys(range(left, min(right, left + _WIDEST_MERGE) + 1), (top, left)))
    return covering


def _spanning(merges: Sequence[Merge], row: int) -> Mapping[int, tuple[int, int]]:
    """The same for cells merged across several columns only: headings over groups of columns."""
    return _covering([merge for merge in merges if merge[1][1] > merge[0][1]], row)


def _second_line(
    cells: SheetCells, part: NDArray[np.bool_], columns: tuple[int, ...], head: int
) -> tuple[int | None, int | None]:
    """The row under `head` as (the real header under group headings, None) or (None, a row of units), or neither."""
    row = head + 1
    if row + 1 >= part.shape[1] or not _is_wordy(cells, columns, row):
        return None, None
    numeric = [at for at in columns if _is_numeric(cells.columns[at].state[row + 1 :])]
    texts = [cells.text(row, at) for at in numeric]
    if not any(texts):
        return None, None
    if _spanning(cells.merges, head) and all(texts):
        return row, None
    others = [cells.text(row, at) for at in columns if at not in numeric]
    are_units = all(text is None or headers.looks_like_unit(text) or headers.is_dash(text) for text in texts)
    if are_units and all(text is None or headers.is_dash(text) or text.strip()[0] in "([" for text in others):
        return None, row
    return None, None


def _is_numeric(state: NDArray[np.uint8]) -> bool:
    numbers = np.count_nonzero((state == State.NUMBER) | (state == State.DATE))
    return bool(numbers > np.count_nonzero(state == State.TEXT))


# --- the data rows -----------------------------------------------------------------------------


def _data_rows(cells: SheetCells, part: NDArray[np.bool_], columns: tuple[int, ...], start: int) -> NDArray[np.int64]:
    """Rows that hold something, without the remarks that stand below the table after an empty row."""
    rows = np.flatnonzero(part[:, start:].any(axis=0)).astype(np.int64) + start
    gaps = np.flatnonzero(np.diff(rows) > 1)
    for gap in gaps[::-1].tolist():
        tail = rows[gap + 1 :]
        if len(tail) > _LOOK_AT or not all(_is_remark(cells, part, columns, row) for row in tail.tolist()):
            break
        rows = rows[: gap + 1]
    return rows


def _is_remark(cells: SheetCells, part: NDArray[np.bool_], columns: tuple[int, ...], row: int) -> bool:
    there = np.flatnonzero(part[:, row])
    return len(columns) > 1 and len(there) == 1 and cells.text(row, columns[int(there[0])]) is not None
