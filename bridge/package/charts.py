"""A scatter `Chart` as the text of a chart part (ECMA-376 part 1, 21.2), with its points cached.

Cached points let a viewer that does not redraw show the chart. Hidden rows and columns are plotted, because the
helper cells that charts read are often hidden.
"""

from __future__ import annotations

import math
import re
import zlib
from collections.abc import Iterable, Sequence

from lxml import etree

from bridge.package import xml
from bridge.package.names import without_sheets
from bridge.page.charts import Axis, Chart, Series

_TITLE_INK, _LABEL_INK, _GRID, _AXIS = "2B5C6B", "6F7B82", "DDE4E7", "8A979D"
_X_AXIS, _Y_AXIS = 71510001, 71510002
_EMU_PER_POINT = 12_700
_LINE_ONLY = ("x", "plus", "dash")  # markers without an inside


def chart_part(chart: Chart, strict: bool) -> bytes:
    """The chart's part."""
    series = "".join(_series(each, number) for number, each in enumerate(chart.series))
    title = _title(chart.title, 1100, True, _TITLE_INK) if chart.title else ""
    legend = (
        f'<c:legend><c:legendPos val="b"/><c:overlay val="0"/>{_text_properties(900, _LABEL_INK)}</c:legend>'
        if chart.legend
        else ""
    )
    text = (
        f'{xml.DECLARATION}<c:chartSpace xmlns:c="{xml.CHART}" xmlns:a="{xml.DRAWING_MAIN}" '
        f'xmlns:r="{xml.OFFICE_RELS}"><c:roundedCorners val="0"/><c:chart>{title}'
        f'<c:autoTitleDeleted val="{int(not title)}"/><c:plotArea><c:layout/>'
        f'<c:scatterChart><c:scatterStyle val="lineMarker"/><c:varyColors val="0"/>{series}'
        f'<c:axId val="{_X_AXIS}"/><c:axId val="{_Y_AXIS}"/></c:scatterChart>'
        f"{_axis(chart.x_axis, _X_AXIS, _Y_AXIS, 'b')}{_axis(chart.y_axis, _Y_AXIS, _X_AXIS, 'l')}"
        f"<c:spPr><a:noFill/><a:ln><a:noFill/></a:ln></c:spPr></c:plotArea>{legend}"
        '<c:plotVisOnly val="0"/><c:dispBlanksAs val="gap"/></c:chart>'
        '<c:spPr><a:solidFill><a:srgbClr val="FFFFFF"/></a:solidFill><a:ln><a:noFill/></a:ln></c:spPr>'
        f"{_text_properties(900, _LABEL_INK)}</c:chartSpace>"
    )
    return xml.in_kind(text, strict).encode()


def _ink(colour: str) -> str:
    return f'<a:solidFill><a:srgbClr val="{colour}"/></a:solidFill>'


def _run(tag: str, size: int, bold: bool, colour: str) -> str:
    face = '<a:latin typeface="Arial"/><a:cs typeface="Arial"/>'
    return f'<a:{tag} sz="{size}" b="{int(bold)}">{_ink(colour)}{face}</a:{tag}>'


def _text_properties(size: int, colour: str) -> str:
    paragraph = f"<a:p><a:pPr>{_run('defRPr', size, False, colour)}</a:pPr><a:endParaRPr/></a:p>"
    return f"<c:txPr><a:bodyPr/><a:lstStyle/>{paragraph}</c:txPr>"


def _rich(text: str, size: int, bold: bool, colour: str, turn: str = "") -> str:
    properties = f"<a:pPr>{_run('defRPr', size, bold, colour)}</a:pPr>"
    runs = f"<a:r>{_run('rPr', size, bold, colour)}<a:t>{xml.plain(text)}</a:t></a:r>"
    return f"<c:tx><c:rich><a:bodyPr{turn}/><a:lstStyle/><a:p>{properties}{runs}</a:p></c:rich></c:tx>"


def _title(text: str, size: int, bold: bool, colour: str, turn: str = "") -> str:
    return f'<c:title>{_rich(text, size, bold, colour, turn)}<c:overlay val="0"/></c:title>'


# --- series --------------------------------------------------------------------------------------------------------


def _series(series: Series, number: int) -> str:
    return (
        f'<c:ser><c:idx val="{number}"/><c:order val="{number}"/>'
        f"<c:tx><c:v>{xml.xstring(series.title)}</c:v></c:tx>"
        f"<c:spPr>{_line(series)}</c:spPr>{_marker(series)}{_labels(series)}"
        f"<c:xVal>{_numbers(series.x_ref, series.x)}</c:xVal><c:yVal>{_numbers(series.y_ref, series.y)}</c:yVal>"
        '<c:smooth val="0"/></c:ser>'
    )


def _line(series: Series) -> str:
    width = round(series.width_pt * _EMU_PER_POINT)
    if not series.line:
        return f'<a:ln w="{width}"><a:noFill/></a:ln>'
    dash = f'<a:prstDash val="{series.dash}"/>' if series.dash else ""
    return f'<a:ln w="{width}" cap="rnd">{_ink(series.color)}{dash}<a:round/></a:ln>'


def _marker(series: Series) -> str:
    if series.marker is None:
        return '<c:marker><c:symbol val="none"/></c:marker>'
    # A hollow marker gets a tint, not white: some programs draw no edges, and white would vanish.
    fill = _ink(series.color if series.marker_filled else _tint(series.color))
    if series.marker in _LINE_ONLY:
        fill = "<a:noFill/>"
    edge = f'<a:ln w="9525">{_ink(series.color)}</a:ln>'
    size = min(72, max(2, series.marker_size))
    return f'<c:marker><c:symbol val="{series.marker}"/><c:size val="{size}"/><c:spPr>{fill}{edge}</c:spPr></c:marker>'


def _tint(colour: str) -> str:
    """A colour mixed with white, four parts in ten of it left."""
    return "".join(f"{round(255 - (255 - int(colour[at : at + 2], 16)) * 0.4):02X}" for at in (0, 2, 4))


_SHOWN_NOTHING = (
    '<c:showLegendKey val="0"/><c:showVal val="0"/><c:showCatName val="0"/><c:showSerName val="0"/>'
    '<c:showPercent val="0"/><c:showBubbleSize val="0"/>'
)


def _labels(series: Series) -> str:
    """A text of its own beside each point that has one."""
    if series.labels is None:
        return ""
    shown = _SHOWN_NOTHING.replace('showVal val="0"', 'showVal val="1"')
    labels = "".join(
        f'<c:dLbl><c:idx val="{number}"/>{_rich(text, 800, False, _LABEL_INK)}<c:dLblPos val="r"/>{shown}</c:dLbl>'
        for number, text in enumerate(series.labels)
        if text
    )
    return f"<c:dLbls>{labels}{_SHOWN_NOTHING}</c:dLbls>"


def _numbers(reference: str, values: Sequence[float | None]) -> str:
    points = "".join(
        f'<c:pt idx="{number}"><c:v>{float(value)!r}</c:v></c:pt>'
        for number, value in enumerate(values)
        if value is not None and math.isfinite(value)
    )
    cache = f'<c:formatCode>General</c:formatCode><c:ptCount val="{len(values)}"/>{points}'
    return f"<c:numRef><c:f>{xml.formula(reference)}</c:f><c:numCache>{cache}</c:numCache></c:numRef>"


# --- axes ----------------------------------------------------------------------------------------------------------


def _axis(axis: Axis, its_id: int, other: int, position: str) -> str:
    grid = f'<c:majorGridlines><c:spPr><a:ln w="6350">{_ink(_GRID)}</a:ln></c:spPr></c:majorGridlines>'
    turn = ' rot="-5400000" vert="horz"' if position == "l" else ""
    title = _title(axis.title, 900, False, _LABEL_INK, turn) if axis.title else ""
    # Labels stay at the edge even where the other axis crosses in the middle of the points.
    place = "none" if axis.hidden_labels else "low"
    return (
        f'<c:valAx><c:axId val="{its_id}"/>{_scaling(axis)}<c:delete val="0"/><c:axPos val="{position}"/>'
        f"{grid if axis.gridlines else ''}{title}"
        f'<c:numFmt formatCode="{xml.attribute(axis.number_format)}" sourceLinked="0"/>'
        f'<c:majorTickMark val="none"/><c:minorTickMark val="none"/><c:tickLblPos val="{place}"/>'
        f'<c:spPr><a:ln w="9525">{_ink(_AXIS)}</a:ln></c:spPr>{_text_properties(900, _LABEL_INK)}'
        f'<c:crossAx val="{other}"/><c:crosses val="autoZero"/><c:crossBetween val="midCat"/>{_step(axis)}</c:valAx>'
    )


def _step(axis: Axis) -> str:
    return "" if axis.step is None else f'<c:majorUnit val="{float(axis.step)!r}"/>'


def _scaling(axis: Axis) -> str:
    bounds = "".join(
        f'<c:{tag} val="{float(value)!r}"/>'
        for tag, value in (("max", axis.maximum), ("min", axis.minimum))
        if value is not None and math.isfinite(value)
    )
    return f'<c:scaling><c:orientation val="minMax"/>{bounds}</c:scaling>'


# --- knowing a chart again -----------------------------------------------------------------------------------------


def fingerprint(references: Iterable[str]) -> str:
    """A short text for the cells a chart plots, whatever its sheet is called and however a program rewrote it."""
    cells = sorted(without_sheets(re.sub(r"\s", "", reference)) for reference in references)
    return f"{zlib.crc32(';'.join(cells).encode()):08x}"


def fingerprint_of(chart: Chart) -> str:
    """The fingerprint of a chart of ours."""
    return fingerprint(reference for series in chart.series for reference in (series.x_ref, series.y_ref))


def fingerprint_in(root: etree._Element) -> str:
    """The fingerprint of a chart part, ours or not: the references of its values."""
    found = [
        "".join(str(text) for text in each.itertext())
        for holder in root.iter()
        if xml.local(holder) in ("xVal", "yVal", "cat", "val", "bubbleSize")
        for each in holder.iter()
        if xml.local(each) == "f"
    ]
    return fingerprint(found)
