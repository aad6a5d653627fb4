"""Workbooks of any size with invented rows and a filled request for three models."""

from __future__ import annotations

import re
from collections.abc import Iterator
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from demo_workbooks.make.grid import Ask, request_sheet
from demo_workbooks.make.workshop import Column, data_sheet, make_book, save

KINDS = ("first", "second", "third", "fourth")
SHEET = "Data"
_BATCH = 20_000


def make_workbook(path: Path, rows: int, columns: int, seed: int = 1) -> None:
    """A workbook with `rows` x `columns` cells of data: case, y, kind, x1, x2, ... (at least 5 columns).

    The first rows are written by XlsxWriter, which makes all other parts; the sheet's rows are then written from one
    template, as a general library would take minutes at a million rows.
    """
    numbers, kinds = _rows(rows, columns - 3, seed)
    names = ["case", "y", "kind", *(f"x{at}" for at in range(1, columns - 2))]
    few = len(KINDS)
    sample: list[list[float | str]] = [[float(value) for value in numbers[:few, at]] for at in range(columns - 1)]
    sample.insert(2, [KINDS[code] for code in range(few)])
    head = [Column(name, cells) for name, cells in zip(names, sample, strict=True)]
    members = make_book(
        {"title": "Invented rows"}, lambda book: (data_sheet(book, SHEET, head), request_sheet(book, _ask(names), head))
    )
    members["xl/worksheets/sheet1.xml"] = _filled(members, numbers, kinds)
    save(members, path)


def _ask(names: list[str]) -> Ask:
    """Straight; log-log; log-log with a slope of x1 per kind."""
    xs = names[3:]
    straight = {"case": "label", "y": "response", "kind": "category"} | dict.fromkeys(xs, "predictor")
    logs = {"case": "label", "y": "log response", "kind": "category"} | dict.fromkeys(xs, "log predictor")
    return Ask(SHEET, {"A": straight, "B": logs, "C": logs}, crossed=[("x1", "kind", ("C",))])


def _rows(rows: int, xs: int, seed: int) -> tuple[NDArray[np.float64], NDArray[np.intp]]:
    """Columns case, y, x1, ... (rounded as people type them), and each row's kind."""
    random = np.random.default_rng(seed)
    x = np.round(np.exp(random.normal(2.5, 0.5, (rows, xs))), 2) + 0.01
    kinds = random.integers(0, len(KINDS), rows)
    kinds[: len(KINDS)] = range(len(KINDS))
    slopes = np.linspace(0.5, -0.1, xs)
    eta = 1.0 + np.log(x) @ slopes + np.array([0.0, 0.2, -0.1, 0.4])[kinds] + random.normal(0, 0.15, rows)
    return np.column_stack([np.arange(1, rows + 1), np.round(np.exp(eta), 2) + 0.01, np.round(x, 2)]), kinds


def _filled(members: dict[str, bytes], numbers: NDArray[np.float64], kinds: NDArray[np.intp]) -> bytes:
    """The data sheet's part with all rows."""
    shared = re.findall(r"<t[^>]*>([^<]*)</t>", members["xl/sharedStrings.xml"].decode())
    codes = np.array([shared.index(kind) for kind in KINDS])[kinds]
    before, rest = members["xl/worksheets/sheet1.xml"].split(b'<row r="2"', 1)
    before = re.sub(rb'<dimension ref="A1:([A-Z]+)\d+"/>', rb'<dimension ref="A1:\g<1>%d"/>' % (len(codes) + 1), before)
    return before + b"".join(_row_xml(numbers, codes)) + b"</sheetData>" + rest.split(b"</sheetData>", 1)[1]


def _row_xml(numbers: NDArray[np.float64], codes: NDArray[np.intp]) -> Iterator[bytes]:
    letters = [chr(65 + at) for at in range(numbers.shape[1] + 1)]
    cells = [f'<c r="{letter}%d"><v>%.10g</v></c>' for letter in letters]
    cells[2] = '<c r="C%d" t="s"><v>%d</v></c>'
    template = '<row r="%d">' + "".join(cells) + "</row>"
    values = np.insert(numbers, 2, codes, axis=1)
    for start in range(0, len(values), _BATCH):
        made = []
        for at, row in enumerate(values[start : start + _BATCH].tolist(), start + 2):
            made.append(template % (at, *(part for value in row for part in (at, value))))
        yield "".join(made).encode()
