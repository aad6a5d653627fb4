"""Best subsets against enumeration of all of them, on random problems.

`python -m tests.regression.subset_problems` works 50 problems of 5 to 25 candidates, each with every figure, and times
the search at 20, 25 and 30 candidates. `test_search.py` runs the small ones.

The enumeration takes nothing over from the search: to 12 candidates every subset is fitted by `numpy.linalg.lstsq` on
its own columns; above, the residual sums of all 2^k subsets are found by a plain recursion of Gauss steps over halves
of the list, without leaving any out. The two are compared with each other where both are affordable.
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from bridge.regression import design
from bridge.regression.search import SHOWN, run
from bridge.regression.spec import CategoryTerm, CrossedTerm, Levels, ModelSpec, NumberTerm, Observations, Search

COUNT = 50
MOST = 25
BY = (Search.ADJUSTED_R2, Search.CP, Search.BIC)


# --- problems ----------------------------------------------------------------------------------------------


def numbers(seed: int, candidates: int, n: int = 120, strength: float = 1.0) -> tuple[ModelSpec, Observations]:
    """So many correlated number candidates, the first few of which matter."""
    rng = np.random.default_rng(seed)
    shared = rng.standard_normal((n, 3))
    columns = {}
    for j in range(candidates):
        columns[f"x{j}"] = np.round(rng.standard_normal(n) + shared @ rng.standard_normal(3) * 0.7, 3)
    signal = sum(0.8**j * columns[f"x{j}"] for j in range(candidates))
    columns["y"] = np.round(10 + strength * signal + 2 * rng.standard_normal(n), 3)
    columns["w"] = np.round(rng.uniform(0.3, 3, n), 2)
    terms = tuple(NumberTerm(f"x{j}", candidate=True) for j in range(candidates))
    return ModelSpec("y", terms=terms), Observations(columns, n)


def mixed(seed: int, n: int = 90) -> tuple[ModelSpec, Observations]:
    """Powers, categories, products of candidates and a term that stays: nine candidates of one to three columns."""
    spec, observations = numbers(seed, 6, n)
    rng = np.random.default_rng(seed + 1)
    kinds = Levels(rng.integers(0, 4, n), ("p", "q", "r", "s"))
    sides = Levels(rng.integers(0, 2, n), ("left", "right"))
    terms = (
        NumberTerm("x0"),
        NumberTerm("x1", degree=2, candidate=True),
        NumberTerm("x2", bends=(0.5,), candidate=True),
        *(NumberTerm(f"x{j}", candidate=True) for j in (3, 4)),
        CategoryTerm("kind", candidate=True),
        CategoryTerm("side", candidate=True),
    )
    crossed = (CrossedTerm("x3", "kind"), CrossedTerm("x0", "x4"), CrossedTerm("side", "x3"))
    columns = {**observations.columns, "kind": kinds, "side": sides}
    return replace(spec, terms=terms, crossed=crossed), Observations(columns, n)


def problems(count: int = COUNT, most: int = MOST) -> Iterator[tuple[str, ModelSpec, Observations]]:
    """Numbers alone and mixed ones, some weighted, some without an intercept, some near-copies of each other."""
    rng = np.random.default_rng(25)
    for number in range(count):
        if number % 5 == 4:
            spec, observations = mixed(number)
        else:
            candidates = int(rng.integers(5, most + 1)) if number % 5 else most
            spec, observations = numbers(
                number, candidates, int(rng.integers(40, 200)), float(rng.choice([0.0, 0.3, 1.0]))
            )
            if rng.random() < 0.2:
                copy = np.round(observations.numbers("x0") + 1e-3 * rng.standard_normal(observations.n), 6)
                observations = Observations({**observations.columns, "x1": copy}, observations.n)
        if rng.random() < 0.3:
            spec = replace(spec, weight="w")
        if rng.random() < 0.2 and not any(isinstance(term, CategoryTerm) for term in spec.terms):
            spec = replace(spec, intercept=False)
        yield f"{number}: {len(units(spec)[1])} candidates, n={observations.n}", spec, observations


# --- every subset ------------------------------------------------------------------------------------------


def units(spec: ModelSpec) -> tuple[dict[str, list[str]], list[str]]:
    """What each candidate needs, and the candidates' names."""
    names = {term.column: design.term_name(term) for term in spec.terms if term.candidate}
    needs: dict[str, list[str]] = {name: [] for name in names.values()}
    for one in spec.crossed:
        needed = [names[column] for column in (one.first, one.second) if column in names]
        if needed:
            needs[design.crossed_name(spec, one)] = needed
    return needs, list(needs)


def every_subset(
    spec: ModelSpec, observations: Observations, by_fitting: bool
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Masks over `units`, residual sums and numbers of coefficients of all allowed subsets."""
    needs, names = units(spec)
    columns = design.layout(spec, observations).columns
    x, y = design.matrix(columns, observations), design.response(spec, observations)
    weights = design.weights(spec, observations)
    root = np.ones(len(y)) if weights is None else np.sqrt(weights)
    x = x * root[:, None]
    x, y = x / np.sqrt(np.sum(x**2, axis=0)), y * root
    forced = [j for j, column in enumerate(columns) if column.term not in names]
    places = [[j for j, column in enumerate(columns) if column.term == name] for name in names]
    masks = np.arange(1 << len(names))
    for at, name in enumerate(names):
        for main in needs[name]:
            masks = masks[((masks >> at & 1) == 0) | (masks >> names.index(main) & 1 == 1)]
    sizes = len(forced) + sum((masks >> at & 1) * len(own) for at, own in enumerate(places))
    masks, sizes = masks[sizes > 0], sizes[sizes > 0]
    sums = _fitted(x, y, forced, places, masks) if by_fitting else _halved(x, y, forced, places)[masks]
    return masks, sums, sizes


def _fitted(x: np.ndarray, y: np.ndarray, forced: list[int], places: list[list[int]], masks: np.ndarray) -> np.ndarray:
    sums = np.empty(len(masks))
    for i, mask in enumerate(masks.tolist()):
        at = forced + [j for unit, own in enumerate(places) if mask >> unit & 1 for j in own]
        rest = y - x[:, at] @ np.linalg.lstsq(x[:, at], y, rcond=None)[0]
        sums[i] = rest @ rest
    return sums


def _halved(x: np.ndarray, y: np.ndarray, forced: list[int], places: list[list[int]]) -> np.ndarray:
    """Residual sums of all subsets, indexed by mask, from a triangle of the columns."""
    q, _ = np.linalg.qr(x[:, forced]) if forced else (np.zeros((len(y), 0)), None)
    sequence = [j for own in places for j in own]
    both = np.column_stack([x[:, sequence], y])
    both = both - q @ (q.T @ both)
    both = both - q @ (q.T @ both)
    sums = np.empty(1 << len(places))
    widths = [len(own) for own in places]

    def descend(gram: np.ndarray, unit: int, masks: np.ndarray) -> None:
        if unit == len(places):
            sums[masks] = gram[:, 0, 0]
            return
        if len(gram) >= 4096:
            for half in np.array_split(np.arange(len(gram)), 4):
                spread(gram[half], unit, masks[half])
            return
        spread(gram, unit, masks)

    def spread(gram: np.ndarray, unit: int, masks: np.ndarray) -> None:
        own, inside = widths[unit], gram
        for _ in range(own):
            row = inside[:, :1, 1:] / inside[:, :1, :1]
            inside = inside[:, 1:, 1:] - inside[:, 1:, :1] * row
        together = np.concatenate([gram[:, own:, own:], inside])
        descend(together, unit + 1, np.concatenate([masks, masks | 1 << unit]))

    descend((both.T @ both)[None], 0, np.zeros(1, dtype=np.int64))
    return sums


def best(
    spec: ModelSpec, observations: Observations, by: Search, subsets: tuple[np.ndarray, np.ndarray, np.ndarray]
) -> tuple[list[frozenset[str]], np.ndarray]:
    """The best ten by a figure and their figures (adjusted R2, Cp or BIC), best first."""
    masks, sums, sizes = subsets
    _, names = units(spec)
    n = observations.n
    y = design.response(spec, observations)
    weights = design.weights(spec, observations)
    w = np.ones(n) if weights is None else weights
    middle = w @ y / w.sum() if spec.intercept else 0.0
    if by is Search.ADJUSTED_R2:
        figures = 1 - sums / (n - sizes) / (w @ (y - middle) ** 2 / (n - int(spec.intercept)))
        order = np.argsort(-figures, kind="stable")[:SHOWN]
    else:
        full = int(np.argmax(sizes))
        figures = sums / (sums[full] / (n - sizes[full])) - n + 2 * sizes
        if by is Search.BIC:
            likelihood = -n / 2 * (np.log(2 * np.pi * sums / n) + 1) + np.sum(np.log(w)) / 2
            figures = -2 * likelihood + np.log(n) * sizes
        order = np.argsort(figures, kind="stable")[:SHOWN]
    chosen = [frozenset(name for at, name in enumerate(names) if mask >> at & 1) for mask in masks[order].tolist()]
    return chosen, figures[order]


def disagreement(spec: ModelSpec, observations: Observations, by_fitting: bool) -> float:
    """The worst relative difference of the ten best figures; infinite where a subset that is clearly better differs."""
    subsets = every_subset(spec, observations, by_fitting)
    worst = 0.0
    for by in BY:
        found = run(replace(spec, search=by), observations)
        chosen, figures = best(spec, observations, by, subsets)
        ours = np.array([one.figure for one in found.best])
        apart = np.abs(ours - figures) / np.maximum(np.abs(figures), 1e-2)
        worst = max(worst, float(apart.max()))
        if found.subsets != len(subsets[0]):
            return float("inf")
        ties = np.abs(figures[:1] - figures) <= 1e-9 * np.maximum(np.abs(figures), 1.0)
        if frozenset(found.chosen) not in [one for one, tie in zip(chosen, ties, strict=True) if tie]:
            return float("inf")
    return worst


def main() -> None:
    """All problems, and the times."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--count", type=int, default=COUNT)
    parser.add_argument("--most", type=int, default=MOST)
    asked = parser.parse_args()
    worst = 0.0
    for name, spec, observations in problems(asked.count, asked.most):
        start = time.perf_counter()
        few = len(units(spec)[1]) <= 12
        apart = disagreement(spec, observations, by_fitting=few)
        worst = max(worst, apart)
        print(f"{name}: {apart:.1e} in {time.perf_counter() - start:.1f} s", flush=True)
    print(f"{asked.count} problems, worst relative difference of the ten best figures {worst:.1e}")
    for candidates in (20, 25, 30):
        for strength in (1.0, 0.0):
            spec, observations = numbers(1, candidates, 200, strength)
            for by in (*BY, Search.CROSS_VALIDATION):
                start = time.perf_counter()
                found = run(replace(spec, search=by), observations)
                took = time.perf_counter() - start
                print(f"{candidates} candidates, strength {strength}, {by}: {took:.3f} s for {found.subsets:,} subsets")


if __name__ == "__main__":
    main()
