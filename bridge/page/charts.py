"""Native charts as values: scatter and line series over cells of our own sheets.

Each series carries the points it shows now, so that a viewer that does not redraw shows them.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Axis:
    """One axis: its title (with unit), and bounds and step between its numbers where the default would mislead."""

    title: str
    number_format: str = "General"
    minimum: float | None = None
    maximum: float | None = None
    step: float | None = None
    gridlines: bool = True
    hidden_labels: bool = False


@dataclass(frozen=True, slots=True)
class Series:
    """Points of a scatter chart.

    `x_ref` and `y_ref` are absolute references into our own sheets (`'fit rows'!$D$8:$D$90`);
    `x` and `y` the cached numbers of those cells (None: an empty cell).
    Exactly one of `marker` and `line` usually set; both give a marked line.
    """

    title: str
    x_ref: str
    y_ref: str
    x: tuple[float | None, ...]
    y: tuple[float | None, ...]
    marker: str | None = "circle"  # circle, square, triangle, diamond, x, plus, dash; None: no marker
    marker_size: int = 5
    marker_filled: bool = True
    line: bool = False
    dash: str | None = None  # sysDash, dash, sysDot, ... of ECMA-376 20.1.10.48; None: solid
    width_pt: float = 1.25
    color: str = "2B5C6B"
    labels: tuple[str, ...] | None = None  # a text label per point, e.g. the row number


@dataclass(frozen=True, slots=True)
class Chart:
    """A scatter chart anchored at a cell of its sheet; size in pixels at 96 per inch.

    `x_categories` gives text labels for whole-number y positions only through series labels;
    scatter is the one kind of chart the sheets use.
    """

    title: str
    series: tuple[Series, ...]
    x_axis: Axis
    y_axis: Axis
    row: int
    column: int
    width: int = 480
    height: int = 300
    legend: bool = False
    alt_text: str = ""
