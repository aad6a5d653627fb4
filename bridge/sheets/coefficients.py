"""`fit coefficients`: a block per model, and beside it the working figures that the live estimates use."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from bridge.page.cells import Format
from bridge.page.sheet import Block, BlockColumn, Sheet
from bridge.regression.results import Alias, ModelResult
from bridge.regression.spec import Errors, FitBy
from bridge.sheets import effects, figures, measure, recheck, style, top, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import ROW_POINTS, Paper

_WIDTHS = {0: 26.0, 1: 16.0, 2: 15.0, 3: 9.0, 4: 9.0, 5: 15.0, 6: 15.0, 7: 13.0, 8: 8.0, 9: 50.0}
_LAST = 9
_PAGE_POINTS = 620.0  # what a landscape A4 page holds at this width
_WORKING = _LAST + 2  # the first column of the working figures

_MADE = {
    Errors.ORDINARY: "ordinary (even spread, independent rows)",
    Errors.UNEVEN_SPREAD: "for uneven spread (HC3, MacKinnon & White 1985)",
    Errors.GROUPED: "for rows that belong together (CR1, Liang & Zeger 1986), t on groups less one",
    Errors.SERIAL: "for a series (Newey & West 1987, Bartlett weights)",
}

Array = NDArray[np.float64]
Span = tuple[tuple[int, int], tuple[int, int]]


@dataclass(frozen=True, slots=True)
class Place:
    """Where a model's figures stand, each first to last (row, column): the table with its header row; and, out of the
    way of whoever sorts the table, the coefficients once more, the factor C (C C' is their covariance) and R^-1."""

    table: Span
    coefficients: Span
    factor: Span
    r_inverse: Span


def lay_out(book: Book) -> Sheet:
    """The sheet `fit coefficients`."""
    return _laid_out(book)[0]


def places(book: Book) -> Mapping[str, Place]:
    """Where each fitted model's figures stand."""
    row, found = _FIRST, {}
    for model, result in book.fitted:
        p = len(result.design.columns)
        head = row + 1
        found[model.name] = _place(head, p)
        row = head + 1 + p + _rows_below(model, result)
    return found


_FIRST = 4


def _place(head: int, p: int) -> Place:
    first, last = head + 1, head + p
    factor, inverse = _WORKING + 3, _WORKING + 3 + p + 1
    return Place(
        ((head, 0), (last, _LAST)),
        ((first, _WORKING + 1), (last, _WORKING + 1)),
        ((first, factor), (last, factor + p - 1)),
        ((first, inverse), (last, inverse + p - 1)),
    )


def _rows_below(model: ModelSheet, result: ModelResult) -> int:
    """Rows under a table before the next block: notes with a gap before and after, and the recheck."""
    return 1 + len(_notes(model, result)) + recheck.rows(model, result) + 1


def _laid_out(book: Book) -> tuple[Sheet, None]:
    paper = Paper("fit coefficients", _widths(book))
    what = "What each term adds to the estimate, how sure that is, and what it means."
    top.put(paper, book, "Coefficients", what, _LAST)
    paper.row = _FIRST
    found = places(book)
    for model, result in book.fitted:
        _block(book, paper, model, result, found[model.name])
    for model in book.models:
        if model.result is None:
            paper.heading(f"{model.name}  not fitted")
            paper.paragraph(words.refusal(model), 0, _LAST)
            paper.gap()
    sheet = paper.sheet(_LAST, title=book.title("fit coefficients"), freeze=(_FIRST, 1), tab_color=style.TAB_DETAIL)
    return sheet, None


def _widths(book: Book) -> dict[int, float]:
    widths = dict(_WIDTHS)
    labels = [column.label for _, result in book.fitted for column in result.design.columns]
    widths[0] = min(max(widths[0], measure.widest(labels) + 1), 60.0)
    widest = max((len(result.design.columns) for _, result in book.fitted), default=0)
    return widths | dict.fromkeys(range(_WORKING, _WORKING + 2 * widest + 5), 12.0)


def _block(book: Book, paper: Paper, model: ModelSheet, result: ModelResult, place: Place) -> None:
    response = words.axis_title(model.table, result.spec.response, result.spec.response_shape)
    below = len(result.design.columns) + _rows_below(model, result)
    paper.room((2 + below) * ROW_POINTS, _PAGE_POINTS)
    _working(paper, result, place)
    paper.heading(f"{model.name}  {response}, {words.form(result.spec)}")
    level = f"{100 * result.spec.level:.10g}%"
    heads = ("term", "coefficient", "standard error", "t", "p", f"{level} low", f"{level} high", "standardised", "VIF")
    right = replace(style.HEADER, align="right")
    looks = (style.HEADER, *(right for _ in heads[1:]), replace(style.HEADER, indent=1))
    paper.line((*heads, "effect in words"), looks)
    for at in range(len(result.design.columns)):
        _row(paper, model, result, at)
    paper.gap(4)
    for note in _notes(model, result):
        paper.paragraph(note, 0, _LAST)
    recheck.put_down(book, paper, model, result, place.coefficients)
    paper.gap(14)


def _row(paper: Paper, model: ModelSheet, result: ModelResult, at: int) -> None:
    fit = result.fit
    se = float(fit.standard_errors[at])
    b = float(fit.coefficients[at])
    code = figures.uncertain_format(b, se, 4)
    paper.put(0, result.design.columns[at].label, replace(style.ROW, wrap=True))
    paper.grow(result.design.columns[at].label, 0, 0, style.ROW)
    for column, value, form in (
        (1, b, code),
        (2, se, figures.number_format(se, 4)),
        (3, float(fit.t[at]), "0.00" if abs(float(fit.t[at])) < 1e5 else "0.00E+00"),
        (4, float(fit.p[at]), figures.P_VALUE),
        (5, float(fit.low[at]), code),
        (6, float(fit.high[at]), code),
        (7, float(fit.standardised[at]), "0.000"),
        (8, float(fit.vif[at]), figures.number_format(float(fit.vif[at]), 3)),
    ):
        cell = figures.figure_cell(value, _number(form))
        paper.cells[(paper.row, column)] = cell
    said = effects.effect(model, result, at)
    look = replace(style.ROW, wrap=True, indent=1)
    paper.put(9, said, look)
    paper.grow(said, 9, 9, look)
    paper.row += 1


def _number(code: str) -> Format:
    return replace(style.NUMBER, number_format=code)


def _working(paper: Paper, result: ModelResult, place: Place) -> None:
    """The coefficients again, C and R^-1 to the right of the table, in quiet type."""
    look = replace(style.NUMBER, color=style.QUIET, size=8.0, number_format="0.000E+00")
    head = replace(style.SUBTITLE, size=8.0)
    labels = [column.label for column in result.design.columns]
    (first, column), _ = place.coefficients
    said = "working figures: what the live estimates and the recheck read"
    paper.put(column - 1, said, head, first - 2)
    paper.put(column - 1, "term", head, first - 1)
    paper.put(column, "coefficient", replace(head, align="right"), first - 1)
    paper.blocks.append(Block(first, column - 1, (BlockColumn(labels, replace(look, align="left")),)))
    paper.blocks.append(Block(first, column, (BlockColumn(result.fit.coefficients, look),)))
    for span, matrix, text in (
        (place.factor, result.fit.covariance_factor, "for intervals: C, with C C' the covariance of the coefficients"),
        (place.r_inverse, result.fit.r_inverse, "for distance from the cases: inverse of R, with R'R = X'WX"),
    ):
        (row, column), _ = span
        paper.put(column, text, head, row - 2)
        for j, label in enumerate(labels):
            paper.put(column + j, label, replace(head, align="right"), row - 1)
        columns = tuple(BlockColumn(np.ascontiguousarray(values), look) for values in np.asarray(matrix, dtype=float).T)
        paper.blocks.append(Block(row, column, columns))


# --- under the table ----------------------------------------------------------------------------


def _notes(model: ModelSheet, result: ModelResult) -> list[str]:
    fit = result.fit
    said = [
        f"Standard errors: {_MADE[result.spec.errors]}. "
        f"Condition number {figures.sentence_number(fit.condition_number, 3)} (columns scaled to length 1; above 30 "
        "some coefficients are hard to tell apart, Belsley, Kuh & Welsch 1980)."
    ]
    if result.spec.fit_by is FitBy.RESISTANT:
        said.append(
            "Fitted resistantly (Huber 1964): rows far from the fit pull less. Their weights stand in fit rows; "
            "standard errors are Huber's."
        )
    if result.spec.weight is not None:
        said.append(f"Rows are weighted by {words.name_in(model.table, result.spec.weight)}.")
    if fit.digits is not None:
        said.append(f"The figures are good to about {max(int(fit.digits), 0)} digits.")
    said += [_alias(alias) for alias in result.design.aliased]
    if result.search is not None:
        said.append(words.SEARCH_WARNING)
    return said


def _alias(alias: Alias) -> str:
    parts = [
        f"{figures.sentence_number(value, 6)} x {name}" if not math.isclose(value, 1) else name
        for name, value in alias.depends_on
    ]
    how = "is exactly" if alias.exact else "is, as far as can be told,"
    return (
        f"{alias.label} was left out: in these rows it {how} {' + '.join(parts) if parts else 'zero'}, so the data "
        "cannot tell its effect from theirs."
    )
