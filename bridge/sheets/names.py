"""Workbook-level names for people's own formulas: `fit_A_residual_sd` and the like, renewed at each fit."""

from __future__ import annotations

import math
from collections.abc import Iterator

from bridge.page.cells import reference, text_literal
from bridge.page.sheet import DefinedName
from bridge.regression.results import ModelResult
from bridge.sheets import anova, coefficients, estimates, rows, seal, words
from bridge.sheets.book import Book, ModelSheet

Span = tuple[tuple[int, int], tuple[int, int]]


def defined_names(book: Book) -> tuple[DefinedName, ...]:
    """Every name of every fitted model."""
    tables = {
        "coefficients": ("fit coefficients", {name: at.table for name, at in coefficients.places(book).items()}),
        "anova": ("fit ANOVA", anova.places(book)),
        "rows": ("fit rows", rows.places(book)),
        "estimates": ("fit estimates", estimates.places(book)),
    }
    found: list[DefinedName] = []
    for model, result in book.fitted:
        found += [DefinedName(_name(model, key), _literal(value)) for key, value in _figures(result)]
        found.append(DefinedName(_name(model, "fitted_at"), text_literal(words.moment(book.fitted_at))))
        found.append(DefinedName(_name(model, "seal"), seal.of_model(book, model.name)))
        for key, (sheet, spans) in tables.items():
            if model.name in spans:
                found.append(DefinedName(_name(model, key), reference(book.title(sheet), *spans[model.name])))
    return tuple(found)


def _name(model: ModelSheet, key: str) -> str:
    return f"fit_{model.name}_{key}"


def _figures(result: ModelResult) -> Iterator[tuple[str, float]]:
    fit = result.fit
    yield "n", fit.n
    yield "df_residual", fit.df_residual
    yield "r_squared", fit.r_squared
    yield "adjusted_r_squared", fit.adjusted_r_squared
    yield "loo_r_squared", fit.loo_r_squared
    yield "residual_sd", fit.residual_sd
    yield "f", fit.f
    yield "f_p", fit.f_p
    yield "cv_rmse", result.cross_validation.rmse
    yield "aic", fit.aic
    yield "bic", fit.bic


def _literal(value: float) -> str:
    """A constant; a figure that does not exist is the spreadsheet's own "not available"."""
    return repr(float(value)) if math.isfinite(value) else "#N/A"
