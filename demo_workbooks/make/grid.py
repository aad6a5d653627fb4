"""The filled request: a grid of four blocks, a column per model, facts about the data beside the entries."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date

from xlsxwriter.workbook import Workbook
from xlsxwriter.worksheet import Worksheet

from bridge.sheets import measure, style
from demo_workbooks.make.workshop import Column, look, plain_page


@dataclass(frozen=True)
class Ask:
    """A filled request: entries by model and data column, crossed pairs with their models, settings by model."""

    data_sheet: str
    models: Mapping[str, Mapping[str, str]]
    crossed: Sequence[tuple[str, str, Sequence[str]]] = ()
    settings: Mapping[str, Mapping[str, str | float]] = field(default_factory=dict)


_COMMON = (
    "response",
    "log response",
    "predictor",
    "log predictor",
    "category",
    "candidate",
    "weight",
    "label",
    "order",
)
_SETTINGS = (
    ("interval level", "95%", ("95%", "90%", "99%")),
    ("standard errors", "ordinary", ("ordinary", "uneven spread", "grouped", "serial")),
    ("lags", "by the number of rows", ()),
    ("intercept", "yes", ("yes", "no")),
    ("use rows where", "all rows", ()),
    ("is", "", ("equals", "is not", "at least", "at most", "above", "below", "between")),
    ("value", "", ()),
    ("and where", "no further rule", ()),
    ("is", "", ("equals", "is not", "at least", "at most", "above", "below", "between")),
    ("value", "", ()),
    ("fit by", "least squares", ("least squares", "resistant")),
    ("search", "none", ("none", "adjusted R2", "Cp", "BIC", "cross-validation")),
    ("folds", "10", ()),
    ("estimate back on", "original", ("original", "fitted")),
)
_FIRST_MODEL = 4


def request_sheet(book: Workbook, ask: Ask, columns: Sequence[Column]) -> Worksheet:
    """`fit request` filled in: four blocks, a column per model, facts about the data beside the entries."""
    page = plain_page(book, "fit request", style.TAB_FILL_IN)
    page.set_column(0, 0, max(21, measure.widest((column.header for column in columns), bold=True) + 1))
    page.set_column(1, 2, 12)
    page.set_column(3, 3, 25)
    page.set_column(_FIRST_MODEL, _FIRST_MODEL + len(ask.models) - 1, 27)
    page.set_row(0, 30)
    page.write(0, 0, "What should be fitted?", look(book, style.TITLE))
    guide = "Fill the cream cells and save. One column per model: say what each data column does in it."
    page.write(1, 0, guide, look(book, style.SUBTITLE))
    page.write(3, 0, "data sheet", look(book, style.ROW_STRONG))
    page.write(3, 1, ask.data_sheet, look(book, style.INPUT))
    row = _column_block(book, page, ask, columns, 5)
    row = _crossed_block(book, page, ask, row + 1)
    row = _setting_block(book, page, ask, row + 1)
    _header(book, page, ask, row + 1, "status")
    page.set_row(row + 2, 30)
    page.write(row + 2, 0, "message", look(book, style.ROW_STRONG))
    waiting = look(book, style.FACT, align="center", text_wrap=True)
    for at in range(len(ask.models)):
        page.write(row + 2, _FIRST_MODEL + at, "answered here at the next save", waiting)
    page.freeze_panes(6, 1)
    page.fit_to_pages(1, 1)
    return page


def _header(book: Workbook, page: Worksheet, ask: Ask, row: int, *labels: str) -> None:
    for at in range(_FIRST_MODEL):
        page.write(row, at, labels[at] if at < len(labels) else "", look(book, style.HEADER))
    for at, model in enumerate(ask.models):
        page.write(row, _FIRST_MODEL + at, model, look(book, style.HEADER_CENTER))


def _entries(
    book: Workbook, page: Worksheet, row: int, entries: Sequence[str | float], offered: Sequence[str] = ()
) -> None:
    for at, entry in enumerate(entries):
        page.write(row, _FIRST_MODEL + at, entry, look(book, style.INPUT))
    if offered:
        rule = {"validate": "list", "source": list(offered), "error_type": "information", "show_error": False}
        page.data_validation(row, _FIRST_MODEL, row, _FIRST_MODEL + len(entries) - 1, rule)


def _column_block(book: Workbook, page: Worksheet, ask: Ask, columns: Sequence[Column], row: int) -> int:
    _header(book, page, ask, row, "column", "kind", "filled", "range")
    for column in columns:
        row += 1
        page.write(row, 0, column.header, look(book, style.ROW_STRONG))
        for at, fact in enumerate(facts(column), 1):
            page.write(row, at, fact, look(book, style.FACT))
        _entries(book, page, row, [uses.get(column.header, "") for uses in ask.models.values()], _COMMON)
    return row + 1


def _crossed_block(book: Workbook, page: Worksheet, ask: Ask, row: int) -> int:
    _header(book, page, ask, row, "crossed", "with")
    for first, second, models in (*ask.crossed, ("", "", ())):
        row += 1
        page.write(row, 0, first, look(book, style.INPUT))
        page.write(row, 1, second, look(book, style.INPUT))
        page.write_row(row, 2, ["", ""], look(book, style.ROW))
        _entries(book, page, row, ["yes" if model in models else "" for model in ask.models], ("yes",))
    return row + 1


def _setting_block(book: Workbook, page: Worksheet, ask: Ask, row: int) -> int:
    _header(book, page, ask, row, "setting", "blank means")
    for label, blank_means, offered in _SETTINGS:
        row += 1
        inner = label in ("is", "value")
        page.write(row, 0, label, look(book, style.ROW_STRONG, indent=1 if inner else 0))
        page.write(row, 1, blank_means, look(book, style.FACT))
        page.write_row(row, 2, ["", ""], look(book, style.ROW))
        given = ask.settings.get(label, {})
        _entries(book, page, row, [given.get(model, "") for model in ask.models], offered)
    return row + 1


def facts(column: Column) -> tuple[str, str, str]:
    """Kind, how many are filled, and range of a column, as the request shows them."""
    there = [cell for cell in column.cells if cell is not None]
    filled = f"{len(there)}/{len(column.cells)}"
    if all(isinstance(cell, date) for cell in there):
        days = [cell for cell in there if isinstance(cell, date)]
        return "date", filled, f"{min(days)} to {max(days)}"
    if any(isinstance(cell, str) for cell in there):
        levels = [str(level) for level, _ in Counter(there).most_common()]
        if len(levels) <= 3:
            return "text", filled, ", ".join(levels)
        return "text", filled, f"{len(levels)} {'different' if len(levels) == len(there) else 'levels'}"
    numbers = [float(cell) for cell in there if isinstance(cell, int | float)]
    return "number", filled, f"{min(numbers):.6g} to {max(numbers):.6g}"
