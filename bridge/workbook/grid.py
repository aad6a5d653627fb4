"""The request sheet's cells -> its blocks, found by their labels and not by fixed positions."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from bridge.workbook import entries
from bridge.workbook.contents import RawSheet
from bridge.workbook.headers import clean
from bridge.workbook.request import Grid, GridRow, Scalar

COLUMN, CROSSED, SETTING, STATUS = "column", "crossed", "setting", "status"
DATA_SHEET = "data sheet"
FACTS = ("kind", "filled", "range")
WITH, BLANK_MEANS = "with", "blank means"
MESSAGE, ALSO, WORKBOOK = "message", "also", "workbook"
STATUS_LABELS = (MESSAGE, ALSO, WORKBOOK)
NOT_FOUND = "not found"
MOST_NAME = 20
_MOST_PLACES = 50
_COMPANION = {CROSSED: WITH, SETTING: BLANK_MEANS, STATUS: None}
_KIND_WORDS = frozenset({"number", "text", "date", "yes/no", "empty", NOT_FOUND})
_NOTE_WORDS = frozenset({"note", "notes", "remark", "remarks", "comment", "comments", "todo", "why"})

Cells = Mapping[tuple[int, int], Scalar]


def read(raw: RawSheet | None) -> Grid:
    """The grid on a sheet; one without cells or without the `column` block has None for its header rows."""
    cells: Cells = raw.values if raw is not None else {}
    formulas = raw.formulas if raw is not None else {}
    dates = raw.dates if raw is not None else frozenset()
    top = _column_header(cells)
    if top is None:
        label_column = _label_column(cells)
        sheets = _data_sheets(cells, label_column, None)
        return Grid(cells, formulas, sheets, {}, None, (), None, (), None, (), None, (), label_column, {}, dates)
    header, label_column = top
    page = _Page(cells, label_column, _model_columns(cells, header, label_column))
    crossed = page.block_header(CROSSED, header)
    setting = page.block_header(SETTING, max(header, crossed or 0))
    status = page.block_header(STATUS, max(header, crossed or 0, setting or 0))
    others = page.other_columns(header, crossed, setting)
    ends = sorted(row for row in (crossed, setting, status, page.last + 1) if row is not None)
    return Grid(
        cells,
        formulas,
        _data_sheets(cells, label_column, header),
        page.models,
        header,
        page.rows(header, ends),
        crossed,
        page.rows(crossed, ends, others[WITH]),
        setting,
        page.rows(setting, ends),
        status,
        page.status_rows(status),
        label_column,
        others,
        dates,
    )


def looks_like_request(raw: RawSheet) -> bool:
    """Whether a sheet without the bridge's mark is a request all the same: it has the blocks' labels."""
    found = read(raw)
    others = (found.crossed_header, found.setting_header, found.status_header)
    return found.column_header is not None and (bool(found.data_sheets) or any(row is not None for row in others))


def word(value: Scalar | None) -> str:
    """A cell's text as labels are compared: one line, single spaces, without case."""
    return clean(value).casefold() if isinstance(value, str) else ""


def shown(value: Scalar | None) -> str:
    """A cell's content as a person reads it, on one line; empty for nothing."""
    return "" if value is None else clean(entries.number_as_typed(value))


def is_model_name(text: str) -> bool:
    """Letters (with their marks), digits and `_`, at most 20 characters."""
    allowed = all(letter == "_" or unicodedata.category(letter)[0] in "LNM" for letter in text)
    return bool(text) and len(text) <= MOST_NAME and allowed


def plain_name(name: str) -> str:
    """A model's name as it stands in the grid, without the number that tells repeated names apart."""
    return re.sub(r" \(\d+\)$", "", name)


def block_rows(grid: Grid, header: int | None) -> range:
    """The sheet rows from below a block's header to above the next one (or the last cell)."""
    if header is None:
        return range(0)
    headers = (grid.column_header, grid.crossed_header, grid.setting_header, grid.status_header)
    last = max((row for row, _ in grid.cells), default=0) + 1
    return range(header + 1, min([row for row in headers if row is not None and row > header], default=last))


def data_sheet_cell(grid: Grid) -> tuple[int, int] | None:
    """Where the first data sheet's name stands, or is to stand; None without a `data sheet` row."""
    row = _data_sheet_row(grid.cells, grid.label_column, grid.column_header)
    return None if row is None else (row, grid.label_column + 1)


# --- the top -----------------------------------------------------------------------------------


def _column_header(cells: Cells) -> tuple[int, int] | None:
    """Where the word `column` heads the first block: beside its facts, above the other blocks' words."""
    best: tuple[int, int, int] | None = None
    places = [at for at, value in cells.items() if word(value) == COLUMN]
    others = {at: word(value) for at, value in cells.items() if word(value) in (*FACTS, DATA_SHEET, *_COMPANION)}
    for row, column in sorted(places)[:_MOST_PLACES]:
        score = 2 * sum(at[0] == row and at[1] > column and name in FACTS for at, name in others.items())
        score += sum(at[1] == column and name not in FACTS for at, name in others.items())
        if score and (best is None or score > best[0]):
            best = (score, row, column)
    return best[1:] if best else None


def _label_column(cells: Cells) -> int:
    places = [at for at, value in cells.items() if word(value) == DATA_SHEET]
    return min(places)[1] if places else 0


def _data_sheet_row(cells: Cells, label_column: int, header: int | None) -> int | None:
    rows = [row for (row, column), value in cells.items() if column == label_column and word(value) == DATA_SHEET]
    return min((row for row in rows if header is None or row < header), default=None)


def _data_sheets(cells: Cells, label_column: int, header: int | None) -> tuple[str, ...]:
    """The sheets named beside `data sheet`, up to the first empty cell."""
    row = _data_sheet_row(cells, label_column, header)
    names: list[str] = []
    while row is not None and shown(cells.get((row, label_column + 1 + len(names)))):
        names.append(entries.number_as_typed(cells[(row, label_column + 1 + len(names))]).strip())
    return tuple(names)


def _model_columns(cells: Cells, header: int, label_column: int) -> dict[str, int]:
    """Names over columns that are no facts and no notes; repeated names are told apart by a number."""
    found: dict[str, int] = {}
    below: dict[int, list[Scalar]] = {}
    for (row, column), value in cells.items():
        if row > header:
            below.setdefault(column, []).append(value)
    for column in sorted(column for row, column in cells if row == header and column > label_column):
        name = shown(cells[(header, column)])
        if not name or name.casefold() in FACTS or _is_notes(name, below.get(column, ())):
            continue
        taken = {other.casefold() for other in found}
        unique, number = name, 1
        while unique.casefold() in taken:
            number += 1
            unique = f"{name} ({number})"
        found[unique] = column
    return found


def _is_notes(name: str, below: Iterable[Scalar]) -> bool:
    """A header that can be no model's, or says that it is none, over a column without a single role."""
    if is_model_name(name) and name.casefold() not in _NOTE_WORDS:
        return False
    return not any(isinstance(entries.parse(value), entries.Entry) for value in below)


# --- the blocks --------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Page:
    """The cells of a request whose labels' column and models are known."""

    cells: Cells
    label_column: int
    models: Mapping[str, int]

    @property
    def last(self) -> int:
        return max(row for row, _ in self.cells)

    def block_header(self, label: str, after: int) -> int | None:
        """The row that opens a block. A data column or a note may bear the same word: models' names tell them apart."""
        best: tuple[int, int] | None = None
        for (row, column), value in sorted(self.cells.items(), key=lambda cell: cell[0]):
            if row <= after or column != self.label_column or word(value) != label:
                continue
            score = self._header_score(label, row)
            if score > 0 and (best is None or score > best[0] or (label == STATUS and score == best[0])):
                best = (score, row)
        return best[1] if best else None

    def _header_score(self, label: str, row: int) -> int:
        beside = {
            column: value for (at, column), value in self.cells.items() if at == row and column > self.label_column
        }
        names = {column: plain_name(name).casefold() for name, column in self.models.items()}
        named = any(shown(value).casefold() == names.get(column) for column, value in beside.items())
        companion = any(word(value) == _COMPANION[label] for value in beside.values())
        answers = label == STATUS and word(self.cells.get((row + 1, self.label_column))) in STATUS_LABELS
        is_column = any(word(value) in _KIND_WORDS for value in beside.values())
        return 2 * named + 2 * companion + 2 * answers + (not beside) - 3 * is_column

    def other_columns(self, header: int, crossed: int | None, setting: int | None) -> dict[str, int]:
        """Where the bridge's own columns are: kind, filled, range, with, blank means."""
        found = {WITH: self.label_column + 1}
        wanted = ((header, FACTS), (crossed, (WITH,)), (setting, (BLANK_MEANS,)))
        for row, names in wanted:
            for (at, column), value in sorted(self.cells.items(), key=lambda cell: cell[0], reverse=True):
                if at == row and column > self.label_column and word(value) in names:
                    found[word(value)] = column
        return found

    def rows(self, header: int | None, ends: list[int], second: int | None = None) -> tuple[GridRow, ...]:
        """The rows of a block that have a label, or an entry under a model."""
        if header is None:
            return ()
        columns = (self.label_column, *self.models.values(), *(() if second is None else (second,)))
        end = min(row for row in ends if row > header)
        filled = sorted({row for row, _ in self.cells if header < row < end})
        used = [row for row in filled if any(shown(self.cells.get((row, at))) for at in columns)]
        return tuple(GridRow(row, self._shown(row, self.label_column), self._shown(row, second)) for row in used)

    def _shown(self, row: int, column: int | None) -> str:
        return "" if column is None else shown(self.cells.get((row, column)))

    def status_rows(self, header: int | None) -> tuple[GridRow, ...]:
        """The bridge's own rows under `status`."""
        if header is None:
            return ()
        rows = sorted(row for row, column in self.cells if column == self.label_column and row > header)
        labels = ((row, word(self.cells[(row, self.label_column)])) for row in rows)
        return tuple(GridRow(row, label) for row, label in labels if label in STATUS_LABELS)
