"""`fit request`: the grid that people fill in, and the answers under each model.

The room `bridge.workbook` says what stands where (`Request.grid`); this sheet says how it looks. Every entry, note,
extra row and column of the user's stays where it is.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

from bridge.page.cells import Cell, Format, Formula, Value, address, text_literal
from bridge.page.sheet import Merge, Sheet
from bridge.sheets import figures, measure, request_answers, request_offers, style
from bridge.sheets.book import Book
from bridge.sheets.request_answers import Answer
from bridge.workbook import arrange, settings
from bridge.workbook import grid as grids
from bridge.workbook.naming import ColumnNames
from bridge.workbook.request import Grid, GridRow, Scalar

NAME = "fit request"
SPARE_MODELS = 2
_MODEL_WIDTH = 24.0
_LEAST_WIDTHS = {"kind": 9.0, "filled": 11.0, "range": 24.0}
_MOST_FROZEN = 14  # rows; a heading further down would leave no room to scroll
_ANSWERED = ("Fitted ", "Not fitted")

_MARKED = replace(style.FACT, color=style.ALERT)
_LABEL = style.ROW_STRONG
_INDENTED = replace(_LABEL, indent=1)
_SPARE_HEADER = replace(style.HEADER_CENTER, fill=style.TAB_DETAIL)
_LONGEST_LITERAL = 120  # half of what the format allows, because quotes are doubled
_ROW_POINTS = 15.0
_INDENT_WIDTH = 2.0
_PAGE_POINTS = 900.0  # what still reads well when shrunk to one landscape page
_SHORT_LIST = 12  # models with room for wide columns

Position = tuple[int, int]


def lay_out(book: Book) -> Sheet:
    """The sheet `fit request`, with what the user typed, fresh facts and the answers to this save."""
    page = _Page(book)
    page.draw()
    return page.sheet()


def entry_cells(book: Book) -> Mapping[str, tuple[tuple[str, Scalar], ...]]:
    """For each model asked for, the cells that make up its request and what they hold (empty text: nothing).

    Addresses on `fit request` as laid out: the data sheet, the name, the data columns' labels and entries, crossed
    terms, settings. A fit is out of date when one of them changes.
    """
    grid = book.request.grid
    return {model.name: tuple(_entry_cells(grid, model.request.grid_column)) for model in book.models}


def _entry_cells(grid: Grid, column: int) -> Iterator[tuple[str, Scalar]]:
    places: list[Position] = []
    sheet = grids.data_sheet_cell(grid)
    if sheet is not None:
        places += [(sheet[0], sheet[1] + at) for at in range(len(grid.data_sheets) + 1)]
    if grid.column_header is not None:
        places.append((grid.column_header, column))
    places += [at for row in grid.column_rows for at in ((row.row, grid.label_column), (row.row, column))]
    with_column = grid.other_columns.get(grids.WITH, grid.label_column + 1)
    for row in _crossed_rows(grid):
        places += [(row, grid.label_column), (row, with_column), (row, column)]
    places += [(row.row, column) for row in grid.setting_rows]
    for at in dict.fromkeys(places):
        yield address(*at), grid.cells.get(at, "")


def _crossed_rows(grid: Grid) -> tuple[int, ...]:
    """The rows of the crossed block, with the empty ones to type in, without the one that parts it from the next."""
    if grid.crossed_header is None:
        return ()
    last = max((row.row for row in grid.crossed_rows), default=grid.crossed_header) + arrange.SPARE_CROSSED
    return tuple(
        row for row in range(grid.crossed_header + 1, last + 1) if row in grids.block_rows(grid, grid.crossed_header)
    )


class _Page:
    """The sheet while it is drawn over the grid."""

    def __init__(self, book: Book) -> None:
        self.book, self.grid = book, book.request.grid
        self.values: dict[Position, Value] = {}
        self.looks: dict[Position, Format] = {}
        self.merges: list[Merge] = []
        self.heights: dict[int, float] = {}
        self.dates = self.grid.dates
        self.names = ColumnNames(self.grid.data_sheets, book.tables)
        self.models = sorted(self.grid.model_columns.values())
        self.spare = self._spare_columns()
        self.columns = (*self.models, *self.spare)
        self.widths = self._widths()

    def draw(self) -> None:
        """Values first, then the looks of each block, then the answers."""
        for at in {*self.grid.cells, *self.grid.formulas}:
            value = self.grid.cells.get(at, "")
            formula = self.grid.formulas.get(at)
            self.values[at] = Formula(formula, value) if formula is not None else value
        self._draw_top()
        self._draw_columns()
        self._draw_crossed()
        self._draw_settings()
        self._draw_answers()

    # --- where things are

    def _spare_columns(self) -> tuple[int, ...]:
        """Columns to the right of the models in which nothing stands, for further models."""
        grid = self.grid
        if grid.column_header is None:
            return ()
        taken = {column for row, column in (*grid.cells, *grid.formulas)}
        start = max((*grid.model_columns.values(), *grid.other_columns.values(), grid.label_column)) + 1
        return tuple(column for column in range(start, start + SPARE_MODELS) if column not in taken)

    def _widths(self) -> dict[int, float]:
        grid = self.grid
        labels = [row.label for row in (*grid.column_rows, *grid.crossed_rows, *grid.setting_rows)]
        widths = {grid.label_column: min(38.0, max(16.0, measure.widest(labels, bold=True) + 1.0))}
        for name, least in _LEAST_WIDTHS.items():
            column = grid.other_columns.get(name)
            if column is not None:
                texts = [grids.shown(grid.cells.get((row.row, column))) for row in grid.column_rows]
                if name == "kind" and grid.data_sheets:
                    texts.append(grid.data_sheets[0])
                widths[column] = min(34.0, max(least, measure.widest(texts) + 1.0))
        each = _MODEL_WIDTH if len(self.models) <= _SHORT_LIST else 18.0
        return widths | dict.fromkeys(self.columns, each)

    # --- the blocks

    def _put(self, at: Position, value: Value) -> None:
        self.values[at] = value

    def _look(self, row: int, columns: Sequence[int], look: Format) -> None:
        for column in columns:
            self.looks[(row, column)] = look

    def _between(self) -> range:
        """The columns from the label to the last model."""
        last = max((*self.models, *self.grid.other_columns.values(), self.grid.label_column))
        return range(self.grid.label_column, last + 1)

    def _draw_top(self) -> None:
        grid = self.grid
        for (row, column), value in grid.cells.items():
            if value == arrange.TITLE:
                self.looks[(row, column)] = style.TITLE
                self.looks[(row + 1, column)] = style.SUBTITLE
                self.heights[row] = 25.0
        cell = grids.data_sheet_cell(grid)
        if cell is not None:
            self._look(cell[0], (grid.label_column,), _LABEL)
            self._look(cell[0], range(cell[1], cell[1] + max(1, len(grid.data_sheets))), style.INPUT)

    def _draw_header(self, row: int | None) -> None:
        if row is None:
            return
        self._look(row, self._between(), style.HEADER)
        self._look(row, self.models, style.HEADER_CENTER)
        self._look(row, self.spare, _SPARE_HEADER)
        self.heights[row] = 17.0

    def _draw_rows(self, rows: Sequence[GridRow], label: Format = _LABEL) -> None:
        for row in rows:
            self._look(row.row, self._between(), style.FACT)
            self._look(row.row, (self.grid.label_column,), label)
            self._look(row.row, self.columns, style.INPUT)
            width = self.widths[self.grid.label_column]
            if measure.units(row.label, bold=True) > width:
                self._look(row.row, (self.grid.label_column,), replace(label, wrap=True))
                self.heights[row.row] = measure.height(row.label, width, bold=True)

    def _draw_columns(self) -> None:
        grid = self.grid
        self._draw_header(grid.column_header)
        self._draw_rows(grid.column_rows)
        kind = grid.other_columns.get("kind")
        for row in grid.column_rows:
            if kind is not None and grids.word(grid.cells.get((row.row, kind))) == grids.NOT_FOUND:
                self._look(row.row, (kind,), _MARKED)

    def _draw_crossed(self) -> None:
        grid = self.grid
        self._draw_header(grid.crossed_header)
        for row in _crossed_rows(grid):
            self._look(row, self._between(), style.FACT)
            self._look(row, (grid.label_column, grid.other_columns[grids.WITH], *self.columns), style.INPUT)

    def _draw_settings(self) -> None:
        grid = self.grid
        self._draw_header(grid.setting_header)
        self._draw_rows(grid.setting_rows)
        for row in grid.setting_rows:
            if row.label.casefold() in (settings.IS, settings.VALUE):
                self._look(row.row, (grid.label_column,), _INDENTED)
            if row.label.casefold() != "interval level":
                continue
            for column in self.columns:
                value = grid.cells.get((row.row, column))
                if isinstance(value, float) and 0 < value < 1:
                    whole = round(value * 100, 9) == round(value * 100)
                    self.looks[(row.row, column)] = replace(style.INPUT, number_format="0%" if whole else "0.0##%")

    # --- the answers

    def _draw_answers(self) -> None:
        grid = self.grid
        if grid.status_header is None:
            return
        self._draw_header(grid.status_header)
        by_column = {
            model.request.grid_column: request_answers.of_model(self.book, model) for model in self.book.models
        }
        general = request_answers.of_workbook(self.book)
        lines = [grids.WORKBOOK] * len(general)
        lines += [grids.MESSAGE, *[grids.ALSO] * (max((len(one) for one in by_column.values()), default=1) - 1)]
        self._clear_answers()
        rows = self._answer_rows(len(lines))
        for row, label in zip(rows, lines, strict=True):
            self._put((row, grid.label_column), label)
            self._look(row, self._between(), replace(style.ROW, valign="top"))
            self._look(row, (grid.label_column,), replace(_LABEL, valign="top"))
        for row, answer in zip(rows, general, strict=False):
            self._answer_across(row, answer)
        for column, answers in by_column.items():
            for row, answer in zip(rows[len(general) :], answers, strict=False):
                self._answer(row, column, answer)

    def _clear_answers(self) -> None:
        """Take the last save's answers out: under the models, and where a model has gone."""
        grid = self.grid
        rows = [row.row for row in grid.status_rows]
        gone = {
            column
            for (row, column), value in grid.cells.items()
            if row in rows and column > grid.label_column and grids.shown(value).startswith(_ANSWERED)
        }
        for row in grid.status_rows:
            columns = {grid.label_column, *self.models, *gone}
            if row.label == grids.WORKBOOK:
                columns.add(grid.label_column + 1)
            for column in columns:
                self.values.pop((row.row, column), None)

    def _answer_rows(self, count: int) -> list[int]:
        """The rows to answer in: those of the last save, and free ones below; notes in the way move down."""
        assert self.grid.status_header is not None
        rows = [row.row for row in self.grid.status_rows][:count]
        used = self._used_rows()
        at = max(rows, default=self.grid.status_header) + 1
        while len(rows) < count:
            if at in used:
                self._move_down(at)
                used = self._used_rows()
            rows.append(at)
            at += 1
        return rows

    def _used_rows(self) -> set[int]:
        """Rows in which something stands under the labels, the facts or the models; notes beside do not count."""
        return {row for row, column in self.values if column in self._between()}

    def _move_down(self, row: int) -> None:
        def moved(at: Position) -> Position:
            return (at[0] + 1 if at[0] >= row else at[0], at[1])

        self.values = {moved(at): value for at, value in self.values.items()}
        self.dates = frozenset(moved(at) for at in self.dates)

    def _answer(self, row: int, column: int, answer: Answer) -> None:
        self._put((row, column), _leading(answer))
        self.looks[(row, column)] = replace(answer.look, border_bottom="thin")
        self._grow(row, answer.text, self.widths.get(column, 8.43))

    def _answer_across(self, row: int, answer: Answer) -> None:
        """A message to the whole workbook, over the columns between the labels and the models."""
        first = self.grid.label_column + 1
        last = max(first, min(self.models, default=first + 3) - 1)
        self._put((row, first), _leading(answer))
        self.looks[(row, first)] = replace(answer.look, border_bottom="thin")
        if last > first and not any((row, column) in self.values for column in range(first + 1, last + 1)):
            self.merges.append(Merge((row, first), (row, last)))
            self._grow(row, answer.text, sum(self.widths.get(column, 8.43) for column in range(first, last + 1)))
        else:
            self._grow(row, answer.text, self.widths.get(first, 8.43))

    def _grow(self, row: int, text: str, width: float) -> None:
        self.heights[row] = max(self.heights.get(row, _ROW_POINTS), measure.height(text, width - _INDENT_WIDTH))

    # --- the sheet

    def sheet(self) -> Sheet:
        """Everything drawn, as a sheet."""
        grid = self.grid
        places = {*self.values, *self.looks}
        cells = {at: Cell(self.values.get(at), self._final_look(at)) for at in sorted(places)}
        header = grid.column_header
        last_row = max((row for row, _ in places), default=0)
        crossed = _crossed_rows(grid)
        return Sheet(
            name=NAME,
            cells=cells,
            title=self.book.title(NAME),
            widths=self.widths,
            heights=self.heights,
            merges=tuple(self.merges),
            drop_downs=request_offers.drop_downs(
                grid, self.names, self.columns, crossed, self.book.request.sheet_names
            ),
            freeze=self._freeze(),
            print_titles=(header, header) if header is not None else None,
            print_area=((0, 0), (last_row, max(self._between()))),
            fit_height=1 if self._height(last_row) <= _PAGE_POINTS else 0,
            tab_color=style.TAB_FILL_IN,
        )

    def _height(self, last_row: int) -> float:
        extra = sum(height - _ROW_POINTS for height in self.heights.values())
        return (last_row + 1) * _ROW_POINTS + extra

    def _final_look(self, at: Position) -> Format:
        look = self.looks.get(at, style.BODY)
        return replace(look, number_format=figures.DATE) if at in self.dates else look

    def _freeze(self) -> Position | None:
        header = self.grid.column_header
        if header is None or header > _MOST_FROZEN or not self.models:
            return None
        return (header + 1, self.models[0])


def _leading(answer: Answer) -> Value:
    """The text of an answer; where it names a cell, as a formula that leads there (a linked text would not wrap)."""
    if not answer.location:
        return answer.text
    lines = [_literal(line) for line in answer.text.split("\n")]
    return Formula(f"HYPERLINK({text_literal('#' + answer.location)},{'&CHAR(10)&'.join(lines)})", answer.text)


def _literal(text: str) -> str:
    """A text in a formula; literals longer than the format allows are joined from parts."""
    parts = [text[at : at + _LONGEST_LITERAL] for at in range(0, len(text), _LONGEST_LITERAL)] or [""]
    return "&".join(text_literal(part) for part in parts)
