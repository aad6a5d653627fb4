"""The request sheet as it is to stand: what the user has, with missing blocks, new data columns and fresh facts.

Nothing of the user's is moved but down, where a row must be added; nothing is dropped. Arranging twice changes nothing.
"""

from __future__ import annotations

from collections.abc import Container, Iterable, Mapping, Sequence
from dataclasses import dataclass

from bridge.workbook import grid as grids
from bridge.workbook import guess, settings
from bridge.workbook.contents import RawSheet
from bridge.workbook.entries import Entry, Role, parse
from bridge.workbook.facts import Facts, facts
from bridge.workbook.naming import ColumnNames, table_named
from bridge.workbook.places import REQUEST
from bridge.workbook.request import Grid, GridRow, Scalar
from bridge.workbook.tables import Table

TITLE = "What should be fitted?"
HINT = (
    "Fill the cream cells and save. One column per model: say what each data column does in it. "
    'Answers appear at the bottom and in "fit results".'
)
DEFAULT_MODELS = ("A", "B", "C")
SPARE_CROSSED = 2


@dataclass(frozen=True, slots=True)
class Arranged:
    """The grid as it is to stand, its column names resolved, and which vanished column may have which new name."""

    grid: Grid
    names: ColumnNames
    renamed: Mapping[str, str]


def arrange(found: Grid, tables: Mapping[str, Table], sheet_names: Sequence[str]) -> Arranged:
    """The grid to lay out for what was found. `tables` are the data sheets' tables by sheet name."""
    page = _Page(dict(found.cells), dict(found.formulas), found.dates)
    if found.column_header is None:
        _first_contact(page, tables, sheet_names)
    grid = page.grid()
    names = ColumnNames(grid.data_sheets, tables)
    _complete_blocks(page)
    _change_sheet(page, names)
    renamed = _renamed(page.grid(), names)
    silent = _relabel(page, renamed)
    renamed = {old: new for old, new in renamed.items() if old not in silent}
    _write_full_names(page, names)
    _add_columns(page, names, set(renamed.values()))
    _refresh_facts(page, names)
    return Arranged(page.grid(), names, renamed)


class _Page:
    """The sheet's cells while they are being arranged."""

    def __init__(
        self,
        cells: dict[tuple[int, int], Scalar],
        formulas: dict[tuple[int, int], str],
        dates: frozenset[tuple[int, int]],
    ) -> None:
        self.cells, self.formulas, self.dates = cells, formulas, dates

    def grid(self) -> Grid:
        return grids.read(RawSheet(REQUEST, self.cells, self.formulas, self.dates))

    def put(self, row: int, column: int, value: Scalar) -> None:
        """A text of the bridge's; a formula of the user's keeps its cell."""
        if (row, column) in self.formulas:
            return
        if value == "":
            self.cells.pop((row, column), None)
        else:
            self.cells[(row, column)] = value

    def used_rows(self, columns: Container[int] | None = None) -> set[int]:
        """The rows in which anything stands, in the given columns or anywhere."""
        return {row for row, column in (*self.cells, *self.formulas) if columns is None or column in columns}

    def insert(self, row: int, count: int) -> None:
        """Make room: `row` and everything below it moves down by `count`."""

        def moved(at: tuple[int, int]) -> tuple[int, int]:
            return (at[0] + count if at[0] >= row else at[0], at[1])

        self.cells = {moved(at): value for at, value in self.cells.items()}
        self.formulas = {moved(at): text for at, text in self.formulas.items()}
        self.dates = frozenset(moved(at) for at in self.dates)

    def room_after(self, row: int, count: int, then: int | None, columns: Container[int] | None = None) -> int:
        """The first of `count` free rows after `row`, an empty one left before `then`; rows are added as needed.

        With `columns`, notes in other columns do not stand in the way.
        """
        used, free = self.used_rows(columns), 0
        while free <= count and row + 1 + free not in used and (then is None or row + 1 + free < then):
            free += 1
        if free <= count:
            self.insert(row + 1 + free, count + 1 - free)
        return row + 1


# --- first contact -----------------------------------------------------------------------------


def _first_contact(page: _Page, tables: Mapping[str, Table], sheet_names: Sequence[str]) -> None:
    """The title, the data sheet, the heading of the column block and a first guess, below whatever stands there."""
    top = max(page.used_rows(), default=-3) + 3
    if top == 0:
        page.put(0, 0, TITLE)
        page.put(1, 0, HINT)
        top = 3
    table = guess.data_sheet(tables)
    cell = grids.data_sheet_cell(page.grid())
    if cell is None:
        page.put(top, 0, grids.DATA_SHEET)
        cell = (top, 1)
        top += 2
    if cell not in page.cells:
        page.put(*cell, table.sheet if table is not None else sheet_names[0] if len(sheet_names) == 1 else "")
    for at, text in enumerate((grids.COLUMN, *grids.FACTS, *DEFAULT_MODELS)):
        page.put(top, at, text)
    named = table_named(grids.shown(page.cells.get(cell)), tables)
    for row, column in enumerate(named.columns if named is not None else (), top + 1):
        page.put(row, 0, column.name)
    if named is not None:
        _guess_roles(page, named)


def _guess_roles(page: _Page, table: Table) -> None:
    """The label and order columns, as long as nothing is asked of any column."""
    grid = page.grid()
    models = tuple(grid.model_columns.values())
    if any((row.row, column) in page.cells for row in grid.column_rows for column in models):
        return
    guesses = ((guess.label_column(table), Role.LABEL), (guess.order_column(table), Role.ORDER))
    roles = {column.name: role.value for column, role in guesses if column is not None}
    for row in grid.column_rows:
        for column in models if row.label in roles else ():
            page.put(row.row, column, roles[row.label])


# --- blocks and settings -----------------------------------------------------------------------


def _complete_blocks(page: _Page) -> None:
    """Every block there, with its headings under the same models, and all settings."""
    grid = page.grid()
    if grids.data_sheet_cell(grid) is None and grid.column_header is not None:
        page.insert(grid.column_header, 2)
        page.put(grid.column_header, grid.label_column, grids.DATA_SHEET)
    for label in (grids.CROSSED, grids.SETTING, grids.STATUS):
        _complete_block(page, label)
    _complete_settings(page)
    _spare_crossed(page)
    _head_blocks(page)


def _complete_block(page: _Page, label: str) -> None:
    grid = page.grid()
    headers = {grids.CROSSED: grid.crossed_header, grids.SETTING: grid.setting_header, grids.STATUS: grid.status_header}
    if headers[label] is not None:
        return
    following = {grids.CROSSED: (grid.setting_header, grid.status_header), grids.SETTING: (grid.status_header,)}
    then = next((row for row in following.get(label, ()) if row is not None), None)
    if then is None:
        row = max(page.used_rows()) + 2
    else:
        room = 2 + (SPARE_CROSSED if label == grids.CROSSED else 0)
        page.insert(then, room)
        row = then
    page.put(row, grid.label_column, label)
    for name, column in grid.model_columns.items():
        page.put(row, column, grids.plain_name(name))
    companion = {grids.CROSSED: grids.WITH, grids.SETTING: grids.BLANK_MEANS}.get(label)
    beside = grid.label_column + 1
    if companion and beside not in grid.model_columns.values():
        page.put(row, beside, companion)


def _complete_settings(page: _Page) -> None:
    """The settings that are missing, at the block's end; a filter's three rows stand or fall together."""
    grid = page.grid()
    if grid.setting_header is None:
        return
    there = set(settings.keys([row.label for row in grid.setting_rows]))
    all_keys = settings.keys([row.label for row in settings.ROWS])
    groups = {settings.IS: settings.WHERE, settings.VALUE: settings.WHERE}
    groups |= {f"and {word}": settings.AND_WHERE for word in (settings.IS, settings.VALUE)}
    missing = [row for key, row in zip(all_keys, settings.ROWS, strict=True) if groups.get(key or "", key) not in there]
    if missing:
        last = max((row.row for row in grid.setting_rows), default=grid.setting_header)
        first = page.room_after(last, len(missing), grid.status_header)
        for row, setting in enumerate(missing, first):
            page.put(row, grid.label_column, setting.label)
    _say_defaults(page)


def _say_defaults(page: _Page) -> None:
    """What a blank means, beside each setting."""
    grid = page.grid()
    column = grid.other_columns.get(grids.BLANK_MEANS)
    if column is None:
        return
    defaults = dict(zip(settings.keys([row.label for row in settings.ROWS]), settings.ROWS, strict=True))
    for row, key in zip(grid.setting_rows, settings.keys([row.label for row in grid.setting_rows]), strict=True):
        if key is not None:
            page.put(row.row, column, defaults[key].blank_means)


def _spare_crossed(page: _Page) -> None:
    grid = page.grid()
    if grid.crossed_header is None:
        return
    last = max((row.row for row in grid.crossed_rows), default=grid.crossed_header)
    then = next((row for row in (grid.setting_header, grid.status_header) if row is not None), None)
    page.room_after(
        last, SPARE_CROSSED, then, (grid.label_column, *grid.other_columns.values(), *grid.model_columns.values())
    )


def _head_blocks(page: _Page) -> None:
    """The models' names over every block, as they stand over the first."""
    grid = page.grid()
    for header in (grid.crossed_header, grid.setting_header, grid.status_header):
        if header is None:
            continue
        for name, column in grid.model_columns.items():
            page.put(header, column, grids.plain_name(name))


# --- data columns ------------------------------------------------------------------------------


def _change_sheet(page: _Page, names: ColumnNames) -> None:
    """Another data sheet was named: rows of the old one in which nothing was asked give way to the new one's."""
    grid = page.grid()
    rows = [row for row in grid.column_rows if row.label]
    if not names.all or any(names.resolve(row.label) for row in rows) or not rows:
        return
    for row in rows:
        if _is_idle(grid, row) and _has_facts(grid, row):
            for column in (grid.label_column, *grid.model_columns.values(), *_fact_columns(grid)):
                page.put(row.row, column, "")
    used = page.used_rows()
    free = [row.row for row in rows if row.row not in used]
    for at, label in zip(free, names.all, strict=False):
        page.put(at, grid.label_column, label)
    _guess_roles(page, names.tables[0])


def _is_idle(grid: Grid, row: GridRow) -> bool:
    """Nothing of the user's in the row beyond what the first guess puts there."""
    ours = {grid.label_column, *_fact_columns(grid)}
    for (at, column), value in grid.cells.items():
        if at != row.row or column in ours:
            continue
        entry = parse(value)
        guessed = isinstance(entry, Entry) and entry.role in (Role.LABEL, Role.ORDER)
        if column not in grid.model_columns.values() or not guessed:
            return False
    return not any(at == row.row for at, _ in grid.formulas)


def _has_facts(grid: Grid, row: GridRow) -> bool:
    return any((row.row, column) in grid.cells for column in _fact_columns(grid))


def _fact_columns(grid: Grid) -> tuple[int, ...]:
    return tuple(grid.other_columns[name] for name in grids.FACTS if name in grid.other_columns)


def _renamed(grid: Grid, names: ColumnNames) -> dict[str, str]:
    """Vanished columns and the new one that stands where each stood or holds what it held."""
    labels = [row.label for row in grid.column_rows if row.label]
    listed = {resolved for label in labels if (resolved := names.resolve(label))}
    new = [label for label in names.all if names.resolve(label) not in listed]
    gone = [row for row in grid.column_rows if row.label and not names.resolve(row.label) and _has_facts(grid, row)]
    fresh = {label: facts(*names.columns[label]) for label in new} if gone else {}
    found: dict[str, str] = {}
    for row in gone:
        same = (label for label in new if label not in found.values() and _same_content(grid, row, fresh[label]))
        label = next(same, None)
        if label is not None:
            found[row.label] = label
    for row in gone:
        label = None if row.label in found else _same_place(row.label, labels, names)
        if label in new and label not in found.values():
            found[row.label] = label
    return found


def _same_content(grid: Grid, row: GridRow, fresh: Facts) -> bool:
    held = [grids.shown(grid.cells.get((row.row, grid.other_columns.get(name, -1)))) for name in ("filled", "range")]
    return bool(held[1]) and held == [fresh.filled, fresh.range]


def _same_place(label: str, labels: Sequence[str], names: ColumnNames) -> str | None:
    """The data column between the same neighbours as the grid's row."""
    at = labels.index(label)
    before = names.resolve(labels[at - 1]) if at else None
    after = names.resolve(labels[at + 1]) if at + 1 < len(labels) else None
    known = [names.resolve(name) for name in names.all]
    for position, name in enumerate(names.all):
        left = known[position - 1] if position else None
        right = known[position + 1] if position + 1 < len(known) else None
        if (left, right) == (before, after) and (left or right):
            return name
    return None


def _relabel(page: _Page, renamed: Mapping[str, str]) -> set[str]:
    """Where nothing was asked of a renamed column, its row simply takes the new name."""
    grid = page.grid()
    done = set()
    for row in grid.column_rows:
        if row.label in renamed and _is_idle(grid, row):
            page.put(row.row, grid.label_column, renamed[row.label])
            done.add(row.label)
    return done


def _write_full_names(page: _Page, names: ColumnNames) -> None:
    """A name that now occurs on several data sheets is written with its sheet."""
    grid = page.grid()
    for row in grid.column_rows:
        resolved = names.resolve(row.label)
        full = names.label(*resolved) if resolved else None
        if full is not None and names.is_ambiguous(row.label):
            page.put(row.row, grid.label_column, full)


def _add_columns(page: _Page, names: ColumnNames, held_back: Iterable[str]) -> None:
    """New data columns, as rows at the block's end."""
    grid = page.grid()
    if grid.column_header is None:
        return
    listed = {names.resolve(row.label) for row in grid.column_rows if row.label}
    new = [label for label in names.all if names.resolve(label) not in listed and label not in set(held_back)]
    last = max((row.row for row in grid.column_rows), default=grid.column_header)
    row = page.room_after(last, len(new), grid.crossed_header) if new else last
    for at, label in enumerate(new, row):
        page.put(at, grid.label_column, label)


def _refresh_facts(page: _Page, names: ColumnNames) -> None:
    """Kind, filled and range of every column; a vanished one keeps its last facts and is marked."""
    grid = page.grid()
    if not names.all:
        return
    for row in grid.column_rows:
        resolved = names.resolve(row.label)
        if resolved is not None:
            table, column = names.columns[names.label(*resolved)]
            fresh = facts(table, column)
            for name, text in zip(grids.FACTS, (fresh.kind, fresh.filled, fresh.range), strict=True):
                if name in grid.other_columns:
                    page.put(row.row, grid.other_columns[name], text)
        elif row.label and _has_facts(grid, row) and "kind" in grid.other_columns:
            page.put(row.row, grid.other_columns["kind"], grids.NOT_FOUND)
