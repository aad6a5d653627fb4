"""What the tests of the demos and of the templates look for in a workbook."""

from __future__ import annotations

import math
import zipfile
from pathlib import Path

import openpyxl
import pandas as pd
import python_calamine
from openxml_audit import OpenXmlValidator

Grid = dict[str, dict[str, dict[str, object]]]  # block -> model -> label -> entry
BLOCKS = ("column", "crossed", "setting", "status")
ROLES = {"response", "predictor", "category", "weight", "label", "order", "group"}


def parts(path: Path) -> dict[str, bytes]:
    """A package's members."""
    with zipfile.ZipFile(path) as package:
        return {name: package.read(name) for name in package.namelist()}


def contents(path: Path) -> dict[str, object]:
    """Every cell of every sheet: its formula, or its value."""
    book = openpyxl.load_workbook(path)
    return {
        f"{page.title}!{cell.coordinate}": cell.value
        for page in book.worksheets
        for row in page.iter_rows()
        for cell in row
        if cell.value is not None
    }


def faults(path: Path) -> list[str]:
    """What openxml-audit (schema and semantic checks of ECMA-376) finds wrong."""
    return [str(error) for error in OpenXmlValidator().validate(str(path)).errors]


def data(path: Path, sheet: str, header_row: int = 1) -> pd.DataFrame:
    """A data sheet's stored values, by header."""
    return pd.read_excel(path, sheet_name=sheet, header=header_row - 1, engine="calamine")


def grid(path: Path) -> Grid:
    """The request read by its labels, with nothing of the program's own."""
    page = openpyxl.load_workbook(path)["fit request"]
    found: Grid = {}
    models: dict[int, str] = {}
    block = ""
    for row in page.iter_rows(values_only=True):
        if row[0] in BLOCKS:
            block = str(row[0])
            models = {at: str(cell) for at, cell in enumerate(row) if at >= 4 and cell}
            found[block] = {model: {} for model in models.values()}
        elif block and row[0]:
            for at, model in models.items():
                if row[at] is not None:
                    label = f"{row[0]} x {row[1]}" if block == "crossed" else str(row[0])
                    found[block][model][label] = row[at]
    return found


def asked_of(path: Path) -> tuple[str, list[str]]:
    """The data sheet that the request names, and the data columns that it lists."""
    page = openpyxl.load_workbook(path)["fit request"]
    labels = [row[0] for row in page.iter_rows(max_col=1, values_only=True)]
    first, last = labels.index("column") + 1, labels.index("crossed")
    sheet = page.cell(labels.index("data sheet") + 1, 2).value
    return str(sheet), [str(label) for label in labels[first:last] if label]


def formulas(path: Path) -> dict[str, tuple[str, object]]:
    """Every formula cell: its text and its stored value."""
    texts = openpyxl.load_workbook(path)
    stored = openpyxl.load_workbook(path, data_only=True)
    return {
        f"{page.title}!{cell.coordinate}": (cell.value, stored[page.title][cell.coordinate].value)
        for page in texts.worksheets
        for row in page.iter_rows()
        for cell in row
        if cell.data_type == "f"
    }


def differing(path: Path, recalculated: Path) -> list[str]:
    """Formula cells whose stored value is not what another program calculates (to 12 digits)."""
    other = openpyxl.load_workbook(recalculated, data_only=True)
    found = []
    for address, (text, stored) in formulas(path).items():
        sheet, cell = address.rsplit("!", 1)
        value = other[sheet][cell].value
        same = math.isclose(stored, value, rel_tol=1e-12) if _numbers(stored, value) else stored == value
        if stored is None or not same:
            found.append(f"{address} {text}: stored {stored!r}, calculated {value!r}")
    return found


def _numbers(*values: object) -> bool:
    return all(isinstance(value, int | float) for value in values)


def words(path: Path) -> str:
    """All texts of a workbook."""
    book = python_calamine.load_workbook(str(path))
    rows = [row for name in book.sheet_names for row in book.get_sheet_by_name(name).to_python()]
    return "\n".join(str(cell) for row in rows for cell in row if isinstance(cell, str))
