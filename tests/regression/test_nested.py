"""Nested models are found by what their columns span, whatever the terms are called."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import statsmodels.api as sm

from bridge.regression.core import fit_model
from bridge.regression.nested import _wald, compare
from bridge.regression.spec import (
    CategoryTerm,
    CrossedTerm,
    Errors,
    FitBy,
    Levels,
    ModelSpec,
    NumberTerm,
    Observations,
    Shape,
)
from tests.regression.problems import TWO, rows

KIND = Levels(np.arange(40) * 7 // 3 % 3, ("p", "q", "r"))
ROWS = rows(kind=KIND, thousand=np.arange(40.0) * 1000)
BASE = ModelSpec("y", terms=TWO)


def pairs(**specs: ModelSpec) -> list[tuple[str, str]]:
    return [(one.small, one.large) for one in compare({name: fit_model(s, ROWS) for name, s in specs.items()})]


def test_by_terms():
    """a in a + b in a + b + kind; a product; a bend; a power."""
    one = replace(BASE, terms=TWO[:1])
    many = replace(BASE, terms=(*TWO, CategoryTerm("kind")))
    assert pairs(A=one, B=BASE, C=many) == [("A", "B"), ("A", "C"), ("B", "C")]
    assert pairs(A=many, B=one) == [("B", "A")]
    crossed = replace(many, crossed=(CrossedTerm("a", "kind"),))
    assert ("B", "A") in pairs(A=crossed, B=many)
    bent = replace(BASE, terms=(NumberTerm("a", bends=(5.0,)), TWO[1]))
    curved = replace(BASE, terms=(NumberTerm("a", degree=3), TWO[1]))
    assert pairs(A=BASE, B=bent, C=curved) == [("A", "B"), ("A", "C")]


def test_other_names_for_the_same():
    """Other base level; a column and its double; sums of columns; a root of a square."""
    by_p = replace(BASE, terms=(CategoryTerm("kind", base="p"),))
    by_q = replace(BASE, terms=(CategoryTerm("kind", base="q"), NumberTerm("a")))
    assert pairs(A=by_p, B=by_q) == [("A", "B")]
    total = ROWS.numbers("a") + ROWS.numbers("b")
    observations = Observations({**ROWS.columns, "total": np.round(total, 2)}, 40)
    small = fit_model(ModelSpec("y", terms=(NumberTerm("total"),)), observations)
    large = fit_model(BASE, observations)
    assert [(one.small, one.large) for one in compare({"A": small, "B": large})] == [("A", "B")]


def test_no_intercept_within_levels():
    """All levels of a category span the intercept: a line with intercept is within them, and the reverse is not."""
    flat = replace(BASE, terms=(NumberTerm("a"),))
    levels = replace(BASE, terms=(NumberTerm("a"), CategoryTerm("kind")), intercept=False)
    assert pairs(A=flat, B=levels) == [("A", "B")]
    assert pairs(A=replace(flat, intercept=False), B=flat) == [("A", "B")]


def test_what_is_not_nested():
    other = replace(BASE, terms=(NumberTerm("thousand"),))
    assert pairs(A=other, B=BASE) == []
    assert pairs(A=BASE, B=replace(BASE)) == []  # the same model
    small = replace(BASE, terms=TWO[:1])
    assert pairs(A=small, B=replace(BASE, response_shape=Shape.LOG)) == []
    assert pairs(A=small, B=replace(BASE, weight="w")) == []
    assert pairs(A=small, B=replace(BASE, fit_by=FitBy.RESISTANT)) == []
    assert pairs(A=replace(small, weight="w"), B=replace(BASE, weight="w")) == [("A", "B")]


def test_other_rows_of_equal_number():
    """Same responses, other predictors under the same names: not nested."""
    turned = Observations({**ROWS.columns, "a": ROWS.numbers("a")[::-1].copy()}, 40)
    one, two = fit_model(replace(BASE, terms=TWO[:1]), turned), fit_model(BASE, ROWS)
    assert compare({"A": one, "B": two}) == ()


@pytest.mark.parametrize("weight", [None, "w"])
def test_partial_f(weight):
    small, large = replace(BASE, terms=TWO[:1], weight=weight), replace(BASE, weight=weight)
    results = {"A": fit_model(small, ROWS), "B": fit_model(large, ROWS)}
    (found,) = compare(results)
    root = np.ones(40) if weight is None else np.sqrt(ROWS.numbers("w"))
    models = [sm.OLS(ROWS.numbers("y") * root, r.design.matrix * root[:, None]).fit() for r in results.values()]
    f, p, df = models[1].compare_f_test(models[0])
    assert (found.f, found.p, found.df, found.df_residual) == pytest.approx((f, p, df, 37), rel=1e-9)
    t = results["B"].fit.t[-1]
    assert found.f == pytest.approx(t * t, rel=1e-10)


@pytest.mark.parametrize("weight", [None, "w"])
@pytest.mark.parametrize(
    ("errors", "kind"), [(Errors.UNEVEN_SPREAD, "HC3"), (Errors.GROUPED, "cluster"), (Errors.SERIAL, "HAC")]
)
def test_robust_covariances_judge_by_themselves(errors, kind, weight):
    """statsmodels' f_test of the coefficients added, with the same covariance; by the larger model's errors."""
    small = replace(BASE, terms=TWO[:1], weight=weight)
    large = replace(BASE, terms=(*TWO, CategoryTerm("kind", base="p")), weight=weight)
    large = replace(large, errors=errors, group="group", order="time", lags=2)
    results = {"A": fit_model(small, ROWS), "B": fit_model(large, ROWS)}
    (found,) = compare(results)
    root = np.ones(40) if weight is None else np.sqrt(ROWS.numbers("w"))
    order = np.argsort(ROWS.numbers("time"))
    options = {"cluster": {"groups": ROWS.numbers("group")[order]}, "HAC": {"maxlags": 2, "use_correction": True}}
    x = results["B"].design.matrix * root[:, None]
    model = sm.OLS((ROWS.numbers("y") * root)[order], x[order])
    theirs = model.fit(cov_type=kind, cov_kwds=options.get(kind), use_t=True).f_test(np.eye(5)[2:])
    assert found.robust
    assert (found.f, found.p) == pytest.approx((theirs.fvalue, theirs.pvalue), rel=1e-8)
    assert (found.df, found.df_residual) == (3, 9 if kind == "cluster" else 35)


def test_walds_f_with_the_ordinary_covariance_is_the_partial_f():
    small = fit_model(replace(BASE, terms=(NumberTerm("a"),)), ROWS)
    large = fit_model(replace(BASE, terms=(*TWO, CategoryTerm("kind"))), ROWS)
    (found,) = compare({"A": small, "B": large})
    assert not found.robust
    assert _wald(small, large, 3) == pytest.approx(found.f, rel=1e-10)


def test_fewer_groups_than_coefficients_added():
    thirds = Observations({**ROWS.columns, "group": np.arange(40.0) // 14}, 40)
    small = fit_model(replace(BASE, terms=TWO[:1]), thirds)
    large = replace(BASE, terms=(*TWO, CategoryTerm("kind")), errors=Errors.GROUPED, group="group")
    (found,) = compare({"A": small, "B": fit_model(large, thirds)})
    assert np.isnan(found.f)
    assert np.isnan(found.p)


def test_many_rows():
    observations = rows(n=30_000)
    results = {
        "A": fit_model(replace(BASE, terms=TWO[:1]), observations),
        "B": fit_model(BASE, observations),
        "C": fit_model(replace(BASE, terms=(NumberTerm("a", degree=2),)), observations),
    }
    assert [(one.small, one.large) for one in compare(results)] == [("A", "B"), ("A", "C")]


def test_exact_fits():
    a = np.arange(12.0)
    exact = Observations({"a": a, "b": (a * 5) % 7, "y": 2 * a + 1}, 12)
    (found,) = compare({"A": fit_model(replace(BASE, terms=TWO[:1]), exact), "B": fit_model(BASE, exact)})
    assert np.isnan(found.f)
    assert np.isnan(found.p)
    bent = Observations({"a": a, "b": a**2, "y": a**2}, 12)
    (found,) = compare({"A": fit_model(replace(BASE, terms=TWO[:1]), bent), "B": fit_model(BASE, bent)})
    assert (found.f, found.p) == (float("inf"), 0.0)
