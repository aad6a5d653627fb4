"""All eight sheets together, in the order of their tabs."""

from __future__ import annotations

from collections.abc import Mapping

from bridge.page.sheet import DefinedName, Sheet
from bridge.sheets import anova, coefficients, diagnostics, estimates, history, names, reasons, request, results, rows
from bridge.sheets.book import OUR_SHEETS, Book
from bridge.workbook.contents import Choices, HistoryLine, NewCase, RawSheet
from bridge.workbook.request import Request

_RESULTS = (results, coefficients, anova, diagnostics, rows, estimates, history)


WITH_ENTRIES = ("fit request", "fit estimates")


def expected(asked: Request) -> frozenset[str]:
    """The sheets that a workbook with this request has after a fit; before any model is asked for, only the request."""
    return frozenset(OUR_SHEETS if asked.models else OUR_SHEETS[:1])


def lay_out(book: Book) -> tuple[Sheet, ...]:
    """Every sheet that the book calls for: the request alone at first contact, then all of them."""
    if not book.models:
        return (request.lay_out(book),)
    return (request.lay_out(book), *(sheet.lay_out(book) for sheet in _RESULTS))


def defined_names(book: Book) -> tuple[DefinedName, ...]:
    """The names for people's own formulas."""
    return names.defined_names(book)


def cases(own: Mapping[str, RawSheet]) -> tuple[NewCase, ...]:
    """The new cases that the user typed."""
    raw = own.get("fit estimates")
    return estimates.read_cases(raw) if raw is not None else ()


def choices(own: Mapping[str, RawSheet]) -> Choices:
    """What the user chose beside the cases."""
    raw = own.get("fit estimates")
    return reasons.read_choices(raw) if raw is not None else Choices()


def history_lines(own: Mapping[str, RawSheet]) -> tuple[HistoryLine, ...]:
    """The fits so far."""
    raw = own.get("fit history")
    return history.read(raw) if raw is not None else ()


def typed(own: Mapping[str, RawSheet]) -> tuple[object, ...]:
    """What the user typed on our result sheets, as values that a digest can read."""
    return (*cases(own), choices(own))
