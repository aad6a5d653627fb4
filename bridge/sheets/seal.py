"""The seal: live formulas that say whether data and request are still those of the fit.

For each column that a fitted model uses: how many numbers, their sum, their squares' sum and the sum of value times
place (which two swapped rows change) against what they were, within 1e-13 of the sum of absolute terms, because
programs add in different orders. Texts are counted place by place, level by level, exactly (EXACT minds the case). As
many cells as then must be filled down to the end of the sheet. For each model, every cell of its request must read as
it did. Ranges move with the data: renamed sheets, moved columns and rows inserted above change nothing.

The lines stand on `fit history`; the first line of every sheet, and the names `fit_A_seal`, read them.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from bridge.page.cells import Formula, address, quoted, reference, text_literal
from bridge.page.sheet import Highlight
from bridge.sheets import figures, live, request, style
from bridge.sheets.book import Book
from bridge.sheets.paper import Paper
from bridge.workbook.request import Scalar
from bridge.workbook.tables import DataColumn, State, Table

SAME, OTHER = "unchanged", "CHANGED"
UNCHANGED = "data unchanged since this fit"
CHANGED = "DATA HAVE CHANGED since this fit: save with the bridge running"
FAR = 1_000_000  # as far down as filled cells are counted: to the end of the sheet, with room for rows put in above
MOST_LEVELS = 120  # texts of a column that get a line of their own
FIRST_ROW = 6  # of the lines on `fit history`, zero-based
VERDICT = 6  # the verdicts' column there
HEADS = ("what", "cells", "count", "sum", "sum of squares", "sum of value times place", "verdict")

Floats = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Line:
    """One line: what it watches, the cells, its live figures (texts and values) and the verdict's formula.

    `models` are the models it speaks for."""

    what: str
    cells: str
    figures: tuple[Formula, ...]
    verdict: str
    models: frozenset[str]


def formula(book: Book) -> Formula:
    """What the third row of every sheet says."""
    count = len(lines(book))
    if not count:
        return Formula(text_literal("nothing is fitted"), "nothing is fitted")
    same = f"COUNTIF({_verdicts(book, count)},{text_literal(SAME)})={count}"
    return Formula(f"IF({same},{text_literal(UNCHANGED)},{text_literal(CHANGED)})", UNCHANGED)


def of_model(book: Book, name: str) -> str:
    """A formula, TRUE while the model's data and request are unchanged."""
    at = [row for row, line in enumerate(lines(book)) if name in line.models]
    sheet = book.title("fit history")
    tests = [f'{reference(sheet, (FIRST_ROW + row, VERDICT))}="{SAME}"' for row in at]
    return f"AND({','.join(tests)})" if len(tests) <= 100 else f'{reference(sheet, (2, 0))}="{UNCHANGED}"'


def rows(book: Book) -> int:
    """Sheet rows that the block takes on `fit history`, from its heading to the last line."""
    return 2 + len(lines(book))


def put_down(book: Book, paper: Paper) -> None:
    """The block; the paper must stand two rows above `FIRST_ROW`."""
    paper.put(0, "Is this still the same data?", style.HEADING)
    paper.heights[paper.row] = 20.0
    paper.row += 1
    right = replace(style.HEADER, align="right", wrap=True)
    paper.line(HEADS, (style.HEADER, style.HEADER, *(right for _ in HEADS[2:])))
    number = replace(style.NUMBER, color=style.QUIET)
    for line in lines(book):
        paper.put(0, line.what, style.ROW)
        paper.put(1, line.cells, style.FACT)
        for at in range(4):
            value = line.figures[at] if at < len(line.figures) else None
            code = figures.WHOLE if at == 0 or value is None else figures.number_format(float(value.value), 6)
            paper.put(2 + at, value, replace(number, number_format=code))
        paper.put(VERDICT, Formula(line.verdict, SAME), replace(style.ROW_STRONG, align="right", color=style.DEEP))
        paper.row += 1
    first, last = (FIRST_ROW, VERDICT), (max(paper.row - 1, FIRST_ROW), VERDICT)
    alert = replace(style.BODY, bold=True, color=style.ALERT)
    paper.highlights.append(Highlight(first, last, f'{address(*first)}="{OTHER}"', alert))


def lines(book: Book) -> tuple[Line, ...]:
    """All lines, data first."""
    return _lines(_Key(book))


class _Key:
    """A book as a cache key: the same book gives the same lines, and every sheet asks for them."""

    def __init__(self, book: Book) -> None:
        self.book = book

    def __hash__(self) -> int:
        return id(self.book)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, _Key) and other.book is self.book


@lru_cache(maxsize=2)
def _lines(key: _Key) -> tuple[Line, ...]:
    book = key.book
    users: dict[tuple[str, str], set[str]] = {}
    for model, _ in book.fitted:
        if model.table is not None:
            for name in _used_columns(book, model.name):
                users.setdefault((model.table.sheet, name), set()).add(model.name)
    found: list[Line] = []
    for (sheet, name), models in users.items():
        table = book.tables[sheet]
        column = table.column(name)
        if column is not None:
            found += _column_lines(table, column, frozenset(models))
    return (*found, *_request_lines(book))


def _verdicts(book: Book, count: int) -> str:
    sheet = book.title("fit history")
    return reference(sheet, (FIRST_ROW, VERDICT), (FIRST_ROW + count - 1, VERDICT))


def _used_columns(book: Book, name: str) -> list[str]:
    """Columns a model's numbers depend on: response, terms, weight, order, group, and its filters'."""
    model = next(each for each, _ in book.fitted if each.name == name)
    spec = model.request.spec
    if spec is None:
        return []
    names = [spec.response, *(term.column for term in spec.terms), spec.weight, spec.order, spec.group]
    return list(dict.fromkeys([each for each in names if each] + [each.column for each in model.request.filters]))


# --- a data column -------------------------------------------------------------------------------


def _column_lines(table: Table, column: DataColumn, models: frozenset[str]) -> Iterator[Line]:
    first, last = int(table.rows[0]), int(table.rows[-1])
    cells = live.data_range(table, column, first, last)
    below = live.data_range(
        table, column, *((first, max(FAR, last)) if column.filled is not None else (last + 1, last + 1))
    )
    place = f"ROW({cells})-ROW({live.data_range(table, column, first, first)})+1"
    position = (table.rows - first + 1).astype(float)
    what = f"{column.name} ({table.sheet})"
    where = f"{address(first - 1, column.index)}:{address(last - 1, column.index)}"
    yield _number_line(column, (what, where), (cells, below, place), position, models)
    if any(text is not None for text in column.texts):
        yield from _text_lines(column, (what, where), (cells, place), position, models)


def _number_line(
    column: DataColumn, names: tuple[str, str], parts: tuple[str, str, str], position: Floats, models: frozenset[str]
) -> Line:
    cells, below, place = parts
    counted = np.isin(column.state, (State.NUMBER, State.DATE))
    x, at = column.numbers[counted], position[counted]
    errors = int(np.count_nonzero(column.state == State.ERROR))
    count = Formula(f"COUNT({cells})", int(counted.sum()))
    tests = [f"COUNT({cells})={int(counted.sum())}", f"COUNTA({below})={column.filled or 0}"]
    shown = [count]
    if errors:
        # An error among the cells would make every sum an error: they are counted, and the rest summed past them.
        sums = [(f'SUMIF({cells},">-1E+300")', x)]
        wrong = (column.state == State.ERROR) * position
        tests.append(f"SUMPRODUCT(ISERROR({cells})*({place}))={live.number(float(wrong.sum()))}")
    else:
        sums = [(f"SUM({cells})", x), (f"SUMSQ({cells})", x * x), (f"SUMPRODUCT({cells},{place})", x * at)]
    if len(x) == 0:
        sums = []
    for text, terms in sums:
        value = math.fsum(terms.tolist())
        size = math.fsum(np.abs(terms).tolist())
        tests.append(f"ABS({text}-{live.number(value)})<={live.number(1e-13 * size)}")
        shown.append(Formula(text, value))
    yes = column.state == State.YES_NO
    if yes.any():
        true = float(position[yes & (column.numbers == 1)].sum())
        tests.append(f"SUMPRODUCT(EXACT({cells},TRUE)*({place}))={live.number(true)}")
    return Line(names[0], names[1], tuple(shown), _verdict(tests), models)


def _text_lines(
    column: DataColumn,
    names: tuple[str, str],
    parts: tuple[str, str],
    position: Floats,
    models: frozenset[str],
) -> Iterator[Line]:
    cells, place = parts
    sums: dict[str, float] = {}
    counts: dict[str, int] = {}
    for row, text in enumerate(column.texts):
        if text is not None and column.state[row] == State.TEXT:
            sums[text] = sums.get(text, 0.0) + float(position[row])
            counts[text] = counts.get(text, 0) + 1
    if (column.state == State.ERROR).any():
        return  # EXACT would only repeat the errors; the line of numbers watches how many cells hold what
    for text in sorted(sums)[:MOST_LEVELS]:
        if len(text) > 200:
            continue
        live_sum = f"SUMPRODUCT(EXACT({cells},{text_literal(text)})*({place}))"
        live_count = f"SUMPRODUCT(EXACT({cells},{text_literal(text)})*1)"
        shown = (Formula(live_count, counts[text]), Formula(live_sum, sums[text]))
        verdict = _verdict([f"{live_sum}={live.number(sums[text])}"])
        yield Line(f"{names[0]}: {text}", names[1], shown, verdict, models)


def _verdict(tests: Sequence[str]) -> str:
    together = f"AND({','.join(tests)})"
    return f'IF(ISERROR({together}),"{OTHER}",IF({together},"{SAME}","{OTHER}"))'


# --- a model's request ----------------------------------------------------------------------------


def _request_lines(book: Book) -> Iterator[Line]:
    sheet = quoted(book.title("fit request"))
    cells: Mapping[str, tuple[tuple[str, Scalar], ...]] = request.entry_cells(book)
    fitted = {model.name for model, _ in book.fitted}
    for name, entries in cells.items():
        if name not in fitted:
            continue
        parts = list(_chunks([_entry_test(sheet, cell, value) for cell, value in entries]))
        for at, part in enumerate(parts):
            label = f"request of {name}" + (f", part {at + 1}" if len(parts) > 1 else "")
            verdict = f'IF({"*".join(part)}=1,"{SAME}","{OTHER}")'
            yield Line(label, f"{len(part)} cells", (), verdict, frozenset({name}))


def _entry_test(sheet: str, cell: str, value: Scalar) -> str:
    at = f"{sheet}!{cell}"
    if isinstance(value, bool):
        return f"EXACT({at},{'TRUE' if value else 'FALSE'})"
    if isinstance(value, int | float):
        return f"ISNUMBER({at})*(SUM({at})={live.number(float(value))})"
    return f"EXACT({at},{text_literal(value[:250])})" if len(value) <= 250 else f"(LEN({at})={len(value)})"


def _chunks(tests: Sequence[str]) -> Iterator[list[str]]:
    """Tests in groups that fit one formula each."""
    part: list[str] = []
    for test in tests:
        if part and sum(map(len, part)) + len(part) + len(test) > live.MOST - 100:
            yield part
            part = []
        part.append(test)
    if part:
        yield part
