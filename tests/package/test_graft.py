"""Grafting: where sheets go, what is refused, what stays."""

from __future__ import annotations

import io
import re
from dataclasses import replace

import openpyxl
import pytest
from lxml import etree

from bridge.messages import FileRefused
from bridge.package.graft import graft
from bridge.package.package import Package
from bridge.package.strip import strip
from bridge.page.cells import Cell
from bridge.page.sheet import DefinedName, Sheet
from tests.package import corpus, harm, samples, synthetic, zips
from tests.package.invariants import faults

PLAIN = samples.plain_workbook()


def tabs(data: bytes) -> list[str]:
    return [tab for tab, _ in zips.sheet_parts(zips.members(data))]


def book(data: bytes) -> etree._Element:
    parts = zips.members(data)
    return etree.fromstring(zips.part(parts, zips.workbook_part(parts)))


def names_in(data: bytes) -> dict[tuple[str, str | None], str]:
    elements = book(data).iter("{*}definedName")
    return {(each.get("name", ""), each.get("localSheetId")): each.text or "" for each in elements}


def sheet_ids(parts: dict[str, bytes]) -> dict[str | None, str | None]:
    root = etree.fromstring(parts["xl/workbook.xml"])
    return {each.get("name"): each.get("sheetId") for each in root.iter("{*}sheet")}


def edited_book(data: bytes, old: str, new: str) -> bytes:
    return zips.edited(data, "xl/workbook.xml", old, new)


def key_of(refusal: pytest.ExceptionInfo[FileRefused]) -> str:
    return refusal.value.problem.key


# --- the same again ------------------------------------------------------------------------------------------------


def test_new_sheets_are_appended_in_the_order_given() -> None:
    assert tabs(samples.grafted(PLAIN)) == ["Refits", "Notes", "fit request", "fit rows"]
    turned = graft(Package.open(PLAIN), samples.sheets()[::-1], [], {})
    assert tabs(turned) == ["Refits", "Notes", "fit rows", "fit request"]


def test_the_same_input_gives_the_same_bytes() -> None:
    assert samples.grafted(PLAIN) == samples.grafted(PLAIN)
    assert samples.grafted(samples.grafted(PLAIN)) == samples.grafted(PLAIN)


def test_grafting_other_numbers_and_back_gives_the_same_bytes() -> None:
    once = samples.grafted(PLAIN, 1)
    assert samples.grafted(samples.grafted(once, 2), 1) == once
    assert samples.grafted(once, 2) != once


def test_an_unchanged_sheet_keeps_its_packed_bytes_while_another_changes() -> None:
    once = samples.grafted(PLAIN)
    sheets = [samples.request_sheet(), samples.rows_sheet(2)]
    changed = graft(Package.open(once), sheets, samples.names(), samples.STATE)
    before, after = zips.raw(once), zips.raw(changed)
    parts = dict(zips.sheet_parts(zips.members(once)))
    assert before[parts["fit request"]] == after[parts["fit request"]]
    assert before[parts["fit rows"]] != after[parts["fit rows"]]
    assert set(before) == set(after)


def test_sheets_of_ours_that_are_not_in_the_list_stay() -> None:
    once = samples.grafted(PLAIN)
    again = graft(Package.open(once), [samples.rows_sheet(2)], samples.names(), samples.STATE)
    assert tabs(again) == tabs(once)
    assert Package.open(again).of_role("fit request") is not None
    parts = dict(zips.sheet_parts(zips.members(once)))
    assert zips.raw(once)[parts["fit request"]] == zips.raw(again)[parts["fit request"]]
    assert faults(again) == []


def test_fewer_charts_leave_no_chart_behind() -> None:
    once = samples.grafted(PLAIN)
    fewer = graft(Package.open(once), [replace(samples.rows_sheet(), charts=())], samples.names(), samples.STATE)
    assert not [name for name in zips.members(fewer) if "chart" in name or "drawing" in name]
    assert faults(fewer) == []
    one = graft(Package.open(once), [replace(samples.rows_sheet(), charts=samples.rows_sheet().charts[:1])], [], {})
    assert [name for name in zips.members(one) if "charts/" in name] == ["xl/charts/chart1.xml"]


def test_sheets_named_in_remove_go_with_all_that_is_theirs() -> None:
    once = samples.grafted(PLAIN)
    rest = graft(Package.open(once), [samples.request_sheet()], [], {}, remove=frozenset({"fit rows"}))
    assert tabs(rest) == ["Refits", "Notes", "fit request"]
    assert not [name for name in zips.members(rest) if "chart" in name or "drawing" in name]
    assert not [name for name, _ in names_in(rest) if "rows" in name]
    assert faults(rest) == []


def test_what_was_stored_is_replaced() -> None:
    once = samples.grafted(PLAIN)
    again = graft(Package.open(once), samples.sheets(), samples.names(), {"other": "x"})
    assert Package.open(again).state == {"other": "x"}


# --- recognition ---------------------------------------------------------------------------------------------------


def test_a_renamed_and_moved_sheet_is_replaced_where_it_is() -> None:
    original = zips.build(zips.members(PLAIN))
    parts = zips.members(samples.grafted(original))
    text = parts["xl/workbook.xml"].decode().replace("'fit rows'!", "'Größe, it''s'!")
    parts["xl/workbook.xml"] = text.replace('name="fit rows"', 'name="Größe, it\'s"').encode()
    renamed = corpus.user_moves_our_last_sheet(zips.build(parts))
    package = Package.open(renamed)
    assert (package.sheets[0].name, package.sheets[0].ours) == ("Größe, it's", "fit rows")
    again = graft(package, [samples.rows_sheet(2, "Größe, it's")], samples.names(), samples.STATE)
    assert tabs(again) == tabs(renamed) == ["Größe, it's", "Refits", "Notes", "fit request"]
    assert faults(again) == []
    assert names_in(again)["_savefit.sheet.fit_rows", "0"] == "'Größe, it''s'!$A$1"
    assert names_in(again)["_xlnm.Print_Titles", "0"] == "'Größe, it''s'!$1:$4"
    assert harm.changed_after_strip(original, strip(Package.open(again))) == []


def test_a_sheet_laid_out_for_another_tab_text_is_a_programming_error() -> None:
    once = edited_book(samples.grafted(PLAIN), 'name="fit rows"', 'name="Mine"')
    with pytest.raises(ValueError, match="laid out for the tab"):
        graft(Package.open(once), [samples.rows_sheet()], [], {})


def test_a_hidden_sheet_of_ours_stays_hidden() -> None:
    once = edited_book(samples.grafted(PLAIN), 'name="fit rows"', 'name="fit rows" state="hidden"')
    again = samples.grafted(once, 2)
    assert [sheet.state for sheet in Package.open(again).sheets] == ["visible", "visible", "visible", "hidden"]


def test_after_openpyxl_saved_the_file_our_sheets_and_charts_are_recognised() -> None:
    loaded = openpyxl.load_workbook(io.BytesIO(samples.grafted(PLAIN)))
    loaded["fit request"]["B2"] = "response"
    out = io.BytesIO()
    loaded.save(out)
    package = Package.open(out.getvalue())
    assert [sheet.ours for sheet in package.sheets] == [None, None, "fit request", "fit rows"]
    assert package.state == samples.STATE
    again = graft(package, samples.sheets(), samples.names(), samples.STATE)
    assert len([name for name in zips.members(again) if re.search(r"charts/chart\d", name)]) == 2
    assert faults(again) == []
    assert graft(Package.open(again), samples.sheets(), samples.names(), samples.STATE) == again


# --- the user's sheets and names -----------------------------------------------------------------------------------


def test_a_filled_sheet_of_the_users_with_our_name_is_refused() -> None:
    data = samples.plain_workbook("Refits", "Fit Rows")
    with pytest.raises(FileRefused) as refusal:
        samples.grafted(data)
    assert key_of(refusal) == "sheet-not-ours"
    assert '"Fit Rows"' in refusal.value.problem.text


def test_a_filled_sheet_that_the_caller_knows_may_become_ours() -> None:
    data = samples.plain_workbook("Refits", "fit request")
    made = graft(Package.open(data), [samples.request_sheet()], [], {}, adopt=frozenset({"Fit Request"}))
    assert tabs(made) == ["Refits", "fit request"]
    assert Package.open(made).sheets[1].ours == "fit request"
    assert faults(made) == []


def test_an_empty_sheet_with_our_name_becomes_ours_in_its_place() -> None:
    loaded = openpyxl.load_workbook(io.BytesIO(PLAIN))
    loaded.create_sheet("fit request", 0)
    loaded.active = 0
    out = io.BytesIO()
    loaded.save(out)
    made = samples.grafted(out.getvalue())
    assert tabs(made) == ["fit request", "Refits", "Notes", "fit rows"]
    assert Package.open(made).sheets[0].ours == "fit request"
    assert faults(made) == []


def test_a_chartsheet_with_our_name_is_refused() -> None:
    data = zips.edited(PLAIN, "xl/_rels/workbook.xml.rels", "relationships/worksheet", "relationships/chartsheet")
    data = edited_book(data, 'name="Refits"', 'name="fit rows"')
    with pytest.raises(FileRefused) as refusal:
        graft(Package.open(data), [samples.rows_sheet()], [], {}, adopt=frozenset({"fit rows"}))
    assert key_of(refusal) == "sheet-not-ours"


@pytest.mark.parametrize("refers_to", ["Refits!$A$1", "17", "'fit rows'!$A$1+Refits!$A$1", "#REF!"])
def test_a_name_of_the_users_called_like_ours_is_refused(refers_to: str) -> None:
    names = f'<definedNames><definedName name="FIT_A_N">{refers_to}</definedName></definedNames>'
    with pytest.raises(FileRefused) as refusal:
        samples.grafted(edited_book(PLAIN, "</sheets>", f"</sheets>{names}"))
    assert key_of(refusal) == "name-not-ours"


def test_a_table_of_the_users_called_like_a_name_of_ours_is_refused() -> None:
    parts = synthetic.base()
    main = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    synthetic.add(parts, "xl/tables/table1.xml", f'<table xmlns="{main}" id="1" displayName="Fit_a_n" ref="A1:B2"/>',
                  "application/vnd.openxmlformats-officedocument.spreadsheetml.table+xml", "xl/worksheets/sheet1.xml",
                  "http://schemas.openxmlformats.org/officeDocument/2006/relationships/table")  # fmt: skip
    with pytest.raises(FileRefused) as refusal:
        samples.grafted(zips.build(parts))
    assert key_of(refusal) == "name-not-ours"
    assert "Refits" in refusal.value.problem.text


def test_the_users_names_for_our_cells_stay() -> None:
    once = edited_book(
        samples.grafted(PLAIN),
        "</definedNames>",
        "<definedName name=\"my_r2\">'fit rows'!$B$2</definedName></definedNames>",
    )
    again = samples.grafted(once, 2)
    assert names_in(again)["my_r2", None] == "'fit rows'!$B$2"


def test_names_of_models_that_are_gone_go_and_repointed_ones_stay() -> None:
    once = samples.grafted(PLAIN)
    once = edited_book(once, "'fit rows'!$A$5:$D$64", "Refits!$A$5")  # the user gave fit_A_rows another meaning
    again = graft(Package.open(once), samples.sheets(), [DefinedName("fit_B_n", "'fit rows'!$B$2")], {})
    people = {name: text for (name, _), text in names_in(again).items() if name.startswith("fit_")}
    assert people == {"fit_A_rows": "Refits!$A$5", "fit_B_n": "'fit rows'!$B$2"}
    with pytest.raises(FileRefused):
        graft(Package.open(once), samples.sheets(), samples.names(), {})


def test_what_can_be_no_name_is_a_programming_error() -> None:
    with pytest.raises(ValueError, match="no defined name"):
        graft(Package.open(PLAIN), [], [DefinedName("fit A n", "1")], {})


def test_a_name_without_a_cell_is_ours_by_record() -> None:
    constant = [DefinedName("fit_A_n", "17")]
    once = graft(Package.open(PLAIN), [samples.rows_sheet()], constant, {})
    again = graft(Package.open(once), [samples.rows_sheet()], [DefinedName("fit_A_n", "18")], {})
    assert names_in(again)["fit_A_n", None] == "18"


# --- what else of the workbook must hold ---------------------------------------------------------------------------


def test_the_tab_that_is_open_stays_open() -> None:
    viewing = edited_book(samples.grafted(PLAIN), "<workbookView ", '<workbookView activeTab="3" ')
    parts = zips.members(viewing)
    ours = dict(zips.sheet_parts(parts))["fit rows"]
    parts[ours] = parts[ours].replace(b"<sheetView ", b'<sheetView tabSelected="1" zoomScale="85" ', 1)
    parts["xl/worksheets/sheet1.xml"] = parts["xl/worksheets/sheet1.xml"].replace(b' tabSelected="1"', b"")
    again = samples.grafted(zips.build(parts), 2)
    new = zips.members(again)[ours].decode()
    assert 'tabSelected="1"' in new
    assert 'zoomScale="85"' in new
    assert faults(again) == []
    stripped = strip(Package.open(again))
    assert next(book(stripped).iter("{*}workbookView")).get("activeTab") == "1"


def test_two_tabs_selected_together_are_not_kept_so() -> None:
    parts = zips.members(samples.grafted(PLAIN))
    ours = dict(zips.sheet_parts(parts))["fit rows"]
    parts[ours] = parts[ours].replace(b"<sheetView ", b'<sheetView tabSelected="1" ', 1)
    assert faults(samples.grafted(zips.build(parts), 2)) == []


def test_only_our_entries_leave_the_calculation_chain() -> None:
    data = synthetic.custom_views_and_chain()
    assert zips.raw(samples.grafted(data))["xl/calcChain.xml"] == zips.raw(data)["xl/calcChain.xml"]
    parts = zips.members(samples.grafted(data))
    ids = sheet_ids(parts)
    main = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    own = ids["fit rows"]
    chain = f'<c r="B2" i="{own}" l="1"/><c r="B3"/><c r="B10" i="17"/><c r="B10" i="5"/><c r="A5" i="{own}"/>'
    parts["xl/calcChain.xml"] = f'<calcChain xmlns="{main}">{chain}</calcChain>'.encode()
    again = samples.grafted(zips.build(parts), 2)
    left = etree.fromstring(zips.members(again)["xl/calcChain.xml"])
    assert [dict(each.attrib) for each in left] == [{"r": "B10", "i": "17", "l": "1"}, {"r": "B10", "i": "5"}]


def test_an_entry_that_inherited_its_sheet_from_one_that_went_gets_it_written() -> None:
    from bridge.package.calc_chain import without_sheets

    main = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    entries = '<c r="A1" i="1"/><c r="A2" i="2"/><c r="A3"/><c r="A4" i="1"/><c r="A5"/>'
    root = etree.fromstring(f'<calcChain xmlns="{main}">{entries}</calcChain>')
    assert without_sheets(root, {2})
    assert [dict(each.attrib) for each in root] == [{"r": "A1", "i": "1"}, {"r": "A4", "i": "1"}, {"r": "A5"}]
    assert not without_sheets(root, {1})


def test_a_chain_of_our_entries_alone_goes_as_a_whole() -> None:
    parts = zips.members(samples.grafted(PLAIN))
    ids = sheet_ids(parts)["fit rows"]
    main = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    synthetic.add(parts, "xl/calcChain.xml", f'<calcChain xmlns="{main}"><c r="B2" i="{ids}"/></calcChain>',
                  "application/vnd.openxmlformats-officedocument.spreadsheetml.calcChain+xml", "xl/workbook.xml",
                  "http://schemas.openxmlformats.org/officeDocument/2006/relationships/calcChain")  # fmt: skip
    again = samples.grafted(zips.build(parts), 2)
    assert "xl/calcChain.xml" not in zips.members(again)
    assert "calcChain" not in zips.members(again)["xl/_rels/workbook.xml.rels"].decode()
    assert faults(again) == []


def test_positions_keep_pointing_at_the_same_sheets_when_sheets_of_ours_in_the_middle_go() -> None:
    data = synthetic.custom_views_and_chain()
    moved = corpus.user_moves_our_last_sheet(samples.grafted(data))
    points = harm._points(zips.members(data))
    stripped = harm._points(zips.members(strip(Package.open(moved))))
    assert points == stripped


def test_sheet_ids_are_fresh_and_within_the_formats_limit() -> None:
    for first, expected in (("17", {"18", "19"}), ("65534", {"1", "3"})):
        data = edited_book(PLAIN, 'sheetId="1"', f'sheetId="{first}"')
        ids = [each.get("sheetId") for each in book(samples.grafted(data)).iter("{*}sheet")]
        assert set(ids[2:]) == expected


def test_a_macro_sheets_module_name_is_kept() -> None:
    parts = zips.members(samples.grafted(PLAIN))
    ours = dict(zips.sheet_parts(parts))["fit rows"]
    parts[ours] = parts[ours].replace(b"<sheetPr>", b'<sheetPr codeName="Sheet4">')
    again = zips.members(samples.grafted(zips.build(parts), 2))
    assert b'<sheetPr codeName="Sheet4">' in again[ours]


def test_nasty_tab_texts_are_escaped_in_every_place() -> None:
    tab = 'a\'b "c" <d>&e'
    sheet = replace(samples.rows_sheet(1, tab), name="fit rows")
    data = graft(Package.open(PLAIN), [sheet], [DefinedName("fit_A_n", "'a''b \"c\" <d>&e'!$B$2")], {})
    assert tabs(data)[-1] == tab
    assert faults(data) == []
    assert Package.open(data).sheets[-1].ours == "fit rows"
    assert samples.rows_sheet(1, tab).links


def test_a_sheet_of_no_cells_and_no_names_can_be_put_in() -> None:
    data = graft(Package.open(PLAIN), [Sheet("fit history", {})], [], {})
    assert faults(data) == []
    assert Package.open(data).state == {}


def test_nothing_is_half_done_when_the_last_sheet_is_refused() -> None:
    data = samples.plain_workbook("Refits", "fit rows")
    before = bytes(bytearray(data))
    with pytest.raises(FileRefused):
        graft(Package.open(data), [Sheet("fit request", {(0, 0): Cell("x")}), samples.rows_sheet()], [], {})
    assert data == before
