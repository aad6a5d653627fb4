"""Cross-validation: against refitting without each fold, and where a fold cannot be predicted."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from bridge.regression import crossvalidation
from bridge.regression.core import fit_model
from bridge.regression.estimates import estimate
from bridge.regression.spec import CategoryTerm, FitBy, Levels, ModelSpec, NumberTerm, Observations, Shape
from tests.regression.problems import TWO, kernel, rows

SPEC = ModelSpec("y", terms=TWO)


def by_refitting(spec: ModelSpec, observations: Observations, fold_of: np.ndarray) -> np.ndarray:
    """Each row's estimate by the model fitted to the rows of the other folds, through the front door."""
    predicted = np.full(observations.n, np.nan)
    for fold in np.unique(fold_of):
        others, own = (crossvalidation.taken(observations, fold_of != fold), np.flatnonzero(fold_of == fold))
        result = fit_model(spec, others)
        predicted[own] = estimate(result, crossvalidation.taken(observations, fold_of == fold)).estimate
    return predicted


@pytest.mark.parametrize("shape", [Shape.AS_IS, Shape.LOG, Shape.ROOT])
@pytest.mark.parametrize("weight", [None, "w"])
@pytest.mark.parametrize("group", [None, "group"])
def test_as_by_refitting(shape, weight, group):
    spec = replace(SPEC, response_shape=shape, weight=weight, group=group, folds=6)
    observations = rows(n=50)
    found = fit_model(spec, observations).cross_validation
    assert found.predicted == pytest.approx(by_refitting(spec, observations, found.fold_of), rel=1e-9)
    miss = found.predicted - observations.numbers("y")
    assert found.rmse == pytest.approx(np.sqrt(np.mean(miss**2)), rel=1e-12)
    assert found.rmse_percent == pytest.approx(100 * found.rmse / observations.numbers("y").mean(), rel=1e-12)
    assert (found.grouped, found.includes_search) == (group is not None, False)


@pytest.mark.parametrize("weight", [None, "w"])
def test_many_rows(weight):
    """By blocks: as many folds as asked, the same miss as refitting without each."""
    observations = rows(n=23_000)
    spec = replace(SPEC, weight=weight, folds=7)
    found = crossvalidation.run(kernel(observations, weight=weight), spec, observations)
    x = np.column_stack([np.ones(23_000), observations.numbers("a"), observations.numbers("b")])
    root = np.ones(23_000) if weight is None else np.sqrt(observations.numbers("w"))
    y = observations.numbers("y")
    for fold in range(7):
        inside = found.fold_of == fold
        b = np.linalg.lstsq((x * root[:, None])[~inside], (y * root)[~inside], rcond=None)[0]
        assert found.predicted[inside] == pytest.approx(x[inside] @ b, rel=1e-11)


def test_folds():
    """Of equal size, fixed, never more than rows; groups stay together, however few."""
    fold_of, folds = crossvalidation.fold_assignment(SPEC, rows(n=45))
    assert folds == 10
    assert np.bincount(fold_of).tolist() == [5] * 5 + [4] * 5
    assert (fold_of == crossvalidation.fold_assignment(SPEC, rows(seed=9, n=45))[0]).all()
    assert crossvalidation.fold_assignment(replace(SPEC, folds=100), rows(n=45))[1] == 45
    observations = rows(n=45)
    fold_of, folds = crossvalidation.fold_assignment(replace(SPEC, group="group", folds=4), observations)
    assert folds == 4
    for one in range(10):
        assert len(set(fold_of[observations.numbers("group") == one])) == 1
    texts = Levels(observations.numbers("group").astype(np.intp), tuple("abcdefghij"))
    same, _ = crossvalidation.fold_assignment(replace(SPEC, group="group", folds=4), rows(n=45, group=texts))
    assert (same == fold_of).all()


def test_each_row_its_own_fold_is_leave_one_out():
    """Allen's (1974) PRESS: residual over 1 - leverage."""
    observations = rows()
    result = fit_model(replace(SPEC, folds=40), observations)
    miss = result.observed - result.cross_validation.predicted
    assert miss == pytest.approx(result.fit.residual / (1 - result.influence.leverage), rel=1e-10)
    press = np.sum(miss**2)
    assert result.fit.loo_r_squared == pytest.approx(1 - press / result.fit.ss_total, rel=1e-12)


def test_a_level_that_no_other_fold_has():
    """Its rows get no estimate and do not count; all others are estimated as if the level were not there."""
    codes = np.zeros(40, dtype=np.intp)
    codes[[3]] = 1
    observations = rows(kind=Levels(codes, ("many", "one")))
    spec = replace(SPEC, terms=(*TWO, CategoryTerm("kind")))
    for shape in (Shape.AS_IS, Shape.LOG):
        found = fit_model(replace(spec, response_shape=shape), observations).cross_validation
        assert np.flatnonzero(np.isnan(found.predicted)).tolist() == [3]
        own = found.fold_of == found.fold_of[3]
        others = crossvalidation.taken(observations, ~own)
        plain = fit_model(replace(SPEC, response_shape=shape), others)
        wanted = estimate(plain, crossvalidation.taken(observations, own)).estimate
        known = ~np.isnan(found.predicted[own])
        assert found.predicted[own][known] == pytest.approx(wanted[known], rel=1e-9)
        assert np.isfinite(found.rmse)


def test_groups_that_are_levels():
    """Every group left out is a level that no other row has: nothing can be estimated, and no figure is claimed."""
    kind = Levels(np.arange(40) % 4, ("p", "q", "r", "s"))
    observations = rows(kind=kind)
    spec = replace(SPEC, terms=(NumberTerm("a"), CategoryTerm("kind")), group="kind")
    found = fit_model(spec, observations).cross_validation
    assert found.folds == 4
    base = fit_model(spec, observations).design.bases[0][1]
    left = ~np.isnan(found.predicted)
    assert not left[np.array(kind.names)[kind.codes] != base].any()


def test_a_row_that_alone_sets_a_number_apart():
    """b varies in one row only."""
    b = np.full(40, 2.5)
    b[11] = 3.5
    found = fit_model(SPEC, rows(b=b)).cross_validation
    assert np.flatnonzero(np.isnan(found.predicted)).tolist() == [11]


def test_resistant_fits_are_made_anew():
    observations = rows(odd=15.0)
    result = fit_model(replace(SPEC, fit_by=FitBy.RESISTANT), observations)
    found = result.cross_validation
    wanted = by_refitting(replace(SPEC, fit_by=FitBy.RESISTANT), observations, found.fold_of)
    assert found.predicted == pytest.approx(wanted, rel=1e-9)


def test_nearly_dependent_columns():
    """A polynomial of degree 8 far from zero: the folds' fits keep their digits."""
    x = np.round(np.linspace(10, 12, 60), 3)
    y = np.round(np.sin(3 * x) + 0.05 * np.random.default_rng(0).standard_normal(60), 4)
    spec = ModelSpec("y", terms=(NumberTerm("x", degree=8),))
    observations = Observations({"x": x, "y": y}, 60)
    found = fit_model(spec, observations).cross_validation
    z = np.polynomial.chebyshev.chebvander((x - 11) / 1, 8)
    for fold in range(10):
        inside = found.fold_of == fold
        b = np.linalg.lstsq(z[~inside], y[~inside], rcond=None)[0]
        assert found.predicted[inside] == pytest.approx(z[inside] @ b, abs=1e-9)


def test_a_mean_of_zero_has_no_percentage():
    a = np.arange(20.0)
    y = np.where(a % 2 == 0, 1.0, -1.0)
    result = fit_model(ModelSpec("y", terms=(NumberTerm("a"),)), Observations({"a": a, "y": y}, 20))
    assert np.isnan(result.cross_validation.rmse_percent)
