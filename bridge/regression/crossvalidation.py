"""How far the model misses rows that it has not seen: k folds, each predicted by the fit without it.

No fold is refitted from its rows. In the coordinates of the orthonormal basis Q of the whole design, the fit without
the fold F has the coefficients (I - Q_F'Q_F)^-1 (Q'y - Q_F'y_F); one pass over the rows gives all folds. A row that the
fit without its fold cannot predict (a level that no other row has) gets no prediction and does not count.

Stone (1974), Geisser (1975); ten folds are common practice. Rows fall into folds by a fixed shuffle, so that the same
data give the same figure. With a group column whole groups are left out together.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from bridge.regression.estimates import back_transform, mean_in_units
from bridge.regression.kernel import Kernel, basis_rows
from bridge.regression.results import CrossValidation
from bridge.regression.spec import Levels, ModelSpec, Observations, Shape

SEED = 20_260_101
UNKNOWN = 1e-7  # share of a row's weight in directions that the other folds say nothing about

Array = NDArray[np.float64]
Folds = NDArray[np.intp]
Refit = Callable[[Observations, Observations], Array]


def run(kernel: Kernel, spec: ModelSpec, observations: Observations) -> CrossValidation:
    """The miss of a least-squares fit, in original units."""
    fold_of, folds = fold_assignment(spec, observations)
    predicted = np.full(kernel.n, np.nan)
    basis = _Basis(kernel, fold_of, folds)
    for fold in range(folds):
        predicted[fold_of == fold] = basis.predicted(fold, spec.response_shape)
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


class _Basis:
    """Q'y and Q_F'Q_F for each fold, gathered in one pass."""

    def __init__(self, kernel: Kernel, fold_of: Folds, folds: int) -> None:
        self.kernel, self.fold_of = kernel, fold_of
        p = kernel.p
        self.products, self.right = np.zeros((folds, p, p)), np.zeros((folds, p))
        for start in range(0, kernel.n, 8192):
            rows = slice(start, min(start + 8192, kernel.n))
            q, y = self._rows(rows)
            inside = fold_of[rows]
            for fold in range(folds):
                part = q[inside == fold]
                self.products[fold] += part.T @ part
                self.right[fold] += part.T @ y[inside == fold]

    def _rows(self, rows: slice | NDArray[np.intp]) -> tuple[Array, Array]:
        """Weighted rows of Q, and the weighted residual: what the coefficients are moved by."""
        q, e = basis_rows(self.kernel, rows), self.kernel.residual[rows]
        if self.kernel.weights is None:
            return q, e
        root = np.sqrt(self.kernel.weights[rows])
        return q * root[:, None], e * root

    def predicted(self, fold: int, shape: Shape) -> Array:
        """The fold's rows predicted by the fit without it, in original units; NaN where that fit cannot say."""
        values, vectors = np.linalg.eigh(np.eye(self.kernel.p) - self.products[fold])
        known = values > 1e-10
        turned = vectors[:, known]
        # Over all rows Q'e is zero, so the other folds' share of it is minus this fold's.
        move = turned @ ((turned.T @ -self.right[fold]) / values[known])
        inside = np.flatnonzero(self.fold_of == fold)
        q = basis_rows(self.kernel, inside)
        eta = self.kernel.fitted[inside] + q @ move
        lost = vectors[:, ~known]
        if lost.shape[1]:
            share = np.sum((q @ lost) ** 2, axis=1) / np.maximum(np.sum(q**2, axis=1), 1e-300)
            eta[share > UNKNOWN] = np.nan
        if shape is Shape.AS_IS:
            return np.asarray(eta)
        others = np.flatnonzero(self.fold_of != fold)
        residual = self.kernel.residual[others] - basis_rows(self.kernel, others) @ move
        return np.asarray(mean_in_units(eta, back_transform(shape, residual)))
