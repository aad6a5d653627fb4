"""Design columns as whole numbers, and sums of their products, against Fractions."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from bridge.regression.crossproducts import combinations, cross_products
from bridge.regression.integers import LIMB, WholeDesign, from_computed, from_typed
from bridge.regression.results import DesignColumn, Factor
from bridge.regression.spec import Levels, Observations


def columns_of(rng: np.random.Generator, n: int) -> dict[str, np.ndarray | Levels]:
    return {
        "short": np.round(100 * rng.standard_normal(n), 2),
        "long": rng.standard_normal(n),
        "whole": rng.integers(-50, 50, n) * 1.0,
        "uneven": rng.standard_normal(n) * 10.0 ** rng.integers(-6, 6, n),
        "far": 1e15 * rng.random(n),
        "wide": rng.standard_normal(n) * 10.0 ** rng.integers(-60, 60, n),
        "positive": rng.random(n) + 1e-3,
        "level": Levels(rng.integers(0, 3, n), ("a", "b", "c")),
    }


FACTORS = [
    *(Factor(name, "power") for name in ("short", "long", "whole", "uneven", "far")),
    Factor("whole", "power", exponent=9),
    Factor("uneven", "power", exponent=3),
    *(Factor(name, "hinge", knot=knot) for name in ("short", "long", "uneven") for knot in (0.37, 1 / 3, 50.0)),
    Factor("level", "level", level="b"),
    *(Factor("positive", kind) for kind in ("log", "root", "reciprocal")),
]


def exact(factor: Factor, observations: Observations) -> list[Fraction]:
    if factor.kind == "level":
        levels = observations.levels(factor.column)
        return [Fraction(int(levels.names[code] == factor.level)) for code in levels.codes]
    x = observations.numbers(factor.column)
    computed = {"log": np.log, "root": np.sqrt, "reciprocal": lambda v: 1 / v}
    if factor.kind in computed:
        return [Fraction(v) for v in computed[factor.kind](x).tolist()]
    cells = [Fraction(repr(v)) for v in x.tolist()]
    if factor.kind == "hinge":
        return [max(v - Fraction(repr(factor.knot)), Fraction(0)) for v in cells]
    return [v**factor.exponent for v in cells]


def product(column: DesignColumn, observations: Observations) -> list[Fraction]:
    values = [Fraction(1)] * observations.n
    for factor in column.factors:
        values = [a * b for a, b in zip(values, exact(factor, observations), strict=True)]
    return values


def read(block: np.ndarray) -> list[int]:
    return [sum(int(limb) << (LIMB * i) for i, limb in enumerate(cell)) for cell in block.T.tolist()]


@pytest.fixture(params=range(4))
def case(request):
    rng = np.random.default_rng(request.param)
    n = 60
    observations = Observations(columns_of(rng, n), n)
    pairs = [tuple(FACTORS[i] for i in rng.integers(0, len(FACTORS), 2)) for _ in range(8)]
    columns = [DesignColumn("", "", factors) for factors in [(), *((factor,) for factor in FACTORS), *pairs]]
    weights = rng.random(n)
    whole = WholeDesign(columns, observations, from_typed(observations.numbers("short")), weights)
    return columns, observations, whole, [Fraction(repr(w)) for w in weights.tolist()]


def test_every_cell_is_exact(case):
    columns, observations, whole, _ = case
    block = whole.block(slice(5, 50))
    assert np.abs(block).max() <= 2 ** (LIMB - 1)
    for j, column in enumerate(columns):
        found = [v * whole.scales[j] for v in read(block[whole.starts[j] : whole.starts[j + 1]])]
        assert found == product(column, observations)[5:50]


def test_sums_of_products_are_exact(case):
    columns, observations, whole, weights = case
    found = cross_products(whole)
    values = [product(column, observations) for column in columns] + [exact(FACTORS[0], observations)]
    for i, a in enumerate(values):
        for j, b in enumerate(values):
            unit = whole.scales[i] * whole.scales[j] * whole.weight.scale
            assert found[i, j] * unit == sum(w * u * v for w, u, v in zip(weights, a, b, strict=True))


def test_combinations_are_the_nearest_doubles(case):
    _, observations, whole, _ = case
    rng = np.random.default_rng(9)
    factors = np.array([[int(v) for v in rng.integers(-(10**15), 10**15, 3)] for _ in whole.scales], dtype=object)
    found = combinations(whole, factors, 40)
    block = whole.block(slice(0, observations.n))
    cells = [read(block[whole.starts[j] : whole.starts[j + 1]]) for j in range(len(whole.scales))]
    for row in range(observations.n):
        for k in range(3):
            true = Fraction(sum(cells[j][row] * factors[j, k] for j in range(len(cells))), 2**40)
            assert abs(Fraction(found[row, k]) - true) <= abs(true) * Fraction(1, 2**52)


def test_cells_of_wildly_different_sizes_keep_the_large_ones():
    x = np.array([1e200, 3.7e199, -2.5, 1e-200])
    whole = from_typed(x)
    values = [Fraction(int(d)) * whole.scale for d in whole.digits.tolist()]
    assert values[:2] == [Fraction(v) for v in x[:2].tolist()]
    assert abs(values[2] - Fraction(x[2])) < Fraction(10) ** 200 / 2**230


def test_computed_cells_are_the_doubles_themselves():
    x = np.log(np.arange(1, 200) / 7)
    whole = from_computed(x)
    assert [Fraction(int(d)) * whole.scale for d in whole.digits.tolist()] == [Fraction(v) for v in x.tolist()]


def test_blocks_add_up():
    """More rows than one block: the same as Python's integers."""
    rng = np.random.default_rng(2)
    n = 20_000
    observations = Observations({"x": np.round(rng.standard_normal(n), 3)}, n)
    whole = WholeDesign(
        [DesignColumn("", "", (Factor("x", "power"),))], observations, from_typed(observations.numbers("x")), None
    )
    thousandths = [round(1000 * v) for v in observations.numbers("x").tolist()]
    assert cross_products(whole)[0, 1] == sum(v * v for v in thousandths)
