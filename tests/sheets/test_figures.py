"""Digits: published rounding examples, and properties over all sizes of numbers."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.page.cells import Format
from bridge.sheets import figures, measure

SIZES = st.floats(min_value=1e-300, max_value=1e300) | st.floats(min_value=-1e300, max_value=-1e-300)
UNCERTAINTIES = st.floats(min_value=1e-12, max_value=1e12)


@pytest.mark.parametrize(
    ("value", "uncertainty", "wanted"),
    [
        # JCGM 100:2008 (GUM) 7.2.6: y = 10.057 62 ohm with u = 27 milliohm is to be given as 10.058 ohm
        (10.05762, 0.027, "10.058"),
        # the same clause's way with a larger spread: the decimals follow the uncertainty, not the value
        (123.456, 20.2, "123"),
        (0.000123456, 0.0000027, "0.0001235"),
        (1234567.0, 3200.0, "1 234 600"),
        (-15.26, 0.31, "−15.26"),
        (0.0, 0.5, "0.00"),
    ],
)
def test_an_estimate_is_rounded_to_the_place_of_its_uncertainty(value, uncertainty, wanted):
    assert figures.placed_number(value, uncertainty).replace("\u00a0", " ") == wanted


@pytest.mark.parametrize(
    ("value", "digits", "wanted"),
    [
        (19.283, 2, "19"),
        (0.9996, 3, "1.00"),
        (12345.6, 3, "12 300"),
        (3.14159e-7, 3, "3.14E-7"),
        (-0.25, 2, "−0.25"),
        (math.nan, 3, "not available"),
        (math.inf, 3, "unbounded"),
        (0.0, 3, "0"),
    ],
)
def test_numbers_in_sentences(value, digits, wanted):
    assert figures.sentence_number(value, digits).replace("\u00a0", " ") == wanted


@given(SIZES, st.integers(1, 6))
def test_a_sentence_number_is_the_value_to_that_many_digits(value, digits):
    text = figures.sentence_number(value, digits).replace("\u00a0", "").replace("−", "-")
    assert float(text) == pytest.approx(value, rel=0.5 * 10.0 ** (1 - digits) * 1.0001)


@given(SIZES, st.integers(1, 6))
def test_a_number_format_shows_at_least_the_digits_asked_for(value, digits):
    shown = figures.shown(value, figures.number_format(value, digits)).replace(",", "")
    assert float(shown) == pytest.approx(value, rel=0.5 * 10.0 ** (1 - digits) * 1.0001)
    assert len(shown) <= 17


@given(SIZES, UNCERTAINTIES, st.integers(1, 4))
def test_an_uncertain_format_never_loses_what_the_uncertainty_tells(value, uncertainty, digits):
    shown = figures.shown(value, figures.uncertain_format(value, uncertainty, digits)).replace(",", "")
    assert abs(float(shown) - value) <= max(
        10.0 ** (math.floor(math.log10(uncertainty)) - digits + 1), abs(value) * 1e-7
    )


@given(st.lists(st.floats(-1e12, 1e12), max_size=30), UNCERTAINTIES)
def test_a_column_shows_all_its_numbers_in_a_reasonable_width(values, uncertainty):
    code = figures.column_format(values, uncertainty)
    assert all(measure.units(figures.shown(value, code)) <= 25 for value in values)


@given(st.floats(0, 1))
def test_a_p_value_never_shows_as_zero(p):
    shown = figures.shown(p, figures.P_VALUE)
    assert p == 0 or float(shown) > 0
    assert float(shown) == pytest.approx(p, abs=0.00006)


@pytest.mark.parametrize(
    ("p", "wanted"),
    [
        (3e-12, "p < 0.0001"),
        (0.00034, "p = 0.0003"),
        (0.0123, "p = 0.012"),
        (0.239, "p = 0.24"),
        (math.nan, "no p value"),
    ],
)
def test_p_values_in_words(p, wanted):
    assert figures.p_words(p) == wanted


@pytest.mark.parametrize(
    ("values", "wanted"),
    [
        ([1.0, 2.0], "0"),
        ([1.5, 22.25], "0.00"),
        ([1234.5], "#,##0.0"),
        ([1 / 3], "0.000000"),
        ([], "0"),
        ([3e12], "0.000E+00"),
    ],
)
def test_typed_numbers_keep_the_decimals_they_were_typed_with(values, wanted):
    assert figures.typed_format(values) == wanted


@pytest.mark.parametrize(
    ("fraction", "wanted"), [(0.0943, "9.4%"), (0.176, "18%"), (0.00031, "0.03%"), (1.31, "130%"), (0.9996, "100%")]
)
def test_percentages_in_words(fraction, wanted):
    assert figures.percent(fraction) == wanted


@given(st.floats(0, 1))
def test_only_the_whole_is_called_a_hundred_percent(fraction):
    text = figures.share(fraction)
    if 0.99 < fraction < 1 - 1e-9:
        assert float(text.rstrip("%")) < 100
    assert float(text.rstrip("%")) == pytest.approx(100 * fraction, abs=0.6)


def test_figures_that_do_not_exist_leave_their_cell_empty_and_infinite_ones_are_said():
    assert figures.figure_cell(math.nan, Format()).value is None
    assert figures.figure_cell(math.inf, Format()).value == "unbounded"
    assert figures.figure_cell(2.5, Format()).value == 2.5


def test_a_unit_in_a_number_format_cannot_end_the_literal_early():
    code = figures.with_unit("0.0", 'in" [Red]')
    assert code.count('"') == 2
    assert figures.shown(2.0, code) == "2.0 in [Red]"
