"""The recheck: the spreadsheet itself confirms a fit from the data as they stand now.

Under each model's coefficients: the residual sum of squares computed anew, the sums of residual times column that
least squares makes zero (each divided by the lengths of both columns, so that zero is zero whatever the units), and the
fitted value of any data row beside the one that `fit rows` shows.

The sums run over pieces: neighbouring sheet rows in which no cell would break a formula, two thousand at most, so that
a program recalculates one piece when one cell changes. Rows of a piece that the fit left out are masked. The pieces
stand to the right, with the other working figures, a line each.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from bridge.page.cells import Format, Formula, address, reference
from bridge.page.sheet import Highlight
from bridge.regression.results import ModelResult
from bridge.regression.spec import CategoryTerm, FitBy, Shape
from bridge.sheets import figures, live, style, words
from bridge.sheets import rows as rows_sheet
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import Paper
from bridge.workbook.tables import DataColumn, State, Table

AGREES, DISAGREES = "agrees", "DOES NOT AGREE"
TITLE = "Recheck from the data as they are now"

_PIECE = 2_000  # rows
_MOST_PIECES = 200
_MOST_WORK = 30_000_000  # rows x columns squared that a spreadsheet recalculates in a breath or two
_MOST_SHOWN = 12  # sums with a line of their own; of more, the largest is shown
_FEW = 3  # levels in a row that are worth a matrix product
_ZERO = 1e-8
_PLACES, _PIECE_PLACES = 9, 13  # decimals of sums divided by their columns' lengths

_TYPED, _VALUE, _VERDICT = 4, 5, 6  # columns of the block; its texts run over those before
_WIDE = 11  # the working figures' first column: the piece's rows, its mask, its squares, its sums

Array = NDArray[np.float64]
Span = tuple[tuple[int, int], tuple[int, int]]


@dataclass(frozen=True, slots=True)
class Piece:
    """Sheet rows `first` to `last` (one-based), where they stand among the rows used, and a text of ones and zeros that
    says which of them were used (empty: all)."""

    first: int
    last: int
    used: slice
    mask: str


@dataclass(frozen=True, slots=True)
class Plan:
    """What can be confirmed: the pieces, and the design columns whose sums are shown; or why not (`refused`)."""

    pieces: tuple[Piece, ...] = ()
    columns: tuple[int, ...] = ()
    refused: str = ""


# --- doors --------------------------------------------------------------------------------------


def rows(model: ModelSheet, result: ModelResult) -> int:
    """How many sheet rows the block takes."""
    found = plan(model, result)
    if found.refused:
        return 3
    lines = 2 + (len(found.columns) if len(found.columns) <= _MOST_SHOWN else 1) + 1
    return max(lines, 1 + len(found.pieces) + len(_level_rows(model, result)))


def put_down(book: Book, paper: Paper, model: ModelSheet, result: ModelResult, coefficients: Span) -> None:
    """Write the block at the paper's row, exactly `rows` rows high. `coefficients` are their cells, downwards."""
    start, found = paper.row, plan(model, result)
    paper.put(0, TITLE, replace(style.BODY, bold=True, color=style.DEEP))
    paper.row += 1
    sums = _Sums(model, result, found, coefficients, start)
    if found.refused:
        paper.spread(found.refused, 0, _TYPED + 5, style.PARAGRAPH)
        paper.row += 1
    else:
        sums.put_working(paper)
        sums.put_answers(paper)
    _chosen_row(book, paper, sums)
    paper.row = start + rows(model, result)


def plan(model: ModelSheet, result: ModelResult) -> Plan:
    """How a model is rechecked."""
    if result.spec.fit_by is FitBy.RESISTANT:
        return Plan(refused="Sums are not shown for a resistant fit: its weights depend on all residuals together.")
    if model.table is None or model.taken is None or not model.taken.used:
        return Plan(refused="Sums are not shown: the data are not at hand.")
    pieces = tuple(_pieces(model.table, model.taken.used, _breaking(model.table, result)))
    if len(pieces) > _MOST_PIECES:
        return Plan(
            refused=f"Sums are not shown: errors or texts part the rows used into {len(pieces)} pieces; up to "
            f"{_MOST_PIECES} can be added up."
        )
    p = len(result.design.columns)
    every = result.fit.n * p * p <= _MOST_WORK
    found = Plan(pieces, tuple(j for j, column in enumerate(result.design.columns) if every or not column.factors))
    far = _Sums(model, result, found, ((9_000, 12), (9_000 + p, 12)), 9_000)
    if max(len(text) for text, _ in far.of(0)) > live.MOST:
        return Plan(refused="Sums are not shown: the model has more terms than one formula can hold.")
    return found


# --- the rows taken in pieces -------------------------------------------------------------------


def _breaking(table: Table, result: ModelResult) -> NDArray[np.bool_]:
    """Data rows that hold, in a column that the sums touch, something a formula cannot calculate with."""
    spec = result.spec
    breaking = np.zeros(len(table.rows), dtype=bool)
    categories = {term.column for term in spec.terms if isinstance(term, CategoryTerm)}
    for name in {spec.response, *filter(None, [spec.weight]), *(term.column for term in spec.terms)}:
        column = table.column(name)
        if column is None:
            continue
        breaking |= np.isin(column.state, (State.ERROR, State.NO_VALUE))
        if column.texts and (name not in categories or live.level_numbers(table, column) is not None):
            breaking |= np.fromiter((text is not None for text in column.texts), np.bool_, len(column.texts))
    return breaking


def _pieces(table: Table, used: Sequence[int], breaking: NDArray[np.bool_]) -> Iterator[Piece]:
    sheet_rows = table.rows[np.asarray(used, dtype=np.int64)]
    edges = sorted({int(sheet_rows[0]) - 1, *table.rows[breaking].tolist(), int(sheet_rows[-1]) + 1})
    for before, after in pairwise(edges):
        for start in range(before + 1, after, _PIECE):
            first, last = np.searchsorted(sheet_rows, (start, min(start + _PIECE, after)))
            if first < last:
                yield _piece(sheet_rows[first:last], slice(int(first), int(last)))


def _piece(sheet_rows: NDArray[np.int64], used: slice) -> Piece:
    first, last = int(sheet_rows[0]), int(sheet_rows[-1])
    if last - first + 1 == len(sheet_rows):
        return Piece(first, last, used, "")
    there = np.zeros(last - first + 1, dtype=bool)
    there[sheet_rows - first] = True
    return Piece(first, last, used, "".join("1" if one else "0" for one in there.tolist()))


# --- the sums -----------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Sums:
    """One model's sums; the working lines begin under the sheet row `top`."""

    model: ModelSheet
    result: ModelResult
    plan: Plan
    coefficients: Span
    top: int

    def of(self, at: int) -> Iterator[tuple[str, float]]:
        """For piece `at` the sum of squared residuals, then the sums of residual times column over their lengths."""
        result, piece = self.result, self.plan.pieces[at]
        over = self._over(at)
        residual, spec = self._residual(over), result.spec
        weight = over.cells[spec.weight] if spec.weight is not None else ""
        front = "".join(f"{part}*" for part in (over.mask, weight) if part)
        e, w = result.fit.residual[piece.used], _weights(result)[piece.used]
        yield f"SUMPRODUCT({front}({residual})^2)", float(np.sum(w * e * e))
        for j in self.plan.columns:
            column, length = result.design.columns[j], _length(result, j)
            times = f"*({over.product(column)})" if column.factors else ""
            value = float(np.sum(w * e * result.design.matrix[piece.used, j])) / length
            text = f"ROUND(SUMPRODUCT({front}({residual}){times})/{live.number(length)},{_PIECE_PLACES})"
            yield text, round(value, _PIECE_PLACES) + 0.0

    def _over(self, at: int) -> live.Rows:
        piece, table = self.plan.pieces[at], self.model.table
        assert table is not None  # a plan with pieces has one
        cells = {
            name: live.data_range(table, column, piece.first, piece.last)
            for name, column in _columns(self.model, self.result).items()
        }
        numbers = _numbers(self.model, self.result)
        if not piece.mask:
            return live.Rows(cells, numbers)
        whole = cells[self.result.spec.response]
        mask = address(self.top + 1 + at, _WIDE + 1, absolute=True)
        return live.Rows(cells, numbers, f'(MID({mask},ROW({whole})-ROW({whole.split(":")[0]})+1,1)="1")')

    def _residual(self, over: live.Rows) -> str:
        spec = self.result.spec
        return f"{over.shaped(spec.response_shape, spec.response)}-({self.predictor(over)})"

    def predictor(self, over: live.Rows) -> str:
        """The fitted values; long categories by a matrix product over their list of levels, where that is put down."""
        columns = self.result.design.columns
        lists = {tuple(each): at for at, each in enumerate(_level_rows(self.model, self.result))}
        terms = []
        for first, last, which in live.runs(columns):
            if which < 0 or last - first < _FEW - 1 or not self.plan.pieces:
                terms += [self._term(over, j) for j in range(first, last + 1)]
                continue
            levels = tuple(_levels(self.model, self.result, first, last, which))
            row = self.top + 1 + len(self.plan.pieces) + lists[levels]
            across = live.span((row, _WIDE + 1), (row, _WIDE + len(levels)))
            factors = columns[first].factors
            rest = [over.factor(each) for k, each in enumerate(factors) if k != which]
            b = live.span(self._cell(first), self._cell(last))
            terms.append(f"MMULT({'*'.join([over.levels(factors[which].column, across), *rest])},{b})")
        return "+".join(terms)

    def _term(self, over: live.Rows, j: int) -> str:
        b, column = address(*self._cell(j), absolute=True), self.result.design.columns[j]
        return f"{b}*{over.product(column)}" if column.factors else b

    def _cell(self, j: int) -> tuple[int, int]:
        (row, column), _ = self.coefficients
        return row + j, column

    def put_working(self, paper: Paper) -> None:
        """The pieces line by line, then the levels of long categories."""
        head = replace(style.SUBTITLE, size=8.0)
        labels = [self.result.design.columns[j].label for j in self.plan.columns]
        texts = ["recheck, piece by piece", "rows used (1)", "squares", *(f"residual x {label}" for label in labels)]
        for across, text in enumerate(texts):
            paper.put(_WIDE + across, text, head, self.top)
        small = replace(style.NUMBER, color=style.QUIET, size=8.0, number_format="0.000E+00")
        text_look = replace(small, align="left", number_format="General")
        for at, piece in enumerate(self.plan.pieces):
            row = self.top + 1 + at
            paper.put(_WIDE, f"rows {piece.first} to {piece.last}", text_look, row)
            paper.put(_WIDE + 1, piece.mask or "all", text_look, row)
            for across, (text, value) in enumerate(self.of(at)):
                paper.put(_WIDE + 2 + across, Formula(text, value), small, row)
        for at, levels in enumerate(_level_rows(self.model, self.result)):
            row = self.top + 1 + len(self.plan.pieces) + at
            for across, level in enumerate(["levels", *levels]):
                paper.put(_WIDE + across, level, text_look, row)

    # --- what people see

    def put_answers(self, paper: Paper) -> None:
        """A line for the squares, then the sums that must be zero."""
        result, fit = self.result, self.result.fit
        shape = f"{result.spec.response_shape.value} " if result.spec.response_shape is not Shape.AS_IS else ""
        name = words.name_in(self.model.table, result.spec.response)
        look = replace(style.NUMBER, number_format=figures.number_format(fit.ss_residual or 1.0, 8))
        value = address(paper.row, _VALUE, absolute=True)
        test = f"ABS({value}-{live.number(fit.ss_residual)})<={live.number(_allowed(result))}"
        label = f"residual sum of squares ({shape}{name}); at the fit {figures.sentence_number(fit.ss_residual, 8)}"
        _line(paper, label, Formula(self._total(0), fit.ss_residual), look, _judged(value, test))
        for label, text in self._zeros():
            value = address(paper.row, _VALUE, absolute=True)
            test = f"ABS({value})<={live.number(_ZERO)}"
            number = replace(style.NUMBER, number_format="0.000000")
            _line(paper, label, Formula(f"ROUND({text},{_PLACES})", 0.0), number, _judged(value, test))

    def _zeros(self) -> Iterator[tuple[str, str]]:
        shown = self.plan.columns
        if len(shown) <= _MOST_SHOWN:
            for at, j in enumerate(shown):
                column = self.result.design.columns[j]
                what = f"residual x {column.label}" if column.factors else "residual"
                yield f"sum of {what}, must be 0", self._total(1 + at)
            return
        sizes = [f"ABS({self._total(1 + at)})" for at in range(len(shown))]
        parts = [f"MAX({','.join(group)})" for group in live.groups(sizes, ",", live.MOST - 500)]
        yield f"largest of {len(shown)} sums of residual x column, must be 0", f"MAX({','.join(parts)})"

    def _total(self, across: int) -> str:
        column = _WIDE + 2 + across
        return f"SUM({live.span((self.top + 1, column), (self.top + len(self.plan.pieces), column))})"


def _columns(model: ModelSheet, result: ModelResult) -> dict[str, DataColumn]:
    """The data columns that the fit is computed from."""
    assert model.table is not None
    factors = [factor for column in result.design.columns for factor in column.factors]
    names = [result.spec.response, *filter(None, [result.spec.weight]), *(factor.column for factor in factors)]
    found = {name: model.table.column(name) for name in dict.fromkeys(names)}
    return {name: column for name, column in found.items() if column is not None}


def _numbers(model: ModelSheet, result: ModelResult) -> dict[str, Mapping[str, float] | None]:
    """The numbers behind the levels of each category."""
    assert model.table is not None
    columns = _columns(model, result)
    factors = [factor for column in result.design.columns for factor in column.factors]
    names = {factor.column for factor in factors if factor.kind == "level" and factor.column in columns}
    return {name: live.level_numbers(model.table, columns[name]) for name in names}


def _level_rows(model: ModelSheet, result: ModelResult) -> list[list[str | float]]:
    """The lists of levels that matrix products run over, each once."""
    found: list[list[str | float]] = []
    for first, last, which in live.runs(result.design.columns):
        if which >= 0 and last - first >= _FEW - 1:
            levels = _levels(model, result, first, last, which)
            if levels not in found:
                found.append(levels)
    return found


def _levels(model: ModelSheet, result: ModelResult, first: int, last: int, which: int) -> list[str | float]:
    columns = result.design.columns[first : last + 1]
    numbers = _numbers(model, result).get(columns[0].factors[which].column) or {}
    names = [column.factors[which].level for column in columns]
    return [numbers.get(name, name) for name in names]


def _weights(result: ModelResult) -> Array:
    return np.ones(result.fit.n) if result.fit.weights is None else result.fit.weights


def _length(result: ModelResult, j: int) -> float:
    """The product of both columns' lengths; never so small that rounding in a spreadsheet would show."""
    w, x = _weights(result), result.design.matrix[:, j]
    y = result.fit.fitted + result.fit.residual
    least = 1e-6 * math.sqrt(float(np.sum(w * y * y)))
    return max(math.sqrt(float(np.sum(w * x * x))) * max(math.sqrt(result.fit.ss_residual), least), 1e-290)


def _allowed(result: ModelResult) -> float:
    """How far the residual sum of squares may be off: a thousand millionth, and rounding in every fitted value."""
    sizes = np.abs(result.design.matrix) @ np.abs(result.fit.coefficients)
    rounding = 1e-15 * len(result.design.columns) * float(sizes.max())
    total = math.sqrt(float(_weights(result).sum())) * rounding
    return 1e-9 * result.fit.ss_residual + total * (total + 2 * math.sqrt(result.fit.ss_residual))


# --- one row ------------------------------------------------------------------------------------


def _chosen_row(book: Book, paper: Paper, sums: _Sums) -> None:
    """The fitted value of a row whose number the reader types, against what `fit rows` holds for it."""
    model, result = sums.model, sums.result
    section = next((each for each in rows_sheet.sections(book) if model.name in each.starts), None)
    if section is None or model.taken is None:
        return
    table = section.table
    first, last = int(table.rows[0]), int(table.rows[-1])
    typed = address(paper.row, _TYPED, absolute=True)
    place = f"{typed}-{first - 1}"
    cells = {
        name: f"INDEX({live.data_range(table, column, first, last)},{place})"
        for name, column in _columns(model, result).items()
    }
    fitted = f"SUMPRODUCT({sums.predictor(live.Rows(cells, _numbers(model, result)))})"
    if len(fitted) * 2 + 60 > live.MOST:
        return
    sheet = book.title("fit rows")
    key = "on_scale" if "on_scale" in section.keys[model.name] else "fitted"
    column = section.column(model.name, key)
    numbers = reference(sheet, (section.first_row, 0), (section.last_row, 0))
    stored = reference(sheet, (section.first_row, column), (section.last_row, column))
    found = f"INDEX({stored},MATCH({typed},{numbers},0))"
    value = address(paper.row, _VALUE, absolute=True)
    judged = _judged(value, f"ABS({value}-{found})<=1E-9*ABS({found})+1E-12")
    verdict = f'IF(ISERROR({found}),"not listed",IF(ISNUMBER({found}),{judged},"left out"))'
    listed = int(model.taken.used[0]) in section.lines
    row = int(table.rows[model.taken.used[0]])
    now = Formula(f'IF(ISERROR({fitted}),"no value",{fitted})', float(result.fit.fitted[0]))
    code = figures.column_format(result.fit.fitted, result.fit.residual_sd, 5)
    look = replace(style.NUMBER, number_format=code)
    label = "fitted value of the data row typed here (its row number)"
    _line(paper, label, now, look, verdict, AGREES if listed else "not listed")
    paper.put(_TYPED, row, style.INPUT_NUMBER, row=paper.row - 1)


# --- lines --------------------------------------------------------------------------------------


def _judged(value: str, test: str) -> str:
    """The verdict on a cell that should hold a number."""
    return f'IF(ISNUMBER({value}),IF({test},"{AGREES}","{DISAGREES}"),"{DISAGREES}")'


def _line(paper: Paper, label: str, value: Formula, look: Format, verdict: str, said: str = AGREES) -> None:
    paper.spread(label, 0, _TYPED - 2, replace(style.ROW, wrap=True))
    paper.put(_TYPED - 1, None, style.ROW)
    paper.put(_TYPED, None, style.ROW)
    paper.put(_VALUE, value, look)
    paper.put(_VERDICT, Formula(verdict, said), replace(style.ROW_STRONG, align="right", color=style.DEEP))
    at = (paper.row, _VERDICT)
    alert = replace(style.BODY, bold=True, color=style.ALERT)
    paper.highlights.append(Highlight(at, at, f'{address(*at)}="{DISAGREES}"', alert))
    paper.row += 1
