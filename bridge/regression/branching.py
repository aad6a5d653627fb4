"""The tree of subsets: which of all subsets of some candidates are best, by branch and bound.

The cross-products are eliminated as in Furnival & Wilson (1974, "Regressions by leaps and bounds"): taking a unit (a
term, with all its columns) in sweeps its columns, leaving it out deletes them. Many nodes are worked at a time. A
branch is passed over when nothing in it can be among the best: a subset without d of the units still open has at least
the residual sum of all of them and the d-th smallest of what each of them alone would cost.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

WHOLE_LEVELS = 6  # the last units are decided without looking whether a branch can still win
BATCH = 256  # nodes worked at a time
DEPENDENT = 1e-11  # a column with less than this share of its sum of squares left adds nothing
SURE = 1e-9  # above this share, the inverse of the cross-products may be trusted
SLACK = 1 + 1e-9  # for rounding, so that equals are not passed over

Array = NDArray[np.float64]
Masks = NDArray[np.int64]
Marks = NDArray[np.bool_]
Ranked = list[tuple[float, int]]  # figures and masks


@dataclass(frozen=True, slots=True)
class Problem:
    """Cross-products of the columns, forced ones first, then unit by unit, y last; columns scaled to length 1.

    `sizes`: the units' columns; `needs[i]`: the mask of units that unit i may not go without. `base` counts the
    coefficients besides the units'; a subset has at least one and fewer than there are
    rows, `n`.
    """

    products: Array
    sizes: tuple[int, ...]
    needs: tuple[int, ...]
    forced: int
    base: int
    n: int

    @property
    def units(self) -> int:
        """How many."""
        return len(self.sizes)


@dataclass(frozen=True, slots=True)
class Measure:
    """A figure of merit, smaller is better: from residual sums and coefficients, back, and as it is shown."""

    figure: Callable[[Array, Array], Array]
    residual_sum: Callable[[float, Array], Array]
    shown: Callable[[float], float]


def best(problem: Problem, measure: Measure | None, most: int) -> Ranked:
    """The best subsets by the measure, at most so many; without one those with the least residual sums of each size.

    Figure (or residual sum) and mask, best first; of equals the smaller subset first.
    """
    kept = _Best(problem, measure, most)
    if problem.units > WHOLE_LEVELS:
        kept.expect(*_foreseen(problem))
    _branch(problem, kept)
    return kept.ranked()


def count(problem: Problem) -> int:
    """How many subsets there are: a unit never without what it needs, and at least one coefficient."""
    involved = sum({1 << unit for needed in problem.needs for unit in range(problem.units) if needed >> unit & 1})
    needy = [needed for needed in problem.needs if needed]
    places = [unit for unit in range(problem.units) if involved >> unit & 1]
    chosen = np.arange(1 << len(places))
    masks = sum(((chosen >> at & 1) << unit for at, unit in enumerate(places)), np.zeros_like(chosen))
    ways = sum((((masks & needed) == needed).astype(np.int64) for needed in needy), np.zeros_like(chosen))
    everything = int(np.sum(1 << ways)) << (problem.units - len(places) - len(needy))
    return everything - int(problem.base == 0)


def eliminated(products: Array) -> tuple[float, int]:
    """The residual sum, and the rank, with every column in."""
    left, rank = _unit_in(products[None], len(products) - 1)
    return float(max(left[0, 0, 0], 0.0)), int(rank[0])


def rank_of(pair: tuple[float, int]) -> tuple[float, int, int]:
    """By figure; of equals the smaller subset first."""
    return pair[0], pair[1].bit_count(), pair[1]


# --- what is worth keeping -----------------------------------------------------------------------------


class _Best:
    """The best subsets so far: overall by a measure, or (None) those with the least residual sums of each size.

    `limits[p]`: the residual sum that a subset with p coefficients may have at most to be kept.
    """

    def __init__(self, problem: Problem, measure: Measure | None, most: int) -> None:
        self.measure, self.most = measure, most
        self.size = np.arange(problem.base + sum(problem.sizes) + 1, dtype=np.float64)
        self.limits = np.where(self.size < problem.n, np.inf, -np.inf)
        self._found: dict[int, Ranked] = {}

    def offer(self, masks: Masks, sizes: Masks, rss: Array) -> None:
        """Take what may be among the best, (k,) each; no subset may be offered twice."""
        self._found = self._with(self._found, masks, sizes, rss)
        self._lower(self._found)

    def expect(self, masks: Masks, sizes: Masks, rss: Array) -> None:
        """Lower the limits by subsets known beforehand, which will be offered in their turn."""
        self._lower(self._with({}, masks, sizes, rss))

    def ranked(self) -> Ranked:
        """Figure and mask, best first; of equals the smaller subset first."""
        return sorted((pair for pairs in self._found.values() for pair in pairs), key=rank_of)

    def _with(self, found: dict[int, Ranked], masks: Masks, sizes: Masks, rss: Array) -> dict[int, Ranked]:
        good = rss <= self.limits[sizes]
        masks, sizes, rss = masks[good], sizes[good], rss[good]
        values = self.measure.figure(rss, sizes.astype(float)) if self.measure else rss
        lists = np.zeros_like(sizes) if self.measure else sizes
        for at in np.unique(lists).tolist():
            own = np.flatnonzero(lists == at)
            own = own[np.argsort(values[own], kind="stable")[: 2 * self.most]]
            pairs = found.get(at, []) + list(zip(values[own].tolist(), masks[own].tolist(), strict=True))
            found = found | {at: sorted(pairs, key=rank_of)[: self.most]}
        return found

    def _lower(self, found: dict[int, Ranked]) -> None:
        for at, pairs in found.items():
            if len(pairs) < self.most:
                continue
            if self.measure:
                self.limits = np.minimum(self.limits, self.measure.residual_sum(pairs[-1][0], self.size) * SLACK)
            else:
                self.limits[at] = min(self.limits[at], pairs[-1][0] * SLACK)


# --- the tree ------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Nodes:
    """Nodes of one level: cross-products after what is in (k, m, m), y last; masks (k,); coefficients so far (k,)."""

    level: int
    products: Array
    masks: Masks
    sizes: Masks

    def only(self, which: slice | Marks) -> _Nodes:
        """Some of them."""
        return _Nodes(self.level, self.products[which], self.masks[which], self.sizes[which])


def _root(problem: Problem) -> _Nodes:
    """Nothing decided but the forced terms."""
    products = problem.products[None]
    for _ in range(problem.forced):
        products, _ = _taken_in(products)
    return _Nodes(0, products, np.zeros(1, dtype=np.int64), np.array([problem.base]))


def _branch(problem: Problem, kept: _Best) -> None:
    """Work through the tree, a batch of nodes at a time, the deepest first."""
    last = max(problem.units - WHOLE_LEVELS, 0)
    stack = [_root(problem)]
    while stack:
        nodes = stack.pop()
        if nodes.level:
            nodes = nodes.only(_promising(problem, kept.limits, nodes))
        if not len(nodes.masks):
            continue
        if nodes.level == last:
            _whole(problem, kept, nodes)
        else:
            further = _decided(problem, nodes)
            stack += [further.only(slice(at, at + BATCH)) for at in range(0, len(further.masks), BATCH)]


def _decided(problem: Problem, nodes: _Nodes) -> _Nodes:
    """The next unit left out of every node, and taken in."""
    width = problem.sizes[nodes.level]
    taken, more = _unit_in(nodes.products, width)
    return _Nodes(
        nodes.level + 1,
        np.concatenate([nodes.products[:, width:, width:], taken]),
        np.concatenate([nodes.masks, nodes.masks | 1 << nodes.level]),
        np.concatenate([nodes.sizes, nodes.sizes + more]),
    )


def _whole(problem: Problem, kept: _Best, nodes: _Nodes) -> None:
    """Every subset of the units still open."""
    while nodes.level < problem.units:
        nodes = _decided(problem, nodes)
    allowed = _complete(problem, nodes.masks) & (nodes.sizes > 0) & (nodes.sizes < problem.n)
    kept.offer(nodes.masks[allowed], nodes.sizes[allowed], np.maximum(nodes.products[allowed, 0, 0], 0.0))


def _complete(problem: Problem, masks: Masks) -> Marks:
    """Whether all that the units of each mask need is in it."""
    allowed: Marks = np.ones(len(masks), dtype=np.bool_)
    for unit, needed in enumerate(problem.needs):
        if needed:
            allowed &= ((masks >> unit & 1) == 0) | ((masks & needed) == needed)
    return allowed


def _unit_in(a: Array, width: int) -> tuple[Array, Masks]:
    """Sweep the first `width` columns of each matrix (batch, m, m); how many of them added anything."""
    added = np.zeros(len(a), dtype=np.int64)
    for _ in range(width):
        a, taken = _taken_in(a)
        added += taken
    return a, added


def _taken_in(a: Array) -> tuple[Array, Marks]:
    """Eliminate the first column of each matrix; one that depends on those before it is only struck out."""
    pivot = a[:, 0, 0]
    independent = pivot > DEPENDENT
    row = a[:, 0, 1:] * np.where(independent, 1 / np.where(independent, pivot, 1.0), 0.0)[:, None]
    return a[:, 1:, 1:] - a[:, 1:, :1] * row[:, None, :], independent


# --- bounds ------------------------------------------------------------------------------------------


def _promising(problem: Problem, limits: Array, nodes: _Nodes) -> Marks:
    """Whether some subset below each node may be kept."""
    widths = problem.sizes[nodes.level :]
    rss, costs, sure = _costs(nodes.products, widths)
    alive: Marks = rss <= np.max([limits[nodes.sizes + more] for more in range(sum(widths) + 1)], axis=0)
    at = np.flatnonzero(alive & sure)
    rising, ordered = np.sort(widths), np.sort(costs[at], axis=1)
    below = np.zeros(len(at), dtype=np.bool_)
    for dropped in range(len(widths) + 1):
        fewest, most = rising[: len(rising) - dropped].sum(), rising[dropped:].sum()
        limit = np.max([limits[nodes.sizes[at] + more] for more in range(fewest, most + 1)], axis=0)
        below |= rss[at] + (ordered[:, dropped - 1] if dropped else 0.0) <= limit
    alive[at] = below
    return alive


def _costs(a: Array, widths: Sequence[int]) -> tuple[Array, Array, Marks]:
    """With all open units in: residual sums (k,), what each unit alone adds to it when left out (k, units).

    Where columns nearly depend on each other the residual sum is found by elimination and the costs are not sure.
    """
    inverse, sure = _inverse(a[:, :-1, :-1])
    b = np.einsum("kij,kj->ki", inverse, a[:, :-1, -1])
    rss = a[:, -1, -1] - np.einsum("ki,ki->k", b, a[:, :-1, -1])
    if not sure.all():
        left, _ = _unit_in(a[~sure], a.shape[1] - 1)
        rss[~sure] = left[:, 0, 0]
    costs = np.zeros((len(a), len(widths)))
    start = 0
    for unit, width in enumerate(widths):
        own = slice(start, start + width)
        start += width
        if width == 1:
            costs[sure, unit] = b[sure, own.start] ** 2 / inverse[sure, own.start, own.start]
        elif width:
            part = b[sure, own]
            costs[sure, unit] = np.einsum(
                "ki,ki->k", part, np.linalg.solve(inverse[sure, own, own], part[:, :, None])[:, :, 0]
            )
    return np.maximum(rss, 0.0), costs, sure


def _inverse(products: Array) -> tuple[Array, Marks]:
    """The inverses, and whether each may be trusted."""
    try:
        inverse = np.linalg.inv(products)
    except np.linalg.LinAlgError:
        return np.zeros_like(products), np.zeros(len(products), dtype=np.bool_)
    own = np.diagonal(inverse, axis1=1, axis2=2)
    sure = ((own > 0) & (own * SURE < 1)).all(axis=1)
    return np.asarray(inverse, dtype=np.float64), np.asarray(sure)


def _foreseen(problem: Problem) -> tuple[Masks, Masks, Array]:
    """Subsets met by leaving out one unit after the other, each time the cheapest, and all one step off that path."""
    root, starts = _root(problem), np.cumsum([0, *problem.sizes])
    inside = list(range(problem.units))
    masks: list[int] = []
    sizes: list[int] = []
    sums: list[float] = []
    while inside:
        columns = [j for unit in inside for j in range(starts[unit], starts[unit + 1])]
        rss, costs, sure = _costs(
            root.products[:, [*columns, -1]][:, :, [*columns, -1]], [problem.sizes[u] for u in inside]
        )
        if sure[0]:
            whole = sum(1 << unit for unit in inside)
            masks += [whole, *(whole - (1 << unit) for unit in inside)]
            sizes.append(problem.base + len(columns))
            sizes += [sizes[-1] - problem.sizes[unit] for unit in inside]
            sums += [float(rss[0]), *(rss[0] + costs[0]).tolist()]
        inside.pop(int(np.argmin(costs[0])))
    unique, first = np.unique(np.array(masks, dtype=np.int64), return_index=True)
    coefficients, rss = np.array(sizes, dtype=np.int64)[first], np.array(sums)[first]
    good = _complete(problem, unique) & (coefficients < problem.n)
    return unique[good], coefficients[good], rss[good] * SLACK
