"""Cells as XML, row by row (ECMA-376 part 1, 18.3.1.73): single cells, and dense blocks from one template per row.

Texts are inline strings, so that the user's shared table stays untouched. Text that begins with = + - @ is a text
like any other, because only a `Formula` becomes an `f` element. Numbers that are not finite are never written.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from typing import Any

import numpy as np

from bridge.package import xml
from bridge.page.cells import Cell, Format, Formula, Scalar, column_letters
from bridge.page.sheet import Block, BlockColumn, Sheet

_CHUNK = 4096
_LONGEST_TEXT = 32_767  # what a cell can hold (Excel's published limits)
_EXACT = 2.0**53

FormatIndex = Callable[[Format], int]


def inline(text: str) -> str:
    """A text as an inline string's content."""
    return f'<is><t xml:space="preserve">{xml.xstring(text[:_LONGEST_TEXT])}</t></is>'


def number(value: float) -> str:
    """The shortest text that reads back as the same number."""
    return repr(int(value)) if value == math.floor(value) and abs(value) < _EXACT else repr(float(value))


def cell(reference: str, style: int, value: Scalar | Formula | None) -> str:
    """One cell element."""
    head = f'<c r="{reference}" s="{style}"'
    if isinstance(value, Formula):
        type_, stored = _stored(value.value)
        return f"{head}{type_}><f>{xml.formula(value.text.removeprefix('='))}</f><v>{stored}</v></c>"
    if value is None or value == "":
        return f"{head}/>"
    if isinstance(value, str):
        return f'{head} t="inlineStr">{inline(value)}</c>'
    if isinstance(value, (float, np.floating)) and not math.isfinite(value):
        return f"{head}/>"
    type_, stored = _stored(value)
    return f"{head}{type_}><v>{stored}</v></c>"


def _stored(value: Scalar) -> tuple[str, str]:
    """The `t` attribute and the text of `v` for a value; what is not finite reads as the error it would be."""
    if isinstance(value, str):
        return ' t="str"', xml.xstring(value[:_LONGEST_TEXT])
    if isinstance(value, (bool, np.bool_)):
        return ' t="b"', str(int(value))
    if not math.isfinite(value):
        return ' t="e"', "#NUM!"
    return "", number(value)


# --- blocks ----------------------------------------------------------------------------------------------------------


def block_rows(block: Block, xf: FormatIndex, first: int, last: int) -> list[str]:
    """The cells of a block's rows `first` to `last` (zero-based in the block, last excluded), a text per row."""
    numbers = list(range(block.row + first + 1, block.row + last + 1))
    template: list[str] = []
    streams: list[Iterable[Any]] = []
    for offset, column in enumerate(block.columns):
        part = _column(column, column_letters(block.column + offset), xf(column.format), numbers, first, last)
        template.append(part[0])
        streams.extend(part[1])
    pattern = "".join(template)
    return [pattern % values for values in zip(*streams, strict=True)]


def _column(
    column: BlockColumn, letters: str, style: int, numbers: Sequence[int], first: int, last: int
) -> tuple[str, list[Iterable[Any]]]:
    """A column's piece of the row template, and the values that fill it."""
    keys = None if column.keys is None else [int(each) for each in column.keys[first:last]]
    values = column.values[first:last]
    if isinstance(values, np.ndarray) and values.dtype.kind in "fiu" and bool(np.isfinite(values).all()):
        spec, plain = _plain_numbers(values)
        body, fill = _formula_template(column.formula, numbers, keys)
        return f'<c r="{letters}%d" s="{style}">{body}<v>{spec}</v></c>', [numbers, *fill, plain]
    # Some cells are empty or texts: each is written on its own.
    return "%s", [_single_cells(column.formula, values, letters, style, numbers, keys)]


def _plain_numbers(values: np.ndarray[Any, Any]) -> tuple[str, list[Any]]:
    if values.dtype.kind in "iu":
        return "%d", values.tolist()
    if bool(((values == np.floor(values)) & (np.abs(values) < _EXACT)).all()):
        return "%d", values.astype(np.int64).tolist()
    return "%r", (values + 0.0).tolist()  # + 0.0: no negative zero


_PLACE = re.compile(r"(\{row\}|\{key\})")


def _formula_template(
    formula: str | None, numbers: Sequence[int], keys: Sequence[int] | None
) -> tuple[str, list[Iterable[Any]]]:
    """A formula element with `%d` for the row and the key, and what fills them."""
    if formula is None:
        return "", []
    pieces, fill = [], []
    for piece in _PLACE.split(formula.removeprefix("=")):
        if piece in ("{row}", "{key}"):
            pieces.append("%d")
            fill.append(numbers if piece == "{row}" else _required(keys))
        else:
            pieces.append(xml.formula(piece).replace("%", "%%"))
    return f"<f>{''.join(pieces)}</f>", list(fill)


def _required(keys: Sequence[int] | None) -> Sequence[int]:
    if keys is None:
        raise ValueError("a block formula with {key} needs keys")
    return keys


def _single_cells(
    formula: str | None,
    values: Sequence[Any] | np.ndarray[Any, Any],
    letters: str,
    style: int,
    numbers: Sequence[int],
    keys: Sequence[int] | None,
) -> list[str]:
    pattern, fill = _formula_template(formula, numbers, keys)
    formulas = [pattern % each for each in zip(*fill, strict=True)] if fill else [pattern % ()] * len(numbers)
    texts: dict[str, tuple[str, str]] = {}  # few different texts fill long columns
    out = []
    for row, value, live in zip(numbers, values, formulas, strict=True):
        if isinstance(value, str):
            if value not in texts:
                texts[value] = _around_text(value, bool(formula))
            before, after = texts[value]
        else:
            before, after = _around_number(float(value))
        out.append(f'<c r="{letters}{row}" s="{style}"{before}{live if after else ""}{after}')
    return out


def _around_text(text: str, live: bool) -> tuple[str, str]:
    """What stands before and after the formula in a text cell, behind its reference and style."""
    if not text and not live:
        return "/>", ""
    if live:
        return ' t="str">', f"<v>{xml.xstring(text[:_LONGEST_TEXT])}</v></c>"
    return ' t="inlineStr">', f"{inline(text)}</c>"


def _around_number(value: float) -> tuple[str, str]:
    return (">", f"<v>{number(value)}</v></c>") if math.isfinite(value) else ("/>", "")


# --- rows ------------------------------------------------------------------------------------------------------------


def sheet_rows(sheet: Sheet, xf: FormatIndex) -> Iterator[str]:
    """The row elements of a sheet, several rows to a piece, so that a long sheet never stands in memory as text."""
    single = _by_row(sheet.cells)
    special = sorted(set(single) | set(sheet.heights) | set(sheet.hidden_rows))
    cuts = sorted({edge for block in sheet.blocks for edge in (block.row, block.row + _length(block))})
    position = 0
    for start, end in zip([0, *cuts], [*cuts, 1 << 21], strict=True):
        active = sorted((b for b in sheet.blocks if b.row <= start < b.row + _length(b)), key=lambda b: b.column)
        upto = position
        while upto < len(special) and special[upto] < end:
            upto += 1
        mine, position = special[position:upto], upto
        if active:
            yield from _dense(sheet, active, start, end, single, set(mine), xf)
        elif mine:
            yield "".join(_row(sheet, row, _cells(row, single.get(row, ()), xf)) for row in mine)


def _length(block: Block) -> int:
    return len(block.columns[0].values) if block.columns else 0


def _by_row(cells: Mapping[tuple[int, int], Cell]) -> dict[int, list[tuple[int, Cell]]]:
    rows: dict[int, list[tuple[int, Cell]]] = {}
    for (row, column), each in cells.items():
        rows.setdefault(row, []).append((column, each))
    for row_cells in rows.values():
        row_cells.sort(key=lambda item: item[0])
    return rows


def _cells(row: int, cells: Iterable[tuple[int, Cell]], xf: FormatIndex) -> list[tuple[int, str]]:
    return [(column, cell(f"{column_letters(column)}{row + 1}", xf(each.format), each.value)) for column, each in cells]


def _row(sheet: Sheet, row: int, cells: Iterable[tuple[int, str]]) -> str:
    height = sheet.heights.get(row)
    attributes = f' ht="{height:g}" customHeight="1"' if height is not None else ""
    if row in sheet.hidden_rows:
        attributes += ' hidden="1"'
    return f'<row r="{row + 1}"{attributes}>{"".join(text for _, text in cells)}</row>'


def _dense(
    sheet: Sheet,
    active: Sequence[Block],
    start: int,
    end: int,
    single: Mapping[int, list[tuple[int, Cell]]],
    special: set[int],
    xf: FormatIndex,
) -> Iterator[str]:
    """Rows `start` to `end` where blocks stand, with any single cells among them."""
    for low in range(start, end, _CHUNK):
        high = min(end, low + _CHUNK)
        texts = [block_rows(block, xf, low - block.row, high - block.row) for block in active]
        joined = texts[0] if len(texts) == 1 else ["".join(each) for each in zip(*texts, strict=True)]
        out = []
        for row, text in zip(range(low, high), joined, strict=True):
            if row not in special:
                out.append(f'<row r="{row + 1}">{text}</row>')
                continue
            mixed = [(block.column, texts[number][row - low]) for number, block in enumerate(active)]
            mixed += _cells(row, single.get(row, ()), xf)
            out.append(_row(sheet, row, sorted(mixed)))
        yield "".join(out)


def used_range(sheet: Sheet) -> tuple[int, int, int, int] | None:
    """First row, first column, last row, last column that hold a cell; None for a sheet without any."""
    corners = [(row, column) for row, column in sheet.cells]
    for block in sheet.blocks:
        if block.columns and _length(block):
            corners.append((block.row, block.column))
            corners.append((block.row + _length(block) - 1, block.column + len(block.columns) - 1))
    if not corners:
        return None
    rows, columns = [row for row, _ in corners], [column for _, column in corners]
    return min(rows), min(columns), max(rows), max(columns)
