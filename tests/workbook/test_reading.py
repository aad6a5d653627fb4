"""Cells read out of real packages: states, addresses, dates, what the fast cell reader cannot tell by itself."""

from __future__ import annotations

import io
import zipfile
from datetime import date, datetime

import numpy as np
import openpyxl
import pytest
import xlsxwriter
from openpyxl.worksheet.table import Table as ExcelTable

from bridge.messages import FileRefused
from bridge.package.package import Package
from bridge.workbook import reading
from bridge.workbook.tables import Kind, State, Table
from tests.workbook.support import contents, refits, saved, workbook


def table(data: bytes, sheet: str = "Data") -> Table:
    return contents(data).tables[sheet]


def column(data: bytes, name: str, sheet: str = "Data"):  # type: ignore[no-untyped-def]
    found = table(data, sheet).column(name)
    assert found is not None
    return found


def written(build, **options) -> bytes:  # type: ignore[no-untyped-def]
    """A workbook made by a second writer, which stores shared texts and formula values."""
    held = io.BytesIO()
    book = xlsxwriter.Workbook(held, {"in_memory": True, **options})
    page = book.add_worksheet("Data")
    build(book, page)
    if "fit request" not in book.sheetnames:
        book.add_worksheet("fit request")
    book.close()
    return held.getvalue()


def edited(data: bytes, part: str, old: str, new: str) -> bytes:
    """The package with a text in one part replaced."""
    held = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(data)) as before, zipfile.ZipFile(held, "w", zipfile.ZIP_DEFLATED) as after:
        for name in before.namelist():
            content = before.read(name)
            if name == part:
                assert old.encode() in content, content[:2000]
                content = content.replace(old.encode(), new.encode())
            after.writestr(name, content)
    return held.getvalue()


# --- states and addresses ----------------------------------------------------------------------


def states(book, page) -> None:  # type: ignore[no-untyped-def]
    page.write_row(0, 0, ["a", "b"])
    for row in range(1, 12):
        page.write_number(row, 0, row + 0.5)
    page.write_formula(1, 1, "=1/0", None, "#DIV/0!")
    page.write_formula(2, 1, '=""', None, "")
    page.write_formula(3, 1, "=1+1", None, 2)
    page.write_boolean(4, 1, True)
    page.write_string(5, 1, "")
    page.write_string(6, 1, "   ")
    page.write_string(7, 1, "oak ")
    page.write_blank(8, 1, None, book.add_format({"bold": True}))
    page.write_formula(9, 1, "=NA()", None, "#N/A")
    page.write_number(10, 1, 1e-300)
    page.write_formula(11, 1, "=A12", None, 7)


def test_every_state_is_told() -> None:
    data = edited(written(states), "xl/worksheets/sheet1.xml", "<f>A12</f><v>7</v>", "<f>A12</f>")
    data = edited(data, "xl/worksheets/sheet1.xml", '<c r="B3"><f>', '<c r="B3" t="str"><f>')  # as programs store ""
    found = column(data, "b")
    expected = [
        State.ERROR, State.BLANK, State.NUMBER, State.YES_NO, State.BLANK, State.BLANK, State.TEXT, State.BLANK,
        State.ERROR, State.NUMBER, State.NO_VALUE,
    ]  # fmt: skip
    assert [State(code) for code in found.state.tolist()] == expected
    assert found.texts == (None, "", None, None, "", "", "oak ", None, None, None, None)
    assert found.filled == 10  # all but the blank cell
    np.testing.assert_array_equal(found.numbers[[2, 3, 9]], [2.0, 1.0, 1e-300])
    assert np.isnan(found.numbers[[0, 1, 4, 5, 6, 7, 8, 10]]).all()
    assert found.index == 1
    np.testing.assert_array_equal(table(data).rows, np.arange(2, 13))


def test_a_number_column_has_no_texts_and_keeps_every_bit() -> None:
    values = [0.1, 1 / 3, 1e22, 123456789.123456789, -5e-324, 2.0**53 + 2]
    data = workbook({"Data": [["x", "y"], *[[at + 101, 1] for at in range(len(values))]]})
    for at, value in enumerate(values):  # the writers at hand round to 16 digits
        data = edited(data, "xl/worksheets/sheet1.xml", f"<v>{at + 101}</v>", f"<v>{value!r}</v>")
    found = column(data, "x")
    assert found.texts == ()
    assert found.kind is Kind.NUMBER
    assert found.numbers.tolist() == values


def test_data_need_not_start_in_a1() -> None:
    def build(book, page) -> None:  # type: ignore[no-untyped-def]
        page.write(0, 2, "Refit jobs, yard book")
        page.write_row(4, 3, ["hours", "length (m)"])
        for row in range(5, 15):
            page.write_row(row, 3, [row * 2, row])

    found = table(written(build))
    assert (found.header_row, found.rows[0], found.rows[-1]) == (5, 6, 15)
    assert [(one.name, one.index, one.unit) for one in found.columns] == [("hours", 3, None), ("length (m)", 4, "m")]


def test_hidden_and_filtered_rows_are_told() -> None:
    def build(book, page) -> None:  # type: ignore[no-untyped-def]
        page.write_row(0, 0, ["x", "y"])
        for row in range(1, 8):
            page.write_row(row, 0, [row, row])
        page.set_row(3, None, None, {"hidden": True})
        page.set_row(6, None, None, {"hidden": True})

    assert table(written(build)).hidden.tolist() == [False, False, True, False, False, True, False]


def test_headers_blank_repeated_and_on_several_lines() -> None:
    rows = [["hours", None, "hours", "length\n  of hull [m]", " Hours "], *[[at, at, at, at, at] for at in range(5)]]
    names = [one.name for one in table(workbook({"Data": rows})).columns]
    assert names == ["hours", "column B", "hours (2)", "length of hull [m]", "Hours (3)"]


# --- dates -------------------------------------------------------------------------------------


@pytest.mark.parametrize("date1904", [False, True])
def test_dates_keep_the_serials_of_the_file(date1904: bool) -> None:
    """The stored number counts, for the workbook's own formulas see that: not a date rounded to milliseconds."""
    serials = [45000.0, 45000.123456789123, 0.5, 60.0, 1.25, 45001.0]

    def build(book, page) -> None:  # type: ignore[no-untyped-def]
        page.write_row(0, 0, ["when", "y"])
        forms = ["yyyy-mm-dd", "yyyy-mm-dd hh:mm", "hh:mm", "yyyy-mm-dd", "[h]:mm", "d.m.yy"]
        for row, (serial, form) in enumerate(zip(serials, forms, strict=True), 1):
            page.write_number(row, 0, serial, book.add_format({"num_format": form}))
            page.write_number(row, 1, row)

    data = written(build, date_1904=date1904)
    found = column(data, "when")
    assert found.numbers.tolist() == serials
    assert (found.state == State.DATE).all()
    assert table(data).date1904 is date1904


def test_dates_as_openpyxl_writes_them() -> None:
    rows = [["when", "y"], [date(2024, 2, 29), 1], [datetime(2024, 3, 1, 12, 0), 2], [None, 3]]
    found = column(workbook({"Data": rows}), "when")
    assert found.numbers.tolist()[:2] == [45351.0, 45352.5]  # day counts by hand: 2024-02-29 is day 45351
    assert State(int(found.state[2])) is State.BLANK


# --- tables ------------------------------------------------------------------------------------


def excel_table(rows: list[list[object]], ref: str, totals: bool = False) -> bytes:
    book = openpyxl.Workbook()
    page = book.active
    page.title = "Data"
    for row in rows:
        page.append(row)
    made = ExcelTable(displayName="tblJobs", ref=ref)
    if totals:
        made.totalsRowCount = 1
    page.add_table(made)
    book.create_sheet("fit request")
    return saved(book)


def test_a_table_object_gives_the_exact_place() -> None:
    rows = [
        ["a note that", "looks", "like", "headers"],
        ["x", "y", None, None],
        *[[at, at * 2, "aside", None] for at in range(9)],
    ]
    found = table(excel_table(rows, "A2:B11"))
    assert found.excel_table == "tblJobs"
    assert [one.name for one in found.columns] == ["x", "y"]
    assert (found.header_row, len(found.rows)) == (2, 9)


def test_a_tables_totals_row_is_no_case() -> None:
    rows = [["x", "y"], *[[at, at * 2] for at in range(9)], ["Total", 72]]
    found = table(excel_table(rows, "A1:B11", totals=True))
    assert len(found.rows) == 9
    assert found.columns[0].kind is Kind.NUMBER


def test_a_table_object_may_be_named_as_data_sheet() -> None:
    data = excel_table([["x", "y"], *[[at, at * 2] for at in range(9)]], "A1:B10")
    book = openpyxl.load_workbook(io.BytesIO(data))
    book["fit request"]["A1"], book["fit request"]["B1"] = "data sheet", "TBLJOBS"
    book.create_sheet("Other").append(["a", "b"])
    read = contents(saved(book))
    assert list(read.tables) == ["Data"]
    assert read.tables["Data"].excel_table == "tblJobs"


# --- which sheets ------------------------------------------------------------------------------


def test_only_the_sheets_asked_for_are_read() -> None:
    data = workbook({"Refits": refits(), "Twin": refits(5), "Notes": [["hello"]]})
    assert list(contents(data).tables) == ["Refits", "Twin"]
    book = openpyxl.load_workbook(io.BytesIO(data))
    book["fit request"]["A1"], book["fit request"]["B1"] = "data sheet", " twin "
    read = contents(saved(book))
    assert list(read.tables) == ["Twin"]
    assert read.sheet_names == ("Refits", "Twin", "Notes")


def test_without_a_request_nothing_is_read() -> None:
    read = contents(workbook({"Refits": refits()}, request=False))
    assert (read.tables, read.own, read.sheet_names) == ({}, {}, ("Refits",))


def test_a_hidden_sheet_is_read_only_when_named() -> None:
    book = openpyxl.load_workbook(io.BytesIO(workbook({"Refits": refits(), "Old": refits(6)})))
    book["Old"].sheet_state = "hidden"
    assert list(contents(saved(book)).tables) == ["Refits"]
    book["fit request"]["A1"], book["fit request"]["B1"] = "data sheet", "Old"
    read = contents(saved(book))
    assert list(read.tables) == ["Old"]
    assert read.sheet_names == ("Refits",)


def test_the_request_is_read_cell_by_cell() -> None:
    book = openpyxl.load_workbook(io.BytesIO(workbook({"Refits": refits()})))
    page = book["fit request"]
    page["B3"], page["C4"], page["D5"], page["E6"] = "hours", 0.9, date(2024, 1, 31), "=1+1"
    page["F7"], page["G8"] = True, "#NAME?"
    raw = contents(saved(book)).own["fit request"]
    assert raw.values == {(2, 1): "hours", (3, 2): 0.9, (4, 3): 45322.0, (6, 5): True, (7, 6): "#NAME?"}
    assert raw.formulas == {(5, 4): "1+1"}
    assert raw.dates == {(4, 3)}


def test_shared_formulas_are_moved_to_where_they_stand() -> None:
    def build(book, page) -> None:  # type: ignore[no-untyped-def]
        page.write_row(0, 0, ["x", "y"])
        request = book.add_worksheet("fit request")
        for row in range(3):
            request.write_formula(row, 2, f"=A{row + 1}*2", None, row)

    data = written(build)
    first, second = "<f>A1*2</f>", "<f>A2*2</f>"
    data = edited(data, "xl/worksheets/sheet2.xml", first, '<f t="shared" ref="C1:C3" si="0">A1*2</f>')
    data = edited(data, "xl/worksheets/sheet2.xml", second, '<f t="shared" si="0"/>')
    raw = contents(data).own["fit request"]
    assert raw.formulas == {(0, 2): "A1*2", (1, 2): "A2*2", (2, 2): "A3*2"}


# --- hostile and unusual -----------------------------------------------------------------------


def test_a_stray_cell_far_away_is_refused_with_its_address() -> None:
    book = openpyxl.load_workbook(io.BytesIO(workbook({"Refits": refits()})))
    book["Refits"]["XFD1048576"] = 1
    read = contents(saved(book))
    assert not read.tables
    assert read.unread["Refits"].cell == "Refits!XFD1048576"


def test_a_far_cell_that_holds_nothing_does_not_matter() -> None:
    book = openpyxl.load_workbook(io.BytesIO(workbook({"Refits": refits()})))
    book["Refits"]["XFD1048576"].font = openpyxl.styles.Font(bold=True)
    assert len(contents(saved(book)).tables["Refits"].rows) == 30


def test_cells_without_references_are_counted() -> None:
    """The r attributes are optional (ECMA-376 part 1, 18.3.1.4)."""
    data = workbook({"Data": [["x", "y"], *[[at, at + 0.5] for at in range(6)]]})
    with zipfile.ZipFile(io.BytesIO(data)) as package:
        xml = package.read("xl/worksheets/sheet1.xml").decode()
    import re

    bare = re.sub(r' r="[A-Z]*\d+"', "", xml)
    error = bare.replace("<v>3.5</v>", "<v>#N/A</v>").replace('<c t="n"><v>#N/A', '<c t="e"><v>#N/A')
    found = column(edited(data, "xl/worksheets/sheet1.xml", xml, error), "y")
    assert found.state.tolist() == [1, 1, 1, 5, 1, 1]


def test_damaged_cells_refuse_the_file_or_the_sheet() -> None:
    data = edited(workbook({"Data": refits()}), "xl/worksheets/sheet1.xml", "</sheetData>", "</sheetDatum>")
    assert "Data" in contents(data).unread
    with pytest.raises(FileRefused):
        reading.read(b"PK\x03\x04 no zip at all", Package.open(workbook({"Data": refits()})))
