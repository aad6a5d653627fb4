"""`fit history`: is this still the same data, and one line per fit and model, newest first."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import replace

from bridge.page.cells import Cell
from bridge.page.sheet import Sheet
from bridge.regression.results import ModelResult
from bridge.sheets import figures, measure, seal, style, top, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import Paper
from bridge.workbook.contents import HistoryLine, RawSheet
from bridge.workbook.request import Scalar

MOST_LINES = 500
HEADERS = (
    "fitted at",
    "model",
    "data sheet",
    "rows used",
    "rows left out",
    "R2",
    "adjusted R2",
    "residual standard deviation",
    "typical miss",
    "response",
    "terms",
    "what changed since the last fit",
    "coefficients",
)
_WIDTHS = {
    0: 30.0,
    1: 18.0,
    2: 14.0,
    3: 15.0,
    4: 15.0,
    5: 15.0,
    6: 12.0,
    7: 14.0,
    8: 14.0,
    9: 20.0,
    10: 36.0,
    11: 60.0,
    12: 60.0,
}
_LAST = len(HEADERS) - 1
_COEFFICIENT = re.compile(r"(.+?) = (\S+)(?:; |$)")


def lay_out(book: Book) -> Sheet:
    """The sheet `fit history`."""
    paper = Paper("fit history", dict(_WIDTHS))
    top.put(
        paper, book, "What was fitted, and when", "The seal piece by piece, then every fit so far, the newest first.", 8
    )
    seal.put_down(book, paper)
    paper.gap(14)
    paper.heading("Fits so far")
    head = replace(style.HEADER, wrap=True)
    numeric = {3, 4, 5, 6, 7, 8}
    looks = [replace(head, align="right") if at in numeric else head for at in range(len(HEADERS))]
    looks[9] = replace(head, indent=1)
    paper.line(HEADERS, looks)
    for line in _all_lines(book):
        _line(paper, line)
    return paper.sheet(_LAST - 1, title=book.title("fit history"), freeze=(4, 0), tab_color=style.TAB_DETAIL)


def read(raw: RawSheet) -> tuple[HistoryLine, ...]:
    """The lines on a sheet as it stands, found by their headers."""
    head = next((row for (row, column), value in sorted(raw.values.items()) if value == HEADERS[0]), None)
    if head is None:
        return ()
    names = {column: str(value) for (row, column), value in raw.values.items() if row == head}
    by_row: dict[int, dict[str, Scalar]] = {}
    for (row, column), value in raw.values.items():
        if row > head and column in names:
            by_row.setdefault(row, {})[names[column]] = value
    return tuple(HistoryLine(by_row[row]) for row in sorted(by_row) if HEADERS[0] in by_row[row])


def _all_lines(book: Book) -> list[Mapping[str, Scalar]]:
    new: list[Mapping[str, Scalar]] = [_fields(book, model, result) for model, result in book.fitted]
    return [*new, *(line.fields for line in book.history)][:MOST_LINES]


def _fields(book: Book, model: ModelSheet, result: ModelResult) -> dict[str, Scalar]:
    fit, taken = result.fit, model.taken
    last = next((line.fields for line in book.history if str(line.fields.get("model")) == model.name), None)
    pairs = zip(result.design.columns, fit.coefficients.tolist(), strict=True)
    values: dict[str, Scalar] = {
        "fitted at": words.moment(book.fitted_at),
        "model": model.name,
        "data sheet": model.table.sheet if model.table is not None else "",
        "rows used": fit.n,
        "rows left out": len(taken.left_out) if taken is not None else 0,
        "R2": fit.r_squared,
        "adjusted R2": fit.adjusted_r_squared,
        "residual standard deviation": fit.residual_sd,
        "typical miss": result.cross_validation.rmse,
        "response": words.axis_title(model.table, result.spec.response, result.spec.response_shape),
        "terms": "; ".join(dict.fromkeys(column.term for column in result.design.columns if column.factors)) or "none",
        "coefficients": "; ".join(f"{column.label} = {b!r}" for column, b in pairs),
    }
    values["what changed since the last fit"] = " ".join(_changes(values, last, result)) if last else "first fit"
    return {name: value for name, value in values.items() if value == value}


def _changes(now: Mapping[str, Scalar], last: Mapping[str, Scalar], result: ModelResult) -> Iterator[str]:
    """What is different from the last fit of the model, in sentences."""
    rows = _difference(now, last, "rows used")
    if rows:
        yield f"{words.plural(abs(rows), 'row')} {'more' if rows > 0 else 'fewer'}."
    out = _difference(now, last, "rows left out")
    if out:
        yield f"{words.plural(abs(out), 'row')} {'more' if out > 0 else 'fewer'} left out."
    if now["terms"] != last.get("terms") or now["response"] != last.get("response"):
        yield "Another form."
    moved = _moves(str(last.get("coefficients", "")), result)
    if moved:
        yield f"Moved most: {words.listing(moved)}."
    before, after = last.get("typical miss"), now.get("typical miss")
    same_miss = _close(before, after)
    if isinstance(before, int | float) and isinstance(after, int | float) and not same_miss:
        yield f"Typical miss {figures.sentence_number(before, 3)} \u2192 {figures.sentence_number(after, 3)}."
    if not rows and not moved and same_miss:
        yield "The same figures."


def _close(before: Scalar | None, after: Scalar | None) -> bool:
    """Equal but for what a save in another program may round away."""
    if isinstance(before, int | float) and isinstance(after, int | float):
        return abs(before - after) <= 1e-9 * max(abs(before), abs(after))
    return before == after


def _difference(now: Mapping[str, Scalar], last: Mapping[str, Scalar], key: str) -> int:
    before, after = last.get(key), now.get(key)
    return int(after - before) if isinstance(before, int | float) and isinstance(after, int | float) else 0


def _moves(before: str, result: ModelResult) -> list[str]:
    """The three coefficients that moved most, in their present standard errors."""
    old = {}
    for name, value in _COEFFICIENT.findall(before):
        try:
            old[name] = float(value)
        except ValueError:
            continue
    found = []
    figures_now = zip(result.design.columns, result.fit.coefficients, result.fit.standard_errors, strict=True)
    for column, b, se in figures_now:
        if column.label in old and se > 0 and abs(b - old[column.label]) > 1e-9 * se:
            found.append(((float(b) - old[column.label]) / float(se), column.label))
    found.sort(key=lambda pair: -abs(pair[0]))
    return [f"{label} by {figures.sentence_number(move, 2)} standard errors" for move, label in found[:3]]


def _line(paper: Paper, fields: Mapping[str, Scalar]) -> None:
    for at, name in enumerate(HEADERS):
        value = fields.get(name)
        look = replace(style.ROW, valign="top")
        if at >= 9:
            look = replace(look, wrap=at < _LAST, indent=1 if at == 9 else 0)
        elif isinstance(value, int | float) and not isinstance(value, bool):
            whole = at in (3, 4)
            code = figures.WHOLE if whole else "0.0000" if at in (5, 6) else figures.number_format(float(value), 4)
            look = replace(style.NUMBER, valign="top", number_format=code)
        paper.cells[(paper.row, at)] = Cell(value, look)
    tall = [str(fields.get(HEADERS[at], "")) for at in (9, 10, 11)]
    paper.heights[paper.row] = max(
        measure.height(text, _WIDTHS[9 + at], style.ROW.size) for at, text in enumerate(tall)
    )
    paper.row += 1
