"""Taking everything of ours out again."""

from __future__ import annotations

import re

import pytest

from bridge.messages import FileRefused
from bridge.package.package import Package
from bridge.package.strip import strip
from tests.package import harm, samples, synthetic, zips
from tests.package.invariants import faults

PLAIN = samples.plain_workbook()


def stripped(data: bytes) -> bytes:
    return strip(Package.open(data))


def test_a_workbook_without_anything_of_ours_comes_back_as_it_is() -> None:
    assert stripped(PLAIN) == PLAIN


def test_after_many_grafts_the_original_comes_back() -> None:
    data = PLAIN
    for seed in (1, 2, 3):
        data = samples.grafted(data, seed)
    assert harm.changed_after_strip(PLAIN, stripped(data)) == []
    assert stripped(stripped(data)) == stripped(data)


def test_a_strip_and_a_new_graft_give_what_the_first_graft_gave() -> None:
    once = samples.grafted(PLAIN)
    was, now = zips.raw(once), zips.raw(samples.grafted(stripped(once)))
    assert {name: row[1:3] for name, row in now.items()} == {name: row[1:3] for name, row in was.items()}


def test_names_we_put_in_go_and_the_users_stay() -> None:
    data = zips.edited(samples.grafted(PLAIN), "xl/workbook.xml", "</definedNames>",
                       "<definedName name=\"my_r2\">'fit rows'!$B$2</definedName></definedNames>")  # fmt: skip
    text = zips.members(stripped(data))["xl/workbook.xml"].decode()
    assert re.findall(r'definedName name="([^"]*)"', text) == ["my_r2"]


def test_an_empty_list_of_names_that_was_there_stays() -> None:
    data = zips.edited(PLAIN, "xl/workbook.xml", "</sheets>", "</sheets><definedNames></definedNames>")
    assert harm.changed_after_strip(data, stripped(samples.grafted(data))) == []
    assert "<definedNames" in zips.members(stripped(samples.grafted(data)))["xl/workbook.xml"].decode()
    assert "<definedNames" not in zips.members(stripped(samples.grafted(PLAIN)))["xl/workbook.xml"].decode()


def test_the_marks_that_a_copy_of_our_sheet_took_along_go_and_the_copy_stays() -> None:
    data = samples.grafted(PLAIN)
    text = zips.members(data)["xl/workbook.xml"].decode()
    mark = '<definedName name="_savefit.sheet.fit_rows" localSheetId="1" hidden="1">Notes!$A$1</definedName>'
    data = zips.edited(data, "xl/workbook.xml", "</definedNames>", mark + "</definedNames>")
    assert [sheet.ours for sheet in Package.open(data).sheets] == [None, None, "fit request", "fit rows"]
    left = zips.members(stripped(data))["xl/workbook.xml"].decode()
    assert "_savefit" in text
    assert "_savefit" not in left


@pytest.mark.parametrize("use", [' s="{format}"', ""])
def test_styles_that_a_sheet_of_the_users_uses_stay(use: str) -> None:
    data = samples.grafted(PLAIN)
    formats = zips.members(data)["xl/styles.xml"].decode()
    last = int(re.search(r'<cellXfs count="(\d+)"', formats)[1]) - 1  # type: ignore[index]
    data = zips.edited(data, "xl/worksheets/sheet1.xml", '<c r="B1"', f'<c r="B1"{use.format(format=last)}')
    out = zips.members(stripped(data))["xl/styles.xml"]
    assert (out == formats.encode()) is bool(use)
    assert faults(stripped(data)) == []


def test_a_highlight_that_a_sheet_of_the_users_uses_keeps_the_styles() -> None:
    rule = '<cfRule type="expression" dxfId="0" priority="1"><formula>1</formula></cfRule>'
    highlight = f'<conditionalFormatting sqref="A1">{rule}</conditionalFormatting><pageMargins'
    data = zips.edited(samples.grafted(PLAIN), "xl/worksheets/sheet1.xml", "<pageMargins", highlight)
    assert faults(stripped(data)) == []


def test_styles_another_program_rewrote_stay() -> None:
    more = '<xf numFmtId="0" fontId="0" fillId="0" borderId="0"/></cellXfs>'
    data = zips.edited(samples.grafted(PLAIN), "xl/styles.xml", "</cellXfs>", more)
    assert zips.members(stripped(data))["xl/styles.xml"] == zips.members(data)["xl/styles.xml"]


@pytest.mark.parametrize("make", [synthetic.no_styles, synthetic.bare_styles, synthetic.strict, synthetic.prefixed])
def test_what_was_made_for_our_sheets_goes(make) -> None:  # type: ignore[no-untyped-def]
    data = make()
    assert harm.changed_after_strip(data, stripped(samples.grafted(data))) == []


def test_a_workbook_keeps_a_visible_sheet() -> None:
    data = samples.grafted(PLAIN)
    for tab in ("Refits", "Notes"):
        data = zips.edited(data, "xl/workbook.xml", f'name="{tab}"', f'name="{tab}" state="hidden"')
    with pytest.raises(FileRefused) as refusal:
        stripped(data)
    assert refusal.value.problem.key == "no-sheet-left"


def test_a_custom_view_of_our_sheet_opens_the_neighbour_afterwards() -> None:
    data = samples.grafted(synthetic.custom_views_and_chain())
    text = zips.members(data)["xl/workbook.xml"].decode()
    ours = re.search(r'<sheet name="fit rows" sheetId="(\d+)"', text)
    assert ours
    data = zips.edited(data, "xl/workbook.xml", 'activeSheetId="17"', f'activeSheetId="{ours[1]}"')
    assert faults(stripped(data)) == []
    assert 'activeSheetId="17"' in zips.members(stripped(data))["xl/workbook.xml"].decode()  # the other one is hidden
