"""Why this number: for a chosen case and model, what each term adds to (or multiplies) the estimate of an average case.

And, for straight lines in one predictor, the line read backwards: which x gave this y.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from bridge.page.cells import Formula, address, text_literal
from bridge.page.sheet import DropDown
from bridge.regression import inverse
from bridge.regression.estimates import mean_in_units
from bridge.regression.tails import t_quantile
from bridge.sheets import case_formulas, figures, live, style, words
from bridge.sheets.book import Book
from bridge.sheets.case_formulas import Evaluated
from bridge.sheets.cases import FIRST_ROW, HEADER_ROW, ModelColumns, Plan
from bridge.sheets.paper import Paper
from bridge.workbook.contents import Choices, RawSheet
from bridge.workbook.request import Scalar

READINGS = 5
_INPUT = replace(style.INPUT, align="left")
TITLE = "Why this number"
BACK = "Which x gave this y"


def widths(places: Plan) -> dict[int, float]:
    """Column widths of the block."""
    return {places.why: 34.0, places.why + 1: 15.0, places.why + 2: 13.0, places.why + 3: 15.0, places.why + 4: 15.0}


def read_choices(raw: RawSheet) -> Choices:
    """What the user chose and typed in the block, found by its labels."""
    title = next((at for at, value in sorted(raw.values.items()) if value == TITLE), None)
    case: Scalar | None = None
    model = ""
    if title is not None:
        case = raw.values.get((title[0] + 1, title[1] + 1))
        model = str(raw.values.get((title[0] + 2, title[1] + 1), ""))
    readings: dict[str, tuple[tuple[float, float | None], ...]] = {}
    for (row, column), value in raw.values.items():
        if isinstance(value, str) and value.startswith(BACK + ": "):
            rows = range(row + 2, row + 2 + READINGS)
            typed = [(_number(raw, (at, column)), _number(raw, (at, column + 4))) for at in rows]
            kept = tuple((y, weight) for y, weight in typed if y is not None)
            if kept:
                readings[value.removeprefix(BACK + ": ")] = kept
    return Choices(case, model, readings)


def _number(raw: RawSheet, at: tuple[int, int]) -> float | None:
    value = raw.values.get(at)
    return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else None


def put_down(book: Book, paper: Paper, places: Plan, evaluated: Mapping[str, Sequence[Evaluated]]) -> None:
    """The block, from the case table's header row down, in its own columns."""
    if not places.models:
        return
    row = _why(book, paper, places, evaluated)
    for columns in places.models:
        if inverse.serves(columns.result):
            row = _backwards(book, paper, places, columns, row + 2)


# --- why ------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Chosen:
    """The chosen case's line and model; None where nothing usable is chosen."""

    columns: ModelColumns
    now: Evaluated | None


def _why(book: Book, paper: Paper, places: Plan, evaluated: Mapping[str, Sequence[Evaluated]]) -> int:
    top, left = HEADER_ROW - 1, places.why
    model, name = _default(book, places, evaluated)
    paper.put(left, TITLE, style.HEADING, row=top)
    for at, (label, value) in enumerate((("case", name if name != "" else None), ("model", model.model.name))):
        paper.put(left, label, style.ROW, row=top + 1 + at)
        paper.put(left + 1, value, _INPUT, row=top + 1 + at)
    cases = f"{address(FIRST_ROW, 0, absolute=True)}:{address(places.last_row, 0, absolute=True)}"
    paper.drop_downs.append(DropDown((top + 1, left + 1), (top + 1, left + 1), choices=cases))
    names = tuple(each.model.name for each in places.models)
    paper.drop_downs.append(DropDown((top + 2, left + 1), (top + 2, left + 1), choices=names))
    line = next((i for i, case in enumerate(book.cases) if case.name == name), None) if name != "" else None
    now = evaluated[model.model.name][line] if line is not None else None
    return _steps(paper, places, _Chosen(model, now if now is not None and now.state == 2 else None), line)


def _default(book: Book, places: Plan, evaluated: Mapping[str, Sequence[Evaluated]]) -> tuple[ModelColumns, Scalar]:
    """The user's choice where it still holds, else the first model and the first case that has an estimate."""
    chosen = next((m for m in places.models if m.model.name == book.choices.model), places.models[0])
    names = [case.name for case in book.cases]
    if book.choices.case is not None and book.choices.case in names:
        return chosen, book.choices.case
    done = evaluated[chosen.model.name]
    return chosen, next((name for name, now in zip(names, done, strict=False) if name != "" and now.state == 2), "")


def _steps(paper: Paper, places: Plan, chosen: _Chosen, at: int | None) -> int:
    top, left = HEADER_ROW + 2, places.why
    case, model = address(HEADER_ROW, left + 1, absolute=True), address(HEADER_ROW + 1, left + 1, absolute=True)
    line = address(top, left + 4, absolute=True)
    cases = f"{address(FIRST_ROW, 0, absolute=True)}:{address(places.last_row, 0, absolute=True)}"
    right = replace(style.HEADER, align="right")
    for j, (text, look) in enumerate((("step", style.HEADER), ("adds", right), ("times", right), ("so far", right))):
        paper.put(left + j, text, look, row=top)
    match = f'IF({case}="",0,IF(ISNA(MATCH({case},{cases},0)),0,MATCH({case},{cases},0)))'
    paper.put(
        left + 4, Formula(match, 0 if at is None else at + 1), replace(style.FACT, size=8.0, color=style.WHITE), row=top
    )
    most = max(len(_terms(each)) for each in places.models)
    running = 0.0
    for step in range(most + 1):
        row = top + 1 + step
        texts = {"label": [], "adds": [], "times": [], "so far": []}  # type: ignore[var-annotated]
        for each in places.models:
            for key, text in _step(each, places, step, line).items():
                texts[key].append((each, text))
        value = _step_value(chosen, step)
        running += value.adds
        shown = (value.label, value.shown_adds, value.times, _so_far(chosen, running) if value.label else "")
        code = figures.number_format(_size(chosen), 4)
        looks = (
            style.ROW,
            replace(style.NUMBER, number_format=f"+{code};-{code};0"),
            replace(style.NUMBER, number_format='"x "0.000'),
            replace(style.NUMBER, number_format=code),
        )
        for j, (key, now, look) in enumerate(zip(texts, shown, looks, strict=True)):
            paper.put(left + j, Formula(_by_model(places, model, texts[key], line), now), look, row=row)
    note = "Steps are against a case at the averages of the rows used; their order does not matter for what each adds."
    paper.put(left, note, replace(style.SUBTITLE, size=8.0), row=top + most + 2)
    return top + most + 2


@dataclass(frozen=True, slots=True)
class _Step:
    label: str
    adds: float
    shown_adds: float | str
    times: float | str


def _terms(columns: ModelColumns) -> list[tuple[str, list[int]]]:
    found: dict[str, list[int]] = {}
    for j, column in enumerate(columns.result.design.columns):
        if column.factors:
            found.setdefault(column.term, []).append(j)
    return list(found.items())


def _means(columns: ModelColumns) -> np.ndarray:
    return np.asarray(columns.result.design.matrix.mean(axis=0))


def _average(columns: ModelColumns) -> float:
    return float(_means(columns) @ columns.result.fit.coefficients)


def _step(columns: ModelColumns, places: Plan, step: int, line: str) -> dict[str, str]:
    """The formulas of a step for one model: label, what it adds, what it multiplies, and the number so far."""
    terms, back = _terms(columns), case_formulas.shown_back(columns.result)
    average = live.number(_average(columns))
    if step == 0:
        return {
            "label": text_literal("a case at the averages"),
            "adds": '""',
            "times": '""',
            "so far": case_formulas.mean_formula(back, average),
        }
    if step > len(terms):
        return dict.fromkeys(("label", "adds", "times", "so far"), '""')
    name, at = terms[step - 1]
    part = _contribution(columns, places, at, line)
    so_far = "+".join([average, *(_contribution(columns, places, each, line) for _, each in terms[:step])])
    log = back is not None and back.kind == "log"
    plain = back is None
    return {
        "label": text_literal(name),
        "adds": part if plain else '""',
        "times": f"EXP({part})" if log else '""',
        "so far": case_formulas.mean_formula(back, f"({so_far})"),
    }


def _contribution(columns: ModelColumns, places: Plan, at: Sequence[int], line: str) -> str:
    """Sum of b (x - mean x) over a term's columns, for the chosen line."""
    means = _means(columns)
    parts = []
    for j in at:
        column = columns.x + j
        cells = f"{address(FIRST_ROW, column, absolute=True)}:{address(places.last_row, column, absolute=True)}"
        b = live.number(float(columns.result.fit.coefficients[j]))
        parts.append(f"{b}*(INDEX({cells},{line})-{live.number(float(means[j]))})")
    return f"({'+'.join(parts)})"


def _by_model(places: Plan, model: str, texts: Sequence[tuple[ModelColumns, str]], line: str) -> str:
    """The chosen model's formula; nothing without a case, or where the case has no estimate under the model."""
    made = '""'
    for columns, text in reversed(texts):
        first, last = (address(row, columns.state, absolute=True) for row in (FIRST_ROW, places.last_row))
        states = f"{first}:{last}"
        inside = text if text == '""' else f'IF(INDEX({states},{line})=2,{text},"")'
        longer = f"IF({model}={text_literal(columns.model.name)},{inside},{made})"
        made = longer if len(longer) < live.MOST else made
    return f'IF({line}=0,"",{made})'


def _step_value(chosen: _Chosen, step: int) -> _Step:
    columns, now = chosen.columns, chosen.now
    terms = _terms(columns)
    if now is None or step > len(terms):
        return _Step("", 0.0, "", "")
    if step == 0:
        return _Step("a case at the averages", _average(columns), "", "")
    name, at = terms[step - 1]
    means, b = _means(columns), columns.result.fit.coefficients
    adds = math.fsum(float(b[j]) * (now.x[j] - float(means[j])) for j in at)
    back = case_formulas.shown_back(columns.result)
    times: float | str = math.exp(adds) if back is not None and back.kind == "log" else ""
    return _Step(name, adds, adds if back is None else "", times)


def _so_far(chosen: _Chosen, eta: float) -> float:
    back = case_formulas.shown_back(chosen.columns.result)
    return case_formulas.one_value(mean_in_units, eta, back)


def _size(chosen: _Chosen) -> float:
    if case_formulas.shown_back(chosen.columns.result) is None and chosen.columns.result.back is not None:
        return 1.0
    return float(abs(chosen.columns.result.observed).max()) or 1.0


# --- backwards --------------------------------------------------------------------------------------


def _backwards(book: Book, paper: Paper, places: Plan, columns: ModelColumns, row: int) -> int:
    """Readings y typed in cream; x and Fieller's interval beside them."""
    result, left = columns.result, places.why
    spec = result.spec
    x_name, y_name = spec.terms[0].column, spec.response
    paper.put(left, f"{BACK}: {columns.model.name}", style.HEADING, row=row)
    right = replace(style.HEADER, align="right")
    level = f"{100 * spec.level:.10g}%"
    heads = [f"{y_name} (one reading)", x_name, f"{level} low", f"{level} high"]
    if spec.weight is not None:
        heads.append(spec.weight)
    for j, text in enumerate(heads):
        paper.put(left + j, text, right if j else style.HEADER, row=row + 1)
    typed = book.choices.readings.get(columns.model.name, ())
    code = figures.number_format(float(abs(result.ranges[0].high)) or 1.0, 6) if result.ranges else "General"
    for at in range(READINGS):
        line = row + 2 + at
        y, weight = typed[at] if at < len(typed) else (None, None)
        paper.put(left, y, style.INPUT_NUMBER, row=line)
        if spec.weight is not None:
            paper.put(left + 4, weight, style.INPUT_NUMBER, row=line)
        values = _values(columns, y, weight)
        texts = _inverse_formulas(columns, address(line, left), address(line, left + 4))
        for j, (text, value) in enumerate(zip(texts, values, strict=True)):
            paper.put(left + 1 + j, Formula(text, value), replace(style.NUMBER, number_format=code), row=line)
    note = "Interval by Fieller (1954): for one further reading, and the line's own uncertainty."
    if spec.weight is not None:
        note += f" It needs the reading's {words.name_in(columns.model.table, spec.weight)}."
    paper.put(left, note, replace(style.SUBTITLE, size=8.0), row=row + 2 + READINGS)
    return row + 2 + READINGS


def _values(
    columns: ModelColumns, y: float | None, weight: float | None
) -> tuple[float | str, float | str, float | str]:
    if y is None:
        return "", "", ""
    if columns.result.spec.weight is not None and (weight is None or weight <= 0):
        return inverse.estimate(columns.result, y).x, "", ""
    found = inverse.estimate(columns.result, y, weight=1.0 if weight is None else weight)
    low = found.low if found.low is not None else "unbounded"
    return found.x, low, found.high if found.high is not None else "unbounded"


def _inverse_formulas(columns: ModelColumns, y: str, weight: str) -> tuple[str, str, str]:
    result = columns.result
    fit, one = result.fit, result.spec.intercept
    b, v = float(fit.coefficients[-1]), fit.covariance
    a, vaa, vab, vbb = (float(fit.coefficients[0]), float(v[0, 0]), float(v[0, 1]), float(v[1, 1])) if one else (
        0.0, 0.0, 0.0, float(v[0, 0])
    )  # fmt: skip
    t2 = t_quantile(result.spec.level, fit.df_interval) ** 2
    n = live.number
    x = f"(({y}-{n(a)})/{n(b)})"
    weighted = result.spec.weight is not None
    reading = f"{n(fit.residual_sd**2)}/{weight}" if weighted else n(fit.residual_sd**2)
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
