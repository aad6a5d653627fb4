"""One snapshot's cells, read once: our own sheets cell by cell, data sheets as tables of typed columns."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import ThreadPoolExecutor
from functools import cached_property
from io import BytesIO
from typing import TypeVar

import numpy as np
import python_calamine
from lxml import etree
from numpy.typing import NDArray

from bridge.messages import FileRefused, Problem, say
from bridge.page.cells import address
from bridge.workbook import columns as typed
from bridge.workbook import grid, headers, kinds, markup, regions
from bridge.workbook.columns import CellColumn
from bridge.workbook.contents import Contents, RawSheet
from bridge.workbook.places import REQUEST, place
from bridge.workbook.regions import Region, SheetCells
from bridge.workbook.request import Scalar
from bridge.workbook.source import ExcelTable, SheetEntry, SheetSource
from bridge.workbook.tables import DataColumn, State, Table

_WITH_ENTRIES = (REQUEST, "fit estimates", "fit history")
_MUCH_BIGGER = 5  # a plain block this many times the table object's size is what people mean

Found = TypeVar("Found")


class _Unreadable(Exception):
    """One sheet that cannot be read; carries its problem."""

    def __init__(self, problem: Problem) -> None:
        super().__init__(problem.text)
        self.problem = problem


def read(data: bytes, source: SheetSource) -> Contents:
    """What the workbook holds, of the sheets that the request needs (all of them while it names none).

    `data` are the workbook's bytes, `source` the same workbook opened. Without a request nothing is read.
    Raises FileRefused.
    """
    book = _Book(data, source)
    own = book.own_sheets()
    visible = tuple(entry.name for entry in _data_sheets(source) if entry.state == "visible")
    if REQUEST not in own:
        return Contents(visible, {}, own)
    asked = grid.read(own[REQUEST]).data_sheets
    tables: dict[str, Table] = {}
    unread: dict[str, Problem] = {}
    for entry, table_name in _needed(source, asked):
        try:
            table = book.table(entry.name, table_name)
        except _Unreadable as failure:
            unread[entry.name] = failure.problem
            continue
        if table is not None:
            tables[entry.name] = table
    return Contents(visible, tables, own, unread)


def role(entry: SheetEntry) -> str | None:
    """Which of our sheets this tab is: by the bridge's mark, or a request by its name alone; None for a user's."""
    if entry.ours is not None:
        return entry.ours
    return REQUEST if entry.kind == "worksheet" and headers.clean(entry.name).casefold() == REQUEST else None


def _data_sheets(source: SheetSource) -> list[SheetEntry]:
    return [entry for entry in source.sheets if entry.kind == "worksheet" and role(entry) is None]


def _needed(source: SheetSource, asked: Sequence[str]) -> list[tuple[SheetEntry, str | None]]:
    """The data sheets asked for, with a table's name where one was given; without any, all visible sheets."""
    there = _data_sheets(source)
    needed: dict[str, tuple[SheetEntry, str | None]] = {}
    for name in asked:
        wanted = name.strip().casefold()
        sheet = next((entry for entry in there if entry.name.strip().casefold() == wanted), None)
        if sheet is not None:
            needed.setdefault(sheet.name, (sheet, None))
            continue
        for entry in there:
            if any(table.name.casefold() == wanted for table in source.tables(entry.name)):
                needed.setdefault(entry.name, (entry, wanted))
    if needed:
        return list(needed.values())
    return [(entry, None) for entry in there if entry.state == "visible" and not entry.empty]


class _Book:
    """The cell reader's workbook beside its opened package."""

    def __init__(self, data: bytes, source: SheetSource) -> None:
        self._data, self._source = data, source

    @cached_property
    def _reader(self) -> python_calamine.CalamineWorkbook:
        return _guarded(lambda: python_calamine.load_workbook(BytesIO(self._data)), "")

    @cached_property
    def _empty_texts(self) -> tuple[int, ...]:
        return markup.empty_shared_strings(self._source.shared_strings())

    def own_sheets(self) -> dict[str, RawSheet]:
        """Our sheets that hold entries of the user's, by our name for them."""
        found: dict[str, RawSheet] = {}
        for entry in sorted(self._source.sheets, key=lambda entry: entry.ours is None):
            name = role(entry)
            if name in _WITH_ENTRIES and name not in found:
                try:
                    found[name] = self._raw(entry.name)
                except _Unreadable as failure:
                    raise FileRefused(failure.problem) from failure
        return found

    def table(self, tab: str, table_name: str | None) -> Table | None:
        """The table on a sheet; None where there is none. Raises _Unreadable."""
        cells = self._cells(tab)
        objects = [one for one in self._source.tables(tab) if table_name in (None, one.name.casefold())]
        found = [(region, one) for one in objects if (region := _of_object(cells, one)) is not None]
        region, one = max(found, key=lambda pair: pair[0].cells, default=(None, None))
        if table_name is None:
            block = regions.find(cells)
            if block is not None and (region is None or block.cells > _MUCH_BIGGER * region.cells):
                region, one = block, None
        return _table(cells, region, one.name if one is not None else None) if region is not None else None

    def _xml(self, tab: str) -> bytes:
        xml = self._source.worksheet_xml(tab)
        far = markup.reaches_too_far(xml)
        if far is not None:
            raise _Unreadable(say("sheet-reaches-too-far", cell=place(tab, far), sheet=tab))
        return xml

    def _cells(self, tab: str) -> SheetCells:
        """The whole sheet in typed columns. The reader parses without Python's lock while the markup is searched."""
        xml, book = self._xml(tab), self._reader
        with ThreadPoolExecutor(1) as beside:
            reading = beside.submit(_guarded, lambda: book.get_sheet_by_name(tab), tab)
            marks = _parsed(lambda: markup.scan(xml, self._empty_texts), tab)
            sheet = reading.result()
        rows = sheet.iter_rows() if sheet.start is not None else ()
        columns, dates = typed.gather(rows, sheet.start[1] if sheet.start is not None else 0, sheet.width)
        date1904 = _set_serials(columns, dates, xml)
        columns = _marked(_reaching(columns, marks.no_value), marks)
        height = len(columns[0].state) if columns else 0
        hidden = np.zeros(height, np.bool_)
        hidden[marks.hidden[marks.hidden < height]] = True
        return SheetCells(tab, columns, hidden, tuple(sheet.merged_cell_ranges or ()), date1904)

    def _raw(self, tab: str) -> RawSheet:
        """A sheet of ours cell by cell; error cells hold the error's text, dates their serials."""
        xml = self._xml(tab)
        sheet = _guarded(lambda: self._reader.get_sheet_by_name(tab), tab)
        values: dict[tuple[int, int], Scalar] = {}
        dates = set()
        first = sheet.start[1] if sheet.start is not None else 0
        for row, cells in enumerate(sheet.iter_rows() if sheet.start is not None else ()):
            for column, value in enumerate(cells, first):
                if isinstance(value, (str, float, int)):
                    values[(row, column)] = value
                else:
                    dates.add((row, column))
        formulas: dict[tuple[int, int], str] = {}
        shared: dict[str, tuple[tuple[int, int], str]] = {}
        for cell in _parsed(lambda: list(markup.walk(xml)), tab):
            at = (cell.row, cell.column)
            if cell.kind == "e" and cell.value:
                values[at] = cell.value
            elif at in dates and _is_number(cell.value):
                values[at] = float(cell.value or 0)
            if cell.formula is not None:
                formulas[at] = _formula(cell, shared)
        values = {at: value for at, value in values.items() if value != ""}
        known = {at: text for at, text in formulas.items() if text}
        return RawSheet(tab, values, known, frozenset(at for at in dates if at in values))


# --- one sheet ---------------------------------------------------------------------------------


def _guarded(step: Callable[[], Found], tab: str) -> Found:
    """The step's result; the cell reader's own failures become one of ours."""
    try:
        return step()
    except (python_calamine.CalamineError, OSError, ValueError, OverflowError, MemoryError) as failure:
        raise _refusal(tab) from failure
    except BaseException as failure:
        # The reader is written in another language; what it did not foresee arrives under this name.
        if type(failure).__name__ != "PanicException":
            raise
        raise _refusal(tab) from failure


def _parsed(step: Callable[[], Found], tab: str) -> Found:
    try:
        return step()
    except (etree.XMLSyntaxError, ValueError) as failure:
        raise _refusal(tab) from failure


def _refusal(tab: str) -> Exception:
    return _Unreadable(say("sheet-unreadable", sheet=tab)) if tab else FileRefused(say("workbook-unreadable"))


def _is_number(text: str | None) -> bool:
    try:
        return text is not None and np.isfinite(float(text)).item()
    except ValueError:
        return False


def _formula(cell: markup.WalkedCell, shared: dict[str, tuple[tuple[int, int], str]]) -> str:
    """A formula's text; one shared with other cells is moved to where it stands."""
    text = cell.formula or ""
    if cell.shared is None:
        return text
    if text:
        shared[cell.shared] = ((cell.row, cell.column), text)
        return text
    if cell.shared not in shared:
        return ""
    from openpyxl.formula.translate import Translator, TranslatorError  # needed for people's own notes only

    origin, first = shared[cell.shared]
    try:
        moved = Translator("=" + first, address(*origin)).translate_formula(address(cell.row, cell.column))
    except (TranslatorError, ValueError):
        return ""
    return str(moved).removeprefix("=")


def _set_serials(columns: Sequence[CellColumn], dates: typed.Dates, xml: bytes) -> bool:
    """Make the dates' numbers the serials that the file stores; whether they count from 1904.

    Whole days follow from the calendar once one of them has shown where it starts; the others are looked up.
    """
    wanted = [*dates.unsure, *([dates.sure] if dates.sure else [])]
    if not wanted:
        return False
    stored = markup.serials(xml, np.array(wanted, dtype=np.int64).reshape(-1, 2))
    date1904 = dates.sure is not None and stored.get(dates.sure) == _number(columns, dates.sure) - typed.DAYS_TO_1904
    for column in columns if date1904 else ():
        column.numbers[column.state == State.DATE] -= typed.DAYS_TO_1904
    for at, moment in dates.unsure.items():
        serial = stored.get(at, typed.serial_of(moment, date1904))
        columns[at[1]].numbers[at[0]] = serial
        if not np.isfinite(serial):
            columns[at[1]].state[at[0]] = State.ERROR
    return date1904


def _number(columns: Sequence[CellColumn], at: tuple[int, int]) -> float:
    return float(columns[at[1]].numbers[at[0]])


def _reaching(columns: tuple[CellColumn, ...], places: NDArray[np.int64]) -> tuple[CellColumn, ...]:
    """The columns, lengthened and added to so that they reach formulas without a value, which the reader skips."""
    height = len(columns[0].state) if columns else 0
    if not len(places) or (places[:, 0].max() < height and places[:, 1].max() < len(columns)):
        return columns
    height, width = max(height, int(places[:, 0].max()) + 1), max(len(columns), int(places[:, 1].max()) + 1)
    blank = CellColumn(np.empty(0), np.empty(0, np.uint8), ())
    return tuple(_lengthened(columns[at] if at < len(columns) else blank, height) for at in range(width))


def _lengthened(column: CellColumn, height: int) -> CellColumn:
    more = height - len(column.state)
    numbers = np.concatenate([column.numbers, np.full(more, np.nan)])
    state = np.concatenate([column.state, np.zeros(more, np.uint8)])
    return CellColumn(numbers, state, (*column.texts, *[None] * more) if column.texts else ())


def _marked(columns: Sequence[CellColumn], marks: markup.Markup) -> tuple[CellColumn, ...]:
    """The columns with error cells, formulas without a value and empty texts told from blanks."""
    texts = {}
    for places, state in (
        (marks.errors, State.ERROR),
        (marks.no_value, State.NO_VALUE),
        (marks.empty_text, State.BLANK),
    ):
        for at in np.unique(places[:, 1]).tolist():
            if at >= len(columns):
                continue
            rows = places[places[:, 1] == at, 0]
            rows = rows[rows < len(columns[at].state)]
            columns[at].state[rows] = state
            if state == State.BLANK:
                texts[at] = _with_empty_texts(columns[at], rows)
    return tuple(
        CellColumn(column.numbers, column.state, texts.get(at, column.texts)) for at, column in enumerate(columns)
    )


def _with_empty_texts(column: CellColumn, rows: NDArray[np.int64]) -> tuple[str | None, ...]:
    texts = list(column.texts) or [None] * len(column.state)
    for row in rows.tolist():
        texts[row] = ""
    return tuple(texts)


# --- from a region to a table ------------------------------------------------------------------


def _of_object(cells: SheetCells, table: ExcelTable) -> Region | None:
    found = re.fullmatch(r"\$?([A-Z]{1,3})\$?(\d{1,7})(?::\$?([A-Z]{1,3})\$?(\d{1,7}))?", table.ref.upper())
    if found is None or not cells.columns:
        return None
    first = (int(found[2]) - 1, markup.column_number(found[1]))
    last = (int(found[4] or found[2]) - 1 - table.totals_rows, markup.column_number(found[3] or found[1]))
    if first[0] >= cells.height or first[1] >= len(cells.columns):
        return None
    return regions.within(cells, first, last, table.header_rows > 0)


def _table(cells: SheetCells, region: Region, name: str | None) -> Table:
    rows = region.rows
    columns = tuple(
        _data_column(cells.columns[at], rows, at, name, unit)
        for at, name, unit in zip(region.columns, region.names, region.units, strict=True)
    )
    header = region.header + 1 if region.header is not None else int(rows[0])
    return Table(cells.name, header, rows + 1, cells.hidden[rows], columns, name, cells.date1904)


def _data_column(column: CellColumn, rows: NDArray[np.int64], index: int, name: str, unit: str | None) -> DataColumn:
    state = column.state[rows]
    numbers = column.numbers[rows]
    numbers[(state != State.NUMBER) & (state != State.DATE) & (state != State.YES_NO)] = np.nan
    texts = _texts(column.texts, rows)
    return DataColumn(name, index, kinds.kind(state), numbers, texts, state, unit, _filled(column, int(rows[0])))


def _filled(column: CellColumn, first: int) -> int:
    """Cells from row `first` to the end of the sheet that a spreadsheet counts as filled, invisible texts included."""
    return int(np.count_nonzero(column.state[first:] != State.BLANK)) + column.texts[first:].count("")


def _texts(texts: tuple[str | None, ...], rows: NDArray[np.int64]) -> tuple[str | None, ...]:
    if not texts:
        return ()
    if len(rows) and rows[-1] - rows[0] + 1 == len(rows):
        kept: Iterable[str | None] = texts[int(rows[0]) : int(rows[-1]) + 1]
    else:
        kept = (texts[row] for row in rows.tolist())
    taken = tuple(kept)
    return taken if taken.count(None) < len(taken) else ()
