"""Exact sums of products over the rows, and exact combinations of the columns row by row, by ordinary matrix products.

Both work on the limbs of `integers.py`, where every sum of a block is a whole number below 2^53.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from bridge.regression.integers import LIMB, ROWS, WholeDesign, carried, of_integer
from bridge.regression.threads import each_block, over_blocks

Array = NDArray[np.float64]
Objects = NDArray[np.object_]

CELLS_AT_ONCE = 2_000_000


def cross_products(design: WholeDesign) -> Objects:
    """All (weighted) sums of products of the columns, the response last, as Python integers: shape (m + 1, m + 1).

    Entry (i, j) times scale_i * scale_j * scale_of_weights is the sum of w x_i x_j. Good for 2^25 rows.
    """

    def work(rows: slice) -> NDArray[np.int64]:
        block = design.block(rows)
        return np.asarray((design.weighted(block, rows) @ block.T).astype(np.int64))

    total = sum(each_block(design.n, work, ROWS), np.int64(0))
    left = _put_together(total.astype(object), design.weighted_starts)
    return _put_together(left.T, design.starts).T


def _put_together(limbs: Objects, starts: NDArray[np.intp]) -> Objects:
    """Rows of limbs summed to the rows of their columns, each limb at its place value."""
    places = np.arange(starts[-1]) - np.repeat(starts[:-1], np.diff(starts))
    values = np.array([1 << (LIMB * int(place)) for place in places], dtype=object)
    return np.asarray(np.add.reduceat(limbs * values[:, None], starts[:-1], axis=0))


def combinations(design: WholeDesign, factors: Objects, shift: int) -> Array:
    """Row by row the sums over the columns of whole number x factor x 2^-shift, as nearest doubles.

    `factors` (m + 1, k) holds Python integers, the response's last; the outcome has shape (n, k).
    """
    matrix, places = _factor_limbs(design, factors)

    def work(rows: slice) -> Array:
        sums = (matrix @ design.block(rows)).reshape(places, factors.shape[1], -1)
        return _to_double(sums, shift).T

    step = max(256, min(ROWS, CELLS_AT_ONCE // len(matrix)))
    return np.concatenate(over_blocks(design.n, work, step))


def _factor_limbs(design: WholeDesign, factors: Objects) -> tuple[Array, int]:
    """The factors' limbs laid out so that one matrix product forms every place value: (places * k, limbs)."""
    count = factors.shape[1]
    cut = [[of_integer(factor) if factor else [] for factor in row] for row in factors]
    width = [int(w) for w in np.diff(design.starts)]
    longest = max(len(value) + w for row, w in zip(cut, width, strict=True) for value in row)
    places = longest + 2  # room to carry into
    matrix = np.zeros((places, count, int(design.starts[-1])))
    for j, row in enumerate(cut):
        for k, value in enumerate(row):
            for limb in range(width[j] if value else 0):
                matrix[limb : limb + len(value), k, design.starts[j] + limb] = value
    return matrix.reshape(places * count, -1), places


def _to_double(sums: Array, shift: int) -> Array:
    carried(sums, len(sums))
    value = np.zeros(sums.shape[1:])
    for i, limb in enumerate(sums):  # lowest first, so that only the last addition rounds
        place = LIMB * i - shift
        if -1000 < place < 1000:  # below: far too small to count; above: empty
            value += limb * 2.0**place
    return value
