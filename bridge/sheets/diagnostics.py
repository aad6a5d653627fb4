"""`fit diagnostics`: the data as examined, then for each model its checks in words, odd rows, collinearity, charts."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from bridge.page.cells import Format, Value, address, quoted
from bridge.page.charts import Chart
from bridge.page.sheet import Link, Sheet
from bridge.regression.results import ModelResult
from bridge.sheets import behind, charts, figures, readings, remarks, style, top, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import ROW_POINTS, Paper

# Three charts stand side by side: columns 0-1, 2-6 and 7 are each about as wide as one.
_WIDTHS = {0: 21.0, 1: 31.0, 2: 10.0, 3: 10.5, 4: 12.0, 5: 10.0, 6: 10.0, 7: 54.0, 8: 3.0}
_LAST = 7
_CHART_COLUMNS = (0, 2, 7)
_PAGE_POINTS = 560.0  # what a landscape A4 page holds at this width
_MOST_ROWS = 8
_MOST_INDEXES = 5
_MOST_SUBSETS = 10

_HEAD = replace(style.HEADER, wrap=True)
_HEAD_RIGHT = replace(_HEAD, align="right")
_TEXT = replace(style.ROW, wrap=True)
_WORDS = replace(_TEXT, indent=1)
_HEAD_WORDS = replace(_HEAD, indent=1)
_QUIET = replace(style.FACT, wrap=True)


def lay_out(book: Book) -> Sheet:
    """The sheet `fit diagnostics`."""
    paper = Paper("fit diagnostics", dict(_WIDTHS))
    what = "What was checked, what was found, and what it means for the use of each model."
    top.put(paper, book, "How far the models can be trusted", what, _LAST)
    gallery = charts.draw(book)
    _examined(paper, book)
    contents = _contents(paper, book)
    starts: dict[str, int] = {}
    for at, (model, result) in enumerate(book.fitted):
        if at:
            paper.new_page()
        starts[model.name] = paper.row
        _model(paper, book, model, result, gallery.pictures.get(model.name, ()))
    for model in book.models:
        if model.result is None:
            starts[model.name] = paper.row
            paper.heading(f"{model.name}  not fitted")
            paper.paragraph(words.refusal(model), 0, _LAST)
            paper.gap()
    _link_contents(paper, book, contents, starts)
    behind.put_down(paper, gallery.columns)
    return paper.sheet(
        _LAST,
        title=book.title("fit diagnostics"),
        freeze=(3, 0),
        tab_color=style.TAB_DETAIL,
    )


# --- the parts of the page ----------------------------------------------------------------------


def _contents(paper: Paper, book: Book) -> int:
    """Room for links to the models' blocks, several a line; its first row."""
    row = paper.row
    if len(book.models) > 1:
        paper.row += math.ceil(len(book.models) / _LAST)
        paper.gap(6)
    return row


def _link_contents(paper: Paper, book: Book, row: int, starts: dict[str, int]) -> None:
    if len(starts) < 2:
        return
    place = quoted(book.title("fit diagnostics"))
    look = replace(style.BODY, color=style.DEEP, underline=True)
    for at, (name, start) in enumerate(starts.items()):
        down, column = divmod(at, _LAST)
        paper.put(column, f"to {name}", look, row + down)
        paper.links.append(Link(row + down, column, f"{place}!{address(start, 0)}"))


def _examined(paper: Paper, book: Book) -> None:
    if not book.findings:
        return
    paper.heading("The data as found")
    for sheet, found in book.findings.items():
        texts = [finding.text for finding in found] or ["Nothing that calls for a second look."]
        for text in texts:
            said = f'"{sheet}": {text}' if len(book.findings) > 1 else text
            paper.paragraph(said, 0, _LAST, gap=1.0)
    paper.gap()


def _model(
    paper: Paper, book: Book, model: ModelSheet, result: ModelResult, pictures: Sequence[charts.Picture]
) -> None:
    response = words.axis_title(model.table, result.spec.response, result.spec.response_shape)
    paper.heading(f"{model.name}  {response}, {words.form(result.spec)}")
    if result.search is not None:
        paper.paragraph(words.SEARCH_WARNING, 0, _LAST, replace(style.PARAGRAPH, bold=True))
    if result.checks:
        _checks(paper, model, result)
        _rows(paper, book, model, result)
    else:
        paper.paragraph(readings.NO_RESIDUAL, 0, _LAST)
    _collinearity(paper, model, result)
    _folds(paper, model, result)
    _search(paper, model, result)
    _charts(paper, [picture.chart for picture in pictures])
    paper.gap(14)


def _checks(paper: Paper, model: ModelSheet, result: ModelResult) -> None:
    _header(paper, ("check", "method", "statistic", "value", "degrees of freedom", "p"), (2, 3, 4, 5), "in words", 6)
    for reading in readings.checks(model, result):
        looks = (
            replace(_TEXT, bold=True),
            _QUIET,
            replace(_TEXT, align="right"),
            _number(figures.number_format(reading.value, 4)),
            replace(_TEXT, align="right"),
            _number(figures.P_VALUE),
        )
        values = (reading.name, reading.method, reading.statistic, _known(reading.value), reading.df, _known(reading.p))
        _line(paper, values, looks, reading.text, 6)
    paper.gap()


def _rows(paper: Paper, book: Book, model: ModelSheet, result: ModelResult) -> None:
    shown = most_influential(result)
    if not shown:
        return
    headers = ("rows that pull most", "label", "studentised residual", "leverage", "Cook's distance", "DFFITS")
    _header(paper, headers, (2, 3, 4, 5), "in words", 6)
    found = remarks.marks(result)
    influence = result.influence
    for at in shown:
        looks = (
            replace(_TEXT, color=style.DEEP, underline=True),
            _TEXT,
            _number("0.00"),
            _number("0.0000"),
            _number("0.0000"),
            _number("0.000"),
        )
        figures_of = (influence.external, influence.leverage, influence.cooks_distance, influence.dffits)
        values = (*_row_name(model, at), *(_known(float(column[at])) for column in figures_of))
        said = [text for text in (remarks.remark(result, found, at), readings.moves(model, result, at)) if text]
        if model.table is not None and model.taken is not None:
            row = int(model.table.rows[model.taken.used[at]])
            first = min(column.index for column in model.table.columns)
            paper.link(0, f"{quoted(model.table.sheet)}!{address(row - 1, first)}")
        _line(paper, values, looks, words.sentence("; ".join(said)) if said else "", 6)
    paper.gap()


def most_influential(result: ModelResult) -> list[int]:
    """Positions of the rows with the largest Cook's distance: the marked ones, else the first three; eight at most."""
    cook = np.nan_to_num(result.influence.cooks_distance, nan=-1.0, posinf=-1.0)
    order = np.argsort(-cook, kind="stable").tolist()
    marked = remarks.marks(result).any
    odd = [at for at in order if marked[at]]
    least = [at for at in order[:3] if at not in odd]
    return sorted(odd[:_MOST_ROWS] + least[: max(0, 3 - len(odd))], key=lambda at: -cook[at])


def _collinearity(paper: Paper, model: ModelSheet, result: ModelResult) -> None:
    found = result.collinearity
    if len(found.terms) < 2 and not result.design.aliased and not _raised(result):
        return  # a single plain term has nothing to be told apart from
    _header(paper, ("can the terms be told apart", "", "columns", "GVIF", "per column"), (2, 3, 4), "in words", 5)
    for term in found.terms:
        text, _ = readings.vif(term)
        looks = (_TEXT, _TEXT, _number("0"), _number("0.00"), _number("0.00"))
        label = words.label_in(model.table, term.term)
        _line(
            paper,
            (label, None, term.df, _known(term.gvif), _known(term.scaled)),
            looks,
            words.sentence(text),
            5,
            wide=0,
        )
    for one in result.design.aliased:
        looks = (_TEXT, _TEXT, _number("0"), _number("0"), _number("0"))
        label = words.label_in(model.table, one.label)
        _line(paper, (label, None, None, None, None), looks, readings.alias(one, model.table), 5, wide=0)
    _indexes(paper, model, result)
    paper.gap()


def _indexes(paper: Paper, model: ModelSheet, result: ModelResult) -> None:
    found = result.collinearity
    raised = _raised(result)
    looks = (_TEXT, _TEXT, _number("0.0"), _QUIET, _QUIET)
    if not raised:
        largest = float(found.condition_indexes[-1]) if len(found.condition_indexes) else math.nan
        _line(
            paper,
            ("largest condition index", None, _known(largest), None, None),
            looks,
            "Harmless: 10 or less.",
            5,
            wide=0,
        )
    for at in raised[:_MOST_INDEXES]:
        index = float(found.condition_indexes[at])
        text, _ = readings.condition(index)
        shares = _shares(model, result, at)
        said = words.sentence(f"{text}; variance shares: {shares}" if shares else text)
        _line(paper, ("condition index", None, index, None, None), looks, said, 5, wide=0)


def _raised(result: ModelResult) -> list[int]:
    """Condition indexes that are not harmless, the largest first."""
    indexes = result.collinearity.condition_indexes
    return sorted((at for at in range(len(indexes)) if indexes[at] > readings.INDEX_SIGN), key=lambda at: -indexes[at])


def _shares(model: ModelSheet, result: ModelResult, at: int) -> str:
    shares = result.collinearity.variance_shares[at]
    large = [column for column in np.argsort(-shares).tolist() if shares[column] > readings.SHARE]
    labels = [words.label_in(model.table, result.design.columns[column].label) for column in large]
    parts = [f"{label} {figures.percent(float(shares[column]))}" for label, column in zip(labels, large, strict=True)]
    return words.listing(parts)


def _folds(paper: Paper, model: ModelSheet, result: ModelResult) -> None:
    found = result.cross_validation
    if not math.isfinite(found.rmse):
        return
    unit = words.unit_in(model.table, result.spec.response)
    paper.room((found.folds + 3) * ROW_POINTS, _PAGE_POINTS)
    _header(paper, ("rows left out in turn", "", "rows", "typical miss"), (2, 3), "in words", 4)
    code = figures.column_format([found.rmse], found.rmse)
    first = True
    for fold in np.unique(found.fold_of).tolist():
        inside = found.fold_of == fold
        error = (result.observed - found.predicted)[inside & np.isfinite(found.predicted)]
        miss = math.sqrt(float(np.mean(error**2))) if len(error) else math.nan
        looks = (_TEXT, _TEXT, _number("0"), _number(code))
        text = fold_words(result, unit) if first else ""
        _line(paper, (f"fold {fold + 1}", None, int(inside.sum()), _known(miss)), looks, text, 4)
        first = False
    looks = (replace(_TEXT, bold=True), _TEXT, _number("0", bold=True), _number(code, bold=True))
    _line(paper, ("all folds together", None, result.fit.n, found.rmse), looks, "", 4)
    paper.gap()


def fold_words(result: ModelResult, unit: str) -> str:
    """What the cross-validation says, in a sentence or two."""
    found = result.cross_validation
    miss = words.with_unit(figures.sentence_number(found.rmse, 3), unit)
    share = (
        f" ({figures.percent(found.rmse_percent / 100)} of the mean observed)"
        if math.isfinite(found.rmse_percent)
        else ""
    )
    how = (
        "Whole groups were left out together." if found.grouped else "Each row was estimated from the folds without it."
    )
    missing = int((~np.isfinite(found.predicted)).sum())
    if missing:
        rows = words.plural(missing, "row")
        how += f" {rows} could not be: what sets {'it' if missing == 1 else 'them'} apart occurs in no other fold."
    search = " The search was done anew without each fold." if found.includes_search else ""
    return f"On rows it has not seen the model misses by {miss}{share}, root mean square. {how}{search}"


def _search(paper: Paper, model: ModelSheet, result: ModelResult) -> None:
    found = result.search
    if found is None:
        return
    _header(paper, ("terms kept", "", found.by), (2,), "in words", 3)
    for at, subset in enumerate(found.best[:_MOST_SUBSETS]):
        terms = words.listing([words.label_in(model.table, term) for term in subset.terms], most=40) or "none"
        looks = (_TEXT, _TEXT, _number(figures.number_format(subset.figure, 6)))
        text = f"Chosen; {words.plural(found.subsets, 'subset')} compared." if at == 0 else ""
        _line(paper, (terms, None, subset.figure), looks, text, 3, wide=0)
    paper.gap()


# --- charts in rows of three --------------------------------------------------------------------


def _charts(paper: Paper, pictures: Sequence[Chart]) -> None:
    for start in range(0, len(pictures), len(_CHART_COLUMNS)):
        row = pictures[start : start + len(_CHART_COLUMNS)]
        tallest = max(chart.height for chart in row) * 72 / 96
        paper.room(tallest, _PAGE_POINTS)
        for column, chart in zip(_CHART_COLUMNS, row, strict=False):
            paper.charts.append(replace(chart, row=paper.row, column=column))
        paper.row += math.ceil(tallest / ROW_POINTS) + 1


# --- lines of a table ---------------------------------------------------------------------------


def _header(paper: Paper, headers: Sequence[str], right: Sequence[int], words_header: str, words_from: int) -> None:
    looks = [_HEAD_RIGHT if at in right else _HEAD for at in range(len(headers))]
    _line(paper, headers, looks, words_header, words_from, look=_HEAD_WORDS, wide=0 if "" in headers else None)


def _line(
    paper: Paper,
    values: Sequence[Value],
    looks: Sequence[Format],
    text: str,
    text_from: int,
    look: Format = _WORDS,
    wide: int | None = None,
) -> None:
    """A line of figures with a sentence at its right, merged over the columns from `text_from` on.

    With `wide` the text of that column runs over the next one too.
    """
    for column, (value, one) in enumerate(zip(values, looks, strict=True)):
        if wide is not None and column in (wide, wide + 1):
            continue
        paper.put(column, value, one)
        if one.wrap and isinstance(value, str):
            paper.grow(value, column, column, one)
    if wide is not None:
        paper.spread(str(values[wide]), wide, wide + 1, looks[wide])
    paper.spread(text, text_from, _LAST, look)
    paper.row += 1


def _number(code: str, bold: bool = False) -> Format:
    return replace(style.NUMBER, number_format=code, bold=bold)


def _known(value: float) -> float | str | None:
    if math.isnan(value):
        return None
    return "unbounded" if math.isinf(value) else value


def _row_name(model: ModelSheet, at: int) -> tuple[str, str]:
    text = readings.row_words(model, at)
    row, _, label = text.partition(" (")
    return row, label.removesuffix(")")
