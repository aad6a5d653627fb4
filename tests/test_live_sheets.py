"""The sheets without us: everything recomputed by LibreOffice, from inputs typed into the open document."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import openpyxl
import pytest

from bridge.job import Report, fit_workbook
from bridge.regression import estimates, inverse
from bridge.regression.spec import CategoryTerm, Levels, NumberTerm, Observations, Shape
from tests import live_book
from tests.books import cells
from tests.office import Office, convert, needs_office, running

DIGITS = 1e-12


@pytest.fixture(scope="module")
def book(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Report]:
    path = tmp_path_factory.mktemp("live") / "every kind.xlsx"
    return path, live_book.make(path)


@pytest.fixture(scope="module")
def office() -> Iterator[Office]:
    with running() as program:
        yield program


# --- what is stored is what a spreadsheet computes ----------------------------------------------


@needs_office
def test_every_stored_value_is_what_a_spreadsheet_computes(book: tuple[Path, Report]) -> None:
    path, report = book
    assert [model.name for model in report.models if model.result is None] == []
    assert differences(path) == []


def differences(path: Path) -> list[tuple[str, str, object, object]]:
    """Cells of our sheets whose value after a forced recalculation is not the stored one to 12 digits."""
    again = convert(path, "xlsx", recalculate=True)
    found = []
    for sheet in openpyxl.load_workbook(path, read_only=True).sheetnames:
        if not sheet.startswith("fit "):
            continue
        for row, (before, after) in enumerate(zip(cells(path, sheet), cells(again, sheet), strict=False), 1):
            for column, (old, new) in enumerate(zip(before, after, strict=False), 1):
                if not same(old, new):
                    found.append((sheet, f"R{row}C{column}", old, new))
    return found


def same(old: object, new: object) -> bool:
    if isinstance(old, float) and isinstance(new, float):
        return abs(old - new) <= DIGITS * max(abs(old), abs(new))
    return old == new


# --- estimates of cases typed into the open document ---------------------------------------------

_TYPE = """
import json
path, cases = argv[0], json.loads(argv[1])
document = load(path)
sheet = document.Sheets.getByName("fit estimates")
head = next(row for row in range(20) if sheet.getCellByPosition(0, row).String == "case")
names = {}
for column in range(1, 120):
    text = sheet.getCellByPosition(column, head).String
    if not text:
        break
    names[text] = column
groups = {}
for column in range(120):
    text = sheet.getCellByPosition(column, head - 1).String
    if text and ": working" not in text:
        groups[text.split(" ")[0]] = column
found = []
for start in range(0, len(cases), 20):
    part = cases[start : start + 20]
    for at, case in enumerate(part):
        for name, value in case.items():
            cell = sheet.getCellByPosition(names[name], head + 1 + at)
            if isinstance(value, str):
                cell.String = value
            else:
                cell.Value = value
    document.calculate()
    for at in range(len(part)):
        line = {}
        for model, column in groups.items():
            figures, j = {}, column
            while (header := sheet.getCellByPosition(j, head).String):
                cell = sheet.getCellByPosition(j, head + 1 + at)
                figures[header] = cell.String if cell.FormulaResultType2 == 2 else cell.Value
                j += 1
            line[model] = figures
        found.append(line)
document.close(True)
print(json.dumps(found))
"""


def random_cases(count: int, seed: int) -> list[dict[str, object]]:
    rng = np.random.default_rng(seed)
    return [
        {
            "size (m)": float(np.round(rng.uniform(3, 40), 2)),
            "age": float(np.round(rng.uniform(0.5, 50), 1)),
            "kind": str(rng.choice(live_book.KINDS)),
            "w": float(np.round(rng.uniform(0.2, 3), 2)),
        }
        for _ in range(count)
    ]


@needs_office
def test_typed_cases_are_estimated_as_the_numeric_core_does(book: tuple[Path, Report], office: Office) -> None:
    path, report = book
    cases = random_cases(100, 11)
    shown = json.loads(office.script(_TYPE, str(path), json.dumps(cases), timeout=300))
    assert len(shown) == 100
    for model in report.models:
        result = model.result
        assert result is not None
        observations = Observations(
            {
                "size (m)": np.array([case["size (m)"] for case in cases]),
                "age": np.array([case["age"] for case in cases]),
                "kind": levels([str(case["kind"]) for case in cases]),
                "w": np.array([case["w"] for case in cases]),
            },
            len(cases),
        )
        weights = observations.numbers("w") if result.spec.weight else None
        wanted = estimates.estimate(result, observations, weights)
        for header, values in (
            ("estimate", wanted.estimate),
            ("mean low", wanted.mean_low),
            ("mean high", wanted.mean_high),
            ("case low", wanted.case_low),
            ("case high", wanted.case_high),
        ):
            found = np.array([line[model.name][header] for line in shown], dtype=float)
            scale = np.maximum(np.abs(values), np.abs(result.observed).mean() * 1e-3)
            assert np.max(np.abs(found - values) / scale) < DIGITS * 10, (model.name, header)
        for case, line, leverage in zip(cases, shown, wanted.leverage, strict=True):
            remark = line[model.name]["remark"]
            outside = [r.column for r in result.ranges if not r.low <= float(case[r.column]) <= r.high]  # type: ignore[arg-type]
            assert ("beyond the data" in remark) == bool(outside), (model.name, case, remark)
            assert all(column in remark for column in outside)
            if not outside:
                assert ("far from the cases" in remark) == bool(leverage > result.max_leverage * (1 + 1e-9))


def levels(texts: list[str]) -> Levels:
    names = tuple(sorted(set(texts)))
    return Levels(np.array([names.index(text) for text in texts]), names)


@needs_office
def test_lines_that_cannot_be_estimated_say_why(book: tuple[Path, Report], office: Office) -> None:
    path, _ = book
    lines = [
        {"size (m)": 10.0, "age": 5.0},
        {"size (m)": -3.0, "age": 5.0, "kind": "oak"},
        {"size (m)": "ten", "age": 5.0, "kind": "Oak"},
        {},
    ]
    shown = json.loads(office.script(_TYPE, str(path), json.dumps(lines)))
    assert shown[0]["loglog"]["remark"] == "kind is missing"
    assert shown[0]["loglog"]["estimate"] == ""
    assert shown[0]["weighted"]["case low"] == ""
    assert "give w for the interval of a single case" in shown[0]["weighted"]["remark"]
    assert shown[1]["loglog"]["remark"] == "size (m) must be above 0"
    assert shown[2]["crossed"]["remark"] == "size (m) is not a number; kind is none of the known kinds"
    assert all(figure == "" for figure in shown[3]["number"].values())


# --- why this number, and backwards ----------------------------------------------------------------

_CHOOSE = """
import json
path, wanted = argv[0], json.loads(argv[1])
document = load(path)
sheet = document.Sheets.getByName("fit estimates")
head = next(row for row in range(20) if sheet.getCellByPosition(0, row).String == "case")
left = next(column for column in range(200) if sheet.getCellByPosition(column, head - 1).String == "Why this number")
for column in range(1, 5):
    name = sheet.getCellByPosition(column, head).String
    cell = sheet.getCellByPosition(column, head + 1)
    if isinstance(wanted["case"][name], str):
        cell.String = wanted["case"][name]
    else:
        cell.Value = wanted["case"][name]
sheet.getCellByPosition(0, head + 1).String = "this one"
sheet.getCellByPosition(left + 1, head).String = "this one"
found = {}
for model in wanted["models"]:
    sheet.getCellByPosition(left + 1, head + 1).String = model
    document.calculate()
    steps, row = [], head + 3
    while sheet.getCellByPosition(left, row).String[:9] not in ("", "Steps are"):
        cells = [sheet.getCellByPosition(left + j, row) for j in range(4)]
        steps.append([cells[0].String] + [c.Value if c.FormulaResultType2 == 1 else "" for c in cells[1:]])
        row += 1
        if sheet.getCellByPosition(left, row).FormulaResultType2 != 2:
            break
    found[model] = steps
document.close(True)
print(json.dumps(found))
"""


@needs_office
def test_contributions_lead_from_the_average_to_the_estimate(book: tuple[Path, Report], office: Office) -> None:
    path, report = book
    case = {"size (m)": 14.5, "age": 12.0, "kind": "steel", "w": 0.8}
    names = [model.name for model in report.models]
    found = json.loads(office.script(_CHOOSE, str(path), json.dumps({"case": case, "models": names})))
    one = Observations(
        {name: levels([value]) if isinstance(value, str) else np.array([value]) for name, value in case.items()}, 1
    )
    for model in report.models:
        result = model.result
        assert result is not None
        steps = found[model.name]
        terms = list(dict.fromkeys(column.term for column in result.design.columns if column.factors))
        assert [step[0] for step in steps] == ["a case at the averages", *terms]
        wanted = float(estimates.estimate(result, one).estimate[0])
        assert steps[-1][3] == pytest.approx(wanted, rel=DIGITS * 10), model.name
        if result.back is None:
            assert steps[0][3] + sum(step[1] for step in steps[1:]) == pytest.approx(wanted, rel=1e-11)
        elif result.back.kind == "log" and model.name != "fitted":
            assert steps[0][3] * np.prod([step[2] for step in steps[1:]]) == pytest.approx(wanted, rel=1e-11)


_BACK = """
import json
path, readings = argv[0], json.loads(argv[1])
document = load(path)
sheet = document.Sheets.getByName("fit estimates")
places = {}
for row in range(80):
    for column in range(160):
        text = sheet.getCellByPosition(column, row).String
        if text.startswith("Which x gave this y: "):
            places[text.split(": ")[1]] = (column, row)
found = {}
for model, (column, row) in places.items():
    for at, y in enumerate(readings):
        sheet.getCellByPosition(column, row + 2 + at).Value = y
        if sheet.getCellByPosition(column + 4, row + 1).String == "w":
            sheet.getCellByPosition(column + 4, row + 2 + at).Value = 0.8
    document.calculate()
    found[model] = [
        [sheet.getCellByPosition(column + j, row + 2 + at).Value for j in (1, 2, 3)] for at in range(len(readings))
    ]
document.close(True)
print(json.dumps(found))
"""


@needs_office
def test_a_straight_line_is_read_backwards(book: tuple[Path, Report], office: Office) -> None:
    path, report = book
    readings = [12.0, 30.5, 61.0]
    found = json.loads(office.script(_BACK, str(path), json.dumps(readings)))
    assert set(found) == {"weighted", "uneven", "origin"}
    for model in report.models:
        if model.name in found and model.result is not None:
            for y, line in zip(readings, found[model.name], strict=True):
                wanted = inverse.estimate(model.result, y, weight=0.8 if model.result.spec.weight else 1.0)
                assert line == pytest.approx([wanted.x, wanted.low, wanted.high], rel=1e-11)


# --- the seal ----------------------------------------------------------------------------------------

_SEAL = """
import json
path = argv[0]
document = load(path)
sheets = document.Sheets
data, request = sheets.getByName("Data"), sheets.getByName("fit request")
def seal():
    document.calculateAll()
    said = {sheets.getByName(name).getCellByPosition(0, 2).String for name in sheets.ElementNames if name[:4] == "fit "
            and name != "fit request"}
    return said.pop() if len(said) == 1 else repr(said)
def row_rechecked(number):
    sheet = sheets.getByName("fit coefficients")
    row = next(r for r in range(400) if sheet.getCellByPosition(0, r).String.startswith("fitted value of the data row"))
    sheet.getCellByPosition(4, row).Value = number
    document.calculateAll()
    return [sheet.getCellByPosition(5, row).Value, sheet.getCellByPosition(6, row).String]
def rechecked():
    sheet = sheets.getByName("fit coefficients")
    return [sheet.getCellByPosition(6, row).String for row in range(400)
            if sheet.getCellByPosition(6, row).String in ("agrees", "DOES NOT AGREE")]
answers = {"as saved": seal(), "recheck as saved": sorted(set(rechecked()))}
answers["one row"] = [row_rechecked(row) for row in (2, 30, 9999)]
def flipped(name, change, undo):
    change()
    answers[name] = seal()
    undo()
    answers[name + ", undone"] = seal()
def cell(column, row):
    return data.getCellByPosition(column, row)
def put(column, row, value):
    c = cell(column, row)
    if isinstance(value, str):
        c.String = value
    else:
        c.Value = value
old = cell(1, 7).Value
flipped("one value", lambda: put(1, 7, old + 0.01), lambda: put(1, 7, old))
put(1, 7, old + 5)
document.calculateAll()
answers["recheck of other data"] = sorted(set(rechecked()))
put(1, 7, old)
rows = [(cell(c, 9), cell(c, 10)) for c in range(1, 6)]
def swap():
    for a, b in rows:
        if a.Type.value == "TEXT":
            a.String, b.String = b.String, a.String
        else:
            a.Value, b.Value = b.Value, a.Value
flipped("two rows swapped", swap, swap)
size = cell(2, 12).Value
flipped("a cell blanked", lambda: cell(2, 12).setFormula(""), lambda: put(2, 12, size))
kind = cell(4, 13).String
other = "oak" if kind != "oak" else "steel"
flipped("a category changed", lambda: put(4, 13, other), lambda: put(4, 13, kind))
flipped("a category's case changed", lambda: put(4, 13, kind.upper()), lambda: put(4, 13, kind))
last = 61
def append():
    for c, value in enumerate(["J999", 20.0, 10.0, 5.0, "oak", 1.0]):
        put(c, last, value)
flipped("a row appended", append, lambda: [cell(c, last).setFormula("") for c in range(6)])
flipped("a number turned into text", lambda: put(1, 20, "x"), lambda: put(1, 20, %(y)r))
grid = next((c, r) for r in range(40) for c in range(4, 20)
            if request.getCellByPosition(c, r).String == "category base steel")
entry = request.getCellByPosition(*grid)
def ask(text):
    entry.String = text
flipped("a changed request", lambda: ask("category base oak"), lambda: ask("category base steel"))
data.Name = "Renamed data"
answers["data sheet renamed"] = seal()
data.Columns.insertByIndex(1, 1)
answers["column inserted"] = seal()
data.Rows.insertByIndex(0, 2)
answers["rows inserted above"] = seal()
document.close(True)
print(json.dumps(answers))
"""


@needs_office
def test_the_seal_flips_for_every_change_and_for_nothing_else(book: tuple[Path, Report], office: Office) -> None:
    path, report = book
    text = _SEAL % {"y": float(live_book.columns()["y"][19])}  # type: ignore[arg-type]
    answers = json.loads(office.script(text, str(path), timeout=300))
    assert answers.pop("recheck as saved") == ["agrees"]
    result = report.models[0].result
    assert result is not None
    for at, (value, verdict) in zip((0, 28), answers.pop("one row"), strict=False):
        assert value == pytest.approx(result.fit.fitted[at], rel=1e-12)
        assert verdict == "agrees"
    assert "DOES NOT AGREE" in answers.pop("recheck of other data")
    same_data, other_data = (
        "data unchanged since this fit",
        "DATA HAVE CHANGED since this fit: save with the bridge running",
    )
    keeps = {"as saved", "data sheet renamed", "column inserted", "rows inserted above"}
    wrong = {
        name: said
        for name, said in answers.items()
        if said != (same_data if name in keeps or name.endswith(", undone") else other_data)
    }
    assert wrong == {}
    assert len(answers) == 20


@needs_office
def test_the_seal_holds_after_a_save_in_another_program(book: tuple[Path, Report]) -> None:
    path, _ = book
    again = convert(path, "xlsx", recalculate=True)
    assert cells(again, "fit results")[2][0] == "data unchanged since this fit"


# --- names for people's own formulas -------------------------------------------------------------------


@needs_office
def test_own_formulas_follow_refits(tmp_path: Path) -> None:
    path = tmp_path / "own.xlsx"
    live_book.make(path)
    book = openpyxl.load_workbook(path)
    page = book.create_sheet("Own page")
    page["A1"], page["A2"] = "=fit_number_residual_sd", "=ROWS(fit_number_coefficients)"
    page["A3"], page["A4"] = "=fit_number_n", "=fit_number_seal"
    data = book["Data"]
    for cell in next(data.iter_rows(min_row=3, max_row=3)):
        cell.value = None
    for row in range(3, data.max_row):
        for column in range(1, 7):
            data.cell(row, column).value = data.cell(row + 1, column).value
    for column in range(1, 7):
        data.cell(61, column).value = None
    request = book["fit request"]
    head = next(row for row in range(1, 40) if request.cell(row, 1).value == "column")
    model = next(column for column in range(4, 30) if request.cell(head, column).value == "number")
    kind = next(row for row in range(1, 40) if request.cell(row, 1).value == "kind")
    request.cell(kind, model).value = "category"
    book.save(path)
    report = fit_workbook(path)
    result = next(each.result for each in report.models if each.name == "number")
    assert result is not None
    shown = [row[0] for row in cells(convert(path, "xlsx", recalculate=True), "Own page")]
    assert shown[0] == pytest.approx(result.fit.residual_sd, rel=1e-12)
    assert shown[1] == len(result.design.columns) + 1
    assert len(result.design.columns) == 5
    assert shown[2] == 59
    assert shown[3] is True


def test_kinds_of_models_are_all_there(book: tuple[Path, Report]) -> None:
    """The book of these tests holds every shape, a category, crossed terms of two kinds, weights and no intercept."""
    specs = [model.result.asked for model in book[1].models if model.result is not None]
    terms = [term for spec in specs for term in spec.terms]
    shapes = {term.shape for term in terms if isinstance(term, NumberTerm)}
    assert shapes == set(Shape)
    assert any(isinstance(term, CategoryTerm) for term in terms)
    assert any(len(spec.crossed) == 2 for spec in specs)
    assert any(spec.weight for spec in specs)
    assert any(not spec.intercept for spec in specs)
