"""The best subset of the candidate terms, exactly: every subset is judged or shown to be beaten (see branching.py).

By cross-validation: the three subsets of each number of coefficients with the least residual sums are compared.

A crossed term goes only with both its main terms. Without an intercept the first category keeps a column for every
level whichever terms go with it; where that category itself may go, the next one is judged by treatment coding.

p values and intervals of a model chosen this way are too good; the cross-validated miss of the whole search is not.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from bridge.regression import branching, crossvalidation, design, leastsquares, subsets
from bridge.regression.branching import Measure
from bridge.regression.errors import RegressionError, TooFewRows, TooManyColumns
from bridge.regression.results import SearchResult, Subset
from bridge.regression.spec import ModelSpec, Observations, Search

MOST_CANDIDATES = 30
MOST_BEYOND_ROWS = 20  # where all terms together have as many coefficients as there are rows, no branch can be cut
SHOWN = 10
CONSTANT = 1e-12  # a column that varies by less than this share of its size does not vary
TRIED = 3  # best subsets of each number of coefficients that are cross-validated

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class _Problem:
    """The tree's problem, `units` the candidates' names in its order.

    `full_rss`, `full_size`: with all candidates. `tss`: of the response; `log_weights`: the sum of their logarithms.
    """

    tree: branching.Problem
    units: tuple[str, ...]
    full_rss: float
    full_size: int
    tss: float
    log_weights: float


def run(spec: ModelSpec, observations: Observations) -> SearchResult:
    """The chosen terms by `spec.search`, with the runners-up. Figures as elsewhere: adjusted R2 is better when larger.

    Raises TooManyColumns above 30 candidates, TooFewRows where there are not more rows than the forced terms (for Cp,
    and above 20 candidates: all terms) have coefficients, and RegressionError where the model with all candidates
    cannot be laid out.
    """
    problem = _problem(spec, observations)
    beyond = problem.full_size >= observations.n
    if beyond and (len(problem.units) > MOST_BEYOND_ROWS or spec.search is Search.CP):
        raise TooFewRows(observations.n, problem.full_size)
    if spec.search is Search.CROSS_VALIDATION:
        best = _cross_validated(problem, branching.best(problem.tree, None, TRIED), spec, observations)
    else:
        measure = _measure(spec, problem)
        best = [(measure.shown(value), mask) for value, mask in branching.best(problem.tree, measure, SHOWN)]
    if not best:
        raise TooFewRows(observations.n, problem.tree.base)
    ranked = tuple(Subset(_names(problem, mask), value) for value, mask in best[:SHOWN])
    chosen = ranked[0].terms
    dropped = tuple(name for name in problem.units if name not in chosen)
    return SearchResult(spec.search.value, chosen, dropped, ranked, branching.count(problem.tree))


def with_terms(spec: ModelSpec, dropped: Sequence[str]) -> ModelSpec:
    """The model without the terms called `dropped`, and without a further search."""
    terms = tuple(term for term in spec.terms if design.term_name(term) not in dropped)
    columns = {term.column for term in terms}
    crossed = tuple(
        one
        for one in spec.crossed
        if design.crossed_name(spec, one) not in dropped and {one.first, one.second} <= columns
    )
    return replace(spec, terms=terms, crossed=crossed, search=Search.NONE)


# --- the problem -------------------------------------------------------------------------------------


def _problem(spec: ModelSpec, observations: Observations) -> _Problem:
    if observations.n < 2:
        raise TooFewRows(observations.n, 1 + int(spec.intercept))
    layout = design.layout(spec, observations)
    mains = _candidates(spec)
    x, y = _columns(spec, observations, layout)
    places: dict[str, list[int]] = {name: [] for name in mains}
    for j, column in enumerate(layout.columns):
        if column.factors:
            places.setdefault(column.term, []).append(j)
    forced = [j for term, at in places.items() if term not in mains for j in at]
    order = _strongest_first(x, y, places, list(mains))
    number = {name: i for i, name in enumerate(order)}
    products, length = _products(x[:, [*forced, *(j for name in order for j in places[name])]], y)
    rss, size = branching.eliminated(products)
    alone = [*range(len(forced)), -1]
    base = int(spec.intercept) + branching.eliminated(products[np.ix_(alone, alone)])[1]
    weights = design.weights(spec, observations)
    return _Problem(
        tree=branching.Problem(
            products=products,
            sizes=tuple(len(places[name]) for name in order),
            needs=tuple(sum(1 << number[main] for main in mains[name]) for name in order),
            forced=len(forced),
            base=base,
            n=observations.n,
        ),
        units=tuple(order),
        full_rss=rss,
        full_size=int(spec.intercept) + size,
        tss=length**2,
        log_weights=0.0 if weights is None else float(np.sum(np.log(weights))),
    )


def _candidates(spec: ModelSpec) -> dict[str, list[str]]:
    """The terms that may go, products of such terms among them, each with the candidates that it may not go without."""
    names = {term.column: design.term_name(term) for term in spec.terms if term.candidate}
    found: dict[str, list[str]] = {name: [] for name in names.values()}
    for one in spec.crossed:
        needed = [names[column] for column in (one.first, one.second) if column in names]
        if needed:
            found[design.crossed_name(spec, one)] = needed
    if len(found) > MOST_CANDIDATES:
        raise TooManyColumns(f"{len(found)} candidates to search among; at most {MOST_CANDIDATES}")
    return found


def _columns(spec: ModelSpec, observations: Observations, layout: design.Layout) -> tuple[Array, Array]:
    """All columns and the response, times the roots of the weights, about their means with an intercept."""
    x, y = design.matrix(layout.columns, observations), design.response(spec, observations)
    weights = design.weights(spec, observations)
    share = np.ones(len(y)) if weights is None else weights
    if spec.intercept:
        size = np.abs(x).max(axis=0)
        x, y = x - share @ x / share.sum(), y - share @ y / share.sum()
        x[:, np.abs(x).max(axis=0) <= CONSTANT * size] = 0.0  # what is left of a constant is rounding
    root = np.sqrt(share)
    return x * root[:, None], y * root


def _products(x: Array, y: Array) -> tuple[Array, float]:
    """Cross-products of the columns, scaled to length 1, and the response, which is not; the response's length."""
    both = np.column_stack([x, y])
    products = both.T @ both
    lengths = np.sqrt(np.where(np.diag(products) > 0, np.diag(products), 1.0))
    lengths[-1] = 1.0
    return products / np.outer(lengths, lengths), math.sqrt(max(float(products[-1, -1]), 0.0))


def _strongest_first(x: Array, y: Array, places: dict[str, list[int]], units: Sequence[str]) -> list[str]:
    """Units by their own correlation with y, the strong first: branches without them are soon beaten."""

    def strength(name: str) -> float:
        at = places[name]
        lengths = np.sum(x[:, at] ** 2, axis=0)
        return float(np.max((x[:, at].T @ y) ** 2 / np.where(lengths > 0, lengths, 1.0), initial=0.0))

    return sorted(units, key=lambda name: (-strength(name), name))


# --- by which figure -----------------------------------------------------------------------------------


def _measure(spec: ModelSpec, problem: _Problem) -> Measure:
    """The figure asked for, other than cross-validation."""
    n, log_n = problem.tree.n, math.log(problem.tree.n)
    if spec.search is Search.ADJUSTED_R2:  # by the residual mean square
        total = max(problem.tss, 1e-300) / (n - int(spec.intercept))
        return Measure(lambda rss, p: rss / (n - p), lambda value, p: value * (n - p), lambda value: 1 - value / total)
    if spec.search is Search.CP:  # Mallows (1973)
        error = max(problem.full_rss / (n - problem.full_size), 1e-300)
        return Measure(
            lambda rss, p: rss / error - n + 2 * p, lambda value, p: (value + n - 2 * p) * error, lambda value: value
        )
    rest = n * (1 + math.log(2 * math.pi / n)) - problem.log_weights  # what fit.py's BIC has besides
    return Measure(  # Schwarz (1978)
        lambda rss, p: n * np.log(np.maximum(rss, 1e-300)) + p * log_n,
        lambda value, p: np.exp((value - p * log_n) / n),
        lambda value: value + rest,
    )


# --- by cross-validation -------------------------------------------------------------------------------


def _cross_validated(
    problem: _Problem, best: Sequence[tuple[float, int]], spec: ModelSpec, observations: Observations
) -> list[tuple[float, int]]:
    """The best few subsets of each size, judged by their cross-validated miss; best first."""
    quick = subsets.Judge(spec, observations)
    found = []
    for _, mask in best:
        chosen = _names(problem, mask)
        reduced = with_terms(spec, [name for name in problem.units if name not in chosen])
        miss = quick.miss(reduced)
        if miss is None:
            miss = _miss(reduced, observations)
        if np.isfinite(miss):
            found.append((miss, mask))
    return sorted(found, key=branching.rank_of)


def _miss(spec: ModelSpec, observations: Observations) -> float:
    try:
        solved = leastsquares.solve(spec, observations)
    except RegressionError:
        return math.nan
    return crossvalidation.run(solved.kernel, spec, observations).rmse


def _names(problem: _Problem, mask: int) -> tuple[str, ...]:
    return tuple(name for i, name in enumerate(problem.units) if mask >> i & 1)
