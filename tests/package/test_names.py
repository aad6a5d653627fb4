"""Defined names, marks and stored texts."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from lxml import etree

from bridge.package import mark, names
from bridge.package.mark import LaidOut
from bridge.package.names import Name
from bridge.page.cells import quoted
from tests.package.invariants import balanced

_MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"


def _workbook(inner: str) -> etree._Element:
    return etree.fromstring(f'<workbook xmlns="{_MAIN}"><sheets/>{inner}<calcPr/></workbook>')


@pytest.mark.parametrize(
    ("text", "sheets"),
    [
        ("'fit rows'!$A$1", ("fit rows",)),
        ("Refits!A1:Refits!B2", ("Refits", "Refits")),
        ("'It''s \"so\"'!A1", ('It\'s "so"',)),
        ('"Refits!A1"', ()),
        ("IF(A1=\"x!y\",Größe!B2,'a,b'!C3)", ("Größe", "a,b")),
        ("#REF!$A$1", ()),
        ("#REF!", ()),
        ("'fit rows'!#REF!", ("fit rows",)),
        ("SUM(One!A1,-Two!B2)", ("One", "Two")),
        ("17", ()),
    ],
)
def test_the_sheets_a_formula_mentions(text: str, sheets: tuple[str, ...]) -> None:
    assert names.sheets_mentioned(text) == sheets


@given(st.text(st.characters(codec="utf-8", exclude_categories=["Cs", "Cc"]), min_size=1, max_size=31))
def test_any_tab_is_found_in_a_reference_to_it(tab: str) -> None:
    assert names.sheets_mentioned(f"{quoted(tab)}!$A$1") == (tab,)
    assert names.without_sheets(f"{quoted(tab)}!$A$1:$C$9") == "A1:C9"


@pytest.mark.parametrize("name", ["fit_A_n", "_x", "Größe", "a.b", "RC_1", "A1B", "ABCD1", "R1C1x", "\\x"])
def test_valid_names(name: str) -> None:
    assert names.is_valid(name)


@pytest.mark.parametrize(
    "name", ["", "1a", "a b", "A1", "xfd1048576", "R", "c", "R1C1", "r5", "a-b", "a!b", "x" * 256, "TRUE"]
)
def test_invalid_names(name: str) -> None:
    assert not names.is_valid(name)


def test_a_new_list_of_names_goes_where_the_schema_wants_it() -> None:
    root = _workbook("<externalReferences/>")
    names.append_names(root, [Name("a", "B!$A$1", 2, True, "why")])
    assert [etree.QName(each).localname for each in root] == ["sheets", "externalReferences", "definedNames", "calcPr"]
    assert names.read_names(root) == (Name("a", "B!$A$1", 2, True, "why"),)


def test_removing_a_sheet_shifts_scopes() -> None:
    root = _workbook("")
    names.append_names(root, [Name("a", "1", 0), Name("b", "2", 1), Name("c", "3", 2), Name("d", "4")])
    names.shift_scopes(root, 1)
    assert [(each.name, each.scope) for each in names.read_names(root)] == [("a", 0), ("c", 1), ("d", None)]


# --- texts ---------------------------------------------------------------------------------------------------------


@given(st.text(max_size=400))
def test_any_text_is_stored_and_read_back(text: str) -> None:
    held = mark.constants("_savefit.state.key", text)
    text = text.encode("utf-8", "replace").decode()
    assert mark.texts(held, mark.STATE) == {"key": text}


@pytest.mark.parametrize("length", [0, 199, 200, 201, 3799, 3801, 20_000])
def test_long_texts_are_split_within_the_formats_limits(length: int) -> None:
    text = ('ab"c&é' * length)[:length]
    held = mark.constants("_savefit.names", text)
    assert mark.texts(held, mark.NAMES) == {"": text}
    for name in held:
        assert name.hidden
        assert len(name.refers_to) <= 8192
        assert balanced(name.refers_to)
        assert max(map(len, name.refers_to.split("&"))) <= 257


def test_a_text_survives_blanks_that_programs_put_around_the_joints() -> None:
    (held,) = mark.constants("_savefit.state.key", "x" * 500)
    spaced = Name(held.name, held.refers_to.replace('"&"', '" & "'))
    assert mark.texts([spaced], mark.STATE) == {"key": "x" * 500}


@given(
    st.builds(
        LaidOut,
        st.dictionaries(st.integers(0, 500), st.floats(1, 255).map(lambda width: round(width, 3)), max_size=5),
        st.lists(st.from_regex(r"\A[0-9a-f]{8}\Z"), max_size=4).map(tuple),
        st.sampled_from(["", "A1:F40", "A1:B2,C3:D4"]),
        st.sampled_from(["", "1:4"]),
    )
)
def test_what_a_layout_gave_is_read_back(laid: LaidOut) -> None:
    assert mark.laid_out(laid.text()) == laid


def test_a_record_someone_spoilt_counts_as_not_recorded() -> None:
    assert mark.laid_out("rubbish") == LaidOut()
    assert mark.laid_out("") == LaidOut()


# --- marks ---------------------------------------------------------------------------------------------------------


@given(st.text(st.characters(codec="utf-8", exclude_categories=["Cs"]), min_size=1, max_size=31))
def test_any_role_reads_back_from_its_mark(role: str) -> None:
    assert mark.decoded(mark.coded(role)) == role
    assert names.is_valid(mark.SHEET + mark.coded(role))


TABS = ["Refits", "fit rows", "fit rows (2)", "Mine"]
WHOLE = mark.SHEET + "fit_rows"


@pytest.mark.parametrize(
    ("marks", "owner"),
    [
        ([Name(WHOLE, "'fit rows'!$A$1"), Name(WHOLE, "'fit rows'!$A$1", 1)], 1),
        # renamed or moved: the reference went along
        ([Name(WHOLE, "Mine!$A$1"), Name(WHOLE, "Mine!$A$1", 3)], 3),
        # copied inside the workbook: the copy's own mark refers to the copy
        ([Name(WHOLE, "'fit rows'!$A$1"), Name(WHOLE, "'fit rows (2)'!$A$1", 2), Name(WHOLE, "'fit rows'!$A$1", 1)], 1),
        # the original was deleted, a copy of it is left
        ([Name(WHOLE, "#REF!$A$1"), Name(WHOLE, "'fit rows (2)'!$A$1", 2)], None),
        ([Name(WHOLE, "#REF!"), Name(WHOLE, "'fit rows (2)'!$A$1", 2)], None),
        # only its first row was deleted (two ways of writing that)
        ([Name(WHOLE, "#REF!"), Name(WHOLE, "#REF!", 1), Name(WHOLE, "'fit rows (2)'!$A$1", 2)], 1),
        ([Name(WHOLE, "'fit rows'!#REF!"), Name(WHOLE, "'fit rows'!#REF!", 1)], 1),
        # a program renamed the tab without minding references
        ([Name(WHOLE, "Gone!$A$1"), Name(WHOLE, "Gone!$A$1", 3)], 3),
        # a program lost names of the whole workbook, or those of sheets
        ([Name(WHOLE, "'fit rows'!$A$1", 1)], 1),
        ([Name(WHOLE, "'fit rows'!$A$1")], 1),
        # several sheets bear it and nothing else tells: only our own name for it decides
        ([Name(WHOLE, "x!$A$1", 2), Name(WHOLE, "x!$A$1", 1)], 1),
        ([Name(WHOLE, "x!$A$1", 2), Name(WHOLE, "x!$A$1", 3)], None),
        ([Name(WHOLE, "x!$A$1", 77)], None),
    ],
)
def test_which_sheet_is_ours(marks: list[Name], owner: int | None) -> None:
    assert mark.owners(TABS, marks) == ({} if owner is None else {owner: "fit rows"})
