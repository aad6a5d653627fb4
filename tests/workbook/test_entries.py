"""Entries typed by hand: any word order and case, decimal commas, quotes; and what is said of those not understood."""

from __future__ import annotations

import itertools

import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.messages import CATALOGUE
from bridge.regression.spec import Shape
from bridge.workbook.entries import Entry, Misread, Role, number, parse

READ = {
    "response": Entry(Role.RESPONSE),
    "  Response ": Entry(Role.RESPONSE),
    "log response": Entry(Role.RESPONSE, shape=Shape.LOG),
    "response, root": Entry(Role.RESPONSE, shape=Shape.ROOT),
    "predictor": Entry(Role.PREDICTOR),
    "log predictor": Entry(Role.PREDICTOR, shape=Shape.LOG),
    "Predictor log": Entry(Role.PREDICTOR, shape=Shape.LOG),
    "PREDICTOR (LOG)": Entry(Role.PREDICTOR, shape=Shape.LOG),
    "log of predictor": Entry(Role.PREDICTOR, shape=Shape.LOG),
    "reciprocal predictor": Entry(Role.PREDICTOR, shape=Shape.RECIPROCAL),
    "squared predictor": Entry(Role.PREDICTOR, degree=2),
    "predictor cubed": Entry(Role.PREDICTOR, degree=3),
    "predictor to power 5": Entry(Role.PREDICTOR, degree=5),
    "to the power of 12 predictor": Entry(Role.PREDICTOR, degree=12),
    "predictor bend at 15": Entry(Role.PREDICTOR, bends=(15.0,)),
    "bend at 15 and 22 predictor": Entry(Role.PREDICTOR, bends=(15.0, 22.0)),
    "predictor bend at 22, 15": Entry(Role.PREDICTOR, bends=(15.0, 22.0)),
    "predictor bend at 12,5": Entry(Role.PREDICTOR, bends=(12.5,)),
    "predictor bend at -3.5": Entry(Role.PREDICTOR, bends=(-3.5,)),
    "predictor bend at \u22123": Entry(Role.PREDICTOR, bends=(-3.0,)),
    "predictor bend at 1e3": Entry(Role.PREDICTOR, bends=(1000.0,)),
    "category": Entry(Role.CATEGORY),
    "category base oak": Entry(Role.CATEGORY, base="oak"),
    "Category Base Oak": Entry(Role.CATEGORY, base="Oak"),
    "base oak category": Entry(Role.CATEGORY, base="oak"),
    'category base "glass fibre"': Entry(Role.CATEGORY, base="glass fibre"),
    "candidate category base glass fibre": Entry(Role.CATEGORY, True, base="glass fibre"),
    "base glass fibre candidate category": Entry(Role.CATEGORY, True, base="glass fibre"),
    "candidate base oak": Entry(Role.CATEGORY, True, base="oak"),
    "category base log": Entry(Role.CATEGORY, base="log"),
    "candidate": Entry(Role.CANDIDATE, True),
    "category candidate": Entry(Role.CATEGORY, True),
    "candidate predictor log": Entry(Role.PREDICTOR, True, Shape.LOG),
    "log candidate": Entry(Role.CANDIDATE, True, Shape.LOG),
    "weight": Entry(Role.WEIGHT),
    "label": Entry(Role.LABEL),
    "order": Entry(Role.ORDER),
    "group": Entry(Role.GROUP),
    "predictor\u00a0log": Entry(Role.PREDICTOR, shape=Shape.LOG),
}


@pytest.mark.parametrize(("text", "entry"), READ.items())
def test_entry_is_read(text: str, entry: Entry) -> None:
    assert parse(text) == entry


MISREAD = {
    "predictr": "entry-unknown-word",
    "log": "entry-without-role",
    "bend at 15": "entry-without-role",
    "response predictor": "entry-two-roles",
    "weight candidate": "entry-two-roles",
    "log weight": "shape-needs-number-role",
    "squared category": "shape-needs-number-role",
    "reciprocal response": "response-shape",
    "squared response": "response-shape",
    "response bend at 3": "response-shape",
    "log root predictor": "two-shapes",
    "log predictor bend at 3": "two-shapes",
    "squared predictor bend at 3": "two-shapes",
    "predictor base oak": "base-needs-category",
    "category base": "base-without-level",
    "predictor bend": "bend-without-place",
    "predictor bend at oak": "bend-without-place",
    "predictor bend at 12,500": "bend-unclear",
    "predictor to power": "power-out-of-range",
    "predictor to power 13": "power-out-of-range",
    "predictor to power 1": "power-out-of-range",
    "predictor to power 2.5": "power-out-of-range",
    "#NAME?": "entry-unknown-word",
}


@pytest.mark.parametrize(("text", "key"), MISREAD.items())
def test_entry_is_not_read(text: str, key: str) -> None:
    found = parse(text)
    assert isinstance(found, Misread)
    assert found.key == key


@pytest.mark.parametrize(
    ("text", "hint"),
    [
        ("predictr", '"predictor"'),
        ("log predicter", '"log predictor"'),
        ("respones", '"response"'),
        ("catgory base oak", '"category base oak"'),
    ],
)
def test_the_whole_entry_is_put_right(text: str, hint: str) -> None:
    found = parse(text)
    assert isinstance(found, Misread)
    assert f"Did you mean {hint}?" in str(found.fields["hint"])


@pytest.mark.parametrize("text", ["", "  ", "-", "no", "None", "not used", "\u2013"])
def test_not_used(text: str) -> None:
    assert parse(text) is None


@pytest.mark.parametrize("value", [1.0, 3, True, False, 45000.0])
def test_a_number_is_no_role(value: float) -> None:
    found = parse(value)
    assert isinstance(found, Misread)
    assert found.key == "entry-not-words"


@pytest.mark.parametrize("words", list(itertools.permutations(["candidate", "predictor", "bend at 7", "and", "the"])))
def test_word_order_does_not_matter(words: tuple[str, ...]) -> None:
    assert parse(" ".join(words)) == Entry(Role.PREDICTOR, True, bends=(7.0,))


def test_a_long_text_is_answered_in_short() -> None:
    found = parse("bend at " + "1 and " * 5000 + "x predictor")
    assert isinstance(found, Misread)
    assert len(str(found.fields["typed"])) < 100


@given(st.text(max_size=60) | st.text("abcdeglnoprst 0123456789.,-^\"'", max_size=40) | st.floats() | st.booleans())
def test_anything_typed_is_answered(typed: str | float | bool) -> None:
    found = parse(typed)
    if isinstance(found, Misread):
        assert CATALOGUE[found.key][1].format(at="E7", **found.fields)
    elif found is not None:
        assert 1 <= found.degree <= 12


@given(st.sampled_from(["log", "root", "reciprocal", "squared", "cubed"]), st.booleans(), st.integers(0, 2))
def test_case_and_spaces_do_not_matter(shape: str, upper: bool, spaces: int) -> None:
    text = f"{shape}{' ' * (spaces + 1)}predictor"
    assert parse(text.upper() if upper else text) == parse(f"predictor {shape}")


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("12", 12),
        ("12,5", 12.5),
        ("-0.5", -0.5),
        ("0,125", 0.125),
        ("1.5e3", 1500),
        ("12,500", None),
        ("1.234,5", None),
        ("", None),
        ("abc", None),
        ("1e999", None),
        ("nan", None),
        ("inf", None),
        ("1_000", None),
    ],
)
def test_numbers_as_typed(text: str, value: float | None) -> None:
    assert number(text) == value
