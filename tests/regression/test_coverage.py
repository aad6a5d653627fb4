"""Simulated coverage, a few repeats of each model: `coverage.py` prints the table of the full run."""

from __future__ import annotations

import pytest

from tests.regression.coverage import run, scenarios

FEW = 60


@pytest.mark.parametrize("scenario", scenarios(), ids=lambda scenario: scenario.name)
def test_the_truth_lies_within_as_often_as_claimed(scenario):
    """Within four Monte-Carlo standard errors of 95% (and one hundredth, for shares near 1 of few repeats)."""
    found = run(scenario, FEW)
    for share, error, claimed in (
        (found.mean, found.mean_error, scenario.mean),
        (found.case, found.case_error, scenario.case),
    ):
        if claimed:
            assert abs(share - 0.95) < 4 * error + 0.01
        else:
            assert share > 0.8
