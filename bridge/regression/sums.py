"""Sums of squares source by source, from the coefficients and R^-1; the same for Decimals and for doubles."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import groupby
from typing import Any

import numpy as np
from numpy.typing import NDArray

from bridge.regression.kernel import Number, SourceSum
from bridge.regression.results import DesignColumn

Values = NDArray[Any]  # all Decimals or all doubles


def given_all_others(columns: Sequence[DesignColumn], coefficients: Values, r_inverse: Values) -> tuple[SourceSum, ...]:
    """What each term adds to a model with all others: b' V^-1 b, V its block of (X'WX)^-1. Shapes (p,), (p, p)."""
    found = []
    for term, places in _terms(columns):
        rows = r_inverse[places]
        found.append(SourceSum(term, len(places), _quadratic(rows.dot(rows.T), coefficients[places])))
    return tuple(found)


def one_after_another(columns: Sequence[DesignColumn], added: Values) -> tuple[SourceSum, ...]:
    """What each source adds to those before it; `added` (p,) by column. Powers and bends are sources of their own."""
    found = []
    for term, places in _terms(columns):
        if all(_curve(columns[j]) for j in places):
            found += [SourceSum(columns[j].label, 1, added[j]) for j in places]
        else:
            found.append(SourceSum(term, len(places), sum(added[places])))
    return tuple(found)


def _terms(columns: Sequence[DesignColumn]) -> list[tuple[str, list[int]]]:
    places = [j for j, column in enumerate(columns) if column.factors]
    return [(term, list(group)) for term, group in groupby(places, key=lambda j: columns[j].term)]


def _curve(column: DesignColumn) -> bool:
    return len(column.factors) == 1 and column.factors[0].kind in ("power", "hinge")


def _quadratic(matrix: Values, vector: Values) -> Number:
    """vector' matrix^-1 vector for a positive definite matrix, by elimination."""
    left, rest = matrix.copy(), vector.copy()
    total = rest[0] * rest[0] / left[0, 0]
    for k in range(len(rest) - 1):
        factor = left[k + 1 :, k] / left[k, k]
        rest[k + 1 :] -= factor * rest[k]
        left[k + 1 :, k + 1 :] -= np.outer(factor, left[k, k + 1 :])
        total += rest[k + 1] * rest[k + 1] / left[k + 1, k + 1]
    return total  # type: ignore[no-any-return]
