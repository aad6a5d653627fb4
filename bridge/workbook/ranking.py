"""Which of several messages is told first."""

from __future__ import annotations

from collections.abc import Iterable

from bridge.messages import Problem, Severity

_WEIGHT = {Severity.REFUSAL: 0, Severity.WARNING: 1, Severity.NOTE: 2}


def most_useful_first(problems: Iterable[Problem]) -> tuple[Problem, ...]:
    """Refusals, then warnings, then notes, each kind in the order it was met; the same message once."""
    unique = {(problem.key, problem.text, problem.model): problem for problem in problems}
    return tuple(sorted(unique.values(), key=lambda problem: _WEIGHT[problem.severity]))
