"""How far the model misses rows that it has not seen: k folds, each predicted by the fit without it.

No fold is refitted from its rows. In the coordinates of the orthonormal basis Q of the whole design, the fit without
the fold F moves the coefficients by (I - Q_F'Q_F)^-1 (Q'e - Q_F'e_F), with Q'e = 0 over all rows; one pass over the
rows gives all folds. A row that the fit without its fold cannot predict (a level that no other row has) gets no
prediction and does not count.

Stone (1974), Geisser (1975); ten folds are common practice. Rows fall into folds by a fixed shuffle, so that the same
data give the same figure. With a group column whole groups are left out together.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from bridge.regression.auxiliary import orthonormal
from bridge.regression.estimates import back_transform, mean_in_units
from bridge.regression.kernel import Kernel, basis_rows
from bridge.regression.results import CrossValidation
from bridge.regression.spec import Levels, ModelSpec, Observations, Shape
from bridge.regression.threads import MOST_THREADS, ROWS, over_blocks

SEED = 20_260_101
OPEN = 1e-10  # a share of a direction below which the rows outside a fold say nothing about it
UNKNOWN = 1e-7  # share of a row's weight in directions that the other folds say nothing about

Array = NDArray[np.float64]
Folds = NDArray[np.intp]
Refit = Callable[[Observations, Observations], Array]


def run(kernel: Kernel, spec: ModelSpec, observations: Observations) -> CrossValidation:
    """The miss of a least-squares fit, in original units."""
    fold_of, folds = fold_assignment(spec, observations)
    moves, lost = _moves(kernel, fold_of, folds)
    eta = kernel.fitted + _own(kernel, moves, fold_of)
    for fold, directions in lost.items():
        inside = np.flatnonzero(fold_of == fold)
        q = basis_rows(kernel, inside)
        share = np.sum((q @ directions) ** 2, axis=1) / np.maximum(np.sum(q**2, axis=1), 1e-300)
        eta[inside[share > UNKNOWN]] = np.nan
    everything = slice(0, kernel.n)
    predicted = in_units(
        spec.response_shape, eta, fold_of, lambda fold: kernel.residual - _along(kernel, everything, moves[fold])
    )
    return summary(spec, observations, predicted, (fold_of, folds), includes_search=False)


def run_refitting(spec: ModelSpec, observations: Observations, refit: Refit, includes_search: bool) -> CrossValidation:
    """The miss of any way of fitting: `refit(others, fold)` gives the fold's predictions, NaN where it cannot."""
    fold_of, folds = fold_assignment(spec, observations)
    predicted = np.full(observations.n, np.nan)
    for fold in range(folds):
        inside = fold_of == fold
        predicted[inside] = refit(taken(observations, ~inside), taken(observations, inside))
    return summary(spec, observations, predicted, (fold_of, folds), includes_search)


def taken(observations: Observations, rows: NDArray[np.bool_]) -> Observations:
    """Some of the rows, as observations of their own."""
    columns: dict[str, Array | Levels] = {}
    for name, column in observations.columns.items():
        columns[name] = Levels(column.codes[rows], column.names) if isinstance(column, Levels) else column[rows]
    return Observations(columns, int(np.count_nonzero(rows)))


def fold_assignment(spec: ModelSpec, observations: Observations) -> tuple[Folds, int]:
    """The fold of each row (n,), and how many folds there are: never more than rows, or groups."""
    codes = np.arange(observations.n)
    if spec.group is not None:
        column = observations.columns[spec.group]
        _, codes = np.unique(column.codes if isinstance(column, Levels) else column, return_inverse=True)
    count = int(codes.max()) + 1
    folds = max(2, min(spec.folds, count))
    place = np.random.Generator(np.random.PCG64(SEED)).permutation(count)
    return (place % folds)[codes].astype(np.intp), folds


def in_units(shape: Shape, eta: Array, fold_of: Folds, residual: Callable[[int], Array]) -> Array:
    """From the fitted scale (n,) to the mean in original units, by the residuals of the rows outside each fold.

    `residual(fold)` gives the residuals (n,) of all rows from the fit without the fold.
    """
    if back_transform(shape, np.zeros(1)) is None:
        return eta
    predicted = eta.copy()
    for fold in range(int(fold_of.max()) + 1):
        inside = fold_of == fold
        predicted[inside] = mean_in_units(eta[inside], back_transform(shape, residual(fold)[~inside]))
    return predicted


def summary(
    spec: ModelSpec, observations: Observations, predicted: Array, folds: tuple[Folds, int], includes_search: bool
) -> CrossValidation:
    """The figures from each row's prediction."""
    observed = observations.numbers(spec.response)
    known = np.isfinite(predicted)
    miss = observed[known] - predicted[known]
    rmse = float(np.sqrt(np.mean(miss**2))) if known.any() else float("nan")
    mean = abs(float(np.mean(observed)))
    percent = 100 * rmse / mean if mean > 0 else float("nan")
    fold_of, count = folds
    return CrossValidation(rmse, percent, count, fold_of, predicted, spec.group is not None, includes_search)


# --- the fits without each fold ------------------------------------------------------------------------


def _moves(kernel: Kernel, fold_of: Folds, folds: int) -> tuple[Array, dict[int, Array]]:
    """How far each fold's absence moves the coefficients of Q, (folds, p), and the directions that it leaves open."""
    products = _products(kernel, fold_of, folds)
    moves, lost = np.zeros((folds, kernel.p)), {}
    for fold in range(folds):
        values, vectors = np.linalg.eigh(np.eye(kernel.p) - products[fold, :, :-1])
        known = values > OPEN
        turned = vectors[:, known]
        # Over all rows Q'e is zero, so the other folds' share of it is minus this fold's.
        moves[fold] = turned @ ((turned.T @ -products[fold, :, -1]) / values[known])
        if not known.all():
            lost[fold] = vectors[:, ~known]
    return moves, lost


def _products(kernel: Kernel, fold_of: Folds, folds: int) -> Array:
    """Fold by fold Q_F'Q_F and, as the last column, Q_F'e_F (weighted), (folds, p, p + 1)."""

    def work(part: slice) -> Array:
        total = np.zeros((folds, kernel.p, kernel.p + 1))
        for start in range(part.start, part.stop, 2 * ROWS):
            rows = slice(start, min(start + 2 * ROWS, part.stop))
            turn = np.argsort(fold_of[rows], kind="stable")
            q, e = orthonormal(kernel, rows)[turn], kernel.residual[rows][turn]
            if kernel.weights is not None:
                e = e * np.sqrt(kernel.weights[rows])[turn]
            ends = np.searchsorted(fold_of[rows][turn], np.arange(folds + 1))
            for fold in np.flatnonzero(np.diff(ends)):
                inside = slice(ends[fold], ends[fold + 1])
                total[fold, :, :-1] += q[inside].T @ q[inside]
                total[fold, :, -1] += q[inside].T @ e[inside]
        return total

    return np.asarray(sum(over_blocks(kernel.n, work, max(ROWS, -(-kernel.n // MOST_THREADS)))))


def _own(kernel: Kernel, moves: Array, fold_of: Folds) -> Array:
    """Row by row what the absence of its fold moves the fitted value by, (n,)."""

    def work(rows: slice) -> Array:
        inside = fold_of[rows]
        return np.asarray(_along(kernel, rows, moves.T)[np.arange(len(inside)), inside])

    return np.concatenate(over_blocks(kernel.n, work))


def _along(kernel: Kernel, rows: slice, vectors: Array) -> Array:
    """Rows of X R^-1 times vectors (p, k)."""
    if kernel.basis is not None:
        return np.asarray(kernel.basis[rows] @ vectors)
    return np.asarray(kernel.x[rows] @ (kernel.r_inverse @ vectors))
