"""The recheck in a real spreadsheet program: scattered rows, errors, long and crossed categories, weights, levels that
are numbers, dates or yes/no; it agrees with the fit, and no longer when the data change."""

from __future__ import annotations

import json
from datetime import date, timedelta
from pathlib import Path

import numpy as np
import pytest

from bridge.job import Report, fit_workbook
from bridge.sheets import recheck
from tests import office
from tests.books import ask, cells, data_book


def columns(n: int = 260) -> dict[str, list[object]]:
    """Invented: every third row belongs to another hull, errors and blanks are strewn in."""
    random = np.random.default_rng(12)
    size = random.uniform(2, 30, n).round(2)
    age = random.uniform(1, 40, n).round(1)
    depot = random.integers(0, 40, n)
    hull = [("oak", "steel", "glass fibre")[at % 3] for at in range(n)]
    dock = [("dry", "wet")[at] for at in random.integers(0, 2, n)]
    coats = [float(one) for one in random.integers(1, 4, n)]
    y: list[object] = list((30 + 2 * size - 0.3 * age + depot / 4 + random.normal(0, 2, n)).round(2))
    for at in (5, 60, 61, 200):
        y[at] = "#N/A"
    for at in (17, 90):
        y[at] = None
    days = [date(2026, 3, 2) + timedelta(days=7 * int(at)) for at in random.integers(0, 4, n)]
    return {
        "y": y,
        "size (m)": list(size),
        "age": list(age),
        "depot": [f"depot {at:02}" for at in depot],
        "hull": hull,
        "dock": dock,
        "coats": coats,
        "round": days,
        "paid": [bool(one) for one in random.integers(0, 2, n)],
        "w": list(random.uniform(0.3, 3, n).round(2)),
    }


FILTER = {"use rows where": "hull", "is": "equals", "value": "oak"}
MODELS: dict[str, dict[object, object]] = {
    "plain": {"y": "response", "size (m)": "predictor", "age": "predictor"},
    "filtered": {"y": "log response", "size (m)": "log predictor", "age": "reciprocal predictor", **FILTER},
    "depots": {"y": "response", "size (m)": "predictor", "depot": "category"},
    "crossed": {
        "y": "root response",
        "size (m)": "root predictor",
        "depot": "category",
        "hull": "category",
        ("size (m)", "depot"): "yes",
        ("hull", "depot"): "yes",
    },
    "numbers": {
        "y": "response",
        "coats": "category",
        "round": "category",
        "paid": "category",
        "age": "squared predictor",
    },
    "weighted": {"y": "response", "size (m)": "predictor bend at 10", "dock": "category", "w": "weight", **FILTER},
    "origin": {"y": "response", "size (m)": "predictor", "hull": "category", "intercept": "no"},
    "uneven": {"y": "response", "age": "cubed predictor", "standard errors": "uneven spread"},
    "resistant": {"y": "response", "age": "predictor", "fit by": "resistant"},
}


@pytest.fixture(scope="module")
def fitted(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Report]:
    path = tmp_path_factory.mktemp("recheck") / "depots.xlsx"
    data_book(path, columns())
    fit_workbook(path)
    ask(path, MODELS)  # type: ignore[arg-type]
    report = fit_workbook(path)
    assert [model.name for model in report.models if model.result is None] == []
    return path, report


def verdicts(rows: list[list[object]]) -> dict[str, list[object]]:
    """What each line of the recheck says, by model and label: value and verdict."""
    found: dict[str, list[object]] = {}
    model = ""
    for row in rows:
        label = str(row[0])
        if label.split("  ")[0] in MODELS:
            model = label.split("  ")[0]
        if row[6] in (recheck.AGREES, recheck.DISAGREES, "left out", "not listed"):
            found[f"{model}: {label}"] = [row[5], row[6]]
    return found


def test_what_is_shown(fitted: tuple[Path, Report]) -> None:
    lines = verdicts(cells(fitted[0], "fit coefficients"))
    assert {verdict for _, verdict in lines.values()} == {recheck.AGREES}
    sums = [label for label in lines if label.startswith("plain: sum of")]
    assert sums == [
        "plain: sum of residual, must be 0",
        "plain: sum of residual x size (m), must be 0",
        "plain: sum of residual x age, must be 0",
    ]
    assert "depots: largest of 41 sums of residual x column, must be 0" in lines
    assert [label for label in lines if label.startswith("resistant")] == [
        "resistant: fitted value of the data row typed here (its row number)"
    ]


@office.needs_office
def test_the_spreadsheet_confirms_every_fit(fitted: tuple[Path, Report]) -> None:
    path, report = fitted
    lines = verdicts(cells(office.convert(path, "xlsx", recalculate=True), "fit coefficients"))
    assert lines.keys() == verdicts(cells(path, "fit coefficients")).keys()
    for label, (value, verdict) in lines.items():
        assert verdict == recheck.AGREES, label
        if ", must be 0" in label:
            assert value == 0, label
    for model in report.models:
        if model.result is not None and model.name != "resistant":
            label = next(one for one in lines if one.startswith(f"{model.name}: residual sum of squares"))
            assert lines[label][0] == pytest.approx(model.result.fit.ss_residual, rel=1e-12), label


SCRIPT = """
import json
document = load(argv[0])
data, sheet = document.Sheets.getByName("Data"), document.Sheets.getByName("fit coefficients")
def told():
    document.calculate()
    cursor = sheet.createCursor(); cursor.gotoEndOfUsedArea(False)
    return list(map(list, sheet.getCellRangeByPosition(0, 0, 8, cursor.RangeAddress.EndRow).DataArray))
answers = {}
def changed(name, column, row, value):
    cell = data.getCellByPosition(column, row)
    old = cell.getFormula()
    cell.setFormula(value) if isinstance(value, str) else cell.setValue(value)
    answers[name] = told()
    cell.setFormula(old)
changed("a response", 0, 3, 80.0)
changed("a predictor", 1, 3, 2.75)
changed("a level", 3, 3, "depot 00" if data.getCellByPosition(3, 3).String != "depot 00" else "depot 01")
changed("a row that was left out", 0, 5 + 1, 80.0)
answers["as before"] = told()
for row in range(len(answers["as before"])):
    if answers["as before"][row][0].startswith("fitted value of the data row"):
        sheet.getCellByPosition(4, row).Value = 19
answers["row 19, which was left out"] = told()
print(json.dumps(answers))
"""


@office.needs_office
def test_it_speaks_up_when_the_data_are_others(fitted: tuple[Path, Report]) -> None:
    with office.running(recalculate=True) as program:
        answers = json.loads(program.script(SCRIPT, fitted[0], timeout=300))
    found = {name: verdicts(rows) for name, rows in answers.items()}

    def disagreeing(name: str) -> set[str]:
        return {label.split(":")[0] for label, (_, verdict) in found[name].items() if verdict == recheck.DISAGREES}

    least_squares = set(MODELS) - {"resistant"}
    # row 4 holds "oak": it is within the filter; the resistant fit's one line looks at another row
    assert disagreeing("a response") == least_squares - {"filtered", "weighted"}
    assert disagreeing("a predictor") >= {"plain", "depots", "crossed", "origin"}
    assert disagreeing("a level") == {"depots", "crossed"}
    assert disagreeing("a row that was left out") == set()
    assert disagreeing("as before") == set()
    chosen = {label: said for label, said in found["row 19, which was left out"].items() if "typed here" in label}
    assert len(chosen) == len(MODELS)
    assert {verdict for _, verdict in chosen.values()} == {"left out"}
