"""The live formulas of one case line, and the values they have now.

The formulas are evaluated here with the same arithmetic in the same order, so that the stored values are what a
spreadsheet will compute.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from bridge.page.cells import Formula, address, reference, text_literal
from bridge.regression.estimates import mean_in_units, median_in_units
from bridge.regression.results import BackTransform, DesignColumn, Factor, ModelResult
from bridge.regression.spec import BackOn, NumberTerm, Shape
from bridge.regression.tails import t_quantile
from bridge.sheets import figures, live
from bridge.sheets.cases import ModelColumns, Plan
from bridge.sheets.coefficients import Place
from bridge.workbook.kinds import number_text
from bridge.workbook.request import Scalar

Entries = Mapping[str, Scalar]
Array = NDArray[np.float64]
Way = Callable[[Array, BackTransform | None], Array]


@dataclass(frozen=True, slots=True)
class Evaluated:
    """A case under one model: state 0 (no case), 1 (not complete) or 2, and what the helpers hold."""

    state: int
    x: tuple[float, ...]
    eta: float
    se: float
    leverage: float
    problems: str
    beyond: str


def evaluate(columns: ModelColumns, entries: Entries, named: bool) -> Evaluated:
    """What the formulas of a line give for these entries."""
    result = columns.result
    inputs = _used(result)
    if not any(name in entries for name in inputs) and not (named and not inputs):
        return Evaluated(0, (0.0,) * columns.p, 0.0, 0.0, 0.0, "", "")
    problems = "".join(_problem(result, name, entries.get(name)) for name in inputs)
    beyond = "".join(_beyond(columns, name, entries.get(name)) for name in inputs)
    if problems:
        return Evaluated(1, (0.0,) * columns.p, 0.0, 0.0, 0.0, problems, beyond)
    x = np.array([_value(column, entries) for column in result.design.columns])
    eta = float(x @ result.fit.coefficients)
    se = math.sqrt(float(np.sum((x @ result.fit.covariance_factor) ** 2)))
    leverage = float(np.sum((x @ result.fit.r_inverse) ** 2))
    return Evaluated(2, tuple(x.tolist()), eta, se, leverage, problems, beyond)


def helpers(
    columns: ModelColumns, plan: Plan, place: Place, sheet: str, row: int, now: Evaluated
) -> dict[int, Formula]:
    """The helper cells of a line, by column. `sheet` is the tab of `fit coefficients`."""
    result = columns.result
    inputs = _used(result)
    cells = {name: plan.cell(name, row) for name in inputs}
    state = f"${address(row, columns.state)}"
    design = f"${address(row, columns.x)}:${address(row, columns.x + columns.p - 1)}"
    filled = f"COUNTA({','.join(cells.values())})" if cells else f"COUNTA($A{row + 1})"
    problems = f"${address(row, columns.problems)}"
    made = {
        columns.x + j: Formula(f"IF({state}=2,{live.product(column, cells)}*1,0)", now.x[j])
        for j, column in enumerate(result.design.columns)
    }
    made[columns.state] = Formula(f'IF({filled}=0,0,IF({problems}="",2,1))', now.state)
    b, c, r = (reference(sheet, *span) for span in (place.coefficients, place.factor, place.r_inverse))
    made[columns.eta] = Formula(f"SUMPRODUCT(MMULT({design},{b}))", now.eta)
    made[columns.se] = Formula(f"SQRT(SUMPRODUCT(MMULT({design},{c})^2))", now.se)
    made[columns.leverage] = Formula(f"SUMPRODUCT(MMULT({design},{r})^2)", now.leverage)
    texts = [_problem_formula(result, plan, name, cells[name]) for name in inputs]
    made[columns.problems] = Formula(_joined(texts, f"{filled}=0"), now.problems)
    texts = [text for name in inputs if (text := _beyond_formula(columns, name, cells[name]))]
    made[columns.beyond] = Formula(_joined(texts, f"{state}=0"), now.beyond)
    return made


def answers(columns: ModelColumns, plan: Plan, row: int, now: Evaluated, entries: Entries) -> dict[str, Formula]:
    """The figures of a line by header, as people see them."""
    result = columns.result
    fit, back = result.fit, shown_back(result)
    state, eta, se = (f"${address(row, at)}" for at in (columns.state, columns.eta, columns.se))
    t = live.number(t_quantile(result.spec.level, fit.df_interval))
    weight, case = _case(result, plan, row, se)
    reach = t_quantile(result.spec.level, fit.df_interval)
    case_sd = _case_sd(result, now, entries)
    made: dict[str, Formula] = {}

    def put(header: str, text: str, value: float) -> None:
        good = now.state == 2 and math.isfinite(value)
        made[header] = Formula(f'IF({state}=2,{text},"")', value if good else "")

    put("estimate", mean_formula(back, eta), one_value(mean_in_units, now.eta, back))
    if "median" in columns.headers:
        put("median", median_formula(back, eta), one_value(median_in_units, now.eta, back))
    for header, sign, way in (("mean low", "-", -1), ("mean high", "+", 1)):
        value = one_value(mean_in_units, now.eta + way * reach * now.se, back)
        put(header, mean_formula(back, f"({eta}{sign}{t}*{se})"), value)
    for header, sign, way in (("case low", "-", -1), ("case high", "+", 1)):
        text = median_formula(back, f"({eta}{sign}{t}*{case})")
        text = f'IF({weight},{text},"")' if weight else text
        put(header, text, one_value(median_in_units, now.eta + way * reach * case_sd, back))
    made["remark"] = _remark(columns, plan, row, now, entries)
    return made


# --- figures --------------------------------------------------------------------------------------


def shown_back(result: ModelResult) -> BackTransform | None:
    """How estimates come back to original units; None where they are shown as fitted."""
    return result.back if result.spec.back_on is BackOn.ORIGINAL else None


def mean_formula(back: BackTransform | None, eta: str) -> str:
    """The mean response at a fitted-scale formula."""
    if back is None:
        return eta
    if back.kind == "log":
        return f"EXP({eta})*{live.number(back.smear)}"
    return f"({eta}*{eta}+2*{eta}*{live.number(back.shift)}+{live.number(back.smear)})"


def median_formula(back: BackTransform | None, eta: str) -> str:
    """The median response at a fitted-scale formula."""
    if back is None:
        return eta
    return f"EXP({eta})" if back.kind == "log" else f"MAX({eta},0)^2"


def one_value(way: Way, eta: float, back: BackTransform | None) -> float:
    """One estimate in units; NaN where eta is no number."""
    if not math.isfinite(eta):
        return math.nan
    with np.errstate(over="ignore"):
        return float(way(np.array([eta]), back)[0])


def _case(result: ModelResult, plan: Plan, row: int, se: str) -> tuple[str, str]:
    """The condition under which a single case can be judged (a weight, for weighted models), and its SD."""
    variance = live.number(result.fit.residual_sd**2)
    if result.spec.weight is None:
        return "", f"SQRT({se}^2+{variance})"
    weight = plan.cell(result.spec.weight, row)
    return f"N({weight})>0", f"SQRT({se}^2+{variance}/{weight})"


def _case_sd(result: ModelResult, now: Evaluated, entries: Entries) -> float:
    variance = result.fit.residual_sd**2
    if result.spec.weight is not None:
        weight = entries.get(result.spec.weight)
        if not _is_number(weight) or float(weight) <= 0:  # type: ignore[arg-type]
            return math.nan
        variance /= float(weight)  # type: ignore[arg-type]
    return math.sqrt(now.se**2 + variance)


# --- one entry ------------------------------------------------------------------------------------


def _used(result: ModelResult) -> tuple[str, ...]:
    """The data columns whose entries the model needs."""
    return tuple(term.column for term in result.spec.terms)


def _value(column: DesignColumn, entries: Entries) -> float:
    value = 1.0
    for factor in column.factors:
        value *= _factor(factor, entries[factor.column])
    return value


def _factor(factor: Factor, entry: Scalar) -> float:
    if factor.kind == "level":
        return 1.0 if as_level(entry) == factor.level else 0.0
    x = float(entry)
    if factor.kind == "log":
        return math.log(x)
    if factor.kind == "root":
        return math.sqrt(x)
    if factor.kind == "reciprocal":
        return 1 / x
    if factor.kind == "hinge":
        return max(x - factor.knot, 0.0)
    return float(x**factor.exponent)


def as_level(entry: Scalar) -> str:
    """A category entry as the level that it names."""
    if isinstance(entry, bool):
        return "TRUE" if entry else "FALSE"
    return number_text(float(entry)) if isinstance(entry, int | float) else entry


def _is_number(entry: Scalar | None) -> bool:
    return isinstance(entry, int | float) and not isinstance(entry, bool)


def _shape(result: ModelResult, name: str) -> Shape | None:
    term = next(each for each in result.spec.terms if each.column == name)
    return term.shape if isinstance(term, NumberTerm) else None


_LIMITS = {
    Shape.LOG: ("<=0", "must be above 0"),
    Shape.ROOT: ("<0", "must not be below 0"),
    Shape.RECIPROCAL: ("=0", "must not be 0"),
}


def _problem(result: ModelResult, name: str, entry: Scalar | None) -> str:
    if entry is None:
        return f"{name} is missing; "
    shape = _shape(result, name)
    if shape is None:
        levels = [level for level, _ in dict(result.design.levels)[name]]
        return "" if as_level(entry) in levels else f"{name} is none of the known kinds; "
    if not _is_number(entry):
        return f"{name} is not a number; "
    x = float(entry)
    wrong = {Shape.LOG: x <= 0, Shape.ROOT: x < 0, Shape.RECIPROCAL: x == 0}.get(shape, False)
    return f"{name} {_LIMITS[shape][1]}; " if wrong else ""


def _problem_formula(result: ModelResult, plan: Plan, name: str, cell: str) -> str:
    missing = text_literal(f"{name} is missing; ")
    shape = _shape(result, name)
    if shape is None:
        strange = text_literal(f"{name} is none of the known kinds; ")
        levels = [level for level, _ in dict(result.design.levels)[name]]
        if levels and len(levels) <= 20 and sum(map(len, levels)) < 400:
            known = "+".join(f"EXACT({cell},{text_literal(level)})" for level in levels)
        else:
            known = f"SUMPRODUCT(EXACT({plan.levels[name]},{cell})*1)"
        return f'IF({cell}="",{missing},IF({known}>0,"",{strange}))'
    strange = text_literal(f"{name} is not a number; ")
    inside = '""'
    if shape in _LIMITS:
        test, words = _LIMITS[shape]
        inside = f'IF({cell}{test},{text_literal(f"{name} {words}; ")},"")'
    return f'IF({cell}="",{missing},IF(ISNUMBER({cell}),{inside},{strange}))'


def _reach(columns: ModelColumns, name: str) -> tuple[float, float] | None:
    if _shape(columns.result, name) is None:
        return None
    found = next((each for each in columns.result.ranges if each.column == name), None)
    return (found.low, found.high) if found is not None else None


def _beyond(columns: ModelColumns, name: str, entry: Scalar | None) -> str:
    reach = _reach(columns, name)
    if reach is None or not _is_number(entry):
        return ""
    x = float(entry)  # type: ignore[arg-type]
    if x > reach[1]:
        return f"{name} above {figures.plain_number(reach[1])}; "
    return f"{name} below {figures.plain_number(reach[0])}; " if x < reach[0] else ""


def _beyond_formula(columns: ModelColumns, name: str, cell: str) -> str:
    reach = _reach(columns, name)
    if reach is None:
        return ""
    low, high = reach
    above = text_literal(f"{name} above {figures.plain_number(high)}; ")
    below = text_literal(f"{name} below {figures.plain_number(low)}; ")
    inside = f'IF({cell}>{live.number(high)},{above},IF({cell}<{live.number(low)},{below},""))'
    return f'IF(ISNUMBER({cell}),{inside},"")'


def _joined(texts: Sequence[str], never: str) -> str:
    if not texts:
        return '""'
    return f'IF({never},"",{"&".join(texts)})'


# --- the remark -----------------------------------------------------------------------------------

FAR = "far from the cases: an unusual combination"
NO_WEIGHT = "give {weight} for the interval of a single case"


def _remark(columns: ModelColumns, plan: Plan, row: int, now: Evaluated, entries: Entries) -> Formula:
    result = columns.result
    state, problems, beyond, leverage = (
        f"${address(row, at)}" for at in (columns.state, columns.problems, columns.beyond, columns.leverage)
    )
    most = live.number(result.max_leverage * (1 + 1e-9))
    far = f'IF({leverage}>{most},{text_literal(FAR + "; ")},"")'
    outside = f'IF({beyond}="",{far},"beyond the data: "&{beyond})'
    if result.spec.weight is not None:
        weight = text_literal(NO_WEIGHT.format(weight=result.spec.weight) + "; ")
        outside = f'{outside}&IF(N({plan.cell(result.spec.weight, row)})>0,"",{weight})'
    whole = f"IF({state}=1,{problems},{outside})"
    text = f'IF({state}=0,"",LEFT({whole},MAX(LEN({whole})-2,0)))'
    return Formula(text, _remark_value(result, now, entries))


def _remark_value(result: ModelResult, now: Evaluated, entries: Entries) -> str:
    if now.state == 0:
        return ""
    if now.state == 1:
        return now.problems[:-2]
    far = f"{FAR}; " if now.leverage > result.max_leverage * (1 + 1e-9) else ""
    said = f"beyond the data: {now.beyond}" if now.beyond else far
    if result.spec.weight is not None:
        weight = entries.get(result.spec.weight)
        if not (_is_number(weight) and float(weight) > 0):  # type: ignore[arg-type]
            said += NO_WEIGHT.format(weight=result.spec.weight) + "; "
    return said[:-2]
