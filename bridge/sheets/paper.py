"""A sheet while it is being laid out from top to bottom; `sheet` makes the frozen value of it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

from bridge.page.cells import Cell, Format, Value
from bridge.page.charts import Chart
from bridge.page.sheet import Block, DropDown, Highlight, Link, Merge, Sheet
from bridge.sheets import measure, style

ROW_POINTS = 15.0
_HARDLY_BEGUN = 0.15


@dataclass
class Paper:
    """Cells, merges, heights and charts as they are put down; `row` is the next free row.

    `widths` (column units, zero-based columns) are known from the start: heights follow from them. `pages` are the
    rows that begin a printed page of their own.
    """

    name: str
    widths: dict[int, float]
    row: int = 0
    cells: dict[tuple[int, int], Cell] = field(default_factory=dict)
    blocks: list[Block] = field(default_factory=list)
    merges: list[Merge] = field(default_factory=list)
    heights: dict[int, float] = field(default_factory=dict)
    links: list[Link] = field(default_factory=list)
    charts: list[Chart] = field(default_factory=list)
    highlights: list[Highlight] = field(default_factory=list)
    drop_downs: list[DropDown] = field(default_factory=list)
    pages: list[int] = field(default_factory=lambda: [0])

    def put(self, column: int, value: Value, look: Format, row: int | None = None) -> None:
        """One cell, in the current row unless told otherwise; the row is not left."""
        self.cells[(self.row if row is None else row, column)] = Cell(value, look)

    def line(self, values: Sequence[Value], looks: Sequence[Format], column: int = 0) -> None:
        """A row of cells from `column` on, as high as its wrapped texts need; then the next row."""
        for at, (value, look) in enumerate(zip(values, looks, strict=True)):
            self.put(column + at, value, look)
            if look.wrap and isinstance(value, str):
                self.grow(value, column + at, column + at, look)
        self.row += 1

    def paragraph(self, text: str, first: int, last: int, look: Format = style.PARAGRAPH, gap: float = 4.0) -> None:
        """A wrapped text across the columns `first` to `last`, `gap` points of air under it; then the next row."""
        self.spread(text, first, last, look)
        self.heights[self.row] = max(self.heights[self.row], self._height(text, first, last, look) + gap)
        self.row += 1

    def spread(self, text: str, first: int, last: int, look: Format) -> None:
        """A text in the cells `first` to `last` of the current row, merged; the row grows with it and is not left."""
        for column in range(first, last + 1):
            self.put(column, text if column == first else None, look)
        if last > first:
            self.merges.append(Merge((self.row, first), (self.row, last)))
        self.grow(text, first, last, look)

    def beside(self, text: str, first: int, last: int, row: int, look: Format = style.PARAGRAPH) -> int:
        """A text in the columns `first` to `last` over as many rows from `row` on as it needs, whatever their heights.

        Returns the row after it. Rows that something else has laid out keep their heights.
        """
        wanted, end = self._height(text, first, last, look), row
        while wanted > 0:
            wanted -= self.heights.get(end, ROW_POINTS)
            end += 1
        for at in range(row, end):
            for column in range(first, last + 1):
                self.put(column, text if (at, column) == (row, first) else None, look, at)
        if (end - 1, last) != (row, first):
            self.merges.append(Merge((row, first), (end - 1, last)))
        return end

    def heading(self, text: str, column: int = 0, look: Format = style.HEADING) -> None:
        """A heading with its own height; then the next row."""
        self.put(column, text, look)
        self.heights[self.row] = max(self.heights.get(self.row, ROW_POINTS), look.size * 1.6)
        self.row += 1

    def gap(self, points: float = 8.0) -> None:
        """A narrow empty row."""
        self.heights[self.row] = points
        self.row += 1

    def grow(self, text: str, first: int, last: int, look: Format) -> None:
        """Make the current row high enough for a text wrapped in the columns `first` to `last`."""
        self.heights[self.row] = max(self.heights.get(self.row, ROW_POINTS), self._height(text, first, last, look))

    def span(self, first: int, last: int) -> float:
        """Width of the columns `first` to `last` together, in column units."""
        return sum(self.widths.get(column, 8.43) for column in range(first, last + 1))

    def link(self, column: int, location: str, tooltip: str = "") -> None:
        """Make the current row's cell in `column` lead to `location`."""
        self.links.append(Link(self.row, column, location, tooltip))

    def points(self, first: int, last: int) -> float:
        """Height of the rows `first` to `last` (not included) in points."""
        return sum(self.heights.get(row, ROW_POINTS) for row in range(first, last))

    def new_page(self) -> None:
        """What follows is printed on a page of its own."""
        if self.row not in self.pages:
            self.pages.append(self.row)

    def room(self, points: float, page: float) -> None:
        """Begin a new page where `points` more do not go on one of `page` points any more, but on a new one would."""
        used = self.points(self.pages[-1], self.row)
        if points <= page < used + points and used > _HARDLY_BEGUN * page:
            self.new_page()

    def sheet(self, last_column: int, **rest: Any) -> Sheet:
        """The finished sheet, printed as far as `last_column`, page by page; `rest` are further fields of `Sheet`."""
        ends = [row - 1 for row in self.pages[1:]] + [max(self.row - 1, self.pages[-1])]
        area, *more = (((first, 0), (last, last_column)) for first, last in zip(self.pages, ends, strict=True))
        return Sheet(
            print_area=area,
            more_print_areas=tuple(more),
            name=self.name,
            cells=self.cells,
            blocks=tuple(self.blocks),
            widths=self.widths,
            heights=self.heights,
            merges=tuple(self.merges),
            links=tuple(self.links),
            charts=tuple(self.charts),
            highlights=tuple(self.highlights),
            drop_downs=tuple(self.drop_downs),
            **rest,
        )

    def _height(self, text: str, first: int, last: int, look: Format) -> float:
        return measure.height(text, self.span(first, last), look.size, look.bold)
