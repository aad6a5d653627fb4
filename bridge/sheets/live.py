"""The pieces of live formulas: design columns over ranges of data or over one case's cells."""

from __future__ import annotations

from collections.abc import Mapping

from bridge.page.cells import address, quoted, text_literal
from bridge.regression.results import DesignColumn, Factor
from bridge.regression.spec import Shape
from bridge.workbook.tables import DataColumn, Table

MOST = 8_000  # characters of a formula; the limit of the format is 8,192


def number(value: float) -> str:
    """A number as a formula's constant, with every digit; negative ones in brackets."""
    text = repr(float(value))
    return f"({text})" if text.startswith("-") else text


def product(column: DesignColumn, cells: Mapping[str, str]) -> str:
    """The design column as a formula; `cells` gives each data column's cell or range. Works on whole ranges too."""
    return "*".join(_factor(factor, cells[factor.column]) for factor in column.factors) or "1"


def _factor(factor: Factor, cell: str) -> str:
    if factor.kind == "level":
        return f"EXACT({cell},{text_literal(factor.level)})"
    if factor.kind == "log":
        return f"LN({cell})"
    if factor.kind == "root":
        return f"SQRT({cell})"
    if factor.kind == "reciprocal":
        return f"(1/{cell})"
    if factor.kind == "hinge":
        knot = number(factor.knot)
        return f"(({cell}-{knot})*({cell}>{knot}))"
    return cell if factor.exponent == 1 else f"{cell}^{factor.exponent}"


def shaped(shape: Shape, cell: str) -> str:
    """The response as shaped."""
    return {Shape.LOG: f"LN({cell})", Shape.ROOT: f"SQRT({cell})"}.get(shape, cell)


def data_range(table: Table, column: DataColumn, first: int, last: int) -> str:
    """Cells of a data column from the one-based sheet row `first` to `last`, absolute."""
    top, end = address(first - 1, column.index, absolute=True), address(last - 1, column.index, absolute=True)
    return f"{quoted(table.sheet)}!{top}" if first == last else f"{quoted(table.sheet)}!{top}:{end}"
