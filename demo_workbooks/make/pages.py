"""What the demos' own pages share: formulas that read the fit, charts in the palette, a small picture."""

from __future__ import annotations

import io
from collections.abc import Sequence

from xlsxwriter.chart import Chart
from xlsxwriter.workbook import Workbook
from xlsxwriter.worksheet import Worksheet

from bridge.sheets import style
from demo_workbooks.make.workshop import look

INVENTED = "Everything in this workbook is invented: no real job, place, meter or person stands behind it."
NOT_YET = "not fitted yet"
DEEP, WARM, PALE = "#" + style.DEEP, "#" + style.TAB_FILL_IN, "#" + style.TAB_DETAIL


def from_the_fit(book: Workbook, page: Worksheet, row: int, lines: Sequence[tuple[str, str, str]]) -> None:
    """A table of the user's own formulas that read the fit's names; before the first fit they say so."""
    header = look(book, style.HEADER)
    page.write_row(row, 0, ["from the fit", ""], header)
    for label, name, number_format in lines:
        row += 1
        page.write(row, 0, label, look(book, style.ROW))
        figure = look(book, style.NUMBER, num_format=number_format)
        page.write_formula(row, 1, f'=IFERROR({name},"{NOT_YET}")', figure, NOT_YET)
    remark = f'Still "{NOT_YET}" after a fit? Recalculate all: Ctrl+Alt+F9, in LibreOffice Ctrl+Shift+F9.'
    page.write(row + 1, 0, remark, look(book, style.SUBTITLE, font_size=8))


def set_chart_style(chart: Chart, title: str, x: str, y: str) -> None:
    """Title, axis titles and quiet lines."""
    font = {"name": style.BODY.font, "size": 9, "color": "#" + style.INK}
    quiet = {"color": "#" + style.RULE, "width": 0.75}
    chart.set_title({"name": title, "overlay": False, "name_font": font | {"size": 11, "bold": True, "color": DEEP}})
    for axis, name in ((chart.set_x_axis, x), (chart.set_y_axis, y)):
        axis(
            {
                "name": name,
                "name_font": font | {"bold": False},
                "num_font": font,
                "line": quiet,
                "major_gridlines": {"visible": True, "line": {"color": "#" + style.TINT}},
                "label_position": "low",
            }
        )
    chart.set_chartarea({"border": {"none": True}})


def dots(color: str, kind: str = "circle") -> dict[str, object]:
    """A scatter's markers."""
    return {"type": kind, "size": 5, "fill": {"color": color}, "border": {"color": "#FFFFFF", "width": 0.5}}


def picture(png: bytes, words: str) -> dict[str, object]:
    """XlsxWriter's options for a drawing, small, with a description for those who cannot see it."""
    small = {"x_scale": 0.68, "y_scale": 0.68, "x_offset": 4, "y_offset": 3}
    return {"image_data": io.BytesIO(png), "description": words, "object_position": 2} | small
