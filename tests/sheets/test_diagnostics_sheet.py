"""`fit diagnostics`: every check with its figures and words, odd rows linked, collinearity, folds, search, findings."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from bridge.messages import Problem, Severity
from bridge.regression.results import Alias, SearchResult, Subset
from bridge.sheets import behind, diagnostics, readings, words
from tests.sheets import layout
from tests.sheets.cases import book, five_rows, one_predictor, twelve_models, yard


def of_first(told, **changes):
    one = told.models[0]
    return book([replace(one, result=replace(one.result, **changes))])


@pytest.mark.parametrize("at", [0, 1, 2])
def test_each_check_stands_with_its_figures_and_ends_in_words(at):
    told = yard()
    model, result = told.fitted[at]
    sheet = diagnostics.lay_out(told)
    cells = layout.every_cell(sheet)
    start = next(row for (row, column), cell in sorted(cells.items()) if column == 0 and _heads(cell, model.name))
    columns = {
        name: layout.column_under(sheet, name, start) for name in ("value", "p", "degrees of freedom", "in words")
    }
    for reading in readings.checks(model, result):
        assert layout.value_of(columns["value"][reading.name]) == reading.value
        assert layout.value_of(columns["p"][reading.name]) == (None if math.isnan(reading.p) else reading.p)
        assert layout.value_of(columns["in words"][reading.name]) == reading.text


def _heads(cell, name):
    return isinstance(cell.value, str) and cell.value.startswith(f"{name}  ")


def test_the_row_that_pulls_most_is_first_and_leads_to_its_data_row():
    told = yard()
    sheet = diagnostics.lay_out(told)
    result = told.models[0].result
    rows = layout.column_under(sheet, "Cook's distance")
    assert next(iter(rows)) == f"row {told.models[0].taken.used[int(np.argmax(result.influence.cooks_distance))] + 2}"
    figures = [layout.value_of(cell) for cell in rows.values()]
    assert figures == sorted(figures, reverse=True)
    assert figures[0] == result.influence.cooks_distance.max()
    assert "'Refits'!A32" in {link.location for link in sheet.links}


def test_aliased_columns_are_named_with_what_they_depend_on():
    told = yard()
    alias = Alias("draught", (("length (m)", 0.25),), True)
    design = replace(told.models[0].result.design, aliased=(alias,))
    texts = layout.texts(diagnostics.lay_out(of_first(told, design=design)))
    assert any(text.startswith("draught says nothing") and "is exactly 0.25 length." in text for text in texts)


def test_raised_condition_indexes_name_the_coefficients_that_share_them():
    told = yard()
    found = told.models[0].result.collinearity
    shares = np.zeros_like(found.variance_shares)
    shares[-1, [0, 1]] = 0.97, 0.88
    indexes = np.array([1.0, 2.0, 3.0, 4.0, 47.0])
    changed = replace(found, condition_indexes=indexes, variance_shares=shares)
    texts = layout.texts(diagnostics.lay_out(of_first(told, collinearity=changed)))
    assert "Strong near-dependence; variance shares: intercept 97% and length 88%." in texts


def test_folds_stand_with_their_misses_and_the_sum_of_them():
    told = yard()
    result = told.models[0].result
    crossed = result.cross_validation
    misses = layout.column_under(diagnostics.lay_out(told), "typical miss")
    assert layout.value_of(misses["all folds together"]) == crossed.rmse
    inside = crossed.fold_of == 3
    assert layout.value_of(misses["fold 4"]) == pytest.approx(
        float(np.sqrt(np.mean((result.observed - crossed.predicted)[inside] ** 2))), rel=1e-14
    )


def test_a_search_shows_its_runners_up_under_a_warning():
    search = SearchResult("BIC", ("hull",), ("coats",), (Subset(("hull",), 12.5), Subset(("hull", "coats"), 13.0)), 8)
    sheet = diagnostics.lay_out(of_first(yard(), search=search))
    kept = layout.column_under(sheet, "BIC")
    assert [layout.value_of(cell) for cell in kept.values()] == [12.5, 13.0]
    assert list(kept) == ["hull", "hull and coats"]
    texts = layout.texts(sheet)
    assert words.SEARCH_WARNING in texts
    assert "Chosen; 8 subsets compared." in texts


def test_what_was_found_in_the_data_stands_first():
    told = replace(yard(), findings={"Refits": (Problem("test", Severity.NOTE, "hull: 'Oak' in D17 may be 'oak'."),)})
    texts = layout.texts(diagnostics.lay_out(told))
    assert texts.index("hull: 'Oak' in D17 may be 'oak'.") < texts.index("check")
    quiet = replace(yard(), findings={"Refits": ()})
    assert "Nothing that calls for a second look." in layout.texts(diagnostics.lay_out(quiet))


def test_several_models_are_reached_from_the_top():
    sheet = diagnostics.lay_out(twelve_models())
    cells = layout.every_cell(sheet)
    inner = [link for link in sheet.links if link.location.startswith("'fit diagnostics'!A")]
    assert len(inner) == 12
    for link in inner:
        row = int(link.location.rpartition("A")[2]) - 1
        name = layout.value_of(cells[(link.row, link.column)]).removeprefix("to ")
        assert str(layout.value_of(cells[(row, 0)])).startswith(f"{name}  ")


def test_figures_behind_the_charts_stand_outside_the_printed_page():
    for told in (yard(), one_predictor(), five_rows()):
        sheet = diagnostics.lay_out(told)
        (_, _), (_, last) = sheet.print_area
        assert last < behind.FIRST_COLUMN
        assert all(block.column >= behind.FIRST_COLUMN for block in sheet.blocks)
        assert all(block.columns[0].format.size <= 8 for block in sheet.blocks)
