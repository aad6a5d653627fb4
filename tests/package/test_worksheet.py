"""Sheets as parts, read back by two libraries that know nothing of ours."""

from __future__ import annotations

import datetime
import io
import math

import numpy as np
import openpyxl
import pytest
import python_calamine
from hypothesis import given, settings
from hypothesis import strategies as st
from lxml import etree

from bridge.package.graft import graft
from bridge.package.package import Package
from bridge.package.rows import block_rows, cell, number, sheet_rows
from bridge.page.cells import Cell, Format, Formula, text_literal
from bridge.page.sheet import Block, BlockColumn, DropDown, Highlight, Link, Merge, Sheet
from tests.package import samples, zips
from tests.package.invariants import faults, faults_of_ours

MAIN = "{http://schemas.openxmlformats.org/spreadsheetml/2006/main}"
PLAIN = samples.plain_workbook()


def put(sheet: Sheet, into: bytes = PLAIN) -> bytes:
    """A workbook with one sheet of ours in it."""
    return graft(Package.open(into), [sheet], [], {})


def read(data: bytes, name: str = "fit rows", values: bool = True):  # type: ignore[no-untyped-def]
    """The sheet as openpyxl reads it."""
    return openpyxl.load_workbook(io.BytesIO(data), data_only=values)[name]


def tree(data: bytes, name: str = "fit rows") -> etree._Element:
    """The sheet's root element."""
    parts = zips.members(data)
    return etree.fromstring(zips.part(parts, dict(zips.sheet_parts(parts))[name]))


def test_the_sample_sheet_is_read_back_whole() -> None:
    data = samples.grafted(PLAIN)
    sheet = read(data)
    x, y = samples.numbers()
    assert [sheet.cell(row + 5, 2).value for row in range(samples.ROWS)] == x.tolist()
    assert [sheet.cell(row + 5, 3).value for row in range(samples.ROWS)] == [None if np.isnan(v) else v for v in y]
    assert sheet["A1"].value == 'Rows "of" <Refits> & more'
    assert sheet["A2"].value == "=1+1"
    assert sheet["B2"].value == pytest.approx(float(x.sum()), rel=1e-15)
    assert sheet["C2"].value is True
    assert sheet["B3"].value == "data unchanged"
    assert [sheet["D5"].value, sheet["D6"].value] == ["oak", "glass < fibre"]
    live = read(data, values=False)
    assert live["A5"].value == '=HYPERLINK("#A7",7)'
    assert live["A64"].value == '=HYPERLINK("#A66",66)'


def test_calamine_reads_the_stored_values() -> None:
    book = python_calamine.CalamineWorkbook.from_filelike(io.BytesIO(samples.grafted(PLAIN)))
    rows = book.get_sheet_by_name("fit rows").to_python()
    x, _ = samples.numbers()
    assert [row[1] for row in rows[4:]] == x.tolist()
    assert [row[0] for row in rows[4:]] == [float(each) for each in range(7, 67)]
    assert rows[1][0] == "=1+1"


def test_layout_is_read_back() -> None:
    data = samples.grafted(PLAIN)
    sheet = read(data)
    assert sheet.freeze_panes == "B5"
    assert sheet.print_title_rows == "$1:$4"
    assert sheet.print_area == "'fit rows'!$A$1:$M$64"
    assert sheet.sheet_properties.tabColor.rgb == "FF9DB4BC"
    assert sheet.row_dimensions[1].height == 24
    assert sheet.row_dimensions[4].hidden
    assert sheet.column_dimensions["O"].hidden
    assert [each.coord for each in sheet.merged_cells.ranges] == ["A1:D1"]
    assert sheet["A2"].hyperlink.location == "'fit rows'!A1"
    assert sheet["A2"].hyperlink.tooltip == "to the top"
    (rules,) = list(sheet.conditional_formatting)
    assert rules.rules[0].formula == ["B5>12"]
    assert not sheet.sheet_view.showGridLines
    request = read(data, "fit request")
    listed, referred = request.data_validations.dataValidation
    assert listed.formula1 == '"response,predictor ""x"""'
    assert (listed.promptTitle, listed.prompt, listed.showErrorMessage) == ("role", "choose one", False)
    assert referred.formula1 == "'fit rows'!$D$5:$D$14"
    assert referred.showErrorMessage
    assert request.page_setup.orientation == "portrait"
    assert request.page_setup.fitToHeight == 1


def test_formats_are_read_back() -> None:
    sheet = read(samples.grafted(PLAIN))
    assert (sheet["A1"].font.b, sheet["A1"].font.sz, sheet["A1"].font.name) == (True, 12, "Arial")
    assert sheet["A1"].font.color.rgb == "FF2B5C6B"
    assert sheet["B5"].number_format == "0.000"
    assert sheet["B5"].border.bottom.style == "thin"
    request = read(samples.grafted(PLAIN), "fit request")
    assert request["B2"].fill.fgColor.rgb == "FFFFF5E4"
    assert not request["B2"].protection.locked


TEXTS = st.text(st.characters(codec="utf-8", exclude_categories=["Cs"]), max_size=60)


@given(st.dictionaries(st.tuples(st.integers(0, 40), st.integers(0, 30)), TEXTS, max_size=12))
@settings(max_examples=40, deadline=None)
def test_any_text_stays_a_text(texts: dict[tuple[int, int], str]) -> None:
    data = put(Sheet("fit rows", {place: Cell(text) for place, text in texts.items()}))
    assert faults(data) == []
    root = tree(data)
    assert not list(root.iter(f"{MAIN}f"))
    found = {each.get("r"): each for each in root.iter(f"{MAIN}c")}
    assert len(found) == len(texts)
    for each in found.values():
        assert each.get("t") in (None, "inlineStr")


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@SUM(A1)", "=cmd|' /C x'!A0", "  =1", "'=1", "\t=1"])
def test_text_that_looks_like_a_formula_is_text_for_readers(text: str) -> None:
    data = put(Sheet("fit rows", {(0, 0): Cell(text)}))
    assert read(data)["A1"].value == text
    assert python_calamine.CalamineWorkbook.from_filelike(io.BytesIO(data)).get_sheet_by_name(
        "fit rows"
    ).to_python() == [[text]]
    assert tree(data).find(f".//{MAIN}f") is None


@given(st.lists(st.floats(), min_size=1, max_size=20), st.booleans())
@settings(max_examples=60, deadline=None)
def test_any_number_is_read_back_or_left_empty(values: list[float], as_block: bool) -> None:
    if as_block:
        block = Block(
            0, 0, (BlockColumn(np.array(values), Format()), BlockColumn(np.arange(len(values)) + 0.0, Format()))
        )
        sheet = Sheet("fit rows", {}, blocks=(block,))
    else:
        sheet = Sheet("fit rows", {(row, 0): Cell(value) for row, value in enumerate(values)})
    found = {each.get("r"): each for each in tree(put(sheet)).iter(f"{MAIN}c")}
    for row, value in enumerate(values):
        text = found[f"A{row + 1}"].findtext(f"{MAIN}v")
        if math.isfinite(value):
            assert text is not None
            assert float(text) == value
        else:
            assert text is None
            assert found[f"A{row + 1}"].get("t") is None


@pytest.mark.parametrize(
    ("value", "type_", "stored"),
    [(2.5, None, "2.5"), (7.0, None, "7"), (True, "b", "1"), (False, "b", "0"), ("x < y", "str", "x < y"),
     ("", "str", None), (math.nan, "e", "#NUM!"), (math.inf, "e", "#NUM!"), (np.float64(1.5), None, "1.5"),
     (np.int64(3), None, "3"), (np.bool_(True), "b", "1")],
)  # fmt: skip
def test_a_formula_carries_its_value(value: object, type_: str | None, stored: str | None) -> None:
    element = etree.fromstring(cell("A1", 3, Formula("=IF(B1<2,1,0)", value)))  # type: ignore[arg-type]
    assert element.get("t") == type_
    assert element.findtext("f") == "IF(B1<2,1,0)"
    assert element.findtext("v") == (stored or "")


@pytest.mark.parametrize(
    ("value", "text"),
    [(0.1, "0.1"), (1e300, "1e+300"), (-0.0, "0"), (5e-324, "5e-324"), (2.0**60, "1.152921504606847e+18"), (3, "3"),
     (123456789.0, "123456789")],
)  # fmt: skip
def test_numbers_take_the_shortest_exact_form(value: float, text: str) -> None:
    assert number(value) == text
    assert float(text) == value


def test_block_rows_of_every_kind() -> None:
    block = Block(
        9,
        25,
        (
            BlockColumn(np.array([1.0, 2.0]), Format(), 'HYPERLINK("#A{key}","100% & {row}")', [5, 6]),
            BlockColumn(np.array([1.5, np.nan]), Format(), "Z{row}*2"),
            BlockColumn(["a", ""], Format(), "A{row}"),
            BlockColumn(["%s", "%d & <"], Format()),
            BlockColumn(np.array([3, 4]), Format()),
        ),
    )
    assert block_rows(block, lambda _: 2, 0, 2) == [
        '<c r="Z10" s="2"><f>HYPERLINK("#A5","100% &amp; 10")</f><v>1</v></c>'
        '<c r="AA10" s="2"><f>Z10*2</f><v>1.5</v></c>'
        '<c r="AB10" s="2" t="str"><f>A10</f><v>a</v></c>'
        '<c r="AC10" s="2" t="inlineStr"><is><t xml:space="preserve">%s</t></is></c>'
        '<c r="AD10" s="2"><v>3</v></c>',
        '<c r="Z11" s="2"><f>HYPERLINK("#A6","100% &amp; 11")</f><v>2</v></c>'
        '<c r="AA11" s="2"/>'
        '<c r="AB11" s="2" t="str"><f>A11</f><v></v></c>'
        '<c r="AC11" s="2" t="inlineStr"><is><t xml:space="preserve">%d &amp; &lt;</t></is></c>'
        '<c r="AD11" s="2"><v>4</v></c>',
    ]


def test_single_cells_and_blocks_share_rows_in_order() -> None:
    ten = np.arange(10.0)
    sheet = Sheet(
        "fit rows",
        {(3, 1): Cell("between"), (3, 9): Cell("after"), (0, 0): Cell("top"), (30, 2): Cell("below")},
        blocks=(
            Block(2, 4, (BlockColumn(ten, Format()),)),
            Block(2, 2, (BlockColumn(ten, Format()),)),
            Block(9, 6, (BlockColumn(ten, Format()),)),
        ),
        heights={20: 30.0, 4: 12.0},
        hidden_rows=frozenset({5}),
    )
    data = put(sheet)
    assert faults(data) == []
    found = read(data)
    assert [found.cell(4, column).value for column in (2, 3, 5, 10)] == ["between", 1, 1, "after"]
    assert [found.cell(10, column).value for column in (3, 5, 7)] == [7, 7, 0]
    assert [found.cell(19, column).value for column in (3, 5, 7)] == [None, None, 9]
    assert found["C31"].value == "below"
    assert found.row_dimensions[21].height == 30
    assert found.row_dimensions[5].height == 12
    assert found.row_dimensions[6].hidden


def test_long_blocks_come_in_pieces_and_lose_no_row() -> None:
    count = 10_001
    sheet = Sheet("fit rows", {}, blocks=(Block(1, 0, (BlockColumn(np.arange(count) + 0.5, Format()),)),))
    pieces = list(sheet_rows(sheet, lambda _: 0))
    assert len(pieces) > 2
    text = "".join(pieces)
    assert text.count("<row ") == count
    assert text.endswith('<row r="10002"><c r="A10002" s="0"><v>10000.5</v></c></row>')


def test_an_empty_sheet_is_sound() -> None:
    data = put(Sheet("fit rows", {}))
    assert faults(data) == []
    assert read(data).max_row == 1


def test_a_very_long_text_is_cut_to_what_a_cell_holds() -> None:
    data = put(Sheet("fit rows", {(0, 0): Cell("x" * 40_000)}))
    assert len(read(data)["A1"].value) == 32_767


def test_choices_that_need_cells_of_their_own_are_a_programming_error() -> None:
    for choices in (("a,b", "c"), tuple(f"level {each}" for each in range(60))):
        with pytest.raises(ValueError, match="cells of their own"):
            put(Sheet("fit rows", {}, drop_downs=(DropDown((0, 0), (1, 1), choices),)))


def test_markup_in_every_text_of_a_layout_is_escaped() -> None:
    nasty = """a"b'c<d>&e\x07\n]]>"""
    sheet = Sheet(
        "fit rows",
        {(0, 0): Cell(nasty), (0, 1): Cell(Formula(text_literal(nasty), nasty))},
        merges=(Merge((4, 4), (5, 5)),),
        drop_downs=(DropDown((2, 2), (2, 2), (nasty.replace("\n", " "),), prompt_title=nasty, prompt=nasty),),
        highlights=(Highlight((0, 0), (1, 1), 'A1="<&>"', Format(bold=True)),),
        links=(Link(0, 0, "'it''s <&> \"so\"'!A1", nasty),),
    )  # fmt: skip
    data = put(sheet)
    root = tree(data)
    assert root.find(f".//{MAIN}hyperlink").get("location") == "'it''s <&> \"so\"'!A1"  # type: ignore[union-attr]
    assert root.findtext(f".//{MAIN}cfRule/{MAIN}formula") == 'A1="<&>"'
    assert root.find(f".//{MAIN}dataValidation").get("prompt") == nasty.replace("\x07", "_x0007_")  # type: ignore[union-attr]


@pytest.mark.parametrize(
    ("freeze", "expected"), [((0, 0), None), ((3, 0), "A4"), ((0, 2), "C1"), ((3, 2), "C4"), (None, None)]
)
def test_frozen_panes(freeze: tuple[int, int] | None, expected: str | None) -> None:
    assert read(put(Sheet("fit rows", {(0, 0): Cell(1)}, freeze=freeze))).freeze_panes == expected


def test_right_to_left() -> None:
    assert read(put(Sheet("fit rows", {}, right_to_left=True))).sheet_view.rightToLeft


def test_no_cell_of_ours_shows_a_users_date_format() -> None:
    from tests.package import synthetic

    for make in (synthetic.date_in_format_zero, synthetic.general_is_a_date):
        data = put(Sheet("fit rows", {(0, 0): Cell(41000.5)}), make())
        value = read(data)["A1"].value
        assert not isinstance(value, (datetime.date, datetime.time))
        assert faults_of_ours(data, {"fit rows"}) == []
