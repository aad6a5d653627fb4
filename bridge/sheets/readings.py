"""From checks to sentences: what a check found, hedged, in words an estimator can repeat to a colleague.

Thresholds, each named where it is used: p below 0.05 a sign, below 0.01 a clear sign (common practice); generalised
VIF^(1/(2 df)) above sqrt(5) and sqrt(10) (common practice after Fox & Monette 1992); condition indexes above 10 and 30
(Belsley, Kuh & Welsch 1980); typical misses within 5% of each other count as equal (common practice).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from bridge.regression.results import Alias, BoxCox, Check, ModelResult, TermVif
from bridge.regression.spec import Errors, Shape
from bridge.sheets import figures, words
from bridge.sheets.book import ModelSheet
from bridge.workbook.tables import Table

SIGN, CLEAR = 0.05, 0.01
VIF_SIGN, VIF_CLEAR = 5.0, 10.0
INDEX_SIGN, INDEX_CLEAR = 10.0, 30.0
SHARE = 0.5

NO_RESIDUAL = (
    "The fit leaves no residual, so there is nothing to check: perhaps the response is computed from the predictors."
)


@dataclass(frozen=True, slots=True)
class Reading:
    """One check in words.

    `name` is what the sheets call the check; `method`, `statistic`, `value`, `df`, `p` the figures (NaN: none);
    `weight` says how much it matters: 0 nothing to see, 1 worth knowing, 2 worth acting on.
    """

    name: str
    method: str
    statistic: str
    value: float
    df: str
    p: float
    text: str
    weight: int


@dataclass(frozen=True, slots=True)
class _Said:
    text: str
    weight: int


# --- the checks ---------------------------------------------------------------------------------


def checks(model: ModelSheet, result: ModelResult) -> tuple[Reading, ...]:
    """Every check of a model as a reading, then the outlier test and the response's scale."""
    made = [_check(model, result, check) for check in result.checks]
    return (*made, _outlier(model, result), *_box_cox(model, result))


def _check(model: ModelSheet, result: ModelResult, check: Check) -> Reading:
    name, speak = _SPEAKERS.get(check.key, (check.key, _unknown))
    if math.isnan(check.p):
        said = _Said(words.sentence(check.note or "Not available for this model"), 0)
    else:
        said = speak(model, result, check)
        if check.note:
            said = _Said(f"{said.text} {words.sentence(check.note)}", said.weight)
    method = f"{check.method} ({check.source})" if check.source else check.method
    return Reading(name, method, check.statistic_name, check.statistic, _df(check.df), check.p, said.text, said.weight)


def _spread(model: ModelSheet, result: ModelResult, check: Check) -> _Said:
    if check.p >= SIGN:
        return _Said(f"No sign that the spread differs between cases.{_few(result)}", 0)
    opening = "Clear signs" if check.p < CLEAR else "Some signs"
    how = _how_spread(result)
    effect = "the intervals are then too wide for some cases and too narrow for others"
    return _Said(f"{opening} that the spread {how}; {effect}.{_spread_advice(result)}", 2 if check.p < CLEAR else 1)


def _spread_any(model: ModelSheet, result: ModelResult, check: Check) -> _Said:
    if check.p >= SIGN:
        return _Said("No sign of uneven spread of any other form, or of a shape that was missed.", 0)
    opening = "Clear signs" if check.p < CLEAR else "Some signs"
    return _Said(
        f"{opening} of uneven spread or of a missing curve or product; this test cannot tell the two apart. "
        "Look at the charts of the residuals.",
        1,
    )


def _normality(model: ModelSheet, result: ModelResult, check: Check) -> _Said:
    if check.p >= SIGN:
        return _Said(f"The residuals may well be normal, as the case intervals suppose.{_few(result)}", 0)
    opening = "clearly not quite" if check.p < CLEAR else "perhaps not quite"
    many = result.fit.n >= 50 + 8 * len(result.design.columns)
    effect = (
        "with this many rows it matters little for the coefficients, but case intervals may cover more or fewer cases "
        "than they say"
        if many
        else "with so few rows p values and intervals are then rough"
    )
    return _Said(f"The residuals are {opening} normal; {effect}. See the normal plot.", 1)


def _serial(model: ModelSheet, result: ModelResult, check: Check) -> _Said:
    order = _order_words(model, result)
    if check.p >= SIGN:
        return _Said(f"No sign that neighbouring rows{order} resemble each other more than others.", 0)
    alike = "resemble each other" if not check.estimate < 0 else "alternate"
    strength = "" if math.isnan(check.estimate) else f" (correlation {figures.sentence_number(check.estimate, 2)})"
    opening = "Clear signs" if check.p < CLEAR else "Some signs"
    covered = result.spec.errors in (Errors.SERIAL, Errors.GROUPED)
    size = "" if covered else f"; standard errors are then as a rule too {'large' if check.estimate < 0 else 'small'}"
    return _Said(
        f"{opening} that the residuals of neighbouring rows{order} {alike}{strength}{size}.{_serial_advice(result)}",
        _serial_weight(result, check.p),
    )


def _serial_order(model: ModelSheet, result: ModelResult, check: Check) -> _Said:
    lags = int(check.df[0]) if check.df else 1
    apart = f"up to {lags} rows apart" if lags > 1 else "one row apart"
    if check.p >= SIGN:
        return _Said(f"No sign that residuals {apart} hang together.", 0)
    opening = "Clear signs" if check.p < CLEAR else "Some signs"
    return _Said(
        f"{opening} that residuals {apart} hang together.{_serial_advice(result)}", _serial_weight(result, check.p)
    )


def _form(model: ModelSheet, result: ModelResult, check: Check) -> _Said:
    if check.p >= SIGN:
        return _Said("No sign that a curve, a bend or a product of predictors is missing.", 0)
    opening = "Clear signs" if check.p < CLEAR else "Some signs"
    return _Said(
        f"{opening} that the form is not quite right: a curve, a bend, a log or a crossed term may be missing. The "
        "charts of the residuals against each predictor show where to look.",
        2 if check.p < CLEAR else 1,
    )


def _lack_of_fit(model: ModelSheet, result: ModelResult, check: Check) -> _Said:
    if check.p >= SIGN:
        return _Said("The fit misses rows with equal predictors by no more than they differ among themselves.", 0)
    opening = "clearly misses" if check.p < CLEAR else "seems to miss"
    return _Said(
        f"The fit {opening} more than rows with equal predictors differ among themselves: the form of the model leaves "
        "something out.",
        2 if check.p < CLEAR else 1,
    )


def _unknown(model: ModelSheet, result: ModelResult, check: Check) -> _Said:
    found = "a sign against" if check.p < SIGN else "no sign against"
    return _Said(f"The test shows {found} the assumption.", int(check.p < SIGN))


SAME_MATTER = (("even spread, any form", "even spread"), ("rows further apart", "neighbouring rows"))

_Speaker = Callable[[ModelSheet, ModelResult, Check], _Said]
_SPEAKERS: dict[str, tuple[str, _Speaker]] = {
    "spread": ("even spread", _spread),
    "spread_any_form": ("even spread, any form", _spread_any),
    "normality": ("normal residuals", _normality),
    "serial": ("neighbouring rows", _serial),
    "serial_order": ("rows further apart", _serial_order),
    "form": ("form of the model", _form),
    "lack_of_fit": ("lack of fit", _lack_of_fit),
}


def _outlier(model: ModelSheet, result: ModelResult) -> Reading:
    influence, at = result.influence, result.influence.outlier_index
    value, p = float(influence.external[at]), influence.outlier_p
    row = row_words(model, at)
    if math.isnan(p):
        said = _Said("Not available for this fit.", 0)
    elif p < SIGN:
        side = "above" if value > 0 else "below"
        said = _Said(
            f"{words.sentence(row)[:-1]} lies further {side} the fit than chance allows, even for the largest of "
            "all residuals. Look whether it was recorded rightly, or is a case of another kind; do not leave it out "
            "for its size alone.",
            2,
        )
    else:
        said = _Said(f"The largest residual ({row}) is no larger than the largest of all may well be.", 0)
    method = "largest studentised residual, Bonferroni's bound on p"
    return Reading("outlying row", method, "t", value, f"{result.fit.df_residual - 1}", p, said.text, said.weight)


def _box_cox(model: ModelSheet, result: ModelResult) -> tuple[Reading, ...]:
    found = result.box_cox
    if found is None:
        return ()
    text, weight = _box_cox_words(found, result.spec.response_shape)
    return (
        Reading(
            "scale of the response",
            "power of the response with the highest likelihood (Box & Cox 1964)",
            "power",
            found.power,
            f"{figures.sentence_number(found.low, 2)} to {figures.sentence_number(found.high, 2)}",
            math.nan,
            text,
            weight,
        ),
    )


_POWERS = {Shape.AS_IS: 1.0, Shape.LOG: 0.0, Shape.ROOT: 0.5, Shape.RECIPROCAL: -1.0}


def _box_cox_words(found: BoxCox, shape: Shape) -> tuple[str, int]:
    ours = _POWERS[shape]
    if found.low <= ours <= found.high:
        return f"The response as fitted ({_shape_words(shape)}) agrees with the data; no other scale is called for.", 0
    if found.suggestion and found.suggestion != shape.value:
        return (
            f"The data would rather have the response {_shape_words(Shape(found.suggestion))}: worth trying as a "
            "further model and comparing the typical miss. This is advice, not a finding.",
            1,
        )
    return "The data would rather have the response on another scale, but none of the plain ones fits well.", 1


def _shape_words(shape: Shape) -> str:
    return {
        Shape.AS_IS: "as it is",
        Shape.LOG: "in logs",
        Shape.ROOT: "as its root",
        Shape.RECIPROCAL: "as reciprocal",
    }[shape]


# --- helpers of the checks ----------------------------------------------------------------------


def _df(df: tuple[float, ...]) -> str:
    return " and ".join(f"{value:g}" for value in df)


def _few(result: ModelResult) -> str:
    spare = result.fit.df_residual
    return f" With {words.plural(result.fit.n, 'row')} only a gross fault would show." if spare < 15 else ""


def _how_spread(result: ModelResult) -> str:
    size, fitted = np.abs(result.influence.internal), result.fit.fitted
    known = np.isfinite(size)
    if known.sum() < 3 or np.ptp(fitted[known]) == 0 or np.ptp(size[known]) == 0:
        return "differs between cases"
    along = float(np.corrcoef(size[known], fitted[known])[0, 1])
    if along > 0.15:
        return "grows with the size of the estimate"
    return "shrinks with the size of the estimate" if along < -0.15 else "differs between cases"


def _spread_advice(result: ModelResult) -> str:
    spec = result.spec
    if spec.errors is not Errors.ORDINARY:
        return " The standard errors asked for allow for this; the case intervals do not."
    if spec.weight is not None:
        return " The weights do not take all of it away; standard errors for uneven spread would allow for it."
    ways = ["weights", "standard errors for uneven spread"]
    if spec.response_shape is Shape.AS_IS and bool((result.observed > 0).all()):
        ways.insert(0, "a log response")
    return f" Ways out: {words.listing(ways, 'or')}."


def _order_words(model: ModelSheet, result: ModelResult) -> str:
    if result.spec.order is None:
        return ""  # the check's own note says in which order they stand
    return f" (in the order of {words.name_in(model.table, result.spec.order)})"


def _serial_weight(result: ModelResult, p: float) -> int:
    covered = result.spec.errors in (Errors.SERIAL, Errors.GROUPED)
    return 1 if result.spec.order is None or covered or p >= CLEAR else 2


def _serial_advice(result: ModelResult) -> str:
    if result.spec.errors in (Errors.SERIAL, Errors.GROUPED):
        return " The standard errors asked for allow for this."
    if result.spec.order is None:
        return " If the rows stand in order of time, name an order column and ask for serial standard errors."
    return " Serial standard errors allow for it; a term for trend or season may explain it."


# --- collinearity -------------------------------------------------------------------------------


def vif(found: TermVif, intercept: bool = True) -> tuple[str, int]:
    """A term's generalised variance inflation in words, and its weight (0 to 2)."""
    squared = found.scaled**2
    times = figures.sentence_number(found.scaled, 2)
    if math.isnan(squared):
        return "", 0
    if squared > VIF_CLEAR:
        return f"hardly told apart from other terms: its standard error is {times} times what it would be alone", 2
    if squared > VIF_SIGN:
        return f"partly told by other terms: its standard error is {times} times what it would be alone", 1
    return "told apart well enough", 0


def condition(index: float) -> tuple[str, int]:
    """A condition index in words, and its weight."""
    if index > INDEX_CLEAR:
        return "strong near-dependence", 2
    return ("moderate near-dependence", 1) if index > INDEX_SIGN else ("harmless", 0)


def alias(found: Alias, table: Table | None = None) -> str:
    """What an aliased column depends on, and what was done."""
    label = words.label_in(table, found.label)
    parts = [_product(coefficient, words.label_in(table, other)) for other, coefficient in found.depends_on]
    made = " ".join(parts).removeprefix("+ ").replace("− ", "−", 1 if parts and parts[0].startswith("−") else 0)
    exactly = "exactly" if found.exact else "to within rounding"
    return (
        f"{label} says nothing that others do not say already: it is {exactly} {made or 'constant'}. "
        "It was left out of the fit."
    )


def _product(coefficient: float, label: str) -> str:
    sign = "−" if coefficient < 0 else "+"
    size = abs(coefficient)
    if label == "intercept":
        return f"{sign} {figures.plain_number(size)}"
    return f"{sign} {label}" if size == 1 else f"{sign} {figures.plain_number(size)} {label}"


# --- rows ---------------------------------------------------------------------------------------


def row_words(model: ModelSheet, at: int) -> str:
    """`row 58 (Job 157)` for the row at position `at` among the rows used."""
    if model.table is None or model.taken is None:
        return f"row {at + 1}"
    index = model.taken.used[at]
    row = f"row {int(model.table.rows[index])}"
    column = words.column_of(model.table, model.request.label) if model.request.label else None
    text = column.texts[index] if column is not None and column.texts else None
    return f"{row} ({text})" if text else row


def moves(model: ModelSheet, result: ModelResult, at: int) -> str:
    """What the fit would do without a row: the coefficient that moves most, in standard errors."""
    dfbetas = result.influence.dfbetas
    if dfbetas is None or not np.isfinite(dfbetas[at]).any():
        return ""
    most = int(np.nanargmax(np.abs(dfbetas[at])))
    size = float(dfbetas[at, most])
    label = words.label_in(model.table, result.design.columns[most].label)
    label = "the intercept" if label == "intercept" else label
    way = "falls" if size > 0 else "rises"
    return f"without it {label} {way} by {figures.sentence_number(abs(size), 2)} standard errors"
