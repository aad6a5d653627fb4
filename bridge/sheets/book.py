"""Everything the sheets are laid out from, gathered by the story in `bridge.job`."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import datetime

from bridge.messages import Problem
from bridge.regression.results import ModelResult, Nested
from bridge.workbook.contents import Choices, HistoryLine, NewCase, Taken
from bridge.workbook.request import ModelRequest, Request
from bridge.workbook.tables import Table

OUR_SHEETS = (
    "fit request",
    "fit results",
    "fit coefficients",
    "fit ANOVA",
    "fit diagnostics",
    "fit rows",
    "fit estimates",
    "fit history",
)


@dataclass(frozen=True, slots=True)
class ModelSheet:
    """One model as the sheets see it. `result` None: it was refused, `problems` say why.

    `request.spec` columns are names of `table`'s columns; `taken.used` indexes the table's data rows in the order of
    the result's row arrays.
    """

    request: ModelRequest
    table: Table | None
    taken: Taken | None
    result: ModelResult | None
    problems: tuple[Problem, ...]

    @property
    def name(self) -> str:
        """The model's name as typed."""
        return self.request.name


@dataclass(frozen=True, slots=True)
class Book:
    """All of it. `titles` maps our sheet names to what their tabs say (the user may have renamed one).

    `findings`: per data sheet, what was found when its data were examined before fitting.
    """

    fitted_at: datetime
    request: Request
    tables: Mapping[str, Table]
    models: tuple[ModelSheet, ...]
    nested: tuple[Nested, ...]
    cases: tuple[NewCase, ...]
    history: tuple[HistoryLine, ...]
    titles: Mapping[str, str]
    problems: tuple[Problem, ...] = ()
    choices: Choices = field(default_factory=Choices)
    findings: Mapping[str, Sequence[Problem]] = field(default_factory=dict)

    def title(self, name: str) -> str:
        """What the tab of our sheet `name` says."""
        return self.titles.get(name, name)

    @property
    def fitted(self) -> tuple[tuple[ModelSheet, ModelResult], ...]:
        """The models that were fitted, with their results."""
        return tuple((model, model.result) for model in self.models if model.result is not None)
