"""`fit results`: the page to read first. Sentences, one table with the models side by side, cautions, two charts."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from bridge.page.cells import Cell, quoted
from bridge.page.sheet import Sheet
from bridge.regression.results import ModelResult
from bridge.regression.spec import Shape
from bridge.sheets import charts, figures, measure, style, top, verdicts, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import ROW_POINTS, Paper

MODELS_A_PAGE = 3
_LABEL, _MODEL = 33.0, 23.0
_LAST = MODELS_A_PAGE  # the label's column, then one a model
_GAP, _CHARTS = MODELS_A_PAGE + 1, MODELS_A_PAGE + 2
_CHART_WIDTH, _CHART_HEIGHT = 440, 270
_CHART_COLUMNS = 6

MORE = (
    ("fit coefficients", "coefficients"),
    ("fit ANOVA", "variation"),
    ("fit diagnostics", "checks and charts"),
    ("fit rows", "row by row"),
    ("fit estimates", "new cases"),
    ("fit history", "earlier fits"),
)

LIVE = (
    'This workbook needs no program to be read. New cases on "{estimates}", the line at the top that says whether the '
    "data are unchanged, and people's own formulas that use the fit's names work in any spreadsheet. Only a new fit, "
    "after a change of data or request, needs a save with the bridge running."
)


def lay_out(book: Book) -> Sheet:
    """The sheet `fit results`."""
    groups = [book.models[at : at + MODELS_A_PAGE] for at in range(0, len(book.models), MODELS_A_PAGE)]
    widths = {0: _LABEL, **dict.fromkeys(range(1, _LAST + 1), _MODEL), _GAP: 2.5}
    widths.update(dict.fromkeys(range(_CHARTS, _CHARTS + _CHART_COLUMNS), 10.0))
    paper = Paper("fit results", widths)
    top.put(paper, book, title(book), "What the models say, in a page.", _LAST)
    first = paper.row
    for at, group in enumerate(groups):
        if at:
            paper.new_page()
        _group(paper, book, group, verdicts.comparison(book) if at == 0 else [])
        if at == len(groups) - 1:
            _nested(paper, book)
        if at == 0 and book.fitted:
            _beside(paper, book, first)
    _more(paper, book)
    return paper.sheet(
        _CHARTS + _CHART_COLUMNS - 1 if book.fitted else _LAST,
        title=book.title("fit results"),
        freeze=(3, 0),
        fit_height=max(1, len(groups)),
        tab_color=style.TAB_RESULT,
    )


def title(book: Book) -> str:
    """`Hours, from 117 past rows`, or a plainer title where the models do not share a response."""
    fitted = book.fitted
    names = {words.name_in(model.table, result.spec.response) for model, result in fitted}
    if len(names) != 1:
        return "Results" if fitted else "No model could be fitted"
    counts = {result.fit.n for _, result in fitted}
    name = words.capital(names.pop())
    rows = words.plural(max(counts), "row")
    span = rows if len(counts) == 1 else f"{words.number(min(counts))} to {rows}"
    return f"{name}, from {span}"


# --- one group of models ------------------------------------------------------------------------


def _group(paper: Paper, book: Book, group: Sequence[ModelSheet], opening: list[str]) -> None:
    fitted = [(model, model.result) for model in group if model.result is not None]
    names = "" if len(book.models) <= MODELS_A_PAGE else f": {words.listing([model.name for model in group])}"
    paper.heading(f"In short{names}")
    for text in opening:
        paper.paragraph(text, 0, _LAST, replace(style.PARAGRAPH, bold=True))
    for model in group:
        paper.paragraph(_answer(model), 0, _LAST)
    paper.gap(6)
    _table(paper, book, group)
    paper.gap(6)
    if fitted:
        paper.heading("What to watch")
        for text in [*verdicts.watch(fitted), *verdicts.reach(fitted)]:
            paper.paragraph(text, 0, _LAST)
        paper.gap(6)


def _answer(model: ModelSheet) -> str:
    if model.result is None:
        return f"{model.name} was not fitted. {words.refusal(model)}"
    return verdicts.answer(model, model.result)


@dataclass(frozen=True, slots=True)
class _Figure:
    """A line of the table: its label, the figure of a model, and the number format that it deserves."""

    label: str
    of: Callable[[ModelSheet, ModelResult], float]
    code: Callable[[ModelSheet, ModelResult, float], str]


def _whole(model: ModelSheet, result: ModelResult, value: float) -> str:
    return figures.WHOLE


def _ratio(model: ModelSheet, result: ModelResult, value: float) -> str:
    """Three decimals, more where these would make it look like 1."""
    return figures.places_format(value, min(10, max(3, figures.decimals(1 - value, 2)))) if value < 1 else figures.RATIO


def _criterion(model: ModelSheet, result: ModelResult, value: float) -> str:
    return figures.places_format(value, 1)


def _sd(model: ModelSheet, result: ModelResult, value: float) -> str:
    shape = result.spec.response_shape
    unit = words.unit_in(model.table, result.spec.response) if shape is Shape.AS_IS else f"({shape.value})"
    return _with_unit(figures.number_format(value, 3), unit, value)


def _unit(model: ModelSheet, result: ModelResult, value: float) -> str:
    return _with_unit(figures.number_format(value, 3), words.unit_in(model.table, result.spec.response), value)


def _percent(model: ModelSheet, result: ModelResult, value: float) -> str:
    return figures.with_unit(figures.places_format(value, figures.decimals(value, 3)), "%")


def _with_unit(code: str, unit: str, value: float) -> str:
    """With the unit where the column has room for both; a unit never makes a number into ####."""
    full = figures.with_unit(code, unit)
    return full if measure.units(figures.shown(value, full), bold=True) <= _MODEL - 1 else code


_FIGURES = (
    _Figure("rows used", lambda m, r: r.fit.n, _whole),
    _Figure("rows left out", lambda m, r: len(m.taken.left_out) if m.taken is not None else 0, _whole),
    _Figure("coefficients", lambda m, r: len(r.design.columns), _whole),
    _Figure("degrees of freedom", lambda m, r: r.fit.df_residual, _whole),
    _Figure("R2", lambda m, r: r.fit.r_squared, _ratio),
    _Figure("adjusted R2", lambda m, r: r.fit.adjusted_r_squared, _ratio),
    _Figure("leave-one-out R2", lambda m, r: r.fit.loo_r_squared, _ratio),
    _Figure("residual standard deviation", lambda m, r: r.fit.residual_sd, _sd),
    _Figure("typical miss", lambda m, r: r.cross_validation.rmse, _unit),
    _Figure("typical miss, %", lambda m, r: r.cross_validation.rmse_percent, _percent),
    _Figure("AIC", lambda m, r: r.fit.aic, _criterion),
    _Figure("BIC", lambda m, r: r.fit.bic, _criterion),
)


def _table(paper: Paper, book: Book, group: Sequence[ModelSheet]) -> None:
    paper.put(0, "Side by side", style.HEADER)
    for column, model in enumerate(group, 1):
        paper.put(column, model.name, style.HEADER_RIGHT)
    paper.row += 1
    text = replace(style.ROW, wrap=True, align="right")
    forms = [words.form(model.result.spec) if model.result is not None else "not fitted" for model in group]
    paper.line(("form", *forms), (style.ROW, *(text for _ in group)))
    if all(model.result is None for model in group):
        return
    least = _least_misses(book)
    for figure in _FIGURES:
        paper.put(0, figure.label, style.ROW)
        for column, model in enumerate(group, 1):
            strong = figure.label.startswith("typical miss") and model.name in least
            paper.cells[(paper.row, column)] = _cell(figure, model, strong)
        paper.row += 1
    paper.paragraph(_explained(group), 0, _LAST, replace(style.PARAGRAPH, size=8.0, color=style.QUIET))


def _cell(figure: _Figure, model: ModelSheet, strong: bool) -> Cell:
    look = replace(style.NUMBER, bold=strong, fill=style.TINT if strong else None)
    if model.result is None:
        return figures.figure_cell(math.nan, look)
    value = float(figure.of(model, model.result))
    code = figure.code(model, model.result, value) if math.isfinite(value) else "General"
    return figures.figure_cell(value, replace(look, number_format=code))


def _least_misses(book: Book) -> set[str]:
    """The models that predict new cases best, one per response that has rivals."""
    return {group[0][0].name for group in verdicts.rivals(book) if len(group) > 1}


def _explained(group: Sequence[ModelSheet]) -> str:
    fitted = [model.result for model in group if model.result is not None]
    folds = sorted({result.cross_validation.folds for result in fitted})
    how = f"{words.listing([str(k) for k in folds], 'or')} folds" if folds else "folds"
    scale = (
        " The residual standard deviation of a log or root model is on that scale: 0.10 (log) is about 10%."
        if any(result.spec.response_shape is not Shape.AS_IS for result in fitted)
        else ""
    )
    return (
        f"typical miss: root mean square over rows left out in turn (cross-validation, {how}), in the response's own "
        f"units; in % of the mean observed.{scale}"
    )


# --- the end of the page ------------------------------------------------------------------------


def _nested(paper: Paper, book: Book) -> None:
    pairs = verdicts.nested(book)
    if pairs:
        paper.heading("What is contained in what")
        for text in pairs:
            paper.paragraph(text, 0, _LAST)
        paper.gap(6)


def _more(paper: Paper, book: Book) -> None:
    paper.put(0, "More on the other sheets", replace(style.BODY, bold=True))
    look = replace(style.BODY, color=style.DEEP, underline=True)
    for at, (name, what) in enumerate(MORE):
        column = 1 + at % MODELS_A_PAGE
        paper.put(column, what, look)
        paper.link(column, f"{quoted(book.title(name))}!A1", book.title(name))
        if column == MODELS_A_PAGE:
            paper.row += 1


def _beside(paper: Paper, book: Book, row: int) -> None:
    """Right of the words: two charts of the best model, then the cautions."""
    last = _CHARTS + _CHART_COLUMNS - 1
    chosen = verdicts.best(book)
    gallery = charts.draw(book)
    for key in ("observed", "fitted"):
        chart = gallery.chart(chosen[0].name, key) if chosen is not None else None
        if chart is not None:
            paper.charts.append(replace(chart, row=row, column=_CHARTS, width=_CHART_WIDTH, height=_CHART_HEIGHT))
            row = _row_below(paper, row, _CHART_HEIGHT * 72 / 96 + 8)
    paper.put(_CHARTS, "Before you rely on it", style.HEADING, row)
    paper.heights[row] = max(paper.heights.get(row, ROW_POINTS), style.HEADING.size * 1.6)
    live = LIVE.format(estimates=book.title("fit estimates"))
    end = paper.beside("\n\n".join((*words.CAUTIONS, live)), _CHARTS, last, row + 1)
    paper.row = max(paper.row, end)


def _row_below(paper: Paper, row: int, points: float) -> int:
    """The first row that begins at least `points` below the top of `row`."""
    while points > 0:
        points -= paper.heights.get(row, ROW_POINTS)
        row += 1
    return row
