"""Shared phrases: counts, lists, dates, headers with units, forms of models."""

from __future__ import annotations

from datetime import datetime

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.regression.spec import CategoryTerm, CrossedTerm, FitBy, ModelSpec, NumberTerm, Shape
from bridge.sheets import top, words
from bridge.workbook.tables import DataColumn, Kind
from tests.sheets.cases import five_rows, nothing_fitted, yard


def column(name: str, unit: str | None = None) -> DataColumn:
    return DataColumn(name, 0, Kind.NUMBER, np.array([1.0]), (), np.array([1], dtype=np.uint8), unit)


@pytest.mark.parametrize(("count", "wanted"), [(0, "0 rows"), (1, "1 row"), (117, "117 rows"), (12300, "12 300 rows")])
def test_counts(count, wanted):
    assert words.plural(count, "row").replace("\u00a0", " ") == wanted


@given(st.lists(st.text("abc", min_size=1, max_size=3), max_size=12), st.integers(2, 8))
def test_lists_name_or_count_every_item(items, most):
    text = words.listing(items, most=most)
    if len(items) <= most:
        assert all(item in text for item in items)
    else:
        assert text.endswith(f"{len(items) - most + 1} more")
    assert text.count(" and ") == (1 if len(items) > 1 else 0)


def test_moments_do_not_depend_on_the_locale():
    assert words.moment(datetime(2026, 3, 9, 7, 5)) == "9 Mar 2026 07:05"


@pytest.mark.parametrize(
    ("serial", "wanted"),
    [
        # ECMA-376 part 1, 18.17.4.1: in the 1900 system 1 March 1900 is 61 and 31 December 9999 is 2,958,465
        (61, "1 Mar 1900"),
        (2_958_465, "31 Dec 9999"),
        (-4.5, "-4.5"),
    ],
)
def test_serials_become_dates(serial, wanted):
    assert words.serial_day(serial) == wanted


@pytest.mark.parametrize(
    ("header", "unit", "bare", "said"),
    [
        ("length (m)", "m", "length", "m"),
        ("hours [h]", "h", "hours", "h"),
        ("床面積（平方メートル）", "平方メートル", "床面積", "平方メートル"),
        ("crew hours", None, "crew hours", "hours"),
        ("(kg)", "kg", "(kg)", "kg"),
        ("hull", None, "hull", ""),
        ("cost (labour) [EUR]", "EUR", "cost (labour)", "EUR"),
    ],
)
def test_units_are_told_from_names(header, unit, bare, said):
    assert words.bare_name(column(header, unit)) == bare
    assert words.unit_of(column(header, unit)) == said


def test_labels_lose_their_units_whatever_the_order_of_the_headers():
    table = yard().models[0].table
    assert words.label_in(table, "log length (m) x hull steel") == "log length x hull steel"
    assert words.axis_title(table, "length (m)", Shape.LOG) == "log length (m)"
    assert words.axis_title(table, "hours") == "hours"


def test_names_written_from_right_to_left_are_kept_together():
    assert words.isolated("مساحة") == "\u2068مساحة\u2069"
    assert words.isolated("length") == "length"


@pytest.mark.parametrize(("name", "wanted"), [("hours", "Hours"), ("y", "y"), ("pH", "pH"), ("kWh used", "kWh used")])
def test_titles_do_not_spoil_codes(name, wanted):
    assert words.capital(name) == wanted


@pytest.mark.parametrize(
    ("spec", "wanted"),
    [
        (ModelSpec("y", terms=(NumberTerm("x"),)), "straight"),
        (ModelSpec("y", Shape.LOG, (NumberTerm("x", Shape.LOG),)), "log - log"),
        (ModelSpec("y", Shape.LOG, (NumberTerm("x", Shape.LOG), NumberTerm("z"))), "log - log and straight"),
        (ModelSpec("y", terms=(NumberTerm("x", degree=2),), intercept=False), "straight, curved, through zero"),
        (ModelSpec("y", terms=(NumberTerm("x", bends=(1.0,)),), weight="w"), "straight, with a bend, weighted"),
        (
            ModelSpec("y", Shape.ROOT, (CategoryTerm("c"), NumberTerm("x")), (CrossedTerm("c", "x"),)),
            "root - straight, crossed",
        ),
        (ModelSpec("y", terms=(CategoryTerm("c"),), fit_by=FitBy.RESISTANT), "by level, resistant"),
        (ModelSpec("y", terms=(NumberTerm("x", Shape.RECIPROCAL),)), "straight - reciprocal"),
        (ModelSpec("y", Shape.LOG), "log - mean alone"),
    ],
)
def test_forms_in_a_few_words(spec, wanted):
    assert words.form(spec) == wanted


def test_the_top_says_when_and_from_how_many_rows_of_which_sheet():
    cells = top.lines(yard(), "Title", "what it is")
    assert cells[(0, 0)].value == "Title"
    assert cells[(1, 0)].value == (
        'What it is. Fitted 1 Dec 2026 10:31 from 117 to 118 of 120 rows of "Refits"; 2 to 3 rows left out '
        '(see "fit rows").'
    )
    assert 'from all 5 rows of "S".' in str(top.lines(five_rows(), "", "x")[(1, 0)].value)
    assert "Nothing could be fitted" in str(top.lines(nothing_fitted(), "", "x")[(1, 0)].value)
