"""The data examined before any fit: what a careful person would point out, with the cells.

Quartile fences after Tukey (1977), Exploratory Data Analysis: beyond three times the interquartile range is far out.
The other thresholds are common practice.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from statistics import NormalDist

import numpy as np
from numpy.typing import NDArray

from bridge.messages import Problem, say
from bridge.regression.spec import Levels, Observations, Shape
from bridge.workbook import kinds
from bridge.workbook.columns import day_of
from bridge.workbook.levels import as_levels
from bridge.workbook.places import data_cell, data_cells
from bridge.workbook.request import ModelRequest
from bridge.workbook.tables import DataColumn, Kind, State, Table
from bridge.workbook.usage import Use, uses

_NEARLY_ALL = 0.95  # of the rows, with one and the same value
_FENCE = 3.0
_LEAST_FOR_FENCES = 12
_LEAST_FOR_CONSTANT = 20
_TOTALS = frozenset({"total", "totals", "grand total", "subtotal", "sum", "average", "mean", "overall"})
_MOST_LEVELS = 2000  # beyond these a column is no category that somebody spells by hand

Rows = NDArray[np.intp]


def examine(table: Table, models: Sequence[ModelRequest]) -> tuple[Problem, ...]:
    """What was found in the columns that the models use, over all rows of the table; texts name the cells."""
    used: dict[tuple[str, bool, Shape], Use] = {}
    for model in models:
        for use in uses(table, model):
            used.setdefault((use.name, use.as_levels, use.shape), use)
    rows = np.arange(len(table.rows))
    found = [*_gaps_in_cells(table, list(used.values())), *_findings(table, list(used.values()), rows, {})]
    return tuple({finding.text: finding for finding in found}.values())


def of_model(
    table: Table, asked: ModelRequest, columns: Sequence[Use], rows: Rows, observations: Observations
) -> list[Problem]:
    """The same for one model's rows, whose values are at hand; blanks and errors are told with the rows left out."""
    known = {name: column for name, column in observations.columns.items() if isinstance(column, Levels)}
    return [replace(finding, model=asked.name) for finding in _findings(table, columns, rows, known)]


def _findings(table: Table, columns: Sequence[Use], rows: Rows, known: Mapping[str, Levels]) -> list[Problem]:
    """`known` are the levels of columns whose `rows` are all filled, where they have been made already."""
    found: list[Problem] = []
    if not columns or not len(rows):
        return found
    complete = {}
    for use in columns:
        own = rows[use.usable()[rows]]
        if not len(own):
            continue
        if not use.as_levels:
            found += _of_numbers(table, use, own)
            continue
        levels = known.get(use.name) or as_levels(use.column, own, table.date1904)
        found += _of_levels(table, use, own, levels)
        if len(own) == len(rows):
            complete[use.name] = levels
    found += _total_row(table, rows)
    if all(use.name in complete or use.usable()[rows].all() for use in columns):
        found += _repeated_rows(table, columns, rows, complete)
    return found


# --- cells -------------------------------------------------------------------------------------


def _gaps_in_cells(table: Table, columns: Sequence[Use]) -> Iterator[Problem]:
    """Blanks, errors, formulas without values and texts among numbers, column by column."""
    told = set()
    for use in columns:
        state = use.column.state
        wanted = [(State.BLANK, "found-blanks"), (State.ERROR, "found-errors"), (State.NO_VALUE, "found-no-value")]
        if not use.as_levels:
            wanted.append((State.TEXT, "found-texts"))
        for one, key in wanted:
            rows = np.flatnonzero(state == one)
            if len(rows) and (use.name, key) not in told:
                told.add((use.name, key))
                cells = data_cells(table, use.column, rows)
                yield say(key, cell=data_cell(table, use.column, int(rows[0])), column=use.name, cells=cells)
        if use.column.kind is Kind.DATE and not use.as_levels and use.words != "an order column":
            yield say("date-as-number", column=use.name)


def _total_row(table: Table, rows: Rows) -> Iterator[Problem]:
    """A last row that sums up the others."""
    last = int(rows[-1])
    if last != len(table.rows) - 1:
        return
    for column in table.columns:
        text = column.texts[last] if column.texts else None
        if text and text.strip().rstrip(":").casefold() in _TOTALS:
            yield say("found-total-row", cell=data_cell(table, column, last), text=text.strip())
            return


def _repeated_rows(table: Table, columns: Sequence[Use], rows: Rows, levels: Mapping[str, Levels]) -> Iterator[Problem]:
    """Rows that agree in every column used."""
    key = np.zeros(len(rows), dtype=np.uint64)
    with np.errstate(over="ignore"):
        for use in columns:
            key = (key ^ _bits(use, rows, levels)) * np.uint64(0x9E3779B97F4A7C15)
            key ^= key >> np.uint64(29)
    ordered = np.sort(key)
    if not (ordered[1:] == ordered[:-1]).any():
        return
    _, first, inverse = np.unique(key, return_index=True, return_inverse=True)
    original = first[inverse.ravel()]  # of each row, the first one like it
    extra = np.flatnonzero(original != np.arange(len(rows)))
    if len(extra) > len(rows) // 2:
        return  # nearly everything repeats, as in a designed trial
    again = int(extra[0])
    first_row, second_row = (int(table.rows[rows[at]]) for at in (original[again], again))
    count = len(extra) + len(np.unique(original[extra]))
    cell = data_cell(table, columns[0].column, int(rows[again]))
    yield say("found-repeated-rows", cell=cell, first=first_row, second=second_row, count=count)


def _bits(use: Use, rows: Rows, levels: Mapping[str, Levels]) -> NDArray[np.uint64]:
    """A column's values as whole numbers that are equal where the values are."""
    if use.as_levels:
        return levels[use.name].codes.astype(np.uint64)
    return (use.column.numbers[rows] + 0.0).view(np.uint64)


# --- levels ------------------------------------------------------------------------------------


def _of_levels(table: Table, use: Use, rows: Rows, levels: Levels) -> Iterator[Problem]:
    if len(levels.names) > _MOST_LEVELS:
        return
    counts = np.bincount(levels.codes, minlength=len(levels.names))
    yield from _spelled_twice(table, use, rows, levels.names, levels.codes, counts)
    if use.words != "a category" or len(levels.names) < 2:
        return
    single = np.flatnonzero(counts == 1)
    if len(single) and len(single) < len(counts):
        at = int(rows[np.flatnonzero(levels.codes == single[0])[0]])
        cell = data_cell(table, use.column, at)
        more = f" (and {len(single) - 1} more like it)" if len(single) > 1 else ""
        yield say("found-single-case", cell=cell, column=use.name, level=levels.names[single[0]], more=more)
    if counts.max() >= _NEARLY_ALL * len(rows) and len(rows) >= _LEAST_FOR_CONSTANT:
        most = levels.names[int(counts.argmax())]
        yield from _nearly_constant(table, use, rows, most, int(counts.max()), levels.codes != counts.argmax())


def _spelled_twice(
    table: Table, use: Use, rows: Rows, names: Sequence[str], codes: NDArray[np.intp], counts: NDArray[np.intp]
) -> Iterator[Problem]:
    """Levels that differ only in spaces or in case."""
    alike: dict[str, list[int]] = {}
    for code, name in enumerate(names):
        alike.setdefault(" ".join(name.split()).casefold(), []).append(code)
    for same in alike.values():
        if len(same) < 2:
            continue
        by_count = sorted(same, key=lambda code: int(counts[code]))
        rare, usual = names[by_count[0]], names[by_count[-1]]
        where = rows[np.flatnonzero(codes == by_count[0])]
        difference = "capital letters" if rare.casefold() == usual.casefold() else "spaces"
        cell, cells = data_cell(table, use.column, int(where[0])), data_cells(table, use.column, where)
        fields = {"column": use.name, "level": rare, "other": usual, "difference": difference}
        yield say("found-spelled-twice", cell=cell, cells=cells, **fields)


# --- numbers -----------------------------------------------------------------------------------


def _of_numbers(table: Table, use: Use, rows: Rows) -> Iterator[Problem]:
    numbers = use.column.numbers[rows]
    if use.words == "an order column":
        yield from _gaps_in_order(table, use, rows, numbers)
        return
    if len(rows) >= _LEAST_FOR_CONSTANT and use.words != "the weight":
        middle = float(np.median(numbers))  # what nearly all rows hold is also what the middle one holds
        same = int(np.count_nonzero(numbers == middle))
        if same >= _NEARLY_ALL * len(rows):
            yield from _nearly_constant(table, use, rows, kinds.number_text(middle), same, numbers != middle)
            return
    yield from _far_values(table, use, rows, _shaped(numbers, use.shape))


def _shaped(numbers: NDArray[np.float64], shape: Shape) -> NDArray[np.float64]:
    """On the scale that enters the model; where that is impossible a refusal says so."""
    with np.errstate(all="ignore"):
        made = {Shape.LOG: np.log, Shape.ROOT: np.sqrt, Shape.RECIPROCAL: np.reciprocal}.get(shape)
        shaped = made(numbers) if made is not None else numbers
    return shaped if np.isfinite(shaped).all() else numbers


def _far_values(table: Table, use: Use, rows: Rows, numbers: NDArray[np.float64]) -> Iterator[Problem]:
    if len(rows) < _LEAST_FOR_FENCES:
        return
    low, high = np.percentile(numbers, (25, 75))
    spread = high - low
    if not spread > 0:
        return
    beyond = np.maximum(low - numbers, numbers - high)
    far = np.flatnonzero(beyond > _fence(len(rows)) * spread)
    if not len(far):
        return
    farthest = far[np.argsort(-beyond[far], kind="stable")]
    at = int(rows[farthest[0]])
    more = "" if len(far) == 1 else f" (and {len(far) - 1} more)"
    value = kinds.cell_text(table, use.column, at)
    yield say("found-far-value", cell=data_cell(table, use.column, at), column=use.name, value=value, more=more)


def _fence(n: int) -> float:
    """Interquartile ranges beyond the quartiles: three, and more where so many rows would reach that far by chance.

    For normal values a quartile lies 0.6745 SD from the middle; one case in twenty such columns may lie beyond.
    """
    farthest = NormalDist().inv_cdf(1 - 0.025 / n)
    return max(_FENCE, (farthest - 0.6745) / 1.349)


def _nearly_constant(
    table: Table, use: Use, rows: Rows, value: str, count: int, others: NDArray[np.bool_]
) -> Iterator[Problem]:
    if count < len(rows):
        odd = rows[others]
        cell, cells = data_cell(table, use.column, int(odd[0])), data_cells(table, use.column, odd)
        column = use.name
        yield say(
            "found-nearly-constant", cell=cell, column=column, value=value, count=count, rows=len(rows), cells=cells
        )


def _gaps_in_order(table: Table, use: Use, rows: Rows, numbers: NDArray[np.float64]) -> Iterator[Problem]:
    """Steps of the order column that are longer than its usual one, and places taken twice."""
    order = np.argsort(numbers, kind="stable")
    steps = np.diff(_in_months(table, use.column, numbers[order]))
    if len(steps) < 3:
        return
    repeats = np.flatnonzero(steps == 0)
    usual = Counter(np.round(steps[steps > 0], 6).tolist()).most_common(1)
    if len(repeats) and len(repeats) <= len(steps) // 4:
        at = int(rows[order[repeats[0] + 1]])
        value = kinds.cell_text(table, use.column, at)
        yield say("found-order-twice", cell=data_cell(table, use.column, at), column=use.name, value=value)
    if not usual or usual[0][1] < 0.8 * np.count_nonzero(steps > 0):
        return
    gaps = np.flatnonzero(steps > 1.5 * usual[0][0])
    if len(gaps):
        before, after = (int(rows[order[gaps[0] + one]]) for one in (0, 1))
        fields = {"column": use.name, "more": "" if len(gaps) == 1 else f" (and {len(gaps) - 1} more)"}
        first, second = (kinds.cell_text(table, use.column, at) for at in (before, after))
        yield say("found-order-gap", cell=data_cell(table, use.column, after), first=first, second=second, **fields)


def _in_months(table: Table, column: DataColumn, serials: NDArray[np.float64]) -> NDArray[np.float64]:
    """Dates on the same day of every month, counted in months; anything else as it is."""
    if column.kind is not Kind.DATE or len(serials) > 5000:
        return serials
    days = [day_of(float(serial), table.date1904) for serial in serials]
    months = [day.year * 12 + day.month for day in days if day is not None]
    same_day = len({day.day for day in days if day is not None}) == 1
    return np.array(months, dtype=np.float64) if same_day and len(months) == len(serials) else serials
