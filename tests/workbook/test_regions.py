"""Where the table is on a sheet: titles above, notes below, blocks beside, merged and two-line headers, units."""

from __future__ import annotations

import io

import openpyxl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bridge.workbook import headers
from bridge.workbook.tables import Kind, Table
from tests.workbook.support import contents, saved, workbook


def found(rows: list[list[object]], merges: tuple[str, ...] = ()) -> Table | None:
    book = openpyxl.load_workbook(io.BytesIO(workbook({"Data": rows})))
    for cells in merges:
        book["Data"].merge_cells(cells)
    return contents(saved(book)).tables.get("Data")


def names(table: Table | None) -> list[str]:
    assert table is not None
    return [column.name for column in table.columns]


BODY: list[list[object]] = [[f"job {at}", at * 1.5, at, "oak" if at % 2 else "steel"] for at in range(1, 9)]
HEAD: list[object] = ["job", "hours", "length", "hull"]


@pytest.mark.parametrize(
    ("above", "header_row"),
    [
        ([], 1),
        ([["Refit jobs 2023 to 2026"]], 2),
        ([["Refit jobs"], [], ["from the yard book"]], 4),
        ([["Client", "Foo"], ["Year", 2024], []], 4),
        ([["Client", "Foo"], ["Place", "Harbour"]], 3),
        ([[None, None, None, "printed"]], 2),
        ([[2024]], 2),
    ],
)
def test_lines_above_the_header(above: list[list[object]], header_row: int) -> None:
    table = found([*above, HEAD, *BODY])
    assert names(table) == HEAD
    assert table is not None
    assert table.header_row == header_row
    assert table.rows.tolist() == list(range(header_row + 1, header_row + 9))


def test_a_title_merged_across_the_table() -> None:
    assert names(found([["Refit jobs", None, None, None], HEAD, *BODY], ("A1:D1",))) == HEAD


def test_headings_over_groups_of_columns() -> None:
    top = ["", "work", None, "boat"]
    table = found([top, ["job", "low", "high", "low"], *BODY], ("B1:C1",))
    assert names(table) == ["job", "work low", "high", "low"]


def test_a_header_merged_downwards() -> None:
    table = found([["job", "time", None, "hull"], [None, "hours", "days", None], *BODY], ("A1:A2", "B1:C1", "D1:D2"))
    assert names(table) == ["job", "hours", "days", "hull"]


def test_one_header_merged_over_two_columns() -> None:
    assert names(found([["job", "hours", None, "hull"], *BODY], ("B1:C1",))) == ["job", "hours", "hours (2)", "hull"]


def test_a_line_of_units_is_no_case() -> None:
    table = found([HEAD, [None, "(h)", "m", "-"], *BODY])
    assert table is not None
    assert [column.unit for column in table.columns] == [None, "h", "m", None]
    assert table.rows[0] == 3


def test_missing_values_in_the_first_row_are_no_units() -> None:
    table = found([HEAD, ["job 0", "n/a", "n/a", "oak"], *BODY])
    assert table is not None
    assert table.rows[0] == 2


def test_years_as_headers() -> None:
    rows = [["town", 2019, 2020, 2021], *[[f"town {at}", at, at + 1, at + 2] for at in range(6)]]
    assert names(found(rows)) == ["town", "2019", "2020", "2021"]


def test_no_header_no_table() -> None:
    assert found([[1, 2], [3, 4], [5, 6]]) is None
    assert found([["x", "y"]]) is None
    assert found([["only a note"]]) is None
    assert found([]) is None


def test_texts_alone_are_a_table() -> None:
    table = found([["town", "river"], ["Ulm", "Danube"], ["Bonn", "Rhine"]])
    assert names(table) == ["town", "river"]
    assert table is not None
    assert {column.kind for column in table.columns} == {Kind.TEXT}


def test_a_block_beside_the_data_is_left_alone() -> None:
    rows = [
        [*HEAD, None, "hull", "price"],
        *[[*line, None, *([line[3], 10] if at < 2 else [])] for at, line in enumerate(BODY)],
    ]
    assert names(found(rows)) == HEAD


def test_an_empty_column_within_the_table_is_stepped_over() -> None:
    rows = [["job", "hours", None, "length", "hull"], *[[a, b, None, c, d] for a, b, c, d in BODY]]
    table = found(rows)
    assert names(table) == HEAD
    assert table is not None
    assert [column.index for column in table.columns] == [0, 1, 3, 4]


def test_empty_rows_are_no_cases_and_remarks_below_neither() -> None:
    rows = [HEAD, *BODY[:4], [], *BODY[4:], [], ["Hours include travel."], ["Source: the yard book."]]
    table = found(rows)
    assert table is not None
    assert table.rows.tolist() == [2, 3, 4, 5, 7, 8, 9, 10]


def test_a_header_that_is_a_formula_without_a_value() -> None:
    assert names(found([["job", "=1+1", "length", "hull"], *BODY])) == ["job", "column B", "length", "hull"]


def test_a_column_without_header() -> None:
    assert names(found([["job", "hours", None, "hull"], *BODY])) == ["job", "hours", "column C", "hull"]


# --- names and units ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("header", "unit"),
    [
        ("length (m)", "m"), ("length [m]", "m"), ("speed (km/h) ", "km/h"), ("x (a) (b)", "b"), ("hours", None),
        ("(m)", None), ("f(x) value", None), ("price ()", None), ("\u9577\u3055\uff08m\uff09", "m"),
    ],
)  # fmt: skip
def test_units(header: str, unit: str | None) -> None:
    assert headers.unit(headers.clean(header)) == unit


HEADERS = st.lists(st.one_of(st.none(), st.text(max_size=12), st.sampled_from(["a", "A", " a ", "a (2)", "column B"])),
                   min_size=1, max_size=12)  # fmt: skip


@given(HEADERS)
def test_names_are_unique_without_case_and_clean(texts: list[str | None]) -> None:
    given_names = headers.names(texts, range(len(texts)))
    assert len({name.casefold() for name in given_names}) == len(texts)
    assert all(name and name == headers.clean(name) for name in given_names)


@settings(max_examples=40, deadline=None)
@given(st.lists(st.lists(st.one_of(st.none(), st.floats(allow_nan=False, allow_infinity=False, width=32), st.booleans(),
                                   st.sampled_from(["a", "oak", "(m)", "x", " ", "2024"]), st.integers(1990, 2030)),
                         max_size=6), max_size=9))  # fmt: skip
def test_any_block_of_cells_is_read(rows: list[list[object]]) -> None:
    table = found(rows)
    if table is not None:
        assert len(table.rows)
        assert all(len(column.state) == len(column.numbers) == len(table.rows) for column in table.columns)
        assert (table.rows > table.header_row).all()
