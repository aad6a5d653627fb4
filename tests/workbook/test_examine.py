"""What is pointed out in the data before any fit. The data are invented."""

from __future__ import annotations

import random
from datetime import date

import numpy as np

from bridge.messages import Problem
from bridge.workbook import examine
from bridge.workbook.request import Scalar
from tests.workbook.support import contents, refits, typed, workbook

ENTRIES: dict[str, Scalar] = {"hours": "response", "length (m)": "predictor", "hull": "category", "coats": "predictor"}


def found(rows: list[list[object]], entries: dict[str, Scalar] | None = None) -> dict[str, Problem]:
    page = typed(contents(workbook({"Data": rows})), entries or ENTRIES)
    findings = examine.examine(page.source.tables["Data"], page.understood().models)
    return {finding.key: finding for finding in findings}


def test_clean_data_have_no_findings() -> None:
    assert found(refits(40)) == {}


def test_gaps_in_the_cells_by_column() -> None:
    rows = refits(40)
    rows[5][1], rows[6][4], rows[7][4], rows[8][2], rows[9][3] = None, "#DIV/0!", "=1+1", "n/a", None
    findings = found(rows)
    assert findings["found-errors"].text == "coats holds an error in Data!E7."
    assert findings["found-no-value"].cell == "Data!E8"
    assert findings["found-texts"].cell == "Data!C9"
    assert findings["found-blanks"].cell == "Data!D10"


def test_a_level_spelled_two_ways() -> None:
    rows = refits(40)
    rows[4][3] = " oak"
    finding = found(rows)["found-spelled-twice"]
    assert finding.cell == "Data!D5"
    assert finding.text == "hull: ' oak' in Data!D5 and 'oak' differ only in spaces; they count as two levels."


def test_one_case_that_makes_a_level() -> None:
    rows = refits(40)
    rows[4][3] = "larch"
    assert found(rows)["found-single-case"].cell == "Data!D5"


def test_a_nearly_constant_column() -> None:
    rows = refits(40)
    for row in rows[1:]:
        row[4] = 2
    rows[7][4] = 3
    finding = found(rows)["found-nearly-constant"]
    assert finding.cell == "Data!E8"
    assert "2 in 39 of 40 rows" in finding.text


def test_rows_that_are_the_same_in_every_column_used() -> None:
    rows = refits(40)
    rows[11][1:5], rows[20][1:5] = rows[4][1:5], rows[4][1:5]
    finding = found(rows)["found-repeated-rows"]
    assert finding.text == "3 rows are the same in every column used, such as rows 5 and 12."


def test_a_value_far_from_the_rest() -> None:
    rows = refits(40)
    rows[9][1] = 8500.0
    finding = found(rows)["found-far-value"]
    assert finding.cell == "Data!B10"
    lengths = np.array([row[1] for row in rows[1:]], dtype=float)
    low, high = np.percentile(lengths, (25, 75))
    assert high + 3 * (high - low) < 8500  # Tukey (1977): far out


def test_a_value_is_judged_on_the_scale_that_enters_the_model() -> None:
    chance = random.Random(5)
    rows: list[list[object]] = [
        ["y", "x"],
        *[[2.0 * at, round(float(np.exp(chance.gauss(3, 1.2))), 3)] for at in range(60)],
    ]
    assert "found-far-value" in found(rows, {"y": "response", "x": "predictor"})
    assert "found-far-value" not in found(rows, {"y": "response", "x": "log predictor"})


def test_gaps_and_repeats_in_the_order() -> None:
    rows: list[list[object]] = [["y", "when"]]
    months = [(2023, month) for month in range(1, 13)] + [(2024, month) for month in range(3, 13)]
    rows += [[at * 1.5 + at % 3, date(year, month, 1)] for at, (year, month) in enumerate(months)]
    finding = found(rows, {"y": "response", "when": "order"})["found-order-gap"]
    assert finding.text == "when: there is a gap between 2023-12-01 and 2024-03-01."
    rows[5][1] = rows[4][1]
    assert found(rows, {"y": "response", "when": "order"})["found-order-twice"].cell == "Data!B6"


def test_complete_months_are_no_gap() -> None:
    rows: list[list[object]] = [
        ["y", "when"],
        *[[at * 1.5 + at % 3, date(2020 + at // 12, at % 12 + 1, 1)] for at in range(36)],
    ]
    assert "found-order-gap" not in found(rows, {"y": "response", "when": "order"})


def test_a_total_below_the_cases() -> None:
    rows = refits(40)
    rows.append(["Total", 4000.0, 900.0, "oak", 100, 100, None])
    finding = found(rows)["found-total-row"]
    assert finding.cell == "Data!A42"


def test_dates_used_as_numbers() -> None:
    assert "date-as-number" in found(refits(40), {"hours": "response", "month": "predictor"})
