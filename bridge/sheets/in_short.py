"""The main effects of a model as phrases that follow one another in a sentence."""

from __future__ import annotations

import math

import numpy as np

from bridge.regression.results import DesignColumn, Factor, ModelResult
from bridge.regression.spec import Shape
from bridge.sheets import figures, words
from bridge.sheets.book import ModelSheet

GOES = "goes with"  # association, not cause
STANDS_OUT = 0.05
_MANY = 3.0  # on the log scale: twenty times
_PERCENT_STEP = 1.1  # what a log predictor is raised by


def strongest(model: ModelSheet, result: ModelResult, most: int) -> list[str]:
    """At most `most` phrases, the largest standardised effects first: `10% more length goes with 13% more hours`.

    Only terms that stand out from chance count (p below 0.05, common practice), and products, which say how the others
    are to be read. Effects that no single figure tells (curves, root and reciprocal scales) are named as such or left
    out.
    """
    if result.spec.response_shape not in (Shape.AS_IS, Shape.LOG):
        return []
    phrases = []
    telling = standing_out(result)
    for term in _by_size(result):
        if term not in telling:
            continue
        phrase = _phrase(model, result, term)
        if phrase and phrase not in phrases:
            phrases.append(phrase)
        if len(phrases) == most:
            break
    return phrases


def standing_out(result: ModelResult) -> set[str]:
    """The terms with a coefficient whose p is below 0.05, and the products."""
    return {
        column.term
        for column, p in zip(result.design.columns, result.fit.p.tolist(), strict=True)
        if column.factors and (p < STANDS_OUT or len(column.factors) > 1)
    }


def _by_size(result: ModelResult) -> list[str]:
    sizes: dict[str, float] = {}
    for at, column in enumerate(result.design.columns):
        size = abs(float(result.fit.standardised[at]))
        if column.factors and math.isfinite(size):
            sizes[column.term] = max(sizes.get(column.term, 0.0), size)
    return sorted(sizes, key=lambda term: -sizes[term])


def _phrase(model: ModelSheet, result: ModelResult, term: str) -> str:
    columns = [(at, column) for at, column in enumerate(result.design.columns) if column.term == term]
    crossed = {name for one in result.spec.crossed for name in (one.first, one.second)}
    first = columns[0][1].factors[0]
    if len(columns[0][1].factors) > 1:
        a, b = (words.name_in(model.table, factor.column) for factor in columns[0][1].factors[:2])
        return f"the effect of {a} depends on {b}"
    if first.column in crossed:
        return ""
    if first.kind == "level":
        return _level(model, result, columns)
    if any(column.factors[0].kind == "hinge" for _, column in columns):
        return _bend(model, result, columns)
    if len(columns) > 1:
        return f"{_response(model, result)} follows a curve along {words.name_in(model.table, first.column)}"
    return _number(model, result, columns[0][0], first)


def _level(model: ModelSheet, result: ModelResult, columns: list[tuple[int, DesignColumn]]) -> str:
    at, column = max(columns, key=lambda one: abs(float(result.fit.t[one[0]])))
    factor = column.factors[0]
    base = dict(result.design.bases)[factor.column]
    if any(one.factors[0].level == base for _, one in columns):
        return ""  # without an intercept every level has its own mean
    name = words.name_in(model.table, factor.column)
    change = _change(model, result, float(result.fit.coefficients[at]))
    return f"{name} {factor.level} instead of {base} {GOES} {change}"


def _number(model: ModelSheet, result: ModelResult, at: int, factor: Factor) -> str:
    coefficient = float(result.fit.coefficients[at])
    name = words.name_in(model.table, factor.column)
    if factor.kind == "log":
        return f"10% more {name} {GOES} {_change(model, result, coefficient * math.log(_PERCENT_STEP))}"
    if factor.kind != "power":
        return ""
    step = _step(result, at)
    unit = words.unit_in(model.table, factor.column)
    further = "unit" if step == 1 and not unit else words.with_unit(figures.plain_number(step), unit)
    return f"each further {further} of {name} {GOES} {_change(model, result, coefficient * step)}"


def _step(result: ModelResult, at: int) -> float:
    """One unit where the data vary by about that; else the power of ten below their standard deviation."""
    spread = float(np.std(result.design.matrix[:, at]))
    if spread <= 0 or 0.5 <= spread <= 50:
        return 1.0
    return 10.0 ** math.floor(math.log10(spread))


def _bend(model: ModelSheet, result: ModelResult, columns: list[tuple[int, DesignColumn]]) -> str:
    line = next((at for at, column in columns if column.factors[0].kind == "power"), None)
    hinges = [(column.factors[0].knot, at) for at, column in columns if column.factors[0].kind == "hinge"]
    if line is None or len(hinges) != 1:
        return ""
    knot, hinge = hinges[0]
    before = float(result.fit.coefficients[line])
    after = before + float(result.fit.coefficients[hinge])
    factor = columns[0][1].factors[0]
    name, unit = words.name_in(model.table, factor.column), words.unit_in(model.table, factor.column)
    step = words.with_unit("1", unit) if unit else "unit"
    return (
        f"each further {step} of {name} {GOES} {_change(model, result, before)} below "
        f"{words.with_unit(figures.plain_number(knot), unit)} and with {_change(model, result, after)} above"
    )


def _change(model: ModelSheet, result: ModelResult, eta: float) -> str:
    """A change of `eta` on the fitted scale: `5.2 hours more`, `13% more hours`."""
    way = "more" if eta >= 0 else "less"
    if result.spec.response_shape is Shape.LOG:
        if eta > _MANY:
            return f"many times the {_response(model, result)}"
        return f"{figures.percent(abs(math.expm1(eta)))} {way} {_response(model, result)}"
    number = figures.sentence_number(abs(eta), 2)
    unit = words.unit_in(model.table, result.spec.response)
    if unit:
        return f"{words.with_unit(number, unit)} {way}"
    return f"{_response(model, result)} {'higher' if eta >= 0 else 'lower'} by {number}"


def _response(model: ModelSheet, result: ModelResult) -> str:
    return words.name_in(model.table, result.spec.response)
