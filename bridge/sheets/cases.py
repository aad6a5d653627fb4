"""The columns of `fit estimates`: which inputs a case has, and how each model's figures and helpers are placed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from bridge.page.cells import address
from bridge.regression.results import ModelResult
from bridge.regression.spec import BackOn, CategoryTerm
from bridge.sheets.book import Book, ModelSheet
from bridge.workbook.tables import DataColumn

HEADER_ROW = 7  # of the case table, zero-based
FIRST_ROW = HEADER_ROW + 1
SPARE = 20
NOT_USED = " (not used)"


@dataclass(frozen=True, slots=True)
class Input:
    """One cream column: the data column it stands for, whether it is a category for some model, its levels."""

    name: str
    column: int
    category: bool
    levels: tuple[str, ...]
    data: DataColumn | None
    used: bool = True


@dataclass(frozen=True, slots=True)
class ModelColumns:
    """Where one model stands: its first figure's column, the headers in order, and its helpers at the far right.

    `x` is the first of p columns with the case's design row; then come `state` (0 no case, 1 not complete, 2 complete),
    `eta`, `se` (of the mean), `leverage`, and the texts `problems` and `beyond`.
    """

    model: ModelSheet
    result: ModelResult
    first: int
    headers: tuple[str, ...]
    x: int

    @property
    def p(self) -> int:
        """Coefficients."""
        return len(self.result.design.columns)

    def figure(self, header: str) -> int:
        """The column of a figure."""
        return self.first + self.headers.index(header)

    @property
    def state(self) -> int:
        """Column of the state."""
        return self.x + self.p

    @property
    def eta(self) -> int:
        """Column of the estimate on the fitted scale."""
        return self.x + self.p + 1

    @property
    def se(self) -> int:
        """Column of the standard error of the mean."""
        return self.x + self.p + 2

    @property
    def leverage(self) -> int:
        """Column of the leverage."""
        return self.x + self.p + 3

    @property
    def problems(self) -> int:
        """Column of what is missing or wrong, in words."""
        return self.x + self.p + 4

    @property
    def beyond(self) -> int:
        """Column of what lies beyond the data, in words."""
        return self.x + self.p + 5

    @property
    def end(self) -> int:
        """The first column after the helpers."""
        return self.x + self.p + 6


@dataclass(frozen=True, slots=True)
class Plan:
    """Everything's place. `lines` is how many case lines stand ready; `levels` maps an input to its list's range."""

    inputs: tuple[Input, ...]
    models: tuple[ModelColumns, ...]
    lines: int
    why: int
    list_column: int
    levels: Mapping[str, str]

    @property
    def last_row(self) -> int:
        """The last case line's row."""
        return FIRST_ROW + self.lines - 1

    def cell(self, name: str, row: int) -> str:
        """An input's cell in a row, its column fixed."""
        column = next(each.column for each in self.inputs if each.name == name)
        return f"${address(row, column)}"


def plan(book: Book) -> Plan:
    """Lay the columns out: case, inputs, a model's figures after another, the reason block, then the helpers."""
    inputs = _inputs(book)
    column = 1 + len(inputs) + 1
    starts = []
    for _, result in book.fitted:
        starts.append(column)
        column += len(_headers(result)) + 1
    why = column
    helper = why + 6
    placed = []
    for (model, result), first in zip(book.fitted, starts, strict=True):
        placed.append(ModelColumns(model, result, first, _headers(result), helper))
        helper = placed[-1].end + 1
    levels = {}
    for at, each in enumerate(one for one in inputs if one.category and one.levels):
        top, end = address(FIRST_ROW, helper + at, absolute=True), address(
            FIRST_ROW + len(each.levels) - 1, helper + at, absolute=True
        )  # fmt: skip
        levels[each.name] = f"{top}:{end}"
    return Plan(inputs, tuple(placed), len(book.cases) + SPARE, why, helper, levels)


def _headers(result: ModelResult) -> tuple[str, ...]:
    median = result.back is not None and result.spec.back_on is BackOn.ORIGINAL
    return ("estimate", *(("median",) if median else ()), "mean low", "mean high", "case low", "case high", "remark")


def _inputs(book: Book) -> tuple[Input, ...]:
    """Predictors of all models once, in the order of the data, weights after them, then entries no longer used."""
    wanted: dict[str, bool] = {}
    weights: list[str] = []
    found: dict[str, DataColumn | None] = {}
    levels: dict[str, list[str]] = {}
    for model, result in book.fitted:
        for factor in (f for column in result.design.columns for f in column.factors):
            found.setdefault(factor.column, model.table.column(factor.column) if model.table else None)
        for term in result.spec.terms:
            category = isinstance(term, CategoryTerm)
            wanted[term.column] = wanted.get(term.column, False) or category
            found.setdefault(term.column, model.table.column(term.column) if model.table else None)
        for name, counts in result.design.levels:
            known = levels.setdefault(name, [])
            known += [level for level, _ in counts if level not in known]
        if result.spec.weight is not None and result.spec.weight not in weights:
            weights.append(result.spec.weight)
            found.setdefault(result.spec.weight, model.table.column(result.spec.weight) if model.table else None)
    ordered = sorted(wanted, key=lambda name: column.index if (column := found[name]) is not None else 10_000)
    names = [*ordered, *(name for name in weights if name not in wanted)]
    used = {name.casefold() for name in names}
    typed = list(dict.fromkeys(name for case in book.cases for name in case.entries if name.casefold() not in used))
    made = [
        Input(name, 1 + at, wanted.get(name, False), tuple(levels.get(name, ())), found[name])
        for at, name in enumerate(names)
    ]
    made += [Input(name, 1 + len(names) + at, False, (), None, used=False) for at, name in enumerate(typed)]
    return tuple(made)
