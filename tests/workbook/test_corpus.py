"""Real workbooks nobody here wrote: every readable one is read, and read as a second reader reads it.

The files come from four public repositories (apache/poi, ClosedXML/ClosedXML, jmcnamara/XlsxWriter, tafia/calamine);
they are read where they lie and none is carried along. `python -m tests.workbook.test_corpus` compares all of them.
"""

from __future__ import annotations

import io
import sys
import warnings
from collections import Counter
from collections.abc import Iterator
from datetime import date, time, timedelta
from pathlib import Path

import openpyxl
import pytest
from openpyxl.cell.cell import Cell
from openpyxl.utils.datetime import to_excel

from bridge.messages import FileRefused
from bridge.package.package import Package
from bridge.workbook import grid, reading, understand
from bridge.workbook.contents import Contents
from bridge.workbook.regions import SheetCells
from bridge.workbook.tables import State

CORPUS = Path(__file__).resolve().parents[2] / "../shared/corpus"
FILES = sorted(CORPUS.glob("*/*.xls[xm]"))
SMALL = 60_000  # bytes
MOST_CELLS = 200_000

pytestmark = pytest.mark.skipif(not FILES, reason="the corpus of real workbooks is not at hand")


@pytest.mark.parametrize("folder", ["poi", "ClosedXML", "XlsxWriter", "calamine"])
def test_every_readable_file_is_read_and_laid_out_twice_alike(folder: str) -> None:
    counts: Counter[str] = Counter()
    for path in FILES:
        if path.parent.name != folder:
            continue
        data = path.read_bytes()
        try:
            held = with_all_sheets(data)
        except FileRefused:
            counts["refused"] += 1
            continue
        counts["read"] += 1
        first = understand.understand(grid.read(None), held.tables, held.sheet_names, held.unread).grid
        second = understand.understand(first, held.tables, held.sheet_names, held.unread).grid
        assert second.cells == first.cells, path.name
    assert counts["read"] > counts["refused"], counts


def with_all_sheets(data: bytes) -> Contents:
    """The tables of every visible sheet, as at first contact."""
    package = Package.open(data)
    book = reading._Book(data, package)
    tables, unread = {}, {}
    for entry in package.sheets:
        if entry.kind != "worksheet":
            continue
        try:
            table = book.table(entry.name, None)
        except reading._Unreadable as failure:
            unread[entry.name] = failure.problem
            continue
        if table is not None:
            tables[entry.name] = table
    return Contents(tuple(tables), tables, {}, unread)


@pytest.mark.parametrize("part", range(4))
def test_cells_agree_with_a_second_reader(part: int) -> None:
    files = [path for path in FILES if path.stat().st_size < SMALL][part::16]
    counts = Counter(kind for path in files for kind in compared(path))
    differing = {kind: count for kind, count in counts.items() if "->" in kind}
    # A formula whose result is an empty text: the second reader shows nothing there, as for a missing value.
    differing.pop("NO_VALUE->BLANK", None)
    assert not differing
    assert counts["same"] > 500


def compared(path: Path) -> Iterator[str]:
    """For each cell `same`, or what was expected and what was read."""
    data = path.read_bytes()
    try:
        package = Package.open(data)
        book = reading._Book(data, package)
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            values = openpyxl.load_workbook(io.BytesIO(data), data_only=True)
            formulas = openpyxl.load_workbook(io.BytesIO(data))
    except Exception:  # what either reader refuses cannot be compared
        return
    for entry in package.sheets:
        if entry.kind != "worksheet" or entry.name not in values.sheetnames:
            continue
        page = values[entry.name]
        if page.max_row * page.max_column > MOST_CELLS:
            continue
        try:
            cells = book._cells(entry.name)
        except reading._Unreadable:
            continue
        for row in page.iter_rows():
            for cell in row:
                is_formula = formulas[entry.name].cell(cell.row, cell.column).data_type == "f"
                yield _verdict(cells, cell, is_formula, values.epoch)


def _verdict(cells: SheetCells, cell: Cell, is_formula: bool, epoch: date) -> str:
    row, column = cell.row - 1, cell.column - 1
    inside = column < len(cells.columns) and row < cells.height
    state = State(int(cells.columns[column].state[row])) if inside else State.BLANK
    number = float(cells.columns[column].numbers[row]) if inside else float("nan")
    expected = _expected(cell, is_formula)
    if expected is not state:
        return f"{expected.name}->{state.name}"
    if expected is State.NUMBER and float(cell.value) != number:
        return f"{cell.value!r}->{number!r}"
    if expected is State.DATE and abs(to_excel(cell.value, epoch) - number) > 1e-8:
        return f"{cell.value!r}->{number!r}"
    if expected is State.TEXT and cells.text(row, column) is None:
        return "text->None"
    return "same"


def _expected(cell: Cell, is_formula: bool) -> State:
    if cell.data_type == "e":
        return State.ERROR
    value = cell.value
    if value is None:
        return State.NO_VALUE if is_formula else State.BLANK
    if isinstance(value, bool):
        return State.YES_NO
    if isinstance(value, (date, time, timedelta)):
        return State.DATE
    if isinstance(value, str):
        return State.TEXT if value.strip() else State.BLANK
    return State.NUMBER


if __name__ == "__main__":
    counted: Counter[str] = Counter()
    for file in FILES:
        counted.update(compared(file))
    print(dict(counted))
    sys.exit(any("->" in kind and kind != "NO_VALUE->BLANK" for kind in counted))
