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
    if isinstance(error, TooFewRows):
        count = error.coefficients
        return say("fewer-rows-than-terms", cell=cell, model=model.name, rows=error.rows, count=count)
    if isinstance(error, TooManyColumns):
        return say("too-many-terms", cell=cell, model=model.name, reason=str(error))
    return say("cannot-be-fitted", cell=cell, model=model.name, reason=str(error))
