"""What one coefficient means, in words: `+9.4% per m`, `18% less than oak`, `+3.2 hours per coat`."""

from __future__ import annotations

import math

from bridge.regression.results import DesignColumn, Factor, ModelResult
from bridge.regression.spec import Shape
from bridge.sheets import figures, words
from bridge.sheets.book import ModelSheet


def effect(model: ModelSheet, result: ModelResult, at: int) -> str:
    """The sentence for the coefficient at `at`; empty where there is no plain one."""
    column, b = result.design.columns[at], float(result.fit.coefficients[at])
    shape = result.spec.response_shape
    if not column.factors:
        return _intercept(model, result)
    if shape is Shape.ROOT or not math.isfinite(b):
        return ""
    if len(column.factors) > 1:
        return _crossed(model, result, column, b)
    said = _single(model, result, column.factors[0], b)
    return said + _where(model, result, column) if said else ""


def _intercept(model: ModelSheet, result: ModelResult) -> str:
    if result.spec.response_shape is not Shape.AS_IS:
        return ""
    response = words.name_in(model.table, result.spec.response)
    bases = [f"{words.name_in(model.table, name)} {level}" for name, level in result.design.bases]
    numbers = any(f.kind != "level" for column in result.design.columns for f in column.factors)
    conditions = ([" every number is 0"] if numbers else []) + [f" it is {words.listing(bases)}"] * bool(bases)
    return f"{response} where{' and'.join(conditions)}" if conditions else f"mean of {response}"


def _single(model: ModelSheet, result: ModelResult, factor: Factor, b: float) -> str:
    name = words.name_in(model.table, factor.column)
    unit = words.unit_in(model.table, factor.column)
    if factor.kind == "level":
        return _against(model, result, factor, b)
    if factor.kind == "hinge":
        knot = figures.plain_number(factor.knot)
        return f"{_change(model, result, b)} per {unit or 'unit'} more above {knot} than below"
    if factor.kind == "log":
        return _for_more(model, result, name, b)
    if factor.kind == "power" and factor.exponent == 1:
        if any(f.column == factor.column and f.exponent > 1 for c in result.design.columns for f in c.factors):
            return f"part of the curve in {name}: read it together with its powers"
        return f"{_change(model, result, b)} per {unit or f'unit of {name}'}"
    if factor.kind == "power":
        return f"part of the curve in {name}"
    return f"{_change(model, result, b)} per unit of {factor.kind} {name}"


def _change(model: ModelSheet, result: ModelResult, b: float) -> str:
    """What adding b on the fitted scale does: `+3.2 hours`, or `+9.4%` for a log response."""
    if result.spec.response_shape is Shape.LOG:
        return _signed_percent(math.expm1(b)) if b < 20 else "many times"
    unit = words.unit_in(model.table, result.spec.response) or words.name_in(model.table, result.spec.response)
    return f"{_signed(b)} {unit}"


def _for_more(model: ModelSheet, result: ModelResult, name: str, b: float) -> str:
    if result.spec.response_shape is Shape.LOG:
        return f"{_signed_percent(math.expm1(b * math.log(1.01)))} for 1% more {name}" if abs(b) < 2000 else ""
    return f"{_change(model, result, b * math.log(1.1))} for 10% more {name}"


def _against(model: ModelSheet, result: ModelResult, factor: Factor, b: float) -> str:
    base = dict(result.design.bases).get(factor.column, "")
    if not base or factor.level == base:
        return ""
    if result.spec.response_shape is Shape.LOG:
        share = math.expm1(b) if b < 20 else math.inf
        if not math.isfinite(share):
            return f"many times {base}"
        return f"{figures.percent(abs(share))} {'more' if share >= 0 else 'less'} than {base}"
    return f"{_change(model, result, b)} against {base}"


def _crossed(model: ModelSheet, result: ModelResult, column: DesignColumn, b: float) -> str:
    """How one factor changes what the other does."""
    levels = [f for f in column.factors if f.kind == "level"]
    others = [f for f in column.factors if f.kind != "level"]
    if not others:
        return f"{_change(model, result, b)} besides, where both hold"
    changed = words.name_in(model.table, others[-1].column)
    if levels:
        where = f"where {words.name_in(model.table, levels[0].column)} is {levels[0].level}"
        if others[-1].kind == "log" and result.spec.response_shape is Shape.LOG:
            return f"the effect of {changed} is {_signed(b)} higher {where} (exponent)"
        return f"the effect of {changed} changes by {_signed(b)} {where}"
    first = words.name_in(model.table, others[0].column)
    return f"the effect of {changed} changes by {_signed(b)} per unit of {first}"


def _where(model: ModelSheet, result: ModelResult, column: DesignColumn) -> str:
    """A term that is crossed with others holds only where these are at their base, or at 0."""
    bases = dict(result.design.bases)
    own = column.factors[0].column
    conditions = []
    for crossed in result.spec.crossed:
        if own in (crossed.first, crossed.second):
            other = crossed.second if own == crossed.first else crossed.first
            name = words.name_in(model.table, other)
            conditions.append(f"{name} is {bases[other]}" if other in bases else f"{name} is 0")
    return f", where {words.listing(conditions)}" if conditions else ""


def _signed(value: float) -> str:
    text = figures.sentence_number(value, 3)
    return text if value < 0 else f"+{text}"


def _signed_percent(share: float) -> str:
    return ("+" if share >= 0 else "\u2212") + figures.percent(abs(share))
