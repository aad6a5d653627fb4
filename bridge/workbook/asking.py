"""One model's column of the grid while it is being read: its cells, and the problems met so far."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from bridge.messages import Problem, Severity, say
from bridge.page.cells import address
from bridge.workbook import grid as grids
from bridge.workbook.arrange import Arranged
from bridge.workbook.entries import Entry
from bridge.workbook.places import data_cell, data_cells, request_cell
from bridge.workbook.request import Grid, Scalar
from bridge.workbook.tables import DataColumn, Table


@dataclass(frozen=True, slots=True, eq=False)
class Used:
    """A data column with its entry and the entry's cell; each is equal to itself only."""

    table: Table
    column: DataColumn
    entry: Entry
    cell: str

    @property
    def name(self) -> str:
        """The column's name in its table."""
        return self.column.name


@dataclass
class Asking:
    """A model's name and column, with what has been found out about it."""

    arranged: Arranged
    name: str
    column: int
    problems: list[Problem] = field(default_factory=list)
    entries: dict[str, str] = field(default_factory=dict)
    is_asked: bool = False

    @property
    def grid(self) -> Grid:
        """The grid as it is to stand."""
        return self.arranged.grid

    def cell(self, row: int) -> str:
        """The address of the model's cell in a row of the grid."""
        return address(row, self.column)

    @property
    def header_cell(self) -> str:
        """Where the model's name stands."""
        return self.cell(self.grid.column_header or 0)

    def value(self, row: int) -> Scalar | None:
        """What the model has typed in a row, or None."""
        value = self.grid.cells.get((row, self.column))
        return None if value is None or not grids.shown(value) else value

    def lacks_value(self, row: int) -> bool:
        """Whether the cell is a formula that has no stored value."""
        at = (row, self.column)
        return at in self.grid.formulas and at not in self.grid.cells

    def tell(self, key: str, at: str, **fields: object) -> None:
        """Keep a message about a cell of the request."""
        self.problems.append(say(key, cell=request_cell(at), model=self.name, at=at, **fields))

    def tell_of_data(self, key: str, used: Used, rows: NDArray[np.intp]) -> None:
        """Keep a message about cells of a data column, by the indexes of their rows."""
        cells = data_cells(used.table, used.column, rows)
        first = data_cell(used.table, used.column, int(rows[0]))
        self.problems.append(say(key, cell=first, model=self.name, column=used.name, cells=cells))

    @property
    def is_refused(self) -> bool:
        """Whether anything met so far keeps the model from being fitted."""
        return any(problem.severity is Severity.REFUSAL for problem in self.problems)
