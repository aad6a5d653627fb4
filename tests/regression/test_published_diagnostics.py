"""Published figures of the examination. From memory throughout, except where another source is named.

The data sets are those of `tests/reference`, whose files name their sources, and two small tables given here.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats
from sklearn.datasets import load_diabetes

from bridge.regression import durbinwatson
from bridge.regression.core import fit_model
from bridge.regression.normality import shapiro_p, shapiro_w
from bridge.regression.results import ModelResult
from bridge.regression.search import run as search
from bridge.regression.spec import CategoryTerm, FitBy, Levels, ModelSpec, NumberTerm, Observations, Search, Shape
from tests.reference import load


def fitted(name: str, number: int = 0, **changes: object) -> ModelResult:
    case = load(name).fits[number]
    return fit_model(replace(case.spec, **changes), case.observations)


# --- case by case ------------------------------------------------------------------------------------------


def test_stack_loss_cases() -> None:
    """Cook (1979), Belsley, Kuh & Welsch (1980), Atkinson (1985): rows 4 and 21 stand out, row 17 lies farthest."""
    influence = fitted("stack_loss").influence
    assert influence.leverage[[0, 1, 16, 20]].round(2).tolist() == [0.30, 0.32, 0.41, 0.28]
    assert influence.internal[[3, 20]].round(2).tolist() == [1.88, -2.64]
    assert influence.external[[3, 20]].round(2).tolist() == [2.05, -3.33]
    assert influence.cooks_distance[[0, 3, 20]].round(2).tolist() == [0.15, 0.13, 0.69]
    assert round(float(influence.dffits[20]), 2) == -2.10
    assert influence.outlier_index == 20


def test_forbes_case_12() -> None:
    """Weisberg (1985), section 5.3: t = 12.4 for case 12 of Forbes's data, log pressure on boiling point."""
    influence = fitted("forbes", response_shape=Shape.LOG).influence
    assert influence.outlier_index == 11
    assert influence.external[11] == pytest.approx(12.4, abs=0.05)
    assert influence.cooks_distance[11] == pytest.approx(0.469, abs=0.002)
    assert influence.outlier_p == pytest.approx(17 * 2 * stats.t.sf(influence.external[11], 14), rel=1e-9)


def test_anscombe_third_and_fourth_set() -> None:
    """Anscombe (1973): one row off an exact line; one row that alone makes the slope."""
    third, fourth = (fitted("anscombe", number).influence for number in (2, 3))
    assert third.external[third.outlier_index] == pytest.approx(1203.5, abs=0.1)
    assert np.sum(fourth.leverage == 1) == 1
    assert np.isnan(fourth.external[fourth.leverage == 1]).all()
    assert np.isfinite(fourth.external[fourth.leverage < 1]).all()


# --- overlap of predictors ----------------------------------------------------------------------------------


def test_longley_overlap() -> None:
    """Condition number 43,275 of the columns scaled to length 1; variance inflation, e.g. Greene (2003)."""
    overlap = fitted("longley").collinearity
    assert overlap.condition_indexes[-1] == pytest.approx(43275, abs=0.5)
    vifs = {term.term: term.gvif for term in overlap.terms}
    printed = {"x1": 135.53, "x2": 1788.51, "x3": 33.62, "x4": 3.59, "x5": 399.15, "x6": 758.98}
    assert vifs == pytest.approx(printed, abs=0.005)


def test_hald_overlap() -> None:
    """Variance inflation of Hald's data, e.g. Montgomery, Peck & Vining (2001)."""
    vifs = [term.gvif for term in fitted("hald").collinearity.terms]
    assert vifs == pytest.approx([38.5, 254.4, 46.9, 282.5], abs=0.05)


# --- rows left out, search -----------------------------------------------------------------------------------


@pytest.mark.parametrize(("number", "press"), [(0, 110.35), (1, 93.88)])
def test_hald_press(number, press) -> None:
    """Sum of squared misses with each row left out (Montgomery, Peck & Vining 2001)."""
    result = fitted("hald", number)
    assert (1 - result.fit.loo_r_squared) * result.fit.ss_total == pytest.approx(press, abs=0.005)


def test_hald_all_subsets() -> None:
    """Mallows's Cp of all subsets (Draper & Smith 1998, chapter 15): x1 and x2 with 2.7 are best."""
    case = load("hald").fits[0]
    terms = tuple(NumberTerm(f"x{j}", candidate=True) for j in range(1, 5))
    found = search(ModelSpec("heat", terms=terms, search=Search.CP), case.observations)
    assert found.subsets == 16
    assert set(found.chosen) == {"x1", "x2"}
    by_terms = {tuple(sorted(one.terms)): one.figure for one in found.best}
    printed = {
        ("x1", "x2"): 2.7,
        ("x1", "x2", "x4"): 3.0,
        ("x1", "x2", "x3"): 3.0,
        ("x1", "x3", "x4"): 3.5,
        ("x1", "x2", "x3", "x4"): 5.0,
        ("x1", "x4"): 5.5,
        ("x2", "x3", "x4"): 7.3,
        ("x3", "x4"): 22.4,
        ("x2", "x3"): 62.4,
    }
    assert {terms: by_terms[terms] for terms in printed} == pytest.approx(printed, abs=0.05)


# --- tests of what is taken for granted ------------------------------------------------------------------------


def test_white_of_credit_cards() -> None:
    """Greene (1993): White's statistic 14.329 for the expenditure data, on 12 degrees of freedom."""
    white = next(check for check in fitted("credit_card").checks if check.key == "spread_any_form")
    assert (white.method, white.df) == ("White", (12.0,))
    assert white.statistic == pytest.approx(14.329, abs=0.0005)


def test_shapiro_and_wilk_1965() -> None:
    """Their example, the weights of eleven men: W = 0.79; below the 1% point (0.792)."""
    weights = np.array([148.0, 154, 158, 160, 161, 162, 166, 170, 182, 195, 236])
    w = shapiro_w(weights)
    assert round(w, 2) == 0.79
    assert shapiro_p(w, 11) < 0.01


@pytest.mark.parametrize(
    ("n", "predictors", "low", "high"),
    [
        (15, 1, 1.077, 1.361),
        (20, 1, 1.201, 1.411),
        (20, 2, 1.100, 1.537),
        (50, 1, 1.503, 1.585),
        (100, 1, 1.654, 1.694),
    ],
)
def test_durbin_watson_bounds(n, predictors, low, high) -> None:
    """5% points of the bounds dL, dU (Savin & White 1977): the smallest, the largest weights 2 - 2 cos(pi j / n)."""
    weights = 2 - 2 * np.cos(np.pi * np.arange(1, n) / n)
    count = n - 1 - predictors
    for chosen, printed in ((weights[:count], low), (weights[-count:], high)):
        around = [durbinwatson._negative(chosen - d) for d in (printed - 0.00055, printed + 0.00055)]
        assert around[0] < 0.05 < around[1]


def test_lack_of_fit_of_the_pipeline() -> None:
    """NIST/SEMATECH e-Handbook 4.6.2: F = 0.9857 on 76 and 29 degrees of freedom (read from the page)."""
    lack = next(check for check in fitted("alaska").checks if check.key == "lack_of_fit")
    assert lack.df == (76.0, 29.0)
    assert lack.statistic == pytest.approx(0.9857, abs=0.0003)


# --- resistant fit, power of the response -----------------------------------------------------------------------


def test_stack_loss_resistant() -> None:
    """statsmodels' documentation of RLM (HuberT, k = 1.345)."""
    fit = fitted("stack_loss", fit_by=FitBy.RESISTANT).fit
    assert fit.coefficients == pytest.approx([-41.0265, 0.8294, 0.9261, -0.1278], abs=0.00005)
    assert fit.standard_errors == pytest.approx([9.792, 0.111, 0.303, 0.129], abs=0.0005)


TEXTILE = """
674 370 292 338 266 210 170 118 90
1414 1198 634 1022 620 438 442 332 220
3636 3184 2000 1568 1070 566 1140 884 360
"""


def test_box_and_cox_textile() -> None:
    """Box & Cox (1964), cycles to failure of worsted yarn, first-order model: power -0.06, -0.18 to 0.06."""
    levels = np.array([-1.0, 0.0, 1.0])
    length, amplitude, load_ = (grid.ravel() for grid in np.meshgrid(levels, levels, levels, indexing="ij"))
    cycles = np.array([float(value) for value in TEXTILE.split()])
    rows = Observations({"length": length, "amplitude": amplitude, "load": load_, "cycles": cycles}, 27)
    terms = (NumberTerm("length"), NumberTerm("amplitude"), NumberTerm("load"))
    found = fit_model(ModelSpec("cycles", terms=terms), rows).box_cox
    assert found is not None
    assert found.power == pytest.approx(-0.06, abs=0.005)
    assert (found.low, found.high) == pytest.approx((-0.18, 0.06), abs=0.01)
    assert found.suggestion == "log"


SURVIVAL = """
31 45 46 43   82 110 88 72   43 45 63 76   45 71 66 62
36 29 40 23   92 61 49 124   44 35 31 40   56 102 71 38
22 21 18 23   30 37 38 29    23 25 24 22   30 36 31 33
"""


def test_box_and_cox_poisons() -> None:
    """Box & Cox (1964), survival times of animals, poisons and treatments without interaction: power -0.75, 1/y."""
    times = np.array([float(value) / 100 for value in SURVIVAL.split()])
    poison = Levels(np.repeat([0, 1, 2], 16), ("I", "II", "III"))
    treatment = Levels(np.tile(np.repeat([0, 1, 2, 3], 4), 3), ("A", "B", "C", "D"))
    rows = Observations({"poison": poison, "treatment": treatment, "time": times}, 48)
    found = fit_model(ModelSpec("time", terms=(CategoryTerm("poison"), CategoryTerm("treatment"))), rows).box_cox
    assert found is not None
    assert found.power == pytest.approx(-0.75, abs=0.01)
    assert (found.low, found.high) == pytest.approx((-1.13, -0.37), abs=0.02)
    assert found.suggestion == "reciprocal"


# --- a table that a package brings -------------------------------------------------------------------------------


def test_diabetes() -> None:
    """Efron, Hastie, Johnstone & Tibshirani (2004), "Least angle regression": the full least-squares fit.

    Data as scikit-learn ships them; the coefficients as widely printed.
    """
    data = load_diabetes()
    columns = dict(zip(data.feature_names, data.data.T, strict=True)) | {"y": data.target}
    terms = tuple(NumberTerm(name) for name in data.feature_names)
    fit = fit_model(ModelSpec("y", terms=terms), Observations(columns, 442)).fit
    printed = [152.13, -10.01, -239.82, 519.85, 324.38, -792.18, 476.74, 101.04, 177.06, 751.27, 67.63]
    assert fit.coefficients == pytest.approx(printed, abs=0.01)
    assert fit.r_squared == pytest.approx(0.5177, abs=0.00005)
    assert fit.residual_sd == pytest.approx(54.15, abs=0.005)
