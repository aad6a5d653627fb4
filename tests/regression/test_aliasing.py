"""Columns that the data cannot tell apart: found exactly, named, never dropped in silence."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.regression import leastsquares
from bridge.regression.rank import independent
from bridge.regression.spec import CategoryTerm, CrossedTerm, Levels, ModelSpec, NumberTerm, Observations, Shape


def solve(columns, terms, **more):
    n = len(next(iter(columns.values())))
    return leastsquares.solve(ModelSpec("y", terms=tuple(terms), **more), Observations(columns, n))


def shares(n: int, rng: np.random.Generator) -> dict[str, np.ndarray]:
    a, b = np.round(rng.uniform(5, 40, n), 1), np.round(rng.uniform(5, 40, n), 1)
    return {"sand": a, "clay": b, "silt": np.round(100 - a - b, 1), "y": np.round(rng.standard_normal(n), 2)}


def test_percentages_that_sum_to_100():
    """In decimals the dependence is exact; in doubles the three columns have full rank."""
    columns = shares(60, np.random.default_rng(1))
    assert np.linalg.matrix_rank(np.column_stack([np.ones(60), *list(columns.values())[:3]]), tol=0) == 4
    solved = solve(columns, map(NumberTerm, ("sand", "clay", "silt")))
    (alias,) = solved.aliased
    assert alias.exact
    assert alias.label == "silt"
    assert dict(alias.depends_on) == {"intercept": 100.0, "sand": -1.0, "clay": -1.0}
    assert [column.label for column in solved.kernel.columns] == ["intercept", "sand", "clay"]


def test_percentages_beyond_ten_thousand_rows():
    solved = solve(shares(12_000, np.random.default_rng(1)), map(NumberTerm, ("sand", "clay", "silt")))
    assert [alias.label for alias in solved.aliased] == ["silt"]
    assert solved.aliased[0].exact


def test_shares_computed_by_a_formula_depend_to_within_their_rounding():
    rng = np.random.default_rng(2)
    parts = rng.uniform(1, 9, (50, 3))
    share = parts / parts.sum(axis=1, keepdims=True)
    columns = {**{f"share_{j}": share[:, j] for j in range(3)}, "y": rng.standard_normal(50)}
    (alias,) = solve(columns, [NumberTerm(f"share_{j}") for j in range(3)]).aliased
    assert not alias.exact
    assert alias.label == "share_2"
    assert {name: pytest.approx(value) for name, value in alias.depends_on} == {
        "intercept": 1.0,
        "share_0": -1.0,
        "share_1": -1.0,
    }


def test_logarithms_of_a_product():
    rng = np.random.default_rng(3)
    a, b = np.round(rng.uniform(1, 9, 40), 1), np.round(rng.uniform(1, 9, 40), 1)
    columns = {"a": a, "b": b, "area": np.round(a * b, 2), "y": rng.standard_normal(40)}
    (alias,) = solve(columns, [NumberTerm(name, shape=Shape.LOG) for name in ("a", "b", "area")]).aliased
    assert (alias.label, alias.exact) == ("log area", False)
    assert {name: pytest.approx(value) for name, value in alias.depends_on} == {"log a": 1.0, "log b": 1.0}


def test_a_near_dependence_of_typed_decimals_is_no_dependence():
    columns = shares(60, np.random.default_rng(1))
    columns["silt"][7] = np.round(columns["silt"][7] + 1e-9, 10)
    solved = solve(columns, map(NumberTerm, ("sand", "clay", "silt")))
    assert solved.aliased == ()
    assert solved.kernel.p == 4


def test_products_of_a_rounded_column_are_not_mistaken_for_a_dependence():
    """(a - 10^6)^2 (b - 10^6) is far smaller than the rounding of a^2 b, yet it is there."""
    rng = np.random.default_rng(4)
    columns = {"a": np.round(1e6 + rng.standard_normal(80), 3), "b": 1e6 + rng.standard_normal(80)}
    columns["y"] = rng.standard_normal(80)
    solved = solve(columns, [NumberTerm("a", degree=2), NumberTerm("b")], crossed=(CrossedTerm("a", "b"),))
    assert solved.aliased == ()


def test_a_constant_column_depends_on_the_intercept():
    columns = {"x": np.full(9, 2.5), "z": np.arange(9.0), "y": np.arange(9.0) ** 2}
    (alias,) = solve(columns, [NumberTerm("x"), NumberTerm("z")]).aliased
    assert (alias.label, alias.depends_on) == ("x", (("intercept", 2.5),))


def test_a_column_of_zeros_depends_on_nothing():
    columns = {"x": np.zeros(9), "z": np.arange(9.0), "y": np.arange(9.0) ** 2}
    (alias,) = solve(columns, [NumberTerm("x"), NumberTerm("z")], intercept=False).aliased
    assert (alias.label, alias.depends_on) == ("x", ())


def test_a_category_within_another():
    wood = Levels(np.array([0, 0, 1, 1, 2, 2, 0, 1, 2]), ("ash", "elm", "oak"))
    hard = Levels(np.array([0, 0, 0, 0, 1, 1, 0, 0, 1]), ("no", "yes"))
    columns = {"y": np.arange(9.0) ** 1.5, "wood": wood, "hard": hard}
    (alias,) = solve(columns, [CategoryTerm("wood"), CategoryTerm("hard")]).aliased
    assert (alias.label, alias.exact) == ("hard yes", True)
    assert alias.depends_on == (("wood oak", 1.0),)


def test_an_empty_cell_of_crossed_categories():
    a = Levels(np.array([0, 0, 1, 1, 0, 1, 0, 0]), ("p", "q"))
    b = Levels(np.array([0, 1, 0, 0, 1, 0, 0, 1]), ("r", "s"))
    columns = {"y": np.arange(8.0) ** 1.5, "a": a, "b": b}
    (alias,) = solve(columns, [CategoryTerm("a"), CategoryTerm("b")], crossed=(CrossedTerm("a", "b"),)).aliased
    assert (alias.label, alias.depends_on) == ("a q x b s", ())


@given(st.integers(2, 6), st.integers(0, 2**31), st.integers(0, 3))
def test_rank_of_integer_matrices(size, seed, more):
    """As many columns are independent as numpy counts, and each is independent of those before it."""
    rng = np.random.default_rng(seed)
    x = rng.integers(-9, 10, (12, size))
    combined = x @ rng.integers(-3, 4, (size, more))
    every = np.column_stack([x, combined])
    everything = np.column_stack([every, rng.integers(-9, 10, 12)]).astype(object)
    kept, _ = independent(everything.T @ everything)
    assert len(kept) == np.linalg.matrix_rank(every.astype(float))
    for j in range(every.shape[1]):
        before = np.linalg.matrix_rank(every[:, :j].astype(float)) if j else 0
        assert (j in kept) == (np.linalg.matrix_rank(every[:, : j + 1].astype(float)) > before)
