"""`fit results`: the agreed labels with the core's figures, and sentences that say what the figures say."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.regression.results import SearchResult, Subset
from bridge.regression.spec import Errors
from bridge.sheets import in_short, results, verdicts, words
from bridge.workbook.request import Filter
from tests.sheets import layout
from tests.sheets.cases import book, five_rows, forty_levels, nothing_fitted, one_predictor, twelve_models, yard

LABELS = [
    "form",
    "rows used",
    "rows left out",
    "coefficients",
    "degrees of freedom",
    "R2",
    "adjusted R2",
    "leave-one-out R2",
    "residual standard deviation",
    "typical miss",
    "typical miss, %",
    "AIC",
    "BIC",
]


def misses(told, *rmse):
    """The same book with other cross-validated misses."""
    models = []
    for one, miss in zip(told.models, rmse, strict=True):
        crossed = replace(one.result.cross_validation, rmse=miss)
        models.append(replace(one, result=replace(one.result, cross_validation=crossed)))
    return replace(told, models=tuple(models))


@pytest.mark.parametrize("name", ["A", "B", "C"])
def test_the_table_holds_the_agreed_figures(name):
    told = yard()
    one = next(model for model in told.models if model.name == name)
    fit, crossed = one.result.fit, one.result.cross_validation
    column = layout.column_under(results.lay_out(told), name)
    assert list(column)[: len(LABELS)] == LABELS
    wanted = {
        "rows used": fit.n,
        "rows left out": len(one.taken.left_out),
        "coefficients": len(fit.coefficients),
        "degrees of freedom": fit.df_residual,
        "R2": fit.r_squared,
        "adjusted R2": fit.adjusted_r_squared,
        "leave-one-out R2": fit.loo_r_squared,
        "residual standard deviation": fit.residual_sd,
        "typical miss": crossed.rmse,
        "typical miss, %": crossed.rmse_percent,
        "AIC": fit.aic,
        "BIC": fit.bic,
    }
    assert {label: layout.value_of(column[label]) for label in wanted} == wanted


def test_the_best_typical_miss_stands_out_in_more_than_colour():
    told = yard()
    best = min(told.models, key=lambda one: one.result.cross_validation.rmse).name
    sheet = results.lay_out(told)
    bold = {name: layout.column_under(sheet, name)["typical miss"].format.bold for name in "ABC"}
    assert bold == {name: name == best for name in "ABC"}


def test_the_comparison_says_by_how_much():
    (text,) = verdicts.comparison(misses(yard(), 20.53, 15.22, 31.0))
    assert text.startswith("Model B predicts new cases best: on rows it has not seen it misses by 15.2 hours")
    assert "against 20.5 for A and 31.0 for C" in text
    assert "26% less than the next" in text  # 1 - 15.22 / 20.53
    assert text.endswith("The models were not fitted to the same rows, so compare with care.")


def test_misses_within_five_percent_are_called_alike():
    (text,) = verdicts.comparison(misses(yard(), 20.0, 19.5, 31.0))
    assert text.startswith("Models B and A predict new cases about equally well")
    assert "C by 31.0" in text


@given(st.lists(st.floats(1e-6, 1e9) | st.just(math.nan), min_size=3, max_size=3))
def test_every_set_of_misses_gives_a_whole_comparison(rmse):
    (text,) = verdicts.comparison(misses(yard(), *rmse))
    assert text.endswith(".")
    assert "nan" not in text
    known = [miss for miss in rmse if not math.isnan(miss)]
    if len(known) < 2:
        assert "too few rows" in text
    elif text.startswith("Model "):
        name = text.split()[1]
        assert rmse["ABC".index(name)] == min(known)


def test_models_of_different_responses_are_not_compared():
    assert verdicts.comparison(book([*yard().models[:1], *one_predictor().models])) == []


def test_effects_are_told_in_the_units_of_the_columns():
    straight, logs, crossed = (verdicts.answer(model, result) for model, result in yard().fitted)
    slope = yard().models[0].result.fit.coefficients[1]
    assert f"each further 1 m of length goes with {slope:.1f} hours more" in straight.lower()
    elasticity = yard().models[1].result.fit.coefficients[1]
    assert f"10% more length goes with {100 * (1.1**elasticity - 1):.0f}% more hours" in logs
    assert "The effect of length depends on hull." in crossed
    assert straight.startswith("A: hours by length, hull and coats, from 117 rows. It accounts for ")


@given(st.sampled_from([0, 1, 2]), st.floats(-1e6, 1e6))
def test_effects_of_any_size_make_whole_sentences(at, factor):
    model, result = yard().fitted[at]
    changed = replace(result, fit=replace(result.fit, coefficients=result.fit.coefficients * factor))
    for phrase in in_short.strongest(model, changed, 3):
        assert "nan" not in phrase
        assert "inf" not in phrase
        assert len(phrase) < 120


def test_what_was_asked_besides_the_columns_is_told():
    model, result = yard().fitted[0]
    filters = (Filter("hull", "is not", ("oak",), "H20"), Filter("length (m)", "at least", (8.5,), "H23"))
    spec = replace(result.spec, weight="coats", errors=Errors.UNEVEN_SPREAD)
    asked = replace(model, request=replace(model.request, filters=filters))
    assert (
        "from 117 rows, only where hull is not oak, only where length is at least 8.5, weighted by coats, "
        "standard errors for uneven spread." in verdicts.answer(asked, replace(result, spec=spec))
    )


def test_a_bend_is_told_on_both_sides():
    ((model, result),) = one_predictor().fitted
    text = verdicts.answer(model, result)
    before, after = result.fit.coefficients[1], result.fit.coefficients[1] + result.fit.coefficients[2]
    assert f"goes with {before:.2g} kWh more below 15 °C and with {after:.2g} kWh more above" in text


def test_the_middling_case_is_the_models_own_estimate():
    ((model, result),) = five_rows().fitted
    at_mean = float(result.fit.coefficients @ [1.0, 3.0])
    assert f"A middling case (x 3): about {at_mean:.2f}; 95 of 100 such cases should lie between" in verdicts.answer(
        model, result
    )


def test_few_rows_and_gross_outliers_are_watched():
    (text,) = [text for text in verdicts.watch(five_rows().fitted) if "few" in text]
    assert text.startswith("A: 5 rows for 2 coefficients is few")
    outlying = [text for text in verdicts.watch(yard().fitted) if "Row 32 (Job 130)" in text]
    assert outlying
    assert all(text.split(":")[0].replace(" and", ",").split(", ") <= ["A", "B", "C"] for text in outlying)


def test_after_a_search_the_first_warning_is_that_p_values_no_longer_hold():
    told = yard()
    one = told.models[0]
    search = SearchResult("BIC", ("hull",), ("coats",), (Subset(("hull",), 12.0),), 8)
    watched = verdicts.watch([(one, replace(one.result, search=search))])
    assert watched[0] == f"A: {words.SEARCH_WARNING}"


def test_nested_models_are_told_with_their_partial_f():
    (text,) = verdicts.nested(yard())
    assert text.startswith("B contains C and adds coats: that explains more than chance would (partial F = 8.10 on 2")
    weak = replace(yard().nested[0], p=0.4)
    assert "no more than chance may" in verdicts.nested(replace(yard(), nested=(weak,)))[0]


def test_pairs_that_follow_from_two_others_are_not_told():
    pair = yard().nested[0]
    chain = (replace(pair, small="C", large="A"), pair, replace(pair, small="B", large="A"))
    told = verdicts.nested(replace(yard(), nested=chain))
    assert [text[:12] for text in told] == ["B contains C", "A contains B"]


def test_each_group_of_three_models_has_a_page_of_its_own():
    sheet = results.lay_out(twelve_models())
    starts = [row for (row, _), cell in sorted(sheet.cells.items()) if str(cell.value).startswith("In short: ")]
    areas = (sheet.print_area, *sheet.more_print_areas)
    assert [first[0] for first, _ in areas[1:]] == starts[1:]
    assert [last[0] + 1 for _, last in areas[:-1]] == starts[1:]


def test_cautions_and_what_needs_no_program_are_on_the_page():
    for told in (yard(), five_rows(), twelve_models()):
        text = "\n".join(layout.texts(results.lay_out(told)))
        assert "need not be cause and effect" in text
        assert "licensed practice" in text
        assert "needs no program" in text


def test_refused_models_stand_in_the_table_and_say_why():
    told = twelve_models()
    sheet = results.lay_out(told)
    column = layout.column_under(sheet, "model_5")
    assert layout.value_of(column["form"]) == "not fitted"
    assert layout.value_of(column["R2"]) is None
    assert any(text.startswith("model_5 was not fitted. hull: all 20 rows") for text in layout.texts(sheet))
    assert not any("typical miss" in text for text in layout.texts(results.lay_out(nothing_fitted())))
    assert "A was not fitted. hours: no row is complete." in layout.texts(results.lay_out(nothing_fitted()))


def test_links_lead_to_the_other_sheets_as_their_tabs_are_called():
    told = replace(yard(), titles={"fit rows": "line by line"})
    locations = {link.location for link in results.lay_out(told).links}
    assert "'line by line'!A1" in locations
    assert "'fit coefficients'!A1" in locations
    assert len(locations) == 6


def test_two_charts_of_the_best_model_stand_beside():
    best = min(yard().models, key=lambda one: one.result.cross_validation.rmse).name
    titles = [chart.title for chart in results.lay_out(yard()).charts]
    assert titles == [f"Observed against fitted, model {best}", f"Residuals against fitted, model {best}"]


def test_a_category_with_many_levels_makes_one_phrase():
    ((model, result),) = forty_levels().fitted
    text = verdicts.answer(model, result)
    assert text.count("instead of") == 1
    strongest = int(np.argmax(np.abs(result.fit.t[2:]))) + 2
    assert result.design.columns[strongest].factors[0].level in text
