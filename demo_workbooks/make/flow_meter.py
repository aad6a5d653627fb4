"""The demo workbook: A flow meter's calibration."""

from __future__ import annotations

from collections.abc import Sequence
from statistics import mean, stdev

from xlsxwriter.chart import Chart
from xlsxwriter.workbook import Workbook
from xlsxwriter.worksheet import Worksheet

from bridge.sheets import style
from demo_workbooks.make import drawing, truth
from demo_workbooks.make.grid import Ask, request_sheet
from demo_workbooks.make.pages import DEEP, INVENTED, WARM, dots, from_the_fit, picture, set_chart_style
from demo_workbooks.make.workshop import Column, about_sheet, data_sheet, look, make_book, summary_page

_FLOW_METER_WORDS = (
    INVENTED,
    "What is asked:",
    "A flow meter is calibrated on a bench: eleven set flows, each run twelve times in a shuffled order. Which line "
    "leads from the reference flow to the reading, and how sure is it at small flows?",
    "Where to look:",
    "Calibration holds the 132 runs; its last column is a formula, 1/flow^1.5, in proportion to 1/variance. Set "
    "flows is the bench's own page. Neither is touched by a fit.",
    "fit request asks for the same line twice: even, each run counting alike; weighted, with the weights. As set flows "
    "repeat, the fit can tell lack of fit from mere scatter.",
    "Try it:",
    "Compare the standard errors of the two intercepts, then enter a new flow in fit estimates.",
    "The truth behind the rows:",
    "Reading = 0.040 + 1.012 x reference flow, with noise of standard deviation 0.015 x flow^0.75 (all in m³/h).",
)


def flow_meter() -> dict[str, bytes]:
    """A calibration line with repeats, its spread growing with the flow: weighted beside unweighted."""
    runs = truth.runs()
    columns = (
        Column("run", [run.number for run in runs], 9, "0"),
        Column("day", [run.day for run in runs], 13, "yyyy-mm-dd"),
        Column("reference flow (m³/h)", [run.flow for run in runs], 15, "0.0", "Set flow, from the weighing tank."),
        Column(
            "reading (m³/h)", [run.reading for run in runs], 15, "0.000", "Mean of the meter's display over the run."
        ),
        Column("water (°C)", [run.water for run in runs], 11, "0.0"),
        Column("weight", [run.flow**-1.5 for run in runs], 12, "0.0000", formula="=1/C{row}^1.5"),
    )
    line = {"run": "label", "reference flow (m³/h)": "predictor", "reading (m³/h)": "response"}
    ask = Ask("Calibration", {"even": line, "weighted": line | {"weight": "weight"}})

    def fill(book: Workbook) -> None:
        about_sheet(book, "A flow meter's calibration", _FLOW_METER_WORDS)
        page = data_sheet(book, "Calibration", columns)
        _run_comforts(book, page, len(runs))
        _set_flow_page(book, runs)
        request_sheet(book, ask, columns)

    return make_book(
        {"title": "Flow meter calibration (invented)", "subject": "savefit demo", "category": "demo"}, fill
    )


def _run_comforts(book: Workbook, page: Worksheet, last: int) -> None:
    page.autofilter(0, 0, last, 5)
    apart = {"type": "formula", "criteria": "=ABS($D2/$C2-1)>0.05", "format": book.add_format({"italic": True})}
    page.conditional_format(1, 3, last, 3, apart)
    page.conditional_format(1, 4, last, 4, {"type": "icon_set", "icon_style": "3_arrows_gray"})
    flows = {"validate": "list", "source": "=set_flows", "error_type": "warning"}
    page.data_validation(1, 2, last, 2, flows)


def _set_flow_page(book: Workbook, runs: Sequence[truth.Run]) -> None:
    page = summary_page(book, "Set flows", "Set flow by set flow", "The bench's own page; every figure is a formula.")
    page.set_column(0, 0, 34)
    page.set_column(1, 4, 14)
    page.set_column(5, 11, 10)
    dial = picture(drawing.meter(style.DEEP, style.TINT, style.TAB_FILL_IN), "A dial on a pipe")
    page.insert_image("G1", "meter.png", dial)
    heads = ["runs", "mean reading", "spread (sd)", "mean error (%)"]
    page.write(3, 0, "reference flow (m³/h)", look(book, style.HEADER))
    page.write_row(3, 1, heads, look(book, style.HEADER_RIGHT))
    for row, flow in enumerate(truth.SET_FLOWS, 4):
        _set_flow_line(book, page, row, flow, [run.reading for run in runs if run.flow == flow], len(runs) + 1)
    end = 3 + len(truth.SET_FLOWS)
    bar = {"type": "data_bar", "bar_color": WARM, "bar_solid": True}
    page.conditional_format(4, 3, end, 3, bar)
    book.define_name("set_flows", f"='Set flows'!$A$5:$A${end + 1}")
    quiet, raised = book.add_format({"italic": True}), book.add_format({"font_script": 1})
    page.write_rich_string(end + 2, 0, quiet, "weight: 1/flow", raised, "1.5", quiet, " (spread grows with flow)")
    from_the_fit(
        book,
        page,
        end + 4,
        [
            (f"{what}, {model}", f"fit_{model}_{key}", form)
            for key, what, form in (("residual_sd", "residual standard deviation", "0.0000"), ("n", "runs used", "0"))
            for model in ("even", "weighted")
        ],
    )
    page.insert_chart(f"F{8}", _spread_chart(book, end), {"description": "Spread of the readings against the set flow"})


def _set_flow_line(
    book: Workbook, page: Worksheet, row: int, flow: float, readings: Sequence[float], last: int
) -> None:
    here, flows, values = row + 1, f"Calibration!$C$2:$C${last}", f"Calibration!$D$2:$D${last}"
    page.write(row, 0, flow, look(book, style.ROW_STRONG, num_format="0.0", align="left"))
    number = {form: look(book, style.NUMBER, num_format=form) for form in ("0", "0.000", "0.0000", "0.00")}
    average = mean(readings)
    page.write_formula(row, 1, f"=COUNTIF({flows},A{here})", number["0"], len(readings))
    page.write_formula(row, 2, f"=AVERAGEIF({flows},A{here},{values})", number["0.000"], average)
    spread = f"=SQRT(SUMPRODUCT(({flows}=A{here})*({values}-C{here})^2)/(B{here}-1))"
    page.write_formula(row, 3, spread, number["0.0000"], stdev(readings))
    page.write_formula(row, 4, f"=100*(C{here}/A{here}-1)", number["0.00"], 100 * (average / flow - 1))


def _spread_chart(book: Workbook, end: int) -> Chart:
    chart = book.add_chart({"type": "scatter"})
    chart.add_series(
        {
            "name": "spread",
            "categories": ["Set flows", 4, 0, end, 0],
            "values": ["Set flows", 4, 3, end, 3],
            "marker": dots(DEEP, "diamond"),
            "trendline": {"type": "power", "line": {"color": WARM, "width": 1.5}, "name": "power curve"},
        }
    )
    set_chart_style(chart, "Spread grows with flow", "reference flow (m³/h)", "standard deviation (m³/h)")
    chart.set_legend({"none": True})
    chart.set_size({"width": 470, "height": 300})
    return chart
