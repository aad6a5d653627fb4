"""Workbook-level names for people's own formulas: `fit_A_residual_sd` and the like, renewed at each fit.

A model that could not be fitted this time keeps its names; they are the spreadsheet's own "not available" meanwhile, so
that formulas say so instead of breaking.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping

from bridge.page.cells import reference
from bridge.page.sheet import DefinedName
from bridge.regression.results import ModelResult
from bridge.sheets import anova, coefficients, estimates, history, live, rows, seal
from bridge.sheets.book import Book, ModelSheet

Span = tuple[tuple[int, int], tuple[int, int]]
NOT_AVAILABLE = "#N/A"
FIGURES = (
    "n",
    "df_residual",
    "r_squared",
    "adjusted_r_squared",
    "loo_r_squared",
    "residual_sd",
    "f",
    "f_p",
    "cv_rmse",
    "aic",
    "bic",
)
TABLES = ("coefficients", "anova", "rows", "estimates")
KEYS = (*FIGURES, *TABLES, "seal", "fitted_at")


def defined_names(book: Book) -> tuple[DefinedName, ...]:
    """Every name of every model asked for."""
    tables = _tables(book)
    found: dict[str, DefinedName] = {}
    for model in book.models:
        meanings = dict(_meanings(book, tables, model))
        for key in KEYS:
            name = f"fit_{model.name}_{key}"
            found.setdefault(name.casefold(), DefinedName(name, meanings.get(key, NOT_AVAILABLE)))
    return tuple(found.values())


def _tables(book: Book) -> Mapping[str, tuple[str, Mapping[str, Span]]]:
    """For each key that names a table its sheet, and where each model's stands, header row included."""
    return {
        "coefficients": ("fit coefficients", {name: at.table for name, at in coefficients.places(book).items()}),
        "anova": ("fit ANOVA", anova.places(book)),
        "rows": ("fit rows", rows.places(book)),
        "estimates": ("fit estimates", estimates.places(book)),
    }


def _meanings(
    book: Book, tables: Mapping[str, tuple[str, Mapping[str, Span]]], model: ModelSheet
) -> Iterator[tuple[str, str]]:
    """What the names of a model stand for; nothing for one that was not fitted but a broken seal."""
    if model.result is None:
        yield "seal", "FALSE"
        return
    for key, value in zip(FIGURES, _figures(model.result), strict=True):
        yield key, live.number(value) if math.isfinite(value) else NOT_AVAILABLE
    for key in TABLES:
        sheet, spans = tables[key]
        if model.name in spans:
            yield key, reference(book.title(sheet), *spans[model.name])
    yield "seal", seal.of_model(book, model.name)
    yield "fitted_at", repr(history.moment(book.fitted_at, model))


def _figures(result: ModelResult) -> tuple[float, ...]:
    fit = result.fit
    found = (
        fit.n,
        fit.df_residual,
        fit.r_squared,
        fit.adjusted_r_squared,
        fit.loo_r_squared,
        fit.residual_sd,
        fit.f,
        fit.f_p,
        result.cross_validation.rmse,
        fit.aic,
        fit.bic,
    )
    return tuple(float(value) for value in found)
