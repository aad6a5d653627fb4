"""Rows and values taken for a model, held against pandas where it does the same."""

from __future__ import annotations

import io
from datetime import date

import numpy as np
import openpyxl
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bridge.messages import Problem, Severity
from bridge.regression.spec import Observations
from bridge.workbook import kinds, selection
from bridge.workbook.contents import Taken
from bridge.workbook.request import Scalar
from tests.workbook.support import contents, first_contact, refits, saved, typed, workbook

Rows = list[list[object]]


def take(
    rows: Rows, entries: dict[str, Scalar], filters: tuple[tuple[str, Scalar, Scalar], ...] = ()
) -> tuple[Taken, Observations, tuple[Problem, ...]]:
    page = typed(contents(workbook({"Data": rows})), entries)
    for (column, comparison, value), after in zip(filters, ("intercept", "and where"), strict=False):
        page.put("use rows where" if after == "intercept" else "and where", "A", column, "setting")
        page.put("is", "A", comparison, after)
        page.put("value", "A", value, after)
    model = page.model()
    assert model.spec is not None, model.problems
    return selection.take(page.source.tables["Data"], model)


def keys(problems: tuple[Problem, ...]) -> list[str]:
    return [problem.key for problem in problems]


def text_of(problems: tuple[Problem, ...], key: str) -> str:
    return next(problem.text for problem in problems if problem.key == key)


# --- rows --------------------------------------------------------------------------------------


def test_rows_are_left_out_for_a_blank_in_a_used_column_only() -> None:
    rows = refits(12)
    rows[3][1], rows[5][4], rows[7][0], rows[8][5] = None, None, None, None
    taken, observed, problems = take(rows, {"hours": "response", "coats": "predictor", "job": "label"})
    assert taken.left_out == {2: "hours is blank", 4: "coats is blank"}
    assert taken.used == (0, 1, 3, 5, 6, 7, 8, 9, 10, 11)
    assert observed.n == 10
    assert (
        text_of(problems, "rows-left-out") == "2 rows left out: hours is blank in Data!B4; coats is blank in Data!E6."
    )


def test_a_row_with_two_reasons_says_both() -> None:
    rows = refits(8)
    rows[3][1] = rows[3][4] = None
    taken, _, _ = take(rows, {"hours": "response", "coats": "predictor"})
    assert taken.left_out == {2: "hours is blank; coats is blank"}


def test_error_cells_are_a_warning_that_names_them() -> None:
    rows = refits(12)
    rows[3][4] = rows[9][4] = "#N/A"
    taken, _, problems = take(rows, {"hours": "response", "coats": "predictor"})
    assert taken.left_out == {2: "coats holds an error", 8: "coats holds an error"}
    assert "Data!E4, E10" in text_of(problems, "error-cells")
    assert not any(problem.severity is Severity.REFUSAL for problem in problems)


def test_hidden_rows_are_used_and_said_so() -> None:
    book = openpyxl.load_workbook(io.BytesIO(workbook({"Data": refits(10)})))
    book["Data"].row_dimensions[4].hidden = True
    page = typed(contents(saved(book)), {"hours": "response", "coats": "predictor"})
    taken, _, problems = selection.take(page.source.tables["Data"], page.model())
    assert len(taken.used) == 10
    assert text_of(problems, "hidden-rows-used").startswith("1 row among those used")


# --- filters -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("condition", "query"),
    [
        (("hull", "is", "oak"), "hull == 'oak'"),
        (("hull", "not", "oak"), "hull != 'oak'"),
        (("hull", "", "oak"), "hull == 'oak'"),
        (("coats", ">=", 3.0), "coats >= 3"),
        (("coats", "above", "2"), "coats > 2"),
        (("coats", "below", 2.0), "coats < 2"),
        (("coats", "at most", 2.0), "coats <= 2"),
        (("coats", "is not", 2.0), "coats != 2"),
        (("coats", "between", "2 and 3"), "2 <= coats <= 3"),
        (("coats", "between", "3; 2"), "2 <= coats <= 3"),
        (("length (m)", "at least", "20,5"), "`length (m)` >= 20.5"),
        (("month", "at least", "2024-02-01"), "month >= '2024-02-01'"),
        (("month", "below", 45323.0), "month < '2024-02-01'"),
    ],
)
def test_filters_agree_with_pandas(condition: tuple[str, str, Scalar], query: str) -> None:
    rows = refits(30)
    frame = pd.DataFrame(rows[1:], columns=rows[0])
    frame["month"] = pd.to_datetime(frame["month"])
    taken, _, problems = take(rows, {"hours": "response", "crew": "predictor"}, (condition,))
    assert list(taken.used) == frame.query(query).index.tolist()
    assert "rows-filtered" in keys(problems)


def test_two_filters_and_what_they_say() -> None:
    rows = refits(30)
    filters = (("hull", "not", "glass fibre"), ("coats", "at least", 2.0))
    taken, _, problems = take(rows, {"hours": "response", "crew": "predictor"}, filters)
    assert taken.left_out[2] == "filtered: hull is glass fibre"
    assert "hull is not glass fibre and coats is at least 2" in text_of(problems, "rows-filtered")


def test_a_text_in_a_filtered_row_is_nobodys_problem() -> None:
    rows = refits(12)
    rows[3][4] = "many"  # job 3, glass fibre
    _, _, problems = take(rows, {"hours": "response", "coats": "predictor"}, (("hull", "is not", "glass fibre"),))
    assert not any(problem.severity is Severity.REFUSAL for problem in problems)


# --- levels ------------------------------------------------------------------------------------


def test_levels_are_what_people_see() -> None:
    values = [4, 4.0, 2.5, "oak", True, date(2024, 1, 31), 1e20, 4]
    rows: Rows = [["y", "c"], *[[at + 0.5 * (at % 3), value] for at, value in enumerate(values)]]
    _, observed, problems = take(rows, {"y": "response", "c": "category"})
    levels = observed.levels("c")
    assert levels.names == ("1E+20", "2.5", "2024-01-31", "4", "TRUE", "oak")
    assert [levels.names[code] for code in levels.codes] == ["4", "4", "2.5", "oak", "TRUE", "2024-01-31", "1E+20", "4"]
    assert "text-among-numbers" in keys(problems)


def test_a_number_among_texts_is_read_as_its_level_and_said() -> None:
    rows = refits(12)
    rows[4][3] = 4
    _, observed, problems = take(rows, {"hours": "response", "hull": "category"})
    assert "4" in observed.levels("hull").names
    assert text_of(problems, "number-among-texts") == (
        "hull: cell Data!D5 holds a number among texts; it was read as the level '4'."
    )


def test_levels_compare_exactly_and_near_misses_are_pointed_out() -> None:
    rows = refits(12)
    rows[1][3], rows[2][3] = "oak ", "Steel"
    _, observed, problems = take(rows, {"hours": "response", "hull": "category"})
    assert set(observed.levels("hull").names) == {"oak", "oak ", "steel", "Steel", "glass fibre"}
    said = {problem.cell: problem.text for problem in problems if problem.key == "found-spelled-twice"}
    assert "spaces" in said["Data!D2"]
    assert "capital letters" in said["Data!D3"]


LEVEL = st.one_of(st.sampled_from(["oak", "Oak", "oak ", "4", "", "glass fibre"]), st.integers(-3, 3),
                  st.floats(-10, 10, width=16), st.none())  # fmt: skip


@settings(max_examples=60, deadline=None)
@given(st.lists(LEVEL, min_size=6, max_size=25))
def test_codes_agree_with_pandas(values: list[object]) -> None:
    rows: Rows = [["y", "c"], *[[at * 1.0, value] for at, value in enumerate(values)]]
    source = contents(workbook({"Data": rows}))
    page = typed(source, {"y": "response", "c": "category"})
    models = [model for model in page.understood().models if model.spec is not None]
    if not models:
        return  # an empty column
    taken, observed, _ = selection.take(source.tables["Data"], models[0])
    shown = pd.Series([_shown(value) for value in values], dtype=object)
    kept = shown[shown.notna()]
    codes, names = pd.factorize(kept, sort=True)
    assert list(taken.used) == kept.index.tolist()
    assert list(observed.levels("c").names) == list(names)
    np.testing.assert_array_equal(observed.levels("c").codes, codes)


def _shown(value: object) -> str | None:
    if value is None or value == "":
        return None
    return kinds.number_text(float(value)) if isinstance(value, (int, float)) else str(value)


# --- numbers -----------------------------------------------------------------------------------


@settings(max_examples=40, deadline=None)
@given(st.lists(st.tuples(st.one_of(st.none(), st.floats(-1e9, 1e9)), st.one_of(st.none(), st.floats(-1e9, 1e9))),
                min_size=5, max_size=20))  # fmt: skip
def test_complete_rows_agree_with_pandas(pairs: list[tuple[float | None, float | None]]) -> None:
    rows: Rows = [["y", "x", "z"], *[[y, x, at] for at, (y, x) in enumerate(pairs)]]
    source = contents(workbook({"Data": rows}))
    page = typed(source, {"y": "response", "x": "predictor"})
    models = [model for model in page.understood().models if model.spec is not None]
    if not models:
        return  # a column of blanks
    taken, observed, _ = selection.take(source.tables["Data"], models[0])
    frame = pd.DataFrame(pairs, columns=["y", "x"], dtype=float).dropna()
    assert list(taken.used) == frame.index.tolist()
    np.testing.assert_allclose(observed.numbers("x"), frame["x"].to_numpy(), rtol=1e-15)
    assert set(taken.left_out) | set(taken.used) == set(range(len(pairs)))


def test_dates_and_truth_values_as_numbers() -> None:
    rows: Rows = [["y", "when", "new"], *[[at * 1.0, date(2024, 1, at), at % 2 == 0] for at in range(1, 9)]]
    _, observed, _ = take(rows, {"y": "response", "when": "predictor", "new": "predictor"})
    assert observed.numbers("when")[:2].tolist() == [45292.0, 45293.0]
    assert observed.numbers("new").tolist() == [0, 1] * 4


@pytest.mark.parametrize(("odd", "what"), [(True, "TRUE or FALSE"), (date(2024, 1, 31), "a date")])
def test_other_kinds_among_numbers_are_pointed_out(odd: object, what: str) -> None:
    rows = refits(12)
    rows[4][4] = odd
    _, _, problems = take(rows, {"hours": "response", "coats": "predictor"})
    said = text_of(problems, "kind-among-others")
    assert f"Data!E5 holds {what} among numbers" in said


# --- enough rows -------------------------------------------------------------------------------


def test_coefficients_are_counted_with_levels_powers_and_products() -> None:
    page = typed(
        contents(workbook({"Data": refits(30)})),
        {"hours": "response", "length (m)": "cubed predictor", "hull": "category", "coats": "predictor bend at 2"},
    )
    page.cross("length (m)", "hull", "A")
    model = page.model()
    _, observed, _ = selection.take(page.source.tables["Data"], model)
    assert model.spec is not None
    # 1 + x, x^2, x^3 + 2 levels + coats and its bend + 3 x 2 products
    assert selection.coefficients(model.spec, observed) == 1 + 3 + 2 + 2 + 6


def test_as_many_rows_as_coefficients_are_too_few() -> None:
    rows: Rows = [["y", "x"], [1, 2], [2, 5], [4, 3]]
    assert "too-few-rows" in keys(take(rows, {"y": "response", "x": "squared predictor"})[2])
    assert "too-few-rows" not in keys(take(rows, {"y": "response", "x": "predictor"})[2])


def test_a_base_that_is_filtered_away() -> None:
    filters = (("hull", "is not", "oak"),)
    problems = take(refits(30), {"hours": "response", "hull": "category base oak"}, filters)[2]
    assert "base-not-in-rows" in keys(problems)


def test_too_many_candidates() -> None:
    rows: Rows = [
        ["y", *[f"x{at}" for at in range(31)]],
        *[[row * (at + 1) % 7 for at in range(32)] for row in range(40)],
    ]
    entries: dict[str, Scalar] = {"y": "response", "search": "BIC"} | {f"x{at}": "candidate" for at in range(31)}
    page = typed(contents(workbook({"Data": rows})), entries)
    assert [problem.key for problem in page.model().problems] == ["too-many-candidates"]


def test_a_filter_on_another_sheet() -> None:
    source = contents(
        workbook({"Refits": refits(), "Prices": [["size", "price"], *[[at, at * 3.0] for at in range(9)]]})
    )
    page = first_contact(source, "Refits")
    page.cells[(0, 2)] = "Prices"
    page.cells = dict(page.understood().grid.cells)
    page.put("hours", "A", "response")
    page.put("crew", "A", "predictor")
    page.put("use rows where", "A", "price")
    assert [problem.key for problem in page.model().problems] == ["filter-other-sheet"]
