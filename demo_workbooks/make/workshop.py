"""What the makers of the demo workbooks and of the templates share: looks, tables, the package.

The same input gives the same bytes.
"""

from __future__ import annotations

import io
import zipfile
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from pathlib import Path

import xlsxwriter
from xlsxwriter.format import Format as Look
from xlsxwriter.workbook import Workbook
from xlsxwriter.worksheet import Worksheet

from bridge.page.cells import Format
from bridge.sheets import measure, style

Cell = float | int | str | date | None
MADE_ON = datetime(2026, 1, 5, 9, 0, 0)
_ZIP_DATE = (1980, 1, 1, 0, 0, 0)
_TEXT_WIDTH = 92


@dataclass(frozen=True)
class Column:
    """One data column: its header, what a newcomer should know of it, its cells and how they show.

    With `formula` (a template in which `{row}` is the sheet row) the cells are formulas with `cells` as stored values.
    """

    header: str
    cells: Sequence[Cell]
    width: float = 12
    number_format: str = "General"
    note: str = ""
    formula: str = ""


def look(book: Workbook, page_format: Format, **more: object) -> Look:
    """One of the palette's formats (`bridge.sheets.style`) for XlsxWriter, with additions in its own words."""
    made: dict[str, object] = {
        "font_name": page_format.font,
        "font_size": page_format.size,
        "bold": page_format.bold,
        "italic": page_format.italic,
        "num_format": page_format.number_format,
        "text_wrap": page_format.wrap,
        "indent": page_format.indent,
        "locked": page_format.locked,
        "valign": {"center": "vcenter"}.get(page_format.valign or "", page_format.valign or "bottom"),
    }
    if page_format.color:
        made["font_color"] = "#" + page_format.color
    if page_format.fill:
        made["bg_color"] = "#" + page_format.fill
    if page_format.align:
        made["align"] = page_format.align
    if page_format.border_bottom:
        made |= {"bottom": 1, "bottom_color": "#" + page_format.border_color}
    return book.add_format(made | more)


def make_book(properties: Mapping[str, str], fill: Callable[[Workbook], None]) -> dict[str, bytes]:
    """A workbook's members by name, in order; `fill` writes its sheets."""
    made = io.BytesIO()
    with xlsxwriter.Workbook(made, {"in_memory": True}) as book:
        book.set_properties(dict(properties) | {"created": MADE_ON})
        book.set_size(19_200, 12_000)
        book.formats[0].set_font_name(style.BODY.font)
        book.formats[0].set_font_size(style.BODY.size)
        fill(book)
    with zipfile.ZipFile(made) as package:
        return {name: package.read(name) for name in package.namelist()}


def save(members: Mapping[str, bytes], path: Path) -> None:
    """Write a package with fixed times, so that making it again gives the same bytes."""
    made = io.BytesIO()
    with zipfile.ZipFile(made, "w", zipfile.ZIP_DEFLATED, compresslevel=9) as package:
        for name, content in members.items():
            entry = zipfile.ZipInfo(name, _ZIP_DATE)
            entry.compress_type = zipfile.ZIP_DEFLATED
            entry.external_attr = 0o600 << 16
            package.writestr(entry, content)
    path.write_bytes(made.getvalue())


def about_sheet(book: Workbook, title: str, paragraphs: Sequence[str], name: str = "About") -> Worksheet:
    """The first sheet: what this is, that its data are invented, and how to begin; one paragraph a row.

    A paragraph that ends with a colon becomes a small heading.
    """
    page = plain_page(book, name, style.TAB_DETAIL, landscape=False)
    page.set_column(0, 0, _TEXT_WIDTH, look(book, style.BODY))
    page.set_row(0, 30)
    page.write(0, 0, title, look(book, style.TITLE))
    row = 2
    for paragraph in paragraphs:
        heading = paragraph.endswith(":")
        page.set_row(row, 26 if heading else measure.height(paragraph, _TEXT_WIDTH) + 4)
        page.write(
            row, 0, paragraph.removesuffix(":") if heading else paragraph, look(book, _paragraph(heading, paragraph))
        )
        row += 1
    page.print_area(0, 0, row, 0)
    return page


def _paragraph(heading: bool, text: str) -> Format:
    if heading:
        return style.HEADING
    return style.SEAL if "invented" in text.casefold() and len(text) < 120 else style.PARAGRAPH


def data_sheet(book: Workbook, name: str, columns: Sequence[Column], first_row: int = 0) -> Worksheet:
    """A sheet with one table: styled header in `first_row`, frozen, filtered, printable, header notes as comments."""
    page = plain_page(book, name, style.DEEP, landscape=sum(column.width for column in columns) > 95)
    page.hide_gridlines(1)
    page.set_row(first_row, 30)
    for at, column in enumerate(columns):
        right = not any(isinstance(cell, str) for cell in column.cells)
        sides = {"align": "right"} if right else {"align": "left", "indent": 1 if at else 0}
        header = look(book, style.HEADER, text_wrap=True, **sides)
        page.set_column(at, at, column.width)
        page.write(first_row, at, column.header, header)
        if column.note:
            page.write_comment(first_row, at, column.note, {"x_scale": 1.6, "y_scale": 0.8, "author": "savefit"})
        body = look(book, style.BODY, num_format=column.number_format, **sides)
        _write_cells(page, first_row + 1, at, column, body)
    page.freeze_panes(first_row + 1, 1)
    page.repeat_rows(first_row)
    return page


def _write_cells(page: Worksheet, row: int, at: int, column: Column, body: Look) -> None:
    for offset, cell in enumerate(column.cells):
        here = row + offset
        if column.formula:
            page.write_formula(here, at, column.formula.format(row=here + 1), body, cell)
        elif cell is None:
            page.write_blank(here, at, None, body)
        elif isinstance(cell, date):
            page.write_datetime(here, at, datetime(cell.year, cell.month, cell.day), body)
        else:
            page.write(here, at, cell, body)


def plain_page(book: Workbook, name: str, tab: str, landscape: bool = True) -> Worksheet:
    """An empty sheet, ready to print on A4, a tab colour as six hex digits."""
    page = book.add_worksheet(name)
    page.hide_gridlines(2)
    page.set_tab_color("#" + tab)
    page.set_paper(9)
    page.set_margins(left=0.6, right=0.6, top=0.7, bottom=0.7)
    page.set_footer("&L&8&A&R&8page &P of &N")
    page.fit_to_pages(1, 0)
    if landscape:
        page.set_landscape()
    else:
        page.set_portrait()
    return page


def summary_page(book: Workbook, name: str, title: str, subtitle: str) -> Worksheet:
    """A page of the user's own, with a title and one quiet line under it."""
    page = plain_page(book, name, style.DEEP)
    page.set_row(0, 30)
    page.write(0, 0, title, look(book, style.TITLE))
    page.write(1, 0, subtitle, look(book, style.SUBTITLE))
    return page
