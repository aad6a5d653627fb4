"""How a model uses each data column: as numbers or as levels, and by what name messages call that use."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from bridge.regression.spec import CategoryTerm, ModelSpec, Shape
from bridge.workbook.request import ModelRequest
from bridge.workbook.tables import DataColumn, State, Table

NUMERIC_STATES = (State.NUMBER, State.DATE, State.YES_NO)
LEVEL_STATES = (*NUMERIC_STATES, State.TEXT)


@dataclass(frozen=True, slots=True, eq=False)
class Use:
    """A column and what it does: `words` such as `the response`; `cell` the entry's cell in the request."""

    column: DataColumn
    words: str
    as_levels: bool
    cell: str
    shape: Shape = Shape.AS_IS

    @property
    def name(self) -> str:
        """The column's name."""
        return self.column.name

    def usable(self) -> NDArray[np.bool_]:
        """Rows in which the column can be used; shape (n,)."""
        return np.isin(self.column.state, LEVEL_STATES if self.as_levels else NUMERIC_STATES)


def uses(table: Table, asked: ModelRequest) -> tuple[Use, ...]:
    """The columns whose values a model needs, response first; the label is not among them."""
    return tuple(_uses(table, asked)) if asked.spec is not None else ()


def _uses(table: Table, asked: ModelRequest) -> Iterator[Use]:
    spec = asked.spec
    assert spec is not None
    for name, words, as_levels, shape in _wanted(spec):
        column = table.column(name)
        if column is not None:
            yield Use(column, words, as_levels, asked.entries.get(name, ""), shape)


def _wanted(spec: ModelSpec) -> Iterator[tuple[str, str, bool, Shape]]:
    yield spec.response, "the response", False, spec.response_shape
    for term in spec.terms:
        if isinstance(term, CategoryTerm):
            yield term.column, "a category", True, Shape.AS_IS
        else:
            yield term.column, "a predictor", False, term.shape
    if spec.weight is not None:
        yield spec.weight, "the weight", False, Shape.AS_IS
    if spec.order is not None:
        yield spec.order, "an order column", False, Shape.AS_IS
    if spec.group is not None:
        yield spec.group, "the group", True, Shape.AS_IS
