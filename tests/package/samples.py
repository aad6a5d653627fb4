"""Sheets of ours for the package room's tests: every feature a sheet can have, with invented contents."""

from __future__ import annotations

import io

import numpy as np
import xlsxwriter

from bridge.package.graft import graft
from bridge.package.package import Package
from bridge.page.cells import Cell, Format, Formula, reference
from bridge.page.charts import Axis, Chart, Series
from bridge.page.sheet import Block, BlockColumn, DefinedName, DropDown, Highlight, Link, Merge, Sheet

HEADING = Format(bold=True, size=12, color="2B5C6B")
NUMBER = Format(number_format="0.000", border_bottom="thin", align="right")
INPUT = Format(fill="FFF5E4", locked=False, align="center")
FIRST, ROWS = 4, 60
STATE = {"digest": 'abc "quoted" & é', "note": "x" * 900}


def numbers(seed: int = 1) -> tuple[np.ndarray, np.ndarray]:
    """Two columns, the second with a gap."""
    rng = np.random.default_rng(seed)
    x = np.round(rng.normal(10, 3, ROWS), 3)
    y = np.round(2 * x + rng.normal(0, 1, ROWS), 3)
    y[5] = np.nan
    return x, y


def rows_sheet(seed: int = 1, title: str = "") -> Sheet:
    """A sheet with dense blocks, charts, highlights, links, frozen panes, print set-up and hidden helpers."""
    tab = title or "fit rows"
    x, y = numbers(seed)
    last = FIRST + ROWS - 1
    block = Block(
        FIRST,
        0,
        (
            BlockColumn(np.arange(7.0, 7 + ROWS), NUMBER, 'HYPERLINK("#A{key}",{key})', np.arange(7, 7 + ROWS)),
            BlockColumn(x, NUMBER),
            BlockColumn(y, NUMBER),
            BlockColumn(["oak", "glass < fibre"] * (ROWS // 2), NUMBER),
        ),
    )
    x_ref, y_ref = reference(tab, (FIRST, 1), (last, 1)), reference(tab, (FIRST, 2), (last, 2))
    points = tuple(x.tolist()), tuple(None if np.isnan(v) else v for v in y.tolist())
    dots = Series("rows", x_ref, y_ref, *points, labels=("row 7", *[""] * (ROWS - 1)))
    line = Series("equal", x_ref, x_ref, points[0], points[0], marker=None, line=True, dash="dash")
    hollow = Series("rows", x_ref, y_ref, *points, marker="diamond", marker_filled=False)
    return Sheet(
        "fit rows",
        {
            (0, 0): Cell('Rows "of" <Refits> & more', HEADING),
            (1, 0): Cell("=1+1", NUMBER),
            (1, 1): Cell(Formula(f"SUM(B{FIRST + 1}:B{last + 1})", float(np.sum(x))), NUMBER),
            (1, 2): Cell(True, NUMBER),
            (2, 1): Cell(Formula('IF(B2>0,"data unchanged","x")', "data unchanged"), HEADING),
        },
        title=title,
        blocks=(block,),
        widths={0: 9.0, 1: 12.0, 2: 12.0, 3: 20.0},
        heights={0: 24.0},
        merges=(Merge((0, 0), (0, 3)),),
        highlights=(
            Highlight((FIRST, 1), (last, 1), f"B{FIRST + 1}>12", Format(fill="FFE0D0", bold=True, color="A5402D")),
        ),
        links=(Link(1, 0, f"{tab!r}!A1", "to the top"),),
        charts=(
            Chart("Observed against fitted", (dots, line), Axis("fitted (h)"), Axis("observed (h)"), 3, 5,
                  alt_text='dots "along" a line'),
            Chart("Residuals", (hollow,), Axis("fitted (h)", minimum=0.0), Axis("residual"), 20, 5, legend=True),
        ),
        freeze=(FIRST, 1),
        print_titles=(0, 3),
        print_area=((0, 0), (last, 12)),
        tab_color="9DB4BC",
        hidden_columns=frozenset({14}),
        hidden_rows=frozenset({3}),
    )  # fmt: skip


def request_sheet(title: str = "", rows_tab: str = "fit rows") -> Sheet:
    """A sheet with drop-downs of both kinds and cells to fill in."""
    return Sheet(
        "fit request",
        {(0, 0): Cell("column", HEADING), (0, 1): Cell("A", HEADING), (1, 1): Cell("predictor", INPUT)},
        title=title,
        widths={0: 20.0, 1: 14.0, 2: 14.0, 3: 14.0},
        drop_downs=(
            DropDown((1, 1), (9, 3), ("response", 'predictor "x"'), prompt_title="role", prompt="choose one"),
            DropDown((1, 5), (9, 5), reference(rows_tab, (FIRST, 3), (FIRST + 9, 3)), strict=True),
        ),
        tab_color="E3B768",
        landscape=False,
        fit_height=1,
    )


def sheets(seed: int = 1) -> list[Sheet]:
    """The two sheets that most tests graft."""
    return [request_sheet(), rows_sheet(seed)]


def names() -> list[DefinedName]:
    """Names for people's formulas."""
    return [
        DefinedName("fit_A_n", "'fit rows'!$B$2"),
        DefinedName("fit_A_rows", f"'fit rows'!$A${FIRST + 1}:$D${FIRST + ROWS}"),
    ]


def plain_workbook(*tabs: str) -> bytes:
    """A small workbook of a user's, with numbers and formulas."""
    out = io.BytesIO()
    with xlsxwriter.Workbook(out, {"in_memory": True}) as book:
        for tab in tabs or ("Refits", "Notes"):
            sheet = book.add_worksheet(tab)
            for row in range(8):
                sheet.write_row(row, 0, [f"job {row}", row * 1.5, row * row])
            sheet.write_formula(9, 1, "=SUM(B1:B8)", None, 42.0)
    return out.getvalue()


def grafted(data: bytes, seed: int = 1) -> bytes:
    """The usual two sheets grafted into a workbook."""
    return graft(Package.open(data), sheets(seed), names(), STATE)
