"""What the formulas of the case lines hold now, all lines of a model at once.

The same arithmetic in the same order as the formulas, so that the stored values are what a spreadsheet will compute.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from bridge.regression.estimates import mean_in_units, median_in_units
from bridge.regression.results import DesignColumn, Factor
from bridge.regression.spec import Shape
from bridge.regression.tails import t_quantile
from bridge.sheets import case_formulas as formulas
from bridge.sheets.cases import A_CELL, Input, ModelColumns
from bridge.workbook.kinds import number_text
from bridge.workbook.request import Scalar

Array = NDArray[np.float64]
Entries = Mapping[str, Scalar]

NO_CASE, INCOMPLETE, COMPLETE = 0, 1, 2


@dataclass(frozen=True, slots=True)
class Evaluated:
    """All lines under one model: state (k,), design rows (k, p), eta, se and leverage (k,) with zeros where a line is
    not complete; `problems` and `beyond`: per helper cell the texts of all lines."""

    state: NDArray[np.int64]
    x: Array
    eta: Array
    se: Array
    leverage: Array
    problems: tuple[list[str], ...]
    beyond: tuple[list[str], ...]


def evaluate(columns: ModelColumns, lines: Sequence[Entries], named: Sequence[bool]) -> Evaluated:
    """What the helpers hold for these lines; `named` says which of them have a name."""
    count = len(lines)
    state = np.zeros(count, dtype=np.int64)
    problems = tuple([""] * count for _ in range(columns.parts))
    beyond = tuple([""] * count for _ in range(columns.parts))
    for at, entries in enumerate(lines):
        if not (any(one.name in entries for one in columns.inputs.values()) or (named[at] and not columns.inputs)):
            continue
        for number, (name, one) in enumerate(columns.inputs.items()):
            problems[number // A_CELL][at] += _problem(columns, name, entries.get(one.name))
            beyond[number // A_CELL][at] += _beyond(columns, name, entries.get(one.name))
        state[at] = INCOMPLETE if any(part[at] for part in problems) else COMPLETE
    x = _design(columns, lines, np.flatnonzero(state == COMPLETE))
    fit = columns.result.fit
    return Evaluated(
        state,
        x,
        np.asarray(x @ fit.coefficients),
        np.sqrt(np.sum((x @ fit.covariance_factor) ** 2, axis=1)),
        np.sum((x @ fit.r_inverse) ** 2, axis=1),
        problems,
        beyond,
    )


def figures(columns: ModelColumns, now: Evaluated, lines: Sequence[Entries]) -> dict[str, list[float | str]]:
    """The figures that people see, by header, and the remarks; empty texts where there is none."""
    result, back = columns.result, formulas.shown_back(columns.result)
    reach = t_quantile(result.spec.level, result.fit.df_interval)
    weights = _weights(columns, lines)
    with np.errstate(over="ignore"):
        case = np.sqrt(now.se**2 + result.fit.residual_sd**2 / weights)
        made = {
            "estimate": mean_in_units(now.eta, back),
            "median": median_in_units(now.eta, back),
            "mean low": mean_in_units(now.eta - reach * now.se, back),
            "mean high": mean_in_units(now.eta + reach * now.se, back),
            "case low": median_in_units(now.eta - reach * case, back),
            "case high": median_in_units(now.eta + reach * case, back),
        }
    shown: dict[str, list[float | str]] = {}
    for header in columns.headers[:-1]:
        good = (now.state == COMPLETE) & np.isfinite(made[header])
        shown[header] = [value if ok else "" for value, ok in zip(made[header].tolist(), good.tolist(), strict=True)]
    shown["remark"] = [_remark(columns, now, at, bool(np.isnan(weights[at]))) for at in range(len(lines))]
    return shown


def code(one: Input, entry: Scalar | None) -> int:
    """Which of the input's levels an entry names, from 1 on; 0 for none of them."""
    if entry is None or _is_blank(entry):
        return 0
    if one.numbers is not None:
        texts = [number_text(one.numbers[level]) for level in one.levels] if not one.yes_no else list(one.levels)
        if isinstance(entry, str):
            return texts.index(entry) + 1 if entry in texts else 0
        found = [one.numbers[level] == float(entry) for level in one.levels]
        return found.index(True) + 1 if True in found else 0
    text = as_text(entry)
    return one.levels.index(text) + 1 if text in one.levels else 0


def as_text(entry: Scalar) -> str:
    """An entry as a cell shows it."""
    if isinstance(entry, bool):
        return "TRUE" if entry else "FALSE"
    return number_text(float(entry)) if isinstance(entry, int | float) else entry


# --- one entry ----------------------------------------------------------------------------------


def _is_blank(entry: Scalar) -> bool:
    return isinstance(entry, str) and not entry.strip(" ")


def _number(one: Input, entry: Scalar | None) -> float:
    """An entry as a number; NaN where it is none."""
    if isinstance(entry, bool):
        return float(entry) if one.yes_no else math.nan
    return float(entry) if isinstance(entry, int | float) else math.nan


def _problem(columns: ModelColumns, name: str, entry: Scalar | None) -> str:
    one, shape = columns.inputs[name], formulas.shape_of(columns.result, name)
    if entry is None or _is_blank(entry):
        return formulas.said(one, formulas.MISSING)
    if shape is None:
        known = code(one, entry) in formulas.own_levels(columns, name)
        return "" if known else formulas.said(one, formulas.STRANGE)
    x = _number(one, entry)
    if math.isnan(x):
        return formulas.said(one, formulas.NO_NUMBER)
    wrong = {Shape.LOG: x <= 0, Shape.ROOT: x < 0, Shape.RECIPROCAL: x == 0}.get(shape, False)
    return formulas.said(one, formulas.LIMITS[shape][1]) if wrong else ""


def _beyond(columns: ModelColumns, name: str, entry: Scalar | None) -> str:
    reach = formulas.above(columns, name)
    if reach is None or isinstance(entry, str | bool) or entry is None:
        return ""
    high, over, low, under = reach
    return over if entry > high else under if entry < low else ""


def _remark(columns: ModelColumns, now: Evaluated, at: int, weightless: bool) -> str:
    if now.state[at] == NO_CASE:
        return ""
    if now.state[at] == INCOMPLETE:
        return "".join(part[at] for part in now.problems)[:-2]
    beyond = "".join(part[at] for part in now.beyond)
    far = f"{formulas.FAR}; " if now.leverage[at] > formulas.most_leverage(columns.result) else ""
    said = formulas.BEYOND + beyond if beyond else far
    if columns.weight is not None and weightless:
        said += formulas.no_weight(columns.weight)
    return said[:-2]


def _weights(columns: ModelColumns, lines: Sequence[Entries]) -> Array:
    """Each case's weight, (k,): 1 in models without weights, NaN where a weighted model has none."""
    if columns.weight is None:
        return np.ones(len(lines))
    found = np.array([_number(columns.weight, entries.get(columns.weight.name)) for entries in lines])
    return np.where(found > 0, found, np.nan)


# --- the design rows ----------------------------------------------------------------------------


def _design(columns: ModelColumns, lines: Sequence[Entries], complete: NDArray[np.intp]) -> Array:
    """Design rows, (k, p); zeros where a line is not complete."""
    held: dict[str, Array] = {}
    for name, one in columns.inputs.items():
        entries = [lines[at].get(one.name) for at in complete.tolist()]
        level = formulas.shape_of(columns.result, name) is None
        held[name] = np.array([code(one, each) if level else _number(one, each) for each in entries], dtype=float)
    x = np.zeros((len(lines), columns.p))
    for j, column in enumerate(columns.result.design.columns):
        x[complete, j] = _product(columns, column, held)
    return x


def _product(columns: ModelColumns, column: DesignColumn, held: Mapping[str, Array]) -> Array | float:
    values: Array | float = 1.0
    for factor in column.factors:
        values = values * _factor(columns.inputs[factor.column], factor, held[factor.column])
    return values


def _factor(one: Input, factor: Factor, x: Array) -> Array:
    if factor.kind == "level":
        return np.asarray(x == one.levels.index(factor.level) + 1, dtype=float)
    if factor.kind == "log":
        return np.log(x)
    if factor.kind == "root":
        return np.sqrt(x)
    if factor.kind == "reciprocal":
        return 1 / x
    if factor.kind == "hinge":
        return np.maximum(x - factor.knot, 0.0)
    return np.asarray(x**factor.exponent)
