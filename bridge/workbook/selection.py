"""A table and a model's request -> the rows used, their values, and what is wrong or worth knowing about them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from bridge.messages import Problem, say
from bridge.regression.spec import CategoryTerm, Errors, Levels, ModelSpec, NumberTerm, Observations, Search, Shape
from bridge.workbook import examine, kinds, spelling
from bridge.workbook.contents import Taken
from bridge.workbook.entries import number
from bridge.workbook.levels import as_levels
from bridge.workbook.places import data_cell, data_cells, request_cell
from bridge.workbook.ranking import most_useful_first
from bridge.workbook.request import Filter, ModelRequest, Scalar
from bridge.workbook.tables import DataColumn, Kind, State, Table
from bridge.workbook.usage import Use, uses

Rows = NDArray[np.bool_]
_REASONS = {
    State.BLANK: "is blank",
    State.ERROR: "holds an error",
    State.NO_VALUE: "is a formula without a value",
    State.TEXT: "holds a text",
}


def take(table: Table, asked: ModelRequest) -> tuple[Taken, Observations, tuple[Problem, ...]]:
    """The rows that `asked` uses, complete, and every problem with them.

    Where a refusal is among the problems the observations are not fit for fitting. `asked.spec` must not be None.
    """
    spec = asked.spec
    if spec is None:
        raise ValueError("a refused request takes no rows")
    columns = uses(table, asked)
    taking = _Taking(table, asked)
    kept = taking.filtered()
    used = kept.copy()
    for use in columns:
        taking.check_cells(use, kept)
        used &= use.usable()
    rows = np.flatnonzero(used)
    observations = Observations({use.name: _values(table, use, rows) for use in columns}, len(rows))
    taking.tell_left_out(columns, kept)
    for use in columns:
        taking.check_domain(use, rows)
    taking.check_model(spec, observations, rows)
    taking.problems += examine.of_model(table, asked, columns, rows, observations)
    taken = Taken(tuple(rows.tolist()), _left_out(table, asked, columns, kept, used))
    return taken, observations, most_useful_first(taking.problems)


def _values(table: Table, use: Use, rows: NDArray[np.intp]) -> NDArray[np.float64] | Levels:
    if use.as_levels:
        return as_levels(use.column, rows, table.date1904)
    return use.column.numbers[rows]


# --- why a row is left out ---------------------------------------------------------------------


def _left_out(table: Table, asked: ModelRequest, columns: Sequence[Use], kept: Rows, used: Rows) -> dict[int, str]:
    reasons: dict[int, str] = {}
    for use in columns:
        bad = np.flatnonzero(kept & ~use.usable())
        for at, state in zip(bad.tolist(), use.column.state[bad].tolist(), strict=True):
            reason = f"{use.name} {_REASONS[State(state)]}"
            reasons[at] = f"{reasons[at]}; {reason}" if at in reasons else reason
    passed = np.ones(len(table.rows), dtype=np.bool_)
    for one in asked.filters:
        column = table.column(one.column)
        if column is None:
            continue
        out = passed & ~passes(table, column, one)
        passed &= ~out
        for at in np.flatnonzero(out).tolist():
            reasons[at] = f"filtered: {one.column} {_seen(table, column, at)}"
    return dict(sorted(reasons.items()))


def _seen(table: Table, column: DataColumn, at: int) -> str:
    state = State(int(column.state[at]))
    text = kinds.level_text(column, at, table.date1904)
    return f"is {text}" if text is not None else _REASONS.get(state, "is blank")


# --- filters -----------------------------------------------------------------------------------


def passes(table: Table, column: DataColumn, one: Filter) -> Rows:
    """The rows that a filter lets through, shape (n,); blanks and errors never pass."""
    if column.kind in (Kind.TEXT, Kind.EMPTY):
        there = np.isin(column.state, (State.TEXT, State.NUMBER, State.DATE, State.YES_NO))
        equal = np.fromiter((text == one.values[0] for text in _shown_texts(table, column)), np.bool_, len(table.rows))
        return there & (equal if one.comparison == "equals" else ~equal)
    there = ~np.isnan(column.numbers)
    with np.errstate(invalid="ignore"):
        return there & _compared(column.numbers, one.comparison, [_number(value) for value in one.values])


def _number(value: Scalar) -> float:
    return float(value) if not isinstance(value, str) else number(value) or float("nan")


def _compared(numbers: NDArray[np.float64], comparison: str, ends: Sequence[float]) -> Rows:
    first = ends[0]
    if comparison == "between":
        return (numbers >= first) & (numbers <= ends[-1])
    results: Mapping[str, Rows] = {
        "equals": numbers == first,
        "is not": numbers != first,
        "at least": numbers >= first,
        "at most": numbers <= first,
        "above": numbers > first,
        "below": numbers < first,
    }
    return results[comparison]


def _shown_texts(table: Table, column: DataColumn) -> Iterator[str | None]:
    if column.texts and np.isin(column.state, (State.TEXT, State.BLANK, State.ERROR, State.NO_VALUE)).all():
        yield from column.texts
        return
    for at in range(len(table.rows)):
        yield kinds.level_text(column, at, table.date1904)


# --- one model's taking ------------------------------------------------------------------------


class _Taking:
    """The problems met while one model's rows are taken."""

    def __init__(self, table: Table, asked: ModelRequest) -> None:
        self.table, self.asked = table, asked
        self.problems: list[Problem] = []

    def tell(self, key: str, cell: str, **fields: object) -> None:
        """A message about a cell, by its full name; what it says may call a cell of the request by its address."""
        fields.setdefault("at", cell.removeprefix(request_cell("")))
        self.problems.append(say(key, cell=cell, model=self.asked.name, **fields))

    def _entry(self, key: str) -> str:
        """The cell of what was asked about a column or a setting."""
        entries = self.asked.entries
        return request_cell(entries.get(key) or entries.get("model", "A1"))

    def filtered(self) -> Rows:
        """The rows that pass all filters."""
        kept = np.ones(len(self.table.rows), dtype=np.bool_)
        for one in self.asked.filters:
            column = self.table.column(one.column)
            if column is None:
                continue
            through = passes(self.table, column, one)
            self._check_filter(one, column, through)
            kept &= through
        return kept

    def _check_filter(self, one: Filter, column: DataColumn, through: Rows) -> None:
        wanted = str(one.values[0])
        if one.comparison == "is not" and column.kind is Kind.TEXT:
            absent = wanted not in set(_shown_texts(self.table, column))
            if absent:
                hint = spelling.did_you_mean(wanted, {text for text in column.texts if text})
                self.tell("filter-value-absent", request_cell(one.cell), column=one.column, value=wanted, hint=hint)
        if not through.any():
            known = {text for text in column.texts if text} if one.comparison == "equals" else set()
            hint = spelling.did_you_mean(wanted, known)
            condition = _filter_words(self.table, one)
            self.tell("filter-leaves-nothing", request_cell(one.cell), hint=hint, condition=condition)

    # --- cells

    def check_cells(self, use: Use, kept: Rows) -> None:
        """Cells of a used column that do not hold what the others hold."""
        state = use.column.state
        errors, valueless, texts = (
            np.flatnonzero(kept & (state == one)) for one in (State.ERROR, State.NO_VALUE, State.TEXT)
        )
        if len(valueless):
            cells = data_cells(self.table, use.column, valueless)
            self.tell("formula-without-value", self._cell(use, valueless), column=use.name, cells=cells)
        if len(errors):
            cells = data_cells(self.table, use.column, errors)
            self.tell("error-cells", self._cell(use, errors), column=use.name, cells=cells, rows=_rows(len(errors)))
        if use.as_levels:
            self._check_level_cells(use, kept)
            return
        if len(texts):
            self._tell_text(use, texts)
        if use.column.kind is Kind.NUMBER:
            self._tell_among(use, kept & (state == State.DATE), "a date", "numbers")
            self._tell_among(use, kept & (state == State.YES_NO), "TRUE or FALSE", "numbers")
        elif use.column.kind is Kind.DATE:
            self._tell_among(use, kept & (state == State.NUMBER), "a number", "dates")

    def _tell_text(self, use: Use, texts: NDArray[np.intp]) -> None:
        at = int(texts[0])
        text = use.column.texts[at] or ""
        as_number = number(text.strip().rstrip("%")) is not None
        key = "number-stored-as-text" if as_number else "text-in-number-column"
        what = "a date" if use.column.kind is Kind.DATE else "a number"
        fields = {"column": use.name, "role": use.words, "text": _short(text), "what": what, "at": use.cell}
        self.tell(key, self._cell(use, texts), more=_more(len(texts) - 1), **fields)

    def _check_level_cells(self, use: Use, kept: Rows) -> None:
        state = use.column.state
        among = {Kind.TEXT: State.NUMBER, Kind.NUMBER: State.TEXT}.get(use.column.kind)
        odd = np.flatnonzero(kept & (state == among)) if among is not None else np.empty(0, np.intp)
        if len(odd):
            key = "number-among-texts" if among is State.NUMBER else "text-among-numbers"
            level = kinds.level_text(use.column, int(odd[0]), self.table.date1904)
            self.tell(key, self._cell(use, odd), column=use.name, level=level, more=_more(len(odd) - 1))

    def _tell_among(self, use: Use, rows: Rows, what: str, others: str) -> None:
        odd = np.flatnonzero(rows)
        if len(odd):
            value = kinds.number_text(float(use.column.numbers[odd[0]]))
            fields = {"column": use.name, "what": what, "others": others, "value": value}
            self.tell("kind-among-others", self._cell(use, odd), more=_more(len(odd) - 1), **fields)

    def _cell(self, use: Use, rows: NDArray[np.intp]) -> str:
        return data_cell(self.table, use.column, int(rows[0]))

    # --- rows

    def tell_left_out(self, columns: Sequence[Use], kept: Rows) -> None:
        """How many rows are not used, and why, in one note for blanks and one for filters."""
        filtered_out = int(np.count_nonzero(~kept))
        if filtered_out and kept.any():
            words = " and ".join(_filter_words(self.table, one) for one in self.asked.filters)
            cell = request_cell(self.asked.filters[0].cell)
            self.tell("rows-filtered", cell, rows=_rows(filtered_out), condition=words)
        blank = np.zeros(len(kept), dtype=np.bool_)
        parts, first = [], ""
        for use in columns:
            empty = kept & (use.column.state == State.BLANK)
            blank |= empty
            rows = np.flatnonzero(empty)
            if len(rows):
                first = first or self._cell(use, rows)
                parts.append(f"{use.name} is blank in {data_cells(self.table, use.column, rows)}")
        if parts:
            count = int(np.count_nonzero(blank))
            self.tell("rows-left-out", first, rows=_rows(count), reasons="; ".join(parts))
        self._tell_hidden(columns, kept)

    def _tell_hidden(self, columns: Sequence[Use], kept: Rows) -> None:
        used = kept & self.table.hidden
        for use in columns:
            used &= use.usable()
        hidden = np.flatnonzero(used)
        if len(hidden):
            cell = data_cell(self.table, columns[0].column, int(hidden[0]))
            self.tell("hidden-rows-used", cell, rows=_rows(len(hidden)), sheet=self.table.sheet)

    # --- values

    def check_domain(self, use: Use, rows: NDArray[np.intp]) -> None:
        """Values that the shape asked for, or a weight, cannot take."""
        numbers = use.column.numbers[rows] if not use.as_levels else np.empty(0)
        if use.words == "the weight":
            self._tell_value(use, rows[numbers <= 0], "weight-not-positive")
        if use.shape is Shape.LOG:
            self._tell_value(use, rows[numbers <= 0], "log-of-nothing")
        elif use.shape is Shape.ROOT:
            self._tell_value(use, rows[numbers < 0], "root-of-negative")
        elif use.shape is Shape.RECIPROCAL:
            self._tell_value(use, rows[numbers == 0], "reciprocal-of-zero")

    def _tell_value(self, use: Use, rows: NDArray[np.intp], key: str) -> None:
        if len(rows):
            value = kinds.number_text(float(use.column.numbers[rows[0]]))
            fields = {"column": use.name, "value": value, "at": use.cell, "role": use.words}
            self.tell(key, self._cell(use, rows), more=_more(len(rows) - 1), **fields)

    def check_model(self, spec: ModelSpec, observations: Observations, rows: NDArray[np.intp]) -> None:
        """Whether the rows are enough, and varied enough, for what is asked."""
        response = self._entry(spec.response)
        if not observations.n:
            if not any(problem.key == "filter-leaves-nothing" for problem in self.problems):
                self.tell("no-rows", response, sheet=self.table.sheet)
            return
        self._check_categories(spec, observations)
        needed = coefficients(spec, observations)
        if observations.n <= needed and spec.search is Search.NONE:
            self.tell("too-few-rows", response, rows=_rows(observations.n), count=needed)
        numbers = observations.columns.get(spec.response)
        if isinstance(numbers, np.ndarray) and observations.n > 1 and numbers.min() == numbers.max():
            value = kinds.number_text(float(numbers[0]))
            self.tell("constant-response", response, column=spec.response, value=value)
        if spec.lags is not None and spec.errors is Errors.SERIAL and spec.lags >= observations.n:
            self.tell("too-many-lags", self._entry("lags"), lags=spec.lags, rows=observations.n)
        if "folds" in self.asked.entries and spec.folds > observations.n:
            self.tell("too-many-folds", self._entry("folds"), folds=spec.folds, rows=observations.n)

    def _check_categories(self, spec: ModelSpec, observations: Observations) -> None:
        for term in spec.terms:
            if not isinstance(term, CategoryTerm):
                continue
            names = observations.levels(term.column).names
            cell = self._entry(term.column)
            if len(names) == 1:
                self.tell("one-level", cell, column=term.column, level=names[0])
            elif term.base is not None and term.base not in names:
                hint = spelling.did_you_mean(term.base, names)
                self.tell("base-not-in-rows", cell, column=term.column, base=term.base, hint=hint)
        if spec.group is not None and spec.errors is Errors.GROUPED:
            names = observations.levels(spec.group).names
            if len(names) == 1:
                cell = self._entry(spec.group)
                self.tell("one-group", cell, column=spec.group, level=names[0])


def coefficients(spec: ModelSpec, observations: Observations) -> int:
    """How many coefficients the model has before aliased ones are taken out."""
    widths = {term.column: _width(term, observations) for term in spec.terms}
    crossed = sum(widths.get(term.first, 0) * widths.get(term.second, 0) for term in spec.crossed)
    return int(spec.intercept) + sum(widths.values()) + crossed


def _width(term: NumberTerm | CategoryTerm, observations: Observations) -> int:
    if isinstance(term, CategoryTerm):
        return max(len(observations.levels(term.column).names) - 1, 0)
    return term.degree + len(term.bends)


# --- words -------------------------------------------------------------------------------------


def _rows(count: int) -> str:
    return f"{count} row" if count == 1 else f"{count} rows"


def _more(count: int) -> str:
    """How many more cells are like the one named."""
    return "" if count < 1 else f" (and {count} more cell{'s' if count > 1 else ''})"


def _short(text: str) -> str:
    bare = " ".join(text.split())
    return bare if len(bare) <= 40 else f"{bare[:39]}…"


def _said(table: Table, column: DataColumn, one: Filter) -> str:
    def text(value: Scalar) -> str:
        if isinstance(value, bool):
            return "yes" if value else "no"
        if isinstance(value, str):
            return value
        return kinds.date_text(float(value), table.date1904) if column.kind is Kind.DATE else kinds.number_text(value)

    return " and ".join(text(value) for value in one.values)


def _filter_words(table: Table, one: Filter) -> str:
    column = table.column(one.column)
    value = _said(table, column, one) if column is not None else ""
    words = {"equals": "is", "is not": "is not"}.get(one.comparison, f"is {one.comparison}")
    return f"{one.column} {words} {value}"
