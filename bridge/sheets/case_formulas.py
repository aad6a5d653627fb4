"""The live formulas of the case lines, one template each: `{row}` stands for the line's row.

`case_values` gives what they hold now, by the same arithmetic.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from bridge.page.cells import column_letters, reference
from bridge.regression.results import BackTransform, DesignColumn, Factor, ModelResult
from bridge.regression.spec import BackOn, NumberTerm, Shape
from bridge.regression.tails import t_quantile
from bridge.sheets import figures, live
from bridge.sheets.cases import A_CELL, Input, ModelColumns, Plan
from bridge.sheets.coefficients import Place

FAR = "far from the cases: an unusual combination"
BEYOND = "beyond the data: "
_LONGEST_NAME = 60  # of a column in a remark

LIMITS = {
    Shape.LOG: ("<=0", "must be above 0"),
    Shape.ROOT: ("<0", "must not be below 0"),
    Shape.RECIPROCAL: ("=0", "must not be 0"),
}


# --- words shared with the values ---------------------------------------------------------------


def said(one: Input, problem: str) -> str:
    """A problem of an input as a part of the remark."""
    name = one.name if len(one.name) <= _LONGEST_NAME else one.name[: _LONGEST_NAME - 1] + "…"
    return f"{name} {problem}; "


MISSING, NO_NUMBER, STRANGE = "is missing", "is not a number", "is none of the known kinds"


def no_weight(weight: Input) -> str:
    """What a weighted model says where the case has no weight."""
    return f"give {weight.name} for the interval of a single case; "


def above(columns: ModelColumns, name: str) -> tuple[float, str, float, str] | None:
    """The data's reach of a number input: highest value and what is said above it, lowest and what is said below."""
    found = next((each for each in columns.result.ranges if each.column == name), None)
    if found is None or shape_of(columns.result, name) is None:
        return None
    one = columns.inputs[name]
    high, low = (figures.plain_number(end) for end in (found.high, found.low))
    return found.high, said(one, f"above {high}"), found.low, said(one, f"below {low}")


def shape_of(result: ModelResult, name: str) -> Shape | None:
    """How a model takes a column's numbers; None for a category."""
    term = next(each for each in result.spec.terms if each.column == name)
    return term.shape if isinstance(term, NumberTerm) else None


def most_leverage(result: ModelResult) -> float:
    """The leverage beyond which a case is far from the others."""
    return result.max_leverage * (1 + 1e-9)


def own_levels(columns: ModelColumns, name: str) -> tuple[int, ...]:
    """Which of the input's levels the model knows, by their numbers from 1 on."""
    known = {level for level, _ in dict(columns.result.design.levels)[name]}
    return tuple(at for at, level in enumerate(columns.inputs[name].levels, 1) if level in known)


def shown_back(result: ModelResult) -> BackTransform | None:
    """How estimates come back to original units; None where they are shown as fitted."""
    return result.back if result.spec.back_on is BackOn.ORIGINAL else None


# --- helpers ------------------------------------------------------------------------------------


def code(plan: Plan, one: Input) -> str:
    """Which of the input's levels the case has: its number in the list, 0 for none of them."""
    first, last = plan.lists[one.name]
    levels = live.span(first, last)
    place = f"(COLUMN({levels})-COLUMN({live.span(first, first)})+1)"
    by_text = f"SUMPRODUCT(EXACT({levels},{one.cell})*{place})"
    if one.numbers is not None:
        by_number = f"SUMPRODUCT(({levels}*1=N({one.cell}))*{place})"
        by_text = f"IF(ISTEXT({one.cell}),{by_text},{by_number})"
    return f'IF(ISERROR({one.cell}),0,IF(TRIM({one.cell})="",0,{by_text}))'


def helpers(columns: ModelColumns, plan: Plan, place: Place, sheet: str) -> Iterator[str]:
    """The templates of the model's helper columns, from its `x` on. `sheet` is the tab of `fit coefficients`."""
    state = _cell(columns.state)
    for column in columns.result.design.columns:
        yield f"IF({state}=2,{_product(columns, plan, column)}*1,0)"
    design = f"{_cell(columns.x)}:{_cell(columns.x + columns.p - 1)}"
    filled = _filled(columns)
    problems = "&".join(_cell(at) for at in columns.problems)
    yield f'IF({filled}=0,0,IF({problems}="",2,1))'
    b, c, r = (reference(sheet, *span) for span in (place.coefficients, place.factor, place.r_inverse))
    yield f"SUMPRODUCT(MMULT({design},{b}))"
    yield f"SQRT(SUMPRODUCT(MMULT({design},{c})^2))"
    yield f"SUMPRODUCT(MMULT({design},{r})^2)"
    names = tuple(columns.inputs)
    yield from _joined([_problem(columns, plan, name) for name in names], f"{filled}=0", columns.parts)
    yield from _joined([_beyond(columns, name) for name in names], f"{state}=0", columns.parts)


def figure_texts(columns: ModelColumns) -> Iterator[tuple[str, str]]:
    """The templates of the figures that people see, by header; the remark is not among them."""
    result = columns.result
    back = shown_back(result)
    state, eta, se = (_cell(at) for at in (columns.state, columns.eta, columns.se))
    t = live.number(t_quantile(result.spec.level, result.fit.df_interval))
    variance = live.number(result.fit.residual_sd**2)
    weight = columns.weight.cell if columns.weight is not None else ""
    case = f"SQRT({se}^2+{variance}/{weight})" if weight else f"SQRT({se}^2+{variance})"
    made = {
        "estimate": mean_formula(back, eta),
        "median": median_formula(back, eta),
        "mean low": mean_formula(back, f"({eta}-{t}*{se})"),
        "mean high": mean_formula(back, f"({eta}+{t}*{se})"),
        "case low": median_formula(back, f"({eta}-{t}*{case})"),
        "case high": median_formula(back, f"({eta}+{t}*{case})"),
    }
    for header in columns.headers[:-1]:
        text = made[header]
        if weight and header.startswith("case"):
            text = f'IF(N({weight})>0,{text},"")'
        yield header, f'IF({state}=2,{text},"")'


def remark(columns: ModelColumns) -> str:
    """The template of the remark."""
    state, leverage = _cell(columns.state), _cell(columns.leverage)
    problems, beyond = ("&".join(_cell(at) for at in each) for each in (columns.problems, columns.beyond))
    far = f'IF({leverage}>{live.number(most_leverage(columns.result))},{live.literal(FAR + "; ")},"")'
    outside = f'IF({beyond}="",{far},{live.literal(BEYOND)}&{beyond})'
    if columns.weight is not None:
        outside = f'{outside}&IF(N({columns.weight.cell})>0,"",{live.literal(no_weight(columns.weight))})'
    whole = f"IF({state}=1,{problems},{outside})"
    return f'IF({state}=0,"",LEFT({whole},MAX(LEN({whole})-2,0)))'


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


# --- their pieces -------------------------------------------------------------------------------


def _cell(column: int) -> str:
    return f"${column_letters(column)}{{row}}"


def _product(columns: ModelColumns, plan: Plan, column: DesignColumn) -> str:
    return "*".join(_factor(columns.inputs[factor.column], plan, factor) for factor in column.factors) or "1"


def _factor(one: Input, plan: Plan, factor: Factor) -> str:
    if factor.kind == "level":
        return f"({_cell(plan.codes[one.name])}={one.levels.index(factor.level) + 1})"
    cell = f"N({one.cell})" if one.yes_no else one.cell
    if factor.kind == "log":
        return f"LN({cell})"
    if factor.kind == "root":
        return f"SQRT({cell})"
    if factor.kind == "reciprocal":
        return f"(1/{cell})"
    if factor.kind == "hinge":
        return f"MAX({cell}-{live.number(factor.knot)},0)"
    return cell if factor.exponent == 1 else f"{cell}^{factor.exponent}"


def _filled(columns: ModelColumns) -> str:
    """How many of the model's inputs are filled; for a model without any, whether the case has a name."""
    at = sorted(one.column for one in columns.inputs.values()) or [0]
    runs: list[list[int]] = []
    for column in at:
        if runs and runs[-1][-1] == column - 1:
            runs[-1].append(column)
        else:
            runs.append([column])
    ranges = [_cell(run[0]) if len(run) == 1 else f"{_cell(run[0])}:{_cell(run[-1])}" for run in runs]
    return "+".join(f"COUNTA({','.join(ranges[start : start + 200])})" for start in range(0, len(ranges), 200))


def _problem(columns: ModelColumns, plan: Plan, name: str) -> str:
    one, shape = columns.inputs[name], shape_of(columns.result, name)
    missing = live.literal(said(one, MISSING))
    if shape is None:
        strange = live.literal(said(one, STRANGE))
        known = f'IF({_known(columns, plan, name)},"",{strange})'
        return f'IF(ISERROR({one.cell}),{strange},IF(TRIM({one.cell})="",{missing},{known}))'
    strange = live.literal(said(one, NO_NUMBER))
    fine = '""'
    if shape in LIMITS:
        test, text = LIMITS[shape]
        fine = f'IF({one.cell}{test},{live.literal(said(one, text))},"")'
    good = f"ISNUMBER({one.cell})" if not one.yes_no else f"OR(ISNUMBER({one.cell}),ISLOGICAL({one.cell}))"
    return f'IF(ISERROR({one.cell}),{strange},IF(TRIM({one.cell})="",{missing},IF({good},{fine},{strange})))'


def _known(columns: ModelColumns, plan: Plan, name: str) -> str:
    one, known = columns.inputs[name], own_levels(columns, name)
    number = _cell(plan.codes[one.name])
    if len(known) == len(one.levels):
        return f"{number}>0"
    return f"SUMPRODUCT(({number}={{{','.join(map(str, known))}}})*1)>0"


def _beyond(columns: ModelColumns, name: str) -> str:
    reach = above(columns, name)
    if reach is None:
        return '""'
    cell = columns.inputs[name].cell
    high, over, low, under = reach
    inside = (
        f'IF({cell}>{live.number(high)},{live.literal(over)},IF({cell}<{live.number(low)},{live.literal(under)},""))'
    )
    return f'IF(ISNUMBER({cell}),{inside},"")'


def _joined(texts: Sequence[str], never: str, parts: int) -> Iterator[str]:
    for part in range(parts):
        own = texts[part * A_CELL : (part + 1) * A_CELL]
        yield f'IF({never},"",{"&".join(own)})' if own else 'IF(1,"","")'
