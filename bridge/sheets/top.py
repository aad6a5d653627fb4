"""The first lines of every result sheet: its title, what it is, when and from what it was fitted, and the seal."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from bridge.page.cells import Cell
from bridge.sheets import seal, style, words
from bridge.sheets.book import Book, ModelSheet
from bridge.sheets.paper import Paper

ROWS = 4  # title, what it is, seal, one line of air: the sheet's own matter starts at row 4
HEIGHTS: Mapping[int, float] = {0: 25.0, 1: 15.0, 2: 15.0}


def lines(book: Book, title: str, what: str, column: int = 0) -> dict[tuple[int, int], Cell]:
    """The three cells at the top of a sheet, in `column`, rows 0 to 2.

    `what` says in a sentence what the sheet is (or what to do on it); the fit's time and rows follow it.
    The texts run over the empty cells to their right.
    """
    return {
        (0, column): Cell(title, style.TITLE),
        (1, column): Cell(f"{words.sentence(what)} {provenance(book)}", style.SUBTITLE),
        (2, column): Cell(seal.formula(book), style.SEAL),
    }


def put(paper: Paper, book: Book, title: str, what: str, last: int) -> None:
    """The same lines on a sheet under way, the second wrapped across the columns to `last`; the next row is free."""
    paper.cells.update(lines(book, title, what))
    paper.heights.update(HEIGHTS)
    paper.row = 1
    paper.spread(str(paper.cells[(1, 0)].value), 0, last, replace(style.SUBTITLE, wrap=True))
    paper.row = ROWS


def provenance(book: Book) -> str:
    """When it was fitted, from how many rows of which sheet."""
    when = words.moment(book.fitted_at)
    fitted = [model for model, _ in book.fitted]
    if not fitted:
        return f"Nothing could be fitted on {when}; {book.title('fit request')} says why."
    return f"Fitted {when} from {words.listing(sources(fitted))}{_left_out(book, fitted)}."


def sources(models: list[ModelSheet]) -> list[str]:
    """Rows used and rows there, sheet by sheet: `117 of 120 rows of "Refits"`, `90 to 117 of 120 rows of …`."""
    counts: dict[str, list[int]] = {}
    totals: dict[str, int] = {}
    for model in models:
        if model.table is not None and model.taken is not None:
            counts.setdefault(model.table.sheet, []).append(len(model.taken.used))
            totals[model.table.sheet] = len(model.table.rows)
    return [_source(sheet, used, totals[sheet]) for sheet, used in counts.items()]


def _source(sheet: str, used: list[int], total: int) -> str:
    low, high = min(used), max(used)
    if low == high == total:
        return f'all {words.plural(total, "row")} of "{sheet}"' if total > 1 else f'1 row of "{sheet}"'
    span = words.number(low) if low == high else f"{words.number(low)} to {words.number(high)}"
    return f'{span} of {words.plural(total, "row")} of "{sheet}"'


def _left_out(book: Book, models: list[ModelSheet]) -> str:
    numbers = {len(model.taken.left_out) for model in models if model.taken is not None}
    if numbers <= {0}:
        return ""
    where = f'(see "{book.title("fit rows")}")'
    if len(numbers) == 1:
        return f"; {words.plural(numbers.pop(), 'row')} left out {where}"
    return f"; {words.number(min(numbers))} to {words.plural(max(numbers), 'row')} left out {where}"
