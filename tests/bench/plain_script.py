"""What somebody at home in Python would write for the same job: pandas reads, statsmodels fits, openpyxl writes.

Three models with coefficients, ANOVA, inflation factors, tests, influence and ten-fold cross-validation, and a line per
data row; the results go into the same workbook, so the workbook has to be loaded and saved as a whole. Written to be
quick: the studentised residuals in closed form, as statsmodels' own attribute fits once per row.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import statsmodels.api as sm
import statsmodels.formula.api as smf
from scipy import stats
from statsmodels.regression.linear_model import RegressionResultsWrapper
from statsmodels.stats.diagnostic import het_breuschpagan, linear_reset, normal_ad
from statsmodels.stats.outliers_influence import variance_inflation_factor
from statsmodels.stats.stattools import durbin_watson

from tests.bench.workbooks import SHEET


def formulas(columns: list[str]) -> dict[str, str]:
    """The request's three models in statsmodels' words."""
    xs = columns[3:]
    logs = " + ".join(f"np.log({x})" for x in xs)
    return {
        "A": f"y ~ {' + '.join(xs)} + C(kind)",
        "B": f"np.log(y) ~ {logs} + C(kind)",
        "C": f"np.log(y) ~ {logs} + C(kind) + C(kind):np.log(x1)",
    }


def run(path: Path) -> None:
    """Read, fit, examine, write."""
    data = pd.read_excel(path, sheet_name=SHEET).dropna()
    fits = {name: smf.ols(formula, data).fit() for name, formula in formulas(list(data.columns)).items()}
    book = openpyxl.load_workbook(path)
    for name, fit in fits.items():
        _put(book, f"coefficients {name}", _coefficients(fit))
        _put(book, f"ANOVA {name}", pd.concat([sm.stats.anova_lm(fit, typ=1), sm.stats.anova_lm(fit, typ=2)]))
        _put(book, f"diagnostics {name}", _diagnostics(fit, data, name))
    _put(book, "rows", pd.concat([_rows(fit, name) for name, fit in fits.items()], axis=1))
    book.save(path)


def _coefficients(fit: RegressionResultsWrapper) -> pd.DataFrame:
    table = pd.DataFrame({"coefficient": fit.params, "se": fit.bse, "t": fit.tvalues, "p": fit.pvalues})
    table[["low", "high"]] = fit.conf_int()
    table["VIF"] = [variance_inflation_factor(fit.model.exog, at) for at in range(fit.model.exog.shape[1])]
    return table


def _diagnostics(fit: RegressionResultsWrapper, data: pd.DataFrame, name: str) -> pd.DataFrame:
    normal = stats.shapiro(fit.resid) if len(fit.resid) <= 5000 else normal_ad(fit.resid.to_numpy())
    figures = {
        "R2": fit.rsquared,
        "adjusted R2": fit.rsquared_adj,
        "residual sd": fit.mse_resid**0.5,
        "AIC": fit.aic,
        "BIC": fit.bic,
        "spread p": het_breuschpagan(fit.resid, fit.model.exog)[1],
        "serial": durbin_watson(fit.resid),
        "form p": float(linear_reset(fit, power=3, use_f=True).pvalue),
        "normality p": normal[1],
        "cross-validated miss": _missed(fit, data, logged=name != "A"),
    }
    return pd.DataFrame({"value": figures})


def _missed(fit: RegressionResultsWrapper, data: pd.DataFrame, logged: bool) -> float:
    """Root mean square miss over ten folds, in original units."""
    x, y = fit.model.exog, fit.model.endog
    fold = np.random.default_rng(0).permutation(len(y)) % 10
    predicted = np.empty_like(y)
    for out in range(10):
        left = fold != out
        inner = sm.OLS(y[left], x[left]).fit()
        predicted[~left] = x[~left] @ inner.params
        if logged:
            predicted[~left] = np.exp(predicted[~left]) * np.mean(np.exp(inner.resid))
    return float(np.sqrt(np.mean((predicted - data["y"].to_numpy()) ** 2)))


def _rows(fit: RegressionResultsWrapper, name: str) -> pd.DataFrame:
    leverage = fit.get_influence().hat_matrix_diag
    internal = fit.resid / np.sqrt(fit.mse_resid * (1 - leverage))
    external = internal * np.sqrt((fit.df_resid - 1) / (fit.df_resid - internal**2))
    columns = {
        "fitted": fit.fittedvalues,
        "residual": fit.resid,
        "leverage": leverage,
        "internal": internal,
        "external": external,
        "Cook": internal**2 * leverage / (1 - leverage) / len(fit.params),
        "DFFITS": external * np.sqrt(leverage / (1 - leverage)),
    }
    return pd.DataFrame({f"{name} {label}": np.asarray(values) for label, values in columns.items()})


def _put(book: openpyxl.Workbook, name: str, table: pd.DataFrame) -> None:
    page = book.create_sheet(name)
    page.append(["", *table.columns])
    for row in table.itertuples():
        page.append([None if value != value else value for value in row])  # NaN: an empty cell


if __name__ == "__main__":
    run(Path(sys.argv[1]))
