"""What is read out of one snapshot: tables, the request grid, and the entries on our own sheets."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from bridge.messages import Problem
from bridge.workbook.request import Scalar
from bridge.workbook.tables import Table


@dataclass(frozen=True, slots=True)
class RawSheet:
    """A small sheet cell by cell: stored values and formula texts by zero-based (row, column).

    `dates` are the cells that show their number as a date.
    """

    name: str
    values: Mapping[tuple[int, int], Scalar]
    formulas: Mapping[tuple[int, int], str]
    dates: frozenset[tuple[int, int]] = frozenset()


@dataclass(frozen=True, slots=True)
class Contents:
    """One workbook, read once. `own` holds our own sheets by our name for them (`fit request`, ...);
    `sheet_names` all visible worksheets that are not ours, in order; `tables` those that look like a table.
    `unread` says of a sheet why no table could be read from it."""

    sheet_names: tuple[str, ...]
    tables: Mapping[str, Table]
    own: Mapping[str, RawSheet]
    unread: Mapping[str, Problem] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class NewCase:
    """One line the user typed on `fit estimates`: its name, and its entries by data column name, all as typed.

    `formulas` holds the formula of each entry that is one, `dates` the entries that show their number as a date; the
    name of the case goes by the empty text there.
    """

    name: Scalar
    entries: Mapping[str, Scalar]
    formulas: Mapping[str, str] = field(default_factory=dict)
    dates: frozenset[str] = frozenset()


@dataclass(frozen=True, slots=True)
class Choices:
    """What the user chose on `fit estimates`: the case and model to explain, and readings to trace back, by model.

    A reading is what was read and its weight (None: none was typed).
    """

    case: Scalar | None = None
    model: str = ""
    readings: Mapping[str, tuple[tuple[float, float | None], ...]] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class HistoryLine:
    """One line of `fit history`, by column header."""

    fields: Mapping[str, Scalar]


@dataclass(frozen=True, slots=True)
class Taken:
    """Which rows a model uses.

    Indexes count the table's data rows. `used` holds the indexes used, in order; `left_out` maps the others to a
    reason in words (`hours is blank`, `filtered: hull is glass fibre`).
    """

    used: tuple[int, ...]
    left_out: Mapping[int, str]
