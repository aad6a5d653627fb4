"""What a worksheet's own XML says and the cell reader does not: errors, formulas without a value, empty texts, hidden
rows, exact date serials, formula texts.

Big sheets are searched as bytes: the marks are rare, and a search for them costs a fraction of reading the cells.
Sheets written in an unusual way (prefixed names, no cell references, comments) are walked element by element.
ECMA-376 part 1, 18.3.1.4 (c), 18.3.1.40 (f), 18.3.1.73 (row), 18.18.11 (cell types).
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from io import BytesIO
from itertools import chain

import numpy as np
from lxml import etree
from numpy.typing import NDArray

from bridge.page.cells import address

MOST_CELLS = 50_000_000  # a reader that keeps cells in a rectangle needs 24 bytes for each
_HEAD = 4096  # a program writes all cells of a sheet in one manner: the first few thousand bytes show it

_FORMULA = rb"<f(?:\s[^>]*)?(?:/>|>[^<]*</f>)"
_ERROR = re.compile(rb"<c\s([^>]*?\bt=[\"']e[\"'][^>]*)>")
_VALUELESS = re.compile(rb"<c\s([^>]*)>\s*" + _FORMULA + rb"\s*(<v\s*/>|<v>\s*</v>)?\s*</c>")
_EMPTY_INLINE = re.compile(rb"<c\s([^>]*)>\s*<is>\s*(?:<t(?:\s[^>]*)?/>|<t(?:\s[^>]*)?></t>)\s*</is>\s*</c>")
_EMPTY_PLAIN = re.compile(rb"<c\s([^>]*\bt=[\"']str[\"'][^>]*)>\s*(?:<v\s*/>|<v></v>)\s*</c>")
_HIDDEN = re.compile(rb"<row\s([^>]*?\bhidden=[\"'](?:1|true)[\"'][^>]*)>")
_FAR = (
    re.compile(rb"r=\"([A-Za-z]{2,3})(\d+)\"([^>]*)>(</c)?"),
    re.compile(rb"r='([A-Za-z]{2,3})(\d+)'([^>]*)>(</c)?"),
)
_REFERENCE = re.compile(rb"\br=[\"']([A-Z]{1,3})(\d{1,7})[\"']")
_ROW = re.compile(rb"\br=[\"'](\d{1,7})[\"']")
_STORED_NUMBER = r"\s*[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d{1,3})?\s*"
_TEXT_TYPE = re.compile(rb"\bt=[\"']str[\"']")


_Places = list[tuple[int, int]]


@dataclass(frozen=True, slots=True)
class Markup:
    """Zero-based positions: `errors`, `no_value`, `empty_text` of shape (k, 2) as (row, column); `hidden` rows (k,)."""

    errors: NDArray[np.int64]
    no_value: NDArray[np.int64]
    empty_text: NDArray[np.int64]
    hidden: NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class WalkedCell:
    """One cell as written: zero-based position, type, stored value's text (None: no value), formula's text, if any.

    A formula shared with other cells has `shared` set; `formula` is empty in all but the first of them.
    """

    row: int
    column: int
    kind: str
    value: str | None
    formula: str | None
    shared: str | None


class _Unusual(Exception):
    """The sheet is written in a way that a search of its bytes does not understand."""


# --- the search --------------------------------------------------------------------------------


def scan(xml: bytes, empty_shared: Iterable[int] = ()) -> Markup:
    """The marks of a worksheet; `empty_shared` are the numbers of shared texts that are empty.

    Raises lxml.etree.XMLSyntaxError where an unusual sheet cannot be parsed.
    """
    if _is_plain(xml):
        try:
            return _searched(xml, tuple(empty_shared))
        except _Unusual:
            pass
    return _walked(xml, frozenset(empty_shared))


def empty_shared_strings(xml: bytes) -> tuple[int, ...]:
    """The numbers of the shared texts that are empty (18.4.8); almost always none."""
    if not re.search(rb"<(?:\w+:)?si\s*/>|<(?:\w+:)?t(?:\s[^>]*)?/>|<(?:\w+:)?t(?:\s[^>]*)?></", xml):
        return ()
    found = []
    at = -1
    for _, item in etree.iterparse(BytesIO(xml), events=("end",), tag="{*}si", **_SAFE):
        at += 1
        if not _text_of(item):
            found.append(at)
        item.clear()
    return tuple(found)


def reaches_too_far(xml: bytes) -> str | None:
    """The address of the cell that makes the sheet's rectangle too big to read, or None where it is not."""
    far_column, last_row, where = 26, 1, ""
    for letters, row in _far_cells(xml):
        column = column_number(letters) + 1
        last_row = max(last_row, int(row))
        if column > far_column:
            far_column, where = column, f"{letters.decode().upper()}{int(row)}"
    too_far = far_column * max(last_row, _last_row(xml)) > MOST_CELLS
    return where if where and too_far else None


def serials(xml: bytes, wanted: NDArray[np.int64]) -> dict[tuple[int, int], float]:
    """The stored numbers of the cells at `wanted` (k, 2), exactly; a cell that stores no plain number is missing.

    Zero-based (row, column).
    """
    if _is_plain(xml):
        columns = np.unique(wanted[:, 1]).tolist()
        rows = {column: set(wanted[wanted[:, 1] == column, 0].tolist()) for column in columns}
        found: Iterable[tuple[tuple[int, int], str]] = chain.from_iterable(
            _column_values(xml, column, rows[column]) for column in columns
        )
    else:
        asked = set(map(tuple, wanted.tolist()))
        walked = ((cell.row, cell.column, cell.value or "") for cell in walk(xml))
        found = (((row, column), text) for row, column, text in walked if (row, column) in asked)
    return {at: float(text) for at, text in found if re.fullmatch(_STORED_NUMBER, text)}


def _column_values(xml: bytes, column: int, rows: set[int]) -> Iterator[tuple[tuple[int, int], str]]:
    letters = re.sub(r"\d", "", address(0, column)).encode()
    pattern = rb"\br=[\"']" + letters + rb"(\d+)[\"'][^>]*>\s*(?:" + _FORMULA + rb"\s*)?<v>([^<]*)</v>"
    for match in re.finditer(pattern, xml):
        row = int(match[1]) - 1
        if row in rows:
            yield (row, column), match[2].decode("ascii", "replace")


def _is_plain(xml: bytes) -> bool:
    if xml[:2] in (b"\xff\xfe", b"\xfe\xff"):
        return False
    start = xml.find(b"<sheetData")
    head = xml[: start + _HEAD] if start >= 0 else b""
    first_cell = head.find(b"<c ")
    usual = first_cell < 0 or _REFERENCE.search(head[first_cell : first_cell + 300]) is not None
    return start >= 0 and usual and b"<!" not in head and b"<worksheet" in head


def _searched(xml: bytes, empty_shared: tuple[int, ...]) -> Markup:
    marked_error = b't="e"' in xml or b"t='e'" in xml
    errors = [_position(match[1]) for match in _ERROR.finditer(xml)] if marked_error else []
    no_value: list[tuple[int, int]] = []
    empty: list[tuple[int, int]] = []
    if b"<f" in xml:
        for match in _VALUELESS.finditer(xml):
            is_text = match[2] is not None and _TEXT_TYPE.search(match[1])
            (empty if is_text else no_value).append(_position(match[1]))
    empty += [_position(match[1]) for pattern in _empty_patterns(xml, empty_shared) for match in pattern.finditer(xml)]
    hidden = [_row_number(match[1]) for match in _HIDDEN.finditer(xml)] if b"hidden=" in xml else []
    return _markup(errors, no_value, empty, hidden)


def _empty_patterns(xml: bytes, empty_shared: tuple[int, ...]) -> Iterator[re.Pattern[bytes]]:
    if b"inlineStr" in xml and (b"<t/>" in xml or b"></t>" in xml):
        yield _EMPTY_INLINE
    if b"<v></v>" in xml or b"<v/>" in xml:
        yield _EMPTY_PLAIN
    if empty_shared:
        numbers = b"|".join(str(number).encode() for number in empty_shared)
        yield re.compile(rb"<c\s([^>]*\bt=[\"']s[\"'][^>]*)>\s*<v>\s*(?:" + numbers + rb")\s*</v>")


def _position(attributes: bytes) -> tuple[int, int]:
    found = _REFERENCE.search(attributes)
    if found is None:
        raise _Unusual
    return int(found[2]) - 1, column_number(found[1])


def _row_number(attributes: bytes) -> int:
    found = _ROW.search(attributes)
    if found is None:
        raise _Unusual
    return int(found[1]) - 1


def column_number(letters: str | bytes) -> int:
    """Zero-based column of its letters: A -> 0, AA -> 26."""
    number = 0
    for letter in letters.upper() if isinstance(letters, bytes) else letters.upper().encode("ascii", "replace"):
        number = number * 26 + letter - 64
    return number - 1


def _far_cells(xml: bytes) -> Iterator[tuple[bytes, bytes]]:
    for match in chain.from_iterable(pattern.finditer(xml) for pattern in _FAR):
        holds_nothing = match[3].rstrip().endswith(b"/") or match[4] is not None
        if not holds_nothing:
            yield match[1], match[2]


def _last_row(xml: bytes) -> int:
    at = xml.rfind(b"<row ")
    found = _ROW.search(xml[at : at + 200]) if at >= 0 else None
    return int(found[1]) if found else 1


# --- the walk ----------------------------------------------------------------------------------

_SAFE = {"resolve_entities": False, "no_network": True, "load_dtd": False, "huge_tree": False}


def walk(xml: bytes) -> Iterator[WalkedCell]:
    """Every cell of a worksheet, element by element, with positions counted where references are missing.

    Raises lxml.etree.XMLSyntaxError.
    """
    row, column = -1, -1
    for event, element in etree.iterparse(BytesIO(xml), events=("start", "end"), tag=("{*}row", "{*}c"), **_SAFE):
        name = etree.QName(element).localname
        if event == "start" and name == "row":
            row, column = int(element.get("r") or row + 2) - 1, -1
        elif event == "end" and name == "c":
            row, column = _place(element.get("r"), row, column)
            yield _cell(element, row, column)
        if event == "end" and name == "row":
            element.clear()
            while element.getprevious() is not None:
                del element.getparent()[0]


def _place(reference: str | None, row: int, column: int) -> tuple[int, int]:
    found = re.fullmatch(r"\$?([A-Za-z]{1,3})\$?(\d{1,7})", reference or "")
    if found is None:
        return max(row, 0), column + 1
    return int(found[2]) - 1, column_number(found[1])


def _cell(element: etree._Element, row: int, column: int) -> WalkedCell:
    value = element.find("{*}v")
    formula = element.find("{*}f")
    inline = element.find("{*}is")
    text = value.text or "" if value is not None else None
    if inline is not None:
        text = _text_of(inline)
    shared = formula.get("si") if formula is not None and formula.get("t") == "shared" else None
    return WalkedCell(
        row, column, element.get("t") or "", text, None if formula is None else formula.text or "", shared
    )


def _text_of(item: etree._Element) -> str:
    """The text of a shared or inline string; reading aids of East Asian writing (18.4.6) are not part of it."""
    parts = [*item.iterfind("{*}t"), *item.iterfind("{*}r/{*}t")]
    return "".join(part.text or "" for part in parts)


def _walked(xml: bytes, empty_shared: frozenset[int]) -> Markup:
    errors, no_value, empty = [], [], []
    for cell in walk(xml):
        place = (cell.row, cell.column)
        if cell.kind == "e":
            errors.append(place)
        elif _is_empty_text(cell, empty_shared):
            empty.append(place)
        elif cell.formula is not None and not cell.value:
            no_value.append(place)
    return _markup(errors, no_value, empty, _hidden_rows(xml))


def _is_empty_text(cell: WalkedCell, empty_shared: frozenset[int]) -> bool:
    if cell.kind == "s":
        number = (cell.value or "").strip()
        return number.isdecimal() and int(number) in empty_shared
    return cell.value == "" and cell.kind in ("str", "inlineStr")


def _hidden_rows(xml: bytes) -> list[int]:
    hidden, row = [], -1
    for _, element in etree.iterparse(BytesIO(xml), events=("end",), tag="{*}row", **_SAFE):
        row = int(element.get("r") or row + 2) - 1
        if element.get("hidden") in ("1", "true"):
            hidden.append(row)
        element.clear()
    return hidden


def _markup(errors: _Places, no_value: _Places, empty: _Places, hidden: list[int]) -> Markup:
    return Markup(_pairs(errors), _pairs(no_value), _pairs(empty), np.unique(np.asarray(hidden, dtype=np.int64)))


def _pairs(places: _Places) -> NDArray[np.int64]:
    return np.asarray(places, dtype=np.int64).reshape(-1, 2)
