"""`fit rows`: one line per data row, every model's column set side by side; one section per data sheet.

To 20,000 rows all of them; above that every row with a remark (the oddest half of the room at most) and an even sample
of the others. Columns are dense blocks of numbers, so that length costs little.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from bridge.page.cells import Format, column_letters, quoted
from bridge.page.sheet import Block, BlockColumn, Sheet
from bridge.regression.estimates import mean_in_units
from bridge.regression.results import ModelResult
from bridge.regression.spec import Shape
from bridge.sheets import figures, measure, remarks, style, top, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import Paper
from bridge.sheets.top import ROWS
from bridge.workbook.tables import DataColumn, Kind, Table

MOST_LINES = 20_000
WIDEST_TEXT = 110.0
_FIRST_SET = 3  # row, label, a narrow gap

Span = tuple[tuple[int, int], tuple[int, int]]
Floats = NDArray[np.float64]
Spread = Callable[[Floats], Floats]


@dataclass(frozen=True, slots=True)
class Section:
    """The lines of one data sheet.

    `lines` are the table's data rows shown, as indexes, (k,). `header_row` and `first_row` are zero-based rows of
    `fit rows`; `starts` gives the first column of each model's set, `keys` what its columns hold, in order.
    """

    table: Table
    models: tuple[ModelSheet, ...]
    lines: NDArray[np.int64]
    header_row: int
    starts: Mapping[str, int]
    keys: Mapping[str, tuple[str, ...]]

    @property
    def first_row(self) -> int:
        """The first line's row."""
        return self.header_row + 1

    @property
    def last_row(self) -> int:
        """The last line's row."""
        return self.header_row + len(self.lines)

    def column(self, model: str, key: str) -> int:
        """The sheet column that holds `key` of a model. Raises ValueError where the set has none."""
        return self.starts[model] + self.keys[model].index(key)


_TEXT = replace(style.ROW, indent=1)  # beside numbers that end at their cell's right edge
_HEADERS = {
    "used": "used",
    "observed": "observed",
    "fitted": "fitted",
    "on_scale": "fitted",  # the shape is added
    "residual": "residual",
    "internal": "studentised residual (internal)",
    "external": "studentised residual (external)",
    "leverage": "leverage",
    "cook": "Cook's distance",
    "dffits": "DFFITS",
    "huber": "Huber weight",
    "remark": "remark",
}


# --- doors --------------------------------------------------------------------------------------


def lay_out(book: Book) -> Sheet:
    """The sheet `fit rows`."""
    found = sections(book)
    paper = Paper("fit rows", {0: 8.0, 1: 14.0, 2: 1.5})
    what = "One line per data row: what was used, what was left out and why, and how each row fits."
    top.put(paper, book, "Row by row", what, 11)
    for section in found:
        _note(paper, section)
        _heads(paper, section, book)
        _lines(paper, section)
    areas = _areas(found)
    across = max((_last_column(section) for section in found), default=8)
    sheet = paper.sheet(
        across,
        title=book.title("fit rows"),
        freeze=(found[0].first_row, 2) if found else None,
        print_titles=(found[0].header_row, found[0].header_row) if len(found) == 1 else None,
        title_columns=(0, 1) if found else None,
        tab_color=style.TAB_DETAIL,
    )
    return replace(sheet, print_area=areas[0], more_print_areas=areas[1:]) if areas else sheet


def _areas(found: Sequence[Section]) -> tuple[Span, ...]:
    """What is printed: each model's column set on pages of its own, beside the repeated row numbers and labels."""
    areas: list[Span] = []
    for section in found:
        for model in section.models:
            last = section.starts[model.name] + len(section.keys[model.name]) - 1
            first = (section.header_row - 2, section.starts[model.name]) if areas else (0, 0)
            areas.append((first, (section.last_row, last)))
    return tuple(areas)


def places(book: Book) -> dict[str, Span]:
    """Each fitted model's column set, header row included: first and last (row, column)."""
    return {
        model.name: (
            (section.header_row, section.starts[model.name]),
            (section.last_row, section.starts[model.name] + len(section.keys[model.name]) - 1),
        )
        for section in sections(book)
        for model in section.models
    }


def sections(book: Book) -> tuple[Section, ...]:
    """Where everything stands: one section per data sheet that has a fitted model."""
    by_sheet: dict[str, list[ModelSheet]] = {}
    for model, _ in book.fitted:
        if model.table is not None:
            by_sheet.setdefault(model.table.sheet, []).append(model)
    found: list[Section] = []
    row = ROWS
    for models in by_sheet.values():
        section = _section(models, row)
        found.append(section)
        row = section.last_row + 3
    return tuple(found)


# --- what stands where --------------------------------------------------------------------------


def _section(models: list[ModelSheet], row: int) -> Section:
    table = models[0].table
    assert table is not None  # sections are made of models with a table
    starts: dict[str, int] = {}
    keys: dict[str, tuple[str, ...]] = {}
    column = _FIRST_SET
    for model in models:
        starts[model.name] = column
        keys[model.name] = _keys(_result(model))
        column += len(keys[model.name]) + 1
    # a note, the models' names and the units stand above the header row
    return Section(table, tuple(models), _shown_lines(table, models), row + 3, starts, keys)


def _keys(result: ModelResult) -> tuple[str, ...]:
    left_out = set()
    if result.spec.response_shape is Shape.AS_IS:
        left_out.add("on_scale")
    if result.fit.robust_weights is None:
        left_out.add("huber")
    return tuple(key for key in _HEADERS if key not in left_out)


def _shown_lines(table: Table, models: Sequence[ModelSheet]) -> NDArray[np.int64]:
    n = len(table.rows)
    if n <= MOST_LINES:
        return np.arange(n, dtype=np.int64)
    oddness = np.zeros(n)
    for model in models:
        result, used = _result(model), _used(model)
        found = remarks.marks(result).any
        size = np.abs(np.nan_to_num(result.influence.external)) + 1.0
        oddness[used] = np.maximum(oddness[used], np.where(found, size, 0.0))
    return thinned(n, oddness, MOST_LINES)


def thinned(n: int, oddness: Floats, most: int) -> NDArray[np.int64]:
    """At most `most` of `n` positions, in order: the odd ones (oddness above 0, the oddest half of the room at most)
    and an even sample of all."""
    odd = np.flatnonzero(oddness > 0)
    if len(odd) > most // 2:
        odd = odd[np.argsort(-oddness[odd], kind="stable")[: most // 2]]
    even = np.unique(np.linspace(0, n - 1, most - len(odd)).round().astype(np.int64))
    return np.union1d(odd, even).astype(np.int64)


# --- putting it down ----------------------------------------------------------------------------


def _note(paper: Paper, section: Section) -> None:
    """Above a section: which sheet it shows, and whether all of it."""
    paper.row = section.header_row - 3
    rows, shown = len(section.table.rows), len(section.lines)
    text = f'Rows of "{section.table.sheet}"; a click on a row number leads to the row.'
    if shown < rows:
        text = (
            f'{words.plural(shown, "row")} of the {words.number(rows)} of "{section.table.sheet}": every row with a '
            "remark, as far as there is room, and an even sample of the others. The fits used all of them."
        )
    paper.put(0, text, style.SUBTITLE)


def _heads(paper: Paper, section: Section, book: Book) -> None:
    row = section.header_row
    head = replace(style.HEADER, wrap=True)
    head_right, head_text = replace(head, align="right"), replace(head, indent=1)
    paper.heights[row] = 40.0
    paper.put(0, "row", head_right, row)
    paper.put(1, "label", head_text, row)
    for model in section.models:
        result, start = _result(model), section.starts[model.name]
        paper.put(start, f"{model.name}  {_band(section.table, result)}", style.HEADING, row - 2)
        for at, key in enumerate(section.keys[model.name]):
            header = _HEADERS[key] + (f" ({result.spec.response_shape.value})" if key == "on_scale" else "")
            paper.put(start + at, header, {"used": head, "remark": head_text}.get(key, head_right), row)
            unit = _unit(section.table, result, key)
            if unit:
                paper.put(start + at, unit, replace(style.SUBTITLE, align="right"), row - 1)
                paper.widths[start + at] = max(paper.widths.get(start + at, 0.0), measure.units(unit))


def _band(table: Table, result: ModelResult) -> str:
    return f"{words.name_in(table, result.spec.response)}, {words.form(result.spec)}"


def _unit(table: Table, result: ModelResult, key: str) -> str:
    spec = result.spec
    plain = words.unit_in(table, spec.response) or words.name_in(table, spec.response)
    if key in ("observed", "fitted"):
        return plain
    if key in ("on_scale", "residual"):
        return plain if spec.response_shape is Shape.AS_IS else f"{spec.response_shape.value} {plain}"
    return ""


def _lines(paper: Paper, section: Section) -> None:
    columns = [_row_numbers(section), _labels(section)]
    paper.blocks.append(Block(section.first_row, 0, tuple(columns)))
    _fit_widths(paper, 0, columns, ("row", "label"))
    for model in section.models:
        made = _set(section, model)
        start = section.starts[model.name]
        paper.blocks.append(Block(section.first_row, start, tuple(made)))
        _fit_widths(paper, start, made, section.keys[model.name])
        paper.widths.setdefault(start + len(made), 1.5)
    paper.row = section.last_row + 1


def _row_numbers(section: Section) -> BlockColumn:
    table = section.table
    first = min((column.index for column in table.columns), default=0)
    target = f"#{quoted(table.sheet)}!{column_letters(first)}".replace('"', '""')
    numbers = table.rows[section.lines].astype(np.int64)
    look = replace(style.NUMBER, number_format=figures.PLAIN_WHOLE, color=style.DEEP)
    return BlockColumn(numbers.astype(np.float64), look, f'HYPERLINK("{target}{{key}}",{{key}})', numbers)


def _labels(section: Section) -> BlockColumn:
    name = next((model.request.label for model in section.models if model.request.label), None)
    column = words.column_of(section.table, name) if name else None
    if column is None:
        return BlockColumn([""] * len(section.lines), _TEXT)
    return BlockColumn([label(column, int(line)) for line in section.lines], _TEXT)


def label(column: DataColumn, row: int) -> str:
    """What a label column says for a data row (by index): its text, its date, or its number as typed."""
    if column.texts and column.texts[row] is not None:
        return str(column.texts[row])
    number = float(column.numbers[row])
    if np.isnan(number):
        return ""
    return words.serial_day(number) if column.kind is Kind.DATE else f"{number:.15g}"


def _set(section: Section, model: ModelSheet) -> list[BlockColumn]:
    result, used = _result(model), _used(model)
    n, lines = len(section.table.rows), section.lines

    def spread(values: Floats) -> Floats:
        whole = np.full(n, np.nan)
        whole[used] = np.where(np.isfinite(values), values, np.nan)
        return np.asarray(whole[lines])

    return [_column(key, result, model, spread, section) for key in section.keys[model.name]]


def _column(key: str, result: ModelResult, model: ModelSheet, spread: Spread, section: Section) -> BlockColumn:
    if key == "used":
        return BlockColumn(_used_words(model, section.lines, len(section.table.rows)), style.ROW)
    if key == "remark":
        return BlockColumn(_remark_words(result, _used(model), section), _TEXT)
    values = case_values(result, key)
    return BlockColumn(spread(values), replace(style.NUMBER, number_format=_format(result, key, values)))


def case_values(result: ModelResult, key: str) -> Floats:
    """A number column of `fit rows` for the rows used, (n,)."""
    influence, fit = result.influence, result.fit
    values = {
        "observed": result.observed,
        "residual": fit.residual,
        "on_scale": fit.fitted,
        "internal": influence.internal,
        "external": influence.external,
        "leverage": influence.leverage,
        "cook": influence.cooks_distance,
        "dffits": influence.dffits,
        "huber": fit.robust_weights,
    }
    if key == "fitted":
        return mean_in_units(fit.fitted, result.back)
    found = values[key]
    assert found is not None  # the column is there only where the fit has weights
    return found


def _format(result: ModelResult, key: str, values: Floats) -> str:
    if key == "observed":
        return figures.typed_format(values[:2000])
    if key == "fitted":
        return figures.column_format(values, figures.unit_sd(result))
    if key in ("residual", "on_scale"):
        return figures.column_format(values, result.fit.residual_sd)
    return {"internal": "0.00", "external": "0.00", "dffits": "0.000"}.get(key, "0.0000")


def _used_words(model: ModelSheet, lines: NDArray[np.int64], n: int) -> list[str]:
    left_out = model.taken.left_out if model.taken is not None else {}
    words_of = ["yes"] * n
    for at, reason in left_out.items():
        words_of[at] = f"no: {reason}"
    return [words_of[line] for line in lines.tolist()]


def _remark_words(result: ModelResult, used: NDArray[np.int64], section: Section) -> list[str]:
    texts = [""] * len(section.table.rows)
    for at, text in zip(used.tolist(), remarks.remarks(result), strict=True):
        texts[at] = text
    return [texts[line] for line in section.lines.tolist()]


def _fit_widths(paper: Paper, start: int, columns: Sequence[BlockColumn], keys: Sequence[str]) -> None:
    for at, (column, key) in enumerate(zip(columns, keys, strict=True)):
        wanted = _width(column, column.format)
        least = {"row": 8.0, "label": 14.0, "used": 8.0, "remark": 24.0}.get(key, 11.5)
        paper.widths[start + at] = max(paper.widths.get(start + at, 0.0), least, wanted)


def _width(column: BlockColumn, look: Format) -> float:
    if isinstance(column.values, np.ndarray):
        finite = column.values[np.isfinite(column.values)]
        ends = (float(finite.min()), float(finite.max())) if len(finite) else (0.0,)
        return measure.widest(figures.shown(value, look.number_format) for value in ends)
    return min(WIDEST_TEXT, measure.widest(set(map(str, column.values))) + 1.5 * look.indent)


def _last_column(section: Section) -> int:
    last = section.models[-1].name
    return section.starts[last] + len(section.keys[last]) - 1


def _result(model: ModelSheet) -> ModelResult:
    assert model.result is not None  # sections are made of fitted models
    return model.result


def _used(model: ModelSheet) -> NDArray[np.int64]:
    return np.asarray(model.taken.used if model.taken is not None else (), dtype=np.int64)
