"""The tests of assumptions: when they are made, on what, and their odd cases; figures: test_reference_problems.py."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import special, stats

from bridge.regression import auxiliary, checks, durbinwatson, normality
from bridge.regression.results import Check
from bridge.regression.spec import CategoryTerm, Levels, ModelSpec, NumberTerm, Observations
from tests.regression.problems import TWO, kernel, rows


def run(observations: Observations, **changes: object) -> dict[str, Check]:
    spec = ModelSpec("y", **({"terms": TWO} | changes))
    return {check.key: check for check in checks.run(kernel(observations, **changes), spec, observations)}


def test_which_tests_are_made():
    assert list(run(rows())) == ["spread", "spread_any_form", "normality", "serial", "form"]
    assert list(run(rows(), order="time")) == [
        "spread",
        "spread_any_form",
        "normality",
        "serial",
        "serial_order",
        "form",
    ]
    few = rows(a=np.repeat([1.0, 2.0, 4.0, 7.0], 10), b=np.zeros(40) + np.tile([1.0, 2.0], 20))
    assert list(run(few))[-1] == "lack_of_fit"
    assert all(check.source for check in run(few).values())


def test_an_exact_fit_is_not_tested():
    a = np.arange(12.0)
    assert run(Observations({"a": a, "y": 3 + 2 * a}, 12), terms=(NumberTerm("a"),)) == {}


def test_serial_tests_follow_the_order_column():
    """Sorting the rows beforehand gives the same; without an order column a note says in which order."""
    observations = rows(n=60)
    order = np.argsort(observations.numbers("time"))
    turned = Observations({name: column[order] for name, column in observations.columns.items()}, 60)
    one, other, unasked = run(observations, order="time"), run(turned, order="time"), run(turned)
    for key in ("serial", "serial_order"):
        assert one[key].statistic == pytest.approx(other[key].statistic, rel=1e-12)
        assert one[key].p == pytest.approx(other[key].p, rel=1e-9)
    assert one["serial"].note == ""
    assert unasked["serial"].statistic == pytest.approx(one["serial"].statistic, rel=1e-12)
    assert "order of the rows" in unasked["serial"].note


def test_correlated_rows_are_found_and_others_are_not():
    rng = np.random.default_rng(3)
    noise = rng.standard_normal(200)
    drifting = np.zeros(200)
    for i in range(200):
        drifting[i] = 0.6 * drifting[i - 1] + noise[i] if i else noise[i]
    a, time = rng.uniform(0, 10, 200), np.arange(200.0)
    for part, serial in ((noise, False), (drifting, True)):
        found = run(Observations({"a": a, "time": time, "y": a + part}, 200), terms=(NumberTerm("a"),), order="time")
        assert (found["serial"].p < 1e-6) == serial
        assert (found["serial_order"].p < 1e-6) == serial
        assert found["serial"].estimate == pytest.approx(0.6 if serial else 0.0, abs=0.15)


def test_too_many_columns_for_white():
    """More than 60 squares and products, or more than a third of the rows: the special form serves and says so."""
    columns = {f"x{j}": np.round(np.random.default_rng(j).normal(size=300), 2) for j in range(11)}
    terms = tuple(NumberTerm(name) for name in columns)
    y = np.round(np.random.default_rng(99).normal(size=300), 2)
    found = run(Observations(columns | {"y": y}, 300), terms=terms)["spread_any_form"]
    assert found.method == "White, fitted values and their squares"
    assert found.df == (2.0,)
    assert run(rows(n=14))["spread_any_form"].method == "White, fitted values and their squares"
    assert run(rows(n=16))["spread_any_form"].method == "White"


def test_products_that_repeat_columns_do_not_count():
    """A category's indicators equal their squares, and their products are zero."""
    observations = rows(n=90, kind=Levels(np.arange(90) % 3, ("p", "q", "r")))
    found = run(observations, terms=(NumberTerm("a"), CategoryTerm("kind")))["spread_any_form"]
    assert found.df == (6.0,)  # a, two indicators, a squared, a times each indicator


def test_form_of_a_category_alone():
    """Fitted values of two groups: their powers are in the model already."""
    observations = rows(kind=Levels(np.arange(40) % 2, ("p", "q")))
    form = run(observations, terms=(CategoryTerm("kind"),))["form"]
    assert np.isnan(form.p)
    assert "already in the model" in form.note


def test_too_few_rows_for_lags():
    found = run(rows(n=12), order="time", lags=9)["serial_order"]
    assert np.isnan(found.p)
    assert "too few rows" in found.note


def test_a_saturated_model_has_no_lack_of_fit():
    few = rows(kind=Levels(np.arange(40) % 4, ("p", "q", "r", "s")))
    lack = run(few, terms=(CategoryTerm("kind"),))["lack_of_fit"]
    assert np.isnan(lack.p)
    assert lack.note


def test_many_rows_are_judged_on_a_part():
    """The same part each time, spread evenly, and never in step with what repeats along the sheet."""
    observations = rows(n=60_000)
    found = run(observations)
    assert found["spread"].note == "judged on 50,000 rows spread evenly"
    assert found["spread"].p < 1e-12
    assert str(found) == str(run(observations))
    assert found["normality"].method == "Anderson-Darling"
    sample = auxiliary.even_sample(600_000, 50_000)
    assert len(sample) == 50_000
    assert (sample // 12 == np.arange(50_000)).all()
    assert np.bincount(sample % 12).min() > 3_900
    assert (auxiliary.even_sample(40, 50) == np.arange(40)).all()


# --- Durbin-Watson ------------------------------------------------------------------------------------------------


def test_exact_and_approximate_p_agree():
    """At 300 rows the beta distribution is good to some thousandths."""
    observations = rows(n=300)
    found, order = kernel(observations), np.argsort(observations.numbers("time"))
    for d in (1.6, 1.75, 1.9, 2.0, 2.2, 2.4):
        exact = durbinwatson._exact(d, auxiliary.orthonormal(found, order))
        assert durbinwatson._beta(d, found, order) == pytest.approx(exact, abs=2e-3)


@pytest.mark.parametrize("weight", [None, "w"])
def test_moments_by_blocks(weight):
    observations = rows(n=9_500)
    found, order = kernel(observations, weight=weight), np.argsort(observations.numbers("time"))
    qaq, squares = durbinwatson._moments(found, order)
    q = auxiliary.orthonormal(found, order)
    steps = np.diff(q, axis=0)
    twice = np.diff(np.vstack([np.zeros((1, 3)), steps, np.zeros((1, 3))]), axis=0)
    assert qaq == pytest.approx(steps.T @ steps, rel=1e-10)
    assert squares == pytest.approx(np.sum(twice**2), rel=1e-10)


def test_a_negative_sum_of_squares_with_known_probability():
    """Of two weights, one negative, the probability is that of a ratio of squares: F on 1 and 1."""
    for weight in (0.1, 1.0, 7.0):
        wanted = stats.f.cdf(weight, 1, 1)  # z1^2 < weight z2^2
        assert durbinwatson._negative(np.array([1.0, -weight])) == pytest.approx(wanted, abs=1e-12)
    wanted = stats.f.cdf(2.5 * 3 / 4, 4, 3)
    assert durbinwatson._negative(np.array([1.0] * 4 + [-2.5] * 3)) == pytest.approx(wanted, abs=1e-12)


def test_simulated_p_is_uniform():
    """Under the null the p value of d is uniform: 400 draws of one design."""
    rng = np.random.default_rng(5)
    base, p = rows(n=30), []
    for _ in range(400):
        y = base.numbers("a") + rng.standard_normal(30)
        p.append(run(Observations({**base.columns, "y": y}, 30))["serial"].p)
    assert stats.kstest(p, "uniform").pvalue > 0.01


# --- normality ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("n", [3, 4, 5, 6, 7, 11, 12, 50, 1_000, 5_000])
@pytest.mark.parametrize("seed", range(3))
def test_shapiro_at_every_size(n, seed):
    values = np.random.default_rng(seed).gamma(2.0, size=n)
    w, p = stats.shapiro(values)
    assert normality.shapiro_w(values) == pytest.approx(w, abs=1e-8)
    assert normality.shapiro_p(normality.shapiro_w(values), n) == pytest.approx(p, rel=1e-4, abs=1e-9)


def test_residuals_that_do_not_vary():
    found = normality.check(np.zeros(20))
    assert np.isnan(found.p)
    assert found.note
    assert np.isnan(normality.check(np.array([1.0, -1.0])).p)


def test_anderson_darling_limits():
    """D'Agostino & Stephens (1986), table 4.7: 5% at 0.752, 1% at 1.035 (from memory)."""
    for a2, p in ((0.752, 0.05), (1.035, 0.01)):
        assert normality.anderson_p(a2, 10**9) == pytest.approx(p, abs=0.0008)
    values = special.ndtri((np.arange(1, 20_001) - 0.5) / 20_000)
    assert normality.anderson_p(normality.anderson_darling(values), 20_000) > 0.99
