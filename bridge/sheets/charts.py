"""The charts: one function per question that a chart answers, points thinned, readable without colour.

Points come from `fit rows` where it holds them, else from the figures behind the charts. Above 2,000 points an even
sample is drawn, together with every row that carries a remark.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from bridge.page.cells import reference
from bridge.page.charts import Axis, Chart, Series
from bridge.regression.results import ModelResult
from bridge.regression.spec import NumberTerm
from bridge.sheets import axes, lines, measure, remarks, rows, style, words
from bridge.sheets.behind import Behind, Points
from bridge.sheets.book import Book, ModelSheet
from bridge.workbook.tables import Kind, Table

MOST_POINTS = 2000
MOST_NAMED = 8
MOST_COEFFICIENTS = 30
_LINE, _TALL_LINE = 19, 42  # pixels a coefficient; names that some programs break into lines need more
_LONG_NAME = 80.0  # pixels
_FEW_VALUES = 12
WIDTH, HEIGHT = 340, 216

Floats = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Picture:
    """A chart without a place yet. `key`: observed, fitted, normal, leverage, order, coefficients, line, or
    `against <column>`."""

    key: str
    chart: Chart


@dataclass(frozen=True, slots=True)
class Gallery:
    """Every fitted model's pictures in the order they are shown, and the figures behind them."""

    pictures: Mapping[str, tuple[Picture, ...]]
    columns: tuple[tuple[str, str, tuple[float | None, ...]], ...]

    def chart(self, model: str, key: str) -> Chart | None:
        """One model's chart, or None."""
        return next((picture.chart for picture in self.pictures.get(model, ()) if picture.key == key), None)


def draw(book: Book) -> Gallery:
    """All charts of a book."""
    area = Behind(book.title("fit diagnostics"))
    pictures: dict[str, tuple[Picture, ...]] = {}
    for section in rows.sections(book):
        shared: dict[str, Points] = {}
        for model in section.models:
            pictures[model.name] = _pictures(_Cases(book, section, model, area, shared))
    return Gallery(pictures, tuple(area.columns))


# --- points -------------------------------------------------------------------------------------


class _Cases:
    """One model's rows as points: where `fit rows` holds them all, those cells; else thinned copies."""

    def __init__(
        self, book: Book, section: rows.Section, model: ModelSheet, area: Behind, shared: dict[str, Points]
    ) -> None:
        assert model.result is not None
        assert model.taken is not None
        self.result: ModelResult = model.result
        self.table: Table = section.table
        self.name = model.name
        self.said = model.name if model.name.casefold().startswith("model") else f"model {model.name}"
        self.area = area
        self._section, self._shared = section, shared
        self._sheet = book.title("fit rows")
        self._used = np.asarray(model.taken.used, dtype=np.int64)
        self.direct = len(section.lines) == len(section.table.rows) <= MOST_POINTS
        self.kept = np.arange(len(self._used)) if self.direct else self._thinned()
        self._made: dict[str, Points] = {}

    def case(self, key: str) -> Points:
        """A number column of `fit rows` (`observed`, `fitted`, `internal`, …)."""
        if key not in self._made:
            values = rows.case_values(self.result, key)
            self._made[key] = self._in_rows(key, values) if self.direct else self._copied(key, values[self.kept])
        return self._made[key]

    def data(self, column: str) -> Points:
        """A data column's values for the same rows, copied behind the charts (once for all models of a sheet)."""
        found = self.table.column(column)
        numbers = found.numbers if found is not None else np.full(len(self.table.rows), np.nan)
        if not self.direct:
            return self._copied(column, numbers[self._used][self.kept])
        if column not in self._shared:
            self._shared[column] = self.area.add(self.table.sheet, column, numbers[self._section.lines].tolist())
        return self._shared[column]

    def scale_key(self) -> str:
        """The key of the fitted values on the fitted scale."""
        return "fitted" if self.result.back is None and "on_scale" not in self._section.keys[self.name] else "on_scale"

    def labels(self, marked: NDArray[np.bool_]) -> tuple[str, ...]:
        """Row numbers beside the oddest of the marked rows, empty elsewhere; one text per point."""
        size = np.where(marked, np.abs(np.nan_to_num(self.result.influence.external)) + 1e-9, 0.0)
        named = np.argsort(-size, kind="stable")[:MOST_NAMED]
        texts = [""] * len(self._used)
        for at in named[size[named] > 0].tolist():
            texts[at] = str(int(self.table.rows[self._used[at]]))
        if not self.direct:
            return tuple(texts[at] for at in self.kept.tolist())
        whole = [""] * len(self.table.rows)
        for at, text in zip(self._used.tolist(), texts, strict=True):
            whole[at] = text
        return tuple(whole)

    def behind(self, title: str, values: Sequence[float | None]) -> Points:
        """Figures of this model's own, behind the charts."""
        return self.area.add(self.name, title, values)

    def _thinned(self) -> NDArray[np.int64]:
        odd = remarks.marks(self.result).any * (np.abs(np.nan_to_num(self.result.influence.external)) + 1.0)
        if len(self._used) <= MOST_POINTS:
            return np.arange(len(self._used), dtype=np.int64)
        return rows.thinned(len(self._used), odd, MOST_POINTS)

    def _in_rows(self, key: str, values: Floats) -> Points:
        column = self._section.column(self.name, key)
        whole: list[float | None] = [None] * len(self.table.rows)
        for at, value in zip(self._used.tolist(), values.tolist(), strict=True):
            whole[at] = value if np.isfinite(value) else None
        place = (self._section.first_row, column), (self._section.last_row, column)
        return Points(reference(self._sheet, *place), tuple(whole))

    def _copied(self, title: str, values: Floats) -> Points:
        if title not in self._made:
            self._made[title] = self.behind(title, values.tolist())
        return self._made[title]


# --- pictures -----------------------------------------------------------------------------------


def _pictures(cases: _Cases) -> tuple[Picture, ...]:
    spec = cases.result.spec
    numbers = [term.column for term in spec.terms if isinstance(term, NumberTerm)]
    made: list[Picture | None] = [_observed(cases), _fitted(cases), _normal(cases), _leverage(cases)]
    made.append(_order(cases, spec.order) if spec.order else None)
    made.append(_line(cases) if len(spec.terms) == len(numbers) == 1 else None)
    made.extend(_against(cases, column) for column in numbers)
    made.append(_coefficients(cases))  # last: it is the one that grows with the number of terms
    return tuple(picture for picture in made if picture is not None)


def _observed(cases: _Cases) -> Picture:
    observed, fitted = cases.case("observed"), cases.case("fitted")
    both = axes.axis("", (*observed.values, *fitted.values))
    low, high = both.minimum, both.maximum
    line = cases.behind("1:1 line", (low, high))
    name = words.axis_title(cases.table, cases.result.spec.response)
    series = (
        _cloud("rows", fitted, observed, cases.labels(remarks.marks(cases.result).large)),
        _rule("observed = fitted", line, line),
    )
    return Picture(
        "observed",
        _chart(
            f"Observed against fitted, {cases.said}",
            series,
            _titled(both, f"fitted {name}"),
            _titled(both, f"observed {name}"),
        ),
    )


def _fitted(cases: _Cases) -> Picture:
    x, y = cases.case(cases.scale_key()), cases.case("internal")
    spec = cases.result.spec
    name = words.axis_title(cases.table, spec.response, spec.response_shape)
    return Picture("fitted", _residuals(cases, "fitted", x, y, axes.axis(f"fitted {name}", x.values)))


def _against(cases: _Cases, column: str) -> Picture:
    x, y = cases.data(column), cases.case("internal")
    shown = _with_air(x.values)
    axis = axes.axis(words.axis_title(cases.table, column), shown, date=_is_date(cases.table, column))
    return Picture(f"against {column}", _residuals(cases, words.name_in(cases.table, column), x, y, axis))


def _order(cases: _Cases, column: str) -> Picture | None:
    x, y = cases.data(column), cases.case("internal")
    if all(value is None for value in x.values):
        return None  # an order told by texts has no axis
    axis = axes.axis(words.axis_title(cases.table, column), x.values, date=_is_date(cases.table, column))
    chart = _residuals(cases, f"order ({words.name_in(cases.table, column)})", x, y, axis)
    return Picture("order", chart)


def _residuals(cases: _Cases, against: str, x: Points, y: Points, axis: Axis) -> Chart:
    labels = cases.labels(remarks.marks(cases.result).large)
    title = axes.shortened(f"Residuals against {against}, {cases.said}", 60)
    return _chart(title, (_cloud("rows", x, y, labels),), axis, axes.even("studentised residual", y.values, 2.5))


def _normal(cases: _Cases) -> Picture | None:
    internal = cases.result.influence.internal
    finite = np.sort(internal[np.isfinite(internal)])
    n = len(finite)
    if n < 3:
        return None
    # plotting positions (i - 3/8) / (n + 1/4), Blom 1958
    quantiles = ndtri((np.arange(1, n + 1) - 0.375) / (n + 0.25))
    tails = np.where(np.abs(quantiles) > 2.0, np.abs(quantiles), 0.0)
    kept = rows.thinned(n, tails, MOST_POINTS) if n > MOST_POINTS else np.arange(n)
    x = cases.behind("normal quantile", quantiles[kept].tolist())
    y = cases.behind("residual, sorted", finite[kept].tolist())
    end = max(abs(float(quantiles[0])), 2.0)
    ends = cases.behind("normal line", (-end, end))
    series = (_cloud("rows", x, y), _rule("exactly normal", ends, ends))
    x_axis = axes.even("normal quantile", x.values, 2.0)
    y_axis = axes.even("studentised residual, sorted", y.values, 2.5)
    return Picture("normal", _chart(f"Normal plot of the residuals, {cases.said}", series, x_axis, y_axis))


def _leverage(cases: _Cases) -> Picture:
    x, y = cases.case("leverage"), cases.case("external")
    marked = remarks.marks(cases.result)
    labels = cases.labels(marked.large | marked.pulls | marked.far | marked.alone)
    largest = max((value for value in x.values if value is not None), default=0.0)
    x_axis = axes.axis("leverage", (0.0, largest))
    title = f"Leverage and residual, {cases.said}"
    y_axis = axes.even("studentised residual", y.values, 2.5)
    return Picture("leverage", _chart(title, (_cloud("rows", x, y, labels),), x_axis, y_axis))


def _coefficients(cases: _Cases) -> Picture | None:
    fit = cases.result.fit
    sized = [at for at in range(len(fit.coefficients)) if np.isfinite(fit.standardised[at]) and fit.coefficients[at]]
    if not sized:
        return None
    sized.sort(key=lambda at: -abs(float(fit.standardised[at])))
    shown = sorted(sized[:MOST_COEFFICIENTS])
    scale = fit.standardised[shown] / fit.coefficients[shown]
    low, high = fit.low[shown] * scale, fit.high[shown] * scale
    labels = [words.label_in(cases.table, cases.result.design.columns[at].label) for at in shown]
    names = tuple(axes.shortened(label, 30) for label in labels)
    line = _TALL_LINE if max(measure.pixels(name, 8.0) for name in names) > _LONG_NAME else _LINE
    height = np.arange(len(shown), 0, -1, dtype=float)
    series = _interval_series(cases, fit.standardised[shown], low, high, height, names)
    span_low, span_high = float(np.minimum(low, high).min()), float(np.maximum(low, high).max())
    room = 0.9 * (max(span_high, 0.0) - min(span_low, 0.0))  # for the names at the right
    x_axis = axes.axis("standardised coefficient", (min(span_low, 0.0), span_high + room))
    y_axis = Axis("", minimum=0.0, maximum=len(shown) + 1.0, gridlines=False, hidden_labels=True)
    level = f"{100 * cases.result.spec.level:g}%"
    more = "" if len(shown) == len(sized) else f", the {len(shown)} largest of {len(sized)}"
    title = f"Coefficients, {level} intervals, {cases.said}{more}"
    return Picture("coefficients", _chart(title, series, x_axis, y_axis, height=max(HEIGHT, 110 + line * len(shown))))


def _interval_series(
    cases: _Cases, middle: Floats, low: Floats, high: Floats, height: Floats, names: tuple[str, ...]
) -> tuple[Series, ...]:
    ends: list[float | None] = []
    level: list[float | None] = []
    for left, right, y in zip(low.tolist(), high.tolist(), height.tolist(), strict=True):
        ends += [left, right, None]
        level += [y, y, None]
    bars = cases.behind("interval ends", ends), cases.behind("at height", level)
    points = cases.behind("standardised", middle.tolist()), cases.behind("at height", height.tolist())
    right_end = cases.behind("name stands at", np.maximum(low, high).tolist())
    return (
        Series("interval", bars[0].ref, bars[1].ref, bars[0].values, bars[1].values, None, line=True, width_pt=1.5),
        Series("coefficient", points[0].ref, points[1].ref, points[0].values, points[1].values, marker_size=6),
        Series(
            "name",
            right_end.ref,
            points[1].ref,
            right_end.values,
            points[1].values,
            None,
            labels=names,
            color=style.INK,
        ),
    )


def _line(cases: _Cases) -> Picture | None:
    (term,) = cases.result.spec.terms
    traced = lines.trace(cases.result, term.column)
    if traced is None:
        return None
    x = cases.behind(f"{term.column}, line", traced.x.tolist())
    level = f"{100 * cases.result.spec.level:g}%"

    def curve(name: str, values: Floats) -> Points:
        return cases.behind(name, values.tolist())

    series = [
        _cloud(
            "rows", cases.data(term.column), cases.case("observed"), cases.labels(remarks.marks(cases.result).large)
        ),
        _rule("fitted", x, curve("fitted line", traced.estimates.estimate), dash=None, width=2.0),
    ]
    for name, values, dash in (
        (f"mean, {level}", traced.estimates.mean_low, "dash"),
        ("", traced.estimates.mean_high, "dash"),
        (f"single case, {level}", traced.estimates.case_low, "sysDot"),
        ("", traced.estimates.case_high, "sysDot"),
    ):
        if np.isfinite(values).all():
            series.append(_rule(name, x, curve(name or "upper end", values), dash=dash))
    response = words.axis_title(cases.table, cases.result.spec.response)
    x_axis = axes.axis(words.axis_title(cases.table, term.column), x.values)
    y_axis = axes.axis(response, [value for one in series for value in one.y])
    title = f"Fitted line with {level} bands, {cases.said}"
    return Picture("line", _chart(axes.shortened(title, 80), tuple(series), x_axis, y_axis))


# --- parts of a chart ---------------------------------------------------------------------------


def _cloud(title: str, x: Points, y: Points, labels: tuple[str, ...] | None = None) -> Series:
    shown = labels if labels is not None and any(labels) else None
    return Series(title, x.ref, y.ref, x.values, y.values, "circle", 4, labels=shown)


def _rule(title: str, x: Points, y: Points, dash: str | None = "dash", width: float = 1.25) -> Series:
    return Series(title, x.ref, y.ref, x.values, y.values, None, line=True, dash=dash, width_pt=width, color=style.INK)


def _titled(axis: Axis, title: str) -> Axis:
    return replace(axis, title=axes.shortened(title))


def _chart(title: str, series: Sequence[Series], x_axis: Axis, y_axis: Axis, height: int = HEIGHT) -> Chart:
    alt = f"{title}. Across: {x_axis.title}. Up: {y_axis.title or 'one line per coefficient'}."
    return Chart(title, tuple(series), x_axis, y_axis, 0, 0, WIDTH, height, alt_text=alt)


def _with_air(values: tuple[float | None, ...]) -> tuple[float | None, ...]:
    """Few different values would stand on the frame: the reach is widened a little, so that the axis goes beyond."""
    if len({value for value in values if value is not None}) > _FEW_VALUES:
        return values
    low, high = axes.reach(values)
    return (low - 0.02 * (high - low), high + 0.02 * (high - low))


def _is_date(table: Table, name: str) -> bool:
    column = table.column(name)
    return column is not None and column.kind is Kind.DATE
