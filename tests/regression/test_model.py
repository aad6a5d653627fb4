"""`fit_model` from one end to the other: everything is there, hangs together, and rows left out stay left out."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import statsmodels.api as sm

from bridge.regression import crossvalidation, design
from bridge.regression.core import fit_model
from bridge.regression.errors import ConstantResponse, OneLevel, RegressionError, TooFewRows
from bridge.regression.spec import (
    CategoryTerm,
    CrossedTerm,
    Errors,
    FitBy,
    Levels,
    ModelSpec,
    NumberTerm,
    Observations,
    Search,
    Shape,
)


def yard(seed: int = 1, n: int = 80) -> Observations:
    """Invented: hours for refits of boats."""
    rng = np.random.default_rng(seed)
    length, coats = np.round(rng.uniform(8, 38, n), 1), rng.integers(1, 6, n) * 1.0
    hull = np.concatenate([np.arange(3), rng.integers(0, 3, n - 3)])
    hours = np.round(4 * length**1.1 * (1 + 0.2 * hull) * np.exp(0.15 * rng.standard_normal(n)) + 25 * coats, 1)
    noise = np.round(rng.standard_normal(n), 2)
    weight = np.round(rng.uniform(0.5, 2, n), 2)
    columns = {"length": length, "coats": coats, "hull": Levels(hull, ("alu", "steel", "wood")), "hours": hours}
    return Observations({**columns, "noise": noise, "w": weight, "crew": Levels(np.arange(n) % 7, tuple("abcdefg"))}, n)


TERMS = (NumberTerm("length"), NumberTerm("coats"), CategoryTerm("hull"))
SPEC = ModelSpec("hours", terms=TERMS, crossed=(CrossedTerm("length", "hull"),))


@pytest.mark.parametrize(
    "change",
    [
        {},
        {"weight": "w"},
        {"response_shape": Shape.LOG},
        {"response_shape": Shape.ROOT, "intercept": False},
        {"fit_by": FitBy.RESISTANT},
        {"errors": Errors.UNEVEN_SPREAD, "weight": "w"},
        {"errors": Errors.GROUPED, "group": "crew"},
        {"errors": Errors.SERIAL, "order": "coats"},
    ],
    ids=str,
)
def test_every_kind_of_fit_is_whole(change):
    observations = yard()
    spec = replace(SPEC, **change)
    result = fit_model(spec, observations)
    fit, n, p = result.fit, 80, len(result.design.columns)
    assert result.spec == result.asked == spec
    assert result.design.matrix.shape == (n, p)
    for values in (fit.coefficients, fit.standard_errors, fit.t, fit.p, fit.low, fit.high, fit.vif, fit.standardised):
        assert values.shape == (p,)
    for values in (fit.fitted, fit.residual, result.influence.leverage, result.cross_validation.predicted):
        assert values.shape == (n,)
        assert np.isfinite(values).all()
    assert fit.fitted == pytest.approx(result.design.matrix @ fit.coefficients, rel=1e-9)
    assert fit.fitted + fit.residual == pytest.approx(design.response(spec, observations), rel=1e-12)
    assert (fit.low < fit.coefficients).all()
    assert (fit.coefficients < fit.high).all()
    weights = observations.numbers("w") if spec.weight else np.ones(n)
    assert result.influence.leverage.sum() == pytest.approx(p)
    assert result.max_leverage == pytest.approx((result.influence.leverage / weights).max())
    assert (result.back is None) == (spec.response_shape is Shape.AS_IS)
    assert [(one.column, one.low, one.high) for one in result.ranges] == [
        (name, observations.numbers(name).min(), observations.numbers(name).max()) for name in ("length", "coats")
    ]
    assert {row.block for row in result.anova.rows} >= {"main", "added last", "added in order"}


def test_a_search_shows_what_was_asked_and_what_was_fitted():
    candidates = (NumberTerm("length"), NumberTerm("coats", candidate=True), NumberTerm("noise", candidate=True))
    asked = ModelSpec("hours", terms=candidates, search=Search.BIC)
    result = fit_model(asked, yard())
    assert result.asked == asked
    assert result.search is not None
    assert result.search.dropped == ("noise",)
    assert [term.column for term in result.spec.terms] == ["length", "coats"]
    assert [column.label for column in result.design.columns] == ["intercept", "length", "coats"]
    assert result.cross_validation.includes_search


@pytest.mark.parametrize(
    "change",
    [{"search": Search.BIC}, {"fit_by": FitBy.RESISTANT}, {"response_shape": Shape.LOG, "fit_by": FitBy.RESISTANT}],
    ids=str,
)
def test_rows_left_out_are_predicted_by_a_fit_that_never_saw_them(change):
    """Changing a row's response changes no prediction of its own fold."""
    terms = (NumberTerm("length"), CategoryTerm("hull"), NumberTerm("noise", candidate=True))
    spec, observations = ModelSpec("hours", terms=terms, folds=4, **change), yard()
    before = fit_model(spec, observations).cross_validation
    hours = observations.numbers("hours").copy()
    hours[10] += 40
    after = fit_model(spec, Observations({**observations.columns, "hours": hours}, 80)).cross_validation
    own = before.fold_of == before.fold_of[10]
    assert after.predicted[own] == pytest.approx(before.predicted[own], rel=1e-9)
    assert not np.allclose(after.predicted[~own], before.predicted[~own], rtol=1e-9)


def test_a_level_in_a_single_row_is_not_predicted_from_the_others():
    observations = yard()
    codes = observations.levels("hull").codes.copy()
    codes[codes == 2] = 1
    codes[5] = 2
    columns = {**observations.columns, "hull": Levels(codes, ("alu", "steel", "wood"))}
    for fit_by in FitBy:
        spec = ModelSpec("hours", terms=TERMS, fit_by=fit_by)
        found = fit_model(spec, Observations(columns, 80)).cross_validation
        assert np.flatnonzero(np.isnan(found.predicted)).tolist() == [5]
        assert np.isfinite(found.rmse)


def test_ten_folds_by_hand():
    observations = yard()
    result = fit_model(ModelSpec("hours", terms=TERMS), observations)
    y, x, fold_of = observations.numbers("hours"), result.design.matrix, result.cross_validation.fold_of
    for fold in range(10):
        out = fold_of == fold
        b = sm.OLS(y[~out], x[~out]).fit().params
        assert result.cross_validation.predicted[out] == pytest.approx(x[out] @ b, rel=1e-9)


def test_grouped_errors_want_groups():
    observations = yard()
    one = Observations({**observations.columns, "crew": Levels(np.zeros(80, dtype=int), ("x",))}, 80)
    with pytest.raises(OneLevel) as error:
        fit_model(replace(SPEC, errors=Errors.GROUPED, group="crew"), one)
    assert error.value.column == "crew"
    with pytest.raises(RegressionError):
        fit_model(replace(SPEC, errors=Errors.GROUPED), observations)


def test_many_rows_go_the_same_way():
    n = 12_000
    small, large = fit_model(SPEC, yard(3, 5_000)), fit_model(SPEC, yard(3, n))
    assert small.fit.digits is None
    assert large.fit.coefficients == pytest.approx(small.fit.coefficients, rel=0.5, abs=5)
    y, x = large.observed, large.design.matrix
    theirs = sm.OLS(y, x).fit()
    assert large.fit.coefficients == pytest.approx(theirs.params, rel=1e-9)
    assert large.fit.standard_errors == pytest.approx(theirs.bse, rel=1e-9)
    assert large.fit.aic == pytest.approx(theirs.aic, rel=1e-12)
    assert crossvalidation.fold_assignment(SPEC, yard(3, n))[1] == 10


def test_a_constant_response_is_refused_before_any_search():
    columns = {**yard().columns, "hours": np.full(80, 3.0)}
    asked = ModelSpec("hours", terms=(NumberTerm("length", candidate=True),), search=Search.CP)
    with pytest.raises(ConstantResponse):
        fit_model(asked, Observations(columns, 80))


def test_a_search_without_candidates_is_a_plain_fit():
    plain, searched = fit_model(SPEC, yard()), fit_model(replace(SPEC, search=Search.CP), yard())
    assert searched.search is None
    assert searched.fit.coefficients.tolist() == plain.fit.coefficients.tolist()
    assert searched.cross_validation.rmse == plain.cross_validation.rmse
    assert not searched.cross_validation.includes_search


def test_a_search_among_too_few_rows_is_refused():
    columns = {"a": np.array([0.0, 2.0]), "c": Levels(np.array([1, 0]), ("p", "q")), "y": np.array([0.86, -1.38])}
    terms = (NumberTerm("a", candidate=True), CategoryTerm("c"))
    with pytest.raises(TooFewRows):
        fit_model(ModelSpec("y", terms=terms, search=Search.CP), Observations(columns, 2))
