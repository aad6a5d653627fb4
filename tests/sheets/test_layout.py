"""What holds for every page, on plain and on awkward workbooks: nothing cut, nothing overlapping, all stored."""

from __future__ import annotations

import numpy as np
import pytest

from bridge.page.cells import Formula
from bridge.page.sheet import Sheet
from bridge.sheets import anova, diagnostics, measure, results, rows
from tests.sheets import layout
from tests.sheets.cases import BOOKS

PAGES = {"fit results": results, "fit ANOVA": anova, "fit diagnostics": diagnostics, "fit rows": rows}

_laid_out: dict[str, dict[str, Sheet]] = {}


def sheets_of(name: str) -> dict[str, Sheet]:
    if name not in _laid_out:
        book = BOOKS[name]()
        _laid_out[name] = {page: maker.lay_out(book) for page, maker in PAGES.items()}
    return _laid_out[name]


@pytest.fixture(params=list(BOOKS))
def sheets(request) -> dict[str, Sheet]:
    return sheets_of(request.param)


def test_no_number_becomes_hashes_and_no_text_is_cut(sheets):
    assert [cut for sheet in sheets.values() for cut in layout.cut_texts(sheet)] == []


def test_no_chart_stands_on_a_cell_or_a_chart(sheets):
    assert [clash for sheet in sheets.values() for clash in layout.overlaps(sheet)] == []


def test_charts_show_the_numbers_of_the_cells_they_name(sheets):
    for sheet in sheets.values():
        for chart in sheet.charts:
            for series in chart.series:
                for reference, points in ((series.x_ref, series.x), (series.y_ref, series.y)):
                    assert layout.cells_of(reference, sheets) == list(points), (chart.title, series.title)
                assert series.labels is None or len(series.labels) == len(series.y)


def test_every_formula_carries_its_value(sheets):
    for sheet in sheets.values():
        for key, cell in sheet.cells.items():
            if isinstance(cell.value, Formula):
                assert cell.value.value not in (None, ""), (sheet.name, key)
        for block in sheet.blocks:
            for column in block.columns:
                if column.formula is not None:
                    assert np.isfinite(np.asarray(column.values, dtype=float)).all()


def test_merged_cells_do_not_overlap_and_hold_one_value(sheets):
    for sheet in sheets.values():
        seen: set[tuple[int, int]] = set()
        cells = layout.every_cell(sheet)
        for merge in sheet.merges:
            inside = {
                (row, column)
                for row in range(merge.first[0], merge.last[0] + 1)
                for column in range(merge.first[1], merge.last[1] + 1)
            }
            assert not inside & seen, (sheet.name, merge)
            seen |= inside
            others = inside - {merge.first}
            assert [key for key in others if key in cells and cells[key].value is not None] == []


def test_rows_and_columns_stay_within_what_a_sheet_can_have(sheets):
    for sheet in sheets.values():
        assert max(sheet.widths.values()) <= 255
        assert max(sheet.heights.values()) <= 409
        assert sheet.print_area is not None
        assert sheet.tab_color is not None


def test_no_page_is_wider_than_a_laptop_screen_apart_from_the_rows(sheets):
    for name in ("fit results", "fit ANOVA", "fit diagnostics"):
        sheet = sheets[name]
        (_, first), (_, last) = sheet.print_area
        assert layout.Ground(sheet).left(last + 1) - layout.Ground(sheet).left(first) <= 1366


def test_no_sheet_speaks_in_missing_values(sheets):
    for sheet in sheets.values():
        numbers = [value for value in map(layout.value_of, sheet.cells.values()) if isinstance(value, float)]
        assert np.isfinite(numbers).all()
        for text in layout.texts(sheet):
            assert not {"nan", "NaN", "None", "inf"} & set(text.replace(",", " ").replace(".", " ").split()), text


@pytest.mark.parametrize("name", list(BOOKS))
def test_the_results_print_on_a_page_per_three_models(name):
    book = BOOKS[name]()
    sheet = sheets_of(name)["fit results"]
    assert sheet.landscape
    assert sheet.fit_width == 1
    assert sheet.fit_height == -(-len(book.models) // 3)


def test_the_measure_grows_with_the_text():
    assert measure.height("word " * 200, 60) > measure.height("word " * 20, 60) > 0
