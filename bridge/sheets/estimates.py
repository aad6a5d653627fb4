"""`fit estimates`: the user types new cases; ordinary formulas give every model's estimate and intervals.

From left to right: the case and its inputs (cream), a group of figures per model, why one case gets its number, and far
right, hidden, the helper cells that the figures read. Cases fill the rows downwards, so that thousands can be pasted.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

from bridge.page.cells import Format, Formula, address
from bridge.page.sheet import Block, BlockColumn, DropDown, Sheet
from bridge.regression.spec import Shape
from bridge.sheets import (
    backwards,
    case_formulas,
    case_values,
    cases,
    coefficients,
    figures,
    live,
    measure,
    reasons,
    style,
    top,
    words,
)
from bridge.sheets.book import Book
from bridge.sheets.cases import FIRST_ROW, HEADER_ROW, NOT_USED, Input, ModelColumns, Plan, Span
from bridge.sheets.paper import Paper
from bridge.workbook.contents import NewCase, RawSheet
from bridge.workbook.request import Scalar
from bridge.workbook.tables import Kind

_CASE = "case"
_INPUTS_A_PAGE = 10  # with more inputs the case alone is repeated on each printed page
_REMARK = 44.0  # column units
_HELP = replace(style.NUMBER, color=style.QUIET, size=8.0)
_HELP_TEXT = replace(_HELP, align="left")

_WHAT = (
    "Type in the cream cells. No program is needed: the estimates are ordinary formulas. Twenty empty lines stand "
    "ready; lines pasted below them get their formulas at the next save with the bridge running."
)
_GUIDE = (
    "estimate: the mean of such cases; mean low to high: where that mean lies; case low to high: where a case does."
)


# --- doors --------------------------------------------------------------------------------------


def lay_out(book: Book) -> Sheet:
    """The sheet `fit estimates`."""
    plan = cases.plan(book)
    paper = Paper("fit estimates", _widths(book, plan))
    top.put(paper, book, "Estimate new cases", _WHAT, _first_page(plan))
    _guide(paper, plan)
    _heads(paper, plan)
    lines = [*cases.entries(book), *({} for _ in range(cases.SPARE))]
    named = [*(case.name != "" for case in book.cases), *(False for _ in range(cases.SPARE))]
    _entries(paper, book, plan, lines)
    _codes(paper, plan, lines)
    evaluated = {each.model.name: case_values.evaluate(each, lines, named) for each in plan.models}
    for columns in plan.models:
        now = evaluated[columns.model.name]
        _figures(paper, columns, now, case_values.figures(columns, now, lines))
        _helpers(paper, book, plan, columns, now)
    _lists(paper, plan)
    paper.row = reasons.put_down(book, paper, plan, evaluated)
    backwards.put_down(book, paper, plan)
    paper.row = plan.last_row + 1
    few = len(plan.inputs) <= _INPUTS_A_PAGE
    return paper.sheet(
        max(plan.why - 2, 4),
        title=book.title("fit estimates"),
        freeze=(FIRST_ROW, 1),
        print_titles=(HEADER_ROW - 1, HEADER_ROW),
        title_columns=(0, len(plan.inputs) if few else 0),
        fit_width=max(len(plan.models), 1) + (0 if few else -(-len(plan.inputs) // _INPUTS_A_PAGE)),
        tab_color=style.TAB_FILL_IN,
        hidden_columns=frozenset(plan.hidden),
    )


def places(book: Book) -> Mapping[str, Span]:
    """Each model's figures, header row included: first and last (row, column)."""
    plan = cases.plan(book)
    return {
        each.model.name: ((HEADER_ROW, each.first), (plan.last_row, each.first + len(each.headers) - 1))
        for each in plan.models
    }


def read_cases(raw: RawSheet) -> tuple[NewCase, ...]:
    """The cases on a sheet as it stands: every line under the header `case` that holds anything, by the headers.

    Blank lines between cases are kept, those at the end are not.
    """
    head = min((at for at, value in raw.values.items() if _word(value) == _CASE and at[0] >= 3), default=None)
    if head is None:
        return ()
    names = {head[1]: "", **dict(_input_columns(raw, head))}
    typed: dict[int, dict[str, tuple[int, int]]] = {}
    for at in raw.values:
        if at[0] > head[0] and at[1] in names:
            typed.setdefault(at[0], {})[names[at[1]]] = at
    last = max(typed, default=head[0])
    return tuple(_read_case(raw, typed.get(row, {})) for row in range(head[0] + 1, last + 1))


def _read_case(raw: RawSheet, at: Mapping[str, tuple[int, int]]) -> NewCase:
    return NewCase(
        name=raw.values[at[""]] if "" in at else "",
        entries={name: raw.values[place] for name, place in at.items() if name},
        formulas={name: raw.formulas[place] for name, place in at.items() if place in raw.formulas},
        dates=frozenset(name for name, place in at.items() if place in raw.dates),
    )


def _input_columns(raw: RawSheet, head: tuple[int, int]) -> Iterator[tuple[int, str]]:
    """Columns of inputs: those with a header between `case` and the first model's figures, which are formulas; where
    none of these is left, up to the first column without a header."""
    row = head[0]
    headers = {at[1]: str(value).strip() for at, value in raw.values.items() if at[0] == row and at[1] > head[1]}
    live_columns = {at[1] for at in raw.formulas if at[0] > row}
    end = min(
        (column for column, text in headers.items() if text == "estimate" and column in live_columns), default=None
    )
    column = head[1] + 1
    while column < end if end is not None else column in headers:
        if headers.get(column):
            yield column, headers[column].removesuffix(NOT_USED)
        column += 1


def _word(value: Scalar) -> str:
    return str(value).strip().casefold()


# --- above the lines ----------------------------------------------------------------------------


def _first_page(plan: Plan) -> int:
    """The last column of the first printed page: the case and the first model's figures."""
    return plan.models[0].first + len(plan.models[0].headers) - 1 if plan.models else 4


def _guide(paper: Paper, plan: Plan) -> None:
    if not plan.models:
        paper.put(0, "No model is fitted; see fit results.", style.BODY, row=4)
        return
    paper.put(0, _GUIDE, style.SUBTITLE, row=3)
    paper.put(0, f"{reasons.TITLE} →", replace(style.BODY, color=style.DEEP, underline=True), row=4)
    paper.row = 4
    paper.link(0, address(4, plan.why), "why one case gets its number")


def _heads(paper: Paper, plan: Plan) -> None:
    row = HEADER_ROW
    paper.put(0, "the case", style.HEADING, row=row - 1)
    head = replace(style.HEADER, wrap=True)
    paper.put(0, _CASE, head, row=row)
    tall = [18.0]
    for one in plan.inputs:
        name = one.name if one.data is not None else one.name + NOT_USED
        paper.put(one.column, name, replace(head, indent=1) if one.levels else replace(head, align="right"), row=row)
        tall.append(measure.height(name, paper.widths[one.column] - (2.0 if one.levels else 0.0), bold=True))
    for columns in plan.models:
        paper.put(columns.first, _title(columns), style.HEADING, row=row - 1)
        for at, name in enumerate(columns.headers):
            look = replace(head, align="right") if name != "remark" else replace(head, indent=1)
            paper.put(columns.first + at, name, look, row=row)
    paper.heights[row] = max(tall)
    paper.heights[row - 1] = 20.0


def _title(columns: ModelColumns) -> str:
    spec = columns.result.spec
    as_fitted = columns.result.back is not None and case_formulas.shown_back(columns.result) is None
    shape = spec.response_shape if as_fitted else Shape.AS_IS
    name = words.axis_title(columns.model.table, spec.response, shape)
    level = f"{100 * spec.level:.10g}%"
    return f"{columns.model.name}  {name}, {words.form(spec)}, {level} intervals"


# --- lines --------------------------------------------------------------------------------------


def _entries(paper: Paper, book: Book, plan: Plan, lines: Sequence[Mapping[str, Scalar]]) -> None:
    """What the user typed, as typed, and empty cells to type in."""
    renamed = cases.renaming(book)
    for at, entries in enumerate(lines):
        row = FIRST_ROW + at
        case = book.cases[at] if at < len(book.cases) else NewCase("", {})
        formulas = {renamed(name): text for name, text in case.formulas.items()}
        dates = {renamed(name) for name in case.dates}
        _entry(paper, row, 0, case.name, formulas.get(""), _dated(replace(style.INPUT, align="left"), "" in dates))
        for one in plan.inputs:
            look = _dated(_look(one), one.name in dates)
            _entry(paper, row, one.column, entries.get(one.name, ""), formulas.get(one.name), look)


def _entry(paper: Paper, row: int, column: int, value: Scalar, formula: str | None, look: Format) -> None:
    shown = value if value != "" else None
    paper.put(column, Formula(formula, value) if formula else shown, look, row)


def _look(one: Input) -> Format:
    if one.data is None:
        return replace(style.FACT, align="right")
    if one.levels:
        look = replace(style.INPUT, align="left", indent=1)
        return _dated(look, one.data.kind is Kind.DATE)
    return _dated(style.INPUT_NUMBER, one.data.kind is Kind.DATE)


def _dated(look: Format, date: bool) -> Format:
    return replace(look, number_format=figures.DATE) if date else look


def _codes(paper: Paper, plan: Plan, lines: Sequence[Mapping[str, Scalar]]) -> None:
    """Helper columns that say which level each case has."""
    for one in plan.inputs:
        if not one.levels:
            continue
        numbers = [float(case_values.code(one, entries.get(one.name))) for entries in lines]
        column = plan.codes[one.name]
        paper.put(column, f"which {one.name}", replace(style.SUBTITLE, size=8.0), HEADER_ROW)
        _column(paper, column, numbers, _HELP, case_formulas.code(plan, one))


def _figures(
    paper: Paper, columns: ModelColumns, now: case_values.Evaluated, shown: Mapping[str, list[float | str]]
) -> None:
    code = figures.number_format(_size(columns), _digits(columns))
    look = replace(style.NUMBER, number_format=code)
    texts = dict(case_formulas.figure_texts(columns))
    for at, header in enumerate(columns.headers[:-1]):
        own = replace(look, bold=True) if header == "estimate" else look
        _column(paper, columns.first + at, shown[header], own, texts[header])
    remarks = shown["remark"]
    said = replace(style.ROW, color=style.ALERT, indent=1, wrap=True)
    _column(paper, columns.first + len(columns.headers) - 1, remarks, said, case_formulas.remark(columns))
    for at, text in enumerate(remarks):
        height = measure.height(str(text), _REMARK - 2.0)
        if height > 15.0:
            paper.heights[FIRST_ROW + at] = max(paper.heights.get(FIRST_ROW + at, 0.0), height)


def _helpers(paper: Paper, book: Book, plan: Plan, columns: ModelColumns, now: case_values.Evaluated) -> None:
    place = coefficients.places(book)[columns.model.name]
    texts = list(case_formulas.helpers(columns, plan, place, book.title("fit coefficients")))
    values = [*now.x.T, now.state.astype(float), now.eta, now.se, now.leverage, *now.problems, *now.beyond]
    head = replace(style.SUBTITLE, size=8.0)
    labels = [column.label for column in columns.result.design.columns]
    labels += ["state", "estimate as fitted", "standard error", "leverage"]
    labels += ["missing"] * columns.parts + ["beyond"] * columns.parts
    paper.put(columns.x, f"{columns.model.name}: working figures", head, HEADER_ROW - 1)
    for at, (label, text, held) in enumerate(zip(labels, texts, values, strict=True)):
        paper.put(columns.x + at, label, head, HEADER_ROW)
        _column(paper, columns.x + at, held, _HELP, text)


def _column(
    paper: Paper, column: int, values: Sequence[float | str] | case_values.Array, look: Format, text: str
) -> None:
    paper.blocks.append(Block(FIRST_ROW, column, (BlockColumn(values, look, text),)))


def _size(columns: ModelColumns) -> float:
    back = case_formulas.shown_back(columns.result)
    if columns.result.back is not None and back is None:
        return float(abs(columns.result.fit.fitted).max()) or 1.0
    return float(abs(columns.result.observed).max()) or 1.0


def _digits(columns: ModelColumns) -> int:
    """Digits that the scatter of single cases justifies: two of the residual spread's, at least three in all."""
    size = _size(columns)
    as_fitted = columns.result.back is not None and case_formulas.shown_back(columns.result) is None
    spread = columns.result.fit.residual_sd if as_fitted else figures.unit_sd(columns.result)
    if not spread > 0:
        return 8
    return min(max(3, figures.decimals(spread, 2) - figures.decimals(size, 1) + 1), 12)


def _lists(paper: Paper, plan: Plan) -> None:
    """The levels of each category in a row of cells, and the drop-downs that offer them."""
    for one in plan.inputs:
        if not one.levels:
            continue
        first, last = plan.lists[one.name]
        look = _dated(_HELP_TEXT, one.data is not None and one.data.kind is Kind.DATE)
        paper.put(first[1], f"kinds of {one.name}", replace(style.SUBTITLE, size=8.0), first[0] - 1)
        for at, level in enumerate(one.listed):
            paper.put(first[1] + at, level, look, first[0])
        span = (FIRST_ROW, one.column), (plan.last_row, one.column)
        paper.drop_downs.append(DropDown(*span, choices=live.span(first, last)))


def _widths(book: Book, plan: Plan) -> dict[int, float]:
    names = [case_values.as_text(case.name) for case in book.cases]
    widths = {0: min(max(16.0, measure.widest(names)), 40.0)}
    for one in plan.inputs:
        texts = [one.name.split(" ")[0] if len(one.name) > 18 else one.name, *one.levels]
        least = 12.5 if one.data is not None and one.data.kind is Kind.DATE else 9.5
        widths[one.column] = min(max(least, measure.widest(texts, bold=True) + 1.0), 26.0)
    for columns in plan.models:
        widths[columns.first - 1] = 2.0
        code = figures.number_format(_size(columns), _digits(columns))
        number = measure.units(figures.shown(-1.5 * _size(columns), code), bold=True) + 1.0
        for at, header in enumerate(columns.headers):
            widths[columns.first + at] = _REMARK if header == "remark" else max(10.5, number)
    widths[plan.why - 1] = 2.0
    return widths | reasons.widths(plan)
