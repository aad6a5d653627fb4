"""The pages in a real spreadsheet program: drawn to paper without ####, recalculated to the stored values."""

from __future__ import annotations

import io
import subprocess

import openpyxl
import pytest
import python_calamine

from bridge.package.graft import graft
from bridge.package.package import Package
from bridge.sheets import anova, diagnostics, results, rows
from tests import office
from tests.sheets import layout
from tests.sheets.cases import BOOKS

PAGES = (results, anova, diagnostics, rows)


def grafted(told, folder):
    """The book's data sheets in a workbook, our pages grafted in."""
    workbook = openpyxl.Workbook()
    workbook.remove(workbook.active)
    for table in told.tables.values():
        page = workbook.create_sheet(table.sheet)
        for column in table.columns:
            page.cell(table.header_row, column.index + 1, column.name)
            for at, row in enumerate(table.rows.tolist()):
                number = float(column.numbers[at])
                value = column.texts[at] if column.texts else None if number != number else number
                page.cell(row, column.index + 1, value)
    held = io.BytesIO()
    workbook.save(held)
    path = folder / "book.xlsx"
    path.write_bytes(graft(Package.open(held.getvalue()), [page.lay_out(told) for page in PAGES], (), {}))
    return path


@office.needs_office
@pytest.mark.parametrize("name", ["yard", "five rows", "far names"])
def test_pages_are_drawn_whole(name, tmp_path):
    told = BOOKS[name]()
    paper = office.convert(grafted(told, tmp_path), "pdf")
    text = subprocess.run(["pdftotext", "-layout", str(paper), "-"], capture_output=True, text=True, check=True).stdout
    assert "###" not in text
    assert "Err:" not in text
    for wanted in ("In short", "source of variation", "even spread", "Cook's", "Before you rely on it"):
        assert wanted in text


@office.needs_office
def test_every_formula_recalculates_to_its_stored_value(tmp_path):
    told = BOOKS["yard"]()
    path = grafted(told, tmp_path)
    again = office.convert(path, "xlsx", recalculate=True)
    before, after = (python_calamine.load_workbook(str(each)) for each in (path, again))
    for page in PAGES:
        sheet = page.lay_out(told)
        stored, anew = (book.get_sheet_by_name(sheet.name).to_python(skip_empty_area=False) for book in (before, after))
        formulas = [(row, column) for block in sheet.blocks for row, column in _formula_cells(block)]
        assert all(stored[row][column] == anew[row][column] for row, column in formulas)
        # and a reader that does not recalculate sees what was laid out
        for (row, column), cell in layout.every_cell(sheet).items():
            value = layout.value_of(cell)
            assert value in (None, "") or stored[row][column] == value, (sheet.name, row, column)


def _formula_cells(block):
    for across, column in enumerate(block.columns):
        if column.formula is not None:
            yield from ((block.row + down, block.column + across) for down in range(len(column.values)))
