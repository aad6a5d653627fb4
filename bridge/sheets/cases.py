"""The columns of `fit estimates`: which inputs a case has, and how each model's figures and helpers are placed.

Everything that a case needs stands in its own row, so that rows may be sorted, put in or taken out; what all cases
share (the levels of categories) stands above them, far to the right.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

from bridge.page.cells import column_letters
from bridge.regression.results import ModelResult
from bridge.regression.spec import BackOn
from bridge.sheets import live
from bridge.sheets.book import Book, ModelSheet
from bridge.workbook.naming import ColumnNames
from bridge.workbook.request import Scalar
from bridge.workbook.tables import DataColumn, Kind, Table

HEADER_ROW = 7  # of the case table, zero-based
FIRST_ROW = HEADER_ROW + 1
LIST_ROW = HEADER_ROW - 2
SPARE = 20
NOT_USED = " (not used)"
A_CELL = 15  # inputs whose problems one helper cell can tell

Span = tuple[tuple[int, int], tuple[int, int]]


@dataclass(frozen=True, slots=True)
class Input:
    """One cream column: the data column it stands for, under the name the request gives it.

    `levels` are those of all models for which it is a category, `numbers` what stands behind them in a column of
    nothing but numbers, dates or yes/no. `data` None: nothing uses it any more.
    """

    name: str
    column: int
    data: DataColumn | None = None
    table: Table | None = None
    levels: tuple[str, ...] = ()
    numbers: Mapping[str, float] | None = None

    @property
    def data_name(self) -> str:
        """The data column's own name."""
        return self.data.name if self.data is not None else self.name

    @property
    def cell(self) -> str:
        """The input's cell in the row that a template fills in."""
        return f"${column_letters(self.column)}{{row}}"

    @property
    def yes_no(self) -> bool:
        """Whether yes and no are numbers here, 1 and 0."""
        return self.data is not None and self.data.kind is Kind.YES_NO

    @property
    def listed(self) -> tuple[Scalar, ...]:
        """The levels as the list of choices holds them."""
        if self.numbers is None:
            return self.levels
        found = [self.numbers[level] for level in self.levels]
        return tuple(bool(number) for number in found) if self.yes_no else tuple(found)


@dataclass(frozen=True, slots=True)
class ModelColumns:
    """Where one model stands: its first figure's column, the headers in order, and its helpers at the far right.

    `inputs` are its predictors by data column, in the order of the terms, `weight` the input of its weights.
    Helpers: `x` is the first of p columns with the case's design row; then come `state` (0 no case, 1 not complete,
    2 complete), `eta`, `se` (of the mean), `leverage`, and the texts `problems` and `beyond`, several cells each where
    there are many inputs.
    """

    model: ModelSheet
    result: ModelResult
    first: int
    headers: tuple[str, ...]
    x: int
    inputs: Mapping[str, Input]
    weight: Input | None

    @property
    def p(self) -> int:
        """Coefficients."""
        return len(self.result.design.columns)

    @property
    def parts(self) -> int:
        """Cells that the problems take, and as many again what lies beyond the data."""
        return max(1, -(-len(self.inputs) // A_CELL))

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
    def problems(self) -> range:
        """Columns of what is missing or wrong, in words."""
        return range(self.x + self.p + 4, self.x + self.p + 4 + self.parts)

    @property
    def beyond(self) -> range:
        """Columns of what lies beyond the data, in words."""
        return range(self.problems.stop, self.problems.stop + self.parts)


@dataclass(frozen=True, slots=True)
class Plan:
    """Everything's place. `lines` is how many case lines stand ready; `why` the first column of the block of reasons.

    By the name of a category's input: `codes` the helper column that says which of its levels a case has (1, 2, ...;
    0: none of them), `lists` the cells that hold the levels. `spare` is the first column after all helpers.
    """

    inputs: tuple[Input, ...]
    models: tuple[ModelColumns, ...]
    lines: int
    why: int
    codes: Mapping[str, int] = field(default_factory=dict)
    lists: Mapping[str, Span] = field(default_factory=dict)
    spare: int = 0

    @property
    def last_row(self) -> int:
        """The last case line's row."""
        return FIRST_ROW + self.lines - 1

    @property
    def steps(self) -> int:
        """The first of the columns in which the reasons are worked out, five for each model."""
        return self.spare + 1

    @property
    def hidden(self) -> range:
        """Columns that nobody needs to see."""
        first = min([*self.codes.values(), *(each.x for each in self.models)], default=self.spare)
        return range(first, self.steps + 5 * len(self.models))

    def down(self, column: int) -> str:
        """A column's cells over all lines."""
        return live.span((FIRST_ROW, column), (self.last_row, column))

    def across(self, columns: ModelColumns, at: list[int]) -> str:
        """The design columns at neighbouring positions, over all lines."""
        return live.span((FIRST_ROW, columns.x + at[0]), (self.last_row, columns.x + at[-1]))


WHY_COLUMNS = 6


def plan(book: Book) -> Plan:
    """Lay the columns out: case, inputs, a model's figures after another, the reason block, then the helpers."""
    inputs, places = _inputs(book)
    column = 1 + len(inputs) + 1
    starts = []
    for _, result in book.fitted:
        starts.append(column)
        column += len(_headers(result)) + 1
    why = column
    helper = why + WHY_COLUMNS + 1
    categories = [one for one in inputs if one.levels]
    codes = {one.name: helper + at for at, one in enumerate(categories)}
    helper += len(categories)
    placed = []
    for (model, result), first in zip(book.fitted, starts, strict=True):
        sheet = model.table.sheet if model.table is not None else ""
        own = {term.column: places[sheet, term.column] for term in result.spec.terms}
        weight = places[sheet, result.spec.weight] if result.spec.weight is not None else None
        placed.append(ModelColumns(model, result, first, _headers(result), helper, own, weight))
        helper = placed[-1].beyond.stop
    lists = {}
    start = helper
    for one in categories:
        lists[one.name] = ((LIST_ROW, start), (LIST_ROW, start + len(one.levels) - 1))
        start += len(one.levels)
    return Plan(inputs, tuple(placed), len(book.cases) + SPARE, why, codes, lists, max(start, helper))


def _headers(result: ModelResult) -> tuple[str, ...]:
    median = result.back is not None and result.spec.back_on is BackOn.ORIGINAL
    return ("estimate", *(("median",) if median else ()), "mean low", "mean high", "case low", "case high", "remark")


# --- inputs -------------------------------------------------------------------------------------


def entries(book: Book) -> Iterator[dict[str, Scalar]]:
    """What each case holds, by the inputs' names as they are now."""
    renamed = renaming(book)
    for case in book.cases:
        yield {renamed(name): value for name, value in case.entries.items()}


def renaming(book: Book) -> Callable[[str], str]:
    """How a name in the user's entries is written now; one that no data column has stays as it is."""
    names = ColumnNames(book.request.grid.data_sheets, book.tables)

    def renamed(name: str) -> str:
        place = names.resolve(name)
        return names.label(*place) if place is not None else name

    return renamed


def _inputs(book: Book) -> tuple[tuple[Input, ...], Mapping[tuple[str, str], Input]]:
    """Predictors of all models once, in the order of the data, weights after them, then entries no longer used.

    Also by data sheet and column.
    """
    names = ColumnNames(book.request.grid.data_sheets, book.tables)
    predictors: dict[tuple[str, str], list[str]] = {}
    weights: dict[tuple[str, str], list[str]] = {}
    for model, result in book.fitted:
        sheet = model.table.sheet if model.table is not None else ""
        for term in result.spec.terms:
            predictors.setdefault((sheet, term.column), [])
        for name, counts in result.design.levels:
            known = predictors[sheet, name]
            known += [level for level, _ in counts if level not in known]
        if result.spec.weight is not None:
            weights.setdefault((sheet, result.spec.weight), [])
    sheets = list(book.tables)
    wanted = dict(sorted(predictors.items(), key=lambda one: _order(book, sheets, one[0])))
    wanted |= {place: [] for place in weights if place not in wanted}
    made = {}
    for at, ((sheet, name), levels) in enumerate(wanted.items()):
        table = book.tables.get(sheet)
        data = table.column(name) if table is not None else None
        numbers = live.level_numbers(table, data) if levels and table is not None and data is not None else None
        made[sheet, name] = Input(names.label(sheet, name), 1 + at, data, table, tuple(levels), numbers)
    used = {one.name for one in made.values()}
    typed = dict.fromkeys(name for case in entries(book) for name in case if name not in used)
    extra = [Input(name, 1 + len(made) + at) for at, name in enumerate(typed)]
    return (*made.values(), *extra), made


def _order(book: Book, sheets: list[str], place: tuple[str, str]) -> tuple[int, int]:
    table = book.tables.get(place[0])
    column = table.column(place[1]) if table is not None else None
    return (sheets.index(place[0]) if place[0] in sheets else 0, column.index if column is not None else 0)
