"""The cross-validated miss of many subsets of one design's columns, from the cross-products of each fold.

The same figure as `crossvalidation.run` gives for the subset's own fit, at a fraction of the cost: for choosing.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from bridge.regression import crossvalidation, design
from bridge.regression.spec import ModelSpec, Observations

OPEN = 1e-9  # a smaller eigenvalue of a fold's scaled cross-products: that fold may leave something undetermined

Array = NDArray[np.float64]


class Judge:
    """The columns of the design with all candidates, scaled, and the response's residual from their common fit.

    Working from that residual keeps the digits of good fits: a subset's residual is the common one plus what the
    difference of coefficients makes.
    """

    def __init__(self, spec: ModelSpec, observations: Observations) -> None:
        self._spec, self._observations = spec, observations
        columns = design.layout(spec, observations).columns
        self._labels = {column.label: j for j, column in enumerate(columns)}
        x = design.matrix(columns, observations)
        if spec.intercept:
            x[:, 1:] -= x[:, 1:].mean(axis=0)
        lengths = np.sqrt(np.sum(x**2, axis=0))
        self._x = x / np.where(lengths > 0, lengths, 1.0)
        self._y = design.response(spec, observations)
        weights = design.weights(spec, observations)
        root = np.ones(len(self._y)) if weights is None else np.sqrt(weights)
        weighted = self._x * root[:, None]
        self._common = np.linalg.lstsq(weighted, self._y * root, rcond=1e-12)[0]
        self._residual = self._y - self._x @ self._common
        self._fold_of, self._folds = crossvalidation.fold_assignment(spec, observations)
        both = np.column_stack([weighted, self._residual * root])
        own = [both[self._fold_of == fold] for fold in range(self._folds)]
        products = np.array([part.T @ part for part in own])
        self._others = products.sum(axis=0) - products

    def miss(self, reduced: ModelSpec) -> float | None:
        """The root mean square miss of the model with some candidates left out; None where a fold is in doubt."""
        layout = design.layout(reduced, self._observations)
        at = [self._labels[column.label] for column in layout.columns if column.label in self._labels]
        if len(at) < len(layout.columns) or not at:
            return None
        inner = self._others[:, at][:, :, at]
        values, vectors = np.linalg.eigh(inner)
        if (values[:, 0] < OPEN * values[:, -1]).any():
            return None
        right = self._others[:, at, -1] + self._others[:, at, :-1] @ self._common
        own = np.einsum("fij,fj->fi", vectors, np.einsum("fij,fi->fj", vectors, right) / values)
        differences = np.tile(self._common, (self._folds, 1))
        differences[:, at] -= own
        residual = self._residual[:, None] + self._x @ differences.T  # of every row, without each fold
        eta = self._y - residual[np.arange(len(self._y)), self._fold_of]
        predicted = crossvalidation.in_units(
            self._spec.response_shape, eta, self._fold_of, lambda fold: np.asarray(residual[:, fold])
        )
        folds = (self._fold_of, self._folds)
        return crossvalidation.summary(reduced, self._observations, predicted, folds, False).rmse
