"""`fit ANOVA`: the agreed labels and rows, the core's figures, places for the names."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from bridge.regression.results import AnovaRow
from bridge.sheets import anova
from tests.sheets import layout
from tests.sheets.cases import book, five_rows, nothing_fitted, yard

HEADERS = ["source of variation", "degrees of freedom", "sum of squares", "mean square", "F", "p"]


def table(told, name):
    sheet = anova.lay_out(told)
    cells = layout.every_cell(sheet)
    (top, left), (bottom, right) = anova.places(told)[name]
    return [[layout.value_of(cells[(r, c)]) for c in range(left, right + 1)] for r in range(top, bottom + 1)]


@pytest.mark.parametrize("name", ["A", "B", "C"])
def test_the_table_holds_the_rows_of_the_core_under_the_agreed_labels(name):
    told = yard()
    result = next(one for one in told.models if one.name == name).result
    lines = table(told, name)
    assert lines[0] == HEADERS
    titled = [line for line in lines[1:] if line[1] is not None]
    wanted = [
        [row.df, *(None if math.isnan(v) else v for v in (row.ss, row.ms, row.f, row.p))] for row in result.anova.rows
    ]
    assert [line[1:] for line in titled] == wanted
    main = [line[0] for line in titled if line[0] not in ("lack of fit", "pure error")]
    assert main[:3] == ["regression", "residual", "total"]


def test_parts_of_the_table_are_headed_in_order():
    headings = [line[0] for line in table(yard(), "A") if line[1] is None]
    assert headings == ["added last (each term given all others)", "added in order (each term given those above it)"]


def test_lack_of_fit_rows_stand_below_the_residual():
    told = five_rows()
    one = told.models[0]
    extra = tuple(AnovaRow(source, "fit", 1, 0.5, 0.5, math.nan, math.nan) for source in ("lack of fit", "pure error"))
    rows = one.result.anova.rows
    result = replace(one.result, anova=replace(one.result.anova, rows=(*rows[:2], *extra, *rows[2:])))
    lines = table(book([replace(one, result=result)]), "A")
    assert [line[0] for line in lines[1:6]] == ["regression", "residual", "lack of fit", "pure error", "total"]


def test_an_unbounded_f_is_said_in_words():
    told = five_rows()
    one = told.models[0]
    rows = list(one.result.anova.rows)
    rows[0] = replace(rows[0], f=math.inf, p=0.0)
    result = replace(
        one.result, anova=replace(one.result.anova, rows=tuple(rows)), fit=replace(one.result.fit, f=math.inf)
    )
    told = book([replace(one, result=result)])
    assert table(told, "A")[1][4] == "unbounded"
    assert any("account for all of the variation" in text for text in layout.texts(anova.lay_out(told)))


def test_refused_models_say_why():
    assert anova.places(nothing_fitted()) == {}
    texts = layout.texts(anova.lay_out(nothing_fitted()))
    assert "month is not a number column." in texts
