"""From a model in terms of columns to the columns of its design matrix, and their values as doubles.

`layout` decides which columns there are, `matrix` gives their values for any rows (the data's or new cases'),
`response` and `weights` give the other two ingredients. The exact path forms the same columns as integers: see
`integers.py`.

Categories are coded by treatment: one column per level but the base. Without an intercept the first category gets a
column for every level, base included: otherwise the fit would depend on which level happens to be the base.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from bridge.regression.errors import (
    BadWeight,
    NothingToFit,
    OneLevel,
    OutOfDomain,
    TooManyColumns,
    UnknownBase,
)
from bridge.regression.results import DesignColumn, Factor
from bridge.regression.spec import CategoryTerm, CrossedTerm, ModelSpec, NumberTerm, Observations, Shape

MOST_COLUMNS = 300

Array = NDArray[np.float64]
Rows = slice | NDArray[np.intp]

ALL_ROWS = slice(None)
INTERCEPT = DesignColumn("intercept", "intercept", ())


@dataclass(frozen=True, slots=True)
class Layout:
    """The columns of the design matrix in order (intercept first), each category's base level, its levels' counts."""

    columns: tuple[DesignColumn, ...]
    bases: tuple[tuple[str, str], ...]
    levels: tuple[tuple[str, tuple[tuple[str, int], ...]], ...]


# --- which columns ------------------------------------------------------------------------------


def layout(spec: ModelSpec, observations: Observations) -> Layout:
    """The design columns that `spec` asks for on these rows.

    Raises NothingToFit, OneLevel, UnknownBase, TooManyColumns.
    """
    if not spec.terms and not spec.intercept:
        raise NothingToFit("no term and no intercept")
    categories = [term for term in spec.terms if isinstance(term, CategoryTerm)]
    counts = {term.column: level_counts(observations, term.column) for term in categories}
    bases = {term.column: _base(term, counts[term.column]) for term in categories}
    coded = {term.column: _columns_of(term, counts, bases, every_level=False) for term in spec.terms}
    columns = [INTERCEPT] if spec.intercept else []
    for term in spec.terms:
        full = not spec.intercept and bool(categories) and term is categories[0]
        columns += _columns_of(term, counts, bases, every_level=True) if full else coded[term.column]
    for crossed in spec.crossed:
        columns += _products(spec, crossed, coded)
    if len(columns) > MOST_COLUMNS:
        raise TooManyColumns(f"{len(columns)} columns; at most {MOST_COLUMNS}")
    return Layout(
        tuple(columns),
        tuple(bases.items()),
        tuple((name, tuple(levels.items())) for name, levels in counts.items()),
    )


def term_name(term: NumberTerm | CategoryTerm) -> str:
    """What a term is called in tables: its column, after the shape if there is one (`log length_m`)."""
    if isinstance(term, CategoryTerm) or term.shape is Shape.AS_IS:
        return term.column
    return f"{term.shape.value} {term.column}"


def crossed_name(spec: ModelSpec, crossed: CrossedTerm) -> str:
    """What a product of two terms is called in tables: `length_m x hull`."""
    names = {term.column: term_name(term) for term in spec.terms}
    return f"{names[crossed.first]} x {names[crossed.second]}"


def level_counts(observations: Observations, column: str) -> dict[str, int]:
    """The levels that occur, in the order of the names, with how many rows have each."""
    levels = observations.levels(column)
    counts = np.bincount(levels.codes, minlength=len(levels.names))
    return {name: int(count) for name, count in zip(levels.names, counts, strict=True) if count}


def _base(term: CategoryTerm, counts: dict[str, int]) -> str:
    if len(counts) < 2:
        raise OneLevel(f"{term.column} has {len(counts)} level", term.column)
    if term.base is None:
        return max(counts, key=lambda name: counts[name])  # the first by name among equals
    if term.base in counts:
        return term.base
    alike = [name for name in counts if name.strip().casefold() == term.base.strip().casefold()]
    if len(alike) != 1:
        raise UnknownBase(f"{term.column} has no level {term.base}", term.column)
    return alike[0]


def _columns_of(
    term: NumberTerm | CategoryTerm,
    counts: dict[str, dict[str, int]],
    bases: dict[str, str],
    every_level: bool,
) -> list[DesignColumn]:
    name = term_name(term)
    if isinstance(term, CategoryTerm):
        wanted = [level for level in counts[term.column] if every_level or level != bases[term.column]]
        return [DesignColumn(f"{name} {level}", name, (Factor(term.column, "level", level=level),)) for level in wanted]
    if term.shape is not Shape.AS_IS:
        return [DesignColumn(name, name, (Factor(term.column, term.shape.value),))]
    powers = [
        DesignColumn(name if k == 1 else f"{name}^{k}", name, (Factor(term.column, "power", exponent=k),))
        for k in range(1, term.degree + 1)
    ]
    hinges = [
        DesignColumn(f"{name} above {_figure(knot)}", name, (Factor(term.column, "hinge", knot=knot),))
        for knot in term.bends
    ]
    return powers + hinges


def _products(spec: ModelSpec, crossed: CrossedTerm, coded: dict[str, list[DesignColumn]]) -> list[DesignColumn]:
    name = crossed_name(spec, crossed)
    return [
        DesignColumn(f"{a.label} x {b.label}", name, a.factors + b.factors)
        for a in coded[crossed.first]
        for b in coded[crossed.second]
    ]


def _figure(value: float) -> str:
    return repr(int(value)) if value == int(value) and abs(value) < 1e15 else repr(value)


# --- their values as doubles --------------------------------------------------------------------


def matrix(
    columns: Sequence[DesignColumn], observations: Observations, rows: Rows = ALL_ROWS, out: Array | None = None
) -> Array:
    """The values of the columns for the rows asked for, shape (k, len(columns)), in doubles; written to `out` if given.

    Laid out column after column. Raises OutOfDomain with the column and the index, among the rows asked for, of the
    first where a shape cannot be taken.
    """
    count = len(range(*rows.indices(observations.n))) if isinstance(rows, slice) else len(rows)
    values = np.empty((count, len(columns)), order="F") if out is None else out
    for j, column in enumerate(columns):
        values[:, j] = 1.0
        for position, factor in enumerate(column.factors):
            if position:
                values[:, j] *= factor_values(factor, observations, rows)
            else:
                values[:, j] = factor_values(factor, observations, rows)
    return values


def factor_values(factor: Factor, observations: Observations, rows: Rows = ALL_ROWS) -> Array:
    """One factor's values for the rows asked for, shape (k,), in doubles. Raises OutOfDomain."""
    if factor.kind == "level":
        levels = observations.levels(factor.column)
        wanted = levels.names.index(factor.level) if factor.level in levels.names else -1
        return np.asarray(levels.codes[rows] == wanted, dtype=np.float64)
    x = observations.numbers(factor.column)[rows]
    if factor.kind == "power":
        return x if factor.exponent == 1 else np.asarray(x**factor.exponent)
    if factor.kind == "hinge":
        return np.maximum(x - factor.knot, 0.0)
    return shaped(x, Shape(factor.kind), factor.column)


def shaped(x: Array, shape: Shape, column: str) -> Array:
    """x under a shape, in doubles, as a spreadsheet's LN, SQRT and 1/x give it. Raises OutOfDomain."""
    if shape is Shape.AS_IS:
        return x
    _within_domain(x, shape, column)
    if shape is Shape.LOG:
        return np.log(x)
    return np.sqrt(x) if shape is Shape.ROOT else 1.0 / x


def check_domain(columns: Sequence[DesignColumn], observations: Observations) -> None:
    """Raises OutOfDomain with the column and the index of the first row where a shape cannot be taken."""
    for column in columns:
        for factor in column.factors:
            if factor.kind in _SHAPES:
                _within_domain(observations.numbers(factor.column), Shape(factor.kind), factor.column)


_SHAPES = (Shape.LOG, Shape.ROOT, Shape.RECIPROCAL)


def _within_domain(x: Array, shape: Shape, column: str) -> None:
    outside = {Shape.LOG: np.less_equal, Shape.ROOT: np.less, Shape.RECIPROCAL: np.equal}[shape](x, 0)
    if outside.any():
        index = int(np.argmax(outside))
        raise OutOfDomain(f"{shape.value} of {float(x[index])!r} in {column}", column, index)


def response(spec: ModelSpec, observations: Observations) -> Array:
    """The response on the fitted scale, shape (n,). Raises OutOfDomain."""
    return shaped(observations.numbers(spec.response), spec.response_shape, spec.response)


def weights(spec: ModelSpec, observations: Observations) -> Array | None:
    """The weights, shape (n,), or None. Raises BadWeight for the first that is not a positive number."""
    if spec.weight is None:
        return None
    values = observations.numbers(spec.weight)
    bad = ~(np.isfinite(values) & (values > 0))
    if bad.any():
        index = int(np.argmax(bad))
        raise BadWeight(f"weight {float(values[index])!r} in {spec.weight}", spec.weight, index)
    return values
