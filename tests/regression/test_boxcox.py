"""Box and Cox's advice: against scipy where it has the same, and when none is given."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from bridge.regression.core import fit_model
from bridge.regression.results import BoxCox
from bridge.regression.spec import ModelSpec, NumberTerm, Observations
from tests.regression.problems import TWO, rows

SPEC = ModelSpec("y", terms=TWO)


def profile(observations: Observations, **changes: object) -> BoxCox | None:
    return fit_model(replace(SPEC, **changes), observations).box_cox


def test_a_mean_alone_as_scipy_has_it():
    y = np.round(np.random.default_rng(2).gamma(3.0, size=80), 3)
    found = profile(Observations({"y": y}, 80), terms=())
    _, power, (low, high) = stats.boxcox(y, alpha=0.05)
    assert (found.power, found.low, found.high) == pytest.approx((power, low, high), abs=1e-5)


@pytest.mark.parametrize(("power", "name"), [(1.0, "as is"), (0.5, "root"), (0.0, "log"), (-1.0, "reciprocal")])
def test_the_power_behind_the_data_is_found(power, name):
    rng = np.random.default_rng(4)
    a = rng.uniform(1, 10, 400)
    z = 3 + 0.4 * a + 0.3 * rng.standard_normal(400)
    y = np.exp(z) if power == 0 else z ** (1 / power)
    found = profile(Observations({"a": a, "y": y}, 400), terms=TWO[:1])
    assert found.low < power < found.high
    assert found.suggestion == name


def test_no_advice():
    observations = rows()
    y = observations.numbers("y").copy()
    y[3] = 0.0
    assert profile(Observations({**observations.columns, "y": y}, 40)) is None
    a = np.arange(1.0, 9)
    assert profile(Observations({"a": a, "y": 2 * a}, 8), terms=(NumberTerm("a"),)) is None


def test_units_do_not_matter():
    observations = rows()
    other = Observations({**observations.columns, "y": observations.numbers("y") * 2.54}, 40)
    for intercept in (True, False):
        one, two = profile(observations, intercept=intercept), profile(other, intercept=intercept)
        assert (one.power, one.low, one.high) == pytest.approx((two.power, two.low, two.high), abs=1e-6)


def test_far_powers_are_cut():
    rng = np.random.default_rng(4)
    a = rng.uniform(1, 10, 60)
    y = 1e4 + np.exp(a)
    found = profile(Observations({"a": a, "y": y}, 60), terms=(NumberTerm("a"),))
    assert -3 <= found.low <= found.power <= found.high <= 3
    assert found.low == -3
    assert found.suggestion == ""


def test_many_rows_are_judged_on_a_part():
    rng = np.random.default_rng(4)
    a = rng.uniform(1, 10, 50_000)
    y = np.exp(0.2 * a + 0.3 * rng.standard_normal(50_000))
    found = profile(Observations({"a": a, "y": y}, 50_000), terms=(NumberTerm("a"),))
    assert found.suggestion == "log"
    assert found == profile(Observations({"a": a, "y": y}, 50_000), terms=(NumberTerm("a"),))
