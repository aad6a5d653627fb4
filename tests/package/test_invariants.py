"""Every check of the invariant checker is proven by seeding the fault it is there for."""

from __future__ import annotations

import re
from collections.abc import Callable

import pytest

from tests.package import samples, zips
from tests.package.invariants import CHECKS, balanced, faults, faults_of_ours

BOOK, STYLES, TYPES = "xl/workbook.xml", "xl/styles.xml", "[Content_Types].xml"
OURS = "xl/worksheets/sheet4.xml"  # `fit rows` in the sample: two sheets of the user's, then ours


def _change(part: str, pattern: str, replacement: str) -> Callable[[dict[str, bytes]], None]:
    def change(parts: dict[str, bytes]) -> None:
        text, times = re.subn(pattern, replacement, parts[part].decode(), count=1)
        assert times == 1, f"{pattern} is not in {part}"
        parts[part] = text.encode()

    return change


def _drop(part: str) -> Callable[[dict[str, bytes]], None]:
    return lambda parts: parts.pop(part) and None


def _add(part: str, content: bytes) -> Callable[[dict[str, bytes]], None]:
    return lambda parts: parts.update({part: content})


def _select_all(parts: dict[str, bytes]) -> None:
    for name in ("xl/worksheets/sheet1.xml", OURS):
        text = parts[name].decode().replace(' tabSelected="1"', "")
        parts[name] = text.replace("<sheetView ", '<sheetView tabSelected="1" ', 1).encode()


SEEDS: list[tuple[str, Callable[[dict[str, bytes]], None]]] = [
    ("cell formats", _change(OURS, r' s="\d+"', ' s="9999"')),
    ("highlight formats", _change(OURS, r'dxfId="\d+"', 'dxfId="99"')),
    ("format pieces", _change(STYLES, r'(<cellXfs.*?)fontId="\d+"', r'\1fontId="99"')),
    ("format pieces", _change(STYLES, r'(<cellXfs.*?)fillId="\d+"', r'\1fillId="99"')),
    ("format pieces", _change(STYLES, r'(<cellXfs.*?)borderId="\d+"', r'\1borderId="99"')),
    ("format pieces", _change(STYLES, r'(<cellXfs.*?)numFmtId="\d+"', r'\1numFmtId="999"')),
    ("format pieces", _change(STYLES, r'(<cellXfs.*?)xfId="\d+"', r'\1xfId="99"')),
    ("number format ids", _change(STYLES, r"(<numFmt [^>]*>)", r"\1\1")),
    ("positions", _change(BOOK, r'localSheetId="\d+"', 'localSheetId="9"')),
    ("positions", _change(BOOK, "<workbookView ", '<workbookView activeTab="9" ')),
    ("positions", _change(BOOK, "<workbookView ", '<workbookView firstSheet="9" ')),
    ("names", _change(BOOK, 'name="fit_A_n"', 'name="FIT_a_rows"')),
    ("names", _change(BOOK, 'name="fit_A_n"', 'name="fit A"')),
    ("names", _change(BOOK, 'name="fit_A_n"', 'name="AB12"')),
    ("tabs", _change(BOOK, 'name="fit rows"', 'name="notes"')),
    ("tabs", _change(BOOK, 'name="fit rows"', f'name="{"x" * 32}"')),
    ("tabs", _change(BOOK, 'name="fit rows"', 'name="a/b"')),
    ("sheet ids", _change(BOOK, r'sheetId="4"', 'sheetId="1"')),
    ("selected tabs", _select_all),
    ("content types", _change(TYPES, r"<Override [^>]*sheet4[^>]*>", "")),
    ("content types", _change(TYPES, r"(<Override [^>]*sheet4[^>]*>)", r"\1\1")),
    ("content types", _add("xl/thing.bin", b"x")),
    ("content types", _change(TYPES, "</Types>", '<Override PartName="/xl/none.xml" ContentType="a/b"/></Types>')),
    ("targets", _drop("xl/charts/chart1.xml")),
    ("targets", _drop(OURS)),
    ("relationship ids", _change(OURS, r'<drawing r:id="\w+"', '<drawing r:id="rId77"')),
    ("orphans", _add("xl/charts/chart9.xml", b"<x/>")),
    ("formulas", _change(OURS, r"<f>SUM\(", "<f>SUM((")),
    ("formulas", _change(BOOK, r"'fit rows'!\$B\$2", "'fit rows!$B$2")),
    ("merged cells", _change(OURS, r'(<mergeCell ref="A1:D1"/>)', r'\1<mergeCell ref="B1:B2"/>')),
    ("cell order", _change(OURS, r'<row r="2"', '<row r="1"')),
    ("cell order", _change(OURS, r'<c r="B2"', '<c r="A2"')),
]


@pytest.fixture(scope="module")
def sound() -> dict[str, bytes]:
    return zips.members(samples.grafted(samples.plain_workbook()))


@pytest.mark.parametrize(("check", "seed"), SEEDS)
def test_a_seeded_fault_is_found(sound: dict[str, bytes], check: str, seed: Callable[[dict[str, bytes]], None]) -> None:
    parts = dict(sound)
    seed(parts)
    assert any(fault.startswith(f"{check}:") for fault in faults(zips.build(parts)))


def test_a_chain_entry_without_a_formula_is_found(sound: dict[str, bytes]) -> None:
    parts = dict(sound)
    main = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    parts["xl/calcChain.xml"] = f'<calcChain xmlns="{main}"><c r="A1" i="1"/></calcChain>'.encode()
    kind = "http://schemas.openxmlformats.org/officeDocument/2006/relationships/calcChain"
    relation = f'<Relationship Id="rId90" Type="{kind}" Target="calcChain.xml"/></Relationships>'
    _change("xl/_rels/workbook.xml.rels", "</Relationships>", relation)(parts)
    assert any(fault.startswith("calculation chain:") for fault in faults(zips.build(parts)))


def test_every_check_has_a_seed() -> None:
    assert {check for check, _ in SEEDS} | {"calculation chain"} == set(CHECKS)


@pytest.mark.parametrize(
    ("pattern", "replacement"),
    [
        (r'<c r="A2" s="\d+" t="inlineStr">.*?</c>', '<c r="A2" s="1" t="s"><v>0</v></c>'),
        (r'<c r="B2" s="\d+">', '<c r="B2">'),
        (r"(<c r=\"B2\"[^>]*><f>.*?</f>)<v>[^<]*</v>", r"\1"),
        (r"(<c r=\"B5\"[^>]*>)<v>[^<]*</v>", r"\1<v>nan</v>"),
        (r"(<c r=\"B5\"[^>]*>)<v>[^<]*</v>", r"\1<v>inf</v>"),
    ],
)
def test_a_fault_on_our_own_sheet_is_found(sound: dict[str, bytes], pattern: str, replacement: str) -> None:
    parts = dict(sound)
    assert not faults_of_ours(zips.build(parts), {"fit rows", "fit request"})
    _change(OURS, pattern, replacement)(parts)
    assert faults_of_ours(zips.build(parts), {"fit rows"})


def test_a_list_longer_than_the_format_allows_is_found(sound: dict[str, bytes]) -> None:
    parts = dict(sound)
    _change("xl/worksheets/sheet3.xml", r"<formula1>\"response", f'<formula1>"{"x" * 260}')(parts)
    assert faults_of_ours(zips.build(parts), {"fit request"})


def test_sound_packages_have_no_faults(sound: dict[str, bytes]) -> None:
    assert faults(samples.plain_workbook()) == []
    assert faults(zips.build(sound)) == []


@pytest.mark.parametrize(
    ("formula", "sound_formula"),
    [
        ("SUM(A1:B2)", True),
        ('IF(A1=")","(",1)', True),
        ("'it''s (here)'!A1", True),
        ("SUM(A1", False),
        ("A1)", False),
        ('"open', False),
        ("{1,2}", True),
        ("(1}", False),
    ],
)
def test_balance(formula: str, sound_formula: bool) -> None:
    assert balanced(formula) is sound_formula
