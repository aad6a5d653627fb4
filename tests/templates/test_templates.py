"""The templates: found, made again alike, without faults, with a request whose models can be fitted."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest
import statsmodels.api as sm

from bridge import samples
from templates.make import TEMPLATES, make
from tests.office import convert, needs_office
from tests.samples import BLOCKS, ROLES, asked_of, contents, data, differing, faults, grid, words

FOLDER = Path(__file__).parents[2] / "templates"
each = pytest.mark.parametrize("name", list(TEMPLATES))


def test_six_and_found() -> None:
    """The folder, the maker and the program's own look-up agree; each has one line on what it is for."""
    assert samples.template_names() == tuple(TEMPLATES)
    assert {file.stem for file in FOLDER.glob("*.xlsx")} == set(TEMPLATES)
    for name in TEMPLATES:
        assert samples.template(name) == (FOLDER / f"{name}.xlsx").read_bytes()
        assert 20 < len(samples.template_line(name)) < 100
    with pytest.raises(KeyError):
        samples.template("../README")
    with pytest.raises(KeyError):
        samples.template_line("none")


def test_made_again_alike(tmp_path: Path) -> None:
    """Two runs give the same bytes; the committed workbooks hold the same cells."""
    (tmp_path / "one").mkdir()
    (tmp_path / "two").mkdir()
    for first, second in zip(make(tmp_path / "one"), make(tmp_path / "two"), strict=True):
        assert first.read_bytes() == second.read_bytes()
        assert contents(first) == contents(FOLDER / first.name)


@each
def test_no_faults(name: str) -> None:
    """Schema and semantics of ECMA-376, as openxml-audit checks them."""
    assert faults(FOLDER / f"{name}.xlsx") == []


@each
def test_guides_and_says_invented(name: str) -> None:
    """The first sheet says that the rows are invented, what to do, and where the limits are."""
    text = words(FOLDER / f"{name}.xlsx")
    assert "The rows on the data sheet are invented examples: write your own over them." in text
    assert "How to use it" in text
    assert ("Before you rely on it" in text) == (name != "blank")
    if name in ("price", "repeated"):
        assert "local codes and licensed practice decide" in text
    assert not re.search(r"\b(Ltd|Inc|GmbH|LLC|Corp|Mr|Mrs|Dr)\b|[®™©@]|https?:|www\.", text)


@each
def test_measures_have_units(name: str) -> None:
    """Every heading over numbers with decimals names its unit."""
    sheet, _ = asked_of(FOLDER / f"{name}.xlsx")
    table = data(FOLDER / f"{name}.xlsx", sheet)
    for heading in table.columns:
        cells = table[heading]
        if pd.api.types.is_numeric_dtype(cells) and not np.allclose(cells, np.round(cells)):
            assert heading == "hours" or re.search(r"\(.+\)$", heading), heading


@each
def test_request_fits(name: str) -> None:
    """Each model's response, predictors and categories make a full-rank design, and explain most of the response."""
    path = FOLDER / f"{name}.xlsx"
    sheet, listed = asked_of(path)
    table, asked = data(path, sheet), grid(path)
    assert tuple(asked) == BLOCKS
    assert listed == list(table.columns)
    assert 20 <= len(table) <= 200
    for entries in asked["column"].values():
        response, design = _design(table, {label: str(entry) for label, entry in entries.items()})
        assert np.linalg.matrix_rank(design) == design.shape[1]
        assert sm.OLS(response, design).fit().rsquared > 0.6


def _design(table: pd.DataFrame, entries: dict[str, str]) -> tuple[np.ndarray, np.ndarray]:
    columns: list[np.ndarray] = [np.ones(len(table))]
    response = None
    for label, entry in entries.items():
        role = next(word for word in entry.split() if word in ROLES)
        cells = table[label]
        shaped = np.log(cells.to_numpy(float)) if entry.startswith("log ") else cells
        if role == "response":
            assert response is None
            response = np.asarray(shaped, float)
        elif role == "predictor":
            columns += [np.asarray(shaped, float), *_further(cells, entry)]
        elif role == "category":
            columns += list(pd.get_dummies(cells, drop_first=True, dtype=float).to_numpy().T)
            assert " base " not in entry or entry.split(" base ")[1] in set(cells)
    assert response is not None
    return response, np.column_stack(columns)


def _further(cells: pd.Series, entry: str) -> list[np.ndarray]:
    values = cells.to_numpy(float)
    if entry.endswith("squared"):
        return [values**2]
    bend = re.search(r"bend at (\S+)", entry)
    return [np.maximum(values - float(bend[1]), 0)] if bend else []


def test_repeated_needs_grouping() -> None:
    """In the template on groups, ordinary standard errors are too small for what differs between units."""
    table = data(FOLDER / "repeated.xlsx", "Visits")
    design = np.column_stack([np.ones(len(table)), table["dose (g)"], table["method"] == "new"]).astype(float)
    fit = sm.OLS(table["result (kg)"].to_numpy(float), design).fit()
    grouped = fit.get_robustcov_results("cluster", groups=pd.factorize(table["unit"])[0])
    assert grouped.bse[2] > 1.3 * fit.bse[2]


@each
def test_ready_to_print_and_read(name: str) -> None:
    """Headings stay in sight and on every printed page; the data sheet starts in A1."""
    path = FOLDER / f"{name}.xlsx"
    sheet, listed = asked_of(path)
    page = openpyxl.load_workbook(path)[sheet]
    assert page["A1"].value == listed[0]
    assert page.freeze_panes == "B2"
    assert page.print_title_rows == "$1:$1"
    assert page.page_setup.paperSize == 9


@needs_office
@each
def test_libreoffice_opens(name: str) -> None:
    """It converts, recalculated, with every formula's value as stored (there are none to differ)."""
    path = FOLDER / f"{name}.xlsx"
    again = convert(path, "xlsx", recalculate=True)
    assert differing(path, again) == []
    assert openpyxl.load_workbook(again).sheetnames == openpyxl.load_workbook(path).sheetnames
