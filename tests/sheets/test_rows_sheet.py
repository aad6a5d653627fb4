"""`fit rows`: every data row once, the core's figures under the agreed labels, links, long data thinned and said so."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.regression.spec import ModelSpec, NumberTerm
from bridge.sheets import rows
from tests.sheets import layout
from tests.sheets.cases import book, data_table, model, one_predictor, yard

LABELS = [
    "used",
    "observed",
    "fitted",
    "residual",
    "studentised residual (internal)",
    "studentised residual (external)",
    "leverage",
    "Cook's distance",
    "DFFITS",
    "remark",
]


def values(sheet, place, label):
    (top, left), (bottom, right) = place
    cells = layout.every_cell(sheet)
    column = next(at for at in range(left, right + 1) if layout.value_of(cells[(top, at)]) == label)
    return [layout.value_of(cells[(row, column)]) for row in range(top + 1, bottom + 1)]


@pytest.mark.parametrize("name", ["A", "B", "C"])
def test_each_model_has_its_columns_with_the_figures_of_the_fit(name):
    told = yard()
    sheet, place = rows.lay_out(told), rows.places(told)[name]
    fitted = next(one for one in told.models if one.name == name)
    used, result = np.array(fitted.taken.used), fitted.result
    wanted = {
        "observed": result.observed,
        "residual": result.fit.residual,
        "studentised residual (internal)": result.influence.internal,
        "studentised residual (external)": result.influence.external,
        "leverage": result.influence.leverage,
        "Cook's distance": result.influence.cooks_distance,
        "DFFITS": result.influence.dffits,
    }
    for label, figures in wanted.items():
        column = values(sheet, place, label)
        assert len(column) == 120
        assert [column[at] for at in used] == figures.tolist()
        assert all(column[at] is None for at in fitted.taken.left_out)


def test_the_labels_are_the_agreed_ones_and_a_log_model_shows_both_scales():
    told = yard()
    sheet = rows.lay_out(told)
    cells = layout.every_cell(sheet)
    for name, extra in (("A", []), ("B", ["fitted (log)"])):
        (top, left), (_, right) = rows.places(told)[name]
        headers = [layout.value_of(cells[(top, at)]) for at in range(left, right + 1)]
        assert [header for header in headers if header not in extra] == LABELS
    place, result = rows.places(told)["B"], told.models[1].result
    on_scale = [value for value in values(sheet, place, "fitted (log)") if value is not None]
    fitted = [value for value in values(sheet, place, "fitted") if value is not None]
    assert np.allclose(np.exp(on_scale) * result.back.smear, fitted, rtol=1e-14)


def test_rows_left_out_say_why():
    told = yard()
    sheet = rows.lay_out(told)
    used = values(sheet, rows.places(told)["A"], "used")
    assert used.count("yes") == 117
    assert used[16] == "no: hours is blank"
    assert used[87] == "no: coats is blank"
    assert values(sheet, rows.places(told)["C"], "used")[87] == "yes"  # model C does not use coats


def test_each_line_leads_to_its_data_row():
    block = rows.lay_out(yard()).blocks[0]
    numbers = block.columns[0]
    assert numbers.formula == "HYPERLINK(\"#'Refits'!A{key}\",{key})"
    assert list(numbers.keys) == list(range(2, 122)) == [int(value) for value in numbers.values]
    assert block.columns[1].values[3] == "Job 103"


def test_a_sheet_name_with_quotes_cannot_break_the_link():
    told = one_predictor()
    table = replace(told.models[0].table, sheet='it\'s "50%"')
    formula = rows.lay_out(book([replace(told.models[0], table=table)])).blocks[0].columns[0].formula
    assert formula == 'HYPERLINK("#\'it\'\'s ""50%""\'!A{key}",{key})'


def long_book(n: int):
    random = np.random.default_rng(8)
    x = random.normal(10, 3, n).round(3)
    y = (2 + 3 * x + random.normal(0, 1, n)).round(3)
    y[[17, n - 5]] += 40
    table = data_table("Long", {"y": y, "x": x})
    return book([model("A", ModelSpec("y", terms=(NumberTerm("x"),)), table)])


def test_above_twenty_thousand_rows_the_odd_ones_and_a_sample_are_shown():
    told = long_book(20_500)
    sheet, (section,) = rows.lay_out(told), rows.sections(told)
    assert len(section.lines) <= rows.MOST_LINES
    assert {17, 20_495} <= set(section.lines.tolist())
    said = f"{len(section.lines):,} rows of the 20,500 of".replace(",", "\u00a0")
    assert any(text.startswith(said) for text in layout.texts(sheet)[:8])
    observed = values(sheet, rows.places(told)["A"], "observed")
    assert observed == told.models[0].result.observed[section.lines].tolist()


@given(st.integers(1, 3000), st.integers(10, 400), st.integers(0, 2**32 - 1))
def test_thinning_keeps_the_odd_rows_in_order(n, most, seed):
    random = np.random.default_rng(seed)
    oddness = np.where(random.random(n) < 0.05, random.random(n) + 1, 0.0)
    kept = rows.thinned(n, oddness, most)
    assert len(kept) <= most
    assert (np.diff(kept) > 0).all()
    assert kept.min(initial=0) >= 0
    assert kept.max(initial=0) < n
    if (oddness > 0).sum() <= most // 2:
        assert set(np.flatnonzero(oddness)) <= set(kept.tolist())


def test_models_of_two_sheets_stand_in_two_sections():
    told = book([*yard().models[:1], *one_predictor().models])
    first, second = rows.sections(told)
    sheet, places = rows.lay_out(told), rows.places(told)
    assert second.header_row > first.last_row
    assert places["bend"][0][0] == second.header_row
    assert values(sheet, places["bend"], "used") == ["yes"] * 48
