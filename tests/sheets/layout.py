"""Looking at laid-out sheets as a reader's program would: which cell holds what, where it stands, what fits in it."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from dataclasses import dataclass

from bridge.page.cells import Cell, Format, Formula, Scalar
from bridge.page.charts import Chart
from bridge.page.sheet import Sheet
from bridge.sheets import figures, measure

DEFAULT_WIDTH, DEFAULT_POINTS = 8.43, 15.0


@dataclass(frozen=True)
class Box:
    left: float
    top: float
    right: float
    bottom: float

    def meets(self, other: Box) -> bool:
        return (
            self.left < other.right and other.left < self.right and self.top < other.bottom and other.top < self.bottom
        )


def every_cell(sheet: Sheet) -> dict[tuple[int, int], Cell]:
    """All cells, those of dense blocks included; a block's formula cells hold their stored value."""
    cells = dict(sheet.cells)
    for block in sheet.blocks:
        for across, column in enumerate(block.columns):
            for down, value in enumerate(column.values):
                missing = value == "" if isinstance(value, str) else math.isnan(value)
                key = (block.row + down, block.column + across)
                assert key not in cells, f"{sheet.name}: two values for {key}"
                cells[key] = Cell(None if missing else value if isinstance(value, str) else float(value), column.format)
    return cells


def value_of(cell: Cell) -> Scalar | None:
    return cell.value.value if isinstance(cell.value, Formula) else cell.value


def text_of(cell: Cell) -> str:
    """What the cell shows."""
    value = value_of(cell)
    if value is None:
        return ""
    if isinstance(value, str | bool):
        return str(value)
    return figures.shown(float(value), cell.format.number_format)


class Ground:
    """Pixels of columns and rows, by the widths and heights a sheet asks for."""

    def __init__(self, sheet: Sheet) -> None:
        self.sheet = sheet
        self.spans = {merge.first: merge.last for merge in sheet.merges}

    def width(self, column: int) -> float:
        return self.sheet.widths.get(column, DEFAULT_WIDTH) * measure.UNIT_PIXELS + measure.PADDING_PIXELS

    def points(self, row: int) -> float:
        return self.sheet.heights.get(row, DEFAULT_POINTS)

    def left(self, column: int) -> float:
        return sum(self.width(at) for at in range(column))

    def top(self, row: int) -> float:
        return sum(self.points(at) for at in range(row)) * 96 / 72

    def cell(self, row: int, column: int) -> Box:
        last_row, last_column = self.spans.get((row, column), (row, column))
        return Box(self.left(column), self.top(row), self.left(last_column + 1), self.top(last_row + 1))

    def chart(self, chart: Chart) -> Box:
        left, top = self.left(chart.column), self.top(chart.row)
        return Box(left, top, left + chart.width, top + chart.height)


def cut_texts(sheet: Sheet) -> Iterator[str]:
    """Cells that do not show all they hold: ####, texts run into a neighbour, rows too low for their wrapped text."""
    cells, ground = every_cell(sheet), Ground(sheet)
    covered = {
        (row, column): merge.first
        for merge in sheet.merges
        for row in range(merge.first[0], merge.last[0] + 1)
        for column in range(merge.first[1], merge.last[1] + 1)
    }
    for (row, column), cell in cells.items():
        text, look = text_of(cell), cell.format
        if not text or covered.get((row, column), (row, column)) != (row, column):
            continue
        last_row, last_column = ground.spans.get((row, column), (row, column))
        room = ground.left(last_column + 1) - ground.left(column)
        if look.wrap and isinstance(value_of(cell), str):
            high = sum(ground.points(at) for at in range(row, last_row + 1))
            needed = measure.lines(text, (room - measure.PADDING_PIXELS) / measure.UNIT_PIXELS, look.size, look.bold)
            if needed * look.size * 1.2 > high + 0.5:
                yield f"{sheet.name} {(row, column)}: {needed} lines in {high} points: {text[:60]!r}"
        elif _needed(text, look) > room + _spill(cells, covered, ground, row, last_column, look, cell):
            yield f"{sheet.name} {(row, column)}: {_needed(text, look):.0f} pixels in {room:.0f}: {text[:60]!r}"


def _needed(text: str, look: Format) -> float:
    return max(measure.pixels(line, look.size, look.bold) for line in text.split("\n")) + 9 * look.indent


def _spill(
    cells: dict[tuple[int, int], Cell],
    covered: dict[tuple[int, int], tuple[int, int]],
    ground: Ground,
    row: int,
    column: int,
    look: Format,
    cell: Cell,
) -> float:
    """How far a text may run over empty neighbours; numbers never do."""
    if not isinstance(value_of(cell), str):
        return 0.0
    step, extra = (-1, 0.0) if look.align == "right" else (1, 0.0)
    at = column + step
    while 0 <= at < 1000 and (row, at) not in covered and text_of(cells.get((row, at), Cell(None))) == "":
        extra += ground.width(at)
        at += step
    return extra


def overlaps(sheet: Sheet) -> Iterator[str]:
    """Charts that stand on a filled cell or on another chart."""
    ground = Ground(sheet)
    boxes = [(chart.title, ground.chart(chart)) for chart in sheet.charts]
    for at, (title, box) in enumerate(boxes):
        yield from (f"{title} on {other}" for other, second in boxes[at + 1 :] if box.meets(second))
    filled = [(key, ground.cell(*key)) for key, cell in every_cell(sheet).items() if text_of(cell)]
    for title, box in boxes:
        yield from (f"{title} on {sheet.name} {key}" for key, second in filled if box.meets(second))


_REFERENCE = re.compile(r"'((?:[^']|'')+)'!\$([A-Z]+)\$(\d+)(?::\$([A-Z]+)\$(\d+))?")


def cells_of(reference: str, sheets: dict[str, Sheet]) -> list[Scalar | None]:
    """The values of the cells a reference names, in order."""
    found = _REFERENCE.fullmatch(reference)
    assert found is not None, reference
    name, first, top, last, bottom = found.groups()
    cells = _cached_cells(sheets[name.replace("''", "'")])
    assert last in (None, first)
    column = _index(first)
    rows = range(int(top) - 1, int(bottom or top))
    return [value_of(cells[(row, column)]) if (row, column) in cells else None for row in rows]


_seen: dict[int, tuple[Sheet, dict[tuple[int, int], Cell]]] = {}


def _cached_cells(sheet: Sheet) -> dict[tuple[int, int], Cell]:
    if id(sheet) not in _seen:
        _seen[id(sheet)] = (sheet, every_cell(sheet))
    return _seen[id(sheet)][1]


def _index(letters: str) -> int:
    total = 0
    for letter in letters:
        total = total * 26 + ord(letter) - 64
    return total - 1


def column_under(sheet: Sheet, header: str, below: int = 0) -> dict[object, Cell]:
    """The cells under a header, in the first table from row `below` on that has it, keyed by the first column."""
    cells = every_cell(sheet)
    row, column = next(key for key in sorted(cells) if key[0] >= below and value_of(cells[key]) == header)
    found: dict[object, Cell] = {}
    at = row + 1
    while (at, 0) in cells and value_of(cells[(at, 0)]) is not None:
        found.setdefault(value_of(cells[(at, 0)]), cells.get((at, column), Cell(None)))
        at += 1
    return found


def texts(sheet: Sheet) -> list[str]:
    """Every text on the sheet, top to bottom."""
    cells = every_cell(sheet)
    return [str(value_of(cells[key])) for key in sorted(cells) if isinstance(value_of(cells[key]), str)]
