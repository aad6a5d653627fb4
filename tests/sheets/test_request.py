"""`fit request` as laid out: nothing of the user's is lost, answers stand under their model and lead to their cell."""

from __future__ import annotations

import io
import re
from collections.abc import Mapping
from datetime import datetime
from typing import cast

import openpyxl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bridge.messages import Severity, say
from bridge.package.graft import graft
from bridge.package.package import Package
from bridge.page.cells import Formula, address
from bridge.page.sheet import Sheet
from bridge.regression.results import ModelResult
from bridge.sheets import request, style
from bridge.sheets.book import Book, ModelSheet
from bridge.workbook import grid as grids
from bridge.workbook import reading, selection, understand
from bridge.workbook.contents import Contents, RawSheet
from bridge.workbook.digest import digest
from bridge.workbook.request import Request, Scalar
from tests.office import convert, needs_office
from tests.workbook.support import Typed, contents, first_contact, refits, saved, typed, workbook

GOOD: dict[str, Scalar] = {"hours": "response", "length (m)": "log predictor", "hull": "category", "job": "label"}
WHEN = datetime(2026, 12, 1, 10, 31)


def book(source: Contents, asked: Request, titles: Mapping[str, str] | None = None) -> Book:
    """What the story would gather; a model without a refusal stands for a fitted one."""
    models = []
    for model in asked.models:
        table = source.tables.get(model.sheet or "")
        if model.spec is None or table is None:
            models.append(ModelSheet(model, table, None, None, model.problems))
            continue
        taken, _, problems = selection.take(table, model)
        told = (*model.problems, *problems)
        refused = any(problem.severity is Severity.REFUSAL for problem in told)
        result = None if refused else cast(ModelResult, object())
        models.append(ModelSheet(model, table, taken, result, told))
    return Book(WHEN, asked, source.tables, tuple(models), (), (), (), titles or {})


def laid_out(page: Typed, titles: Mapping[str, str] | None = None) -> Sheet:
    return request.lay_out(book(page.source, page.understood(), titles))


def raw(sheet: Sheet) -> RawSheet:
    """The laid-out sheet as the next save would be read."""
    values: dict[tuple[int, int], Scalar] = {}
    formulas = {}
    for at, cell in sheet.cells.items():
        value = cell.value
        if isinstance(value, Formula):
            formulas[at], value = value.text, value.value
        if value is not None and value != "":
            values[at] = value
    return RawSheet("fit request", values, formulas)


def again(page: Typed, sheet: Sheet) -> Typed:
    """The page as the next save finds it."""
    found = raw(sheet)
    asked = understand.understand(grids.read(found), page.source.tables, page.source.sheet_names)
    return Typed(page.source, asked.grid, dict(found.values))


def shown(sheet: Sheet, row: int, column: int) -> str:
    cell = sheet.cells.get((row, column))
    value = cell.value if cell is not None else None
    return str(value.value if isinstance(value, Formula) else value or "")


def answers(sheet: Sheet, column: int) -> list[str]:
    start = max(row for (row, at), cell in sheet.cells.items() if at == 0 and cell.value == "status")
    rows = sorted({row for row, _ in sheet.cells if row > start})
    return [text for row in rows if (text := shown(sheet, row, column))]


@pytest.fixture(scope="module")
def source() -> Contents:
    return contents(workbook({"Refits": refits(40)}))


# --- first contact -----------------------------------------------------------------------------


def test_first_contact(source: Contents) -> None:
    sheet = laid_out(first_contact(source, clear=False))
    assert shown(sheet, 0, 0) == "What should be fitted?"
    assert sheet.freeze == (6, 4)
    assert sheet.tab_color == style.TAB_FILL_IN
    assert sheet.cells[(7, 4)].format.fill == style.CREAM
    assert [shown(sheet, 5, column) for column in range(7)] == ["column", "kind", "filled", "range", "A", "B", "C"]
    assert answers(sheet, 4) == []


def test_spare_columns_wait_for_further_models(source: Contents) -> None:
    page = first_contact(source)
    sheet = laid_out(page)
    assert sheet.cells[(7, 7)].format.fill == style.CREAM
    page = again(page, sheet)
    page.cells[(5, 8)] = "extra"
    page.grid = page.understood().grid
    page.put("hours", "extra", "response")
    page.put("crew", "extra", "predictor")
    assert page.model("extra").spec is not None
    assert shown(laid_out(page), page.row("setting"), 8) == "extra"


# --- nothing is lost ---------------------------------------------------------------------------


def test_laying_out_what_was_laid_out_changes_nothing(source: Contents) -> None:
    page = typed(source, GOOD | {"interval level": 0.9, "coats": "predictr"})
    first = laid_out(page)
    second = laid_out(again(page, first))
    assert raw(second) == raw(first)
    assert second == first


NOTE = st.one_of(st.text(st.characters(categories=["L", "N", "P"]), min_size=1, max_size=15), st.integers(0, 99))


@settings(max_examples=40, deadline=None)
@given(st.dictionaries(st.tuples(st.integers(0, 70), st.integers(9, 13)), NOTE, max_size=6))
def test_notes_survive_any_number_of_saves(notes: dict[tuple[int, int], str | int]) -> None:
    held = _once()
    page = typed(held, GOOD)
    notes = {at: note for at, note in notes.items() if at[0] != page.row("column")}  # there it would name a model
    page.cells |= notes
    for _ in range(3):
        sheet = laid_out(page)
        assert all(shown(sheet, *at) == str(note) for at, note in notes.items() if note != 0)
        page = again(page, sheet)


def test_notes_below_the_answers_move_down_when_answers_need_room(source: Contents) -> None:
    page = typed(source, GOOD)
    page = again(page, laid_out(page))
    last = max(row for row, _ in page.cells)
    page.cells[(last + 1, 0)] = "my own note"
    page.put("crew", "A", "predictr")
    page.put("coats", "A", "banana")
    page.put("month", "A", "log")
    sheet = laid_out(page)
    assert len(answers(sheet, page.column("A"))) == 3
    assert [shown(sheet, row, 0) for row in range(last, last + 4)].count("my own note") == 1


def test_the_users_formulas_and_dates_stay(source: Contents) -> None:
    page = typed(source, GOOD)
    cells = page.cells | {(2, 9): 7.0, (3, 9): 45322.0}
    found = RawSheet("fit request", cells, {(2, 9): "SUM(J5:J9)"}, frozenset({(3, 9)}))
    asked = understand.understand(grids.read(found), source.tables, source.sheet_names)
    sheet = request.lay_out(book(source, asked))
    assert sheet.cells[(2, 9)].value == Formula("SUM(J5:J9)", 7.0)
    assert "yyyy" in sheet.cells[(3, 9)].format.number_format


def test_percentages_look_like_percentages(source: Contents) -> None:
    page = typed(source, GOOD | {"interval level": 0.9})
    sheet = laid_out(page)
    assert sheet.cells[(page.row("interval level"), page.column("A"))].format.number_format == "0%"


# --- answers -----------------------------------------------------------------------------------


def test_a_fitted_model_says_when_and_from_how_many_rows(source: Contents) -> None:
    assert answers(laid_out(typed(source, GOOD)), 4) == ["Fitted 1 Dec 2026 10:31 from 40 of 40 rows."]


def test_a_refused_model_says_why_and_each_answer_leads_to_its_cell(source: Contents) -> None:
    page = typed(source, GOOD | {"crew": "predictr", "coats": "banana"})
    sheet = laid_out(page)
    told = answers(sheet, 4)
    assert told[0].startswith('Not fitted. "banana" in E')
    assert told[1].startswith('"predictr" in E')
    formulas = [cell.value.text for cell in sheet.cells.values() if isinstance(cell.value, Formula)]
    assert formulas[0].startswith(f"HYPERLINK(\"#'fit request'!{page.cell('coats', 'A')}\"")
    assert formulas[1].startswith(f"HYPERLINK(\"#'fit request'!{page.cell('crew', 'A')}\"")


def test_links_follow_a_renamed_tab(source: Contents) -> None:
    page = typed(source, GOOD | {"crew": "predictr"})
    sheet = laid_out(page, {"fit request": "Anfrage '26"})
    formula = next(cell.value.text for cell in sheet.cells.values() if isinstance(cell.value, Formula))
    assert formula.startswith("HYPERLINK(\"#'Anfrage ''26'!E")
    assert sheet.title == "Anfrage '26"


def test_warnings_and_refusals_are_told_apart_in_words() -> None:
    rows = refits(40)
    rows[4][3] = 4
    held = contents(workbook({"Refits": rows}))
    told = answers(laid_out(typed(held, GOOD)), 4)
    assert told[0].startswith("Fitted 1 Dec 2026 10:31 from 40 of 40 rows.\nPlease check: hull: cell Refits!D5")


def test_a_mended_request_clears_its_message(source: Contents) -> None:
    page = typed(source, GOOD | {"crew": "predictr", "coats": "banana"})
    page = again(page, laid_out(page))
    page.put("crew", "A", "predictor")
    page.put("coats", "A", "predictor")
    sheet = laid_out(page)
    assert answers(sheet, 4) == ["Fitted 1 Dec 2026 10:31 from 40 of 40 rows."]
    assert not any("banana" in shown(sheet, *at) for at in sheet.cells)


def test_the_answer_goes_with_its_model(source: Contents) -> None:
    page = typed(source, GOOD)
    page.put("hours", "B", "response")
    page.put("crew", "B", "predictor")
    page = again(page, laid_out(page))
    for (row, column), _ in list(page.cells.items()):
        if column == page.column("B"):
            del page.cells[(row, column)]
    sheet = laid_out(page)
    assert answers(sheet, 5) == []


def test_many_problems_are_counted_and_the_rest_named() -> None:
    rows = [[f"x{at}" for at in range(20)], *[[at * row % 11 for at in range(20)] for row in range(1, 30)]]
    held = contents(workbook({"Data": rows}))
    page = typed(held, {f"x{at}": "banana" for at in range(20)})
    told = answers(laid_out(page), 4)
    assert len(told) == 8
    assert told[-1] == 'And 13 more: see "fit diagnostics".'


def test_what_concerns_the_workbook_stands_apart(source: Contents) -> None:
    asked = typed(source, GOOD).understood()
    told = (say("job-broke", kind="a crash"),)
    made = book(source, asked)
    sheet = request.lay_out(Book(WHEN, asked, source.tables, made.models, (), (), (), {}, told))
    assert any("ended unexpectedly" in text for text in answers(sheet, 1))
    assert answers(sheet, 4)[0].startswith("Fitted")


@given(st.text(max_size=600))
def test_any_text_becomes_a_formula_that_holds_it(text: str) -> None:
    """No literal is longer than the 255 characters a formula may have, and the parts give the text again."""
    one = r'"((?:[^"]|"")*)"'
    made = request._literal(text)
    assert re.fullmatch(f"{one}(?:&{one})*", made)
    parts = [match[1] for match in re.finditer(f"{one}(?:&|$)", made)]
    assert "".join(part.replace('""', '"') for part in parts) == text
    assert all(len(part) <= 255 for part in parts)


# --- drop-downs --------------------------------------------------------------------------------


def offered(sheet: Sheet, at: tuple[int, int]) -> tuple[str, ...] | str:
    return next(
        (one.choices for one in sheet.drop_downs
         if one.first[0] <= at[0] <= one.last[0] and one.first[1] <= at[1] <= one.last[1]), ())  # fmt: skip


def test_drop_downs_fit_the_column(source: Contents) -> None:
    page = first_contact(source)
    sheet = laid_out(page)
    assert "log response" in offered(sheet, (page.row("hours"), 4))
    assert offered(sheet, (page.row("hull"), 6)) == ("category", "candidate category", "group", "label")
    assert offered(sheet, (page.row("month"), 7))[0] == "order"
    assert offered(sheet, (page.row("standard errors"), 4)) == ("ordinary", "uneven spread", "grouped", "serial")
    first, last = page.row("job") + 1, page.row("month") + 1
    assert offered(sheet, (page.row("use rows where"), 4)) == f"$A${first}:$A${last}"
    assert offered(sheet, (page.row("crossed") + 1, 0)) == f"$A${first}:$A${last}"
    assert offered(sheet, (page.row("crossed") + 1, 5)) == ("yes",)


def test_no_log_is_offered_below_zero() -> None:
    rows = [["y", "x"], *[[at, at - 4] for at in range(1, 12)]]
    page = first_contact(contents(workbook({"Data": rows})))
    sheet = laid_out(page)
    assert "log predictor" not in offered(sheet, (page.row("x"), 4))
    assert "log predictor" in offered(sheet, (page.row("y"), 4))


INCOMPLETE = {"no-response", "no-predictor", "candidates-without-search", "date-as-number"}


def test_every_entry_offered_is_understood(source: Contents) -> None:
    page = first_contact(source)
    for one in laid_out(page).drop_downs:
        assert not isinstance(one.choices, tuple) or len(",".join(one.choices)) <= 255
        for row in range(one.first[0], one.last[0] + 1):
            label = str(page.cells.get((row, 0), ""))
            if row in {each.row for each in page.grid.column_rows} and isinstance(one.choices, tuple):
                for choice in one.choices:
                    fresh = typed(source, {label: choice})
                    keys = {problem.key for model in fresh.understood().models for problem in model.problems}
                    assert keys <= {"no-response", "no-predictor", "candidates-without-search", "date-as-number"}, (
                        label,
                        choice,
                    )


def test_three_hundred_columns() -> None:
    rows = [[f"measure {at}" for at in range(300)], *[[at * row % 17 for at in range(300)] for row in range(1, 9)]]
    page = typed(contents(workbook({"Wide": rows})), {"measure 0": "response", "measure 299": "predictor"})
    sheet = laid_out(page)
    assert len(sheet.drop_downs) < 60
    assert sheet.print_titles is not None
    assert sheet.fit_height == 0


def test_a_long_name_is_shown_whole() -> None:
    rows = refits()
    rows[0][1] = "hours in the yard, without the days on which it rained or nobody could be found"
    sheet = laid_out(first_contact(contents(workbook({"Refits": rows}))))
    row = next(
        row for (row, column), cell in sheet.cells.items() if column == 0 and str(cell.value).startswith("hours in")
    )
    assert sheet.cells[(row, 0)].format.wrap
    assert sheet.heights[row] > 25


# --- the seal's cells --------------------------------------------------------------------------


def test_entry_cells_are_where_they_are_said_to_be(source: Contents) -> None:
    page = typed(source, GOOD | {"interval level": 0.9})
    page.cross("length (m)", "hull", "A")
    made = book(source, page.understood())
    page = Typed(source, made.request.grid, dict(made.request.grid.cells))
    sheet = request.lay_out(made)
    cells = dict(request.entry_cells(made)["A"])
    by_address = {address(*at): cell.value for at, cell in sheet.cells.items()}
    assert all((by_address.get(at) or "") == value for at, value in cells.items())
    assert {"response", "log predictor", "category", "label", 0.9, "yes", "A", "Refits", ""} <= set(cells.values())
    assert cells[page.cell("interval level", "A")] == 0.9


# --- in a real package and a real program ------------------------------------------------------


def in_package(page: Typed, data: bytes) -> bytes:
    return graft(Package.open(data), (laid_out(page),), (), {})


def test_grafted_and_read_back_the_same(source: Contents) -> None:
    data = workbook({"Refits": refits(40)})
    page = typed(source, GOOD | {"crew": "predictr"})
    sheet = laid_out(page)
    read = contents(in_package(page, data)).own["fit request"]
    expected = raw(sheet)
    assert read.values == {
        at: float(value) if isinstance(value, int) else value for at, value in expected.values.items()
    }
    assert read.formulas == expected.formulas


@needs_office
def test_a_spreadsheet_program_shows_and_keeps_it(source: Contents, tmp_path) -> None:  # type: ignore[no-untyped-def]
    data = workbook({"Refits": refits(40)})
    page = typed(source, GOOD | {"crew": "predictr", "interval level": 0.9})
    path = tmp_path / "book.xlsx"
    path.write_bytes(in_package(page, data))
    resaved = convert(path, to="xlsx", recalculate=True).read_bytes()
    before, after = contents(path.read_bytes()), contents(resaved)
    asked = [
        understand.understand(grids.read(one.own["fit request"]), one.tables, one.sheet_names)
        for one in (before, after)
    ]
    assert asked[1].models == asked[0].models
    status = asked[0].grid.status_header or 0
    texts = [
        {at: value for at, value in one.own["fit request"].values.items() if at[0] > status} for one in (before, after)
    ]
    assert texts[1] == texts[0]


def test_an_empty_request_in_a_workbook_without_data() -> None:
    held = openpyxl.Workbook()
    held.create_sheet("fit request")
    source = contents(saved(held))
    sheet = laid_out(first_contact(source))
    assert any("No table was found" in text for text in answers(sheet, 1))
    assert io.BytesIO(saved(held))
    assert reading.role(Package.open(saved(held)).sheets[1]) == "fit request"


_HELD: list[Contents] = []


def _once() -> Contents:
    if not _HELD:
        _HELD.append(contents(workbook({"Refits": refits(40)})))
    return _HELD[0]


def test_the_digest_is_that_of_the_next_read(source: Contents) -> None:
    """An unchanged workbook is known by this: laid out and read again, the request says the same."""
    for page in (first_contact(source, clear=False), typed(source, GOOD), typed(source, GOOD | {"crew": "banana"})):
        before = page.understood()
        after = again(page, laid_out(page)).understood()
        assert digest("1", after, source.tables, ()) == digest("1", before, source.tables, ())
