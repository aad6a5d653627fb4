"""A middling case: numbers at their means, categories at their most frequent level, and what the model says of it."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from bridge.regression.results import ModelResult
from bridge.regression.spec import CategoryTerm, Levels, Observations
from bridge.sheets import figures, lines, words
from bridge.sheets.book import ModelSheet


def case(model: ModelSheet, result: ModelResult) -> str | None:
    """`A middling case (length 22 m, hull oak): about 114 hours; 95 of 100 such cases should lie between 81 and 160.`

    None where the model has no term, or the estimate cannot be made.
    """
    if not result.spec.terms:
        return None
    means = {one.column: float(figures.rounded(one.mean, 2)) for one in result.ranges}
    levels = dict(result.design.levels)
    common = {
        term.column: max(levels[term.column], key=lambda pair: pair[1])[0]
        for term in result.spec.terms
        if isinstance(term, CategoryTerm) and levels.get(term.column)
    }
    if {term.column for term in result.spec.terms} - set(means) - set(common):
        return None
    made = lines.in_units(result, _observed(means, common))
    estimate = float(made.estimate[0])
    if not math.isfinite(estimate):
        return None
    unit = words.unit_in(model.table, result.spec.response)
    spread = figures.unit_sd(result)
    about = figures.placed_number(estimate, spread)
    ends = [figures.placed_number(float(end[0]), spread) for end in (made.case_low, made.case_high)]
    parts = [_number(model, column, value) for column, value in means.items()]
    parts += [f"{words.name_in(model.table, column)} {level}" for column, level in common.items()]
    described = words.listing(parts, most=6)
    text = f"A middling case ({described}): about {words.with_unit(about, unit)}"
    if not math.isfinite(float(made.case_low[0])) or ends[0] == ends[1]:
        return f"{text}."
    return f"{text}; {round(100 * result.spec.level)} of 100 such cases should lie between {ends[0]} and {ends[1]}."


def _observed(means: dict[str, float], levels: dict[str, str]) -> Observations:
    columns: dict[str, NDArray[np.float64] | Levels] = {name: np.array([value]) for name, value in means.items()}
    columns |= {name: Levels(np.array([0]), (level,)) for name, level in levels.items()}
    return Observations(columns, 1)


def _number(model: ModelSheet, column: str, value: float) -> str:
    unit = words.unit_in(model.table, column)
    return f"{words.name_in(model.table, column)} {words.with_unit(figures.plain_number(value), unit)}"
