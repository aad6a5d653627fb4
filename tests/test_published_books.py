"""Published data typed into a workbook as a user would, fitted through the front door, read back from the sheets.

The data and their printed results stand in `tests/reference`, each with its source: NIST's Statistical Reference
Datasets (all eleven for linear regression) to every certified digit, the NIST/SEMATECH e-Handbook and the literature
as far as they are printed.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from bridge.regression.spec import ModelSpec, NumberTerm, Shape
from tests.books import fitted_book, status, table
from tests.reference import LITERATURE, STRD, PublishedFit, load
from tests.regression.test_published import agrees

FITS = {f"{fit.set_name}: {fit.model}": fit for file in (*STRD, *LITERATURE) for fit in load(file).fits}
# Anscombe's four are one set of columns with a column that tells them apart; typed as its own rows each.
_BY_KEY = {
    "residual_sd": "residual standard deviation",
    "r_squared": "R2",
}
_ANOVA = {
    "ss_regression": ("regression", "sum of squares"),
    "ms_regression": ("regression", "mean square"),
    "f": ("regression", "F"),
    "df_regression": ("regression", "degrees of freedom"),
    "ss_residual": ("residual", "sum of squares"),
    "ms_residual": ("residual", "mean square"),
    "df_residual": ("residual", "degrees of freedom"),
    "lack_of_fit_f": ("lack of fit", "F"),
    "ss_lack_of_fit": ("lack of fit", "sum of squares"),
    "ss_pure_error": ("pure error", "sum of squares"),
}


def entries(spec: ModelSpec) -> dict[str, object]:
    """The model as entries of the request grid."""
    shape = "" if spec.response_shape is Shape.AS_IS else f"{spec.response_shape.value} "
    asked: dict[str, object] = {spec.response: f"{shape}response"}
    for term in spec.terms:
        assert isinstance(term, NumberTerm)
        form = "" if term.shape is Shape.AS_IS else f"{term.shape.value} "
        asked[term.column] = f"{form}predictor" + (f" to power {term.degree}" if term.degree > 1 else "")
    if spec.weight:
        asked[spec.weight] = "weight"
    if not spec.intercept:
        asked["intercept"] = "no"
    return asked


def typed(case: PublishedFit) -> dict[str, list[object]]:
    """The columns as cells."""
    wanted = [case.spec.response, *(term.column for term in case.spec.terms), case.spec.weight]
    return {name: case.observations.numbers(name).tolist() for name in wanted if name}


@pytest.mark.parametrize("name", FITS)
def test_published_digits_on_the_sheets(name: str, tmp_path: Path) -> None:
    case = FITS[name]
    book = tmp_path / "book.xlsx"
    report = fitted_book(book, typed(case), {"A": entries(case.spec)})
    assert report.models[0].result is not None, status(book, "A")
    shown = table(book, "fit coefficients", "term", "A")
    printed = case.published
    for column, key in (("coefficient", "coefficients"), ("standard error", "standard_errors")):
        for label, text in printed.get(key, {}).items():
            assert agrees(float(shown[label][column]), text, case.digits), (label, column, shown[label][column], text)
    variation = table(book, "fit ANOVA", "source of variation", "A")
    for key, (source, column) in _ANOVA.items():
        if key in printed and not (key == "f" and printed[key] == "Infinity"):
            value = float(variation[source][column])
            assert agrees(value, str(printed[key]), case.digits), (key, value, printed[key])
    results = side_by_side(book)
    for key, label in _BY_KEY.items():
        if key in printed:
            assert agrees(float(results[label]), printed[key], case.digits), (key, results[label], printed[key])


def side_by_side(book: Path) -> dict[str, object]:
    """The table of models on `fit results`: label -> model A's figure."""
    return {label: next(iter([cells["A"]])) for label, cells in table(book, "fit results", "Side by side").items()}


def test_both_weights_of_the_pipeline_share_one_workbook(tmp_path: Path) -> None:
    """The unweighted and the weighted line of the Alaska pipeline, as two models of one request."""
    plain, _, weighted = load("alaska").fits
    book = tmp_path / "pipeline.xlsx"
    columns = typed(weighted)
    report = fitted_book(book, columns, {"plain": entries(plain.spec), "weighted": entries(weighted.spec)})
    assert [model.result is not None for model in report.models] == [True, True]
    for model, case in (("plain", plain), ("weighted", weighted)):
        shown = table(book, "fit coefficients", "term", model)
        for label, text in case.published["coefficients"].items():
            assert agrees(float(shown[label]["coefficient"]), text, case.digits)
