"""Overlap of predictors: properties, and designs in which doubles would lose it."""

from __future__ import annotations

import numpy as np
import pytest

from bridge.regression import collinearity
from bridge.regression.spec import CategoryTerm, CrossedTerm, Levels, NumberTerm, Observations
from tests.reference import load
from tests.regression.problems import TWO, kernel, rows


def test_columns_that_do_not_overlap():
    a, b = np.meshgrid([-1.0, 0.0, 1.0], [-2.0, 2.0])
    y = np.arange(6.0) ** 2
    found = collinearity.measure(kernel(Observations({"a": a.ravel(), "b": b.ravel(), "y": y}, 6)))
    assert [term.gvif for term in found.terms] == pytest.approx([1, 1], rel=1e-14)
    assert found.condition_indexes == pytest.approx([1, 1, 1], rel=1e-14)


@pytest.mark.parametrize("name", ["filip", "wampler1", "pontius", "longley"])
def test_published_near_dependence(name):
    """The largest condition index is the condition number of the exact path; the powers of one column are one term."""
    case = load(name).fits[0]
    from bridge.regression.leastsquares import solve

    found = solve(case.spec, case.observations).kernel
    overlap = collinearity.measure(found)
    assert overlap.condition_indexes[-1] == pytest.approx(found.condition_number, rel=1e-12)
    assert overlap.condition_indexes[0] == 1
    assert (np.diff(overlap.condition_indexes) >= 0).all()
    assert overlap.variance_shares.sum(axis=0) == pytest.approx(1, rel=1e-12)
    if len(overlap.terms) == 1:
        assert overlap.terms[0].gvif == pytest.approx(1, rel=1e-9)


def test_gvif_does_not_depend_on_the_coding():
    """Fox & Monette's reason for it: other base, same figure."""
    observations = rows(kind=Levels((np.arange(40) * 7 // 3) % 4, ("p", "q", "r", "s")))
    made = []
    for base in "pqrs":
        terms = (*TWO, CategoryTerm("kind", base=base))
        found = kernel(observations, terms=terms, crossed=(CrossedTerm("a", "b"),))
        made.append([term.gvif for term in collinearity.measure(found).terms])
    for other in made[1:]:
        assert other == pytest.approx(made[0], rel=1e-10)


def test_nor_on_units():
    observations = rows()
    larger = Observations({**observations.columns, "a": observations.numbers("a") * 1e6}, 40)
    one, two = (collinearity.measure(kernel(some)) for some in (observations, larger))
    assert one.condition_indexes == pytest.approx(two.condition_indexes, rel=1e-12)
    assert [term.gvif for term in one.terms] == pytest.approx([term.gvif for term in two.terms], rel=1e-12)


def test_a_near_copy_carries_the_variance():
    """Belsley, Kuh & Welsch: a large index with two large shares tells which two columns are tied."""
    observations = rows()
    near = np.round(observations.numbers("a") + 0.001 * np.random.default_rng(1).standard_normal(40), 4)
    found = kernel(Observations({**observations.columns, "c": near}, 40), terms=(*TWO, NumberTerm("c")))
    overlap = collinearity.measure(found)
    assert overlap.condition_indexes[-1] > 1000
    assert (overlap.variance_shares[-1] > 0.99).tolist() == [False, True, False, True]
