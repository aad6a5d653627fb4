"""Which x gave this y: a straight line in one predictor read backwards, live, with Fieller's interval."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

from bridge.page.cells import Formula, address
from bridge.regression import inverse
from bridge.regression.tails import t_quantile
from bridge.sheets import figures, live, style, words
from bridge.sheets.book import Book
from bridge.sheets.cases import ModelColumns, Plan
from bridge.sheets.paper import Paper
from bridge.workbook.contents import RawSheet

TITLE = "Which x gave this y"
_LEAST = 5  # readings that can be typed
_SPARE = 3
_WEIGHT = 4  # the column of the readings' weights, from the block's first


def read(raw: RawSheet) -> dict[str, tuple[tuple[float, float | None], ...]]:
    """The readings typed under each model's title, with their weights."""
    found = {}
    for (row, column), value in raw.values.items():
        if isinstance(value, str) and value.startswith(f"{TITLE}: "):
            readings = tuple(_readings(raw, row + 2, column))
            if readings:
                found[value.removeprefix(f"{TITLE}: ")] = readings
    return found


def _readings(raw: RawSheet, row: int, column: int) -> Iterator[tuple[float, float | None]]:
    """Numbers downwards, to the first text, or to a run of empty cells longer than any that is left to type in."""
    empty = 0
    while empty <= _LEAST and not isinstance(raw.values.get((row, column)), str):
        y = _number(raw, (row, column))
        empty = empty + 1 if y is None else 0
        if y is not None:
            yield y, _number(raw, (row, column + _WEIGHT))
        row += 1


def _number(raw: RawSheet, at: tuple[int, int]) -> float | None:
    value = raw.values.get(at)
    return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else None


def put_down(book: Book, paper: Paper, plan: Plan) -> None:
    """A block for each straight line, from the paper's row down, in the columns of the reasons."""
    for columns in plan.models:
        if inverse.serves(columns.result):
            paper.row += 2
            _block(book, paper, plan.why, columns)


def _block(book: Book, paper: Paper, left: int, columns: ModelColumns) -> None:
    spec = columns.result.spec
    paper.put(left, f"{TITLE}: {columns.model.name}", style.HEADING)
    paper.row += 1
    right = replace(style.HEADER, align="right", wrap=True)
    level = f"{100 * spec.level:.10g}%"
    heads = [f"{spec.response} (one reading)", spec.terms[0].column, f"{level} low", f"{level} high"]
    if spec.weight is not None:
        heads.append(spec.weight)
    for j, text in enumerate(heads):
        paper.put(left + j, text, right)
        paper.grow(text, left + j, left + j, right)
    paper.row += 1
    typed = book.choices.readings.get(columns.model.name, ())
    for at in range(max(_LEAST, len(typed) + _SPARE)):
        _line(paper, left, columns, *(typed[at] if at < len(typed) else (None, None)))
    note = "Interval by Fieller (1954): for one further reading, and the line's own uncertainty."
    if spec.weight is not None:
        note += f" It needs the reading's {words.name_in(columns.model.table, spec.weight)}."
    paper.put(left, note, replace(style.SUBTITLE, size=8.0))


def _line(paper: Paper, left: int, columns: ModelColumns, y: float | None, weight: float | None) -> None:
    result = columns.result
    paper.put(left, y, style.INPUT_NUMBER)
    if result.spec.weight is not None:
        paper.put(left + _WEIGHT, weight, style.INPUT_NUMBER)
    code = figures.number_format(float(abs(result.ranges[0].high)) or 1.0, 6) if result.ranges else "General"
    look = replace(style.NUMBER, number_format=code)
    texts = _formulas(columns, address(paper.row, left), address(paper.row, left + _WEIGHT))
    for j, (text, value) in enumerate(zip(texts, _values(columns, y, weight), strict=True), 1):
        paper.put(left + j, Formula(text, value), look)
    paper.row += 1


def _values(columns: ModelColumns, y: float | None, weight: float | None) -> tuple[float | str, ...]:
    if y is None:
        return "", "", ""
    if columns.result.spec.weight is not None and (weight is None or weight <= 0):
        return inverse.estimate(columns.result, y).x, "", ""
    found = inverse.estimate(columns.result, y, weight=1.0 if weight is None else weight)
    low = found.low if found.low is not None else "unbounded"
    return found.x, low, found.high if found.high is not None else "unbounded"


def _formulas(columns: ModelColumns, y: str, weight: str) -> tuple[str, str, str]:
    """x, and the ends of its interval, as `bridge.regression.inverse` computes them."""
    result = columns.result
    fit, n = result.fit, live.number
    b, v = float(fit.coefficients[-1]), fit.covariance
    a, vaa, vab, vbb = 0.0, 0.0, 0.0, float(v[-1, -1])
    if result.spec.intercept:
        a, vaa, vab = float(fit.coefficients[0]), float(v[0, 0]), float(v[0, 1])
    t2 = t_quantile(result.spec.level, fit.df_interval) ** 2
    weighted = result.spec.weight is not None
    reading = f"{n(fit.residual_sd**2)}/{weight}" if weighted else n(fit.residual_sd**2)
    x = f"(({y}-{n(a)})/{n(b)})"
    own = f"({reading}+{n(vaa)}+2*{x}*{n(vab)}+{x}*{x}*{n(vbb)})"
    square = b * b - t2 * vbb
    half = f"({n(t2)}*({n(vab)}+{x}*{n(vbb)}))"
    root = f"({half}*{half}+{n(square)}*{n(t2)}*{own})"
    ends = ['"unbounded"'] * 2
    if square > 0:
        ends = [f"{x}+({half}{sign}SQRT({root}))/{n(square)}" for sign in "-+"]
    if weighted:
        ends = [f'IF(N({weight})>0,{end},"")' for end in ends]
    low, high = (f'IF(ISNUMBER({y}),{end},"")' for end in ends)
    return f'IF(ISNUMBER({y}),{x},"")', low, high
