"""The request grid as values: what the user asked, where each entry stands, and everything to be carried over."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from bridge.messages import Problem
from bridge.regression.spec import ModelSpec

Scalar = float | int | str | bool


@dataclass(frozen=True, slots=True)
class Filter:
    """One `use rows where`: column, comparison (`equals`, `is not`, `at least`, ..., `between`), one or two values."""

    column: str
    comparison: str
    values: tuple[Scalar, ...]
    cell: str


@dataclass(frozen=True, slots=True)
class ModelRequest:
    """One model column of the grid, read.

    `spec` is None where a refusal among `problems` stops it. `entries` maps what was asked to its cell address in
    `fit request` as it is to stand: keys are data column names and settings' labels (the second filter's `is` and
    `value` as `and is`, `and value`), `x crossed with y`, `data sheet` and `model` (the header). `label` is the data
    column that names rows.
    """

    name: str
    grid_column: int
    sheet: str | None
    spec: ModelSpec | None
    filters: tuple[Filter, ...] = ()
    label: str | None = None
    problems: tuple[Problem, ...] = ()
    entries: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class GridRow:
    """A row of one of the grid's blocks: its zero-based sheet row and the label (and second label) that it carries."""

    row: int
    label: str
    second: str = ""


@dataclass(frozen=True, slots=True)
class Grid:
    """The sheet as found: every cell's value by (row, column), and where the blocks' rows stand.

    An empty `cells` means first contact. `model_columns` maps a model's name to its zero-based column; a name that
    stands over several columns is told apart by a number (`C (2)`). Header rows are None where the block is missing.
    `label_column` holds the labels; `other_columns` maps `kind`, `filled`, `range`, `with`, `blank means` to their
    zero-based columns, as far as they are there. `dates` are the cells that show their number as a date.
    """

    cells: Mapping[tuple[int, int], Scalar]
    formulas: Mapping[tuple[int, int], str]
    data_sheets: tuple[str, ...]
    model_columns: Mapping[str, int]
    column_header: int | None
    column_rows: tuple[GridRow, ...]
    crossed_header: int | None
    crossed_rows: tuple[GridRow, ...]
    setting_header: int | None
    setting_rows: tuple[GridRow, ...]
    status_header: int | None
    status_rows: tuple[GridRow, ...]
    label_column: int = 0
    other_columns: Mapping[str, int] = field(default_factory=dict)
    dates: frozenset[tuple[int, int]] = frozenset()


@dataclass(frozen=True, slots=True)
class Request:
    """The whole request: the grid as it is to stand (what was found, with missing rows and new data columns added),
    the models in grid order, problems that concern no single model, and the data sheets that can be named."""

    grid: Grid
    models: tuple[ModelRequest, ...]
    problems: tuple[Problem, ...] = ()
    sheet_names: tuple[str, ...] = ()
