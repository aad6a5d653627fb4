"""`fit ANOVA`: the analysis of variance of each model, a block under the other."""

from __future__ import annotations

import math
from dataclasses import replace

from bridge.page.cells import Format
from bridge.page.sheet import Sheet
from bridge.regression.results import AnovaRow, ModelResult
from bridge.regression.spec import Errors
from bridge.sheets import figures, style, top, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import ROW_POINTS, Paper

HEADERS = ("source of variation", "degrees of freedom", "sum of squares", "mean square", "F", "p")
_WIDTHS = {0: 38.0, 1: 12.0, 2: 18.0, 3: 18.0, 4: 13.0, 5: 12.0}
_LAST = len(HEADERS) - 1
_PAGE_POINTS = 870.0  # what an upright A4 page holds at this width
_BLOCKS = {
    "added last": "added last (each term given all others)",
    "added in order": "added in order (each term given those above it)",
}

Span = tuple[tuple[int, int], tuple[int, int]]


def lay_out(book: Book) -> Sheet:
    """The sheet `fit ANOVA`."""
    return _laid_out(book)[0]


def places(book: Book) -> dict[str, Span]:
    """Each fitted model's table, header row included: first and last (row, column)."""
    return _laid_out(book)[1]


def _laid_out(book: Book) -> tuple[Sheet, dict[str, Span]]:
    paper = Paper("fit ANOVA", dict(_WIDTHS))
    what = "How much of the response's variation each part of a model accounts for."
    top.put(paper, book, "Where the variation goes", what, _LAST)
    spans: dict[str, Span] = {}
    for model, result in book.fitted:
        spans[model.name] = _block(paper, model, result)
    for model in book.models:
        if model.result is None:
            paper.heading(f"{model.name}  not fitted")
            paper.paragraph(words.refusal(model), 0, _LAST)
            paper.gap()
    sheet = paper.sheet(
        _LAST,
        title=book.title("fit ANOVA"),
        freeze=(4, 0),
        tab_color=style.TAB_DETAIL,
        landscape=False,
    )
    return sheet, spans


def _block(paper: Paper, model: ModelSheet, result: ModelResult) -> Span:
    response = words.axis_title(model.table, result.spec.response, result.spec.response_shape)
    lines = len(result.anova.rows) + 8  # heading, headers, parts, notes
    paper.room(lines * ROW_POINTS, _PAGE_POINTS)
    paper.heading(f"{model.name}  {response}, {words.form(result.spec)}")
    first = paper.row
    head = replace(style.HEADER, wrap=True)
    paper.line(HEADERS, (head, *(replace(head, align="right") for _ in HEADERS[1:])))
    before = ""
    for row in result.anova.rows:
        if row.block in _BLOCKS and row.block != before:
            look = replace(style.ROW, italic=True, color=style.QUIET)
            paper.line((_BLOCKS[row.block], *[None] * _LAST), (look,) * (_LAST + 1))
        before = row.block
        _row(paper, model, row)
    span = ((first, 0), (paper.row - 1, _LAST))
    paper.gap(4)
    for text in _notes(model, result):
        paper.paragraph(text, 0, _LAST)
    paper.gap(14)
    return span


def _row(paper: Paper, model: ModelSheet, row: AnovaRow) -> None:
    inner = row.block in _BLOCKS or row.block == "fit"
    source = words.label_in(model.table, row.source) if row.block in _BLOCKS else row.source
    looks = (
        replace(style.ROW, wrap=True, indent=1 if inner else 0),
        _look(figures.WHOLE),
        _look(figures.number_format(row.ss, 6)),
        _look(figures.number_format(row.ms, 6)),
        _look(figures.number_format(row.f, 4)),
        _look(figures.P_VALUE),
    )
    values = (row.ss, row.ms, row.f, row.p)
    paper.line((source, row.df, *(_value(value) for value in values)), looks)


def _look(code: str) -> Format:
    return replace(style.NUMBER, number_format=code)


def _value(value: float) -> float | str | None:
    if math.isnan(value):
        return None
    return "unbounded" if math.isinf(value) else value


# --- in words -----------------------------------------------------------------------------------


def _notes(model: ModelSheet, result: ModelResult) -> list[str]:
    spec, fit = result.spec, result.fit
    notes = [_together(result)]
    weak = [
        words.label_in(model.table, row.source)
        for row in result.anova.rows
        if row.block == "added last" and row.p >= 0.05
    ]
    if weak and fit.df_residual > 0:
        notes.append(
            f"Given the other terms, {words.listing(weak)} could be left out without a loss that stands out from "
            "chance (p 0.05 or more, common practice). That is no proof that the effect is nil."
        )
    if not spec.intercept:
        notes.append("Without an intercept the sums of squares are about zero, not about the mean.")
    if spec.weight is not None:
        notes.append(f"Sums of squares are weighted by {words.name_in(model.table, spec.weight)}.")
    if spec.errors is not Errors.ORDINARY and fit.robust_f is not None and fit.robust_f_p is not None:
        notes.append(
            f"The table supposes even, independent residuals. With the standard errors asked for ({spec.errors.value}) "
            f"all terms together give F = {figures.sentence_number(fit.robust_f, 3)}, "
            f"{figures.p_words(fit.robust_f_p)} (Wald's test)."
        )
    if result.search is not None:
        notes.append(words.SEARCH_WARNING)
    return notes


def _together(result: ModelResult) -> str:
    fit = result.fit
    if not result.spec.terms or math.isnan(fit.f):
        return "No term was asked for: the fit is the mean alone."
    figure = f"F = {figures.sentence_number(fit.f, 3)} on {fit.f_df[0]} and {fit.f_df[1]} degrees of freedom"
    if math.isinf(fit.f):
        return "The terms account for all of the variation: nothing is left over."
    more = "more of the variation than chance would" if fit.f_p < 0.05 else "no more of the variation than chance may"
    return f"Taken together the terms account for {more} ({figure}, {figures.p_words(fit.f_p)})."
