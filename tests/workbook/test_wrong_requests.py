"""Wrong requests: each gets its message, at the cell it is about; none a traceback, none stops another model."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from datetime import date
from functools import cache

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bridge.messages import CATALOGUE, Severity
from bridge.page.cells import address
from bridge.workbook import grid as grids
from bridge.workbook.contents import Contents, RawSheet
from bridge.workbook.understand import understand
from tests.workbook.support import Typed, all_problems, contents, first_contact, refits, typed, workbook

FROM_X = {"y": "response", "x": "predictor"}
GOOD = {"hours": "response", "length (m)": "predictor", "hull": "category"}


def flaws() -> list[list[object]]:
    """A sheet with a flaw in each column."""
    head = ["y", "x", "zero", "minus", "texts", "numbers as text", "oops", "uncalculated", "same", "one", "empty"]
    rows: list[list[object]] = [[*head, "when", "mixed", "yes"]]
    for at in range(1, 21):
        rows.append(
            [
                3.0 + at * 1.5 + (at % 3),
                at,
                at - 5,
                -at,
                at,
                at,
                at,
                at,
                7,
                "oak",
                None,
                date(2024, 1, at),
                "b",
                at % 2 > 0,
            ]
        )
    rows[8][4] = "spring?"
    rows[9][4] = "later"
    rows[6][5] = "12,5"
    rows[3][6] = "#N/A"
    rows[4][7] = "=1+1"
    rows[11][11] = "soon"
    rows[2][12] = 4
    return rows


@cache
def source() -> Contents:
    few = [["a", "b", "c"], [1, 2, "x"], [2, 5, "y"], [4, 4, "z"]]
    return contents(
        workbook({"Refits": refits(), "Flaws": flaws(), "Few": few, "Notes": [["just a note"]], "Twin": refits(12)})
    )


def good(extra: Mapping[str, object] | None = None) -> Typed:
    """A request that is fine, with further entries."""
    return typed(source(), GOOD | dict(extra or {}), data_sheet="Refits")  # type: ignore[arg-type]


def entry(label: str, text: object, **rest: object) -> Callable[[], tuple[Typed, str]]:
    """The good request with one entry changed; the cell named is that entry's."""

    def build() -> tuple[Typed, str]:
        page = good({key.replace("_", " "): value for key, value in rest.items()})
        after = "setting" if label in SETTINGS else None
        return page, "'fit request'!" + page.put(label, "A", text, after)  # type: ignore[arg-type]

    return build


SETTINGS = {"interval level", "standard errors", "lags", "intercept", "fit by", "search", "folds", "estimate back on",
            "use rows where", "is", "value", "and where"}  # fmt: skip


def only(entries: dict[str, object], cell: str, data_sheet: str = "Refits") -> Callable[[], tuple[Typed, str]]:
    """These entries alone; `cell` is an address, or the label of the row whose entry is named."""

    def build() -> tuple[Typed, str]:
        page = typed(source(), entries, data_sheet=data_sheet)  # type: ignore[arg-type]
        if "!" in cell:
            return page, cell
        return page, "'fit request'!" + (cell if cell[-1].isdigit() else page.cell(cell, "A"))

    return build


def flaw(column: str, role: str, cell: str) -> Callable[[], tuple[Typed, str]]:
    """`y` from `x` on the sheet with flaws, and one flawed column in a role."""
    return only(FROM_X | {column: role}, cell, "Flaws")


def crossed(first: str, second: str, where: str, value: object = "yes") -> Callable[[], tuple[Typed, str]]:
    def build() -> tuple[Typed, str]:
        page = good()
        entry_cell = page.cross(first, second, "A", value)  # type: ignore[arg-type]
        row = entry_cell.lstrip("ABCDEFG")
        return page, "'fit request'!" + {"entry": entry_cell, "first": f"A{row}", "second": f"B{row}"}[where]

    return build


def filtered(column: object, comparison: object, value: object, where: str) -> Callable[[], tuple[Typed, str]]:
    def build() -> tuple[Typed, str]:
        page = good()
        cells = {}
        for label, text in (("use rows where", column), ("is", comparison), ("value", value)):
            if text is not None:
                cells[label] = page.put(label, "A", text, "setting")  # type: ignore[arg-type]
        return page, "'fit request'!" + cells[where]

    return build


def header(name: str) -> Callable[[], tuple[Typed, str]]:
    def build() -> tuple[Typed, str]:
        page = good()
        page.cells[(page.row("column"), page.column("A"))] = name
        return page, "'fit request'!" + page.cell("column", "A")

    return build


def sheet(name: str, cell: str = "B1") -> Callable[[], tuple[Typed, str]]:
    def build() -> tuple[Typed, str]:
        page = good()
        at = grids.data_sheet_cell(page.grid)
        assert at is not None
        page.cells.pop(at)
        if name:
            page.cells[at] = name
        page.source = Contents(source().sheet_names, {}, {})
        return page, f"'fit request'!{address(*at)}"

    return build


def twin_sheets() -> tuple[Typed, str]:
    """Two data sheets in one model."""
    page = first_contact(source(), "Refits")
    page.cells[(0, 2)] = "Few"
    page = Typed(page.source, page.understood().grid, dict(page.understood().grid.cells))
    page.put("hours", "A", "response")
    return page, "'fit request'!" + page.put("b", "A", "predictor")


def two_rows(role: str) -> Callable[[], tuple[Typed, str]]:
    """A column listed twice, with an entry in each row."""

    def build() -> tuple[Typed, str]:
        page = good()
        row = page.row("month")
        page.cells[(row, 0)] = "hours"
        page.cells[(row, page.column("A"))] = role
        return page, f"'fit request'!E{row + 1}"

    return build


def no_label() -> tuple[Typed, str]:
    page = good()
    row = page.row("crew")
    for column in range(4):
        page.cells.pop((row, column), None)
    page.cells[(row, page.column("A"))] = "predictor"
    return page, f"'fit request'!E{row + 1}"


def renamed() -> tuple[Typed, str]:
    page = good()
    row = page.row("length (m)")
    page.cells[(row, 0)] = "length_m"
    return page, f"'fit request'!A{row + 1}"


def misspelt_label() -> tuple[Typed, str]:
    page = good()
    row = page.row("crew")
    page.cells[(row, 0)] = "hulll"
    for column in (1, 2, 3):
        page.cells.pop((row, column))
    page.cells[(row, page.column("A"))] = "category"
    return page, f"'fit request'!E{row + 1}"


def unnamed_model() -> tuple[Typed, str]:
    page = good()
    page.cells[(page.row("hours"), 7)] = "response"
    return page, f"'fit request'!H{page.row('column') + 1}"


def copied_model(name: str) -> tuple[Typed, str]:
    page = good()
    for (row, column), value in list(page.cells.items()):
        if column == page.column("A"):
            page.cells[(row, 7)] = value
    page.cells[(page.row("column"), 7)] = name
    return page, f"'fit request'!H{page.row('column') + 1}"


def strange_row() -> tuple[Typed, str]:
    page = good()
    row = page.row("folds")
    page.cells[(row, 0)] = "interval levl"
    page.cells[(row, page.column("A"))] = "90%"
    return page, f"'fit request'!E{row + 1}"


def formula() -> tuple[Typed, str]:
    page = good()
    return page, "'fit request'!" + page.cell("crew", "A")


WRONG: dict[str, tuple[str, Callable[[], tuple[Typed, str]]]] = {
    # what was typed: (message, (grid, cell named))
    # --- the data sheet
    "no data sheet": ("no-data-sheet", sheet("")),
    "unknown data sheet": ("data-sheet-unknown", sheet("Refit")),
    "data sheet without a table": ("data-sheet-without-table", sheet("Notes")),
    # --- names of models
    "name with a space": ("model-name-bad", header("my model")),
    "name with a dash": ("model-name-bad", header("A-1")),
    "name of 21 letters": ("model-name-bad", header("a" * 21)),
    "a copied column with the same name": ("model-name-twice", lambda: copied_model("A")),
    "the same name in another case": ("model-name-twice", lambda: copied_model("a")),
    "names that clash in formulas": ("model-names-clash", lambda: copied_model("A_adjusted")),
    "a column of entries without a name": ("model-without-name", unnamed_model),
    # --- rows
    "unknown column": ("column-unknown", misspelt_label),
    "renamed column": ("column-renamed", renamed),
    "entry without a column": ("entry-without-column", no_label),
    "empty column": ("column-empty", flaw("empty", "predictor", "empty")),
    "empty column as category": ("column-empty", flaw("empty", "category", "empty")),
    # --- entries
    "misspelt role": ("entry-unknown-word", entry("crew", "predictr")),
    "an unknown word": ("entry-unknown-word", entry("crew", "banana")),
    "a formula that failed": ("entry-unknown-word", entry("crew", "#NAME?")),
    "a number as role": ("entry-not-words", entry("crew", 1.0)),
    "TRUE as role": ("entry-not-words", entry("crew", True)),
    "a shape alone": ("entry-without-role", entry("crew", "log")),
    "two roles in one cell": ("entry-two-roles", entry("crew", "response predictor")),
    "weight and candidate": ("entry-two-roles", entry("crew", "candidate weight")),
    "log category": ("shape-needs-number-role", entry("hull", "log category")),
    "squared response": ("response-shape", entry("hours", "squared response")),
    "reciprocal response": ("response-shape", entry("hours", "reciprocal response")),
    "log and squared": ("two-shapes", entry("crew", "log squared predictor")),
    "log with a bend": ("two-shapes", entry("crew", "log predictor bend at 3")),
    "base of a predictor": ("base-needs-category", entry("crew", "predictor base 3")),
    "base without a level": ("base-without-level", entry("hull", "category base")),
    "base that does not occur": ("base-unknown", entry("hull", "category base oakk")),
    "bend without a place": ("bend-without-place", entry("crew", "predictor bend")),
    "bend at a doubtful number": ("bend-unclear", entry("crew", "predictor bend at 1,500")),
    "power 13": ("power-out-of-range", entry("crew", "predictor to power 13")),
    "power one": ("power-out-of-range", entry("crew", "predictor to power 1")),
    # --- roles together
    "no response": ("no-response", only({"length (m)": "predictor"}, "column")),
    "two responses": ("two-responses", entry("crew", "response")),
    "response also predictor": ("response-also-predictor", two_rows("predictor")),
    "a column twice": ("column-twice", two_rows("response")),
    "two weights": ("role-twice", only(GOOD | {"coats": "weight", "crew": "weight"}, "crew")),
    "two labels": ("role-twice", only(GOOD | {"job": "label", "month": "label"}, "month")),
    "two orders": ("role-twice", only(GOOD | {"coats": "order", "month": "order"}, "month")),
    "two groups": ("role-twice", only(GOOD | {"coats": "group", "month": "group"}, "month")),
    "columns of two sheets": ("two-sheets", twin_sheets),
    "texts as predictor": ("text-as-number", entry("job", "predictor")),
    "texts as response": ("text-as-number", only({"hull": "response", "crew": "predictor"}, "hull")),
    "texts as weight": ("text-as-number", entry("job", "weight")),
    "texts as order": ("text-as-number", entry("job", "order")),
    "no predictor at all": ("no-predictor", only({"hours": "response"}, "hours")),
    "nothing to fit": ("nothing-to-fit", only({"hours": "response", "intercept": "no"}, "hours")),
    # --- crossed terms
    "crossed with a column not in the model": ("crossed-not-a-term", crossed("hull", "crew", "entry")),
    "crossed with the response": ("crossed-not-a-term", crossed("hull", "hours", "entry")),
    "crossed with an unknown column": ("column-unknown", crossed("hull", "lenght (m)", "second")),
    "crossed with nothing": ("crossed-incomplete", crossed("hull", "", "second")),
    "crossed from nothing": ("crossed-incomplete", crossed("", "hull", "first")),
    "crossed with itself": ("crossed-with-itself", crossed("hull", "hull", "entry")),
    "crossed perhaps": ("crossed-not-yes", crossed("hull", "length (m)", "entry", "perhaps")),
    # --- settings
    "interval level 5%": ("level-out-of-range", entry("interval level", "5%")),
    "interval level 0.05": ("level-out-of-range", entry("interval level", 0.05)),
    "interval level 150": ("level-out-of-range", entry("interval level", 150)),
    "interval level in words": ("level-out-of-range", entry("interval level", "high")),
    "unknown standard errors": ("setting-unknown", entry("standard errors", "robust")),
    "intercept perhaps": ("setting-unknown", entry("intercept", "perhaps")),
    "unknown fit": ("setting-unknown", entry("fit by", "magic")),
    "unknown search": ("setting-unknown", entry("search", "stepwise")),
    "half a fold": ("setting-not-whole", entry("folds", 2.5)),
    "one fold": ("setting-not-whole", entry("folds", 1)),
    "more folds than rows": ("too-many-folds", entry("folds", 31)),
    "lags below zero": ("setting-not-whole", entry("lags", -1)),
    "lags without serial errors": ("lags-without-serial", entry("lags", 2)),
    "more lags than rows": ("too-many-lags", entry("lags", 40, standard_errors="serial", month="order")),
    "a misspelt setting": ("setting-row-unknown", strange_row),
    "estimates back on a scale never left": ("back-on-without-shape", entry("estimate back on", "fitted")),
    "grouped without a group": ("grouped-without-group", entry("standard errors", "grouped")),
    "serial without an order": ("serial-without-order", entry("standard errors", "serial")),
    "search without candidates": ("search-without-candidates", entry("search", "BIC")),
    "candidates without search": ("candidates-without-search", only(GOOD | {"crew": "candidate"}, "column")),
    # --- row filters
    "filter by an unknown column": ("column-unknown", filtered("hulk", "equals", "oak", "use rows where")),
    "filter without a column": ("filter-without-column", filtered(None, "equals", "oak", "is")),
    "filter without a value": ("filter-without-value", filtered("hull", "equals", None, "use rows where")),
    "filter with a strange comparison": ("setting-unknown", filtered("crew", "roughly", 3, "is")),
    "texts in order": ("filter-order-on-text", filtered("hull", "at least", "oak", "value")),
    "between one value": ("filter-between", filtered("crew", "between", 3, "value")),
    "a number column compared with a word": ("filter-value", filtered("crew", "above", "many", "value")),
    "a date column compared with a word": ("filter-value", filtered("month", "above", "spring", "value")),
    "no row left": ("filter-leaves-nothing", filtered("crew", "above", 99, "use rows where")),
    "no row left, misspelt": ("filter-leaves-nothing", filtered("hull", "equals", "Oak", "use rows where")),
    "leaving out what is not there": ("filter-value-absent", filtered("hull", "is not", "Oak", "use rows where")),
    # --- what the cells hold
    "text in a number column": ("text-in-number-column", flaw("texts", "predictor", "Flaws!E9")),
    "text in an order column": ("text-in-number-column", flaw("when", "order", "Flaws!L12")),
    "a number stored as text": ("number-stored-as-text", flaw("numbers as text", "predictor", "Flaws!F7")),
    "error cells": ("error-cells", flaw("oops", "predictor", "Flaws!G4")),
    "formula without a value": ("formula-without-value", flaw("uncalculated", "predictor", "Flaws!H5")),
    "log of zero": ("log-of-nothing", flaw("zero", "log predictor", "Flaws!C2")),
    "root of a negative number": ("root-of-negative", flaw("minus", "root predictor", "Flaws!D2")),
    "reciprocal of zero": ("reciprocal-of-zero", flaw("zero", "reciprocal predictor", "Flaws!C6")),
    "log of a negative response": (
        "log-of-nothing", only({"minus": "log response", "x": "predictor"}, "Flaws!D2", "Flaws")
    ),
    "weight zero or negative": ("weight-not-positive", flaw("zero", "weight", "Flaws!C2")),
    "category with one level": ("one-level", flaw("one", "category", "one")),
    "a response that never changes": (
        "constant-response", only({"same": "response", "x": "predictor"}, "same", "Flaws")
    ),
    "one group only": (
        "one-group", only(FROM_X | {"one": "group", "standard errors": "grouped"}, "one", "Flaws")
    ),
    "fewer rows than terms": (
        "too-few-rows", only({"a": "response", "b": "predictor", "c": "category"}, "a", "Few")
    ),
    "no complete row": ("no-rows", lambda: _without_complete_rows()),
    "a number among texts": ("number-among-texts", flaw("mixed", "category", "Flaws!M3")),
    "a date as number": ("date-as-number", only(FROM_X | {"when": "predictor"}, "when", "Flaws")),
    "yes and no as number": ("yes-no-as-number", flaw("yes", "predictor", "yes")),
}  # fmt: skip


def _without_complete_rows() -> tuple[Typed, str]:
    rows = [["y", "x"], *[[at, None] if at % 2 else [None, at] for at in range(1, 9)]]
    page = typed(contents(workbook({"Gaps": rows})), {"y": "response", "x": "predictor"})
    return page, "'fit request'!" + page.cell("y", "A")


def test_there_are_enough() -> None:
    assert len(WRONG) >= 60


@pytest.mark.parametrize("what", WRONG)
def test_wrong_request(what: str) -> None:
    key, build = WRONG[what]
    page, cell = build()
    names = [model.name for model in page.understood().models]
    told = [problem for name in (names or ["A"]) for problem in all_problems(page, name)]
    mine = [problem for problem in told if problem.key == key]
    assert mine, [problem.text for problem in told]
    assert cell in [problem.cell for problem in mine]
    short = cell.removeprefix("'fit request'!")
    severity = CATALOGUE[key][0]
    if severity is Severity.REFUSAL:
        assert any(short in problem.text for problem in mine), mine[0].text


@pytest.mark.parametrize(
    "what", [what for what, (key, _) in WRONG.items() if key.startswith(("entry", "cross", "sett"))]
)
def test_another_model_is_not_stopped(what: str) -> None:
    page, _ = WRONG[what][1]()
    for label, role in GOOD.items():
        page.put(label, "B", role)
    other = page.model("B")
    assert other.spec is not None
    assert not [problem for problem in all_problems(page, "B") if problem.severity is Severity.REFUSAL]


def test_several_are_told_at_once_refusals_first() -> None:
    page = good({"crew": "predictr", "interval level": "5%", "lags": 3})
    problems = page.model().problems
    assert [problem.key for problem in problems] == ["entry-unknown-word", "level-out-of-range", "lags-without-serial"]


def test_every_message_of_the_request_is_provoked() -> None:
    """Each message of the catalogue's part about requests and rows is in the table above."""
    keys = list(CATALOGUE)
    request = keys[keys.index("no-data-sheet") : keys.index("found-blanks")]
    elsewhere = {"entry-without-value", "filter-other-sheet", "too-many-candidates", "text-among-numbers",
                 "kind-among-others", "rows-left-out", "rows-filtered", "hidden-rows-used",
                 "base-not-in-rows"}  # fmt: skip
    assert set(request) - {key for key, _ in WRONG.values()} == elsewhere


CELL = st.one_of(
    st.text(max_size=30),
    st.sampled_from(["response", "predictor", "category base oak", "yes", "hull", "hours", "column", "setting",
                     "status", "crossed", "A", "data sheet", "Refits", "message", "is", "value", "use rows where",
                     "with", "Twin"]),
    st.floats(), st.booleans(), st.integers(-5, 5),
)  # fmt: skip


@settings(max_examples=150, deadline=None)
@given(st.dictionaries(st.tuples(st.integers(0, 45), st.integers(0, 9)), CELL, max_size=12))
def test_random_cells_never_break_it(changes: dict[tuple[int, int], str | float | bool]) -> None:
    page = good()
    page.cells.update(changes)
    names = {model.name for model in page.understood().models}
    for name in names:
        all_problems(page, name)
    grid = page.understood().grid
    again = understand(grid, source().tables, source().sheet_names).grid
    assert again.cells == grid.cells


@settings(max_examples=60, deadline=None)
@given(st.dictionaries(st.tuples(st.integers(0, 12), st.integers(0, 6)), CELL, max_size=25))
def test_random_sheets_never_break_it(cells: dict[tuple[int, int], str | float | bool]) -> None:
    grid = grids.read(RawSheet("fit request", cells, {}))
    understood = understand(grid, source().tables, source().sheet_names)
    kept = {value for value in cells.values() if value != ""}
    assert all(value in understood.grid.cells.values() for value in kept if value == value)
