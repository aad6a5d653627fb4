"""`fit history`: is this still the same data, and one line per fit and model, newest first.

The lines are read back from the sheet itself at the next fit, by their headers, so they go wherever the workbook goes.
A column that somebody added beside them is kept.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from datetime import datetime

from bridge.page.cells import Format
from bridge.page.sheet import Sheet
from bridge.regression.design import crossed_name, term_name
from bridge.regression.results import ModelResult
from bridge.regression.spec import ModelSpec
from bridge.sheets import figures, measure, seal, style, top, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import Paper
from bridge.workbook.columns import serial_of
from bridge.workbook.contents import HistoryLine, RawSheet
from bridge.workbook.request import Scalar

MOST_LINES = 500
MOST_MOVES = 3
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
_WIDTHS = (31.0, 22.0, 28.0, 15.0, 13.0, 9.0, 10.0, 14.0, 13.0, 24.0, 36.0, 58.0, 80.0)
_LAST = len(HEADERS) - 1
_SHOWN = HEADERS.index("typical miss")  # the last column that the page's top runs over
_FORMATS = {"rows used": figures.WHOLE, "rows left out": figures.WHOLE, "R2": "0.0000", "adjusted R2": "0.0000"}
_MOMENT = "yyyy\\-mm\\-dd hh:mm"
_NUMBERS = HEADERS[3:9]
_AFTER_NUMBERS = HEADERS[9]  # kept apart from the numbers that end at its edge
_WRAPPED = ("data sheet", *HEADERS[9:])
_COEFFICIENT = re.compile(r"(.+?) (-?(?:\d[\d.]*(?:e[-+]?\d+)?|inf|nan))(?:; |$)")
_DIGITS = 4  # of its standard error to which a coefficient is kept


# --- doors --------------------------------------------------------------------------------------


def lay_out(book: Book) -> Sheet:
    """The sheet `fit history`."""
    paper = Paper("fit history", dict(enumerate(_WIDTHS)))
    what = "Whether the data are still those of the fit, and every fit so far, the newest first."
    top.put(paper, book, "What was fitted, and when", what, _SHOWN)
    paper.row += seal.rows(book)
    paper.gap(14)
    paper.heading("Fits so far")
    lines = _all_lines(book)
    header = _heads(paper, lines)
    for fields in lines:
        _line(paper, header, fields)
    if len(lines) == MOST_LINES:
        paper.put(0, f"The newest {MOST_LINES} lines are kept.", style.SUBTITLE)
        paper.row += 1
    seal.put_down(book, paper, paper.row + 1)
    return paper.sheet(
        _LAST,
        title=book.title("fit history"),
        freeze=(4, 0),
        title_columns=(0, 1),
        tab_color=style.TAB_DETAIL,
        fit_width=2,
    )


def read(raw: RawSheet) -> tuple[HistoryLine, ...]:
    """The lines on a sheet as it stands, found by their headers; they end at the first row without a time and model."""
    head = next((row for (row, _), value in sorted(raw.values.items()) if value == HEADERS[0]), None)
    if head is None:
        return ()
    names = {column: str(value) for (row, column), value in raw.values.items() if row == head}
    by_row: dict[int, dict[str, Scalar]] = {}
    for (row, column), value in raw.values.items():
        if row > head and column in names:
            by_row.setdefault(row, {})[names[column]] = value
    lines = []
    row = head + 1
    while {HEADERS[0], HEADERS[1]} <= by_row.get(row, {}).keys():
        lines.append(HistoryLine(by_row[row]))
        row += 1
    return tuple(lines)


# --- what a line holds --------------------------------------------------------------------------


def _all_lines(book: Book) -> list[Mapping[str, Scalar]]:
    new: list[Mapping[str, Scalar]] = [_fields(book, model, result) for model, result in book.fitted]
    return [*new, *(line.fields for line in book.history)][:MOST_LINES]


def _fields(book: Book, model: ModelSheet, result: ModelResult) -> dict[str, Scalar]:
    fit, taken = result.fit, model.taken
    values: dict[str, Scalar] = {
        "fitted at": moment(book.fitted_at, model),
        "model": model.name,
        "data sheet": model.table.sheet if model.table is not None else "",
        "rows used": fit.n,
        "rows left out": len(taken.left_out) if taken is not None else 0,
        "R2": fit.r_squared,
        "adjusted R2": fit.adjusted_r_squared,
        "residual standard deviation": fit.residual_sd,
        "typical miss": result.cross_validation.rmse,
        "response": words.axis_title(model.table, result.spec.response, result.spec.response_shape),
        "terms": _terms(result.spec),
        "coefficients": "; ".join(_coefficients(result)),
    }
    last = next((line.fields for line in book.history if _same(line.fields.get("model"), model.name)), None)
    changes = " ".join(_changes(values, last, result)) if last is not None else "The first fit."
    values["what changed since the last fit"] = changes
    return {name: value for name, value in values.items() if not isinstance(value, float) or math.isfinite(value)}


def moment(when: datetime, model: ModelSheet) -> float:
    """A moment as the workbook's own date serial."""
    return serial_of(when, model.table is not None and model.table.date1904)


def _same(one: Scalar | None, other: str) -> bool:
    return str(one).casefold() == other.casefold()


def _terms(spec: ModelSpec) -> str:

    said = []
    for term in spec.terms:
        name = term_name(term)
        degree, bends = getattr(term, "degree", 1), getattr(term, "bends", ())
        name += f" to power {degree}" if degree > 1 else ""
        name += f" with a bend at {words.listing([figures.plain_number(bend) for bend in bends])}" if bends else ""
        said.append(name)
    said += [crossed_name(spec, crossed) for crossed in spec.crossed]
    return "; ".join(said) or "none"


def _coefficients(result: ModelResult) -> Iterator[str]:
    """`length_m 3.2104`: each to a few digits of its standard error, so that later moves can be told in those."""
    fit = result.fit
    for column, b, se in zip(result.design.columns, fit.coefficients, fit.standard_errors, strict=True):
        digits = 15 if not (math.isfinite(se) and se > 0) else _DIGITS + math.ceil(math.log10(max(abs(b) / se, 1.0)))
        yield f"{column.label} {b:.{min(digits, 15)}g}"


def _changes(now: Mapping[str, Scalar], last: Mapping[str, Scalar], result: ModelResult) -> Iterator[str]:
    """What is different from the last fit of the model, in sentences."""
    said = [*_rows_changed(now, last), *_terms_changed(now, last), *_moved(str(last.get("coefficients", "")), result)]
    before, after = last.get("typical miss"), now.get("typical miss")
    if isinstance(before, float) and isinstance(after, float) and not math.isclose(before, after, rel_tol=1e-9):
        said.append(f"Typical miss {figures.sentence_number(before)}, now {figures.sentence_number(after)}.")
    yield from said or ["Nothing: the same rows and the same figures."]


def _rows_changed(now: Mapping[str, Scalar], last: Mapping[str, Scalar]) -> Iterator[str]:
    used, out = (_difference(now, last, key) for key in ("rows used", "rows left out"))
    there = used + out
    if there:
        yield f"{words.plural(abs(there), 'row')} {'added' if there > 0 else 'gone'}."
    if out:
        yield f"{words.plural(abs(out), 'row')} {'more' if out > 0 else 'fewer'} left out."
    if used and used != there:
        yield f"{words.plural(abs(used), 'row')} {'more' if used > 0 else 'fewer'} used."


def _difference(now: Mapping[str, Scalar], last: Mapping[str, Scalar], key: str) -> int:
    before, after = last.get(key), now.get(key)
    return round(after - before) if isinstance(before, int | float) and isinstance(after, int | float) else 0


def _terms_changed(now: Mapping[str, Scalar], last: Mapping[str, Scalar]) -> Iterator[str]:
    if now["response"] != last.get("response"):
        yield f"The response was {last.get('response', 'another')}."
    before, after = ([*dict.fromkeys(str(each.get("terms", "")).split("; "))] for each in (last, now))
    added, gone = [one for one in after if one not in before], [one for one in before if one not in after]
    if added:
        yield f"New: {words.listing(added)}."
    if gone:
        yield f"No longer there: {words.listing(gone)}."


def _moved(before: str, result: ModelResult) -> list[str]:
    """The coefficients that moved most, in their present standard errors."""
    old = {name: float(value) for name, value in _COEFFICIENT.findall(before)}
    found = []
    triples = zip(result.design.columns, result.fit.coefficients, result.fit.standard_errors, strict=True)
    for column, b, se in triples:
        if column.label in old and se > 0:
            move = (float(b) - old[column.label]) / float(se)
            if abs(move) >= 10.0 ** (1 - _DIGITS):  # less is within what a line keeps
                found.append((move, column.label))
    found.sort(key=lambda pair: -abs(pair[0]))
    shown = [f"{label} by {figures.sentence_number(move, 2)}" for move, label in found[:MOST_MOVES]]
    if not shown:
        return []
    more = f" ({words.plural(len(found) - MOST_MOVES, 'more coefficient')} less)" if len(found) > MOST_MOVES else ""
    return [f"In standard errors, {words.listing(shown)} moved{more}."]


# --- on the sheet -------------------------------------------------------------------------------


def _heads(paper: Paper, lines: Sequence[Mapping[str, Scalar]]) -> tuple[str, ...]:
    """The header row: our headers, then those that somebody added."""
    extra = list(dict.fromkeys(name for fields in lines for name in fields if name and name not in HEADERS))
    header = (*HEADERS, *extra)
    for column in range(_LAST + 1, len(header)):
        paper.widths[column] = 20.0
    head = replace(style.HEADER, wrap=True)
    looks = {name: replace(head, align="right") for name in _NUMBERS}
    looks[_AFTER_NUMBERS] = replace(head, indent=1)
    paper.line(header, [looks.get(name, head) for name in header])
    return header


def _line(paper: Paper, header: Sequence[str], fields: Mapping[str, Scalar]) -> None:
    for column, name in enumerate(header):
        value = fields.get(name)
        paper.put(column, value, _look(name, value))
        if isinstance(value, str) and _look(name, value).wrap:
            height = measure.height(value, paper.widths[column], style.ROW.size)
            paper.heights[paper.row] = max(paper.heights.get(paper.row, 0.0), height)
    paper.row += 1


def _look(name: str, value: Scalar | None) -> Format:
    look = replace(style.ROW, valign="top", wrap=name in _WRAPPED, indent=int(name == _AFTER_NUMBERS))
    if not isinstance(value, float | int) or isinstance(value, bool):
        return look
    if name == "fitted at":
        return replace(look, align="left", number_format=_MOMENT)
    code = _FORMATS.get(name) or figures.number_format(float(value), 4)
    return replace(look, align="right", number_format=code)
