"""Rows that agree in all predictors, and the spread of the response within them (pure error)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal

import numpy as np
from numpy.typing import NDArray

from bridge.regression.exact import as_decimal
from bridge.regression.integers import LIMB, Whole, limb_count, limbs, multiply
from bridge.regression.spec import Levels, ModelSpec, Observations

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Replicates:
    """The rows that have company, group after group: `rows` (k,), `starts` (groups,) into them."""

    rows: NDArray[np.intp]
    starts: NDArray[np.intp]

    @property
    def df(self) -> int:
        """Degrees of freedom of pure error: rows less groups."""
        return len(self.rows) - len(self.starts)


def find(spec: ModelSpec, observations: Observations) -> Replicates | None:
    """Groups of two rows or more that agree in every predictor, or None."""
    values = [_comparable(observations.columns[term.column]) for term in spec.terms]
    if not values:
        return None
    rows = _with_company(values)
    if not rows.size:
        return None
    values = [column[rows] for column in values]
    order = np.lexsort(values)
    differs = np.any([np.diff(column[order]) != 0 for column in values], axis=0)
    bounds = np.concatenate([[0], np.flatnonzero(differs) + 1, [len(rows)]])
    sizes = np.diff(bounds)
    kept = np.repeat(sizes > 1, sizes)
    if not kept.any():
        return None
    sizes = sizes[sizes > 1]
    return Replicates(rows[order][kept], np.concatenate([[0], np.cumsum(sizes)[:-1]]))


def _comparable(column: NDArray[np.float64] | Levels) -> NDArray[np.float64]:
    return column.codes.astype(np.float64) if isinstance(column, Levels) else column


def _with_company(values: Sequence[Array]) -> NDArray[np.intp]:
    """The rows that may equal another one: a sum of their values with odd factors occurs more than once."""
    step = max(1, len(values[0]) // 1000)
    values = sorted(values, key=lambda column: -len(np.unique(column[::step])))
    if _twice(values[0]).size == 0:  # one column tells all rows apart
        return np.empty(0, dtype=np.intp)
    mixed = np.zeros(len(values[0]))
    for column, factor in zip(values, np.random.default_rng(1).uniform(1, 2, len(values)), strict=True):
        mixed += column * factor
    twice = _twice(mixed)
    return np.flatnonzero(np.isin(mixed, twice)) if twice.size else np.empty(0, dtype=np.intp)


def _twice(values: Array) -> Array:
    ordered = np.sort(values)
    return np.asarray(ordered[1:][ordered[1:] == ordered[:-1]])


def pure_error(groups: Replicates, response: Whole, weight: Whole | None) -> Decimal:
    """The (weighted) sum of squares of the response about its groups' means, exactly, in the current context."""
    everything = slice(0, len(response.digits))
    y = limbs(response, everything)[:, groups.rows]
    twice = limb_count(2 * response.bits)
    if weight is None:
        count = np.diff([*groups.starts, len(groups.rows)]).astype(object)
        one, two = _sums(y, groups), _sums(multiply(y, y, twice), groups)
        unit = response.scale**2
    else:
        w = limbs(weight, everything)[:, groups.rows]
        wy = multiply(w, y, limb_count(weight.bits + response.bits))
        count, one = _sums(w, groups), _sums(wy, groups)
        two = _sums(multiply(wy, y, limb_count(weight.bits + 2 * response.bits)), groups)
        unit = response.scale**2 * weight.scale
    within = [Decimal(a) / Decimal(b) for a, b in zip(two * count - one * one, count, strict=True)]
    return sum(within, Decimal(0)) * as_decimal(unit)


def _sums(column: Array, groups: Replicates) -> NDArray[np.object_]:
    """Each group's sum of a column of limbs, as Python integers."""
    total = np.add.reduceat(column, groups.starts, axis=1).astype(np.int64).astype(object)
    places = np.array([1 << (LIMB * place) for place in range(len(column))], dtype=object)
    return np.asarray((total * places[:, None]).sum(axis=0))


def pure_error_in_doubles(groups: Replicates, response: Array, weights: Array | None) -> float:
    """The same in doubles, in two passes: means first. `response`, `weights` (n,)."""
    y = response[groups.rows]
    w = np.ones_like(y) if weights is None else weights[groups.rows]
    sizes = np.diff([*groups.starts, len(groups.rows)])
    means = np.add.reduceat(w * y, groups.starts) / np.add.reduceat(w, groups.starts)
    return float(np.sum(w * (y - np.repeat(means, sizes)) ** 2))
