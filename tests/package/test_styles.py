"""The styles part: appended to, never renumbered, taken out again."""

from __future__ import annotations

import copy
import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from lxml import etree

from bridge.messages import FileRefused
from bridge.package import styles
from bridge.package.styles import Styles
from bridge.page.cells import Format
from tests.package import samples, zips

MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
FORMATS = st.builds(
    Format,
    bold=st.booleans(),
    italic=st.booleans(),
    underline=st.booleans(),
    size=st.sampled_from([8.0, 10.0, 10.5]),
    color=st.sampled_from([None, "2B5C6B"]),
    fill=st.sampled_from([None, "FFF5E4"]),
    number_format=st.sampled_from(["General", "0.00", '0.0 "h"', "[>1]0;@"]),
    align=st.sampled_from([None, "left", "right"]),
    wrap=st.booleans(),
    indent=st.integers(0, 2),
    border_bottom=st.sampled_from([None, "thin"]),
    locked=st.booleans(),
)


def _root(inner: str = "", prefix: str = "") -> etree._Element:
    p = f"{prefix}:" if prefix else ""
    declared = f"xmlns:{prefix}" if prefix else "xmlns"
    return etree.fromstring(f'<{p}styleSheet {declared}="{MAIN}">{inner}</{p}styleSheet>')


def _usual(prefix: str = "") -> etree._Element:
    text = zips.members(samples.plain_workbook())["xl/styles.xml"].decode()
    if prefix:
        text = re.sub(r"<(/?)(\w)", rf"<\1{prefix}:\2", text.partition("?>")[2])
        text = text.replace("xmlns=", f"xmlns:{prefix}=")
    return etree.fromstring(text.encode())


def _xf(root: etree._Element, number: int) -> etree._Element:
    return root.find(f"{{{MAIN}}}cellXfs")[number]  # type: ignore[index]


@pytest.mark.parametrize("prefix", ["", "x"])
@given(formats=st.lists(FORMATS, min_size=1, max_size=6))
@settings(max_examples=25, deadline=None)
def test_a_second_pass_adds_nothing_and_finds_the_same(prefix: str, formats: list[Format]) -> None:
    root = _usual(prefix)
    original = etree.tostring(root, method="c14n")
    first = Styles(root)
    numbers = [(first.xf(each), first.dxf(each)) for each in formats]
    record = first.record()
    second = Styles(etree.fromstring(etree.tostring(root)), record)
    assert [(second.xf(each), second.dxf(each)) for each in formats] == numbers
    assert etree.tostring(second.root, method="c14n") == etree.tostring(root, method="c14n")
    assert second.record() == record
    added = styles.ours(second.root, record)
    assert added is not None
    styles.take_out(second.root, added)
    assert etree.tostring(second.root, method="c14n") == original


def test_the_users_items_stay_a_prefix() -> None:
    root = _usual()
    before = {each.tag: [etree.tostring(item) for item in each] for each in root}
    Styles(root).xf(Format(bold=True, number_format="0.000"))
    for each in root:
        if each.tag in before:
            assert [etree.tostring(item) for item in each][: len(before[each.tag])] == before[each.tag]


def test_new_lists_stand_in_the_schemas_order() -> None:
    root = _root('<cellXfs count="1"><xf/></cellXfs><tableStyles/><extLst/>')
    added = Styles(root)
    added.xf(Format(number_format="0.000"))
    added.dxf(Format(fill="FF0000"))
    assert [etree.QName(each).localname for each in root] == [
        "numFmts", "fonts", "fills", "borders", "cellXfs", "dxfs", "tableStyles", "extLst",
    ]  # fmt: skip


def test_ours_never_becomes_the_format_that_cells_without_one_get() -> None:
    for root in (_root(), _root("<cellXfs/>"), _root('<cellXfs count="0"/>')):
        assert Styles(root).xf(Format(bold=True)) == 1


def test_every_choice_is_written_out() -> None:
    root = _usual()
    given_format = Format(
        bold=True, italic=True, underline=True, size=10.5, color="2b5c6b", fill="FFF5E4", number_format='0.0 "h"',
        align="right", valign="top", wrap=True, indent=2, border_bottom="thin", border_top="hair", locked=False,
    )  # fmt: skip
    xf = _xf(root, Styles(root).xf(given_format))
    text = etree.tostring(root).decode()
    assert '<b/><i/><u/><sz val="10.5"/><color rgb="FF2B5C6B"/><name val="Arial"/>' in text
    assert '<fgColor rgb="FFFFF5E4"/>' in text
    assert '<top style="hair">' in text
    assert '<bottom style="thin">' in text
    assert dict(xf[0].attrib) == {"horizontal": "right", "vertical": "top", "wrapText": "1", "indent": "2"}
    assert xf[1].get("locked") == "0"
    assert {name for name in xf.attrib if str(name).startswith("apply")} == {
        "applyNumberFormat", "applyFont", "applyFill", "applyBorder", "applyAlignment", "applyProtection",
    }  # fmt: skip


def test_a_number_format_is_used_again_or_gets_the_next_number() -> None:
    root = _root('<numFmts count="1"><numFmt numFmtId="170" formatCode="0.000"/></numFmts><cellXfs><xf/></cellXfs>')
    added = Styles(root)
    assert _xf(root, added.xf(Format(number_format="0.000"))).get("numFmtId") == "170"
    assert _xf(root, added.xf(Format(number_format="0.0000"))).get("numFmtId") == "171"
    assert _xf(root, added.xf(Format(number_format="0.00"))).get("numFmtId") == "2"
    assert _xf(root, added.xf(Format())).get("numFmtId") == "0"


def test_general_stays_general_where_a_file_makes_number_0_a_date() -> None:
    root = _root('<numFmts count="1"><numFmt numFmtId="0" formatCode="yyyy"/></numFmts><cellXfs><xf/></cellXfs>')
    number = _xf(root, Styles(root).xf(Format())).get("numFmtId")
    assert number == "164"
    assert root[0][1].attrib == {"numFmtId": "164", "formatCode": "General"}


def test_a_list_with_alternatives_keeps_its_indexes() -> None:
    mc = "http://schemas.openxmlformats.org/markup-compatibility/2006"
    either = (
        f'<mc:AlternateContent xmlns:mc="{mc}"><mc:Choice Requires="q" xmlns:q="urn:q"><font q:a="1"/></mc:Choice>'
        "<mc:Fallback><font/></mc:Fallback></mc:AlternateContent>"
    )
    root = _root(f'<fonts count="2"><font><sz val="1"/></font>{either}</fonts><cellXfs><xf/></cellXfs>')
    original = etree.tostring(root, method="c14n")
    added = Styles(root)
    assert _xf(root, added.xf(Format())).get("fontId") == "2"
    found = styles.ours(root, added.record())
    assert found is not None
    styles.take_out(root, found)
    assert etree.tostring(root, method="c14n") == original


def test_a_list_of_uncertain_length_is_refused() -> None:
    mc = "http://schemas.openxmlformats.org/markup-compatibility/2006"
    either = (
        f'<mc:AlternateContent xmlns:mc="{mc}"><mc:Choice Requires="q"><font/><font/></mc:Choice>'
        "<mc:Fallback><font/></mc:Fallback></mc:AlternateContent>"
    )
    with pytest.raises(FileRefused):
        Styles(_root(f"<fonts>{either}</fonts>"))


@pytest.mark.parametrize("count", ['count="1"', 'count="7"', "", 'count="many"'])
def test_counts_grow_by_what_was_added_and_go_back(count: str) -> None:
    root = _root(f"<fonts {count}><font/></fonts><cellXfs><xf/></cellXfs>")
    original = etree.tostring(root, method="c14n")
    added = Styles(root)
    added.xf(Format())
    stated = root[0].get("count")
    assert stated == {'count="1"': "2", 'count="7"': "8", "": None, 'count="many"': "many"}[count]
    found = styles.ours(root, added.record())
    assert found is not None
    styles.take_out(root, found)
    assert etree.tostring(root, method="c14n") == original


def test_after_another_program_rewrote_the_styles_ours_are_not_told_from_the_users() -> None:
    root = _usual()
    added = Styles(root)
    added.xf(Format(bold=True))
    record = added.record()
    rewritten = copy.deepcopy(root)
    rewritten[0][-1].append(etree.Element(f"{{{MAIN}}}family", {"val": "1"}))
    assert styles.ours(root, record) is not None
    assert styles.ours(rewritten, record) is None
    assert styles.ours(root, "") is None
    assert styles.ours(root, "rubbish,sum=1") is None


def test_64000_formats_are_the_most() -> None:
    xf = '<xf numFmtId="0"/>'
    with pytest.raises(FileRefused) as refusal:
        Styles(_root(f"<cellXfs>{xf * 64_000}</cellXfs>")).xf(Format())
    assert refusal.value.problem.key == "too-many-formats"
    assert Styles(_root(f"<cellXfs>{xf * 63_999}</cellXfs>")).xf(Format()) == 63_999


@pytest.mark.parametrize(
    ("font", "pixels"),
    # Pixels of the widest digit at 96 per inch, as spreadsheet programs use them for these fonts (from memory).
    [('<sz val="11"/><name val="Calibri"/>', 7), ('<sz val="10"/><name val="Arial"/>', 7),
     ('<sz val="11"/><name val="Arial"/>', 8), ('<sz val="8"/><name val="Arial"/>', 6),
     ('<sz val="oops"/>', 7), ("", 7), ('<sz val="nan"/>', 7)],
)  # fmt: skip
def test_widths_follow_the_users_normal_font(font: str, pixels: int) -> None:
    lists = f"<fonts><font>{font}</font></fonts><cellStyleXfs><xf fontId='0'/></cellStyleXfs><cellXfs><xf/></cellXfs>"
    assert Styles(_root(lists)).width_scale == pytest.approx(7 / pixels)


def test_a_highlight_holds_only_what_it_changes() -> None:
    root = _usual()
    Styles(root).dxf(Format(fill="FFE0D0", bold=True, color="A5402D", size=20.0, number_format="0.00"))
    dxf = root.find(f"{{{MAIN}}}dxfs")[-1]  # type: ignore[index]
    assert [etree.QName(each).localname for each in dxf.iter()] == [
        "dxf", "font", "b", "color", "fill", "patternFill", "bgColor",
    ]  # fmt: skip
