"""The grid and the data tables -> what each model asks for, with every problem named by its cell."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

from bridge.messages import Problem, say
from bridge.page.cells import address, column_letters
from bridge.regression.spec import CrossedTerm, Errors, ModelSpec, Search, Shape
from bridge.workbook import entries, filters, roles, settings, spelling
from bridge.workbook import grid as grids
from bridge.workbook.arrange import Arranged, arrange
from bridge.workbook.asking import Asking, Used
from bridge.workbook.entries import Entry, Misread, Role
from bridge.workbook.naming import table_named
from bridge.workbook.places import request_cell
from bridge.workbook.ranking import most_useful_first
from bridge.workbook.request import Filter, Grid, GridRow, ModelRequest, Request
from bridge.workbook.tables import Table

MOST_CANDIDATES = 30
_YES = frozenset({"yes", "y", "x", "true", "1", "crossed"})
_NO = frozenset({"no", "n", "false", "0", "-", "–"})
_SHARED_ENDS = ("adjusted", "loo")  # fit_A_adjusted_r_squared: of model A, or r_squared of model A_adjusted?


def understand(
    grid: Grid,
    tables: Mapping[str, Table],
    sheet_names: Sequence[str],
    unread: Mapping[str, Problem] | None = None,
) -> Request:
    """What is asked for. `tables` by sheet; `sheet_names` those that could be named; `unread` why one has no table.

    A model of which nothing is asked (a blank column, or only label, order and group) is not among the models.
    """
    arranged = arrange(grid, tables, sheet_names)
    problems = tuple(_data_problems(arranged, sheet_names, unread or {}))
    shared = () if arranged.names.tables else problems  # without any data every model is stopped by them
    read = [_model(arranged, name, column, shared) for name, column in arranged.grid.model_columns.items()]
    models = _without_clashes([model for model in read if model is not None], arranged.grid)
    general = (*(() if models and shared else problems), *_unnamed(arranged.grid))
    return Request(arranged.grid, models, general, tuple(sheet_names))


# --- what concerns all models ------------------------------------------------------------------


def _data_problems(arranged: Arranged, sheet_names: Sequence[str], unread: Mapping[str, Problem]) -> Iterator[Problem]:
    """Whatever is wrong with the data sheets named."""
    grid = arranged.grid
    cell = grids.data_sheet_cell(grid)
    at = address(*cell) if cell else "A1"
    if not grid.data_sheets:
        yield say("no-data-sheet", cell=request_cell(at), at=at)
    for offset, name in enumerate(grid.data_sheets):
        here = address(cell[0], cell[1] + offset) if cell else at
        if any(table_named(name, {table.sheet: table}) for table in arranged.names.tables):
            continue
        sheet = next((one for one in (*sheet_names, *unread) if one.strip().casefold() == name.strip().casefold()), "")
        if sheet in unread:
            yield unread[sheet]
        elif sheet:
            yield say("data-sheet-without-table", cell=request_cell(here), at=here, sheet=sheet)
        else:
            hint = spelling.did_you_mean(name, sheet_names)
            yield say("data-sheet-unknown", cell=request_cell(here), at=here, sheet=name, hint=hint)


def _unnamed(grid: Grid) -> Iterator[Problem]:
    """Columns with roles in them but no model's name above."""
    if grid.column_header is None:
        return
    named = {grid.label_column, *grid.model_columns.values(), *grid.other_columns.values()}
    for column in sorted({column for row, column in grid.cells if row > grid.column_header} - named):
        values = [grid.cells.get((row.row, column)) for row in grid.column_rows]
        is_headed = (grid.column_header, column) in grid.cells
        if not is_headed and any(isinstance(entries.parse(value), Entry) for value in values if value is not None):
            at = address(grid.column_header, column)
            yield say("model-without-name", cell=request_cell(at), at=at, letters=column_letters(column))


def _without_clashes(models: Sequence[ModelRequest], grid: Grid) -> tuple[ModelRequest, ...]:
    """Refuse a model whose names for formulas would be those of another one."""
    checked: list[ModelRequest] = []
    for model in models:
        ends = {f"{other.name}_{end}".casefold(): (other, end) for other in models for end in _SHARED_ENDS}
        clash = ends.get(model.name.casefold())
        if clash is not None:
            at = address(grid.column_header or 0, model.grid_column)
            name = f"fit_{clash[0].name}_{clash[1]}_r_squared"
            fields = {"name": model.name, "other": clash[0].name, "formula_name": name, "at": at}
            problem = say("model-names-clash", cell=request_cell(at), model=model.name, **fields)
            model = replace(model, spec=None, problems=(problem, *model.problems))
        checked.append(model)
    return tuple(checked)


# --- one model ---------------------------------------------------------------------------------


def _model(arranged: Arranged, name: str, column: int, data_problems: Sequence[Problem]) -> ModelRequest | None:
    asking = Asking(arranged, name, column)
    used = roles.read_roles(asking)
    before = len(asking.problems)
    typed = _settings(asking)
    crossed = _crossed(asking, used)
    asking.is_asked |= bool(typed or crossed) or len(asking.problems) > before
    if not asking.is_asked:
        return None
    _check_name(asking)
    asking.problems[:0] = [replace(problem, model=name) for problem in data_problems]
    spec: ModelSpec | None = None
    chosen: tuple[Filter, ...] = ()
    table = used[0].table if used else (arranged.names.tables[0] if arranged.names.tables else None)
    if arranged.names.tables:
        roles.check_roles(asking, used)
        chosen = filters.read_filters(asking, table, typed)
        spec = _spec(asking, used, crossed, typed)
    label = roles.with_role(used, Role.LABEL)
    _note_entries(asking)
    return ModelRequest(
        name,
        column,
        table.sheet if table is not None else None,
        None if asking.is_refused else spec,
        chosen,
        label.name if label is not None else None,
        most_useful_first(asking.problems),
        asking.entries,
    )


def _note_entries(asking: Asking) -> None:
    asking.entries["model"] = asking.header_cell
    cell = grids.data_sheet_cell(asking.grid)
    if cell is not None:
        asking.entries["data sheet"] = address(*cell)


def _check_name(asking: Asking) -> None:
    name = grids.plain_name(asking.name)
    if name != asking.name:
        alike = [at for other, at in asking.grid.model_columns.items() if other.casefold() == name.casefold()]
        other = address(asking.grid.column_header or 0, alike[0]) if alike else asking.header_cell
        asking.tell("model-name-twice", asking.header_cell, name=name, other=other)
    elif not grids.is_model_name(name):
        asking.tell("model-name-bad", asking.header_cell, name=name, most=grids.MOST_NAME)


# --- crossed terms and settings ----------------------------------------------------------------


def _crossed(asking: Asking, used: Sequence[Used]) -> tuple[CrossedTerm, ...]:
    found: list[CrossedTerm] = []
    for row in asking.grid.crossed_rows:
        value = asking.value(row.row)
        text = grids.shown(value).casefold()
        if value is None or text in _NO:
            continue
        if text not in _YES:
            asking.tell("crossed-not-yes", asking.cell(row.row), typed=grids.shown(value))
            continue
        asking.is_asked = True
        term = _crossed_term(asking, row, used)
        if term is not None and not any({term.first, term.second} == {one.first, one.second} for one in found):
            found.append(term)
            asking.entries[f"{term.first} crossed with {term.second}"] = asking.cell(row.row)
    return tuple(found)


def _crossed_term(asking: Asking, row: GridRow, used: Sequence[Used]) -> CrossedTerm | None:
    names = []
    for label, column in ((row.label, asking.grid.label_column), (row.second, asking.grid.other_columns[grids.WITH])):
        cell = address(row.row, column)
        if not label:
            asking.tell("crossed-incomplete", cell)
            return None
        place = asking.arranged.names.resolve(label)
        if place is None:
            if asking.arranged.names.all:
                roles.tell_unknown(asking, label, cell)
            return None
        term = next((one for one in used if (one.table.sheet, one.name) == place), None)
        if term is None or term.entry.role not in (Role.PREDICTOR, Role.CATEGORY, Role.CANDIDATE):
            asking.tell("crossed-not-a-term", asking.cell(row.row), column=place[1])
            return None
        names.append(place[1])
    if names[0] == names[1]:
        asking.tell("crossed-with-itself", asking.cell(row.row), column=names[0])
        return None
    return CrossedTerm(names[0], names[1])


def _settings(asking: Asking) -> dict[str, filters.Typed]:
    """What is typed in the setting block, by key; of what is not understood only the problem is kept."""
    typed: dict[str, filters.Typed] = {}
    rows = asking.grid.setting_rows
    for row, key in zip(rows, settings.keys([row.label for row in rows]), strict=True):
        cell = asking.cell(row.row)
        if asking.lacks_value(row.row):
            asking.tell("entry-without-value", cell)
        value = asking.value(row.row)
        if value is None:
            continue
        setting = settings.known(row.label)
        if key is None or setting is None:
            near = spelling.nearest(row.label, (each.label for each in settings.ROWS)) if row.label else None
            if near is not None:
                asking.tell("setting-row-unknown", cell, label=row.label, near=near)
            continue
        asking.entries[key] = cell
        meaning = setting.read(value)
        if isinstance(meaning, Misread):
            asking.tell(meaning.key, cell, **meaning.fields)
        else:
            typed[key] = filters.Typed(meaning, cell)
    return typed


# --- the spec ----------------------------------------------------------------------------------

_FIELDS = {
    "interval level": "level",
    "standard errors": "errors",
    "lags": "lags",
    "intercept": "intercept",
    "fit by": "fit_by",
    "search": "search",
    "folds": "folds",
    "estimate back on": "back_on",
}


def _spec(
    asking: Asking, used: Sequence[Used], crossed: tuple[CrossedTerm, ...], typed: Mapping[str, filters.Typed]
) -> ModelSpec | None:
    response = roles.with_role(used, Role.RESPONSE)
    if response is None:
        return None
    weight, order, group = (roles.with_role(used, role) for role in (Role.WEIGHT, Role.ORDER, Role.GROUP))
    spec = ModelSpec(
        response.name,
        response.entry.shape,
        roles.terms(asking, used),
        crossed,
        weight=weight.name if weight is not None else None,
        order=order.name if order is not None else None,
        group=group.name if group is not None else None,
        **{field: typed[label].meaning for label, field in _FIELDS.items() if label in typed},
    )
    _check_spec(asking, spec, typed, response)
    return spec


def _check_spec(asking: Asking, spec: ModelSpec, typed: Mapping[str, filters.Typed], response: Used) -> None:
    """Settings that need something the model does not have, or do nothing in it."""
    candidates = sum(term.candidate for term in spec.terms)
    cells = {label: one.cell for label, one in typed.items()}
    if not spec.terms and not asking.is_refused:
        asking.tell("nothing-to-fit" if not spec.intercept else "no-predictor", response.cell)
    if spec.errors is Errors.GROUPED and spec.group is None:
        asking.tell("grouped-without-group", cells["standard errors"])
    if spec.errors is Errors.SERIAL and spec.order is None:
        asking.tell("serial-without-order", cells["standard errors"])
    if spec.lags is not None and spec.errors is not Errors.SERIAL:
        asking.tell("lags-without-serial", cells["lags"])
    if spec.search is not Search.NONE and not candidates:
        asking.tell("search-without-candidates", cells["search"])
    if spec.search is not Search.NONE and candidates > MOST_CANDIDATES:
        asking.tell("too-many-candidates", cells["search"], count=candidates, most=MOST_CANDIDATES)
    if spec.search is Search.NONE and candidates:
        asking.tell("candidates-without-search", asking.header_cell)
    if "estimate back on" in typed and spec.response_shape is Shape.AS_IS:
        asking.tell("back-on-without-shape", cells["estimate back on"])
