"""What users place on our sheets: carried over, or in the way."""

from __future__ import annotations

import io
import re
from dataclasses import replace

import openpyxl
import pytest
from openpyxl.chart import BarChart, Reference
from openpyxl.comments import Comment

from bridge.messages import FileRefused
from bridge.package.graft import graft
from bridge.package.limits import Limits
from bridge.package.outline import without_rows
from bridge.package.package import Package
from bridge.package.strip import strip
from bridge.package.user_objects import UserObject, user_objects
from tests.package import samples, synthetic, zips
from tests.package.invariants import faults

PRINTER = "xl/printerSettings/printerSettings1.bin"
PNG = '<Default Extension="png" ContentType="image/png"/>'
OFFICE = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
GRAFTED = samples.grafted(samples.plain_workbook())
OURS = dict(zips.sheet_parts(zips.members(GRAFTED)))["fit rows"]


def resaved(change) -> bytes:  # type: ignore[no-untyped-def]
    """The grafted workbook after `change` and a save by openpyxl."""
    loaded = openpyxl.load_workbook(io.BytesIO(GRAFTED))
    change(loaded["fit rows"])
    out = io.BytesIO()
    loaded.save(out)
    return out.getvalue()


def with_element(element: str, before: str) -> bytes:
    """The grafted workbook with an element in our sheet."""
    return zips.edited(GRAFTED, OURS, before, element + before)


def kinds(data: bytes) -> dict[str, bool]:
    return {each.kind: each.carried for each in user_objects(Package.open(data))}


def regrafted(data: bytes) -> bytes:
    """Laid out anew with other numbers; grafting that again must change nothing."""
    new = samples.grafted(data, 2)
    assert samples.grafted(new, 2) == new
    known = set(faults(data))
    assert [fault for fault in faults(new) if fault not in known] == []
    return new


def our_xml(data: bytes) -> str:
    parts = zips.members(data)
    return zips.part(parts, dict(zips.sheet_parts(parts))["fit rows"]).decode()


def test_nothing_of_ours_is_taken_for_the_users() -> None:
    assert user_objects(Package.open(GRAFTED)) == ()
    assert kinds(resaved(lambda sheet: None)) == {}


# --- carried over --------------------------------------------------------------------------------------------------


def _chart(sheet) -> None:  # type: ignore[no-untyped-def]
    chart = BarChart()
    chart.add_data(Reference(sheet, min_col=2, min_row=5, max_row=20))
    sheet.add_chart(chart, "Q3")


def test_a_chart() -> None:
    data = resaved(_chart)
    assert kinds(data) == {"a chart": True}
    new = regrafted(data)
    parts = zips.members(new)
    charts = [name for name in parts if re.search(r"charts/chart\d+\.xml", name)]
    assert len(charts) == 3
    assert sum(b"barChart" in parts[name] for name in charts) == 1
    assert user_objects(Package.open(new)) == (UserObject("fit rows", "a chart", True),)


def test_a_copy_of_our_own_chart_is_the_users() -> None:
    parts = zips.members(GRAFTED)
    drawing = parts["xl/drawings/drawing1.xml"].decode()
    anchor = re.search(r"<xdr:oneCellAnchor[ >].*?</xdr:oneCellAnchor>", drawing)
    assert anchor
    parts["xl/drawings/drawing1.xml"] = drawing.replace("</xdr:wsDr>", anchor[0] + "</xdr:wsDr>").encode()
    data = zips.build(parts)
    assert kinds(data) == {"a chart": True}


def test_a_picture_and_a_drawn_object() -> None:
    parts = zips.members(GRAFTED)
    a = "http://schemas.openxmlformats.org/drawingml/2006/main"
    corner = "<xdr:col>1</xdr:col><xdr:colOff>0</xdr:colOff><xdr:row>1</xdr:row><xdr:rowOff>0</xdr:rowOff>"
    place = f"<xdr:from>{corner}</xdr:from>"
    extent = '<xdr:ext cx="99" cy="99"/>'
    image = "xl/media/image1.png"
    parts[image] = b"\x89PNG not really"
    synthetic.swap(parts, "[Content_Types].xml", "<Override", PNG + "<Override")
    id_ = synthetic.relate(parts, "xl/drawings/drawing1.xml", f"{OFFICE}/image", "../media/image1.png")
    fill = f'<xdr:blipFill><a:blip xmlns:a="{a}" xmlns:r="{OFFICE}" r:embed="{id_}"/></xdr:blipFill>'
    about = '<xdr:nvPicPr><xdr:cNvPr id="90" name="Logo"/><xdr:cNvPicPr/></xdr:nvPicPr>'
    picture = f"<xdr:pic>{about}{fill}<xdr:spPr/></xdr:pic>"
    shape = '<xdr:sp><xdr:nvSpPr><xdr:cNvPr id="91" name="Note"/><xdr:cNvSpPr/></xdr:nvSpPr><xdr:spPr/></xdr:sp>'
    anchors = (f"{place}{extent}{each}<xdr:clientData/>" for each in (picture, shape))
    both = "".join(f"<xdr:oneCellAnchor>{each}</xdr:oneCellAnchor>" for each in anchors)
    synthetic.swap(parts, "xl/drawings/drawing1.xml", "</xdr:wsDr>", both + "</xdr:wsDr>")
    data = zips.build(parts)
    assert kinds(data) == {"a picture": True, "a drawn object": True}
    new = zips.members(regrafted(data))
    drawing = new["xl/drawings/drawing1.xml"].decode()
    assert drawing.index("Logo") < drawing.index("Note") < drawing.index("fit rows chart 1")
    assert new[image] == parts[image]
    ids = re.findall(r'cNvPr id="(\d+)"', drawing)
    assert len(set(ids)) == len(ids) == 4


def test_a_comment() -> None:
    data = resaved(lambda sheet: sheet.cell(7, 2).__setattr__("comment", Comment("why so long?", "An Estimator")))
    assert kinds(data) == {"a comment": True}
    new = regrafted(data)
    assert openpyxl.load_workbook(io.BytesIO(new))["fit rows"]["B7"].comment.text == "why so long?"
    was, now = zips.raw(data), zips.raw(new)
    for name in was:
        if "comment" in name or "vml" in name.lower():
            assert was[name] == now[name]


def test_a_threaded_comment() -> None:
    parts = zips.members(GRAFTED)
    synthetic.add(parts, "xl/threadedComments/threadedComment1.xml", "<ThreadedComments/>",
                  "application/vnd.ms-excel.threadedcomments+xml", OURS,
                  "http://schemas.microsoft.com/office/2017/10/relationships/threadedComment")  # fmt: skip
    data = zips.build(parts)
    assert kinds(data) == {"a threaded comment": True}
    assert "xl/threadedComments/threadedComment1.xml" in zips.members(regrafted(data))


@pytest.mark.parametrize(
    ("kind", "element", "before"),
    [
        ("sheet protection", '<sheetProtection password="CC1A" sheet="1" objects="1"/>', "<mergeCells"),
        ("a header or footer", "<headerFooter><oddHeader>&amp;CMy firm</oddHeader></headerFooter>", "<ignoredErrors"),
        ("page breaks", '<rowBreaks count="1"><brk id="9" max="16383" man="1"/></rowBreaks>', "<ignoredErrors"),
    ],
)
def test_elements_that_are_kept_whole(kind: str, element: str, before: str) -> None:
    data = with_element(element, before)
    assert kinds(data) == {kind: True}
    assert re.sub(r' xmlns(:\w+)?="[^"]*"', "", our_xml(regrafted(data))).count(element) == 1


def test_marks_of_extensions_are_not_carried_without_their_announcement() -> None:
    odd = '<sheetProtection xmlns:xr="urn:later" sheet="1" xr:uid="{1}"><xr:more/></sheetProtection>'
    assert "urn:later" not in our_xml(regrafted(with_element(odd, "<mergeCells")))


def test_an_empty_header_is_none() -> None:
    assert kinds(with_element("<headerFooter><oddHeader></oddHeader></headerFooter>", "<ignoredErrors")) == {}


def test_a_link_that_leads_outside() -> None:
    def change(sheet) -> None:  # type: ignore[no-untyped-def]
        sheet["B2"].hyperlink = "https://example.org/a?b=1&c=2"

    data = resaved(change)
    assert kinds(data) == {"a link": True}
    sheet = openpyxl.load_workbook(io.BytesIO(regrafted(data)))["fit rows"]
    assert sheet["B2"].hyperlink.target == "https://example.org/a?b=1&c=2"
    assert sheet["A2"].hyperlink.location == "'fit rows'!A1"


def test_a_background_picture() -> None:
    parts = zips.members(GRAFTED)
    parts["xl/media/image1.png"] = b"\x89PNG"
    synthetic.swap(parts, "[Content_Types].xml", "<Override", PNG + "<Override")
    id_ = synthetic.relate(parts, OURS, f"{OFFICE}/image", "../media/image1.png")
    synthetic.swap(parts, OURS, "</worksheet>", f'<picture r:id="{id_}"/></worksheet>')
    data = zips.build(parts)
    assert kinds(data) == {"a background picture": True}
    assert f'r:id="{id_}"' in our_xml(regrafted(data))


def test_column_widths() -> None:
    def change(sheet) -> None:  # type: ignore[no-untyped-def]
        sheet.column_dimensions["B"].width = 33
        sheet.column_dimensions["G"].width = 44

    data = resaved(change)
    assert kinds(data) == {"column widths": True}
    sheet = openpyxl.load_workbook(io.BytesIO(regrafted(regrafted(data))))["fit rows"]
    assert sheet.column_dimensions["B"].width == 33
    assert sheet.column_dimensions["G"].width == 44
    assert sheet.column_dimensions["D"].width == pytest.approx(20.71, abs=0.01)


def test_a_width_is_not_kept_where_the_layout_gives_the_column_another() -> None:
    def change(sheet) -> None:  # type: ignore[no-untyped-def]
        sheet.column_dimensions["B"].width = 33

    other = replace(samples.rows_sheet(), widths={0: 9.0, 1: 50.0, 2: 12.0, 3: 20.0})
    new = graft(Package.open(resaved(change)), [other], samples.names(), samples.STATE)
    width = openpyxl.load_workbook(io.BytesIO(new))["fit rows"].column_dimensions["B"].width
    assert width == pytest.approx(50.71, abs=0.01)


def test_widths_that_a_program_scaled_all_alike_are_not_the_users() -> None:
    def scaled(sheet) -> None:  # type: ignore[no-untyped-def]
        for letter in "ABCDO":
            sheet.column_dimensions[letter].width *= 1.135

    assert kinds(resaved(scaled)) == {}


def test_a_print_area_and_repeated_rows() -> None:
    def change(sheet) -> None:  # type: ignore[no-untyped-def]
        sheet.print_area = "A1:C9"
        sheet.print_title_rows = "1:2"

    data = resaved(change)
    assert kinds(data) == {"a print area": True, "repeated print rows": True}
    sheet = openpyxl.load_workbook(io.BytesIO(regrafted(regrafted(data))))["fit rows"]
    assert sheet.print_area == "'fit rows'!$A$1:$C$9"
    assert sheet.print_title_rows == "$1:$2"


def test_a_print_area_taken_away_stays_away() -> None:
    text = zips.members(GRAFTED)["xl/workbook.xml"].decode()
    area = re.search(r"<definedName name=\"_xlnm.Print_Area\".*?</definedName>", text)
    assert area
    data = zips.edited(GRAFTED, "xl/workbook.xml", area[0], "")
    assert "Print_Area" not in zips.members(regrafted(data))["xl/workbook.xml"].decode()


@pytest.mark.parametrize(("stated", "kept"), [('paperSize="1"', 'paperSize="1"'), ("", "<pageSetup fit")])
def test_the_paper_is_kept(stated: str, kept: str) -> None:
    assert kept in our_xml(regrafted(zips.edited(GRAFTED, OURS, 'paperSize="9"', stated)))


# --- in the way ----------------------------------------------------------------------------------------------------

SPARKLINES = "<x14:sparklineGroups xmlns:x14='urn:x'><x14:sparklineGroup/></x14:sparklineGroups>"
IN_THE_WAY = [
    ("an Excel table", f"{OFFICE}/table", '<tableParts count="1"><tablePart r:id="{id}"/></tableParts>'),
    ("a pivot table", f"{OFFICE}/pivotTable", ""),
    ("a query", f"{OFFICE}/queryTable", ""),
    ("a form control", f"{OFFICE}/ctrlProp", ""),
    ("an embedded object", f"{OFFICE}/oleObject", '<oleObjects><oleObject shapeId="1" r:id="{id}"/></oleObjects>'),
    ("a slicer", "http://schemas.microsoft.com/office/2007/relationships/slicer", ""),
    ("a timeline", "http://schemas.microsoft.com/office/2011/relationships/timeline", ""),
    ("something of an unknown kind (novelty)", "http://example.org/relationships/novelty", ""),
    ("sparklines", "", f"<extLst><ext uri='x'>{SPARKLINES}</ext></extLst>"),
]


@pytest.mark.parametrize(("kind", "relation", "element"), IN_THE_WAY)
def test_what_cannot_be_carried_over_stops_the_replacement_and_is_named(kind: str, relation: str, element: str) -> None:
    parts = zips.members(GRAFTED)
    id_ = ""
    if relation:
        id_ = synthetic.add(parts, "xl/things/thing1.xml", "<x/>", "application/xml", OURS, relation)
    synthetic.swap(parts, OURS, "</worksheet>", element.replace("{id}", id_) + "</worksheet>")
    data = zips.build(parts)
    assert kinds(data) == {kind: False}
    with pytest.raises(FileRefused) as refusal:
        samples.grafted(data)
    assert refusal.value.problem.key == "user_objects_on_our_sheet"
    assert kind in refusal.value.problem.text
    assert '"fit rows"' in refusal.value.problem.text
    untouched = graft(Package.open(data), [samples.request_sheet()], samples.names(), samples.STATE)
    assert (
        zips.raw(untouched)["xl/things/thing1.xml" if relation else OURS]
        == zips.raw(data)["xl/things/thing1.xml" if relation else OURS]
    )


def test_printer_settings_are_the_programs_and_go() -> None:
    parts = zips.members(GRAFTED)
    synthetic.add(parts, PRINTER, b"x", "application/bin", OURS, f"{OFFICE}/printerSettings")
    new = regrafted(zips.build(parts))
    assert PRINTER not in zips.members(new)


def test_parts_that_another_sheet_uses_too_stay() -> None:
    parts = zips.members(GRAFTED)
    synthetic.add(parts, PRINTER, b"x", "application/bin", OURS, f"{OFFICE}/printerSettings")
    synthetic.relate(parts, "xl/worksheets/sheet1.xml", f"{OFFICE}/printerSettings", f"/{PRINTER}")
    new = regrafted(zips.build(parts))
    assert PRINTER in zips.members(new)


def test_strip_does_not_take_the_users_objects_along() -> None:
    with pytest.raises(FileRefused) as refusal:
        strip(Package.open(resaved(_chart)))
    assert refusal.value.problem.key == "user-objects-would-go"
    assert "a chart" in refusal.value.problem.text


def test_strip_is_not_stopped_by_what_belongs_to_the_sheets_look() -> None:
    data = with_element("<headerFooter><oddHeader>&amp;CMy firm</oddHeader></headerFooter>", "<ignoredErrors")
    assert "fit rows" not in [tab for tab, _ in zips.sheet_parts(zips.members(strip(Package.open(data))))]


# --- reading the part without its rows -----------------------------------------------------------------------------


@pytest.mark.parametrize("size", [1, 7, 64, 10_000])
@pytest.mark.parametrize(
    ("text", "left"),
    [
        ('<w><a/><sheetData><row r="1"/></sheetData><b/></w>', "<w><a/><sheetData></sheetData><b/></w>"),
        (
            '<x:w><x:sheetData z="1"><x:c/></x:sheetData ><b/></x:w>',
            '<x:w><x:sheetData z="1"></x:sheetData ><b/></x:w>',
        ),
        ("<w><sheetData/><b/></w>", "<w><sheetData/><b/></w>"),
        ("<w><b/></w>", "<w><b/></w>"),
    ],
)
def test_rows_are_left_out_however_the_pieces_fall(text: str, left: str, size: int) -> None:
    data = text.encode()
    pieces = [data[at : at + size] for at in range(0, len(data), size)]
    assert without_rows(pieces, "x", Limits()).decode() == left


def test_a_long_sheet_is_never_held_whole() -> None:
    pieces = [b"<w><sheetData>", *[b"<c/>" * 100_000] * 50, b"</sheetData></w>"]
    assert without_rows(pieces, "x", Limits(part=1_000_000)) == b"<w><sheetData></sheetData></w>"
    with pytest.raises(FileRefused):
        without_rows([b"<w>", *[b"<c/>" * 100_000] * 50], "x", Limits(part=1_000_000))


def test_a_damaged_sheet_of_ours_is_told() -> None:
    parts = zips.members(GRAFTED)
    parts[OURS] = parts[OURS].replace(b"</worksheet>", b"")
    with pytest.raises(FileRefused) as refusal:
        user_objects(Package.open(zips.build(parts)))
    assert refusal.value.problem.key == "part-damaged"
