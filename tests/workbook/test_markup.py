"""The search of a sheet's bytes and the walk through its elements find the same."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.workbook import markup

CELLS = st.sampled_from(
    [
        ('t="e"', "<v>#N/A</v>"),
        ('t="e"', "<f>1/0</f><v>#DIV/0!</v>"),
        ("", "<f>A1</f>"),
        ("", "<f>A1</f><v></v>"),
        ("", "<f>A1</f><v/>"),
        ("", '<f t="shared" si="0"/><v>3</v>'),
        ("", '<f t="shared" si="0"/>'),
        ('t="str"', '<f>""</f><v></v>'),
        ('t="str"', "<f>A1</f><v>x</v>"),
        ('t="str"', "<v></v>"),
        ('t="s"', "<v>0</v>"),
        ('t="s"', "<v>1</v>"),
        ('t="inlineStr"', "<is><t></t></is>"),
        ('t="inlineStr"', "<is><t/></is>"),
        ('t="inlineStr"', '<is><t>t="e"</t></is>'),
        ("", "<v>1.5</v>"),
        ('s="3"', ""),
    ]
)


def sheet(rows: list[list[tuple[str, str]]], hidden: set[int], prefix: str = "") -> bytes:
    parts = []
    for row, cells in enumerate(rows):
        inner = "".join(
            f'<c r="{chr(65 + column)}{row + 1}" {kind}>{body}</c>'
            if body
            else f'<c r="{chr(65 + column)}{row + 1}" {kind}/>'
            for column, (kind, body) in enumerate(cells)
        )
        parts.append(f'<row r="{row + 1}"{" hidden=" + chr(34) + "1" + chr(34) if row in hidden else ""}>{inner}</row>')
    text = f"<sheetData>{''.join(parts)}</sheetData>"
    if prefix:
        text = text.replace("</", "\x00").replace("<", f"<{prefix}:").replace("\x00", f"</{prefix}:")
    name, space = (f"{prefix}:worksheet", f"xmlns:{prefix}") if prefix else ("worksheet", "xmlns")
    main = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    return f'<?xml version="1.0"?><{name} {space}="{main}">{text}</{name}>'.encode()


def as_sets(found: markup.Markup) -> tuple[set[tuple[int, ...]], ...]:
    places = (found.errors, found.no_value, found.empty_text)
    return (*({tuple(place) for place in one.tolist()} for one in places), {(row,) for row in found.hidden.tolist()})


@given(st.lists(st.lists(CELLS, max_size=6), min_size=1, max_size=6), st.sets(st.integers(0, 5)))
def test_search_and_walk_agree(rows: list[list[tuple[str, str]]], hidden: set[int]) -> None:
    searched = markup.scan(sheet(rows, hidden), (1,))
    walked = markup.scan(sheet(rows, hidden, "x"), (1,))
    assert as_sets(searched) == as_sets(walked)


def test_each_mark() -> None:
    rows = [[('t="e"', "<v>#N/A</v>"), ("", "<f>A1</f>"), ('t="s"', "<v>1</v>"), ("", "<v>2</v>")]]
    found = as_sets(markup.scan(sheet(rows, {0}), (1,)))
    assert found == ({(0, 0)}, {(0, 1)}, {(0, 2)}, {(0,)})


@pytest.mark.parametrize("prefix", ["", "x"])
def test_serials_are_exact(prefix: str) -> None:
    xml = sheet(
        [[("", "<v>45000.123456789123</v>"), ("", "<f>A1</f><v>1E2</v>")], [('t="d"', "<v>2021-01-01</v>")]],
        set(),
        prefix,
    )
    wanted = np.array([[0, 0], [0, 1], [1, 0]])
    assert markup.serials(xml, wanted) == {(0, 0): 45000.123456789123, (0, 1): 100.0}


def test_empty_shared_texts() -> None:
    texts = "<si><t>oak</t></si><si><t/></si><si><t></t></si><si><r><t>a</t></r><rPh><t/></rPh></si><si/>"
    xml = f'<sst xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main">{texts}</sst>'.encode()
    assert markup.empty_shared_strings(xml) == (1, 2, 4)
    assert markup.empty_shared_strings(b"") == ()


@pytest.mark.parametrize("quote", ['"', "'"])
def test_how_far_a_sheet_reaches(quote: str) -> None:
    near = sheet([[("", "<v>1</v>")]], set())
    assert markup.reaches_too_far(near) is None
    row = '<row r="1048576"><c s="1" r="XFD1048576"><v>1</v></c></row>'.replace('"', quote)
    far = near.replace(b"</sheetData>", f"{row}</sheetData>".encode())
    assert markup.reaches_too_far(far) == "XFD1048576"
    assert markup.reaches_too_far(far.replace(b"<v>1</v></c></row></sheetData>", b"</c></row></sheetData>")) is None


def test_text_in_another_encoding_is_walked() -> None:
    xml = (
        sheet([[('t="e"', "<v>#N/A</v>")]], set()).decode().replace('version="1.0"', 'version="1.0" encoding="UTF-16"')
    )
    assert as_sets(markup.scan(xml.encode("utf-16")))[0] == {(0, 0)}
