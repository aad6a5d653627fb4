"""From the kernel and a covariance to the figures of a fit.

Log likelihood, AIC and BIC count the coefficients as parameters and not the residual variance; weighted fits add half
the sum of the logarithms of the weights: the conventions of statsmodels' OLS and WLS, so figures compare. They are on
the fitted scale: models of log y and of y are not comparable by them.
Leave-one-out R2 is 1 - PRESS / total (Allen 1974): each row predicted by the fit without it. It is NaN where a row
alone determines a coefficient (leverage 1), because no fit without it predicts it.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from bridge.regression.anova import ratio
from bridge.regression.covariance import CovarianceResult
from bridge.regression.kernel import Kernel
from bridge.regression.results import Collinearity, Fit
from bridge.regression.spec import Errors
from bridge.regression.tails import f_upper, t_quantile, t_two_sided

ALONE = 1e-10  # a leverage this near to 1 is 1

Array = NDArray[np.float64]


def make(kernel: Kernel, covariance: CovarianceResult, collinearity: Collinearity, errors: Errors, level: float) -> Fit:
    """All figures of the fit; `level` is the intervals' as a fraction."""
    ordinary = errors is Errors.ORDINARY
    standard_errors = kernel.standard_errors if ordinary else np.sqrt(np.diag(covariance.covariance))
    with np.errstate(divide="ignore", invalid="ignore"):
        t = kernel.coefficients / standard_errors
    half = t_quantile(level, covariance.df_interval) * standard_errors
    slopes = kernel.p - int(kernel.intercept)
    f, f_df = _f(kernel, slopes), (slopes, kernel.df_residual)
    log_likelihood = _log_likelihood(kernel)
    return Fit(
        n=kernel.n,
        df_residual=kernel.df_residual,
        df_interval=covariance.df_interval,
        coefficients=kernel.coefficients,
        standard_errors=standard_errors,
        t=t,
        p=t_two_sided(t, covariance.df_interval),
        low=kernel.coefficients - half,
        high=kernel.coefficients + half,
        standardised=_standardised(kernel),
        vif=_vif(kernel, collinearity),
        r_inverse=kernel.r_inverse,
        covariance=covariance.covariance,
        covariance_factor=covariance.factor,
        residual_sd=kernel.residual_sd,
        r_squared=ratio(kernel.sums.regression, kernel.sums.total),
        adjusted_r_squared=_adjusted(kernel),
        loo_r_squared=_left_out(kernel),
        ss_residual=kernel.rss,
        ss_total=kernel.tss,
        f=f,
        f_p=f_upper(f, f_df),
        f_df=f_df,
        robust_f=covariance.robust_f,
        robust_f_p=covariance.robust_f_p,
        log_likelihood=log_likelihood,
        aic=-2 * log_likelihood + 2 * kernel.p,
        bic=-2 * log_likelihood + float(np.log(kernel.n)) * kernel.p,
        fitted=kernel.fitted,
        residual=kernel.residual,
        weights=kernel.weights,
        robust_weights=kernel.robust_weights,
        condition_number=kernel.condition_number,
        digits=kernel.digits,
        coefficients_low=kernel.coefficients_low,
    )


def _f(kernel: Kernel, slopes: int) -> float:
    if slopes == 0:
        return float("nan")
    return ratio(kernel.sums.regression / slopes, kernel.sums.residual / kernel.df_residual)


def _adjusted(kernel: Kernel) -> float:
    """Wherry's adjustment in the usual form: mean squares for sums of squares."""
    error, total = kernel.sums.residual / kernel.df_residual, kernel.sums.total / (kernel.n - int(kernel.intercept))
    return float(1 - error / total)  # type: ignore[operator]  # both Decimal or both float


def _left_out(kernel: Kernel) -> float:
    left = 1 - kernel.leverage
    if left.min() < ALONE:
        return float("nan")
    squares = (kernel.residual / left) ** 2
    press = float(np.sum(squares if kernel.weights is None else squares * kernel.weights))
    return 1 - press / kernel.tss


def _standardised(kernel: Kernel) -> Array:
    """Coefficients in standard deviations of response per standard deviation of column; NaN for the intercept."""
    found = kernel.coefficients * np.sqrt(kernel.column_ss / kernel.tss)
    return np.where([bool(column.factors) for column in kernel.columns], found, np.nan)


def _vif(kernel: Kernel, collinearity: Collinearity) -> Array:
    of_term = {term.term: term.scaled**2 for term in collinearity.terms}
    return np.array([of_term.get(column.term, np.nan) for column in kernel.columns])


def _log_likelihood(kernel: Kernel) -> float:
    half = kernel.n / 2
    with np.errstate(divide="ignore"):
        found = -half * (np.log(kernel.rss) + 1 + np.log(np.pi / half))
    return float(found if kernel.weights is None else found + 0.5 * np.sum(np.log(kernel.weights)))
