"""Books to lay sheets out from: data typed here (all of it invented), fitted by the real numeric core."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from datetime import datetime
from functools import cache

import numpy as np

from bridge.messages import Problem, Severity
from bridge.regression.core import fit_model
from bridge.regression.results import Nested
from bridge.regression.spec import (
    BackOn,
    CategoryTerm,
    CrossedTerm,
    Errors,
    FitBy,
    Levels,
    ModelSpec,
    NumberTerm,
    Observations,
    Search,
    Shape,
)
from bridge.sheets.book import Book, ModelSheet
from bridge.workbook.contents import Taken
from bridge.workbook.request import Grid, ModelRequest, Request
from bridge.workbook.tables import DataColumn, Kind, State, Table

FITTED_AT = datetime(2026, 12, 1, 10, 31)


def data_column(name: str, index: int, values: Sequence[object], unit: str | None = None) -> DataColumn:
    n = len(values)
    if any(isinstance(value, str) for value in values):
        texts = tuple(str(value) if value else None for value in values)
        state = np.array([State.TEXT if text else State.BLANK for text in texts], dtype=np.uint8)
        return DataColumn(name, index, Kind.TEXT, np.full(n, np.nan), texts, state, unit)
    numbers = np.asarray(values, dtype=float)
    state = np.where(np.isnan(numbers), State.BLANK, State.NUMBER).astype(np.uint8)
    return DataColumn(name, index, Kind.NUMBER, numbers, (), state, unit)


def data_table(sheet: str, columns: Mapping[str, Sequence[object]], units: Mapping[str, str] | None = None) -> Table:
    units = units or {}
    made = tuple(data_column(name, at, values, units.get(name)) for at, (name, values) in enumerate(columns.items()))
    n = len(next(iter(columns.values())))
    return Table(sheet, 1, np.arange(2, n + 2), np.zeros(n, dtype=bool), made)


def model(name: str, spec: ModelSpec, table: Table, label: str | None = None) -> ModelSheet:
    """A model fitted to the rows of a table that are complete in its columns."""
    needed = [spec.response, *(term.column for term in spec.terms)]
    needed += [column for column in (spec.weight, spec.order, spec.group) if column is not None]
    left_out: dict[int, str] = {}
    for column in (table.column(each) for each in needed):
        blank = np.flatnonzero(column.state == State.BLANK)
        left_out |= {int(at): f"{column.name} is blank" for at in blank if int(at) not in left_out}
    used = np.array([at for at in range(len(table.rows)) if at not in left_out])
    columns = {each: _taken(table.column(each), used) for each in needed}
    result = fit_model(spec, Observations(columns, len(used)))
    taken = Taken(tuple(used.tolist()), left_out)
    return ModelSheet(ModelRequest(name, 4, table.sheet, spec, label=label), table, taken, result, ())


def _taken(column: DataColumn, used: np.ndarray) -> np.ndarray | Levels:
    if column.kind is Kind.NUMBER:
        return column.numbers[used]
    texts = [column.texts[at] for at in used]
    names = tuple(sorted(set(texts)))
    return Levels(np.array([names.index(text) for text in texts]), names)


def book(models: Sequence[ModelSheet], nested: Sequence[Nested] = ()) -> Book:
    tables = {each.table.sheet: each.table for each in models if each.table is not None}
    grid = Grid({}, {}, tuple(tables), {}, None, (), None, (), None, (), None, ())
    request = Request(grid, tuple(each.request for each in models))
    return Book(FITTED_AT, request, tables, tuple(models), tuple(nested), (), (), {})


def refused(each: ModelSheet, text: str) -> ModelSheet:
    problem = Problem("test", Severity.REFUSAL, text, "H12", each.name)
    return replace(each, result=None, taken=None, problems=(problem,))


# --- the books ----------------------------------------------------------------------------------


@cache
def yard() -> Book:
    """Three models of refit hours; three blanks, one gross outlier (sheet row 32)."""
    table = _refits()
    straight = ModelSpec(
        "hours", terms=(NumberTerm("length (m)"), CategoryTerm("hull"), NumberTerm("coats")), order="month"
    )
    logs = ModelSpec(
        "hours", Shape.LOG, (NumberTerm("length (m)", Shape.LOG), CategoryTerm("hull"), NumberTerm("coats"))
    )
    crossed = ModelSpec(
        "hours",
        Shape.LOG,
        (NumberTerm("length (m)", Shape.LOG), CategoryTerm("hull")),
        (CrossedTerm("length (m)", "hull"),),
    )
    models = [model(name, spec, table, "job") for name, spec in zip("ABC", (straight, logs, crossed), strict=True)]
    return book(models, [Nested("C", "B", 8.1, 2, 112, 0.0005)])


def _refits() -> Table:
    random = np.random.default_rng(5)
    n = 120
    length = random.uniform(7.9, 38, n).round(1)
    hull = [("oak", "steel", "glass fibre")[at] for at in random.integers(0, 3, n)]
    coats = random.integers(1, 5, n).astype(float)
    less = np.array([{"oak": 0.0, "steel": 0.05, "glass fibre": -0.2}[each] for each in hull])
    hours = np.exp(0.9 + 1.2 * np.log(length) + 0.06 * coats + less + 0.17 * random.standard_normal(n)).round(1)
    hours[[16, 59]] = np.nan
    coats[87] = np.nan
    hours[30] *= 2.2
    columns = {"job": [f"Job {at + 100}" for at in range(n)], "hours": hours, "length (m)": length, "hull": hull}
    columns |= {"coats": coats, "month": np.arange(n) + 1.0}
    return data_table("Refits", columns, {"length (m)": "m"})


@cache
def one_predictor() -> Book:
    """A line with a bend."""
    random = np.random.default_rng(1)
    n = 48
    warmth = random.uniform(-5, 32, n).round(1)
    energy = (850 + 3 * warmth + 38 * np.maximum(warmth - 15, 0) + 40 * random.standard_normal(n)).round()
    columns = {"day": np.arange(n) + 1.0, "energy (kWh)": energy, "outdoor temperature [°C]": warmth}
    table = data_table("Daily", columns, {"energy (kWh)": "kWh", "outdoor temperature [°C]": "°C"})
    spec = ModelSpec("energy (kWh)", terms=(NumberTerm("outdoor temperature [°C]", bends=(15.0,)),), order="day")
    return book([model("bend", spec, table)])


@cache
def thirty_predictors() -> Book:
    random = np.random.default_rng(2)
    n = 200
    sizes = [10.0 ** (at % 5 - 2) for at in range(30)]
    columns = {f"predictor_{at:02}": random.normal(100 * size, 9 * size, n).round(4) for at, size in enumerate(sizes)}
    price = sum(v / v.std() * (at % 4) for at, v in enumerate(columns.values())) * 12345 + random.normal(0, 30000, n)
    table = data_table("Wide", {"price (EUR)": price.round(2), **columns}, {"price (EUR)": "EUR"})
    return book([model("all_thirty", ModelSpec("price (EUR)", terms=tuple(NumberTerm(c) for c in columns)), table)])


@cache
def twelve_models() -> Book:
    """Twelve models, the fifth of them refused."""
    fitted = yard().models
    models = [
        replace(fitted[at % 3], request=replace(fitted[at % 3].request, name=f"model_{at + 1}")) for at in range(12)
    ]
    models[4] = refused(
        models[4],
        "hull: all 20 rows used hold the same level 'oak' (Refits!D2); a category needs two. Clear the entry in "
        "fit request!H12 or widen the row filter.",
    )
    return book(models)


@cache
def forty_levels() -> Book:
    random = np.random.default_rng(3)
    n = 400
    depot = random.integers(0, 40, n)
    size = random.uniform(1, 9, n).round(2)
    cost = (100 + 20 * size + depot * 2 + random.normal(0, 8, n)).round(1)
    table = data_table("Depots", {"cost": cost, "size": size, "depot": [f"depot {at:02}" for at in depot]})
    return book([model("A", ModelSpec("cost", terms=(NumberTerm("size"), CategoryTerm("depot"))), table)])


@cache
def five_rows() -> Book:
    table = data_table("S", {"y": [1.0, 2.1, 2.9, 4.2, 5.1], "x": [1.0, 2.0, 3.0, 4.0, 5.0]})
    return book([model("A", ModelSpec("y", terms=(NumberTerm("x"),)), table)])


@cache
def far_names() -> Book:
    """Long names in three scripts, one of them written from right to left."""
    random = np.random.default_rng(4)
    n = 60
    area, floor = (
        "مساحة الأرض المخصصة للبناء بالمتر المربع (م٢)",
        "建築面積と付属設備を含む延べ床面積の合計（平方メートル）",
    )
    cost, district = "Стоимость капитального ремонта с учётом материалов (тыс. руб.)", "район"
    levels = ("Центральный административный округ", "北部工業地帯", "المنطقة الشرقية")
    x, z, at = random.uniform(100, 900, n).round(1), random.uniform(30, 80, n).round(1), random.integers(0, 3, n)
    y = (50 + 0.3 * x + 2 * z + 30 * at + random.normal(0, 20, n)).round(1)
    columns = {cost: y, area: x, floor: z, district: [levels[one] for one in at]}
    table = data_table("Данные о ремонте", columns, {area: "م٢", floor: "平方メートル", cost: "тыс. руб."})
    straight = ModelSpec(cost, terms=(NumberTerm(area), NumberTerm(floor), CategoryTerm(district)))
    logs = ModelSpec(
        cost, Shape.LOG, (NumberTerm(area, Shape.LOG), NumberTerm(floor, Shape.LOG), CategoryTerm(district))
    )
    return book([model("A", straight, table), model("B", logs, table)])


@cache
def every_kind() -> Book:
    """One model of each kind that can be asked for, an exact fit and a fit that hangs on a single row among them."""
    random = np.random.default_rng(6)
    n = 90
    x, z = random.uniform(1, 9, n).round(2), random.uniform(2, 5, n).round(2)
    c = [("north", "south", "west")[at] for at in random.integers(0, 3, n)]
    c[7] = "island"
    y = (12 + 3 * x + 0.4 * x**2 - 2 * z + random.normal(0, 2, n)).round(2)
    y[40] += 30
    columns = {"y": y, "exact": (1 + 2 * x).round(2), "x": x, "z": z, "c": c, "w": random.uniform(1, 4, n).round(1)}
    columns |= {"t": np.arange(n) + 45000.0, "g": [f"g{at % 9}" for at in range(n)], "same": 2 * x - 1}
    table = data_table("Kinds", columns)
    x_, z_, c_ = NumberTerm("x"), NumberTerm("z"), CategoryTerm("c")
    maybe = tuple(replace(term, candidate=True) for term in (x_, z_, c_))
    specs = {
        "weighted": ModelSpec("y", terms=(x_,), weight="w"),
        "curved": ModelSpec("y", terms=(NumberTerm("x", degree=3), z_), order="t", errors=Errors.SERIAL),
        "levels": ModelSpec("y", terms=(c_,), intercept=False),
        "zero": ModelSpec("y", terms=(x_,), intercept=False, errors=Errors.UNEVEN_SPREAD),
        "root": ModelSpec("y", Shape.ROOT, (NumberTerm("x", Shape.ROOT), NumberTerm("z", Shape.RECIPROCAL))),
        "mean": ModelSpec("y"),
        "exact": ModelSpec("exact", terms=(x_,)),
        "alias": ModelSpec("y", terms=(x_, NumberTerm("same"))),
        "resistant": ModelSpec("y", terms=(x_, z_), fit_by=FitBy.RESISTANT),
        "searched": ModelSpec("y", terms=maybe, search=Search.BIC),
        "grouped": ModelSpec("y", terms=(x_, z_), group="g", errors=Errors.GROUPED),
        "crossed": ModelSpec("y", Shape.LOG, (x_, z_), (CrossedTerm("x", "z"),), back_on=BackOn.FITTED),
    }
    return book([model(name, spec, table) for name, spec in specs.items()])


@cache
def nothing_fitted() -> Book:
    """Two models, neither of them fitted."""
    one = yard().models[0]
    return book(
        [refused(one, "hours: no row is complete."), refused(yard().models[1], "month is not a number column.")]
    )


BOOKS = {
    "yard": yard,
    "one predictor": one_predictor,
    "thirty predictors": thirty_predictors,
    "twelve models": twelve_models,
    "forty levels": forty_levels,
    "five rows": five_rows,
    "far names": far_names,
    "every kind": every_kind,
    "nothing fitted": nothing_fitted,
}
