"""Published results, through `fit_model`: StRD to every printed digit, handbook and literature as far as they go."""

from __future__ import annotations

from decimal import Decimal

import numpy as np
import pytest

from bridge.regression.core import fit_model
from bridge.regression.results import AnovaRow, ModelResult
from tests.reference import LITERATURE, STRD, PublishedFit, load

FITS = {f"{fit.set_name}: {fit.model}": fit for file in (*STRD, *LITERATURE) for fit in load(file).fits}
STRD_FITS = {name: fit for name, fit in FITS.items() if fit.digits == 15}


def figures(result: ModelResult) -> dict[str, float]:
    """The figures of a fit under the names of the reference files."""
    rows = {row.source: row for row in result.anova.rows if row.block in ("main", "fit")}
    nothing = AnovaRow("", "", 0, *[float("nan")] * 4)
    regression, residual = rows["regression"], rows["residual"]
    return {
        "residual_sd": result.fit.residual_sd,
        "r_squared": result.fit.r_squared,
        "df_regression": regression.df,
        "df_residual": residual.df,
        "ss_regression": regression.ss,
        "ms_regression": regression.ms,
        "f": regression.f,
        "ss_residual": residual.ss,
        "ms_residual": residual.ms,
        "lack_of_fit_f": rows.get("lack of fit", nothing).f,
        "ss_lack_of_fit": rows.get("lack of fit", nothing).ss,
        "ss_pure_error": rows.get("pure error", nothing).ss,
        "lack_of_fit_df": [rows[name].df for name in ("lack of fit", "pure error") if name in rows],
    }


def agrees(value: float, printed: str, digits: int) -> bool:
    """Whether the value is what is printed, to half a unit of the last digit printed (at most `digits` of them).

    A double's own half unit (2^-53 of it) is allowed for: the truth may lie just on the other side of a rounding.
    """
    if printed == "Infinity":
        return value == float("inf")
    wanted = Decimal(printed)
    if not wanted:
        return value == 0
    last = wanted.adjusted() + 1 - min(digits, len(wanted.as_tuple().digits))
    return abs(Decimal(value) - wanted) <= Decimal(5).scaleb(last - 1) + abs(Decimal(value)) * Decimal(2) ** -53


def by_label(result: ModelResult, values: np.ndarray) -> dict[str, float]:
    return {column.label: value for column, value in zip(result.design.columns, values.tolist(), strict=True)}


@pytest.mark.parametrize("name", FITS)
def test_published_digits(name: str) -> None:
    case = FITS[name]
    result = fit_model(case.spec, case.observations)
    found = figures(result)
    coefficients = by_label(result, result.fit.coefficients)
    errors = by_label(result, result.fit.standard_errors)
    assert set(case.published["coefficients"]) <= set(coefficients)
    for figure, printed in case.published.items():
        if figure in ("coefficients", "standard_errors"):
            values = coefficients if figure == "coefficients" else errors
            for label, text in printed.items():
                assert agrees(values[label], text, case.digits), (figure, label, values[label], text)
        elif isinstance(printed, str):
            assert agrees(found[figure], printed, case.digits), (figure, found[figure], printed)
        else:
            assert found[figure] == printed, figure


@pytest.mark.parametrize("name", STRD_FITS)
def test_every_strd_figure_is_the_double_nearest_to_the_truth(name: str) -> None:
    """Truth: exact rational arithmetic on the printed data, to 25 digits (kept with the sets)."""
    case = STRD_FITS[name]
    result = fit_model(case.spec, case.observations)
    found = figures(result)
    for figure, exact in case.exact.items():
        if figure == "coefficients":
            assert by_label(result, result.fit.coefficients) == {label: float(text) for label, text in exact.items()}
        elif figure == "standard_errors":
            assert by_label(result, result.fit.standard_errors) == {label: float(text) for label, text in exact.items()}
        else:
            assert found[figure] == float(exact), figure


@pytest.mark.parametrize("name", [name for name in FITS if name not in STRD_FITS])
def test_literature_against_its_exact_recomputation(name: str) -> None:
    """Shaped and weighted columns are doubles there, decimals here: equal to 1e-13."""
    case = FITS[name]
    result = fit_model(case.spec, case.observations)
    found = {**figures(result), **_flat("coefficients", by_label(result, result.fit.coefficients))}
    found.update(_flat("standard_errors", by_label(result, result.fit.standard_errors)))
    wanted = {
        key: value
        for figure, exact in case.exact.items()
        for key, value in (_flat(figure, exact) if isinstance(exact, dict) else {figure: exact}).items()
    }
    for key, exact in wanted.items():
        if isinstance(exact, str):
            assert found[key] == pytest.approx(float(exact), rel=1e-13), key
        else:
            assert found[key] == exact, key


def _flat(figure: str, values: dict[str, object]) -> dict[str, object]:
    return {f"{figure} {label}": value for label, value in values.items()}


def test_filip_residuals_to_the_last_digit() -> None:
    """Degree 10: a row's terms cancel ten digits, and yet the residuals add up against the columns to nothing."""
    case: PublishedFit = load("filip").fits[0]
    result = fit_model(case.spec, case.observations)
    from fractions import Fraction

    x = [Fraction(repr(v)) for v in case.observations.numbers("x").tolist()]
    residual = [Fraction(v) for v in result.fit.residual.tolist()]
    for power in range(11):
        terms = [e * v**power for e, v in zip(residual, x, strict=True)]
        assert abs(float(sum(terms))) < 1e-15 * float(sum(abs(t) for t in terms))
    assert sum(result.influence.leverage) == pytest.approx(11, abs=1e-13)


def test_a_perfect_fit_says_so() -> None:
    """Wampler1: residual sum of squares exactly 0, standard errors 0, F and t without bound, p 0."""
    case = load("wampler1").fits[0]
    fit = fit_model(case.spec, case.observations).fit
    assert fit.ss_residual == 0.0
    assert (fit.standard_errors == 0).all()
    assert np.isinf(fit.t).all()
    assert (fit.p == 0).all()
    assert (fit.f, fit.f_p, fit.r_squared) == (float("inf"), 0.0, 1.0)
    assert (fit.low == fit.coefficients).all()
