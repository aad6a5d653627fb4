"""The demo workbook: A cold store's daily electricity."""

from __future__ import annotations

from collections.abc import Sequence
from statistics import mean

from xlsxwriter.chart import Chart
from xlsxwriter.workbook import Workbook

from bridge.sheets import style
from demo_workbooks.make import drawing, truth
from demo_workbooks.make.grid import Ask, request_sheet
from demo_workbooks.make.pages import DEEP, INVENTED, WARM, from_the_fit, picture, set_chart_style
from demo_workbooks.make.pivot import Pivot, add_pivot
from demo_workbooks.make.workshop import Column, about_sheet, data_sheet, look, make_book, summary_page

_COLD_STORE_WORDS = (
    INVENTED,
    "What is asked:",
    "A town's cold store pays for electricity. How much of it follows the weather and how much the goods moved? From "
    "which outdoor temperature on does the cooling work hard?",
    "Where to look:",
    "Daily holds 198 days as a table with a column of formulas (two days without throughput). By month is a pivot "
    "table over it, Overview a page of the store's own. None of them is touched by a fit.",
    "fit request asks for three models: straight, energy straight in temperature; bend, with a bend at 12 °C; "
    "bend_serial, the same, with standard errors that allow for days that resemble the day before.",
    "Try it:",
    "Move the bend in fit request from 12 to another temperature, save while the folder is watched, and compare the "
    "typical miss.",
    "The truth behind the rows:",
    "kWh = 420 + 2 per °C up to 12 °C, 17 per °C above, + 4.2 per tonne, + an error that carries half of itself over "
    "to the next day and takes up noise of standard deviation 17.",
)
_PRICE = 0.24


def cold_store() -> dict[str, bytes]:
    """Daily electricity from outdoor temperature, with a bend, and throughput; in order of days."""
    days = truth.store_days()
    columns = (
        Column("date", [day.day for day in days], 13, "yyyy-mm-dd"),
        Column("month", [f"{day.day:%Y-%m}" for day in days], 11),
        Column("energy (kWh)", [day.energy for day in days], 14, "#,##0"),
        Column("outdoor temperature (°C)", [day.temperature for day in days], 19, "0.0"),
        Column("throughput (t)", [day.throughput for day in days], 14, "0.0"),
        Column("cost (EUR)", [round(day.energy * _PRICE, 2) for day in days], 13, "#,##0.00"),
    )
    common = {"date": "order", "energy (kWh)": "response", "throughput (t)": "predictor"}
    bend = common | {"outdoor temperature (°C)": "predictor bend at 12"}
    ask = Ask(
        "Daily",
        {"straight": common | {"outdoor temperature (°C)": "predictor"}, "bend": bend, "bend_serial": bend},
        settings={"standard errors": {"bend_serial": "serial"}},
    )

    def fill(book: Workbook) -> None:
        about_sheet(book, "A cold store's daily electricity", _COLD_STORE_WORDS)
        _daily_table(book, columns)
        _month_page(book, days)
        _store_overview(book, days)
        request_sheet(book, ask, columns)

    members = make_book({"title": "Cold store energy (invented)", "subject": "savefit demo", "category": "demo"}, fill)
    add_pivot(members, "xl/worksheets/sheet3.xml", _month_pivot(columns))
    return members


def _daily_table(book: Workbook, columns: Sequence[Column]) -> None:
    page = data_sheet(book, "Daily", columns)
    last = len(columns[0].cells)
    heads: list[dict[str, object]] = [{"header": column.header} for column in columns]
    for head, column in zip(heads, columns, strict=True):
        sides = {"align": "left", "indent": 1} if column.header == "month" else {"align": "right"}
        head["format"] = look(book, style.BODY, num_format=column.number_format, **sides)
        head["header_format"] = look(book, style.HEADER, text_wrap=True, **sides)
    heads[5]["formula"] = f"=[@[energy (kWh)]]*{_PRICE}"
    page.add_table(0, 0, last, 5, {"name": "DailyEnergy", "columns": heads, "style": "Table Style Light 1"})
    cost = look(book, style.BODY, num_format="#,##0.00", align="right")
    for row, value in enumerate(columns[5].cells, 1):
        page.write_formula(row, 5, f"=DailyEnergy[[#This Row],[energy (kWh)]]*{_PRICE}", cost, value)
    scale = {"type": "2_color_scale", "min_color": "#FFFFFF", "max_color": WARM}
    page.conditional_format(1, 3, last, 3, scale)
    page.conditional_format(1, 4, last, 4, {"type": "blanks", "format": book.add_format({"bg_color": "#F6E3DE"})})
    tonnes = {"validate": "decimal", "criteria": ">=", "value": 0, "error_message": "Throughput: tonnes, zero or more."}
    page.data_validation(1, 4, last, 4, tonnes)
    page.write_comment("D1", "Mean of the day, from the sensor on the north wall.", {"author": "savefit"})


def _months(days: Sequence[truth.StoreDay]) -> list[str]:
    return sorted({f"{day.day:%Y-%m}" for day in days})


_PIVOT_TOP = 4
_TOTAL = "all months"
_PIVOT_DATA = (
    ("energy (kWh)", "mean energy (kWh a day)", "average", 3),
    ("throughput (t)", "throughput (t in all)", "sum", 3),
)


def _month_page(book: Workbook, days: Sequence[truth.StoreDay]) -> None:
    """The cells under the pivot table, as a spreadsheet program leaves them there."""
    page = summary_page(book, "By month", "Month by month", "A pivot table over the table DailyEnergy.")
    page.set_column(0, 0, 18)
    page.set_column(1, 2, 26)
    strong = look(book, style.BODY, bold=True)
    number, total = look(book, style.BODY, num_format="#,##0"), look(book, style.BODY, num_format="#,##0", bold=True)
    page.write_row(_PIVOT_TOP - 1, 0, ["month", *(caption for _, caption, *_ in _PIVOT_DATA)], strong)
    for row, month in enumerate([*_months(days), _TOTAL], _PIVOT_TOP):
        chosen = [day for day in days if month in (f"{day.day:%Y-%m}", _TOTAL)]
        page.write(row, 0, month, strong if month == _TOTAL else look(book, style.BODY))
        figure = total if month == _TOTAL else number
        page.write(row, 1, mean(day.energy for day in chosen), figure)
        page.write(row, 2, sum(day.throughput or 0.0 for day in chosen), figure)


def _month_pivot(columns: Sequence[Column]) -> Pivot:
    return Pivot(
        name="MonthByMonth",
        table="DailyEnergy",
        fields=[(column.header, column.cells) for column in columns],
        row_field="month",
        groups=sorted({str(month) for month in columns[1].cells}),
        total=_TOTAL,
        data=_PIVOT_DATA,
        top=_PIVOT_TOP,
    )


def _store_overview(book: Workbook, days: Sequence[truth.StoreDay]) -> None:
    page = summary_page(book, "Overview", "The store at a glance", "The store's own page; every figure is a formula.")
    page.set_column(0, 0, 34)
    page.set_column(1, 1, 14)
    page.set_column(2, 9, 11)
    page.insert_image("I1", "snow.png", picture(drawing.snow("FFFFFF", style.DEEP), "A snow crystal"))
    page.write_row(3, 0, ["so far", ""], look(book, style.HEADER))
    energy, tonnes = [day.energy for day in days], [day.throughput for day in days if day.throughput is not None]
    degrees = [day.temperature for day in days]
    lines = (
        ("days", "=ROWS(DailyEnergy[date])", len(days), "0"),
        ("energy (kWh)", "=SUM(DailyEnergy[energy (kWh)])", sum(energy), "#,##0"),
        ("dearest day (kWh)", "=MAX(DailyEnergy[energy (kWh)])", max(energy), "#,##0"),
        ("warmest day (°C)", "=MAX(DailyEnergy[outdoor temperature (°C)])", max(degrees), "0.0"),
        ("throughput (t)", "=SUM(DailyEnergy[throughput (t)])", sum(tonnes), "#,##0"),
        ("kWh a tonne", "=store_energy/B9", sum(energy) / sum(tonnes), "0.0"),
    )
    for row, (label, formula, value, form) in enumerate(lines, 4):
        page.write(row, 0, label, look(book, style.ROW))
        page.write_formula(row, 1, formula, look(book, style.NUMBER, num_format=form), value)
    book.define_name("store_energy", "=Overview!$B$6")
    from_the_fit(
        book,
        page,
        11,
        [
            ("typical miss, straight (kWh)", "fit_straight_cv_rmse", "0.0"),
            ("typical miss, bend (kWh)", "fit_bend_cv_rmse", "0.0"),
            ("residual standard deviation, bend (kWh)", "fit_bend_residual_sd", "0.0"),
        ],
    )
    page.insert_chart("D4", _days_chart(book, len(days)), {"description": "Energy and temperature day by day"})


def _days_chart(book: Workbook, days: int) -> Chart:
    chart, second = book.add_chart({"type": "line"}), book.add_chart({"type": "line"})
    for made, column, color, more in ((chart, 2, DEEP, {}), (second, 3, WARM, {"y2_axis": True})):
        made.add_series(
            {
                "name": ["Daily", 0, column],
                "categories": ["Daily", 1, 0, days, 0],
                "values": ["Daily", 1, column, days, column],
                "line": {"color": color, "width": 1.25},
            }
            | more
        )
    set_chart_style(chart, "Energy and outdoor temperature, day by day", "", "energy (kWh)")
    font = {"name": style.BODY.font, "size": 9, "color": "#" + style.INK}
    chart.set_x_axis(
        {"date_axis": True, "num_format": "mmm", "num_font": font, "major_unit": 1, "major_unit_type": "months"}
    )
    second.set_y2_axis({"name": "outdoor temperature (°C)", "num_font": font, "name_font": font | {"bold": False}})
    chart.combine(second)
    chart.set_legend({"position": "bottom", "font": font})
    chart.set_size({"width": 600, "height": 340})
    return chart
