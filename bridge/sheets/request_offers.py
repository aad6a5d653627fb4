"""What the request's cells offer in their drop-downs: only what fits the column beside them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from itertools import groupby

import numpy as np

from bridge.page.cells import address
from bridge.page.sheet import DropDown
from bridge.workbook import grid as grids
from bridge.workbook import settings
from bridge.workbook.naming import ColumnNames
from bridge.workbook.request import Grid
from bridge.workbook.tables import DataColumn, Kind

MOST_CHARACTERS = 255
_PLAIN = ("response", "predictor", "category", "candidate")
_POSITIVE = ("log response", "log predictor", "root predictor")
_CURVED = ("squared predictor", "cubed predictor")
_OTHERS = ("weight", "order", "group", "label")
_OF_TEXTS = ("category", "candidate category", "group", "label")
_OF_DATES = ("order", "predictor", "category", "group", "label")
_OF_YES_NO = ("category", "candidate category", "predictor", "response", "group", "label")


def roles(column: DataColumn | None) -> tuple[str, ...]:
    """The entries that make sense for a data column; the plainest first."""
    if column is None or column.kind is Kind.EMPTY:
        return ()
    if column.kind is Kind.NUMBER:
        there = column.numbers[~np.isnan(column.numbers)]
        positive = len(there) > 0 and float(there.min()) > 0
        return (*_PLAIN, *(_POSITIVE if positive else ()), *_CURVED, *_OTHERS)
    return {Kind.TEXT: _OF_TEXTS, Kind.DATE: _OF_DATES, Kind.YES_NO: _OF_YES_NO}[column.kind]


def drop_downs(
    grid: Grid, names: ColumnNames, columns: Sequence[int], crossed_rows: Sequence[int], sheets: Sequence[str]
) -> tuple[DropDown, ...]:
    """All of the sheet's lists. `columns` are the models' columns, `crossed_rows` the rows of the crossed block."""
    if grid.column_header is None or not columns:
        return ()
    return tuple(_drop_downs(grid, names, columns, crossed_rows, sheets))


def _drop_downs(
    grid: Grid, names: ColumnNames, columns: Sequence[int], crossed_rows: Sequence[int], sheets: Sequence[str]
) -> Iterator[DropDown]:
    cell = grids.data_sheet_cell(grid)
    if cell is not None and _fits(sheets):
        yield DropDown(cell, (cell[0], cell[1] + len(grid.data_sheets)), tuple(sheets))
    by_row = {row.row: roles(_column(names, row.label)) for row in grid.column_rows if row.label}
    yield from _runs(by_row, columns)
    labels = _labels(grid)
    if crossed_rows and labels:
        first, last = crossed_rows[0], crossed_rows[-1]
        for column in (grid.label_column, grid.other_columns[grids.WITH]):
            if column not in columns:
                yield DropDown((first, column), (last, column), labels)
        yield from _runs(dict.fromkeys(crossed_rows, ("yes",)), columns)
    yield from _of_settings(grid, columns, labels)


def _of_settings(grid: Grid, columns: Sequence[int], labels: str) -> Iterator[DropDown]:
    choices: dict[int, tuple[str, ...]] = {}
    for row in grid.setting_rows:
        setting = settings.known(row.label)
        if setting is None:
            continue
        if setting.label in (settings.WHERE, settings.AND_WHERE) and labels:
            yield from (DropDown((row.row, first), (row.row, last), labels) for first, last in _spans(columns))
        elif setting.choices:
            choices[row.row] = setting.choices
    yield from _runs(choices, columns)


def _runs(choices: Mapping[int, tuple[str, ...]], columns: Sequence[int]) -> Iterator[DropDown]:
    """One list for each run of rows that offer the same."""
    rows = sorted(choices)
    for _, run in groupby(enumerate(rows), key=lambda pair: (pair[1] - pair[0], choices[pair[1]])):
        block = [row for _, row in run]
        offered = choices[block[0]]
        if offered and _fits(offered):
            yield from (DropDown((block[0], first), (block[-1], last), offered) for first, last in _spans(columns))


def _spans(columns: Sequence[int]) -> Iterator[tuple[int, int]]:
    """Neighbouring columns as (first, last)."""
    for _, run in groupby(enumerate(sorted(columns)), key=lambda pair: pair[1] - pair[0]):
        block = [column for _, column in run]
        yield block[0], block[-1]


def _fits(choices: Sequence[str]) -> bool:
    """Whether a list can be written out: the file format's limits for lists of texts."""
    return bool(choices) and len(",".join(choices)) <= MOST_CHARACTERS and not any("," in one for one in choices)


def _labels(grid: Grid) -> str:
    """A reference to the cells that hold the data columns' names."""
    rows = [row.row for row in grid.column_rows if row.label]
    if not rows:
        return ""
    column = grid.label_column
    return f"{address(rows[0], column, absolute=True)}:{address(rows[-1], column, absolute=True)}"


def _column(names: ColumnNames, label: str) -> DataColumn | None:
    place = names.resolve(label)
    return names.columns[names.label(*place)][1] if place is not None else None
