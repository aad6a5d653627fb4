"""Coefficients and standard errors are the doubles nearest to exact rational arithmetic (the small problems)."""

from __future__ import annotations

import pytest

from bridge.regression import leastsquares
from tests.regression.exact_problems import SMALL, problems, root, truth

SOME = list(problems(count=60, most_rows=SMALL, seed=7))


@pytest.mark.parametrize(("name", "spec", "observations"), SOME, ids=[name for name, _, _ in SOME])
def test_nearest_double(name, spec, observations):
    solved = leastsquares.solve(spec, observations)
    exact = truth(spec, observations)
    kernel = solved.kernel
    assert solved.aliased == ()
    assert kernel.coefficients.tolist() == [float(b) for b in exact.coefficients]
    assert kernel.standard_errors.tolist() == [float(root(v)) for v in exact.variances]
    assert kernel.rss == float(exact.rss)
