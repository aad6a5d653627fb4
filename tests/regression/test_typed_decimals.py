"""The decimals read back from doubles are those of Python's own `repr`, cell by cell."""

from __future__ import annotations

from decimal import Decimal

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.regression.typed import decimals

FINITE = st.floats(allow_nan=False, allow_infinity=False)


def read_back(x: np.ndarray) -> list[Decimal]:
    found = decimals(x)
    exponents = np.broadcast_to(found.exponent, x.shape)
    return [Decimal(d).scaleb(e) for d, e in zip(found.digits.tolist(), exponents.tolist(), strict=True)]


@given(st.lists(FINITE, min_size=1, max_size=40))
def test_any_doubles(values):
    assert read_back(np.array(values)) == [Decimal(repr(value)) for value in values]


@given(st.lists(st.decimals(-(10**9), 10**9, places=4), min_size=1, max_size=40))
def test_typed_decimals(values):
    found = decimals(np.array([float(value) for value in values]))
    assert found.short
    assert read_back(np.array([float(value) for value in values])) == values


@pytest.mark.parametrize(
    "values",
    [
        np.nextafter(np.arange(1, 3000) / 1000.0, 10),
        2.0 ** np.arange(-1022, 1023, 7),
        np.array([5e-324, 2.2250738585072014e-308, 1.7976931348623157e308, 9007199254740993.0, 1e22, 1e23, -0.0]),
        1 / np.arange(1, 3000),
        np.random.default_rng(3).standard_normal(20_000) * 10.0 ** np.random.default_rng(4).integers(-30, 30, 20_000),
    ],
    ids=["one unit beyond", "powers of two", "extremes", "reciprocals", "many sizes"],
)
def test_long_doubles(values):
    assert read_back(values) == [Decimal(repr(value)) for value in values.tolist()]


def test_long_cells_are_told_from_short_ones():
    assert decimals(np.array([0.1, 2.25, 1e14])).short
    assert not decimals(np.array([0.1, 1 / 3])).short
