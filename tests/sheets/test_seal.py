"""The seal in a real spreadsheet program: what flips it, what does not, and that its figures are what they were."""

from __future__ import annotations

import json
from datetime import date, timedelta
from pathlib import Path

import numpy as np
import pytest

from bridge.job import fit_workbook
from bridge.sheets import seal
from tests import office
from tests.books import ask, cells, data_book

HULLS = ("oak", "steel", "glass fibre", "Éa 北")


def columns(n: int = 60) -> dict[str, list[object]]:
    """Invented refits, with everything a used column may hold: blanks, an error, texts, dates, yes and no."""
    random = np.random.default_rng(8)
    length = random.uniform(7.9, 38, n).round(1)
    hull = [HULLS[at] for at in random.integers(0, 4, n)]
    dry = [bool(one) for one in random.integers(0, 2, n)]
    hours: list[object] = list((20 + 3 * length + random.normal(0, 5, n)).round(1))
    hours[7], hours[20] = None, "#N/A"
    days = [date(2026, 1, 5) + timedelta(days=int(at)) for at in random.integers(0, 300, n)]
    coats = [int(one) for one in random.integers(1, 4, n)]
    return {
        "job": [f"Job {at}" for at in range(n)],
        "hours": hours,
        "length (m)": list(length),
        "hull": hull,
        "dry": dry,
        "when": days,
        "coats": coats,
        "unused": list(range(n)),
    }


MODELS = {
    "A": {"hours": "response", "length (m)": "predictor", "hull": "category"},
    "B": {"hours": "log response", "length (m)": "log predictor", "dry": "category", "interval level": 0.9},
    "C": {
        "hours": "response",
        "when": "predictor",
        "coats": "category",
        "use rows where": "length (m)",
        "is": "at least",
        "value": 10,
    },
}


@pytest.fixture(scope="module")
def fitted(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("seal") / "refits.xlsx"
    data_book(path, columns())
    fit_workbook(path)
    ask(path, MODELS)
    report = fit_workbook(path)
    assert all(model.result is not None for model in report.models)
    return path


SCRIPT = """
import json
path = argv[0]
document = load(path)
def sheet(name):
    return document.Sheets.getByName(name)
def cell(name, column, row):
    return sheet(name).getCellByPosition(column, row)
def verdicts():
    document.calculate()
    probe = sheet("probe") if document.Sheets.hasByName("probe") else None
    if probe is None:
        document.Sheets.insertNewByName("probe", 0)
        probe = sheet("probe")
        for at, name in enumerate("ABC"):
            probe.getCellByPosition(0, at).setFormula("=fit_" + name + "_seal")
        document.calculate()
    return {
        "said": sheet("fit results").getCellByPosition(0, 2).String,
        "models": "".join(str(int(probe.getCellByPosition(0, at).Value)) for at in range(3)),
        "errors": sum(probe.getCellByPosition(0, at).getError() for at in range(3)),
    }
def swap(first, second):
    for column in range(8):
        a, b = cell("Data", column, first), cell("Data", column, second)
        one, other = a.getFormula(), b.getFormula()
        a.setFormula(other); b.setFormula(one)
def fresh():
    global document
    document.close(True)
    document = load(path)
{steps}
print(json.dumps(told))
"""

# what is done, then which models (A, B, C) must still be sealed
FLIPS = {
    "one value changed by 0.1": ("cell('Data', 2, 5).Value += 0.1", "000"),
    "a value changed in its tenth digit": ("cell('Data', 2, 5).Value *= 1 + 1e-9", "000"),
    "a response changed": ("cell('Data', 1, 9).Value += 0.1", "000"),
    "two rows swapped": ("swap(3, 4)", "000"),
    "two rows swapped, far apart": ("swap(2, 50)", "000"),
    "a cell blanked": ("cell('Data', 2, 12).setFormula('')", "000"),
    "a blank filled": ("cell('Data', 1, 8).Value = 50", "000"),
    "an error turned into a number": ("cell('Data', 1, 21).Value = 50", "000"),
    "a number turned into text": ("cell('Data', 2, 5).String = cell('Data', 2, 5).String", "000"),
    "a category text changed": ("cell('Data', 3, 5).String = 'iron'", "011"),
    "a category's letter case changed": (
        "[cell('Data', 3, r).setString('Oak') for r in range(1, 61) if cell('Data', 3, r).String == 'oak'][:1]",
        "011",
    ),
    "one letter's case": (
        "r = [r for r in range(1, 61) if cell('Data', 3, r).String == 'oak'][0]; cell('Data', 3, r).String = 'oaK'",
        "011",
    ),
    "a category's text blanked": ("cell('Data', 3, 5).String = ''", "011"),
    "yes turned into no": ("cell('Data', 4, 5).Value = 1 - cell('Data', 4, 5).Value", "101"),
    "a date moved by a day": ("cell('Data', 5, 5).Value += 1", "110"),
    "a number level changed": ("cell('Data', 6, 5).Value = 9", "110"),
    "a row appended": ("cell('Data', 2, 61).Value = 12", "000"),
    "a row appended after a gap": ("cell('Data', 3, 70).String = 'oak'", "011"),
    "a row put in at the end": (
        "sheet('Data').Rows.insertByIndex(61, 1); cell('Data', 1, 61).Value = 50; cell('Data', 2, 61).Value = 20",
        "000",
    ),
    "the last row taken out": ("sheet('Data').Rows.removeByIndex(60, 1)", "000"),
    "a row taken out": ("sheet('Data').Rows.removeByIndex(5, 1)", "000"),
    "a row put in": (
        "sheet('Data').Rows.insertByIndex(5, 1); cell('Data', 1, 5).Value = 50; cell('Data', 2, 5).Value = 20",
        "000",
    ),
    "an error in place of a number": ("cell('Data', 2, 5).setFormula('=1/0')", "000"),
    "an entry of the request changed": ("find('hull', 'A').String = ''", "011"),
    "an entry's wording changed": ("find('hull', 'A').String = 'category base steel'", "011"),
    "a number among the settings changed": ("find('interval level', 'B').Value = 0.8", "101"),
    "a setting given": ("find('intercept', 'A').String = 'no'", "011"),
    "a filter changed": ("find('value', 'C').Value = 11", "110"),
}
KEPT = {
    "nothing done": "pass",
    "a number typed again": "cell('Data', 2, 5).Value = cell('Data', 2, 5).Value",
    "a column that no model uses": "cell('Data', 7, 5).Value = 1e6",
    "a label changed": "cell('Data', 0, 5).String = 'Job X'",
    "the data sheet renamed": "sheet('Data').Name = 'Past refits'",
    "the request renamed": "sheet('fit request').Name = 'What to fit'",
    "rows put in above the table": "sheet('Data').Rows.insertByIndex(0, 3)",
    "a column put in": "sheet('Data').Columns.insertByIndex(1, 2)",
    "a column moved": "move('C1:C1048576')",
    "a column's table part moved": "move('C1:C61')",
    "a row put into the request": "sheet('fit request').Rows.insertByIndex(4, 1)",
    "a note beside the data": "cell('Data', 12, 5).String = 'checked'",
    "results sorted": "sheet('fit rows').getCellByPosition(1, 20).String = 'x'",
}
HELPERS = """
def find(label, model):
    s = sheet("fit request") if document.Sheets.hasByName("fit request") else sheet("What to fit")
    rows = [r for r in range(80) if s.getCellByPosition(0, r).String.strip() == label]
    heads = [r for r in range(80) if s.getCellByPosition(0, r).String.strip() == "column"]
    columns = [c for c in range(30) if s.getCellByPosition(c, heads[0]).String == model]
    return s.getCellByPosition(columns[0], rows[0])
def move(cells):
    from com.sun.star.table import CellAddress
    s = sheet("Data")
    s.Columns.insertByIndex(9, 1)
    target = CellAddress(); target.Sheet = s.RangeAddress.Sheet; target.Column = 9; target.Row = 0
    s.moveRange(target, s.getCellRangeByName(cells).RangeAddress)
"""


@pytest.fixture(scope="module")
def told(fitted: Path) -> dict[str, dict[str, object]]:
    """What the seal says after each change, in one session of the program, the file loaded anew each time."""
    steps = [HELPERS, "told = {}"]
    for name, what in {**{name: what for name, (what, _) in FLIPS.items()}, **KEPT}.items():
        steps += ["fresh()", what, f"told[{name!r}] = verdicts()"]
    with office.running(recalculate=True) as program:
        return json.loads(program.script(SCRIPT.replace("{steps}", "\n".join(steps)), fitted, timeout=300))


@office.needs_office
@pytest.mark.parametrize("name", FLIPS)
def test_a_change_breaks_the_seal(told: dict[str, dict[str, object]], name: str) -> None:
    assert told[name] == {"said": seal.CHANGED, "models": FLIPS[name][1], "errors": 0}


@office.needs_office
@pytest.mark.parametrize("name", KEPT)
def test_what_does_not_matter_keeps_it(told: dict[str, dict[str, object]], name: str) -> None:
    assert told[name] == {"said": seal.UNCHANGED, "models": "111", "errors": 0}


@office.needs_office
def test_a_save_by_another_program_keeps_it(fitted: Path) -> None:
    again = office.convert(office.convert(fitted, "xlsx", recalculate=True), "xlsx", recalculate=True)
    assert cells(again, "fit results")[2][0] == seal.UNCHANGED
    verdicts = [row[3] for row in cells(again, "fit history") if isinstance(row[4], bool)]
    assert verdicts
    assert set(verdicts) == {seal.SAME}
