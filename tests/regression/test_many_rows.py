"""Beyond 10,000 rows: the blocked fit against the exact one, the digits it claims, and when it gives way."""

from __future__ import annotations

import numpy as np
import pytest

from bridge.regression import blocked, design, exact_fit, leastsquares
from bridge.regression.spec import CategoryTerm, CrossedTerm, Levels, ModelSpec, NumberTerm, Observations, Shape

ROWS = 11_000


def problem(seed: int) -> tuple[ModelSpec, Observations]:
    """Columns near to and far from zero, short and long decimals, related ones; weights at times."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(ROWS, 3 * ROWS))
    columns: dict[str, np.ndarray] = {}
    for j in range(int(rng.integers(1, 7))):
        values = rng.choice([0.0, 1.0, 50.0, 2000.0]) + 10.0 ** rng.integers(-1, 3) * rng.standard_normal(n)
        if j and rng.random() < 0.4:
            values = columns["x0"] * rng.normal() + values
        columns[f"x{j}"] = np.round(values, int(rng.integers(1, 5))) if rng.random() < 0.7 else values
    total = sum(rng.normal() * v / v.std() for v in columns.values())
    y = rng.choice([0.0, 10.0, 1e4]) + total + rng.uniform(0.1, 10) * rng.standard_normal(n)
    columns["y"] = np.round(y, 3) if rng.random() < 0.7 else y
    columns["w"] = np.round(rng.uniform(0.1, 10, n), 3)
    terms = tuple(NumberTerm(name, degree=2 if rng.random() < 0.2 else 1) for name in columns if name[0] == "x")
    weight = "w" if rng.random() < 0.4 else None
    spec = ModelSpec("y", terms=terms, weight=weight, intercept=bool(rng.random() < 0.85))
    return spec, Observations(columns, n)


def both(spec: ModelSpec, observations: Observations):
    layout = design.layout(spec, observations)
    y, weights = design.response(spec, observations), design.weights(spec, observations)
    x = design.matrix(layout.columns, observations)
    exact, aliased = exact_fit.fit(spec, observations, layout, x, y, weights)
    assert aliased == ()
    return blocked.fit(spec, observations, layout.columns, y, weights), exact


def digits(found, true) -> float:
    with np.errstate(divide="ignore"):
        return float(np.min(-np.log10(np.abs(found - true) / np.abs(true))))


@pytest.mark.parametrize("seed", range(24))
def test_the_digits_claimed_are_there(seed):
    quick, exact = both(*problem(seed))
    if quick is None:  # left to the exact path: its columns are nearly dependent
        assert exact.condition_number > 300
        return
    measured = min(digits(quick.coefficients, exact.coefficients), digits(quick.standard_errors, exact.standard_errors))
    assert measured > quick.digits - 0.7
    if quick.digits >= leastsquares.LEAST_DIGITS:
        assert measured > leastsquares.LEAST_DIGITS
        assert quick.rss == pytest.approx(exact.rss, rel=1e-13)
        assert quick.tss == pytest.approx(exact.tss, rel=1e-13)
        assert quick.leverage == pytest.approx(exact.leverage, rel=1e-10)
        assert np.abs(quick.residual - exact.residual).max() < 1e-12 * exact.residual_sd
        assert quick.fitted == pytest.approx(exact.fitted, rel=1e-12, abs=1e-12 * exact.residual_sd)
        assert quick.condition_number == pytest.approx(exact.condition_number, rel=1e-9)
        assert quick.column_ss == pytest.approx(exact.column_ss, rel=1e-11)
        assert quick.r_inverse == pytest.approx(exact.r_inverse, rel=1e-8, abs=1e-11 * np.abs(exact.r_inverse).max())
        for mine, true in zip(
            quick.sums.last + quick.sums.in_order, exact.sums.last + exact.sums.in_order, strict=True
        ):
            assert (mine.source, mine.df) == (true.source, true.df)
            assert mine.ss == pytest.approx(float(true.ss), rel=1e-9, abs=1e-12 * exact.tss)


def shop(n: int, seed: int = 5) -> Observations:
    rng = np.random.default_rng(seed)
    x, codes = np.round(rng.uniform(1, 9, n), 1), rng.integers(0, 3, n)
    y = np.round(2 + x + codes + (x > 4) * (x - 4) + rng.standard_normal(n), 2)
    return Observations({"x": x, "shop": Levels(codes, ("a", "b", "c")), "y": y}, n)


def test_factors_of_every_kind_by_blocks():
    terms = (NumberTerm("x", bends=(4.0,)), CategoryTerm("shop"))
    spec = ModelSpec("y", response_shape=Shape.AS_IS, terms=terms, crossed=(CrossedTerm("x", "shop"),))
    quick, exact = both(spec, shop(ROWS))
    assert quick.coefficients == pytest.approx(exact.coefficients, rel=1e-11)
    assert quick.sums.pure_error_df == exact.sums.pure_error_df > 10_000
    assert quick.sums.pure_error == pytest.approx(float(exact.sums.pure_error), rel=1e-12)


def test_a_column_that_is_decimal_only_at_first_sight():
    """Rows between those looked at first have more digits."""
    observations = shop(ROWS)
    x = observations.numbers("x").copy()
    x[1::97] += np.pi * 1e-9
    changed = Observations({**observations.columns, "x": x}, ROWS)
    quick, exact = both(ModelSpec("y", terms=(NumberTerm("x"),)), changed)
    assert quick.coefficients == pytest.approx(exact.coefficients, rel=1e-12)


def test_good_digits_keep_the_blocked_fit_and_bad_ones_give_way():
    n = ROWS
    rng = np.random.default_rng(1)
    x = np.round(rng.standard_normal(n), 2)
    columns = {"x": x, "near": x + 1e-7 * rng.standard_normal(n), "y": np.round(3 + x + rng.standard_normal(n), 2)}
    line = leastsquares.solve(ModelSpec("y", terms=(NumberTerm("x"),)), Observations(columns, n)).kernel
    assert line.digits is not None
    assert line.digits >= leastsquares.LEAST_DIGITS
    terms = (NumberTerm("x"), NumberTerm("near"))
    assert leastsquares.solve(ModelSpec("y", terms=terms), Observations(columns, n)).kernel.digits is None


def test_exact_at_ten_thousand_rows():
    spec = ModelSpec("y", terms=(NumberTerm("x"),))
    assert leastsquares.solve(spec, shop(10_000)).kernel.digits is None
    assert leastsquares.solve(spec, shop(10_001)).kernel.digits is not None


def test_high_powers_of_many_rows_take_the_exact_path():
    """x^9 at 11,000 rows: the exact coefficients give back the polynomial the data were made from."""
    x = np.round(np.linspace(-2, 2, ROWS), 3)
    whole = sum((k - 4) * np.array([v**k for v in x.astype(object)]) for k in range(10))
    columns = {"x": x, "y": np.round(whole.astype(float), 6)}
    kernel = leastsquares.solve(ModelSpec("y", terms=(NumberTerm("x", degree=9),)), Observations(columns, ROWS)).kernel
    assert kernel.digits is None
    assert kernel.coefficients == pytest.approx([k - 4 for k in range(10)], abs=1e-6)
