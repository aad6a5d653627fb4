"""A whole sheet, laid out and ready to become parts of a package."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from bridge.page.cells import Cell, Format
from bridge.page.charts import Chart


@dataclass(frozen=True, slots=True)
class BlockColumn:
    """One column of a dense block.

    `values` is a float array (NaN: an empty cell) or a sequence of texts and numbers (empty text: an empty cell).
    With `formula`, a template in which `{row}` stands for the one-based sheet row and `{key}` for the
    matching entry of `keys`, each cell is a live formula whose value is `values`; an empty text is a value then.
    """

    values: NDArray[np.float64] | Sequence[str | float]
    format: Format
    formula: str | None = None
    keys: Sequence[int] | NDArray[np.int64] | None = None


@dataclass(frozen=True, slots=True)
class Block:
    """Many like rows, written from one template: `columns` side by side from (row, column) down."""

    row: int
    column: int
    columns: tuple[BlockColumn, ...]


@dataclass(frozen=True, slots=True)
class Merge:
    """Cells merged into one."""

    first: tuple[int, int]
    last: tuple[int, int]


@dataclass(frozen=True, slots=True)
class DropDown:
    """A list offered in a range of cells; other text stays allowed unless `strict`.

    `choices` is a list of texts, or a reference (without `=`) to cells that hold them.
    A list of texts may be at most 255 characters joined with commas; a text with a comma needs a reference.
    """

    first: tuple[int, int]
    last: tuple[int, int]
    choices: tuple[str, ...] | str
    strict: bool = False
    prompt_title: str = ""
    prompt: str = ""


@dataclass(frozen=True, slots=True)
class Highlight:
    """A conditional format: where `formula` (relative to the range's first cell) is true, `format` shows.

    Of the format only bold, italic, color, fill and border_bottom count.
    """

    first: tuple[int, int]
    last: tuple[int, int]
    formula: str
    format: Format


@dataclass(frozen=True, slots=True)
class Link:
    """A cell that leads to another place of the same workbook (`'Refits'!A7`)."""

    row: int
    column: int
    location: str
    tooltip: str = ""


@dataclass(frozen=True, slots=True)
class Sheet:
    """One of our sheets.

    `widths` are in characters of the default font, `heights` in points; both zero-based.
    `freeze` is the first unfrozen (row, column). `print_titles` is (first, last) row repeated on each page,
    `title_columns` (first, last) column. `print_area` is (first, last) position, `more_print_areas` further ones;
    each begins a new page. `fit_width` and `fit_height` are pages to print on, 0 means as many as needed.
    `hidden_columns`/`hidden_rows` are helper cells nobody needs to see. `name` is our name for the sheet
    (`fit rows`); `title` is what its tab says where the user renamed it (empty: the same).
    """

    name: str
    cells: Mapping[tuple[int, int], Cell]
    title: str = ""
    blocks: tuple[Block, ...] = ()
    widths: Mapping[int, float] = field(default_factory=dict)
    heights: Mapping[int, float] = field(default_factory=dict)
    merges: tuple[Merge, ...] = ()
    drop_downs: tuple[DropDown, ...] = ()
    highlights: tuple[Highlight, ...] = ()
    links: tuple[Link, ...] = ()
    charts: tuple[Chart, ...] = ()
    freeze: tuple[int, int] | None = None
    print_titles: tuple[int, int] | None = None
    print_area: tuple[tuple[int, int], tuple[int, int]] | None = None
    title_columns: tuple[int, int] | None = None
    more_print_areas: tuple[tuple[tuple[int, int], tuple[int, int]], ...] = ()
    landscape: bool = True
    fit_width: int = 1
    fit_height: int = 0
    tab_color: str | None = None
    hidden_columns: frozenset[int] = frozenset()
    hidden_rows: frozenset[int] = frozenset()
    right_to_left: bool = False


@dataclass(frozen=True, slots=True)
class DefinedName:
    """A workbook-level name and what it refers to (a reference or a formula, without `=`)."""

    name: str
    refers_to: str
    hidden: bool = False
    comment: str = ""
