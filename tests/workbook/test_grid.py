"""The grid is found by its labels; arranging it keeps what the user has and changes nothing the second time."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bridge.workbook import grid as grids
from bridge.workbook.contents import Contents, RawSheet
from bridge.workbook.request import Grid, Scalar
from tests.workbook.support import Typed, contents, first_contact, refits, typed, workbook

GOOD = {"hours": "response", "length (m)": "predictor", "hull": "category", "job": "label"}
Cells = dict[tuple[int, int], Scalar]


@pytest.fixture(scope="module")
def source() -> Contents:
    return contents(workbook({"Refits": refits()}))


def shifted(cells: Cells, down: int, right: int) -> Cells:
    return {(row + down, column + right): value for (row, column), value in cells.items()}


def read(cells: Cells) -> Grid:
    return grids.read(RawSheet("fit request", cells, {}))


# --- first contact -----------------------------------------------------------------------------


def test_first_contact_guesses_and_chooses_no_response(source: Contents) -> None:
    page = first_contact(source, clear=False)
    request = page.understood()
    assert request.models == ()
    assert request.problems == ()
    assert page.grid.data_sheets == ("Refits",)
    assert list(page.grid.model_columns) == ["A", "B", "C"]
    labels = [row.label for row in page.grid.column_rows]
    assert labels == ["job", "hours", "length (m)", "hull", "coats", "crew", "month"]
    entries = {(row.label, page.grid.cells.get((row.row, 4))) for row in page.grid.column_rows}
    assert ("job", "label") in entries
    assert ("month", "order") in entries
    assert not any(value == "response" for value in page.grid.cells.values())


def test_facts_beside_the_columns(source: Contents) -> None:
    grid = first_contact(source).grid
    facts = {row.label: [grid.cells.get((row.row, column)) for column in (1, 2, 3)] for row in grid.column_rows}
    assert facts["hull"] == ["text", "30/30", "glass fibre, oak, steel"]
    assert facts["job"] == ["text", "30/30", "30 different"]
    assert facts["coats"] == ["number", "30/30", "1 to 4"]
    assert facts["month"] == ["date", "30/30", "2023-01-01 to 2025-06-01"]


def test_a_workbook_without_a_table_says_so() -> None:
    empty = contents(workbook({"Notes": [["hello"]], "Other": []}))
    request = first_contact(empty).understood()
    assert [problem.key for problem in request.problems] == ["no-data-sheet"]
    assert request.grid.column_header is not None


def test_all_settings_are_there(source: Contents) -> None:
    labels = [row.label for row in first_contact(source).grid.setting_rows]
    assert labels == [
        "interval level", "standard errors", "lags", "intercept", "use rows where", "is", "value", "and where", "is",
        "value", "fit by", "search", "folds", "estimate back on",
    ]  # fmt: skip


# --- by labels, not by positions ---------------------------------------------------------------


@pytest.mark.parametrize(("down", "right"), [(0, 0), (5, 0), (0, 3), (7, 2)])
def test_the_grid_may_stand_anywhere(source: Contents, down: int, right: int) -> None:
    page = typed(source, GOOD | {"interval level": "90%"})
    moved = Typed(source, read(shifted(page.cells, down, right)), shifted(page.cells, down, right))
    model = moved.model()
    assert model.spec == page.model().spec
    assert model.spec is not None
    assert model.spec.level == 0.9


@pytest.mark.parametrize("gone", [1, 2, 3])
def test_a_column_of_facts_may_be_deleted(source: Contents, gone: int) -> None:
    page = typed(source, GOOD)
    cells = {(row, at - (at > gone)): value for (row, at), value in page.cells.items() if at != gone}
    if gone == 1:  # with it went the sheet's name
        cells[(page.row("data sheet"), 1)] = "Refits"
    other = Typed(source, read(cells), cells)
    assert other.model().spec == page.model().spec
    assert other.understood().grid.column_rows == page.understood().grid.column_rows


def test_columns_may_be_inserted(source: Contents) -> None:
    page = typed(source, GOOD)
    cells = {(row, at + (at > 2)): value for (row, at), value in page.cells.items()}
    cells[(page.row("hull"), 3)] = "my own remark"
    other = Typed(source, read(cells), cells)
    assert other.model().spec == page.model().spec
    assert other.understood().grid.cells == cells


def test_rows_may_be_inserted_and_notes_written_beside(source: Contents) -> None:
    page = typed(source, GOOD)
    row = page.row("hull")
    cells = {(at + 2 if at >= row else at, column): value for (at, column), value in page.cells.items()}
    cells |= {(row, 0): "these are measured in the yard:", (row, 9): "ask Bob", (page.row("column"), 9): "my notes"}
    moved = Typed(source, read(cells), cells)
    assert moved.model().spec == page.model().spec
    arranged = moved.understood().grid.cells
    assert all(arranged[at] == value for at, value in cells.items())


@pytest.mark.parametrize("name", ["column", "crossed", "setting", "status", "kind", "with", "message", "data sheet"])
def test_data_columns_may_bear_the_grids_own_words(name: str) -> None:
    rows = refits()
    rows[0][4] = name
    page = typed(contents(workbook({"Refits": rows})), {"hours": "response", "length (m)": "predictor"})
    row = next(one.row for one in page.grid.column_rows if one.label == name)
    page.cells[(row, page.column("A"))] = "predictor"
    spec = page.model().spec
    assert spec is not None
    assert [term.column for term in spec.terms] == ["length (m)", name]
    assert page.understood().grid.cells == page.cells


NAMES = [
    'la "longueur"',
    "x[1]",
    "a!b",
    "\u0637\u0648\u0644",
    "\u9577\u3055 (m)",
    "it's",
    "a, b",
    "100%",
    "Sheet!x",
]


@pytest.mark.parametrize("name", NAMES)
def test_names_of_any_script_and_sign(name: str) -> None:
    rows = refits()
    rows[0][2] = name
    page = typed(contents(workbook({"Refits": rows})), {"hours": "response", name: "log predictor"})
    spec = page.model().spec
    assert spec is not None
    assert spec.terms[0].column == name


def test_several_data_sheets_and_shared_names() -> None:
    other = [["hours", "price"], *[[at, at * 3.0 + at % 2] for at in range(9)]]
    source = contents(workbook({"Refits": refits(), "Prices": other}))
    page = first_contact(source, "Refits")
    page.cells[(0, 2)] = "Prices"
    request = page.understood()
    labels = [row.label for row in request.grid.column_rows]
    assert labels[1] == "Refits!hours"
    assert labels[-2:] == ["Prices!hours", "price"]
    page = Typed(source, request.grid, dict(request.grid.cells))
    page.put("Prices!hours", "A", "predictor")
    page.put("price", "A", "response")
    page.put("Refits!hours", "B", "response")
    page.put("crew", "B", "predictor")
    assert [(model.sheet, model.spec is not None) for model in page.understood().models] == [
        ("Prices", True),
        ("Refits", True),
    ]


# --- what changes in the data ------------------------------------------------------------------


def with_columns(names: list[str]) -> Contents:
    rows = refits()
    order = [rows[0].index(name) if name in rows[0] else 5 for name in names]
    made = [[row[at] for at in order] for row in rows]
    made[0] = list(names)
    return contents(workbook({"Refits": made}))


def test_a_new_column_is_added_at_the_end_and_nothing_else_moves() -> None:
    before = typed(with_columns(["job", "hours", "hull", "crew"]), {"hours": "response", "crew": "predictor"})
    after = Typed(with_columns(["job", "hours", "coats", "hull", "crew"]), before.grid, before.cells)
    labels = [row.label for row in after.understood().grid.column_rows]
    assert labels == ["job", "hours", "hull", "crew", "coats"]
    assert after.model().spec == before.model().spec
    assert after.understood().grid.crossed_header == before.row("crossed") + 1


def test_a_vanished_column_is_kept_and_marked() -> None:
    before = typed(with_columns(["job", "hours", "hull", "crew"]), {"hours": "response", "crew": "predictor"})
    after = Typed(with_columns(["job", "hours", "crew"]), before.grid, before.cells)
    grid = after.understood().grid
    row = next(row for row in grid.column_rows if row.label == "hull")
    assert [grid.cells.get((row.row, column)) for column in (1, 2, 3)] == [
        "not found",
        "30/30",
        "glass fibre, oak, steel",
    ]
    assert after.model().spec == before.model().spec


def test_a_renamed_column_is_asked_about_while_it_is_used() -> None:
    before = typed(with_columns(["job", "hours", "hull", "crew"]), {"hours": "response", "hull": "category"})
    renamed = contents(
        workbook({"Refits": [["job", "hours", "Rumpf", "crew"], *[[r[0], r[1], r[3], r[5]] for r in refits()[1:]]]})
    )
    after = Typed(renamed, before.grid, before.cells)
    model = after.model()
    assert model.spec is None
    assert [problem.key for problem in model.problems] == ["column-renamed"]
    assert "Rumpf" in model.problems[0].text
    assert [row.label for row in after.understood().grid.column_rows] == ["job", "hours", "hull", "crew"]
    after.cells[(after.row("hull"), 0)] = "Rumpf"  # the answer: yes
    assert after.model().spec is not None


def test_a_renamed_column_of_which_nothing_is_asked_takes_its_new_name() -> None:
    before = typed(with_columns(["job", "hours", "hull", "crew"]), {"hours": "response", "crew": "predictor"})
    renamed = contents(
        workbook({"Refits": [["job", "hours", "Rumpf", "crew"], *[[r[0], r[1], r[3], r[5]] for r in refits()[1:]]]})
    )
    after = Typed(renamed, before.grid, before.cells)
    assert [row.label for row in after.understood().grid.column_rows] == ["job", "hours", "Rumpf", "crew"]


def test_another_data_sheet_takes_the_place_of_one_not_used() -> None:
    source = contents(
        workbook({"Refits": refits(), "Prices": [["size", "price"], *[[at, at * 3.0] for at in range(9)]]})
    )
    page = first_contact(source, "Refits", clear=False)
    page.cells[(0, 1)] = "Prices"
    assert [row.label for row in page.understood().grid.column_rows] == ["size", "price"]


def test_the_old_sheets_rows_stay_where_something_was_asked() -> None:
    source = contents(
        workbook({"Refits": refits(), "Prices": [["size", "price"], *[[at, at * 3.0] for at in range(9)]]})
    )
    page = first_contact(source, "Refits")
    page.put("hours", "A", "response")
    page.cells[(0, 1)] = "Prices"
    labels = [row.label for row in page.understood().grid.column_rows]
    assert "hours" in labels
    assert {"size", "price"} <= set(labels)


@pytest.mark.parametrize("columns", [3, 40, 300])
def test_many_columns(columns: int) -> None:
    rows = [[f"x{at}" for at in range(columns)], *[[at * row for at in range(columns)] for row in range(1, 6)]]
    page = typed(contents(workbook({"Wide": rows})), {"x0": "response", f"x{columns - 1}": "predictor"})
    assert len(page.grid.column_rows) == columns
    assert page.model().entries[f"x{columns - 1}"] == page.cell(f"x{columns - 1}", "A")


# --- the user's things stay --------------------------------------------------------------------


def test_blocks_and_settings_that_were_deleted_come_back(source: Contents) -> None:
    page = typed(source, GOOD)
    gone = {page.row("crossed"), page.row("folds"), page.row("status")}
    cells = {at: value for at, value in page.cells.items() if at[0] not in gone}
    grid = Typed(source, read(cells), cells).understood().grid
    assert grid.crossed_header is not None
    assert grid.status_header is not None
    assert "folds" in [row.label for row in grid.setting_rows]
    assert grid.crossed_header < (grid.setting_header or 0) < grid.status_header


def test_a_handwritten_request_is_recognised(source: Contents) -> None:
    cells: Cells = {(0, 0): "data sheet", (0, 1): "Refits", (2, 0): "column", (2, 1): "A", (3, 0): "hours",
                    (3, 1): "response", (4, 0): "crew", (4, 1): "predictor"}  # fmt: skip
    raw = RawSheet("fit request", cells, {})
    assert grids.looks_like_request(raw)
    assert Typed(source, read(cells), cells).model().spec is not None


@pytest.mark.parametrize("cells", [{}, {(0, 0): "column"}, {(0, 0): "a", (0, 1): "kind"}, {(3, 0): "status"}])
def test_other_sheets_are_no_request(cells: Cells) -> None:
    assert not grids.looks_like_request(RawSheet("fit request", cells, {}))


NOTE = st.text(st.characters(categories=["L", "N", "P"]), min_size=1, max_size=12)


@settings(max_examples=60, deadline=None)
@given(st.dictionaries(st.tuples(st.integers(0, 60), st.integers(8, 12)), NOTE, max_size=8))
def test_notes_beside_the_grid_survive_where_they_stand(notes: dict[tuple[int, int], str]) -> None:
    source = contents_once()
    page = typed(source, GOOD)
    notes = {at: text for at, text in notes.items() if at[0] != page.row("column")}  # there it would name a model
    cells = page.cells | dict(notes)
    arranged = Typed(source, read(cells), cells).understood().grid.cells
    assert all(arranged[at] == text for at, text in notes.items())


_HELD: list[Contents] = []


def contents_once() -> Contents:
    if not _HELD:
        _HELD.append(contents(workbook({"Refits": refits()})))
    return _HELD[0]
