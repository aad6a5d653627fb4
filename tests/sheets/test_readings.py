"""Checks in words: what is said follows the figures, is hedged, and is whole for every figure that may come."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from bridge.regression.results import Alias, BoxCox, Check, TermVif
from bridge.regression.spec import Errors, Shape
from bridge.sheets import readings, remarks
from tests.sheets.cases import five_rows, yard

KEYS = ("spread", "spread_any_form", "normality", "serial", "serial_order", "form", "lack_of_fit", "not known here")
PROBABILITIES = st.floats(0, 1) | st.just(math.nan)


def check(key: str, p: float, **more: object) -> Check:
    made = Check(key, "a method", "F", 2.5, (2.0, 110.0), p, math.nan, "A source 1950")
    return replace(made, **more)


def one(key: str, p: float, spec: dict[str, object] | None = None, **more: object) -> readings.Reading:
    model, result = yard().fitted[0]
    result = replace(result, checks=(check(key, p, **more),), spec=replace(result.spec, **(spec or {})))
    return readings.checks(model, result)[0]


@given(st.sampled_from(KEYS), PROBABILITIES, st.floats(-1, 1) | st.just(math.nan), st.sampled_from(list(Errors)))
def test_every_check_ends_in_a_whole_sentence(key, p, estimate, errors):
    reading = one(key, p, {"errors": errors}, estimate=estimate)
    assert reading.text[0].isupper()
    assert reading.text.endswith(".")
    assert "nan" not in reading.text
    assert ".." not in reading.text
    assert reading.df == "2 and 110"


@given(st.sampled_from(KEYS[:-1]), st.floats(0, 1))
def test_what_is_said_follows_the_p_value(key, p):
    reading = one(key, p)
    if p >= readings.SIGN:
        assert reading.weight == 0
        assert "Clear" not in reading.text
    else:
        assert reading.weight >= 1
        assert not reading.text.startswith("No sign")
    assert ("lear" in reading.text) == (p < readings.CLEAR)


def test_a_check_without_a_p_value_says_why():
    reading = one("normality", math.nan, note="more than 5000 rows")
    assert reading.text == "More than 5000 rows."
    assert reading.weight == 0


def test_standard_errors_that_allow_for_it_are_named_instead_of_advised():
    plain, covered = one("serial", 0.001), one("serial", 0.001, {"errors": Errors.SERIAL})
    assert "Serial standard errors allow for it" in plain.text
    assert "The standard errors asked for allow for this" in covered.text
    assert covered.weight < plain.weight


def test_the_order_column_is_named():
    assert "in the order of month" in one("serial", 0.5).text
    told = one("serial", 0.5, {"order": None}, note="in the order of the rows on the sheet")
    assert told.text.endswith("than others. In the order of the rows on the sheet.")


def test_spread_that_grows_is_said_to_grow():
    model, result = yard().fitted[0]
    growing = result.influence.internal * 0 + np.sign(result.influence.internal) * result.fit.fitted / 100
    grown = replace(result, influence=replace(result.influence, internal=growing), checks=(check("spread", 0.001),))
    assert "grows with the size of the estimate" in readings.checks(model, grown)[0].text
    shrunk = replace(grown, influence=replace(result.influence, internal=1 / growing))
    assert "shrinks with the size of the estimate" in readings.checks(model, shrunk)[0].text


def test_the_outlying_row_is_named_by_its_sheet_row_and_label():
    model, result = yard().fitted[0]
    outlier = next(r for r in readings.checks(model, result) if r.name == "outlying row")
    assert outlier.text.startswith("Row 32 (Job 130) lies further above")  # typed too high on purpose
    assert outlier.p < 0.001
    assert outlier.value == result.influence.external[result.influence.outlier_index]


@pytest.mark.parametrize(
    ("power", "low", "high", "suggestion", "shape", "wanted", "weight"),
    [
        (0.9, 0.5, 1.3, "as is", Shape.AS_IS, "agrees with the data", 0),
        (0.1, -0.2, 0.3, "log", Shape.AS_IS, "in logs", 1),
        (0.1, -0.2, 0.3, "log", Shape.LOG, "agrees with the data", 0),
        (2.4, 1.8, 3.0, "", Shape.AS_IS, "none of the plain ones", 1),
    ],
)
def test_the_scale_of_the_response_is_advice(power, low, high, suggestion, shape, wanted, weight):
    model, result = yard().fitted[0]
    told = replace(
        result, box_cox=BoxCox(power, low, high, suggestion), spec=replace(result.spec, response_shape=shape)
    )
    reading = readings.checks(model, told)[-1]
    assert wanted in reading.text
    assert reading.weight == weight


@given(st.floats(1, 1e6), st.integers(1, 30))
def test_entangled_terms_are_told_by_the_scaled_figure(gvif, df):
    scaled = gvif ** (1 / (2 * df))
    text, weight = readings.vif(TermVif("length", df, gvif, scaled))
    assert weight == (2 if scaled**2 > 10 else 1 if scaled**2 > 5 else 0)
    assert text


@pytest.mark.parametrize(("index", "weight"), [(8, 0), (11, 1), (31, 2)])  # Belsley, Kuh & Welsch 1980: 10 and 30
def test_condition_indexes_are_told_by_the_published_thresholds(index, weight):
    assert readings.condition(index)[1] == weight


def test_an_aliased_column_names_what_it_depends_on():
    found = Alias("share c", (("intercept", 100.0), ("share a", -1.0), ("share b", -1.0)), True)
    assert readings.alias(found) == (
        "share c says nothing that others do not say already: it is exactly 100 − share a − share b. "
        "It was left out of the fit."
    )


def test_the_coefficient_that_a_row_moves_most_is_named():
    model, result = yard().fitted[0]
    at = result.influence.outlier_index
    most = int(np.argmax(np.abs(result.influence.dfbetas[at])))
    text = readings.moves(model, result, at)
    assert result.design.columns[most].label.replace("length (m)", "length") in text
    assert ("falls" in text) == (result.influence.dfbetas[at, most] > 0)


# --- remarks on rows ----------------------------------------------------------------------------


def test_rows_are_marked_by_the_stated_thresholds():
    _, result = yard().fitted[0]
    found = remarks.marks(result)
    n, p = result.fit.n, len(result.design.columns)
    # the 10% and 50% points of F(p, n - p), here from scipy.stats
    weak = min(max(stats.f.ppf(0.1, p, n - p), 4 / (n - p)), stats.f.ppf(0.5, p, n - p))
    assert (found.pulls == (result.influence.cooks_distance > weak)).all()
    assert (found.strongly == (result.influence.cooks_distance > stats.f.ppf(0.5, p, n - p))).all()
    assert (found.large == (np.abs(result.influence.external) > 3)).all()
    texts = remarks.remarks(result)
    assert [bool(text) for text in texts] == found.any.tolist()
    assert "standard deviations above the fit" in texts[result.influence.outlier_index]


def test_a_row_that_the_fit_must_go_through_is_told_so():
    _, result = five_rows().fitted[0]
    lone = result.influence.leverage.copy()
    lone[2] = 1.0
    text = remarks.remarks(replace(result, influence=replace(result.influence, leverage=lone)))[2]
    assert "whatever it holds" in text


def test_small_weights_of_a_resistant_fit_are_remarked():
    _, result = five_rows().fitted[0]
    weights = np.array([1.0, 1.0, 0.31, 1.0, 1.0])
    texts = remarks.remarks(replace(result, fit=replace(result.fit, robust_weights=weights)))
    assert "weight 0.31" in texts[2]
    assert "weight" not in texts[0]
