"""Charts: the right ones, their points, thinning, axes in whole steps, the line of one predictor with its bands."""

from __future__ import annotations

import math
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from bridge.regression.spec import ModelSpec, NumberTerm
from bridge.sheets import axes, charts
from tests.sheets.cases import book, data_table, five_rows, forty_levels, model, one_predictor, yard


def keys(told, name):
    return [picture.key for picture in charts.draw(told).pictures[name]]


def test_each_model_has_the_charts_that_concern_it():
    assert keys(yard(), "A") == [
        "observed",
        "fitted",
        "normal",
        "leverage",
        "order",
        "against length (m)",
        "against coats",
        "coefficients",
    ]
    assert "order" not in keys(yard(), "B")
    assert "line" in keys(one_predictor(), "bend")
    assert "line" not in keys(forty_levels(), "A")


def test_titles_of_axes_carry_units_and_shapes():
    gallery = charts.draw(yard())
    assert gallery.chart("A", "against length (m)").x_axis.title == "length (m)"
    assert gallery.chart("B", "fitted").x_axis.title == "fitted log hours"
    assert gallery.chart("B", "observed").y_axis.title == "observed hours"
    line = charts.draw(one_predictor()).chart("bend", "line")
    assert (line.x_axis.title, line.y_axis.title) == ("outdoor temperature (°C)", "energy (kWh)")


def test_the_normal_plot_is_the_ordered_residuals_against_normal_quantiles():
    told = yard()
    series = charts.draw(told).chart("A", "normal").series[0]
    internal = told.models[0].result.influence.internal
    n = len(internal)
    # Blom's positions, as scipy.stats knows the normal quantiles
    assert series.x == pytest.approx(stats.norm.ppf((np.arange(1, n + 1) - 0.375) / (n + 0.25)), rel=1e-12)
    assert list(series.y) == sorted(internal.tolist())


def test_the_line_has_ordered_bands_and_its_bend():
    ((_, result),) = one_predictor().fitted
    line = charts.draw(one_predictor()).chart("bend", "line")
    x, fitted = np.array(line.series[1].x), np.array(line.series[1].y)
    assert 15.0 in x
    assert fitted == pytest.approx(result.fit.coefficients @ [np.ones_like(x), x, np.maximum(x - 15, 0)], rel=1e-12)
    low, high, case_low, case_high = (np.array(series.y) for series in line.series[2:])
    assert (case_low < low).all()
    assert (low < fitted).all()
    assert (fitted < high).all()
    assert (high < case_high).all()


def test_coefficient_intervals_are_the_standardised_ones_with_names():
    ((_, result),) = forty_levels().fitted
    chart = charts.draw(forty_levels()).chart("A", "coefficients")
    bars, points, names = chart.series
    assert len(points.x) == charts.MOST_COEFFICIENTS
    assert "30 largest of 40" in chart.title
    assert names.labels[0] == "size"
    scale = result.fit.standardised[1] / result.fit.coefficients[1]
    assert bars.x[:3] == (pytest.approx(result.fit.low[1] * scale), pytest.approx(result.fit.high[1] * scale), None)


def test_the_oddest_rows_are_named_beside_their_points():
    chart = charts.draw(yard()).chart("A", "fitted")
    assert chart.series[0].labels[30] == "32"  # the row whose hours are 2.2 times too high
    assert sum(bool(label) for label in chart.series[0].labels) <= charts.MOST_NAMED


def test_above_two_thousand_rows_points_are_thinned_and_odd_rows_kept():
    random = np.random.default_rng(8)
    n = 5000
    x = random.normal(10, 3, n).round(3)
    y = (2 + 3 * x + random.normal(0, 1, n)).round(3)
    y[[17, 4321]] += 40
    told = book([model("A", ModelSpec("y", terms=(NumberTerm("x"),)), data_table("Long", {"y": y, "x": x}))])
    gallery = charts.draw(told)
    for picture in gallery.pictures["A"]:
        for series in picture.chart.series:
            assert len(series.x) == len(series.y) <= charts.MOST_POINTS
            assert series.x_ref.startswith("'fit diagnostics'!")
    labels = gallery.chart("A", "fitted").series[0].labels
    assert {"19", "4323"} <= set(labels)


def test_charts_read_without_colour():
    """Points are dark, lines are told apart by dashes and width, not by hue."""
    for told in (yard(), one_predictor(), five_rows()):
        for pictures in charts.draw(told).pictures.values():
            for picture in pictures:
                assert all(_darkness(series.color) > 0.5 for series in picture.chart.series)
                assert picture.chart.alt_text.startswith(picture.chart.title)
                looks = [(s.marker, s.line, s.dash) for s in picture.chart.series if s.title]
                assert len(set(looks)) == len(looks)


def _darkness(color: str) -> float:
    red, green, blue = (int(color[at : at + 2], 16) / 255 for at in (0, 2, 4))
    return 1 - (0.2126 * red + 0.7152 * green + 0.0722 * blue)  # luma of ITU-R BT.709


@given(st.lists(st.floats(-1e9, 1e9), min_size=1, max_size=20))
def test_axes_hold_their_points_between_whole_steps(values):
    axis = axes.axis("x", values)
    assert axis.minimum <= min(values) + 1e-6 * axis.step
    assert axis.maximum >= max(values) - 1e-6 * axis.step
    steps = (axis.maximum - axis.minimum) / axis.step
    assert steps == pytest.approx(round(steps), abs=1e-6)
    assert 1 <= round(steps) <= 8
    mantissa = axis.step / 10 ** math.floor(math.log10(axis.step) + 1e-9)
    assert min(abs(mantissa - nice) for nice in (1, 2, 2.5, 5, 10)) < 1e-6


@given(st.floats(1e-8, 1e8))
def test_steps_of_an_axis_are_shown_exactly(span):
    axis = axes.axis("x", (0.0, span))
    if "E" not in axis.number_format:
        places = len(axis.number_format.split(".")[1]) if "." in axis.number_format else 0
        assert round(axis.step, places) == pytest.approx(axis.step, rel=1e-9)


def test_long_titles_are_cut_where_they_would_run_out_of_the_chart():
    assert axes.shortened("length (m)") == "length (m)"
    assert axes.shortened("建" * 40).endswith("…")
    assert len(axes.shortened("x" * 100)) <= 44
    assert re.match(r"x+…$", axes.shortened("x" * 100))
