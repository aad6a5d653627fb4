"""People's own formulas over `fit_A_…` names: right after a fit, after refits, and while a model cannot be fitted."""

from __future__ import annotations

from datetime import datetime
from pathlib import Path

import numpy as np
import openpyxl
import pytest

from bridge.job import fit_workbook
from bridge.sheets import names
from bridge.workbook.columns import serial_of
from tests import office
from tests.books import ask, cells, data_book
from tests.sheets.cases import BOOKS, FITTED_AT


def test_every_key_of_every_model_once() -> None:
    told = BOOKS["twelve models"]()
    found = names.defined_names(told)
    assert [one.name for one in found] == [f"fit_{m.name}_{key}" for m in told.models for key in names.KEYS]
    refused = {one.name: one.refers_to for one in found if one.name.startswith("fit_model_5_")}
    assert refused.pop("fit_model_5_seal") == "FALSE"
    assert set(refused.values()) == {names.NOT_AVAILABLE}
    meant = {one.name: one.refers_to for one in found}
    assert float(meant["fit_model_1_fitted_at"]) == serial_of(FITTED_AT)
    assert meant["fit_model_1_n"] == str(told.fitted[0][1].fit.n)


OWN = {
    "n": "=fit_A_n",
    "sd": "=fit_A_residual_sd",
    "slope": '=VLOOKUP("x",fit_A_coefficients,2,FALSE)',
    "terms": "=ROWS(fit_A_coefficients)-1",
    "first source": "=INDEX(fit_A_anova,2,1)",
    "used": '=COUNTIF(fit_A_rows,"yes")',
    "estimate": "=INDEX(fit_A_estimates,2,1)",
    "sealed": "=fit_A_seal",
    "day": "=INT(fit_A_fitted_at)",
    "other": "=IF(ISNA(fit_B_n),-1,fit_B_n)",
    "other sealed": "=fit_B_seal",
}


def own_page(path: Path) -> dict[str, object]:
    """What the formulas give in a real spreadsheet program."""
    return {str(row[0]): row[1] for row in cells(office.convert(path, "xlsx", recalculate=True), "My page")}


@office.needs_office
def test_own_formulas_live_through_refits(tmp_path: Path) -> None:
    random = np.random.default_rng(3)
    x, z = random.uniform(0, 10, 30).round(2), random.uniform(0, 5, 30).round(2)
    columns = {"y": (2 + 3 * x + z + random.normal(0, 1, 30)).round(2).tolist(), "x": x.tolist(), "z": z.tolist()}
    path = tmp_path / "own.xlsx"
    data_book(path, columns)
    fit_workbook(path)
    ask(path, {"A": {"y": "response", "x": "predictor"}, "B": {"y": "response", "z": "predictor"}})
    fit_workbook(path)
    book = openpyxl.load_workbook(path)
    page = book.create_sheet("My page")
    for row, (label, formula) in enumerate(OWN.items(), 1):
        page.cell(row, 1, label)
        page.cell(row, 2, formula)
    estimates = book["fit estimates"]
    head = next(row for row in range(1, 20) if estimates.cell(row, 1).value == "case")
    estimates.cell(head + 1, 2).value = 4.0
    book.save(path)
    report = fit_workbook(path)
    _check(path, report, 30, 2)
    ask(path, {"A": {"z": "predictor"}, "B": {"z": "log predictor", "x": "response"}})  # B: two responses
    book = openpyxl.load_workbook(path)
    for row in range(25):
        book["Data"].append([5.0 + row, row / 3, row % 4 + 0.5])
    estimates = book["fit estimates"]
    estimates.cell(head + 1, 2).value, estimates.cell(head + 1, 3).value = 4.0, 2.0
    book.save(path)
    report = fit_workbook(path)
    assert report.models[1].result is None
    found = _check(path, report, 55, 3)
    assert (found["other"], found["other sealed"]) == (-1, False)


def _check(path: Path, report, n: int, terms: int) -> dict[str, object]:
    found, result = own_page(path), report.models[0].result
    labels = [column.label for column in result.design.columns]
    assert (found["n"], found["terms"], found["used"]) == (n, terms, n)
    assert found["sd"] == pytest.approx(result.fit.residual_sd, rel=1e-12)
    assert found["slope"] == pytest.approx(float(result.fit.coefficients[labels.index("x")]), rel=1e-12)
    case = [{"intercept": 1.0, "x": 4.0, "z": 2.0}[label] for label in labels]
    assert found["estimate"] == pytest.approx(float(np.array(case) @ result.fit.coefficients), rel=1e-12)
    assert found["first source"] == "regression"
    assert found["sealed"] is True
    assert abs(float(str(found["day"])) - serial_of(datetime.now())) < 2
    return found
