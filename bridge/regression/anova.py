"""The analysis of variance: regression against residual, lack of fit against pure error, and the terms' shares.

Added last: each term's sum of squares given all others. That holds for a term that is also part of a product too: its
line is what it adds to a model that has the product already (its effect where the other factor is 0, or at the other
category's base level), so it changes with the origin of the other column; the product's own line does not.
Added in order: each given those above it, in the order of the model; powers and bends one at a time.
Lack of fit: Draper & Smith, "Applied Regression Analysis", 3rd ed. 1998, section 2.1.
"""

from __future__ import annotations

from collections.abc import Iterable

from bridge.regression.kernel import Kernel, Number, SourceSum
from bridge.regression.results import Anova, AnovaRow
from bridge.regression.tails import f_upper

NOT_GIVEN = float("nan")


def make(kernel: Kernel) -> Anova:
    """The table, in the order of the sheet. Sums are weighted; without an intercept the total is about zero."""
    sums = kernel.sums
    slopes = kernel.p - int(kernel.intercept)
    error = sums.residual / kernel.df_residual
    rows = [
        _tested("regression", "main", slopes, sums.regression, error, kernel.df_residual),
        _plain("residual", "main", kernel.df_residual, sums.residual),
        *_lack_of_fit(kernel),
        _plain("total", "main", kernel.n - int(kernel.intercept), sums.total, mean=False),
        *_terms(sums.last, "added last", error, kernel.df_residual),
        *_terms(sums.in_order, "added in order", error, kernel.df_residual),
    ]
    return Anova(tuple(rows))


def ratio(over: Number, under: Number) -> float:
    """over / under rounded once: without bound for something over nothing, NaN for nothing over nothing."""
    if under:
        return float(over / under)  # type: ignore[operator]  # both Decimal or both float
    return float("inf") if over > 0 else NOT_GIVEN


def _lack_of_fit(kernel: Kernel) -> list[AnovaRow]:
    """Only where rows agree in all predictors and there are more such groups than coefficients."""
    pure, df = kernel.sums.pure_error, kernel.sums.pure_error_df
    lack_df = kernel.df_residual - df
    if pure is None or df == 0 or lack_df <= 0:
        return []
    lack = kernel.sums.residual - pure  # type: ignore[operator]
    lack = max(lack, type(lack)(0))  # in doubles the difference can fall below 0
    return [
        _tested("lack of fit", "fit", lack_df, lack, pure / df, df),
        _plain("pure error", "fit", df, pure),
    ]


def _terms(sources: Iterable[SourceSum], block: str, error: Number, df_error: int) -> list[AnovaRow]:
    return [_tested(one.source, block, one.df, one.ss, error, df_error) for one in sources]


def _tested(source: str, block: str, df: int, ss: Number, error: Number, df_error: int) -> AnovaRow:
    if df == 0:
        return AnovaRow(source, block, 0, float(ss), NOT_GIVEN, NOT_GIVEN, NOT_GIVEN)
    mean = ss / df
    f = ratio(mean, error)
    return AnovaRow(source, block, df, float(ss), float(mean), f, f_upper(f, (df, df_error)))


def _plain(source: str, block: str, df: int, ss: Number, mean: bool = True) -> AnovaRow:
    return AnovaRow(source, block, df, float(ss), float(ss / df) if mean else NOT_GIVEN, NOT_GIVEN, NOT_GIVEN)
