"""The analysis of variance against statsmodels and worked examples."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
import statsmodels.formula.api as smf
from statsmodels.stats.anova import anova_lm

from bridge.regression import anova, leastsquares
from bridge.regression.spec import CategoryTerm, CrossedTerm, Levels, ModelSpec, NumberTerm, Observations
from tests.reference import load

WOODS = ("ash", "elm", "oak")


def yard(seed: int, n: int = 90) -> tuple[Observations, pd.DataFrame]:
    rng = np.random.default_rng(seed)
    codes = np.concatenate([np.arange(3), rng.integers(0, 3, n - 3)])
    x, z = np.round(rng.uniform(0, 10, n), 1), np.round(rng.normal(50, 5, n), 1)
    y = np.round(3 + x + codes * x / 3 + 0.1 * z + rng.standard_normal(n), 2)
    w = np.round(rng.uniform(0.5, 3, n), 2)
    frame = pd.DataFrame({"x": x, "z": z, "y": y, "w": w, "wood": [WOODS[code] for code in codes]})
    return Observations({"x": x, "z": z, "y": y, "w": w, "wood": Levels(codes, WOODS)}, n), frame


def table(spec: ModelSpec, observations: Observations) -> dict[str, dict[str, anova.AnovaRow]]:
    blocks: dict[str, dict[str, anova.AnovaRow]] = {}
    for row in anova.make(leastsquares.solve(spec, observations).kernel).rows:
        blocks.setdefault(row.block, {})[row.source] = row
    return blocks


def assert_row(row, df, ss, f, p):
    assert row.df == df
    assert row.ss == pytest.approx(ss, rel=1e-9)
    assert row.ms == pytest.approx(ss / df, rel=1e-9)
    assert row.f == pytest.approx(f, rel=1e-9)
    assert row.p == pytest.approx(p, rel=1e-8)


@pytest.mark.parametrize("weight", [None, "w"])
def test_added_in_order_is_statsmodels_type_1(weight):
    observations, frame = yard(1)
    terms = (NumberTerm("x"), CategoryTerm("wood", base="ash"), NumberTerm("z"))
    spec = ModelSpec("y", terms=terms, crossed=(CrossedTerm("x", "wood"),), weight=weight)
    formula = "y ~ x + C(wood) + z + x:C(wood)"
    fitted = smf.wls(formula, frame, weights=frame["w"]).fit() if weight else smf.ols(formula, frame).fit()
    theirs = anova_lm(fitted, typ=1)
    mine = table(spec, observations)["added in order"]
    # statsmodels sorts by kind of term: numbers' order differs, so the model is refitted term by term
    kept = ["1"]
    before = smf.wls("y ~ 1", frame, weights=frame["w"] if weight else 1.0).fit()
    for source, part in (("x", "x"), ("wood", "C(wood)"), ("z", "z"), ("x x wood", "x:C(wood)")):
        kept.append(part)
        after = smf.wls("y ~ " + " + ".join(kept), frame, weights=frame["w"] if weight else 1.0).fit()
        df, ss = int(before.df_resid - after.df_resid), before.ssr - after.ssr
        f = ss / df / fitted.mse_resid
        assert_row(mine[source], df, ss, f, _f_tail(f, df, fitted.df_resid))
        before = after
    assert theirs["sum_sq"]["Residual"] == pytest.approx(fitted.ssr)


def _f_tail(f, df, df_error):
    from scipy import stats

    return stats.f.sf(f, df, df_error)


@pytest.mark.parametrize("weight", [None, "w"])
def test_added_last_is_the_partial_f_of_leaving_the_term_out(weight):
    """Coding as it stands: the main term's line keeps the product's columns (Wald test of its coefficients)."""
    observations, frame = yard(2)
    terms = (NumberTerm("x", degree=2), CategoryTerm("wood", base="ash"), NumberTerm("z"))
    spec = ModelSpec("y", terms=terms, crossed=(CrossedTerm("x", "wood"),), weight=weight)
    kernel = leastsquares.solve(spec, observations).kernel
    mine = table(spec, observations)["added last"]
    weights = frame["w"] if weight else np.ones(len(frame))
    full = sm.WLS(frame["y"], kernel.x, weights=weights).fit()
    for source in ("x", "wood", "z", "x x wood"):
        places = [j for j, column in enumerate(kernel.columns) if column.term == source]
        f, p, df = full.compare_f_test(sm.WLS(frame["y"], np.delete(kernel.x, places, axis=1), weights=weights).fit())
        assert_row(mine[source], int(df), f * df * full.mse_resid, f, p)


def test_powers_are_added_one_by_one_and_stand_together_when_added_last():
    observations, frame = yard(3)
    blocks = table(ModelSpec("y", terms=(NumberTerm("x", degree=3), NumberTerm("z"))), observations)
    assert list(blocks["added in order"]) == ["x", "x^2", "x^3", "z"]
    assert list(blocks["added last"]) == ["x", "z"]
    theirs = anova_lm(smf.ols("y ~ x + I(x**2) + I(x**3) + z", frame).fit(), typ=1)
    assert blocks["added in order"]["x^2"].ss == pytest.approx(theirs["sum_sq"]["I(x ** 2)"], rel=1e-9)
    assert blocks["added last"]["x"].df == 3


def test_main_rows_add_up_and_have_the_usual_names():
    observations, _ = yard(4)
    rows = table(ModelSpec("y", terms=(NumberTerm("x"), NumberTerm("z"))), observations)["main"]
    assert list(rows) == ["regression", "residual", "total"]
    assert rows["regression"].ss + rows["residual"].ss == pytest.approx(rows["total"].ss, rel=1e-15)
    assert (rows["regression"].df, rows["residual"].df, rows["total"].df) == (2, 87, 89)
    assert math.isnan(rows["total"].ms)


def test_lack_of_fit_of_the_alaska_pipeline():
    """NIST/SEMATECH e-Handbook 4.6.2: F 0.9857 on 76 and 29; the sums from exact arithmetic."""
    case = load("alaska").fits[0]
    rows = table(case.spec, case.observations)["fit"]
    assert rows["lack of fit"].f == pytest.approx(0.9857, abs=5e-5)
    assert (rows["lack of fit"].df, rows["pure error"].df) == (76, 29)
    assert rows["pure error"].ss == float("1083.5833333333333333")
    assert rows["lack of fit"].ss == float("2799.0683000723217623")


@pytest.mark.parametrize("weight", [None, "w"])
def test_pure_error_is_the_residual_of_a_mean_for_every_group(weight):
    rng = np.random.default_rng(5)
    n = 70
    x, codes = rng.integers(0, 6, n) / 2.0, rng.integers(0, 3, n)
    y, w = np.round(rng.standard_normal(n) + x, 2), np.round(rng.uniform(0.5, 3, n), 2)
    observations = Observations({"x": x, "wood": Levels(codes, WOODS), "y": y, "w": w}, n)
    spec = ModelSpec("y", terms=(NumberTerm("x"), CategoryTerm("wood")), weight=weight)
    rows = table(spec, observations)["fit"]
    cells = pd.get_dummies(pd.Series([f"{a} {b}" for a, b in zip(x, codes, strict=True)])).astype(float)
    saturated = sm.WLS(y, cells, weights=w if weight else 1.0).fit()
    assert rows["pure error"].ss == pytest.approx(saturated.ssr, rel=1e-12)
    assert rows["pure error"].df == n - cells.shape[1]
    line = leastsquares.solve(spec, observations).kernel
    assert rows["lack of fit"].ss == pytest.approx(line.rss - saturated.ssr, rel=1e-10)
    assert rows["lack of fit"].df == cells.shape[1] - line.p


def test_no_lack_of_fit_without_repeats_or_with_a_coefficient_for_each_group():
    observations, _ = yard(6)
    assert "fit" not in table(ModelSpec("y", terms=(NumberTerm("x"), NumberTerm("z"))), observations)
    assert "fit" not in table(ModelSpec("y", terms=(CategoryTerm("wood"),)), observations)


def test_without_an_intercept_sums_are_about_zero():
    """StRD NoInt1: regression on 1, total on 11 degrees of freedom."""
    case = load("noint1").fits[0]
    rows = table(case.spec, case.observations)["main"]
    assert (rows["regression"].df, rows["total"].df) == (1, 11)
    assert rows["total"].ss == float(np.sum(case.observations.numbers("y") ** 2))


def test_intercept_alone():
    observations, frame = yard(7)
    rows = table(ModelSpec("y"), observations)["main"]
    assert rows["regression"].df == 0
    assert math.isnan(rows["regression"].f)
    assert rows["residual"].ss == pytest.approx(float(((frame["y"] - frame["y"].mean()) ** 2).sum()), rel=1e-14)
