"""The whole story on real files: what comes back, what is left alone, and what a mistake is answered with."""

from __future__ import annotations

import zipfile
from collections.abc import Mapping
from pathlib import Path

import openpyxl
import pytest

from bridge.job import Outcome, fit_workbook, strip_workbook
from bridge.messages import Severity
from bridge.sheets.book import OUR_SHEETS
from tests.books import ask, data_book, fitted_book, status

SHARED = {"[Content_Types].xml", "xl/workbook.xml", "xl/_rels/workbook.xml.rels", "xl/styles.xml", "docProps/app.xml"}


def columns() -> dict[str, list[object]]:
    """Thirty invented jobs; some columns hold what a request may stumble over."""
    n = 30
    return {
        "job": [f"J{at}" for at in range(n)],
        "hours": [10.0 + 3 * at + (at * 7919 % 11) for at in range(n)],
        "length": [5.0 + at for at in range(n)],
        "hull": ["oak" if at % 3 else "steel" for at in range(n)],
        "same": ["one"] * n,
        "mixed": [*range(1, 18), "eighteen", *range(19, n + 1)],
        "broken": [*range(1, 18), "#N/A", *range(19, n + 1)],
        "zero": [*range(n)],
        "weights": [1.0] * 10 + [-1.0] + [2.0] * 19,
        "few": [1.0, 2.0, 4.0] + [None] * (n - 3),
    }


def user_members(path: Path) -> dict[str, bytes]:
    """Every member that is neither shared nor ours, by name."""
    with zipfile.ZipFile(path) as archive:
        return {name: archive.read(name) for name in archive.namelist() if name not in SHARED}


@pytest.fixture
def book(tmp_path: Path) -> Path:
    path = data_book(tmp_path / "jobs.xlsx", columns(), "Refits")
    made = openpyxl.load_workbook(path)
    cell = made["Refits"].cell(19, 7)
    assert cell.value == "#N/A"
    cell.data_type = "e"
    made.save(path)
    return path


# --- first contact -----------------------------------------------------------------------------


def test_an_empty_request_becomes_a_grid(book: Path) -> None:
    report = fit_workbook(book)
    assert report.outcome is Outcome.LAID_OUT
    assert report.exit_code == 0
    page = openpyxl.load_workbook(book)["fit request"]
    labels = [str(page.cell(row, 1).value) for row in range(1, page.max_row + 1)]
    for label in ("data sheet", "column", "crossed", "setting", "status", *columns()):
        assert label in labels
    assert fit_workbook(book).outcome is Outcome.UNCHANGED


def test_a_workbook_without_request_is_left_alone(tmp_path: Path) -> None:
    path = tmp_path / "plain.xlsx"
    openpyxl.Workbook().save(path)
    before = path.read_bytes()
    assert fit_workbook(path).outcome is Outcome.NO_REQUEST
    assert path.read_bytes() == before


def test_a_foreign_sheet_with_our_name_stops_the_workbook(tmp_path: Path) -> None:
    path = data_book(tmp_path / "own.xlsx", {"x": [1.0, 2.0], "y": [2.0, 4.1]})
    made = openpyxl.load_workbook(path)
    made["fit request"]["A1"] = "my own notes"
    made.save(path)
    before = path.read_bytes()
    report = fit_workbook(path)
    assert report.exit_code == 2
    assert "fit request" in report.message
    assert path.read_bytes() == before


# --- after a fit -------------------------------------------------------------------------------

GOOD: Mapping[str, Mapping[object, object]] = {
    "A": {"hours": "response", "length": "predictor"},
    "B": {"hours": "log response", "length": "log predictor", "hull": "category"},
}


def test_a_fit_brings_all_sheets_and_leaves_the_rest(book: Path) -> None:
    before = user_members(book)
    fit_workbook(book)
    ask(book, GOOD)
    asked = user_members(book)
    report = fit_workbook(book)
    assert (report.outcome, report.exit_code) == (Outcome.FITTED, 0)
    assert set(OUR_SHEETS) <= set(openpyxl.load_workbook(book, read_only=True).sheetnames)
    after = user_members(book)
    request_part = next(name for name in asked if before.get(name) != asked[name] and "sheet" in name)
    assert {name: data for name, data in after.items() if name in asked and name != request_part} == {
        name: data for name, data in asked.items() if name != request_part
    }


def test_an_unchanged_save_leads_to_no_write(book: Path) -> None:
    fit_workbook(book)
    ask(book, GOOD)
    fit_workbook(book)
    before = book.read_bytes()
    assert fit_workbook(book).outcome is Outcome.UNCHANGED
    assert book.read_bytes() == before


def test_one_bad_model_never_stops_the_others(book: Path) -> None:
    fit_workbook(book)
    ask(book, {**GOOD, "C": {"hours": "response", "length": "response"}})
    report = fit_workbook(book)
    assert [model.result is not None for model in report.models] == [True, True, False]
    assert report.exit_code == 1
    assert status(book, "A").startswith("Fitted")
    assert status(book, "C").startswith("Not fitted")


def test_strip_gives_the_sheets_of_the_original_back(tmp_path: Path) -> None:
    path = tmp_path / "jobs.xlsx"
    fitted_book(path, columns(), GOOD)
    assert strip_workbook(path)
    assert not set(OUR_SHEETS) & set(openpyxl.load_workbook(path, read_only=True).sheetnames)
    assert not strip_workbook(path)


# --- every kind of mistake ----------------------------------------------------------------------

WRONG: dict[str, tuple[Mapping[object, object], str]] = {
    # what is typed for model A, and what the answer must name
    "an unknown column in a filter": (
        {"hours": "response", "length": "predictor", "use rows where": "lenght", "is": "at least", "value": 3},
        "length",
    ),
    "two responses": ({"hours": "response", "length": "response"}, "E"),
    "no response": ({"length": "predictor"}, "response"),
    "a category with one level": ({"hours": "response", "same": "category"}, "same"),
    "fewer rows than terms": ({"hours": "response", "few": "to power 4 predictor"}, "few"),
    "a text in a number column": ({"hours": "response", "mixed": "predictor"}, "Refits!F19"),
    "an error cell": ({"hours": "response", "broken": "predictor"}, "Refits!G19"),
    "a negative weight": ({"hours": "response", "length": "predictor", "weights": "weight"}, "Refits!I12"),
    "the log of zero": ({"hours": "response", "zero": "log predictor"}, "Refits!H2"),
    "a bad interval level": ({"hours": "response", "length": "predictor", "interval level": "very sure"}, "E"),
    "an unknown word": ({"hours": "response", "length": "predicter"}, "predictor"),
}


@pytest.mark.parametrize("mistake", WRONG)
def test_a_mistake_is_answered_under_its_model_and_nowhere_else(book: Path, mistake: str) -> None:
    entries, named = WRONG[mistake]
    fit_workbook(book)
    ask(book, {"A": entries})
    before = user_members(book)
    report = fit_workbook(book)
    assert report.exit_code == 1
    problem = next(each for each in report.models[0].problems if each.severity is not Severity.NOTE)
    assert problem.cell is not None
    said = status(book, "A")
    assert named in said
    assert problem.text.split(".")[0] in said
    after = user_members(book)
    ours = {name for name in before if b"fit request" in before[name] or b"What should be fitted?" in before[name]}
    assert {name: after[name] for name in before if name not in ours} == {
        name: data for name, data in before.items() if name not in ours
    }


def test_a_response_that_is_also_a_predictor(book: Path) -> None:
    fit_workbook(book)
    ask(book, {"A": {"hours": "response predictor", "length": "predictor"}})
    report = fit_workbook(book)
    assert report.exit_code == 1
    assert "two roles" in status(book, "A")


def test_an_unknown_data_sheet(book: Path) -> None:
    fit_workbook(book)
    ask(book, GOOD, data_sheet="Refit")
    report = fit_workbook(book)
    assert report.exit_code == 1
    assert "Refit" in status(book, "A")


def test_a_clash_with_a_name_of_the_users(book: Path) -> None:
    fit_workbook(book)
    ask(book, GOOD)
    made = openpyxl.load_workbook(book)
    made.defined_names["fit_A_n"] = openpyxl.workbook.defined_name.DefinedName("fit_A_n", attr_text="Refits!$A$1")
    made.save(book)
    before = book.read_bytes()
    report = fit_workbook(book)
    assert report.exit_code == 2
    assert "fit_A_n" in report.message
    assert book.read_bytes() == before


def test_formulas_without_a_stored_value_are_asked_for(tmp_path: Path) -> None:
    path = data_book(tmp_path / "formulas.xlsx", {"x": [1.0, 2.0, 3.0, 4.0], "y": ["=A2*2+1", "=A3", "=A4", "=A5"]})
    fit_workbook(path)
    ask(path, {"A": {"y": "response", "x": "predictor"}})
    report = fit_workbook(path)
    assert report.exit_code == 1
    assert "Data!B2" in status(path, "A")
    assert "save" in status(path, "A").casefold()


@pytest.mark.parametrize(
    "content", [b"", b"not a workbook", b"PK\x03\x04 torn", b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + b"\0" * 600]
)
def test_what_is_no_workbook_is_refused_and_kept(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "odd.xlsx"
    path.write_bytes(content)
    report = fit_workbook(path)
    assert report.exit_code == 2
    assert report.message
    assert path.read_bytes() == content
