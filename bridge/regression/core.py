"""The door of the numeric core: from a model and its rows to everything about the fit.

Search among the candidates (if asked) → least squares → resistant weights (if asked) → covariance → figures →
analysis of variance → the examination → how to come back to original units.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from bridge.regression import (
    anova,
    boxcox,
    checks,
    collinearity,
    covariance,
    crossvalidation,
    design,
    estimates,
    fit,
    influence,
    leastsquares,
    resistant,
    search,
)
from bridge.regression.errors import OneLevel, RegressionError
from bridge.regression.kernel import Kernel
from bridge.regression.results import CrossValidation, Design, ModelResult, Range
from bridge.regression.spec import (
    CategoryTerm,
    Errors,
    FitBy,
    Levels,
    ModelSpec,
    NumberTerm,
    Observations,
    Search,
)
from bridge.regression.threads import one_blas_thread

Array = NDArray[np.float64]


def fit_model(spec: ModelSpec, observations: Observations) -> ModelResult:
    """Fit and examine one model on complete rows. Raises RegressionError.

    >>> x = np.array([1.0, 2.0, 3.0, 4.0, 5.0, 6.0])
    >>> y = np.array([3.1, 4.9, 7.2, 9.0, 10.8, 13.1])
    >>> result = fit_model(ModelSpec("y", terms=(NumberTerm("x"),)), Observations({"x": x, "y": y}, len(x)))
    >>> [column.label for column in result.design.columns], result.fit.coefficients.round(4).tolist()
    (['intercept', 'x'], [1.0667, 1.9857])
    """
    try:
        with one_blas_thread(), np.errstate(over="ignore"):
            return _fit_model(spec, observations)
    except np.linalg.LinAlgError as error:  # the fit is exact, but doubles cannot examine it
        raise RegressionError(f"the columns depend too nearly on each other to be examined ({error})") from error


def _fit_model(asked: ModelSpec, observations: Observations) -> ModelResult:
    leastsquares.ingredients(asked, observations)
    found = search.run(asked, observations) if _searches(asked) else None
    spec = asked if found is None else search.with_terms(asked, found.dropped)
    solved = leastsquares.solve(spec, observations)
    kernel = _by(spec.fit_by, solved.kernel)
    overlap = collinearity.measure(kernel)
    layout = solved.layout
    observed = observations.numbers(spec.response)
    return ModelResult(
        spec=spec,
        asked=asked,
        design=Design(kernel.columns, kernel.x, solved.aliased, layout.bases, layout.levels),
        fit=fit.make(kernel, _covariance(kernel, spec, observations), overlap, spec.errors, spec.level),
        anova=anova.make(kernel),
        influence=influence.measure(kernel),
        checks=checks.run(kernel, spec, observations),
        collinearity=overlap,
        cross_validation=_cross_validation(kernel, asked, spec, observations),
        back=estimates.back_transform(spec.response_shape, kernel.residual),
        box_cox=boxcox.profile(kernel, observed),
        search=found,
        ranges=_ranges(spec, observations),
        observed=observed,
        max_leverage=float((kernel.leverage if kernel.weights is None else kernel.leverage / kernel.weights).max()),
    )


def _searches(asked: ModelSpec) -> bool:
    return asked.search is not Search.NONE and any(term.candidate for term in asked.terms)


def _by(criterion: FitBy, kernel: Kernel) -> Kernel:
    return resistant.fit(kernel) if criterion is FitBy.RESISTANT else kernel


def _covariance(kernel: Kernel, spec: ModelSpec, observations: Observations) -> covariance.CovarianceResult:
    groups = None
    if spec.errors is Errors.GROUPED:
        if spec.group is None:
            raise RegressionError("grouped standard errors need a group column")
        column = observations.columns[spec.group]
        groups = np.unique(column.codes if isinstance(column, Levels) else column, return_inverse=True)[1]
        if groups.max() == 0:
            raise OneLevel(f"{spec.group} has a single group", spec.group)
    order = checks.in_order(spec, observations) if spec.order is not None else None
    return covariance.make(kernel, spec.errors, groups, order, spec.lags)


def _ranges(spec: ModelSpec, observations: Observations) -> tuple[Range, ...]:
    columns = [term.column for term in spec.terms if isinstance(term, NumberTerm)]
    values = [observations.numbers(column) for column in columns]
    return tuple(
        Range(column, float(x.min()), float(x.mean()), float(x.max()))
        for column, x in zip(columns, values, strict=True)
    )


# --- rows left out ------------------------------------------------------------------------------


def _cross_validation(kernel: Kernel, asked: ModelSpec, spec: ModelSpec, observations: Observations) -> CrossValidation:
    """From the one factorisation where that will do; a search or a resistant fit is done again without each fold."""
    if not _searches(asked) and asked.fit_by is FitBy.LEAST_SQUARES:
        return crossvalidation.run(kernel, spec, observations)

    def refit(others: Observations, fold: Observations) -> Array:
        try:
            return _predicted(asked, others, fold)
        except RegressionError:  # the other rows do not carry the model
            return np.full(fold.n, np.nan)

    return crossvalidation.run_refitting(asked, observations, refit, _searches(asked))


def _predicted(asked: ModelSpec, others: Observations, fold: Observations) -> Array:
    """The mean response of the fold's rows, original units, by the model found on the others."""
    spec = asked
    leastsquares.ingredients(asked, others)
    if _searches(asked):
        spec = search.with_terms(asked, search.run(asked, others).dropped)
    kernel = _by(spec.fit_by, leastsquares.solve(spec, others).kernel)
    eta = design.matrix(kernel.columns, fold) @ kernel.coefficients
    for term in spec.terms:
        if isinstance(term, CategoryTerm):
            seen = np.bincount(others.levels(term.column).codes, minlength=len(fold.levels(term.column).names)) > 0
            eta = np.where(seen[fold.levels(term.column).codes], eta, np.nan)
    return estimates.mean_in_units(eta, estimates.back_transform(spec.response_shape, kernel.residual))
