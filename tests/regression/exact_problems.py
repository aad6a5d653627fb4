"""Random problems solved in exact rational arithmetic, an independent check of coefficients and standard errors.

`python -m tests.regression.exact_problems` runs all 200 (n to 10,000) and prints the worst relative differences;
`test_exact_problems.py` runs the small ones. Nothing of the program's own arithmetic is used for the reference:
each cell is the fraction of its shortest decimal (a logarithm: of its double), sums are Python integers, the normal
equations are solved by fraction-free elimination (Bareiss 1968), and the square root is taken by `math.isqrt`.
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from math import isqrt, lcm

import numpy as np

from bridge.regression.spec import (
    CategoryTerm,
    CrossedTerm,
    Levels,
    ModelSpec,
    NumberTerm,
    Observations,
    Shape,
)

COUNT = 200
SMALL = 400  # rows


@dataclass(frozen=True)
class Truth:
    """Exact coefficients and squared standard errors, and the residual sum of squares."""

    coefficients: list[Fraction]
    variances: list[Fraction]
    rss: Fraction


# --- the problems -------------------------------------------------------------------------------


def problems(
    count: int = COUNT, most_rows: int = 10_000, seed: int = 20_26
) -> Iterator[tuple[str, ModelSpec, Observations]]:
    """`count` problems with at most so many rows, of the kinds below in turn."""
    rng = np.random.default_rng(seed)
    for number in range(count):
        kind = KINDS[number % len(KINDS)]
        n = int(np.exp(rng.uniform(np.log(40), np.log(most_rows))))
        spec, observations = kind(rng, n)
        if rng.random() < 0.4:
            columns = {**observations.columns, "w": _weights(rng, n)}
            spec, observations = _with_weight(spec), Observations(columns, n)
        yield f"{number} {kind.__name__.strip('_')} n={n}", spec, observations


def _with_weight(spec: ModelSpec) -> ModelSpec:
    return ModelSpec(spec.response, spec.response_shape, spec.terms, spec.crossed, intercept=spec.intercept, weight="w")


def _weights(rng: np.random.Generator, n: int) -> np.ndarray:
    if rng.random() < 0.5:
        return np.round(rng.uniform(0.1, 5, n), 2)
    return rng.uniform(1, 50, n) ** -1.5  # 17 digits


def _typed(rng: np.random.Generator, n: int, places: int | None = None) -> np.ndarray:
    """Numbers as people type them: some decimals, some far from zero, some long."""
    centre, spread = rng.choice([0.0, 10.0, 1000.0, 1e6]), 10.0 ** rng.integers(-1, 4)
    values = centre + spread * rng.standard_normal(n)
    places = int(rng.integers(0, 6)) if places is None else places
    return values if rng.random() < 0.25 else np.round(values, places + int(spread < 1))


def _response(rng: np.random.Generator, parts: list[np.ndarray], n: int) -> np.ndarray:
    total = sum((rng.normal() / (part.std() or 1.0)) * (part - part.mean()) for part in parts)
    y = rng.normal() * 10 + total + rng.uniform(0.01, 2) * rng.standard_normal(n)
    return np.round(y, int(rng.integers(1, 5)))


def _several(rng: np.random.Generator, n: int) -> tuple[ModelSpec, Observations]:
    p = int(rng.integers(1, 9))
    columns = {f"x{j}": _typed(rng, n) for j in range(p)}
    y = _response(rng, list(columns.values()), n)
    terms = tuple(NumberTerm(name) for name in columns)
    return ModelSpec("y", terms=terms, intercept=bool(rng.random() < 0.8)), Observations({**columns, "y": y}, n)


def _polynomial(rng: np.random.Generator, n: int) -> tuple[ModelSpec, Observations]:
    degree = int(rng.integers(2, 11))
    x = np.round(rng.uniform(-9, 3, n), int(rng.integers(2, 9)))
    y = np.round(np.cos(x) + 0.1 * rng.standard_normal(n), 4)
    return ModelSpec("y", terms=(NumberTerm("x", degree=degree),)), Observations({"x": x, "y": y}, n)


def _products(rng: np.random.Generator, n: int) -> tuple[ModelSpec, Observations]:
    columns = {name: _typed(rng, n) for name in "abc"}
    columns["c"] = np.abs(columns["c"]) + 0.5
    terms = (NumberTerm("a", degree=2), NumberTerm("b"), NumberTerm("c", shape=Shape.LOG))
    crossed = (CrossedTerm("a", "b"), CrossedTerm("b", "c"))
    y = _response(rng, [*columns.values(), columns["a"] * columns["b"]], n)
    return ModelSpec("y", terms=terms, crossed=crossed), Observations({**columns, "y": y}, n)


def _categories(rng: np.random.Generator, n: int) -> tuple[ModelSpec, Observations]:
    names = ("ash", "elm", "fir", "oak")
    codes = np.concatenate([np.arange(4), rng.integers(0, 4, n - 4)])
    x = _typed(rng, n)
    y = _response(rng, [x, codes.astype(float)], n)
    terms = (NumberTerm("x", bends=(float(np.round(np.median(x), 1)),)), CategoryTerm("wood"))
    crossed = (CrossedTerm("wood", "x"),) if rng.random() < 0.5 else ()
    return ModelSpec("y", terms=terms, crossed=crossed), Observations({"x": x, "wood": Levels(codes, names), "y": y}, n)


def _nearly_aliased(rng: np.random.Generator, n: int) -> tuple[ModelSpec, Observations]:
    a, b = np.round(rng.uniform(0, 100, n), 2), np.round(rng.uniform(0, 100, n), 2)
    c = np.round(100 - a - b + 10.0 ** rng.integers(-9, -3) * rng.standard_normal(n), 10)
    columns = {"a": a, "b": b, "c": c}
    y = _response(rng, [a, b], n)
    return ModelSpec("y", terms=tuple(NumberTerm(name) for name in columns)), Observations({**columns, "y": y}, n)


KINDS: tuple[Callable[[np.random.Generator, int], tuple[ModelSpec, Observations]], ...] = (
    _several,
    _polynomial,
    _products,
    _categories,
    _nearly_aliased,
)


# --- the reference ------------------------------------------------------------------------------


def truth(spec: ModelSpec, observations: Observations) -> Truth:
    """The exact least-squares solution of a problem whose columns are independent."""
    columns = _design(spec, observations)
    y = _cells(observations.numbers(spec.response))
    weights = [Fraction(1)] * observations.n if spec.weight is None else _cells(observations.numbers(spec.weight))
    (*whole, response, weight), units = zip(*(_whole(c) for c in (*columns, y, weights)), strict=True)
    *scales, y_scale, w_scale = units
    everything = [*whole, response]
    weighted = [[w * v for w, v in zip(weight, column, strict=True)] for column in everything]
    gram = [[sum(map(int.__mul__, a, b)) for b in everything] for a in weighted]
    p, n = len(columns), observations.n
    inverse = _inverse([row[:p] for row in gram[:p]])
    right = [gram[j][p] for j in range(p)]
    inner = [sum(inverse[j][k] * right[k] for k in range(p)) for j in range(p)]
    rss = gram[p][p] - sum(b * r for b, r in zip(inner, right, strict=True))
    coefficients = [b * scales[j] / y_scale for j, b in enumerate(inner)]
    variances = [rss / (n - p) * inverse[j][j] * scales[j] ** 2 / y_scale**2 for j in range(p)]
    return Truth(coefficients, variances, rss / y_scale**2 / w_scale)


def _cells(values: np.ndarray) -> list[Fraction]:
    return [Fraction(repr(value)) for value in values.tolist()]


def _design(spec: ModelSpec, observations: Observations) -> list[list[Fraction]]:
    of_term: dict[str, list[list[Fraction]]] = {}
    for term in spec.terms:
        if isinstance(term, CategoryTerm):
            levels = observations.levels(term.column)
            counts = np.bincount(levels.codes, minlength=len(levels.names))
            base = int(np.argmax(counts))
            of_term[term.column] = [
                [Fraction(int(code == level)) for code in levels.codes.tolist()]
                for level in range(len(levels.names))
                if level != base and counts[level]
            ]
        elif term.shape is Shape.LOG:
            of_term[term.column] = [[Fraction(v) for v in np.log(observations.numbers(term.column)).tolist()]]
        else:
            x = _cells(observations.numbers(term.column))
            knots = [Fraction(repr(knot)) for knot in term.bends]
            of_term[term.column] = [
                *([v**k for v in x] for k in range(1, term.degree + 1)),
                *([max(v - knot, Fraction(0)) for v in x] for knot in knots),
            ]
    columns = [[Fraction(1)] * observations.n] if spec.intercept else []
    columns += [column for term in spec.terms for column in of_term[term.column]]
    for crossed in spec.crossed:
        columns += [
            [u * v for u, v in zip(a, b, strict=True)] for a in of_term[crossed.first] for b in of_term[crossed.second]
        ]
    return columns


def _whole(column: list[Fraction]) -> tuple[list[int], Fraction]:
    """The column as integers over one denominator: (integers, denominator)."""
    unit = lcm(*{value.denominator for value in column})
    return [value.numerator * (unit // value.denominator) for value in column], Fraction(unit)


def _inverse(matrix: list[list[int]]) -> list[list[Fraction]]:
    """By fraction-free elimination of [matrix | 1]."""
    size = len(matrix)
    rows = [row + [int(i == j) for j in range(size)] for i, row in enumerate(matrix)]
    before = 1
    for k in range(size):
        pivot = rows[k][k]
        assert pivot, "columns depend on each other"
        for i in range(size):
            if i != k:
                factor = rows[i][k]
                rows[i] = [(pivot * a - factor * b) // before for a, b in zip(rows[i], rows[k], strict=True)]
        before = pivot
    return [[Fraction(rows[i][size + j], rows[i][i]) for j in range(size)] for i in range(size)]


def root(value: Fraction) -> Fraction:
    """The square root to 60 digits."""
    if not value:
        return value
    shift = 10 ** max(0, 120 + 2 * (len(str(value.denominator)) - len(str(value.numerator))))
    return Fraction(isqrt(value.numerator * shift * shift // value.denominator), shift)


# --- the whole count ----------------------------------------------------------------------------


def differences(spec: ModelSpec, observations: Observations) -> tuple[float, float]:
    """The worst relative differences of coefficients and of standard errors from the truth."""
    from bridge.regression.leastsquares import solve

    solved = solve(spec, observations)
    assert not solved.aliased, solved.aliased
    exact = truth(spec, observations)
    errors = [root(v) for v in exact.variances]
    kernel = solved.kernel
    return _worst(kernel.coefficients, exact.coefficients), _worst(kernel.standard_errors, errors)


def _worst(found: np.ndarray, wanted: list[Fraction]) -> float:
    return max(
        float(abs(Fraction(value) - true) / abs(true)) if true else abs(value)
        for value, true in zip(found.tolist(), wanted, strict=True)
    )


def main() -> None:
    """Run all problems and print the worst."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--count", type=int, default=COUNT)
    parser.add_argument("--rows", type=int, default=10_000)
    asked = parser.parse_args()
    start, worst = time.perf_counter(), [0.0, 0.0]
    for name, spec, observations in problems(asked.count, asked.rows):
        found = differences(spec, observations)
        worst = [max(a, b) for a, b in zip(worst, found, strict=True)]
        if max(found) > 1e-15:
            print(f"{name}: coefficients {found[0]:.1e}, standard errors {found[1]:.1e}", flush=True)
    print(
        f"{asked.count} problems in {time.perf_counter() - start:.0f} s; worst relative difference: "
        f"coefficients {worst[0]:.2e}, standard errors {worst[1]:.2e}"
    )


if __name__ == "__main__":
    main()
