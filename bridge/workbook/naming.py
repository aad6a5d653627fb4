"""The names by which the request speaks of data columns, over one or several data sheets."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence

from bridge.workbook.headers import clean
from bridge.workbook.tables import DataColumn, Table

Place = tuple[str, str]  # data sheet, column


class ColumnNames:
    """Column names of the data sheets in use. A name that several of them have is written `Sheet!column`.

    `all` are the labels in the order of the sheets and of their columns; `columns` maps each to its table and column.
    """

    def __init__(self, data_sheets: Sequence[str], tables: Mapping[str, Table]) -> None:
        self.tables = _in_use(data_sheets, tables)
        everything = [(table, column) for table in self.tables for column in table.columns]
        self._counts = Counter(_key(column.name) for _, column in everything)
        self.columns: dict[str, tuple[Table, DataColumn]] = {}
        self._places: dict[str, Place] = {}
        for table, column in everything:
            place = (table.sheet, column.name)
            self.columns[self.label(*place)] = (table, column)
            self._places.setdefault(_key(column.name), place)
            for sheet in (table.sheet, f"'{table.sheet}'", table.excel_table or table.sheet):
                self._places.setdefault(_key(f"{sheet}!{column.name}"), place)
        self.all = tuple(self.columns)

    def resolve(self, label: str) -> Place | None:
        """The data sheet and column that a label means; a name of several sheets means the first one's."""
        return self._places.get(_key(label))

    def label(self, sheet: str, column: str) -> str:
        """How the request writes a column."""
        return f"{sheet}!{column}" if self._counts[_key(column)] > 1 else column

    def is_ambiguous(self, label: str) -> bool:
        """Whether a label is a bare name that several data sheets have."""
        return self._counts[_key(label)] > 1


def _in_use(data_sheets: Sequence[str], tables: Mapping[str, Table]) -> tuple[Table, ...]:
    found: dict[str, Table] = {}
    for name in data_sheets:
        table = table_named(name, tables)
        if table is not None:
            found.setdefault(table.sheet, table)
    return tuple(found.values())


def table_named(name: str, tables: Mapping[str, Table]) -> Table | None:
    """The table on the sheet called `name`, or the table object of that name (case and outer spaces aside)."""
    wanted = _key(name)
    for table in tables.values():
        if wanted in (_key(table.sheet), _key(table.excel_table or "")):
            return table
    return None


def _key(text: str) -> str:
    return clean(text).casefold()
