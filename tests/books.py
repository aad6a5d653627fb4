"""Workbooks as a user makes and reads them: data typed in, a request filled by its labels, results read back."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path

import openpyxl
import python_calamine

from bridge.job import Report, fit_workbook

BLOCKS = ("column", "crossed", "setting", "status")


def data_book(path: Path, columns: Mapping[str, Sequence[object]], sheet: str = "Data") -> Path:
    """A new workbook with one data sheet and an empty `fit request`."""
    book = openpyxl.Workbook()
    page = book.active
    page.title = sheet
    page.append(list(columns))
    for row in zip(*columns.values(), strict=True):
        page.append(list(row))
    book.create_sheet("fit request")
    book.save(path)
    return path


def ask(path: Path, models: Mapping[str, Mapping[str, object]], data_sheet: str | None = None) -> None:
    """Type a request into a laid-out grid, as a person would, by its labels.

    `models`: model name -> {data column or setting label or (crossed, with): entry}.
    """
    book = openpyxl.load_workbook(path)
    page = book["fit request"]
    if data_sheet is not None:
        page.cell(_row(page, "data sheet"), 2).value = data_sheet
    for at, (model, entries) in enumerate(models.items()):
        column = _model_column(page, model, at)
        for label, entry in entries.items():
            row = _crossed_row(page, *label) if isinstance(label, tuple) else _row(page, label)
            page.cell(row, column).value = entry
    book.save(path)


def fitted_book(
    path: Path, columns: Mapping[str, Sequence[object]], models: Mapping[str, Mapping[str, object]]
) -> Report:
    """Data typed, grid laid out by a first save, request typed, fitted by a second one."""
    data_book(path, columns)
    fit_workbook(path)
    ask(path, models)
    return fit_workbook(path)


def cells(path: Path, sheet: str) -> list[list[object]]:
    """A sheet's stored values, through a reader that does not recalculate."""
    return python_calamine.load_workbook(str(path)).get_sheet_by_name(sheet).to_python(skip_empty_area=False)


def status(path: Path, model: str) -> str:
    """What the bridge answers under a model, all status rows together."""
    rows = cells(path, "fit request")
    start = next(at for at, row in enumerate(rows) if row and row[0] == "status")
    column = [str(cell).strip().casefold() for cell in rows[start]].index(model.casefold())
    return "\n".join(str(row[column]) for row in rows[start + 1 :] if len(row) > column and row[column])


def table(path: Path, sheet: str, header: str, model: str | None = None) -> dict[str, dict[str, object]]:
    """The table whose header row begins with `header` (after the model's heading): row label -> column -> value."""
    rows = cells(path, sheet)
    start = 0
    if model is not None:
        start = next(at for at, row in enumerate(rows) if _heads_model(row, model))
    top = next(at for at in range(start, len(rows)) if rows[at] and rows[at][0] == header)
    names = [str(name) for name in rows[top]]
    found: dict[str, dict[str, object]] = {}
    for row in rows[top + 1 :]:
        if row[0] in ("", None):
            break
        found[str(row[0])] = {name: cell for name, cell in zip(names, row, strict=False) if name}
    return found


def _heads_model(row: Sequence[object], model: str) -> bool:
    text = str(row[0]) if row else ""
    return text == model or text.startswith((f"{model} ", f"{model}:", f"{model},", f"Model {model}", f"model {model}"))


def _row(page: openpyxl.worksheet.worksheet.Worksheet, label: str) -> int:
    for row in range(1, page.max_row + 1):
        if str(page.cell(row, 1).value or "").strip().casefold() == label.casefold():
            return row
    raise AssertionError(f"the grid has no row '{label}'")


def _crossed_row(page: openpyxl.worksheet.worksheet.Worksheet, first: str, second: str) -> int:
    row = _row(page, "crossed") + 1
    while (page.cell(row, 1).value, page.cell(row, 2).value) not in ((None, None), (first, second)):
        row += 1
    page.cell(row, 1).value, page.cell(row, 2).value = first, second
    return row


def _model_column(page: openpyxl.worksheet.worksheet.Worksheet, model: str, at: int) -> int:
    header = _row(page, "column")
    names = {str(page.cell(header, c).value or "").casefold(): c for c in range(5, page.max_column + 1)}
    if model.casefold() in names:
        return names[model.casefold()]
    column = 5 + at
    for row in range(1, page.max_row + 1):
        if str(page.cell(row, 1).value or "") in BLOCKS:
            page.cell(row, column).value = model
    return column
