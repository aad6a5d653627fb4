"""The setting block: every form in which people type a level, a choice, a count, a comparison."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.messages import CATALOGUE
from bridge.regression.spec import BackOn, Errors, FitBy, Search
from bridge.workbook import settings
from bridge.workbook.entries import Misread
from bridge.workbook.request import Scalar


def read(label: str, typed: Scalar) -> object:
    setting = settings.known(label)
    assert setting is not None
    return setting.read(typed)


@pytest.mark.parametrize("typed", ["95%", "95 %", 0.95, 95, 95.0, "0.95", "0,95", "95 percent", "95"])
def test_ninety_five_percent(typed: Scalar) -> None:
    assert read("interval level", typed) == 0.95


def test_other_levels() -> None:
    assert read("interval level", "99,9 %") == 0.999
    assert read("interval level", 0.5) == 0.5


@pytest.mark.parametrize("typed", ["0.05", 0.05, 5, "100%", 100, 1, 0, -95, "ninety", True, "", "95%%"])
def test_no_level(typed: Scalar) -> None:
    found = read("interval level", typed)
    assert isinstance(found, Misread)
    assert found.key == "level-out-of-range"


@pytest.mark.parametrize(
    ("label", "typed", "meaning"),
    [
        ("standard errors", "Uneven Spread", Errors.UNEVEN_SPREAD),
        ("standard errors", "uneven spread (HC3)", Errors.UNEVEN_SPREAD),
        ("standard errors", "serial", Errors.SERIAL),
        ("standard errors", "grouped", Errors.GROUPED),
        ("standard errors", "ordinary", Errors.ORDINARY),
        ("intercept", "no", False),
        ("intercept", True, True),
        ("intercept", 0.0, False),
        ("fit by", "resistant (Huber)", FitBy.RESISTANT),
        ("fit by", "least squares", FitBy.LEAST_SQUARES),
        ("search", "adjusted r2", Search.ADJUSTED_R2),
        ("search", "adjusted R²", Search.ADJUSTED_R2),
        ("search", "CP", Search.CP),
        ("search", "bic", Search.BIC),
        ("search", "cross validation", Search.CROSS_VALIDATION),
        ("search", "none", Search.NONE),
        ("folds", 5.0, 5),
        ("folds", "5", 5),
        ("lags", 0, 0),
        ("estimate back on", "Fitted", BackOn.FITTED),
    ],
)
def test_meanings(label: str, typed: Scalar, meaning: object) -> None:
    assert read(label, typed) == meaning


@pytest.mark.parametrize(
    ("label", "typed"),
    [("folds", 1), ("folds", 2.5), ("folds", "ten"), ("folds", True), ("lags", -1), ("lags", "3.5"), ("folds", 1e9)],
)
def test_no_whole_number(label: str, typed: Scalar) -> None:
    found = read(label, typed)
    assert isinstance(found, Misread)
    assert found.key == "setting-not-whole"


def test_did_you_mean() -> None:
    found = read("standard errors", "uneven")
    assert isinstance(found, Misread)
    assert "uneven spread" in str(found.fields["hint"])
    assert found.fields["choices"] == "ordinary, uneven spread, grouped, serial"


@pytest.mark.parametrize(
    ("typed", "meaning"),
    [
        ("equals", "equals"), ("is", "equals"), ("=", "equals"), ("", "equals"), ("not", "is not"),
        ("Is Not", "is not"),
        ("<>", "is not"), ("at least", "at least"), ("is at least", "at least"), (">=", "at least"), (">", "above"),
        ("less than", "below"), ("between", "between"), ("is between", "between"), ("\u2264", "at most"),
    ],
)  # fmt: skip
def test_comparisons(typed: str, meaning: str) -> None:
    assert settings.comparison(typed) == meaning


@pytest.mark.parametrize("typed", ["5 and 12", "5 to 12", "5; 12", "5;12", "5 - 12", "5..12", "5 \u2013 12"])
def test_two_values(typed: str) -> None:
    assert settings.two_values(typed) == ("5", "12")


@pytest.mark.parametrize("typed", ["5", "5 and", "1 and 2 and 3", 5.0, ""])
def test_not_two_values(typed: Scalar) -> None:
    assert settings.two_values(typed) is None


def test_the_second_filter_has_keys_of_its_own() -> None:
    keys = settings.keys([row.label for row in settings.ROWS])
    assert len(set(keys)) == len(keys)
    assert keys[4:10] == ["use rows where", "is", "value", "and where", "and is", "and value"]
    assert settings.keys(["my own row", "  INTERVAL  level "]) == [None, "interval level"]


@given(st.sampled_from(settings.ROWS), st.text(max_size=40) | st.floats() | st.integers() | st.booleans())
def test_anything_typed_is_answered(setting: settings.Setting, typed: Scalar) -> None:
    found = setting.read(typed)
    if isinstance(found, Misread):
        assert CATALOGUE[found.key][1].format(at="E7", **found.fields)
