"""Workbooks made in memory for the tests of this room, and the request typed into a laid-out grid."""

from __future__ import annotations

import io
import random
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date

import openpyxl

from bridge.messages import Problem, Severity
from bridge.package.package import Package
from bridge.page.cells import address
from bridge.workbook import grid as grids
from bridge.workbook import reading, selection, settings, understand
from bridge.workbook.contents import Contents, RawSheet
from bridge.workbook.request import Grid, ModelRequest, Request, Scalar

Rows = Sequence[Sequence[object]]


def workbook(sheets: Mapping[str, Rows], request: bool = True) -> bytes:
    """A workbook with these sheets, cell (1, 1) first, and an empty `fit request`."""
    book = openpyxl.Workbook()
    book.remove(book.active)
    for name, rows in sheets.items():
        page = book.create_sheet(name)
        for row in rows:
            page.append(list(row))
    if request:
        book.create_sheet("fit request")
    return saved(book)


def saved(book: openpyxl.Workbook) -> bytes:
    held = io.BytesIO()
    book.save(held)
    return held.getvalue()


def contents(data: bytes) -> Contents:
    return reading.read(data, Package.open(data))


def refits(rows: int = 30, seed: int = 1) -> list[list[object]]:
    """Invented refit jobs: job, hours, length (m), hull, coats, crew, month."""
    chance = random.Random(seed)
    made: list[list[object]] = [["job", "hours", "length (m)", "hull", "coats", "crew", "month"]]
    for at in range(rows):
        length, coats = round(chance.uniform(8, 38), 1), chance.randint(1, 4)
        hull = ("oak", "steel", "glass fibre")[at % 3]
        hours = round(2.5 * length + 4 * coats + chance.gauss(20, 3), 1)
        month = date(2023 + at // 12, at % 12 + 1, 1)
        made.append([f"job {at + 1}", hours, length, hull, coats, chance.randint(1, 6), month])
    return made


@dataclass
class Typed:
    """A request grid to type into, by labels, as a person would."""

    source: Contents
    grid: Grid
    cells: dict[tuple[int, int], Scalar]

    def row(self, label: str, after: str | None = None) -> int:
        start = self.row(after) if after is not None else -1
        found = sorted(
            at
            for (at, column), value in self.cells.items()
            if column == self.grid.label_column and at > start and str(value).casefold() == label.casefold()
        )
        return found[0]

    def column(self, model: str) -> int:
        return self.grid.model_columns[model]

    def put(self, label: str, model: str, value: Scalar, after: str | None = None) -> str:
        at = (self.row(label, after), self.column(model))
        self.cells[at] = value
        return address(*at)

    def cross(self, first: str, second: str, model: str, value: Scalar = "yes") -> str:
        row = self.row("crossed") + 1
        while (row, 0) in self.cells or (row, 1) in self.cells:
            row += 1
        for column, text in ((0, first), (1, second)):
            if text:
                self.cells[(row, column)] = text
        self.cells[(row, self.column(model))] = value
        return address(row, self.column(model))

    def cell(self, label: str, model: str | None = None) -> str:
        return address(self.row(label), self.grid.label_column if model is None else self.column(model))

    def understood(self) -> Request:
        raw = RawSheet("fit request", self.cells, {})
        return understand.understand(grids.read(raw), self.source.tables, self.source.sheet_names, self.source.unread)

    def model(self, name: str = "A") -> ModelRequest:
        return next(model for model in self.understood().models if model.name == name)


def first_contact(source: Contents, data_sheet: str | None = None, clear: bool = True) -> Typed:
    """The grid as laid out at first contact; with `clear`, without the guessed label and order."""
    cells: dict[tuple[int, int], Scalar] = {}
    if data_sheet is not None:
        cells |= {(0, 0): "data sheet", (0, 1): data_sheet}
    found = understand.understand(
        grids.read(RawSheet("fit request", cells, {})), source.tables, source.sheet_names, source.unread
    ).grid
    held = dict(found.cells)
    if clear:
        models = found.model_columns.values()
        held = {at: value for at, value in held.items() if at[1] not in models or value not in ("label", "order")}
    return Typed(source, found, held)


def typed(source: Contents, entries: Mapping[str, Scalar], model: str = "A", data_sheet: str | None = None) -> Typed:
    """First contact with these entries under a model; keys are data columns and settings."""
    page = first_contact(source, data_sheet)
    known = {setting.label for setting in settings.ROWS}
    for label, value in entries.items():
        page.put(label, model, value, after="setting" if label in known else None)
    return page


def all_problems(page: Typed, name: str = "A") -> tuple[Problem, ...]:
    """What is said about a model when it is understood and, where possible, its rows are taken."""
    request = page.understood()
    model = next((each for each in request.models if each.name == name), None)
    if model is None or model.spec is None:
        return (*request.problems, *(model.problems if model is not None else ()))
    table = page.source.tables[model.sheet or ""]
    return (*request.problems, *model.problems, *selection.take(table, model)[2])


def refusals(problems: Sequence[Problem]) -> list[Problem]:
    return [problem for problem in problems if problem.severity is Severity.REFUSAL]
