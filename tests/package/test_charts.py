"""Charts: complete, cached, escaped, and known again."""

from __future__ import annotations

import io
import math
import tempfile
from dataclasses import replace
from pathlib import Path

import openpyxl
import pytest
from lxml import etree
from openxml_audit import OpenXmlValidator

from bridge.package.charts import chart_part, fingerprint, fingerprint_in, fingerprint_of
from bridge.package.graft import graft
from bridge.package.package import Package
from bridge.page.cells import Cell
from bridge.page.charts import Axis, Chart, Series
from bridge.page.sheet import Sheet
from tests.package import samples, zips

C = "{http://schemas.openxmlformats.org/drawingml/2006/chart}"
A = "{http://schemas.openxmlformats.org/drawingml/2006/main}"
DOTS = Series(
    "rows", "'fit rows'!$B$5:$B$8", "'fit rows'!$C$5:$C$8", (1.0, 2.0, math.nan, 4.0), (0.1, None, 3.0, 1e-300)
)
CHART = Chart("Residuals", (DOTS,), Axis("fitted (h)"), Axis("residual"), 3, 5)


def part(chart: Chart, strict: bool = False) -> etree._Element:
    return etree.fromstring(chart_part(chart, strict))


def test_points_are_cached_and_gaps_left_out() -> None:
    root = part(CHART)
    for axis, points in (("xVal", {"0": 1.0, "1": 2.0, "3": 4.0}), ("yVal", {"0": 0.1, "2": 3.0, "3": 1e-300})):
        cache = root.find(f".//{C}{axis}/{C}numRef/{C}numCache")
        assert cache is not None
        assert cache.find(f"{C}ptCount").get("val") == "4"  # type: ignore[union-attr]
        found = {each.get("idx"): float(each.findtext(f"{C}v") or "nan") for each in cache.iter(f"{C}pt")}
        assert found == points


def test_what_the_schema_requires_and_other_writers_forget() -> None:
    root = part(CHART)
    assert root.find(f".//{C}scatterChart/{C}scatterStyle").get("val") == "lineMarker"  # type: ignore[union-attr]
    assert [each.get("val") for each in root.iter(f"{C}tickLblPos")] == ["low", "low"]
    assert root.find(f".//{C}plotVisOnly").get("val") == "0"  # type: ignore[union-attr]
    titles = ["".join(each.itertext()) for each in root.iter(f"{C}title")]
    assert titles == ["Residuals", "fitted (h)", "residual"]
    heading = root.find(f"{C}chart/{C}title//{A}rPr")
    assert heading is not None
    assert (heading.get("sz"), heading.get("b")) == ("1100", "1")
    assert heading.find(f".//{A}srgbClr").get("val") == "2B5C6B"  # type: ignore[union-attr]


@pytest.mark.parametrize("marker", ["circle", "square", "triangle", "diamond", "x", "plus", "dash", None])
@pytest.mark.parametrize("filled", [True, False])
def test_the_public_validator_finds_nothing_in_any_kind_of_series(marker: str | None, filled: bool) -> None:
    series = replace(
        DOTS, marker=marker, marker_filled=filled, line=marker is None, dash="sysDash", labels=("a", "", "b", "")
    )
    axis = Axis("x < y", '0.0 "h"', minimum=-1.0, maximum=5.0, gridlines=False, hidden_labels=True)
    chart = replace(CHART, series=(series, DOTS), x_axis=axis, legend=True, title="", alt_text='"<&>"')
    data = graft(Package.open(samples.plain_workbook()), [Sheet("fit rows", {}, charts=(chart, CHART))], [], {})
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, "x.xlsx")
        path.write_bytes(data)
        assert OpenXmlValidator().validate(str(path)).errors == []


def test_hollow_and_line_only_markers_stay_visible_where_edges_are_not_drawn() -> None:
    def fill(series: Series) -> str | None:
        colour = part(replace(CHART, series=(series,))).find(f".//{C}marker/{C}spPr/{A}solidFill/{A}srgbClr")
        return None if colour is None else colour.get("val")

    assert fill(DOTS) == "2B5C6B"
    assert fill(replace(DOTS, marker_filled=False)) not in (None, "2B5C6B", "FFFFFF")
    assert fill(replace(DOTS, marker="x")) is None


def test_texts_are_escaped_everywhere() -> None:
    nasty = "a\"b'<c>&\x07 ]]>"
    chart = Chart(nasty, (replace(DOTS, title=nasty, labels=(nasty, "", "", ""), x_ref="'a<b>&''c'!$A$1"),),
                  Axis(nasty, '0"<&>"'), Axis(nasty), 0, 0, alt_text=nasty)  # fmt: skip
    data = graft(
        Package.open(samples.plain_workbook()), [Sheet("fit rows", {(0, 0): Cell("x")}, charts=(chart,))], [], {}
    )
    parts = zips.members(data)
    root = etree.fromstring(parts["xl/charts/chart1.xml"])
    assert root.findtext(f".//{C}xVal//{C}f") == "'a<b>&''c'!$A$1"
    shown = nasty.replace("\x07", " ")
    assert [each.text for each in root.iter(f"{A}t")] == [shown] * 4
    described = etree.fromstring(parts["xl/drawings/drawing1.xml"]).find(".//{*}cNvPr")
    assert described is not None
    assert (described.get("descr"), described.get("name")) == (shown, "fit rows chart 1")


def test_openpyxl_reads_our_charts() -> None:
    book = openpyxl.load_workbook(io.BytesIO(samples.grafted(samples.plain_workbook())))
    first, second = book["fit rows"]._charts
    assert type(first).__name__ == "ScatterChart"
    assert first.series[0].yVal.numRef.f == "'fit rows'!$C$5:$C$64"
    assert (first.anchor._from.row, first.anchor._from.col) == (3, 5)
    assert second.legend is not None


def test_strict_charts_name_no_transitional_namespace() -> None:
    text = chart_part(CHART, True).decode()
    assert "purl.oclc.org/ooxml/drawingml/chart" in text
    assert "schemas.openxmlformats.org" not in text


# --- fingerprints --------------------------------------------------------------------------------------------------


def test_a_chart_is_known_again_though_a_program_rewrote_it_or_the_tab_was_renamed() -> None:
    ours = fingerprint_of(CHART)
    assert fingerprint_in(part(CHART)) == ours
    renamed = replace(DOTS, x_ref="Zeilen!$B$5:$B$8", y_ref="Zeilen!C5:C8", x=(), y=(), color="FF0000")
    assert fingerprint_in(part(replace(CHART, title="other", series=(renamed,)))) == ours


def test_charts_of_other_cells_are_other_charts() -> None:
    ours = fingerprint_of(CHART)
    assert fingerprint_of(replace(CHART, series=(replace(DOTS, y_ref="'fit rows'!$D$5:$D$8"),))) != ours
    assert fingerprint_of(replace(CHART, series=(DOTS, DOTS))) != ours
    assert fingerprint([]) != ours
