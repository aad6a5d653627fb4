"""The best subset of the candidate terms, exactly: every subset is judged or shown to be beaten.

Subsets are met in a tree, a candidate taken in or left out at each branching, and the cross-products eliminated as in
Furnival & Wilson (1974, "Regressions by leaps and bounds"): taking a term in sweeps its columns, leaving it out deletes
them. The last levels of the tree are worked through whole, many subsets at a time; a branch above them is passed
over when even all its terms together could not beat what has been found.

A crossed term goes only with both its main terms. p values and intervals of a model chosen this way are too good; the
cross-validated miss of the whole search is not.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from bridge.regression import crossvalidation, design, leastsquares
from bridge.regression.errors import RegressionError, TooFewRows, TooManyColumns
from bridge.regression.results import SearchResult, Subset
from bridge.regression.spec import ModelSpec, Observations, Search

MOST_CANDIDATES = 30
WHOLE_LEVELS = 12  # candidates decided many at a time: 4,096 subsets a batch
SHOWN = 10
TRIED = 3  # best subsets of each number of terms that are cross-validated
DEPENDENT = 1e-11  # a column with less than this share of its sum of squares left adds nothing

Array = NDArray[np.float64]
Masks = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class _Problem:
    """Cross-products of the columns, forced ones first, then unit by unit, y last; scaled, about means (intercept).

    `units`: the candidates' names in the order of the tree, `sizes` their columns; `needs[i]` the mask of candidates
    that unit i may not go without. `base` counts coefficients besides the candidates'.
    """

    products: Array
    units: tuple[str, ...]
    sizes: tuple[int, ...]
    needs: tuple[int, ...]
    forced: int
    base: int
    n: int
    full_rss: float
    full_size: int


def run(spec: ModelSpec, observations: Observations) -> SearchResult:
    """The chosen terms by `spec.search`, with the runners-up.

    Raises TooManyColumns above 30 candidates, and RegressionError where the model with all of them cannot be laid out.
    """
    problem = _problem(spec, observations)
    kept = _Best(SHOWN if spec.search is not Search.CROSS_VALIDATION else 0)
    figure = _figure(spec.search, problem)
    _branch(problem, kept, figure)
    best = kept.ranked()
    if spec.search is Search.CROSS_VALIDATION:
        best = _cross_validated(problem, kept, spec, observations)
    if not best:  # no subset leaves a row to judge it by
        raise TooFewRows(observations.n, problem.full_size)
    ranked = tuple(Subset(_names(problem, mask), value) for value, mask in best[:SHOWN])
    chosen = ranked[0].terms
    dropped = tuple(name for name in problem.units if name not in chosen)
    return SearchResult(spec.search.value, chosen, dropped, ranked, kept.judged)


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
    layout = design.layout(spec, observations)
    candidates = {design.term_name(term): term.column for term in spec.terms if term.candidate}
    of_column = {column: name for name, column in candidates.items()}
    mains = {
        design.crossed_name(spec, one): [of_column[c] for c in (one.first, one.second) if c in of_column]
        for one in spec.crossed
    }
    units = [*candidates, *(name for name, needed in mains.items() if needed)]
    if len(units) > MOST_CANDIDATES:
        raise TooManyColumns(f"{len(units)} candidates to search among; at most {MOST_CANDIDATES}")
    x, y = _columns(spec, observations, layout)
    places: dict[str, list[int]] = {}
    for j, column in enumerate(layout.columns):
        if column.factors:
            places.setdefault(column.term, []).append(j)
    forced = [j for term, at in places.items() if term not in units for j in at]
    order = _strongest_first(x, y, places, units)
    sequence = forced + [j for name in order for j in places.get(name, [])]
    ordered = np.column_stack([x[:, sequence], y])
    products = ordered.T @ ordered
    lengths = np.sqrt(np.where(np.diag(products) > 0, np.diag(products), 1.0))
    products /= np.outer(lengths, lengths)
    number = {name: i for i, name in enumerate(order)}
    needs = tuple(sum(1 << number[main] for main in mains.get(name, [])) for name in order)
    sizes = tuple(len(places.get(name, [])) for name in order)
    rss, size = _full(products)
    base = int(spec.intercept) + _full(products[np.ix_([*range(len(forced)), -1], [*range(len(forced)), -1])])[1]
    scale = float(lengths[-1]) ** 2
    products[-1, :] *= lengths[-1]
    products[:, -1] *= lengths[-1]
    return _Problem(
        products, tuple(order), sizes, needs, len(forced), base, observations.n, rss * scale, int(spec.intercept) + size
    )


def _columns(spec: ModelSpec, observations: Observations, layout: design.Layout) -> tuple[Array, Array]:
    """All columns and the response, times the roots of the weights, about their means with an intercept."""
    x, y = design.matrix(layout.columns, observations), design.response(spec, observations)
    weights = design.weights(spec, observations)
    share = np.ones(len(y)) if weights is None else weights
    if spec.intercept:
        x, y = x - share @ x / share.sum(), y - share @ y / share.sum()
    root = np.sqrt(share)
    return x * root[:, None], y * root


def _strongest_first(x: Array, y: Array, places: dict[str, list[int]], units: Sequence[str]) -> list[str]:
    """Units by their own correlation with y, the strong first: branches without them are soon beaten."""

    def strength(name: str) -> float:
        at = places.get(name, [])
        lengths = np.sum(x[:, at] ** 2, axis=0)
        return float(np.max((x[:, at].T @ y) ** 2 / np.where(lengths > 0, lengths, 1.0), initial=0.0))

    return sorted(units, key=lambda name: (-strength(name), name))


def _full(products: Array) -> tuple[float, int]:
    """The residual sum and the rank with every column in."""
    a, rank = products.copy(), 0
    for _ in range(len(a) - 1):
        a, taken = _taken_in(a[None])
        a, rank = a[0], rank + int(taken[0])
    return float(max(a[0, 0], 0.0)), rank


# --- the tree ----------------------------------------------------------------------------------------


@dataclass
class _Best:
    """The best subsets so far: overall, and of each number of coefficients."""

    shown: int
    heap: list[tuple[float, int]] = field(default_factory=list)
    by_size: dict[int, list[tuple[float, int]]] = field(default_factory=dict)
    judged: int = 0

    @property
    def worst(self) -> float:
        """The figure to beat."""
        return -self.heap[0][0] if self.shown and len(self.heap) >= self.shown else np.inf

    def offer(self, masks: Masks, figures: Array, sizes: Masks, rss: Array) -> None:
        """Take what is better than the worst kept."""
        self.judged += len(masks)
        if not self.shown:
            for size in np.unique(sizes).tolist():
                at = np.flatnonzero(sizes == size)
                best = at[np.argsort(rss[at], kind="stable")[:TRIED]]
                pairs = self.by_size.get(size, []) + [(float(rss[i]), int(masks[i])) for i in best]
                self.by_size[size] = sorted(pairs)[:TRIED]
            return
        order = np.argsort(figures, kind="stable")[: self.shown]
        for i in order[figures[order] < self.worst]:
            heapq.heappush(self.heap, (-float(figures[i]), -int(masks[i])))
            if len(self.heap) > self.shown:
                heapq.heappop(self.heap)

    def ranked(self) -> list[tuple[float, int]]:
        """Figure and mask, best first; of equals the smaller subset first."""
        pairs = [(-value, -mask) for value, mask in self.heap]
        return sorted(pairs, key=lambda pair: (pair[0], pair[1].bit_count(), pair[1]))


Figure = Callable[[Array, Array], Array]  # residual sums and numbers of coefficients -> figures, smaller is better


def _figure(by: Search, problem: _Problem) -> Figure:
    n = problem.n
    if by is Search.ADJUSTED_R2:
        return lambda rss, p: rss / np.maximum(n - p, 1e-300)
    if by is Search.CP:  # Mallows (1973)
        error = problem.full_rss / max(n - problem.full_size, 1)
        return lambda rss, p: rss / error - n + 2 * p if error > 0 else rss
    return lambda rss, p: n * np.log(np.maximum(rss, 1e-300)) + p * np.log(n)  # Schwarz (1978)


def _branch(problem: _Problem, kept: _Best, figure: Figure) -> None:
    """Work through the tree, the most promising branch first."""
    start = problem.products[None]
    for _ in range(problem.forced):
        start, _ = _taken_in(start)
    count = len(problem.units)
    above = max(count - WHOLE_LEVELS, 0)
    stack = [(0, start, 0, problem.base)]
    while stack:
        level, a, mask, size = stack.pop()
        if level == above:
            _whole(problem, kept, figure, (level, a, mask, size))
            continue
        if _beaten(problem, kept, figure, a[0], size):
            continue
        width = problem.sizes[level]
        out = a[:, width:, width:]
        taken, more = _unit_in(a, width)
        stack.append((level + 1, out, mask, size))
        stack.append((level + 1, taken, mask | 1 << level, size + int(more[0])))


def _beaten(problem: _Problem, kept: _Best, figure: Figure, a: Array, size: int) -> bool:
    """Whether no subset below can be kept: with all terms left the residual sum, with none of them the coefficients."""
    if not kept.shown or not np.isfinite(kept.worst):
        return False
    rss, _ = _full(a)
    return bool(figure(np.array([rss]), np.array([float(size)]))[0] > kept.worst)


def _whole(problem: _Problem, kept: _Best, figure: Figure, node: tuple[int, Array, int, int]) -> None:
    """Every subset of the remaining units at once: each level doubles the batch."""
    level, a, mask, size = node
    masks, sizes = np.array([mask], dtype=np.int64), np.array([size], dtype=np.int64)
    for unit in range(level, len(problem.units)):
        width = problem.sizes[unit]
        taken, more = _unit_in(a, width)
        a = np.concatenate([a[:, width:, width:], taken])
        sizes = np.concatenate([sizes, sizes + more])
        masks = np.concatenate([masks, masks | 1 << unit])
    allowed = np.ones(len(masks), dtype=np.bool_)
    for unit, needed in enumerate(problem.needs):
        if needed:
            allowed &= ((masks >> unit & 1) == 0) | ((masks & needed) == needed)
    allowed &= sizes < problem.n
    rss = np.maximum(a[allowed, 0, 0], 0.0)
    kept.offer(masks[allowed], figure(rss, sizes[allowed].astype(float)), sizes[allowed], rss)


def _unit_in(a: Array, width: int) -> tuple[Array, Masks]:
    """Sweep the first `width` columns of each matrix (batch, m, m); how many of them added anything."""
    added = np.zeros(len(a), dtype=np.int64)
    for _ in range(width):
        a, taken = _taken_in(a)
        added += taken
    return a, added


def _taken_in(a: Array) -> tuple[Array, NDArray[np.bool_]]:
    """Eliminate the first column of each matrix; one that depends on those before it is only struck out."""
    pivot = a[:, 0, 0]
    independent = pivot > DEPENDENT
    row = a[:, 0, 1:] * np.where(independent, 1 / np.where(independent, pivot, 1.0), 0.0)[:, None]
    return a[:, 1:, 1:] - a[:, 1:, :1] * row[:, None, :], independent


# --- by cross-validation -------------------------------------------------------------------------------


def _cross_validated(
    problem: _Problem, kept: _Best, spec: ModelSpec, observations: Observations
) -> list[tuple[float, int]]:
    """The best few subsets of each size, judged by their cross-validated miss; best first."""
    found = []
    for mask in [mask for pairs in kept.by_size.values() for _, mask in pairs]:
        chosen = _names(problem, mask)
        reduced = with_terms(spec, [name for name in problem.units if name not in chosen])
        try:
            solved = leastsquares.solve(reduced, observations)
            miss = crossvalidation.run(solved.kernel, reduced, observations).rmse
        except RegressionError:
            continue
        if np.isfinite(miss):
            found.append((miss, mask))
    return sorted(found, key=lambda pair: (pair[0], pair[1].bit_count(), pair[1]))


def _names(problem: _Problem, mask: int) -> tuple[str, ...]:
    return tuple(name for i, name in enumerate(problem.units) if mask >> i & 1)
