"""One short text that changes whenever anything a fit depends on changes, and only then."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Mapping

from bridge.workbook.contents import NewCase
from bridge.workbook.naming import ColumnNames
from bridge.workbook.request import ModelRequest, Request
from bridge.workbook.tables import DataColumn, Table


def digest(version: str, request: Request, tables: Mapping[str, Table], typed: Iterable[object]) -> str:
    """Hex digest of the program's version, the request as understood, the tables' cells and what was typed elsewhere.

    `typed` are frozen values (new cases and the like). Looks, notes and the bridge's own answers do not count.
    """
    made = hashlib.blake2b(digest_size=16)
    in_use = ColumnNames(request.grid.data_sheets, tables).tables
    _add(made, version, request.grid.data_sheets, [column.name for t in in_use for column in t.columns])
    for model in request.models:
        _add_model(made, model)
    for problem in request.problems:
        _add(made, problem.text)
    for table in in_use:
        _add(made, table.sheet, table.header_row, table.excel_table)
        made.update(table.rows.tobytes())
        made.update(table.hidden.tobytes())
        for column in table.columns:
            _add_column(made, column)
    for value in typed:
        _add(made, value.name, sorted(value.entries.items())) if isinstance(value, NewCase) else _add(made, value)
    return made.hexdigest()


def _add(made: hashlib.blake2b, *values: object) -> None:
    made.update(repr(values).encode())


def _add_model(made: hashlib.blake2b, model: ModelRequest) -> None:
    _add(made, model.name, model.sheet, model.spec, model.label)
    _add(made, [(f.column, f.comparison, f.values) for f in model.filters], [p.text for p in model.problems])


def _add_column(made: hashlib.blake2b, column: DataColumn) -> None:
    _add(made, column.name, column.index, column.kind.value)
    made.update(column.numbers.tobytes())
    made.update(column.state.tobytes())
    if column.texts:
        made.update(
            "\x1f".join(text if text is not None else "\x1e" for text in column.texts).encode("utf-8", "replace")
        )
