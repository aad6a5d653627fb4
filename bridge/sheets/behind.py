"""The figures behind the charts that no table of ours holds: a tidy area to the right of `fit diagnostics`."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from bridge.page.cells import reference
from bridge.page.sheet import Block, BlockColumn
from bridge.sheets import axes, measure, style
from bridge.sheets.paper import Paper

FIRST_COLUMN = 10
HEADER_ROW = 5
FIRST_ROW = HEADER_ROW + 1
WIDTH = 11.0

_SMALL = replace(style.BODY, size=8.0, color=style.QUIET, align="right")
_SMALL_HEAD = replace(_SMALL, border_bottom="thin")


@dataclass(frozen=True, slots=True)
class Points:
    """Numbers in cells: the absolute reference and the values there now (None: an empty cell)."""

    ref: str
    values: tuple[float | None, ...]


@dataclass
class Behind:
    """Columns of figures as charts ask for them, left to right, each under the name of what it belongs to."""

    sheet: str
    columns: list[tuple[str, str, tuple[float | None, ...]]] = field(default_factory=list)

    def add(self, owner: str, title: str, values: Iterable[float | None]) -> Points:
        """One more column; where its cells stand."""
        numbers = np.array(values if isinstance(values, np.ndarray) else list(values), dtype=np.float64)  # None: NaN
        kept: tuple[float | None, ...] = tuple(numbers.tolist())
        if not np.isfinite(numbers).all():
            kept = tuple(value if known else None for value, known in zip(kept, np.isfinite(numbers), strict=True))
        column = FIRST_COLUMN + len(self.columns)
        self.columns.append((owner, title, kept))
        last = FIRST_ROW + max(len(kept), 1) - 1
        return Points(reference(self.sheet, (FIRST_ROW, column), (last, column)), kept)


def put_down(paper: Paper, columns: Sequence[tuple[str, str, tuple[float | None, ...]]]) -> None:
    """Write the area into `fit diagnostics`: a heading, owners, titles, and the columns as dense blocks."""
    if not columns:
        return
    quiet = replace(style.SUBTITLE, size=8.0)
    paper.put(FIRST_COLUMN, "figures behind the charts; the charts read them from here", quiet, HEADER_ROW - 2)
    owner_before = None
    for at, (owner, title, values) in enumerate(columns):
        column = FIRST_COLUMN + at
        title = axes.shortened(title, 40)
        paper.widths[column] = max(WIDTH, measure.units(title, _SMALL.size))
        if owner != owner_before:
            paper.put(column, owner, replace(_SMALL, align="left", bold=True), HEADER_ROW - 1)
        owner_before = owner
        paper.put(column, title, _SMALL_HEAD, HEADER_ROW)
        numbers = np.array([np.nan if value is None else value for value in values])
        paper.blocks.append(
            Block(FIRST_ROW, column, (BlockColumn(numbers, replace(_SMALL, number_format="0.0000E+00")),))
        )
