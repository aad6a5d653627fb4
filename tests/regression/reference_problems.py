"""Random problems on which every figure of the examination is compared with general libraries (see references.py).

`python -m tests.regression.reference_problems [--count 300]` runs them all and prints the worst relative difference of
each figure, and the differences of definition. `test_reference_problems.py` runs the first of them.
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Iterator
from itertools import pairwise

import numpy as np

from bridge.regression.spec import CategoryTerm, CrossedTerm, Levels, ModelSpec, NumberTerm, Observations, Shape
from tests.regression.references import DEFINITIONS, Compared, compare

COUNT = 300
SEED = 20_26


def problems(count: int = COUNT) -> Iterator[tuple[str, ModelSpec, Observations]]:
    """Models of every kind of term, weighted or not, on 25 to 260 rows with odd rows, trends and uneven spread."""
    rng = np.random.default_rng(SEED)
    for number in range(count):
        n = int(rng.integers(25, 260))
        observations = _rows(rng, n)
        spec = _model(rng, observations)
        yield f"{number}: n={n}, {len(spec.terms)} terms, weight {spec.weight}", spec, observations


def _rows(rng: np.random.Generator, n: int) -> Observations:
    base = rng.standard_normal(n)
    columns: dict[str, np.ndarray | Levels] = {
        "a": np.round(20 + 5 * base + 3 * rng.standard_normal(n), 1),
        "b": np.round(rng.uniform(1, 30, n), int(rng.integers(0, 3))),
        "c": np.round(np.exp(1 + 0.5 * base + 0.4 * rng.standard_normal(n)), 2) + 0.01,
        "d": np.round(rng.integers(0, 6, n) * 2.5, 1),
        "kind": Levels(np.concatenate([np.arange(3), rng.integers(0, 3, n - 3)]), ("ash", "elm", "oak")),
        "w": np.round(rng.uniform(0.2, 4, n), 2),
        "time": rng.permutation(n).astype(float),
        "group": np.concatenate([np.arange(7), rng.integers(0, 7 + n // 12, n - 7)]).astype(float),
    }
    noise = rng.standard_normal(n)
    order = np.argsort(columns["time"])
    for before, after in pairwise(order.tolist()):
        noise[after] += 0.4 * noise[before]
    if rng.random() < 0.4:
        noise *= 0.3 + columns["b"] / 15
    if rng.random() < 0.4:
        noise[rng.integers(0, n, 2)] *= 6
    kind = columns["kind"].codes
    y = (
        40
        + 0.8 * columns["a"]
        - 0.3 * columns["b"]
        + 2 * np.log(columns["c"])
        + 1.5 * kind
        + rng.uniform(0.5, 4) * noise
    )
    columns["y"] = np.maximum(np.round(y, 2), 0.01)
    return Observations(columns, n)


def _model(rng: np.random.Generator, observations: Observations) -> ModelSpec:
    choices = [
        NumberTerm("a"),
        NumberTerm("b", degree=int(rng.integers(1, 4))),
        NumberTerm("c", shape=Shape.LOG) if rng.random() < 0.5 else NumberTerm("c"),
        NumberTerm("d", bends=(5.0,)) if rng.random() < 0.3 else NumberTerm("d"),
        CategoryTerm("kind"),
    ]
    intercept = bool(rng.random() < 0.85)
    if rng.random() < 0.2:  # few different rows: lack of fit
        terms: tuple[NumberTerm | CategoryTerm, ...] = (NumberTerm("d"),)
    else:
        at = np.sort(rng.choice(5, int(rng.integers(1, 6)), replace=False))
        terms = tuple(choices[i] for i in at if intercept or i != 4)
        terms = terms or (choices[0],)
    columns = [term.column for term in terms]
    crossed = ()
    if len(terms) > 1 and rng.random() < 0.4:
        crossed = (CrossedTerm(columns[0], columns[-1]),)
    return ModelSpec(
        "y",
        response_shape=(Shape.AS_IS, Shape.AS_IS, Shape.LOG, Shape.ROOT)[int(rng.integers(0, 4))],
        terms=terms,
        crossed=crossed,
        intercept=intercept,
        weight="w" if rng.random() < 0.3 else None,
        level=float(rng.choice([0.9, 0.95, 0.99])),
        folds=int(rng.choice([5, 10])),
    )


def worst(count: int = COUNT) -> tuple[dict[str, tuple[float, str, float, int]], list[str]]:
    """By figure: the worst difference, the problem it was in, what is allowed, how often compared; and the failures."""
    found: dict[str, tuple[float, str, float, int]] = {}
    failures = []
    for name, spec, observations in problems(count):
        for one in compare(spec, observations):
            before = found.get(one.figure, (-1.0, "", one.allowed, 0))
            larger = (one.difference, name) if one.difference > before[0] else before[:2]
            found[one.figure] = (*larger, one.allowed, before[3] + 1)
            if not one.difference <= one.allowed:
                failures.append(_told(name, one))
    return found, failures


def _told(name: str, one: Compared) -> str:
    return f"{name}: {one.figure} differs by {one.difference:.1e}: {one.ours} against {one.theirs}"


def main() -> None:
    """Run, print the table and the differences of definition; exit 1 where one is larger than allowed."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--count", type=int, default=COUNT)
    asked = parser.parse_args()
    start = time.perf_counter()
    found, failures = worst(asked.count)
    print(f"{asked.count} problems in {time.perf_counter() - start:.0f} s; worst relative difference by figure")
    for figure, (difference, name, allowed, times) in found.items():
        print(f"{figure:42s} {difference:8.1e}  allowed {allowed:.0e}  compared {times:4d}  worst in {name}")
    print("\nDifferences of definition")
    for note in DEFINITIONS:
        print(f"- {note}")
    for failure in failures:
        print(failure[:400])
    raise SystemExit(1 if failures else 0)


if __name__ == "__main__":
    main()
