"""The seal: live formulas that say whether data and request are still those of the fit.

For each column that a fitted model uses, a thousand rows at a time: how many numbers, their sum, the sum of their
squares and the sum of value times place (which two swapped rows change), each against what it was; texts by their
place, exactly (EXACT minds the case); for the whole column how many cells are filled down to the end of the sheet, so
that rows appended are seen. For each model: the cells of its request. Ranges move with the data, so a renamed sheet, a
moved column or rows inserted above change nothing.

Programs add in different orders, so sums are compared within 1.2e-13 of the sum of absolute terms: more than a thousand
additions in doubles can be off (Higham 2002, Accuracy and Stability of Numerical Algorithms, 4.2: n u). Parts of a
thousand rows keep that bound small and let a program recalculate one part, not the column, when one cell changes.

`fit history` shows it in words, a line per column and per request; the working figures stand at that sheet's end.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from bridge.page.cells import Formula, address, quoted, reference, text_literal
from bridge.page.sheet import Highlight
from bridge.sheets import figures, live, request, style, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import Paper
from bridge.workbook.places import place
from bridge.workbook.request import Scalar
from bridge.workbook.tables import DataColumn, State, Table
from bridge.workbook.usage import uses

SAME, OTHER = "unchanged", "CHANGED"
UNCHANGED = "data unchanged since this fit"
CHANGED = "DATA HAVE CHANGED since this fit: save with the bridge running"
NOTHING = "nothing is fitted yet"

FIRST_ROW = 6  # of the lines on `fit history`, zero-based: under the sheet's top, a heading and a header
HEADS = ("what", "cells", "at the fit", "now", "true")
_WORDS, _SAME = HEADS.index("now"), HEADS.index("true")
WORKING_HEADS = ("what", "cells", "now", "at the fit", "may differ by", "true")
_WORKING_SAME = WORKING_HEADS.index("true")
_TEXTS = len(WORKING_HEADS) + 1  # the column from which a line's texts are listed, to the right

_PART = 1_000  # rows
_FEW_TEXTS = 300  # a column with more different texts has parts of as many rows, so that the work stays in proportion
_MOST_ERRORS = 40  # error cells in a part: sums go around them
_ROUNDING = 1.2e-13
_LAST_ROW = 1_048_576

_NUMBERS = (State.NUMBER, State.DATE, State.YES_NO)
_KINDS = (
    (State.NUMBER, "number"),
    (State.DATE, "date"),
    (State.TEXT, "text"),
    (State.YES_NO, "yes/no"),
    (State.ERROR, "error"),
    (State.NO_VALUE, "formula without a value"),
)

Floats = NDArray[np.float64]
Run = tuple[int, int]


@dataclass(frozen=True, slots=True)
class Watched:
    """A data column that models depend on."""

    table: Table
    column: DataColumn
    models: frozenset[str]


@dataclass(frozen=True, slots=True)
class Check:
    """One working line: a live figure, what it was, and how far it may be off. `texts` are listed beside it."""

    what: str
    cells: str
    text: str
    value: float
    allowed: float = 0.0
    texts: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class _Line:
    """A line in words and the working lines it rests on."""

    what: str
    cells: str
    held: str
    models: frozenset[str]
    checks: tuple[Check, ...]


# --- doors --------------------------------------------------------------------------------------


def formula(book: Book) -> Formula:
    """What the third row of every sheet says."""
    count = _count(book)
    said = UNCHANGED if book.fitted else NOTHING
    if not count:
        return Formula(text_literal(said), said)
    sheet = book.title("fit history")
    same = f"AND({reference(sheet, (FIRST_ROW, _SAME), (FIRST_ROW + count - 1, _SAME))})"
    return Formula(f"IF({same},{text_literal(said)},{text_literal(CHANGED)})", said)


def of_model(book: Book, name: str) -> str:
    """A reference to the cell that is TRUE while the fitted model's data and request are unchanged."""
    at = [model.name for model, _ in book.fitted].index(name)
    return reference(book.title("fit history"), (FIRST_ROW + _count(book) + at, _SAME))


def rows(book: Book) -> int:
    """Sheet rows that the lines in words take, from their heading on."""
    return 2 + _count(book) + len(book.fitted)


def put_down(book: Book, paper: Paper, working: int) -> None:
    """Both parts: the lines in words above, from two rows over `FIRST_ROW`, the working figures from row `working`."""
    row = working + 3
    found: list[tuple[_Line, int, int]] = []
    for line in _lines(book, row):
        found.append((line, row, row + len(line.checks) - 1))
        row += len(line.checks)
    _put_words(book, paper, found)
    _put_working(paper, working, [check for line, _, _ in found for check in line.checks])


# --- in words -----------------------------------------------------------------------------------


def _put_words(book: Book, paper: Paper, found: Sequence[tuple[_Line, int, int]]) -> None:
    top = FIRST_ROW - 2
    paper.put(0, "Is this still the same data?", style.HEADING, top)
    paper.heights[top] = 20.0
    for column, head in enumerate(HEADS):
        paper.put(column, head, style.HEADER_RIGHT if column == _SAME else style.HEADER, top + 1)
    for at, (line, first, last) in enumerate(found):
        same = f"AND({live.span((first, _WORKING_SAME), (last, _WORKING_SAME))})" if line.checks else "AND(TRUE)"
        _put_line(paper, FIRST_ROW + at, (line.what, line.cells, line.held), same)
    row = FIRST_ROW + len(found)
    for name in [model.name for model, _ in book.fitted]:
        on = [FIRST_ROW + at for at, (line, _, _) in enumerate(found) if name in line.models]
        same = f"AND({','.join(live.span((a, _SAME), (b, _SAME)) for a, b in _runs(on))})"
        _put_line(paper, row, (f"model {name} as a whole", "", ""), same, bold=True)
        row += 1
    first_cell, last_cell = (FIRST_ROW, _WORDS), (max(row - 1, FIRST_ROW), _WORDS)
    alert = replace(style.BODY, bold=True, color=style.ALERT)
    paper.highlights.append(Highlight(first_cell, last_cell, f'{address(*first_cell)}="{OTHER}"', alert))


def _put_line(paper: Paper, row: int, texts: tuple[str, str, str], same: str, bold: bool = False) -> None:
    for column, (text, look) in enumerate(zip(texts, (style.ROW, style.FACT, style.FACT), strict=True)):
        paper.put(column, text, replace(look, bold=bold), row)
    said = f"IF({address(row, _SAME)},{text_literal(SAME)},{text_literal(OTHER)})"
    paper.put(_WORDS, Formula(said, SAME), replace(style.ROW_STRONG, color=style.DEEP), row)
    paper.put(_SAME, Formula(same, True), replace(style.FACT, size=8.0, align="right"), row)


def _runs(numbers: Sequence[int]) -> Iterator[Run]:
    """Runs of neighbouring whole numbers, first and last, of an ordered sequence."""
    start = 0
    for at in range(1, len(numbers) + 1):
        if at == len(numbers) or numbers[at] != numbers[at - 1] + 1:
            yield numbers[start], numbers[at - 1]
            start = at


# --- the working figures ------------------------------------------------------------------------


def _put_working(paper: Paper, top: int, checks: Sequence[Check]) -> None:
    paper.put(0, "Working figures of the seal", style.HEADING, top)
    paper.heights[top] = 20.0
    said = "The lines above read these. Data are compared part by part; a sum may be off by rounding, a count may not."
    paper.put(0, said, style.SUBTITLE, top + 1)
    small = replace(style.ROW, size=8.0, color=style.QUIET)
    for column, head in enumerate(WORKING_HEADS):
        look = style.HEADER_RIGHT if 2 <= column < _WORKING_SAME else style.HEADER
        paper.put(column, head, replace(look, fill=style.TAB_DETAIL), top + 2)
    for row, check in enumerate(checks, top + 3):
        now, then, most = (address(row, column) for column in (2, 3, 4))
        code = figures.number_format(check.value, 6) if check.value != int(check.value) else figures.WHOLE
        number = replace(small, align="right", number_format=code)
        paper.put(0, check.what, small, row)
        paper.put(1, check.cells, small, row)
        paper.put(2, Formula(check.text, check.value), number, row)
        paper.put(3, check.value, number, row)
        paper.put(4, check.allowed, replace(number, number_format="0.0E+00" if check.allowed else "0"), row)
        paper.put(_WORKING_SAME, Formula(f"IF(ISNUMBER({now}),ABS({now}-{then})<={most},FALSE)", True), small, row)
        for across, text in enumerate(check.texts):
            paper.put(_TEXTS + across, text, small, row)


def _count(book: Book) -> int:
    return len(watched(book)) + len(book.models)


def _lines(book: Book, row: int) -> Iterator[_Line]:
    """The lines in words in order; their working lines begin at `row`, which some of the formulas need to know."""
    for one in watched(book):
        checks = tuple(_column_checks(one, row))
        name = f"{one.column.name} ({one.table.sheet})"
        yield _Line(name, _cells(one), _held(one.column), one.models, checks)
        row += len(checks)
    entries = request.entry_cells(book)
    for model in book.models:
        cells = entries[model.name]
        checks = tuple(_request_checks(book, model, cells))
        filled = words.plural(sum(1 for _, value in cells if value != ""), "filled cell")
        where = book.title("fit request")
        yield _Line(f"request of {model.name}", where, filled, frozenset({model.name}), checks)
        row += len(checks)


def watched(book: Book) -> tuple[Watched, ...]:
    """The data columns that fitted models depend on: what they use, and what their row filters look at."""
    found: dict[tuple[str, str], Watched] = {}
    for model, _ in book.fitted:
        if model.table is None:
            continue
        for column in _columns(model, model.table):
            key = (model.table.sheet, column.name)
            models = found[key].models if key in found else frozenset()
            found[key] = Watched(model.table, column, models | {model.name})
    return tuple(found.values())


def _columns(model: ModelSheet, table: Table) -> list[DataColumn]:
    columns = [use.column for use in uses(table, model.request)]
    columns += [column for one in model.request.filters if (column := table.column(one.column)) is not None]
    return list({column.name: column for column in columns}.values())


def _cells(one: Watched) -> str:
    first, last = (address(int(row) - 1, one.column.index) for row in (one.table.rows[0], one.table.rows[-1]))
    return place(one.table.sheet, first if first == last else f"{first}:{last}")


def _held(column: DataColumn) -> str:
    """`118 numbers, 2 blank`."""
    counts = [(int(np.count_nonzero(column.state == state)), word) for state, word in _KINDS]
    said = [
        words.plural(count, word) if word != "yes/no" else f"{words.number(count)} yes/no"
        for count, word in counts
        if count
    ]
    blank = int(np.count_nonzero(column.state == State.BLANK))
    return ", ".join([*said, *([f"{words.number(blank)} blank"] if blank else [])]) or "nothing"


# --- a data column ------------------------------------------------------------------------------


def _column_checks(one: Watched, row: int) -> Iterator[Check]:
    table, column = one.table, one.column
    yield Check(f"{column.name}: filled cells", "to the end of the sheet", _filled_text(table, column), _filled(column))
    row += 1
    texts = tuple(sorted({text for text in column.texts if text}))
    few = len(texts) <= _FEW_TEXTS
    shared = ""  # where the texts are listed, once they are
    for part in _parts(table, column, _PART if few else _FEW_TEXTS):
        for check in part.numbers():
            yield check
            row += 1
        if texts:
            mine = texts if few else part.texts()
            at = shared or live.span((row, _TEXTS), (row, _TEXTS + max(len(mine), 1) - 1))
            yield part.of_texts(mine, at, listed=not shared)
            shared = at if few else ""
            row += 1


def _filled_text(table: Table, column: DataColumn) -> str:
    """The column's filled cells and those under the table, in two ranges, so that a table moved elsewhere alone counts
    the same; a row put in between the two counts too."""
    first, last = int(table.rows[0]), int(table.rows[-1])
    inside, end, below, far = (
        live.data_range(table, column, *ends)
        for ends in ((first, last), (last, last), (last + 1, last + 1), (last + 1, _LAST_ROW))
    )
    return f"COUNTA({inside})+COUNTA({far})+ROW({below})-ROW({end})-1"


def _filled(column: DataColumn) -> int:
    if column.filled is not None:
        return column.filled
    return int(np.count_nonzero(column.state != State.BLANK)) + column.texts.count("")


def _parts(table: Table, column: DataColumn, most: int) -> Iterator[_Part]:
    """Parts of at most `most` sheet rows, with at most so many error cells that a formula can go around them."""
    traits = _Traits.of(column)
    errors = np.flatnonzero(column.state == State.ERROR)
    start, n = 0, len(table.rows)
    while start < n:
        stop = int(np.searchsorted(table.rows, table.rows[start] + most))
        inside = errors[(errors >= start) & (errors < stop)] if len(errors) else errors
        if len(inside) > _MOST_ERRORS:
            stop = int(inside[_MOST_ERRORS])
        yield _Part(table, column, slice(start, stop), traits)
        start = stop


@dataclass(frozen=True, slots=True)
class _Traits:
    """What kinds of cells a whole column has."""

    yes_no: bool
    numbers: bool
    texts: bool
    errors: bool

    @classmethod
    def of(cls, column: DataColumn) -> _Traits:
        """The traits of a column."""
        kinds = set(np.unique(column.state).tolist())
        return cls(
            State.YES_NO in kinds,
            bool(kinds & {State.NUMBER, State.DATE}),
            any(text is not None for text in column.texts),
            State.ERROR in kinds,
        )


@dataclass(frozen=True, slots=True)
class _Part:
    """Some data rows of a column, and the checks on them."""

    table: Table
    column: DataColumn
    rows: slice
    traits: _Traits

    @property
    def first(self) -> int:
        """The first sheet row, one-based."""
        return int(self.table.rows[self.rows][0])

    @property
    def last(self) -> int:
        """The last sheet row, one-based."""
        return int(self.table.rows[self.rows][-1])

    def numbers(self) -> Iterator[Check]:
        """Count and sums of the numbers, and where the errors stand."""
        state = self.column.state[self.rows]
        counted = np.isin(state, _NUMBERS)
        x, at = self.column.numbers[self.rows][counted], self._places()[counted]
        any_way = "((ISNUMBER({0})+ISLOGICAL({0}))>0)*1"  # programs differ in whether yes and no are numbers
        count = self._over(any_way) if self.traits.yes_no else f"COUNT({self._cells()})"
        yield self._check("numbers", count, float(len(x)), 0.0)
        if len(x):
            for what, text, terms in self._sums(x, at):
                allowed = max(_ROUNDING * float(np.sum(np.abs(terms))), 1e-300)
                yield self._check(what, text, float(np.sum(terms)), allowed)
        if self.traits.errors:
            wrong = float(np.sum(self._places()[state == State.ERROR]))
            text = f"SUMPRODUCT(ISERROR({self._cells()})*({self._place(self._cells())}))"
            yield self._check("errors by place", text, wrong, 0.0)

    def texts(self) -> tuple[str, ...]:
        """The different texts of the part, in order."""
        return tuple(sorted({text for text in self.column.texts[self.rows] if text}))

    def of_texts(self, texts: tuple[str, ...], at: str, listed: bool) -> Check:
        """Texts by place: the number of each in the list times its place squared, an exact whole number."""
        numbers = {text: number for number, text in enumerate(texts, 1)}
        places = self._places().astype(np.int64).tolist()
        held = zip(self.column.texts[self.rows], places, strict=True)
        value = sum(numbers[text] * spot * spot for text, spot in held if text)
        number = f"(COLUMN({at})-COLUMN({at.split(':')[0]})+1)"
        text = self._over(f"EXACT({{0}},{at})*{number}*({self._place('{0}')})^2")
        return self._check("texts by place", text, float(value), 0.0, texts if listed else ())

    def _sums(self, x: Floats, at: Floats) -> Iterator[tuple[str, str, Floats]]:
        if not self.traits.yes_no:
            ranges = ",".join(self._ranges())
            yield "sum", f"SUM({ranges})", x
            yield "sum of squares", f"SUMSQ({ranges})", x * x
            yield "sum by place", self._over(f"{{0}},{self._place('{0}')}"), x * at
        elif not self.traits.texts:
            # yes and no count as 1 and 0 in a product, whatever a program makes of them in a sum
            yield "sum", self._over("{0}*1"), x
            yield "sum of squares", self._over("({0}*1)^2"), x * x
            yield "sum by place", self._over(f"{{0}}*({self._place('{0}')})"), x * at
        elif not self.traits.numbers:
            yield "yes by place", self._over(f"({{0}}=TRUE)*({self._place('{0}')})"), x * at

    def _check(self, what: str, text: str, value: float, allowed: float, texts: tuple[str, ...] = ()) -> Check:
        cells = f"{address(self.first - 1, self.column.index)}:{address(self.last - 1, self.column.index)}"
        return Check(f"{self.column.name}: {what}", cells, text, value, allowed, texts)

    def _places(self) -> Floats:
        """Places from 1 on, counted from the part's own first row."""
        return (self.table.rows[self.rows] - self.first + 1).astype(float)

    def _place(self, cells: str) -> str:
        return f"ROW({cells})-ROW({live.data_range(self.table, self.column, self.first, self.first)})+1"

    def _cells(self) -> str:
        return live.data_range(self.table, self.column, self.first, self.last)

    def _ranges(self) -> list[str]:
        """The part's cells without its error cells."""
        wrong = self.table.rows[self.rows][self.column.state[self.rows] == State.ERROR].tolist()
        edges = [self.first - 1, *wrong, self.last + 1]
        gaps = [(a + 1, b - 1) for a, b in pairwise(edges) if b - a > 1]
        return [live.data_range(self.table, self.column, a, b) for a, b in gaps]

    def _over(self, inside: str) -> str:
        """SUMPRODUCT of a pattern over the part's cells, errors left out."""
        return "+".join(f"SUMPRODUCT({inside.replace('{0}', cells)})" for cells in self._ranges()) or "0"


# --- a model's request --------------------------------------------------------------------------


def _request_checks(book: Book, model: ModelSheet, entries: Sequence[tuple[str, Scalar]]) -> Iterator[Check]:
    sheet = quoted(book.title("fit request"))
    name = f"request of {model.name}"
    tests = [_entry_test(f"{sheet}!{cell}", value) for cell, value in entries]
    for group in live.groups(tests, "+"):
        yield Check(f"{name}: cells that read as then", "", "+".join(group), float(len(group)))
    own = sorted(row for row, column in map(_position, dict(entries)) if column == model.request.grid_column)
    if own:
        spans = [
            f"{sheet}!{live.span((a, model.request.grid_column), (b, model.request.grid_column))}"
            for a, b in _runs(own)
        ]
        filled = sum(1 for cell, value in entries if _position(cell)[1] == model.request.grid_column and value != "")
        yield Check(f"{name}: filled cells", "", f"COUNTA({','.join(spans)})", float(filled))


def _entry_test(cell: str, value: Scalar) -> str:
    """1 where a cell reads as it did."""
    if isinstance(value, bool):
        return f"EXACT({cell},{'TRUE' if value else 'FALSE'})"
    if isinstance(value, str):
        return f"EXACT({cell},{live.literal(value)})"
    return f"ISNUMBER({cell})*(ABS(SUM({cell})-{live.number(value)})<={live.number(1e-14 * abs(value))})"


def _position(cell: str) -> tuple[int, int]:
    letters = cell.rstrip("0123456789")
    column = 0
    for letter in letters:
        column = column * 26 + ord(letter) - 64
    return int(cell[len(letters) :]) - 1, column - 1
