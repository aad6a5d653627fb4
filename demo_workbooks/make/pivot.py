"""A pivot table with its cache, which XlsxWriter does not make. ECMA-376 part 1, 18.10."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from xml.sax.saxutils import quoteattr

from demo_workbooks.make.opc import CONTENT, HEAD, RELS, Members, declare, relate, relationships, rels_of
from demo_workbooks.make.workshop import Cell

_MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"


@dataclass(frozen=True)
class Pivot:
    """A pivot table over an Excel table: one row field of texts, two data fields side by side.

    `fields` are the table's columns in order, each with its cells; `groups` the row field's texts in order,
    `total` what its last row is called.
    `data` holds (field, caption, subtotal as the standard spells it, built-in number format id).
    `top` is the one-based row of its header on the sheet, in column A.
    """

    name: str
    table: str
    fields: Sequence[tuple[str, Sequence[Cell]]]
    row_field: str
    groups: Sequence[str]
    total: str
    data: Sequence[tuple[str, str, str, int]]
    top: int


def add_pivot(members: Members, sheet_part: str, pivot: Pivot) -> None:
    """Put the pivot table on the sheet and its cache into the workbook."""
    cache, records = "xl/pivotCache/pivotCacheDefinition1.xml", "xl/pivotCache/pivotCacheRecords1.xml"
    table = "xl/pivotTables/pivotTable1.xml"
    members[cache] = _cache_definition(pivot).encode()
    members[rels_of(cache)] = relationships(("rId1", "pivotCacheRecords", "pivotCacheRecords1.xml")).encode()
    members[records] = _cache_records(pivot).encode()
    members[table] = _pivot_table(pivot).encode()
    members[rels_of(table)] = relationships(
        ("rId1", "pivotCacheDefinition", "../pivotCache/pivotCacheDefinition1.xml")
    ).encode()
    relate(members, sheet_part, "pivotTable", "../pivotTables/pivotTable1.xml")
    key = relate(members, "xl/workbook.xml", "pivotCacheDefinition", "pivotCache/pivotCacheDefinition1.xml")
    caches = f'<pivotCaches><pivotCache cacheId="1" r:id="{key}"/></pivotCaches></workbook>'
    members["xl/workbook.xml"] = members["xl/workbook.xml"].replace(b"</workbook>", caches.encode())
    for part, kind in ((cache, "pivotCacheDefinition"), (records, "pivotCacheRecords"), (table, "pivotTable")):
        declare(members, f'<Override PartName="/{part}" ContentType="{CONTENT}{kind}+xml"/>')


def _cache_definition(pivot: Pivot) -> str:
    fields = "".join(_cache_field(pivot, name, cells) for name, cells in pivot.fields)
    return (
        f'{HEAD}<pivotCacheDefinition xmlns="{_MAIN}" xmlns:r="{RELS}" r:id="rId1" refreshedBy="savefit" '
        f'refreshedDate="46027" createdVersion="6" refreshedVersion="6" minRefreshableVersion="3" '
        f'recordCount="{len(pivot.fields[0][1])}"><cacheSource type="worksheet">'
        f'<worksheetSource name="{pivot.table}"/></cacheSource>'
        f'<cacheFields count="{len(pivot.fields)}">{fields}</cacheFields></pivotCacheDefinition>'
    )


def _cache_field(pivot: Pivot, name: str, cells: Sequence[Cell]) -> str:
    there = [cell for cell in cells if cell is not None]
    if name == pivot.row_field:
        items = "".join(f"<s v={quoteattr(group)}/>" for group in pivot.groups)
        shared = f'<sharedItems count="{len(pivot.groups)}">{items}</sharedItems>'
    elif isinstance(there[0], date):
        days = [cell for cell in there if isinstance(cell, date)]
        shared = (
            '<sharedItems containsSemiMixedTypes="0" containsNonDate="0" containsDate="1" containsString="0" '
            f'minDate="{min(days)}T00:00:00" maxDate="{max(days)}T00:00:00"/>'
        )
    else:
        numbers = [float(cell) for cell in there if isinstance(cell, int | float)]
        whole = ' containsInteger="1"' if all(number.is_integer() for number in numbers) else ""
        blank = ' containsString="0" containsBlank="1"' if None in cells else ""
        shared = (
            f'<sharedItems{blank or _NO_TEXT} containsNumber="1"{whole} '
            f'minValue="{min(numbers):.10g}" maxValue="{max(numbers):.10g}"/>'
        )
    form = 14 if isinstance(there[0], date) else 0
    return f'<cacheField name={quoteattr(name)} numFmtId="{form}">{shared}</cacheField>'


_NO_TEXT = ' containsSemiMixedTypes="0" containsString="0"'


def _cache_records(pivot: Pivot) -> str:
    rows = zip(*(cells for _, cells in pivot.fields), strict=True)
    names = [name for name, _ in pivot.fields]
    made = "".join(
        "<r>" + "".join(_record_item(pivot, name, cell) for name, cell in zip(names, row, strict=True)) + "</r>"
        for row in rows
    )
    count = len(pivot.fields[0][1])
    return f'{HEAD}<pivotCacheRecords xmlns="{_MAIN}" xmlns:r="{RELS}" count="{count}">{made}</pivotCacheRecords>'


def _record_item(pivot: Pivot, name: str, cell: Cell) -> str:
    if cell is None:
        return "<m/>"
    if name == pivot.row_field:
        return f'<x v="{pivot.groups.index(str(cell))}"/>'
    return f'<d v="{cell}T00:00:00"/>' if isinstance(cell, date) else f'<n v="{cell:.10g}"/>'


def _pivot_table(pivot: Pivot) -> str:
    names = [name for name, _ in pivot.fields]
    last = f"{chr(65 + len(pivot.data))}{pivot.top + len(pivot.groups) + 1}"
    rows = "".join(f'<i><x v="{at}"/></i>' if at else "<i><x/></i>" for at in range(len(pivot.groups)))
    columns = "".join(f'<i i="{at}"><x v="{at}"/></i>' if at else "<i><x/></i>" for at in range(len(pivot.data)))
    data = "".join(
        f'<dataField name={quoteattr(caption)} fld="{names.index(field)}" subtotal="{how}" '
        f'baseField="0" baseItem="0" numFmtId="{form}"/>'
        for field, caption, how, form in pivot.data
    )
    fields = "".join(_pivot_field(pivot, name, cells) for name, cells in pivot.fields)
    return (
        f'{HEAD}<pivotTableDefinition xmlns="{_MAIN}" name="{pivot.name}" cacheId="1" applyNumberFormats="0" '
        'applyBorderFormats="0" applyFontFormats="0" applyPatternFormats="0" applyAlignmentFormats="0" '
        'applyWidthHeightFormats="1" dataCaption="Values" updatedVersion="6" minRefreshableVersion="3" '
        'useAutoFormatting="1" itemPrintTitles="1" createdVersion="6" indent="0" outline="1" outlineData="1" '
        f'multipleFieldFilters="0" grandTotalCaption={quoteattr(pivot.total)} '
        f"rowHeaderCaption={quoteattr(pivot.row_field)}>"
        f'<location ref="A{pivot.top}:{last}" firstHeaderRow="0" firstDataRow="1" firstDataCol="1"/>'
        f'<pivotFields count="{len(names)}">{fields}</pivotFields>'
        f'<rowFields count="1"><field x="{names.index(pivot.row_field)}"/></rowFields>'
        f'<rowItems count="{len(pivot.groups) + 1}">{rows}<i t="grand"><x/></i></rowItems>'
        f'<colFields count="1"><field x="-2"/></colFields><colItems count="{len(pivot.data)}">{columns}</colItems>'
        f'<dataFields count="{len(pivot.data)}">{data}</dataFields>'
        '<pivotTableStyleInfo name="PivotStyleLight16" showRowHeaders="1" showColHeaders="1" showRowStripes="0" '
        'showColStripes="0" showLastColumn="1"/></pivotTableDefinition>'
    )


def _pivot_field(pivot: Pivot, name: str, cells: Sequence[Cell]) -> str:
    if name == pivot.row_field:
        items = "".join(f'<item x="{at}"/>' for at in range(len(pivot.groups)))
        return (
            f'<pivotField axis="axisRow" showAll="0"><items count="{len(pivot.groups) + 1}">{items}'
            '<item t="default"/></items></pivotField>'
        )
    form = ' numFmtId="14"' if isinstance(cells[0], date) else ""
    role = ' dataField="1"' if name in [field for field, *_ in pivot.data] else ""
    return f'<pivotField{role}{form} showAll="0"/>'
