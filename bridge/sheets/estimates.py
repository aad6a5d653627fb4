"""`fit estimates`: the user types new cases; ordinary formulas give every model's estimate and intervals.

From left to right: the case and its inputs (cream), a group of figures per model, why one case gets its number, and far
right, grey, the helper cells that the figures read. Cases fill the rows downwards, so that thousands can be pasted.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace

from bridge.page.cells import Cell, Formula, address
from bridge.page.sheet import DropDown, Sheet
from bridge.sheets import case_formulas, coefficients, figures, measure, reasons, style, top, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.cases import FIRST_ROW, HEADER_ROW, NOT_USED, Input, ModelColumns, Plan, plan
from bridge.sheets.paper import Paper
from bridge.workbook.contents import NewCase, RawSheet
from bridge.workbook.request import Scalar

Span = tuple[tuple[int, int], tuple[int, int]]
_CASE = "case"
_INPUTS_A_PAGE = 10  # with more inputs the case alone is repeated on each printed page
_HELP = replace(style.NUMBER, color=style.QUIET, size=8.0)


def lay_out(book: Book) -> Sheet:
    """The sheet `fit estimates`."""
    places = plan(book)
    paper = Paper("fit estimates", _widths(book, places))
    top.put(paper, book, "Estimate new cases", _WHAT, max(places.why - 2, 4))
    _guide(paper, places)
    _heads(paper, places)
    where = coefficients.places(book)
    tab = book.title("fit coefficients")
    evaluated: dict[str, list[case_formulas.Evaluated]] = {each.model.name: [] for each in places.models}
    for at in range(places.lines):
        case = book.cases[at] if at < len(book.cases) else NewCase("", {})
        row = FIRST_ROW + at
        _entries(paper, places, row, case)
        for columns in places.models:
            now = case_formulas.evaluate(columns, case.entries, case.name != "")
            evaluated[columns.model.name].append(now)
            _figures(paper, columns, row, case_formulas.answers(columns, places, row, now, case.entries))
            helpers = case_formulas.helpers(columns, places, where[columns.model.name], tab, row, now)
            for column, formula in helpers.items():
                paper.cells[(row, column)] = Cell(formula, _HELP)
    _helper_heads(paper, places)
    _lists(paper, places)
    reasons.put_down(book, paper, places, evaluated)
    paper.row = places.last_row + 1
    few = len(places.inputs) <= _INPUTS_A_PAGE
    hidden = range(places.models[0].x, places.list_column + len(places.levels)) if places.models else range(0)
    return paper.sheet(
        max(places.why - 2, 4),
        title=book.title("fit estimates"),
        freeze=(FIRST_ROW, 1),
        print_titles=(HEADER_ROW - 1, HEADER_ROW),
        title_columns=(0, len(places.inputs) if few else 0),
        fit_width=max(len(places.models), 1) + (0 if few else -(-len(places.inputs) // _INPUTS_A_PAGE)),
        tab_color=style.TAB_FILL_IN,
        hidden_columns=frozenset(hidden),
    )


_WHAT = (
    "Type in the cream cells. No program is needed: the estimates are ordinary formulas. Twenty empty lines stand "
    "ready; lines pasted below them get their formulas at the next save with the bridge running."
)


def places(book: Book) -> Mapping[str, Span]:
    """Each model's figures, header row included: first and last (row, column)."""
    found = plan(book)
    return {
        each.model.name: ((HEADER_ROW, each.first), (found.last_row, each.first + len(each.headers) - 1))
        for each in found.models
    }


def read_cases(raw: RawSheet) -> tuple[NewCase, ...]:
    """The cases on a sheet as it stands: every line under the header `case` that holds anything, by the headers.

    Blank lines between cases are kept, those at the end are not.
    """
    head = min((at for at, value in raw.values.items() if _word(value) == _CASE and at[0] >= 3), default=None)
    if head is None:
        return ()
    names = dict(_header_names(raw, head))
    last = max(
        (row for row, column in raw.values if row > head[0] and (column in names or column == head[1])), default=0
    )
    cases = []
    for row in range(head[0] + 1, last + 1):
        at = {name: (row, column) for column, name in names.items() if (row, column) in raw.values}
        entries = {name: raw.values[place] for name, place in at.items()}
        formulas = {name: raw.formulas[place] for name, place in at.items() if place in raw.formulas}
        name = raw.values.get((row, head[1]), "")
        cases.append(NewCase(name, entries, formulas))
    return tuple(cases)


def _header_names(raw: RawSheet, head: tuple[int, int]) -> Iterator[tuple[int, str]]:
    """Input columns: from `case` to the first column without a header."""
    column = head[1] + 1
    while (name := str(raw.values.get((head[0], column), "")).strip()) != "":
        yield column, name.removesuffix(NOT_USED)
        column += 1


def _word(value: Scalar) -> str:
    return str(value).strip().casefold()


# --- above the lines ------------------------------------------------------------------------------


def _guide(paper: Paper, places: Plan) -> None:
    if not places.models:
        paper.put(0, "No model is fitted; see fit results.", style.BODY, row=4)
        return
    text = (
        "estimate: the mean of such cases; mean low to high: where that mean lies; case low to high: where a case does."
    )
    paper.put(0, text, style.SUBTITLE, row=3)
    paper.put(0, "Why this number \u2192", replace(style.BODY, color=style.DEEP, underline=True), row=4)
    paper.row = 4
    paper.link(0, address(4, places.why), "why one case gets its number")


def _heads(paper: Paper, places: Plan) -> None:
    row = HEADER_ROW
    paper.put(0, "the case", style.HEADING, row=row - 1)
    head = replace(style.HEADER, wrap=True)
    paper.put(0, _CASE, head, row=row)
    for each in places.inputs:
        name = each.name if each.used else each.name + NOT_USED
        side = replace(head, indent=1) if each.category else replace(head, align="right")
        paper.put(each.column, name, side, row=row)
    for columns in places.models:
        paper.put(columns.first, _title(columns.model, columns), style.HEADING, row=row - 1)
        for at, name in enumerate(columns.headers):
            look = replace(head, align="right") if name != "remark" else replace(head, indent=1)
            paper.put(columns.first + at, name, look, row=row)
    names = [each.name for each in places.inputs]
    tall = [
        measure.height(name, paper.widths[each.column], bold=True)
        for name, each in zip(names, places.inputs, strict=True)
    ]
    paper.heights[row] = max([18.0, *tall])
    paper.heights[row - 1] = 20.0


def _title(model: ModelSheet, columns: ModelColumns) -> str:
    spec = columns.result.spec
    back = columns.result.back is not None and case_formulas.shown_back(columns.result) is None
    name = words.axis_title(
        model.table, spec.response, spec.response_shape if back else type(spec.response_shape).AS_IS
    )
    level = f"{100 * spec.level:.10g}%"
    return f"{model.name}  {name}, {words.form(spec)}, {level} intervals"


# --- lines ----------------------------------------------------------------------------------------


def _entries(paper: Paper, places: Plan, row: int, case: NewCase) -> None:
    paper.cells[(row, 0)] = Cell(case.name if case.name != "" else None, replace(style.INPUT, align="left"))
    for each in places.inputs:
        value = case.entries.get(each.name)
        look = style.INPUT if each.category else style.INPUT_NUMBER
        look = replace(look, align="left", indent=1) if each.category else replace(look, number_format=_typed(each))
        if not each.used:
            look = replace(style.FACT, align="right")
        formula = case.formulas.get(each.name)
        paper.cells[(row, each.column)] = Cell(
            Formula(formula, value) if formula and value is not None else value, look
        )


def _typed(each: Input) -> str:
    dated = each.data is not None and each.data.kind.value == "date"
    return "yyyy-mm-dd" if dated else "General"


def _figures(paper: Paper, columns: ModelColumns, row: int, answers: Mapping[str, Formula]) -> None:
    code = figures.number_format(_size(columns), _digits(columns))
    for at, header in enumerate(columns.headers):
        look = replace(style.NUMBER, number_format=code)
        if header == "estimate":
            look = replace(look, bold=True)
        if header == "remark":
            look = replace(style.ROW, color=style.ALERT, indent=1)
        paper.cells[(row, columns.first + at)] = Cell(answers[header], look)


def _size(columns: ModelColumns) -> float:
    observed = columns.result.observed
    back = case_formulas.shown_back(columns.result)
    if columns.result.back is not None and back is None:
        return float(abs(columns.result.fit.fitted).max()) or 1.0
    return float(abs(observed).max()) or 1.0


def _digits(columns: ModelColumns) -> int:
    """Digits that the scatter of single cases justifies: two of the residual spread's, at least three in all."""
    size = _size(columns)
    back = case_formulas.shown_back(columns.result)
    spread = (
        figures.unit_sd(columns.result)
        if columns.result.back is None or back is not None
        else columns.result.fit.residual_sd
    )
    if not spread > 0:
        return 8
    return min(max(3, figures.decimals(spread, 2) - figures.decimals(size, 1) + 1), 12)


def _helper_heads(paper: Paper, places: Plan) -> None:
    head = replace(style.SUBTITLE, size=8.0)
    for columns in places.models:
        paper.put(columns.x, f"{columns.model.name}: working figures", head, row=HEADER_ROW - 1)
        labels = [column.label for column in columns.result.design.columns]
        labels += ["state", "estimate as fitted", "standard error", "leverage", "missing", "beyond"]
        for at, label in enumerate(labels):
            paper.put(columns.x + at, label, head, row=HEADER_ROW)


def _lists(paper: Paper, places: Plan) -> None:
    """Levels for the drop-downs, the drop-downs, and the look of remarks."""
    for at, name in enumerate(places.levels):
        each = next(one for one in places.inputs if one.name == name)
        paper.put(places.list_column + at, f"kinds of {name}", replace(style.SUBTITLE, size=8.0), row=HEADER_ROW)
        for i, level in enumerate(each.levels):
            paper.put(places.list_column + at, level, replace(_HELP, align="left"), row=FIRST_ROW + i)
        span = (FIRST_ROW, each.column), (places.last_row, each.column)
        paper.drop_downs.append(DropDown(*span, choices=places.levels[name]))


def _widths(book: Book, places: Plan) -> dict[int, float]:
    names = [case_formulas.as_level(case.name) for case in book.cases]
    widths = {0: min(max(16.0, measure.widest(names)), 40.0)}
    for each in places.inputs:
        texts = [each.name.split(" ")[0] if len(each.name) > 18 else each.name, *each.levels]
        widths[each.column] = min(max(9.5, measure.widest(texts, bold=True) + 1.0), 26.0)
    for columns in places.models:
        widths[columns.first - 1] = 2.0
        code = figures.number_format(_size(columns), _digits(columns))
        number = measure.units(figures.shown(-1.5 * _size(columns), code), bold=True) + 1.0
        for at, header in enumerate(columns.headers):
            widths[columns.first + at] = 44.0 if header == "remark" else max(10.5, number)
    widths[places.why - 1] = 2.0
    return widths | reasons.widths(places)
