"""Drawings: where charts stand on a sheet (ECMA-376 part 1, 20.5)."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence

from lxml import etree

from bridge.package import xml
from bridge.page.charts import Chart

_EMU_PER_PIXEL = 9525
_ANCHORS = ("twoCellAnchor", "oneCellAnchor", "absoluteAnchor")


def chart_name(role: str, number: int) -> str:
    """The name a chart of ours has on its sheet; programs keep it."""
    return f"{role} chart {number + 1}"


def empty_drawing(strict: bool) -> etree._Element:
    """The root of a drawing without anything on it."""
    text = f'<xdr:wsDr xmlns:xdr="{xml.DRAWING}" xmlns:a="{xml.DRAWING_MAIN}"/>'
    return etree.fromstring(xml.in_kind(text, strict))


def anchors(root: etree._Element) -> Iterator[etree._Element]:
    """What stands on a drawing, each with its place; things with alternatives included as they are."""
    for element in root:
        if isinstance(element.tag, str) and (xml.local(element) in (*_ANCHORS, "AlternateContent")):
            yield element


def object_name(anchor: etree._Element) -> str:
    """The name of the first object in an anchor; empty if it has none."""
    return next((each.get("name", "") for each in anchor.iter() if xml.local(each) == "cNvPr"), "")


def chart_relation(anchor: etree._Element) -> str:
    """The relationship id of the chart in an anchor; empty if it holds no plain chart."""
    for each in anchor.iter():
        if xml.local(each) == "chart" and xml.transitional(xml.namespace(each)) == xml.CHART:
            return next(xml.relation_attributes(each), "")
    return ""


def describe(anchor: etree._Element) -> str:
    """What an anchor holds, in a word for people."""
    names = {xml.local(each) for each in anchor.iter()}
    if chart_relation(anchor) or "chart" in names:
        return "chart"
    if "pic" in names:
        return "picture"
    return "drawn object"


def add_charts(root: etree._Element, role: str, charts: Sequence[Chart], ids: Sequence[str], strict: bool) -> None:
    """Put our charts on a drawing, after what already stands on it; `ids` are their relationship ids."""
    first = 1 + max((int(number) for number in _object_ids(root)), default=1)
    for number, (chart, id_) in enumerate(zip(charts, ids, strict=True)):
        text = _anchor(chart, chart_name(role, number), first + number, id_)
        holder = etree.fromstring(xml.in_kind(f"<x {_NAMESPACES}>{text}</x>", strict))
        etree.cleanup_namespaces(holder)
        root.append(holder[0])


def _object_ids(root: etree._Element) -> Iterator[str]:
    for each in root.iter():
        if xml.local(each) == "cNvPr" and re.fullmatch(r"\d{1,9}", each.get("id", "")):
            yield each.get("id", "")


_NAMESPACES = (
    f'xmlns:xdr="{xml.DRAWING}" xmlns:a="{xml.DRAWING_MAIN}" xmlns:r="{xml.OFFICE_RELS}" xmlns:c="{xml.CHART}"'
)


def _anchor(chart: Chart, name: str, number: int, id_: str) -> str:
    described = f' descr="{xml.plain_attribute(chart.alt_text)}"' if chart.alt_text else ""
    width, height = chart.width * _EMU_PER_PIXEL, chart.height * _EMU_PER_PIXEL
    return (
        f"<xdr:oneCellAnchor><xdr:from><xdr:col>{chart.column}</xdr:col><xdr:colOff>0</xdr:colOff>"
        f"<xdr:row>{chart.row}</xdr:row><xdr:rowOff>0</xdr:rowOff></xdr:from>"
        f'<xdr:ext cx="{width}" cy="{height}"/><xdr:graphicFrame macro=""><xdr:nvGraphicFramePr>'
        f'<xdr:cNvPr id="{number}" name="{xml.plain_attribute(name)}"{described}/><xdr:cNvGraphicFramePr/>'
        '</xdr:nvGraphicFramePr><xdr:xfrm><a:off x="0" y="0"/><a:ext cx="0" cy="0"/></xdr:xfrm>'
        f'<a:graphic><a:graphicData uri="{xml.CHART}"><c:chart r:id="{id_}"/></a:graphicData></a:graphic>'
        "</xdr:graphicFrame><xdr:clientData/></xdr:oneCellAnchor>"
    )
