"""What the numeric core refuses, said in the user's terms. Most of it was caught at the cells before."""

from __future__ import annotations

from bridge.messages import Problem, say
from bridge.regression.errors import RegressionError, TooFewRows, TooManyColumns
from bridge.workbook.contents import Taken
from bridge.workbook.places import data_cell, request_cell
from bridge.workbook.request import ModelRequest
from bridge.workbook.tables import Table


def explain(error: RegressionError, model: ModelRequest, table: Table, taken: Taken) -> Problem:
    """The message for a model that the numeric core would not fit, with the data cell or the entry it is about."""
    column = table.column(error.column) if error.column is not None else None
    entry = model.entries.get(error.column or (model.spec.response if model.spec else ""), "")
    cell = request_cell(entry) if entry else None
    if column is not None and error.index is not None:
        cell = data_cell(table, column, taken.used[error.index])
    fields = {"cell": cell, "model": model.name, "at": _place(cell)}
    if isinstance(error, TooFewRows):
        return say("fewer-rows-than-terms", rows=error.rows, count=error.coefficients, **fields)
    if isinstance(error, TooManyColumns):
        return say("too-many-terms", reason=str(error), **fields)
    return say("cannot-be-fitted", reason=str(error), **fields)


def explain_breakdown(error: ArithmeticError | ValueError, model: ModelRequest) -> Problem:
    """The message for numbers at the edge of what can be computed with; the cell is the response's entry."""
    entry = model.entries.get(model.spec.response if model.spec else "", "")
    cell = request_cell(entry) if entry else None
    return say("numbers-broke-down", cell=cell, model=model.name, at=_place(cell), kind=type(error).__name__)


def _place(cell: str | None) -> str:
    """The cell as the text names it: one of the request by its address alone."""
    return cell.removeprefix(request_cell("")) if cell else "this model"
