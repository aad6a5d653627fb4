"""Opening: what a package tells, and which files are left alone for which reason."""

from __future__ import annotations

import io
from dataclasses import FrozenInstanceError

import openpyxl
import pytest
import xlsxwriter
from openpyxl.worksheet.table import Table as ExcelTable

from bridge.messages import CATALOGUE, FileRefused, Severity
from bridge.package.graft import graft
from bridge.package.limits import Limits
from bridge.package.package import Package, TableEntry, is_empty_sheet
from tests.package import samples, synthetic, zips


@pytest.mark.parametrize("kind", synthetic.REFUSED)
def test_each_kind_of_refused_file_has_its_own_reason_and_stays_untouched(kind: str) -> None:
    make, key = synthetic.REFUSED[kind]
    data = make()
    before = bytes(bytearray(data))
    with pytest.raises(FileRefused) as refusal:
        graft(Package.open(data), samples.sheets(), samples.names(), samples.STATE)
    problem = refusal.value.problem
    assert problem.key == key
    assert problem.severity is Severity.REFUSAL
    assert problem.text.endswith(".")
    assert "{" not in problem.text
    assert data == before


def test_every_reason_of_this_room_is_shown_by_a_refused_file() -> None:
    """Those of `tests/package/test_archive.py`, `test_graft.py` and `test_user_objects.py` aside."""
    elsewhere = {"zip-damaged", "file-too-big", "too-many-members", "part-damaged", "part-missing", "revision-log",
                 "binary-format", "user_objects_on_our_sheet", "user-objects-would-go", "no-sheet-left"}  # fmt: skip
    keys = list(CATALOGUE)
    ours = keys[keys.index("empty-file") : keys.index("no-sheet-left") + 1]
    assert set(ours) - elsewhere == {key for _, key in synthetic.REFUSED.values()}


@pytest.mark.parametrize(
    ("old", "new", "key"),
    [
        ("spreadsheetml.sheet.main+xml", "spreadsheetml.template.main+xml", None),
        ("vnd.openxmlformats-officedocument.spreadsheetml.sheet.main+xml",
         "vnd.ms-excel.template.macroEnabled.main+xml", None),
        ("vnd.openxmlformats-officedocument.spreadsheetml.sheet.main+xml",
         "vnd.ms-excel.sheet.binary.macroEnabled.main", "binary-format"),
        ("vnd.openxmlformats-officedocument.spreadsheetml.sheet.main+xml",
         "vnd.openxmlformats-officedocument.presentationml.slideshow.main+xml", "no-workbook-part"),
    ],
)  # fmt: skip
def test_kinds_of_workbook_are_told_by_their_content_type_and_kept(old: str, new: str, key: str | None) -> None:
    data = zips.edited(samples.plain_workbook(), "[Content_Types].xml", old, new)
    if key is None:
        assert new in zips.members(samples.grafted(data))["[Content_Types].xml"].decode()
    else:
        with pytest.raises(FileRefused) as refusal:
            Package.open(data)
        assert refusal.value.problem.key == key


def test_a_revision_log_is_refused() -> None:
    parts = synthetic.base()
    synthetic.add(parts, "xl/revisions/revisionHeaders.xml", "<headers/>", "application/xml", "xl/workbook.xml",
                  "http://schemas.openxmlformats.org/officeDocument/2006/relationships/revisionHeaders")  # fmt: skip
    with pytest.raises(FileRefused) as refusal:
        Package.open(zips.build(parts))
    assert refusal.value.problem.key == "revision-log"


@pytest.mark.parametrize(
    "part", ["[Content_Types].xml", "_rels/.rels", "xl/workbook.xml", "xl/_rels/workbook.xml.rels"]
)
def test_damage_in_the_parts_that_hold_the_package_together_is_refused(part: str) -> None:
    parts = synthetic.base()
    parts[part] = parts[part][:-5]
    with pytest.raises(FileRefused) as refusal:
        Package.open(zips.build(parts))
    assert refusal.value.problem.key == "part-damaged"
    assert part in refusal.value.problem.text


def test_two_relationships_with_one_id_are_refused() -> None:
    data = zips.edited(samples.plain_workbook(), "xl/_rels/workbook.xml.rels", 'Id="rId2"', 'Id="rId1"')
    with pytest.raises(FileRefused):
        Package.open(data)


def test_two_types_for_one_part_are_refused() -> None:
    extra = '<Override PartName="/XL/workbook.xml" ContentType="a/b"/></Types>'
    with pytest.raises(FileRefused):
        Package.open(zips.edited(samples.plain_workbook(), "[Content_Types].xml", "</Types>", extra))


# --- what a package tells ------------------------------------------------------------------------------------------


def test_sheets_in_tab_order_with_state_and_kind() -> None:
    out = io.BytesIO()
    with xlsxwriter.Workbook(out) as book:
        book.add_worksheet("One").write(0, 0, 1)
        chart = book.add_chart({"type": "bar"})
        chart.add_series({"values": "=One!$A$1"})
        book.add_chartsheet("Chart").set_chart(chart)
        book.add_worksheet("Hidden").hide()
        book.add_worksheet("Very").very_hidden()
    package = Package.open(out.getvalue())
    assert [(each.name, each.kind, each.state, each.empty, each.ours) for each in package.sheets] == [
        ("One", "worksheet", "visible", False, None),
        ("Chart", "chartsheet", "visible", False, None),
        ("Hidden", "worksheet", "hidden", True, None),
        ("Very", "worksheet", "veryHidden", True, None),
    ]


def test_a_package_is_frozen() -> None:
    package = Package.open(samples.plain_workbook())
    with pytest.raises(FrozenInstanceError):
        package.workbook_part = "x"  # type: ignore[misc]
    with pytest.raises(FrozenInstanceError):
        package.sheets[0].name = "x"  # type: ignore[misc]


def test_ours_and_what_was_stored_are_told_after_a_graft() -> None:
    package = Package.open(samples.grafted(samples.plain_workbook()))
    assert [(each.name, each.ours) for each in package.sheets] == [
        ("Refits", None), ("Notes", None), ("fit request", "fit request"), ("fit rows", "fit rows"),
    ]  # fmt: skip
    assert package.state == samples.STATE
    assert {name.name for name in package.defined_names if not name.hidden and name.scope is None} == {
        "fit_A_n", "fit_A_rows",
    }  # fmt: skip


def test_worksheet_xml_is_the_part_and_bounded() -> None:
    data = samples.plain_workbook()
    assert Package.open(data).worksheet_xml("REFITS") == zips.members(data)["xl/worksheets/sheet1.xml"]
    with pytest.raises(KeyError):
        Package.open(data).worksheet_xml("none")
    with pytest.raises(FileRefused):
        Package.open(data, Limits(member=100)).worksheet_xml("Refits")


def test_a_sheet_whose_part_is_missing_is_told_when_read() -> None:
    parts = synthetic.base()
    del parts["xl/worksheets/sheet1.xml"]
    package = Package.open(zips.build(parts))
    assert not package.sheets[0].empty
    with pytest.raises(FileRefused) as refusal:
        package.worksheet_xml("Refits")
    assert refusal.value.problem.key == "part-missing"


def test_tables() -> None:
    book = openpyxl.Workbook()
    sheet = book.active
    for row in (["job", "hours"], ["a", 1], ["b", 2], ["total", 3]):
        sheet.append(row)
    table = ExcelTable(displayName="Jobs", ref="A1:B4")
    table.totalsRowCount = 1
    sheet.add_table(table)
    out = io.BytesIO()
    book.save(out)
    package = Package.open(out.getvalue())
    assert package.tables("Sheet") == (TableEntry("Jobs", "A1:B4", 1, 1),)
    assert Package.open(samples.plain_workbook()).tables("Refits") == ()


@pytest.mark.parametrize(
    ("inner", "empty"),
    [
        ("", True),
        ('<row r="1"><c r="A1" s="3"/></row>', True),
        ('<row r="1"><c r="A1"><v>1</v></c></row>', False),
        ('<row r="1"><c r="A1"><f>B1</f></c></row>', False),
        ('<row r="1"><x:c r="A1"><x:v>1</x:v></x:c></row>', False),
        ('</sheetData><drawing r:id="rId1"/><sheetData>', False),
        ('</sheetData><legacyDrawing r:id="rId1"/><sheetData>', False),
        ("</sheetData><sheetView/><formula1/><sheetData>", True),
    ],
)
def test_empty_sheets(inner: str, empty: bool) -> None:
    text = f"<worksheet><sheetData>{inner}</sheetData></worksheet>".encode()
    assert is_empty_sheet([text]) is empty
    assert is_empty_sheet([text[at : at + 3] for at in range(0, len(text), 3)]) is empty


def test_utf16_sheets_count_as_filled() -> None:
    assert not is_empty_sheet(["<worksheet/>".encode("utf-16")])
