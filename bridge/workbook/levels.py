"""A column's rows as levels, named as people see them."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from bridge.regression.spec import Levels
from bridge.workbook import kinds
from bridge.workbook.tables import DataColumn, State


def as_levels(column: DataColumn, rows: NDArray[np.intp], date1904: bool = False) -> Levels:
    """The levels of the given data rows (all of them must hold something); names sorted, codes (len(rows),)."""
    state = column.state[rows]
    if column.texts and (state == State.TEXT).all():
        return _from_texts([column.texts[at] or "" for at in rows.tolist()])
    if (state == State.NUMBER).all() or (state == State.DATE).all():
        return _from_numbers(column, rows, date1904)
    return _from_texts([kinds.level_text(column, at, date1904) or "" for at in rows.tolist()])


def _from_texts(texts: list[str]) -> Levels:
    names = tuple(sorted(set(texts)))
    codes = {name: code for code, name in enumerate(names)}
    return Levels(np.array([codes[text] for text in texts], dtype=np.intp), names)


def _from_numbers(column: DataColumn, rows: NDArray[np.intp], date1904: bool) -> Levels:
    """Each different number is named once; numbers that look the same are the same level."""
    _, first, inverse = np.unique(column.numbers[rows], return_index=True, return_inverse=True)
    shown = [kinds.level_text(column, int(rows[at]), date1904) or "" for at in first.tolist()]
    names = tuple(sorted(set(shown)))
    place = {name: code for code, name in enumerate(names)}
    codes = np.array([place[name] for name in shown], dtype=np.intp)
    return Levels(codes[inverse.ravel()], names)
