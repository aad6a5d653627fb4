"""The examination against general libraries: the first problems of `reference_problems.py`, which runs 300."""

from __future__ import annotations

import pytest

from tests.regression.reference_problems import problems
from tests.regression.references import compare

FEW = 40


@pytest.mark.parametrize(
    ("name", "spec", "observations"),
    list(problems(FEW)),
    ids=lambda value: str(value)[:30] if isinstance(value, str) else "",
)
def test_every_figure_agrees_with_the_libraries(name, spec, observations):
    compared = list(compare(spec, observations))
    assert len(compared) > 50
    for one in compared:
        assert one.difference <= one.allowed, (one.figure, one.difference, one.ours, one.theirs)
