"""Cells and their formats.

Rows and columns are zero-based everywhere in `bridge.page`; `address` turns them into
the A1 form that people and formulas read.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Format:
    """How a cell looks. Colours are six hex digits without `#`; None leaves the default.

    `border_bottom` and `border_top` hold a line style of ECMA-376 18.18.3 (`thin`, `medium`, `hair`).
    """

    bold: bool = False
    italic: bool = False
    underline: bool = False
    size: float = 10.0
    font: str = "Arial"
    color: str | None = None
    fill: str | None = None
    number_format: str = "General"
    align: str | None = None  # left, center, right
    valign: str | None = "center"  # top, center, bottom
    wrap: bool = False
    indent: int = 0
    border_bottom: str | None = None
    border_top: str | None = None
    border_color: str = "C5CDD1"
    locked: bool = True


@dataclass(frozen=True, slots=True)
class Formula:
    """A live formula with the value it has now.

    `text` has no leading `=`, is in the file format's English form, and uses only functions
    that need no prefix and no array entry. `value` is what a reader that does not recalculate shows.
    """

    text: str
    value: float | int | str | bool


Scalar = float | int | str | bool
Value = Scalar | Formula | None


@dataclass(frozen=True, slots=True)
class Cell:
    """One cell: a value (None: formatted but empty) and a format."""

    value: Value
    format: Format = Format()


def column_letters(column: int) -> str:
    """Letters of a zero-based column: 0 -> A, 26 -> AA."""
    letters = ""
    column += 1
    while column:
        column, rest = divmod(column - 1, 26)
        letters = chr(65 + rest) + letters
    return letters


def address(row: int, column: int, *, absolute: bool = False) -> str:
    """A1 form of a zero-based position; with `absolute`, `$A$1`."""
    mark = "$" if absolute else ""
    return f"{mark}{column_letters(column)}{mark}{row + 1}"


def quoted(sheet: str) -> str:
    """A sheet's name as formulas need it, always in quotes, inner quotes doubled."""
    return "'" + sheet.replace("'", "''") + "'"


def reference(sheet: str, first: tuple[int, int], last: tuple[int, int] | None = None) -> str:
    """An absolute reference such as `'fit rows'!$A$5:$C$20`; positions are (row, column)."""
    text = f"{quoted(sheet)}!{address(*first, absolute=True)}"
    return text if last is None or last == first else f"{text}:{address(*last, absolute=True)}"


def text_literal(text: str) -> str:
    """A text as a formula's literal: inner double quotes doubled."""
    return '"' + text.replace('"', '""') + '"'
