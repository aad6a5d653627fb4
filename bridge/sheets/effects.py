"""What each coefficient means, in words beside it: `+9.4% per metre`, `18% less than oak`, `+1.3% hours for 1% more …`.

A coefficient on the scale of the logarithm is told as a factor, exp(b) - 1 in percent; one on the scale of the root by
what it adds near the average case (the derivative of the square). Where a term is crossed with another, what is said
holds at the other's base level, or where the other is 0.
"""

from __future__ import annotations

import math

import numpy as np

from bridge.regression.results import DesignColumn, Factor, ModelResult
from bridge.regression.spec import CategoryTerm, NumberTerm, Shape
from bridge.sheets import figures, words
from bridge.sheets.book import ModelSheet

_DIGITS = 3
_MOST_PERCENT = 10.0  # a larger factor is told as "times"
_MOST_CONDITIONS = 3
# Unit symbols and their names (SI Brochure, 9th edition, tables 2, 4 and 8); other units are told as they stand.
_NAMES = {
    "m": "metre",
    "km": "kilometre",
    "cm": "centimetre",
    "mm": "millimetre",
    "kg": "kilogram",
    "g": "gram",
    "t": "tonne",
    "s": "second",
    "min": "minute",
    "h": "hour",
    "d": "day",
    "l": "litre",
    "L": "litre",
    "ha": "hectare",
}


def effect(model: ModelSheet, result: ModelResult, at: int) -> str:
    """The phrase for the coefficient at `at`; empty where there is no plain one."""
    return _Teller(model, result).effect(at)


class _Teller:
    """One model's words."""

    def __init__(self, model: ModelSheet, result: ModelResult) -> None:
        self.model, self.result, self.table = model, result, model.table
        self.shape = result.spec.response_shape
        self.response = words.name_in(self.table, result.spec.response)
        self.unit = words.unit_in(self.table, result.spec.response) or self.response
        self.bases = dict(result.design.bases)
        self.means = {one.column: one.mean for one in result.ranges}

    def effect(self, at: int) -> str:
        """What the coefficient at `at` says."""
        column, b = self.result.design.columns[at], float(self.result.fit.coefficients[at])
        if not math.isfinite(b):
            return ""
        if not column.factors:
            return self._start({}, b)
        if len(column.factors) > 1:
            return self._crossed(column, b, at)
        factor = column.factors[0]
        if factor.kind == "level":
            said = self._level(column, factor, b)
        elif factor.kind == "hinge" or self._has_bends(column):
            said = self._bend(column, factor, b)
        elif self._degree(column) > 1:
            said = self._curve(column, factor)
        else:
            said = self._number(factor, b, self.step(at))
        return said + self._where(column)

    # --- sizes

    def change(self, b: float) -> str:
        """What adding b on the fitted scale does: `+3.2 hours`, `+9.4%`."""
        if self.shape is Shape.LOG:
            return _percent(b)
        return f"{_signed(self._in_units(b))} {self.unit}"

    def more(self, b: float) -> str:
        """The same as a comparison: `3.2 hours more`, `18% less`, `12 times as much`."""
        way = "more" if b >= 0 else "less"
        if self.shape is Shape.LOG:
            if b > math.log1p(_MOST_PERCENT):
                return f"{_number(math.exp(b)) if b < 700 else 'many'} times"
            return f"{figures.percent(abs(math.expm1(b)))} {way}"
        known = words.unit_in(self.table, self.result.spec.response)
        return " ".join(filter(None, (_number(abs(self._in_units(b))), known, way)))

    def _in_units(self, b: float) -> float:
        """From the root's scale to units, near the average case."""
        return b if self.shape is not Shape.ROOT else 2 * b * float(np.mean(self.result.fit.fitted))

    def step(self, at: int) -> float:
        """One unit where the data vary by about that; else the power of ten below their standard deviation."""
        spread = float(np.std(self.result.design.matrix[:, at]))
        if spread <= 0 or 0.5 <= spread <= 50:
            return 1.0
        return 10.0 ** math.floor(math.log10(spread))

    def per(self, name: str, step: float = 1.0) -> str:
        """`per metre`, `per 1000 EUR`, `per unit of coats`, `per 100 of stock`."""
        unit, bare = words.unit_in(self.table, name), words.name_in(self.table, name)
        if step == 1.0:
            return f"per {_NAMES.get(unit, unit)}" if unit else f"per unit of {bare}"
        count = figures.plain_number(step)
        return f"per {words.with_unit(count, unit)}" if unit else f"per {count} of {bare}"

    # --- single terms

    def _start(self, levels: dict[str, str], b: float) -> str:
        """The intercept, or a level's own start where there is none."""
        numbers, categories = [], []
        for term in self.result.spec.terms:
            name = words.name_in(self.table, term.column)
            if term.column in self.bases:
                categories.append(f"{name} is {levels.get(term.column, self.bases[term.column])}")
            else:
                numbers.append(f"{name} is {_nothing(term)}")
        if len(numbers) + len(categories) > _MOST_CONDITIONS and len(numbers) > 1:
            logs = any(_nothing(term) == "1" for term in self.result.spec.terms)
            numbers = [f"every number is 0{' (1 on a log scale)' if logs else ''}"]
        where = (numbers + categories)[:_MOST_CONDITIONS]
        size = {Shape.LOG: math.exp(min(b, 700.0)), Shape.ROOT: max(b, 0.0) ** 2}.get(self.shape)
        what = self.response if size is None else f"{_number(size)} {self.unit}"
        if not where:
            return f"the mean of {self.response}" if size is None else f"typically {what}"
        return f"{what} where {words.listing(where)}"

    def _number(self, factor: Factor, b: float, step: float) -> str:
        name = words.name_in(self.table, factor.column)
        if factor.kind == "log":
            size = self.change(b * math.log(1.01))
            return (
                f"{size} {self.response} for 1% more {name}"
                if self.shape is Shape.LOG
                else f"{size} for 1% more {name}"
            )
        if factor.kind == "power":
            return f"{self.change(b * step)} {self.per(factor.column, step)}{self._near()}"
        mean = self.means.get(factor.column, math.nan)
        slope = b / (2 * math.sqrt(mean)) if factor.kind == "root" and mean > 0 else -b / mean**2 if mean else math.nan
        if not math.isfinite(slope):
            return ""
        return f"{self.change(slope)} {self.per(factor.column)} at the average ({self._at(factor.column, mean)})"

    def _near(self) -> str:
        return " near the average case" if self.shape is Shape.ROOT else ""

    def _at(self, name: str, value: float) -> str:
        return words.with_unit(figures.sentence_number(value, _DIGITS), words.unit_in(self.table, name))

    def _level(self, column: DesignColumn, factor: Factor, b: float) -> str:
        base = self.bases.get(factor.column, "")
        own = {c.factors[0].level for c in self.result.design.columns if c.term == column.term and len(c.factors) == 1}
        if not base or base in own:  # without an intercept every level has a start of its own
            return self._start({factor.column: factor.level}, b)
        return f"{self.more(b)} than {base}{self._near()}".replace(" times than ", " times as much as ")

    def _curve(self, column: DesignColumn, factor: Factor) -> str:
        name = words.name_in(self.table, factor.column)
        if factor.exponent > 1:
            return f"part of the curve along {name}"
        mean = self.means.get(factor.column, math.nan)
        powers = [
            (other.factors[0].exponent, float(b))
            for other, b in zip(self.result.design.columns, self.result.fit.coefficients, strict=True)
            if other.term == column.term and len(other.factors) == 1
        ]
        slope = math.fsum(k * b * mean ** (k - 1) for k, b in powers)
        if not math.isfinite(slope):
            return f"part of the curve along {name}"
        where = f"at the average ({self._at(factor.column, mean)})"
        return f"a curve along {name}: {self.change(slope)} {self.per(factor.column)} {where}"

    def _bend(self, column: DesignColumn, factor: Factor, b: float) -> str:
        slopes = [
            (other.factors[0].knot if other.factors[0].kind == "hinge" else -math.inf, float(value))
            for other, value in zip(self.result.design.columns, self.result.fit.coefficients, strict=True)
            if other.term == column.term and len(other.factors) == 1
        ]
        knots = sorted(knot for knot, _ in slopes if knot > -math.inf)
        per = self.per(factor.column)
        if factor.kind != "hinge":
            return f"{self.change(b)} {per} below {self._knot(factor.column, knots[0])}"
        before = math.fsum(value for knot, value in slopes if knot < factor.knot)
        above = self._knot(factor.column, factor.knot)
        return f"from {self.change(before)} to {self.change(before + b)} {per} above {above}"

    def _knot(self, name: str, value: float) -> str:
        return words.with_unit(figures.plain_number(value), words.unit_in(self.table, name))

    def _has_bends(self, column: DesignColumn) -> bool:
        return any(
            other.factors[0].kind == "hinge"
            for other in self.result.design.columns
            if other.term == column.term and other.factors
        )

    def _degree(self, column: DesignColumn) -> int:
        return max(
            (other.factors[0].exponent for other in self.result.design.columns if other.term == column.term), default=1
        )

    # --- crossed terms

    def _crossed(self, column: DesignColumn, b: float, at: int) -> str:
        levels = [factor for factor in column.factors if factor.kind == "level"]
        numbers = [factor for factor in column.factors if factor.kind != "level"]
        if not numbers:
            names = [f"{words.name_in(self.table, factor.column)} {factor.level}" for factor in levels]
            return f"{self.more(b)} than {words.listing(names)} come to apart{self._near()}".replace(
                " times than ", " times what "
            )
        if levels:
            bases = [self.bases.get(factor.column, "") for factor in levels]
            return f"{self._slope(numbers[0], b)} than for {words.listing(bases)}{self._near()}"
        first, second = (self._shaped_name(factor) for factor in numbers[:2])
        return f"each further unit of {first} adds {self.change(b)} to what one of {second} does{self._near()}"

    def _slope(self, factor: Factor, b: float) -> str:
        """How much steeper: `0.8 hours per metre more`, `0.2% more for 1% more length`."""
        if factor.kind == "log":
            return f"for 1% more {words.name_in(self.table, factor.column)} {self.more(b * math.log(1.01))}"
        if factor.kind != "power" or factor.exponent > 1:
            return f"{self.more(b)} per unit of {self._shaped_name(factor)}"
        size, _, way = self.more(b).rpartition(" ")
        return f"{size} {way} {self.per(factor.column)}"

    def _shaped_name(self, factor: Factor) -> str:
        name = words.name_in(self.table, factor.column)
        if factor.kind == "power":
            return name if factor.exponent == 1 else f"{name} to power {factor.exponent}"
        if factor.kind == "hinge":
            return f"{name} above {self._knot(factor.column, factor.knot)}"
        return f"{factor.kind} {name}"

    def _where(self, column: DesignColumn) -> str:
        """What must hold for a main effect of a crossed term."""
        own = column.factors[0].column
        conditions = []
        for crossed in self.result.spec.crossed:
            if own not in (crossed.first, crossed.second):
                continue
            other = crossed.second if own == crossed.first else crossed.first
            name = words.name_in(self.table, other)
            nothing = next((_nothing(term) for term in self.result.spec.terms if term.column == other), "0")
            conditions.append(f"{name} is {self.bases.get(other, nothing)}")
        return f", where {words.listing(conditions)}" if conditions else ""


def _nothing(term: NumberTerm | CategoryTerm) -> str:
    """The value of a number column at which its term is 0."""
    return "1" if isinstance(term, NumberTerm) and term.shape is Shape.LOG else "0"


def _number(value: float) -> str:
    return figures.sentence_number(value, _DIGITS)


def _signed(value: float) -> str:
    text = _number(value)
    return text if value < 0 or text == "0" else f"+{text}"


def _percent(b: float) -> str:
    """exp(b) - 1 in percent, to two digits; a large factor as `times 12.3`."""
    if b > math.log1p(_MOST_PERCENT):
        return f"times {_number(math.exp(b))}" if b < 700 else "times more than can be told"
    share = math.expm1(b) * 100
    text = figures.sentence_number(abs(share), 2)
    return f"{'−' if share < 0 and text != '0' else '+'}{text}%"
