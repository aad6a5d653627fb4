"""The pieces of live formulas: constants, ranges of data, design columns over many rows at once.

Everything here works inside SUMPRODUCT, without array entry, and with functions that need no prefix. A formula's text
may have 8,192 characters, a text in it 255 (ECMA-376 leaves it open; these are the common programs' published limits).
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from bridge.page.cells import address, quoted, text_literal
from bridge.regression.results import DesignColumn, Factor
from bridge.regression.spec import Shape
from bridge.workbook.kinds import level_text
from bridge.workbook.tables import DataColumn, State, Table

MOST = 8_000  # characters of a formula
_LONGEST_LITERAL = 120  # characters between quotes, half of the limit, because quotes are doubled
_NUMBERS = (State.NUMBER, State.DATE, State.YES_NO)

Span = tuple[tuple[int, int], tuple[int, int]]


# --- constants and places -----------------------------------------------------------------------


def literal(text: str) -> str:
    """A text as a formula's constant, joined from parts where it is long; a `{row}` in it is nothing to fill in."""
    parts: list[str] = []
    for piece in text.replace("{", "\0{").split("\0"):
        parts += [piece[at : at + _LONGEST_LITERAL] for at in range(0, len(piece), _LONGEST_LITERAL)]
    broken = [half for part in parts or [""] for half in ((part[:2], part[2:]) if part[:1] == "{" else (part,))]
    return "&".join(text_literal(part) for part in broken if part or not text)


def number(value: float) -> str:
    """A number as a formula's constant; negative ones in brackets."""
    text = repr(int(value)) if value == int(value) and abs(value) < 1e15 else repr(float(value))
    return f"({text})" if text.startswith("-") else text


def span(first: tuple[int, int], last: tuple[int, int]) -> str:
    """Cells of the same sheet, absolute: `$A$5:$A$20`."""
    text = address(*first, absolute=True)
    return text if first == last else f"{text}:{address(*last, absolute=True)}"


def data_range(table: Table, column: DataColumn, first: int, last: int) -> str:
    """Cells of a data column from the one-based sheet row `first` to `last`, absolute."""
    return f"{quoted(table.sheet)}!{span((first - 1, column.index), (last - 1, column.index))}"


def groups(pieces: Iterable[str], joint: str, most: int = MOST - 200) -> Iterator[list[str]]:
    """The pieces in as few groups as the limit on a formula allows, when those of a group are joined by `joint`."""
    held: list[str] = []
    size = 0
    for piece in pieces:
        if held and size + len(joint) + len(piece) > most:
            yield held
            held, size = [], 0
        held.append(piece)
        size += len(joint) + len(piece)
    if held:
        yield held


# --- levels -------------------------------------------------------------------------------------


def level_numbers(table: Table, column: DataColumn) -> Mapping[str, float] | None:
    """The number behind each level's name, for a column of nothing but numbers, nothing but dates or nothing but
    yes/no; None for other columns, whose levels are the texts themselves."""
    kinds = set(np.unique(column.state).tolist()) - {State.BLANK, State.ERROR, State.NO_VALUE}
    if len(kinds) != 1 or kinds == {State.TEXT}:
        return None
    rows = np.flatnonzero(np.isin(column.state, _NUMBERS))
    _, first = np.unique(column.numbers[rows], return_index=True)
    return {level_text(column, int(at), table.date1904) or "": float(column.numbers[at]) for at in rows[first].tolist()}


# --- design columns over rows -------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Rows:
    """Neighbouring rows of data as ranges: `cells` by column name, `numbers` the numbers behind a column's levels.

    `mask`: an array of TRUE for rows that count (empty: all do). Where it is FALSE no formula may fail, whatever
    number or blank the cell holds.
    """

    cells: Mapping[str, str]
    numbers: Mapping[str, Mapping[str, float] | None]
    mask: str = ""

    def product(self, column: DesignColumn) -> str:
        """The design column's values, (rows,)."""
        return "*".join(self.factor(factor) for factor in column.factors) or "1"

    def factor(self, factor: Factor) -> str:
        """One factor's values."""
        cells = self.cells[factor.column]
        if factor.kind == "level":
            return self._is_level(factor)
        if factor.kind in ("log", "root", "reciprocal"):
            return self.shaped(Shape(factor.kind), factor.column)
        if factor.kind == "hinge":
            knot = number(factor.knot)
            return f"(({cells}-{knot})*({cells}>{knot}))"
        return cells if factor.exponent == 1 else f"({cells}^{factor.exponent})"

    def shaped(self, shape: Shape, name: str) -> str:
        """A number column under a shape."""
        cells = self.cells[name]
        if shape is Shape.AS_IS:
            return cells
        safe = f"({cells}*{self.mask}+1-{self.mask})" if self.mask else cells  # 1 where the row does not count
        return {Shape.LOG: f"LN({safe})", Shape.ROOT: f"SQRT({safe})", Shape.RECIPROCAL: f"(1/{safe})"}[shape]

    def levels(self, name: str, across: str) -> str:
        """1 where the row's level is the one in a row of cells, (rows, levels), else 0."""
        cells = self.cells[name]
        return f"({cells}*1={across})*1" if self.numbers.get(name) is not None else f"EXACT({cells},{across})*1"

    def _is_level(self, factor: Factor) -> str:
        cells, numbers = self.cells[factor.column], self.numbers.get(factor.column)
        if numbers is not None and factor.level in numbers:
            return f"({cells}*1={number(numbers[factor.level])})"
        return f"EXACT({cells},{literal(factor.level)})"


def runs(columns: Sequence[DesignColumn]) -> Iterator[tuple[int, int, int]]:
    """Runs of neighbouring design columns that differ only in the level of one factor: first, last, which factor.

    The factor is -1 for a column on its own.
    """
    at = 0
    while at < len(columns):
        which = next((k for k, factor in enumerate(columns[at].factors) if _begins(columns, at, k)), -1)
        last = at
        while which >= 0 and last + 1 < len(columns) and _alike(columns[at], columns[last + 1], which):
            last += 1
        yield at, last, which
        at = last + 1


def _begins(columns: Sequence[DesignColumn], at: int, which: int) -> bool:
    return at + 1 < len(columns) and _alike(columns[at], columns[at + 1], which)


def _alike(one: DesignColumn, other: DesignColumn, which: int) -> bool:
    if one.term != other.term or len(one.factors) != len(other.factors):
        return False
    a, b = one.factors[which], other.factors[which]
    rest = one.factors[:which] + one.factors[which + 1 :] == other.factors[:which] + other.factors[which + 1 :]
    return rest and a.kind == b.kind == "level" and a.column == b.column


def product(column: DesignColumn, cells: Mapping[str, str]) -> str:
    """The design column as a formula; `cells` gives each data column's cell or range."""
    return Rows(cells, {}).product(column)


def shaped(shape: Shape, cell: str) -> str:
    """The response as shaped."""
    return {Shape.LOG: f"LN({cell})", Shape.ROOT: f"SQRT({cell})"}.get(shape, cell)
