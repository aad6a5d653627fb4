"""Bounds, number formats and titles of chart axes: whole steps of 1, 2, 2.5 or 5, about five of them."""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Iterable

from bridge.page.charts import Axis
from bridge.sheets import figures

_STEPS = (1.0, 2.0, 2.5, 5.0, 10.0)
_LONGEST = 44  # characters that fit beside a chart 250 pixels high


def axis(title: str, values: Iterable[float | None], *, wanted: int = 5, date: bool = False) -> Axis:
    """An axis that holds all finite `values` between whole steps, with as many decimals as its steps need."""
    low, high = reach(values)
    step = _step(high - low, wanted)
    first, last = math.floor(low / step + 1e-9) * step, math.ceil(high / step - 1e-9) * step
    if first == last:
        first, last = first - step, last + step
    code = figures.DATE if date else _code(step, max(abs(first), abs(last)))
    return Axis(shortened(title), code, _clean(first, step), _clean(last, step), step)


def even(title: str, values: Iterable[float | None], least: float) -> Axis:
    """An axis with zero in its middle that reaches at least to `least` on both sides."""
    low, high = reach(values)
    size = max(-low, high, least)
    step = _step(size, 3)
    end = _clean(math.ceil(size / step - 1e-9) * step, step)
    return Axis(shortened(title), _code(step, end), -end, end, step)


def reach(values: Iterable[float | None]) -> tuple[float, float]:
    """Smallest and largest finite value; (0, 1) where there is none, a little room around a single one."""
    finite = [value for value in values if value is not None and math.isfinite(value)]
    if not finite:
        return 0.0, 1.0
    low, high = min(finite), max(finite)
    if high - low <= 1e-12 * max(abs(low), abs(high)):
        room = abs(low) * 0.1 or 1.0
        return low - room, high + room
    return low, high


def shortened(title: str, longest: int = _LONGEST) -> str:
    """A title that fits its axis: cut with an ellipsis where it is too long (East Asian characters count double)."""
    total = 0
    for at, character in enumerate(title):
        total += 2 if unicodedata.east_asian_width(character) in ("W", "F") else 1
        if total > longest:
            return title[: max(at - 1, 1)].rstrip() + "…"
    return title


def _step(span: float, wanted: int) -> float:
    rough = span / wanted
    power = 10.0 ** math.floor(math.log10(rough))
    return power * next(step for step in _STEPS if step * power >= rough * 0.999)


def _clean(value: float, step: float) -> float:
    """Without the rounding noise of a multiplied step."""
    return float(f"{value:.{max(0, 2 - math.floor(math.log10(step)))}f}") if step < 1e6 else value


def _code(step: float, largest: float) -> str:
    if largest >= 1e7 or step < 1e-5:
        return "0.0E+00"
    places = max(0, -math.floor(math.log10(step) + 1e-9))
    if places and round(step * 10**places) != step * 10**places:  # a step of 2.5, 0.25, …
        places += 1
    if not places and step != round(step):
        places = 1
    return figures.places_format(largest, places)
