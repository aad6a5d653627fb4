"""Best subsets: against fitting every subset, its rules, its odd cases; the larger runs: subset_problems.py."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from bridge.regression import branching, crossvalidation, design
from bridge.regression.core import fit_model
from bridge.regression.errors import ConstantResponse, TooFewRows, TooManyColumns
from bridge.regression.leastsquares import solve
from bridge.regression.search import TRIED, run, with_terms
from bridge.regression.spec import CategoryTerm, CrossedTerm, Levels, NumberTerm, Observations, Search, Shape
from bridge.regression.subsets import Judge
from tests.regression.subset_problems import disagreement, every_subset, mixed, numbers, problems, units


@pytest.mark.parametrize(("name", "spec", "observations"), list(problems(15, 11)))
def test_every_subset_fitted(name, spec, observations):
    assert disagreement(spec, observations, by_fitting=True) < 1e-7


def test_the_two_enumerations_agree():
    for spec, observations in (numbers(1, 9), mixed(2)):
        masks, fitted, sizes = every_subset(spec, observations, by_fitting=True)
        again, halved, same = every_subset(spec, observations, by_fitting=False)
        assert (masks == again).all()
        assert (sizes == same).all()
        assert halved == pytest.approx(fitted, rel=1e-9)


@pytest.mark.parametrize("seed", range(3))
def test_sixteen_candidates_none_of_which_matters(seed):
    """Nothing stands out, so that bounds hardly help: still the same ten best of 65,536."""
    spec, observations = numbers(seed, 16, 60, strength=0.0)
    assert disagreement(spec, observations, by_fitting=False) < 1e-9


@pytest.mark.parametrize("by", [Search.ADJUSTED_R2, Search.CP, Search.BIC, Search.CROSS_VALIDATION])
@pytest.mark.parametrize("weight", [None, "w"])
def test_the_figure_is_that_of_the_fit(by, weight):
    spec, observations = numbers(3, 8)
    result = fit_model(replace(spec, search=by, weight=weight), observations)
    figure = result.search.best[0].figure
    if by is Search.ADJUSTED_R2:
        assert figure == pytest.approx(result.fit.adjusted_r_squared, rel=1e-12)
    elif by is Search.BIC:
        assert figure == pytest.approx(result.fit.bic, rel=1e-12)
    elif by is Search.CP:
        full = fit_model(replace(spec, weight=weight), observations).fit
        wanted = result.fit.ss_residual / full.residual_sd**2 - 120 + 2 * len(result.fit.coefficients)
        assert figure == pytest.approx(wanted, rel=1e-9, abs=1e-9)
    else:
        chosen = fit_model(result.spec, observations)
        assert figure == pytest.approx(chosen.cross_validation.rmse, rel=1e-10)
        assert result.cross_validation.includes_search
    assert set(result.search.chosen) | set(result.search.dropped) == {f"x{j}" for j in range(8)}
    assert [term.column for term in result.spec.terms] == [
        name for name in columns_of(spec) if name in result.search.chosen
    ]


def columns_of(spec):
    return [term.column for term in spec.terms]


def test_a_product_goes_only_with_both_its_terms():
    spec, observations = mixed(7)
    for by in (Search.ADJUSTED_R2, Search.CP, Search.BIC, Search.CROSS_VALIDATION):
        found = run(replace(spec, search=by), observations)
        for one in found.best:
            for term, needed in units(spec)[0].items():
                assert term not in one.terms or set(needed) <= set(one.terms)
    assert found.subsets == len(every_subset(spec, observations, by_fitting=False)[0])


def test_columns_of_a_term_go_together():
    spec, observations = mixed(8)
    result = fit_model(replace(spec, search=Search.BIC), observations)
    kept = {column.term for column in result.design.columns}
    assert "x0" in kept  # not a candidate
    layout = design.layout(spec, observations).columns
    for term in kept - {"intercept"}:
        assert [c.label for c in result.design.columns if c.term == term] == [
            c.label for c in layout if c.term == term
        ]  # fmt: skip


def test_the_best_of_each_size():
    """What cross-validation chooses among: three of each number of coefficients, by residual sums."""
    for spec, observations in (numbers(5, 11), mixed(5)):
        masks, sums, sizes = every_subset(spec, observations, by_fitting=False)
        found = run(replace(spec, search=Search.CROSS_VALIDATION), observations)
        _, names = units(spec)
        likely = set()
        for size in np.unique(sizes):
            at = np.flatnonzero(sizes == size)
            for mask in masks[at[np.argsort(sums[at])[:TRIED]]].tolist():
                likely.add(frozenset(name for i, name in enumerate(names) if mask >> i & 1))
        assert {frozenset(one.terms) for one in found.best} <= likely
        figures = [one.figure for one in found.best]
        assert figures == sorted(figures)
        wanted = min(
            crossvalidation.run(solve(reduced, observations).kernel, reduced, observations).rmse
            for kept in likely
            for reduced in [with_terms(spec, [name for name in names if name not in kept])]
        )
        assert figures[0] == pytest.approx(wanted, rel=1e-9)


@pytest.mark.parametrize("shape", [Shape.AS_IS, Shape.LOG, Shape.ROOT])
@pytest.mark.parametrize("weight", [None, "w"])
@pytest.mark.parametrize("intercept", [True, False])
def test_the_quick_miss_is_the_miss(shape, weight, intercept):
    spec, observations = numbers(6, 6)
    spec = replace(spec, response_shape=shape, weight=weight, intercept=intercept, folds=7)
    y = np.abs(observations.numbers("y")) + 1
    observations = Observations({**observations.columns, "y": y}, observations.n)
    judge = Judge(spec, observations)
    for dropped in ([], ["x0"], ["x1", "x2", "x5"], ["x0", "x1", "x2", "x3", "x4"]):
        reduced = with_terms(spec, dropped)
        wanted = crossvalidation.run(solve(reduced, observations).kernel, reduced, observations).rmse
        assert judge.miss(reduced) == pytest.approx(wanted, rel=1e-10)


def test_the_quick_miss_gives_up_where_a_fold_is_in_doubt():
    """A level that only one row has: the fold with it leaves the others without that column."""
    spec, observations = numbers(6, 4)
    codes = np.zeros(observations.n, dtype=np.intp)
    codes[3] = 1
    spec = replace(spec, terms=(*spec.terms, CategoryTerm("kind", candidate=True)), search=Search.CROSS_VALIDATION)
    observations = Observations({**observations.columns, "kind": Levels(codes, ("p", "q"))}, observations.n)
    assert Judge(spec, observations).miss(replace(spec, search=Search.NONE)) is None
    assert np.isfinite(run(spec, observations).best[0].figure)


def test_the_miss_of_the_whole_search_is_honest():
    """No candidate matters: the search finds something all the same, and its miss says that it is nothing."""
    spec, observations = numbers(11, 14, 40, strength=0.0)
    result = fit_model(replace(spec, search=Search.ADJUSTED_R2), observations)
    assert len(result.search.chosen) > 0
    assert result.cross_validation.includes_search
    blind = crossvalidation.run(solve(result.spec, observations).kernel, result.spec, observations)
    assert result.cross_validation.rmse > 1.05 * blind.rmse


def test_candidates_that_depend_on_each_other():
    """A copy adds nothing: of equals the smaller subset is kept, and the fit has no aliased column."""
    spec, observations = numbers(2, 7)
    columns = {**observations.columns, "x6": observations.numbers("x0")}
    result = fit_model(replace(spec, search=Search.BIC), Observations(columns, observations.n))
    assert result.design.aliased == ()
    assert not {"x0", "x6"} <= set(result.search.chosen)
    constant = {**observations.columns, "x6": np.full(observations.n, 0.1)}
    assert "x6" not in fit_model(replace(spec, search=Search.BIC), Observations(constant, observations.n)).search.chosen


def test_more_candidates_than_rows():
    spec, observations = numbers(4, 18, 15)
    found = run(replace(spec, search=Search.BIC), observations)
    assert len(found.chosen) + 1 < 15
    with pytest.raises(TooFewRows):
        run(replace(spec, search=Search.CP), observations)
    spec, observations = numbers(4, 25, 15)
    with pytest.raises(TooFewRows):
        run(replace(spec, search=Search.BIC), observations)


def test_refusals():
    spec, observations = numbers(4, 31, 80)
    with pytest.raises(TooManyColumns, match="31 candidates"):
        run(replace(spec, search=Search.BIC), observations)
    spec, observations = numbers(4, 3, 20)
    flat = Observations({**observations.columns, "y": np.full(20, 5.0)}, 20)
    with pytest.raises(ConstantResponse):
        fit_model(replace(spec, search=Search.ADJUSTED_R2), flat)
    with pytest.raises(TooFewRows):
        run(replace(spec, search=Search.BIC), Observations({k: v[:1] for k, v in observations.columns.items()}, 1))


def test_no_candidate_at_all():
    spec, observations = numbers(4, 3)
    kept = replace(spec, terms=tuple(replace(term, candidate=False) for term in spec.terms), search=Search.CP)
    found = run(kept, observations)
    assert (found.chosen, found.dropped, found.subsets) == ((), (), 1)


def test_the_same_rows_give_the_same_search():
    spec, observations = numbers(9, 18, 60, strength=0.0)
    for by in (Search.BIC, Search.CROSS_VALIDATION):
        assert run(replace(spec, search=by), observations) == run(replace(spec, search=by), observations)


def test_count_of_allowed_subsets():
    def problem(needs, base=1):
        return branching.Problem(np.eye(len(needs) + 1), (1,) * len(needs), needs, 0, base, 99)

    assert branching.count(problem((0,) * 10)) == 1024
    assert branching.count(problem((0, 0, 0b11))) == 5
    assert branching.count(problem((0, 0, 0b11, 0b01, 0))) == 2 * (1 + 1 + 2 + 4)
    assert branching.count(problem((0,) * 3, base=0)) == 7


def test_crossed_names_follow_shapes():
    spec, observations = numbers(3, 3)
    positive = Observations({**observations.columns, "x0": np.exp(observations.numbers("x0"))}, observations.n)
    terms = (NumberTerm("x0", shape=Shape.LOG, candidate=True), *spec.terms[1:])
    crossed = (CrossedTerm("x0", "x1"),)
    found = run(replace(spec, terms=terms, crossed=crossed, search=Search.BIC), positive)
    assert set(found.chosen) | set(found.dropped) == {"log x0", "x1", "x2", "log x0 x x1"}
