"""The demo workbook: Refit hours of a boatyard."""

from __future__ import annotations

from collections.abc import Sequence
from statistics import mean

from xlsxwriter.workbook import Workbook
from xlsxwriter.worksheet import Worksheet

from bridge.sheets import style
from demo_workbooks.make import drawing, truth
from demo_workbooks.make.grid import Ask, request_sheet
from demo_workbooks.make.pages import DEEP, INVENTED, PALE, dots, from_the_fit, picture, set_chart_style
from demo_workbooks.make.printer import add_printer_settings
from demo_workbooks.make.workshop import Column, about_sheet, data_sheet, look, make_book, summary_page

_BOATYARD_WORDS = (
    INVENTED,
    "What is asked:",
    "A boatyard quotes refits. How many hours will the next one take, from the boat's length, its hull, the coats of "
    "paint and the crew at hand? And which form of the model should be trusted?",
    "Where to look:",
    "Refits holds 128 past jobs (two without hours, one without coats: they are left out and named). Summary is the "
    "yard's own page, with a chart, a drawing and formulas. Neither is touched by a fit.",
    "fit request asks for three models: A, straight in length; B, hours and length as logarithms; C, as B, with "
    "the crew and a slope of its own for each hull material.",
    "Try it:",
    "Change a number of hours in Refits, or an entry in fit request, and save while the folder is watched.",
    "The truth behind the rows:",
    "ln hours = start + slope x ln(length in m) + 0.07 x coats + noise of standard deviation 0.16. Start and slope: "
    "oak 0.55 and 1.30, steel 1.35 and 1.05, glass fibre 0.25 and 1.30. The size of the crew does nothing.",
)


def boatyard() -> dict[str, bytes]:
    """Refit hours from length, hull, coats and crew: three models side by side."""
    jobs = truth.refits()
    columns = (
        Column("job", [job.job for job in jobs], 10, note="The yard's own number for the job."),
        Column("hours", [job.hours for job in jobs], 10, "0.0", "Working hours booked, all hands together."),
        Column("length (m)", [job.length for job in jobs], 11, "0.0", "Length over all."),
        Column("hull", [job.hull for job in jobs], 13),
        Column("coats", [job.coats for job in jobs], 9, "0"),
        Column("crew", [job.crew for job in jobs], 9, "0", "Hands on the job on an ordinary day."),
        Column("month", [job.month for job in jobs], 12, "yyyy-mm", "The month the boat was hauled out."),
    )
    roles = {"job": "label", "hull": "category", "coats": "predictor", "month": "order"}
    logs = roles | {"hours": "log response", "length (m)": "log predictor"}
    ask = Ask(
        "Refits",
        {
            "A": roles | {"hours": "response", "length (m)": "predictor"},
            "B": logs,
            "C": logs | {"hull": "category base oak", "crew": "predictor"},
        },
        crossed=[("length (m)", "hull", ("C",))],
        settings={"standard errors": {"A": "uneven spread"}},
    )

    def fill(book: Workbook) -> None:
        about_sheet(book, "A boatyard's refit hours", _BOATYARD_WORDS)
        page = data_sheet(book, "Refits", columns, first_row=3)
        page.write(0, 0, "Refits since 2023", look(book, style.TITLE))
        page.write(1, 0, "Invented jobs. Hours are booked hours of all hands.", look(book, style.SUBTITLE))
        _refit_comforts(book, page, 4, 3 + len(jobs))
        _yard_summary(book, jobs)
        _lists(book)
        request_sheet(book, ask, columns)

    members = make_book({"title": "Boatyard refits (invented)", "subject": "savefit demo", "category": "demo"}, fill)
    add_printer_settings(members, "xl/worksheets/sheet2.xml")
    return members


def _refit_comforts(book: Workbook, page: Worksheet, first: int, last: int) -> None:
    page.autofilter(first - 1, 0, last, 6)
    bar = {"type": "data_bar", "bar_color": PALE, "bar_solid": True, "bar_border_color": PALE}
    page.conditional_format(first, 1, last, 1, bar)
    page.conditional_format(first, 1, last, 4, {"type": "blanks", "format": book.add_format({"bg_color": "#F6E3DE"})})
    many = book.add_format({"bold": True, "font_color": DEEP})
    page.conditional_format(first, 4, last, 4, {"type": "cell", "criteria": ">=", "value": 4, "format": many})
    page.data_validation(first, 3, last, 3, {"validate": "list", "source": "=hull_materials"})
    coats = {"validate": "integer", "criteria": "between", "minimum": 1, "maximum": 6, "ignore_blank": True}
    page.data_validation(first, 4, last, 4, coats | {"error_message": "Coats: a whole number from 1 to 6."})
    page.write_comment(first + 16, 1, "Time sheets lost when the office moved.", {"author": "savefit"})


def _lists(book: Workbook) -> None:
    page = book.add_worksheet("Lists")
    page.set_tab_color(PALE)
    page.set_column(0, 3, 18)
    page.write(0, 0, "hull materials", look(book, style.HEADER))
    page.write_column(1, 0, truth.HULLS, look(book, style.ROW))
    page.write(0, 2, "hourly rate", look(book, style.HEADER))
    page.write(1, 2, 62, look(book, style.INPUT_NUMBER))
    book.define_name("hull_materials", "=Lists!$A$2:$A$4")
    book.define_name("hourly_rate", "=Lists!$C$2")


def _yard_summary(book: Workbook, jobs: Sequence[truth.Refit]) -> None:
    page = summary_page(book, "Summary", "The yard at a glance", "The yard's own page; every figure is a formula.")
    page.set_column(0, 0, 34)
    page.set_column(1, 9, 12)
    page.insert_image(
        "I1", "boat.png", picture(drawing.boat(style.DEEP, style.TAB_FILL_IN, style.TAB_DETAIL), "A boat")
    )
    heads = ["hull", "jobs", "mean hours", "mean length (m)", "mean price"]
    years = (2023, 2024, 2025, 2026)
    page.set_row(3, 30)
    right = look(book, style.HEADER_RIGHT, text_wrap=True)
    page.write(3, 0, heads[0], look(book, style.HEADER))
    page.write_row(3, 1, [*heads[1:], *(f"hours a job {year}" for year in years)], right)
    last = len(jobs) + 4
    for row, hull in enumerate(truth.HULLS, 4):
        page.set_row(row, 21)
        _hull_line(book, page, row, [job for job in jobs if job.hull == hull], hull, last, years)
    sparks = [f"Summary!F{row}:I{row}" for row in range(5, 8)]
    page.write(3, 9, "trend", look(book, style.HEADER_CENTER))
    page.add_sparkline(
        4, 9, {"location": ["J5", "J6", "J7"], "range": sparks, "type": "column", "series_color": PALE, "min": 0}
    )
    fit_lines = [
        (f"{what}, model {model}", f"fit_{model}_{key}", form)
        for key, what, form in (("cv_rmse", "typical miss (hours)", "0.0"), ("r_squared", "R2", "0.000"))
        for model in "ABC"
    ]
    from_the_fit(book, page, 9, fit_lines)
    chart = book.add_chart({"type": "scatter"})
    chart.add_series(
        {
            "name": "jobs",
            "categories": ["Refits", 4, 2, last - 1, 2],
            "values": ["Refits", 4, 1, last - 1, 1],
            "marker": dots(DEEP),
        }
    )
    set_chart_style(chart, "Hours against length", "length (m)", "hours")
    chart.set_legend({"none": True})
    chart.set_size({"width": 560, "height": 300})
    page.insert_chart("D10", chart, {"description": "Booked hours against length for every past refit"})
    page.set_selection("A1")


def _hull_line(
    book: Workbook,
    page: Worksheet,
    row: int,
    jobs: Sequence[truth.Refit],
    hull: str,
    last: int,
    years: Sequence[int],
) -> None:
    here, hulls, hours = row + 1, f"Refits!$D$5:$D${last}", f"Refits!$B$5:$B${last}"
    months = f"Refits!$G$5:$G${last}"
    booked = [job.hours for job in jobs if job.hours is not None]
    page.write(row, 0, hull, look(book, style.ROW_STRONG))
    whole, tenth = look(book, style.NUMBER, num_format="#,##0"), look(book, style.NUMBER, num_format="0.0")
    page.write_formula(row, 1, f"=COUNTIF({hulls},A{here})", whole, len(jobs))
    page.write_formula(row, 2, f"=AVERAGEIF({hulls},A{here},{hours})", tenth, mean(booked))
    lengths = f"=AVERAGEIF({hulls},A{here},Refits!$C$5:$C${last})"
    page.write_formula(row, 3, lengths, tenth, mean(job.length for job in jobs))
    page.write_formula(row, 4, f"=C{here}*hourly_rate", whole, mean(booked) * 62)
    for at, year in enumerate(years, 5):
        of_year = [job.hours for job in jobs if job.month.year == year and job.hours is not None]
        test = f'{months},">="&DATE({year},1,1),{months},"<="&DATE({year},12,31)'
        page.write_formula(row, at, f"=AVERAGEIFS({hours},{hulls},A{here},{test})", tenth, mean(of_year))
    page.write_blank(row, 9, None, look(book, style.ROW))
