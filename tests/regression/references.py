"""Every figure of the examination beside the same figure from a general library, for one fitted problem.

statsmodels 0.14 and later, scipy, scikit-learn; what these lack is worked out here from its definition on another
route (said at each). `DEFINITIONS` lists where a library's definition is another one than ours, and what is compared
in its stead. Weighted fits: the libraries are given the rows times the roots of their weights.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
import scipy.integrate
import scipy.linalg
import scipy.optimize
import scipy.stats
import statsmodels.api as sm
from sklearn.linear_model import LinearRegression
from sklearn.model_selection import PredefinedSplit, cross_val_predict
from statsmodels.stats.diagnostic import acorr_breusch_godfrey, het_breuschpagan, het_white, linear_reset, normal_ad
from statsmodels.stats.outliers_influence import OLSInfluence, outlier_test, variance_inflation_factor
from statsmodels.stats.stattools import durbin_watson

from bridge.regression import inverse, nested
from bridge.regression.core import fit_model
from bridge.regression.normality import anderson_darling, anderson_p
from bridge.regression.results import Check, ModelResult
from bridge.regression.spec import Errors, FitBy, Levels, ModelSpec, NumberTerm, Observations, Shape

LAGS = 3

DEFINITIONS = (
    "Breusch-Godfrey without an intercept: statsmodels adds a constant to the auxiliary regression, Breusch (1978) "
    "and Godfrey (1978) do not; compared by the definition.",
    "Koenker's and White's tests without an intercept: statsmodels refuses; both authors' auxiliary regressions have "
    "a constant; compared with statsmodels' on the columns and a constant.",
    "Koenker's, White's, Breusch-Godfrey's tests and RESET of weighted fits: statsmodels leaves the weights to the "
    "caller. Here residuals are times the roots of the weights; the columns too, but for Koenker's and White's test, "
    "which look how the spread goes with the columns as they are.",
    "Influence of weighted fits: statsmodels' measures for WLS mix weighted and unweighted residuals; compared with "
    "OLS on the rows times the roots of their weights, which is the same fit.",
    "Shapiro-Wilk: scipy's normal quantiles inside are those of algorithm AS 111, good to about 9 digits, ours to 15 "
    "(with those of AS 111 ours gives scipy's W to 1e-15); p follows from the logarithm of 1 - W, where that shows: W "
    "is compared to 1e-8, p to 1e-5.",
    "Anderson-Darling: statsmodels loses the digits of rows far out in the upper tail; A2 is compared with scipy's, p "
    "with statsmodels' where A2 agrees.",
    "Durbin-Watson's p: in none of the libraries; compared with Imhof's integral by scipy's adaptive quadrature in "
    "another variable, over the eigenvalues from another basis (to 1e-12 absolutely).",
    "GVIF: in none of the libraries; by Fox & Monette's (1992) determinants of correlation matrices. VIF of single "
    "columns: statsmodels, not standardised first, so that without an intercept both are about zero.",
    "Condition indexes and variance shares: by the singular values of the scaled columns themselves (numpy).",
    "Covariances: off the diagonal relative to the product of the two standard errors.",
    "Robust F: statsmodels' f_test of all slopes with the same covariance; grouped errors on groups - 1 degrees of "
    "freedom, as statsmodels has it with use_t.",
    "Box-Cox: in none of the libraries for a regression; the profile from numpy's residual sums, its maximum and its "
    "crossings by scipy.optimize (compared to 1e-6: a maximum is no sharper than that in doubles). Without an "
    "intercept the response is taken over its geometric mean, for otherwise the power depends on its unit "
    "(Schlesselman 1971).",
    "RESET: statsmodels' linear_reset adds the raw powers of the fitted values, which nearly depend on the columns: "
    "compared with it to 1e-6 where they do not too nearly, and to 1e-9 with statsmodels' partial F for powers about "
    "the fitted values' middle, which span the same.",
)


@dataclass(frozen=True)
class Compared:
    """A figure, ours and theirs, and the relative difference that is allowed.

    Relative to each number, or to the share `floor` of the largest of its kind where that is more.
    """

    figure: str
    ours: object
    theirs: object
    allowed: float = 1e-9
    floor: float = 1e-3

    @property
    def difference(self) -> float:
        """The largest."""
        a, b = np.atleast_1d(np.asarray(self.ours, float)), np.atleast_1d(np.asarray(self.theirs, float))
        same = (a == b) | (np.isnan(a) & np.isnan(b))
        with np.errstate(invalid="ignore"):
            scale = np.maximum(np.abs(b), self.floor * np.nanmax(np.abs(b), initial=0.0))
            apart = np.where(same, 0.0, np.abs(a - b) / scale)
        return float("inf") if np.isnan(apart).any() else float(apart.max(initial=0.0))


@dataclass(frozen=True)
class Case:
    """A problem, fitted by us and by statsmodels; `x`, `y` times the roots `root` of the weights.

    The libraries get the columns over their `lengths`, which spares them rounding errors and changes nothing else.
    """

    spec: ModelSpec
    observations: Observations
    result: ModelResult
    root: np.ndarray
    lengths: np.ndarray
    x: np.ndarray
    y: np.ndarray
    theirs: object

    @property
    def residual(self) -> np.ndarray:
        return self.theirs.resid


def compare(spec: ModelSpec, observations: Observations) -> Iterator[Compared]:
    """All figures of one problem (least squares)."""
    result = fit_model(spec, observations)
    root = np.ones(observations.n) if spec.weight is None else np.sqrt(observations.numbers(spec.weight))
    y = result.fit.fitted + result.fit.residual
    x = result.design.matrix * root[:, None]
    lengths = np.sqrt(np.sum(x**2, axis=0))
    theirs = sm.OLS(y * root, x / lengths, hasconst=spec.intercept).fit()
    case = Case(spec, observations, result, root, lengths, x / lengths, y * root, theirs)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        for part in (_covariances, _influence, _spread, _independence, _form, _normality, _overlap, _left_out):
            yield from part(case)
        for part in (_resistant, _nested, _inverse, _box_cox):
            yield from part(case)


def check(result: ModelResult, key: str) -> Check:
    return next(one for one in result.checks if one.key == key)


# --- covariances ---------------------------------------------------------------------------------------


def _covariances(case: Case) -> Iterator[Compared]:
    column = case.observations.columns["group"]
    groups = column.codes if isinstance(column, Levels) else column
    order = np.argsort(case.observations.numbers("time"), kind="stable")
    turned = sm.OLS(case.y[order], case.x[order], hasconst=case.spec.intercept)
    small = sm.OLS(case.y, case.x, hasconst=case.spec.intercept)
    kinds = {
        Errors.ORDINARY: small.fit(),
        Errors.UNEVEN_SPREAD: small.fit(cov_type="HC3", use_t=True),
        Errors.GROUPED: small.fit(cov_type="cluster", cov_kwds={"groups": groups}, use_t=True),
        Errors.SERIAL: turned.fit(cov_type="HAC", cov_kwds={"maxlags": LAGS, "use_correction": True}, use_t=True),
    }
    for errors, theirs in kinds.items():
        spec = replace(case.spec, errors=errors, group="group", order="time", lags=LAGS)
        fit = fit_model(spec, case.observations).fit
        scale = np.sqrt(np.outer(np.diag(theirs.cov_params()), np.diag(theirs.cov_params())))
        unit = np.outer(case.lengths, case.lengths) / scale
        yield Compared(f"covariance, {errors}", fit.covariance * unit, theirs.cov_params() / scale, floor=1.0)
        from_factor = fit.covariance_factor @ fit.covariance_factor.T
        yield Compared(
            f"covariance from its factor, {errors}", from_factor * unit, theirs.cov_params() / scale, floor=1.0
        )
        yield Compared(f"standard errors, {errors}", fit.standard_errors, theirs.bse / case.lengths)
        yield Compared(f"t, {errors}", fit.t, theirs.tvalues)
        yield Compared(f"p of t, {errors}", _not_tiny(fit.p), _not_tiny(theirs.pvalues))
        low, high = theirs.conf_int(1 - spec.level).T
        ends = np.concatenate([low / case.lengths, high / case.lengths])
        yield Compared(f"interval, {errors}", np.concatenate([fit.low, fit.high]), ends)
        if errors is not Errors.ORDINARY:
            slopes = np.eye(len(fit.coefficients))[int(spec.intercept) :]
            f = theirs.f_test(slopes)
            if fit.df_interval < len(slopes):
                assert fit.robust_f is None
                continue
            yield Compared(f"robust F, {errors}", fit.robust_f, f.fvalue)
            yield Compared(f"p of robust F, {errors}", _not_tiny(fit.robust_f_p), _not_tiny(f.pvalue))


def _not_tiny(p: object) -> np.ndarray:
    """p values below 1e-12 are all the same."""
    return np.maximum(np.asarray(p, float), 1e-12)


# --- case by case ----------------------------------------------------------------------------------------


def _influence(case: Case) -> Iterator[Compared]:
    ours, theirs = case.result.influence, OLSInfluence(case.theirs)
    yield Compared("leverage", ours.leverage, theirs.hat_matrix_diag)
    yield Compared("studentised residuals, internal", ours.internal, theirs.resid_studentized_internal)
    yield Compared("studentised residuals, external", ours.external, theirs.resid_studentized_external)
    yield Compared("Cook's distance", ours.cooks_distance, theirs.cooks_distance[0])
    yield Compared("DFFITS", ours.dffits, theirs.dffits[0])
    yield Compared("DFBETAS", ours.dfbetas, theirs.dfbetas, floor=1e-2)
    table = np.asarray(outlier_test(case.theirs))
    at = int(np.argmax(np.abs(table[:, 0])))
    assert ours.outlier_index == at
    yield Compared("outlier p, Bonferroni", _not_tiny(ours.outlier_p), _not_tiny(table[at, 2]))


# --- tests -------------------------------------------------------------------------------------------------


def _spread(case: Case) -> Iterator[Compared]:
    x = case.result.design.matrix
    slopes = x[:, int(case.spec.intercept) :]
    columns = np.column_stack([np.ones(len(x)), (slopes - slopes.mean(axis=0)) / slopes.std(axis=0)])
    lagrange, p, *_ = het_breuschpagan(case.residual, columns)
    ours = check(case.result, "spread")
    yield Compared("Koenker", ours.statistic, lagrange)
    yield Compared("Koenker, p", ours.p, p)
    ours = check(case.result, "spread_any_form")
    if ours.method == "White":
        lagrange, p, *_ = het_white(case.residual, columns)
        yield Compared("White", ours.statistic, lagrange)
        yield Compared("White, p", ours.p, p)
    else:
        fitted = case.result.fit.fitted
        theirs = sm.OLS(case.residual**2, np.column_stack([np.ones(len(x)), fitted, fitted**2])).fit()
        yield Compared("White, special form", ours.statistic, len(x) * theirs.rsquared)
        yield Compared("White, special form, p", ours.p, scipy.stats.chi2.sf(len(x) * theirs.rsquared, 2))


def _independence(case: Case) -> Iterator[Compared]:
    spec = replace(case.spec, order="time", lags=LAGS)
    result = fit_model(spec, case.observations)
    order = np.argsort(case.observations.numbers("time"), kind="stable")
    e, x = case.residual[order], case.x[order]
    ours = check(result, "serial")
    yield Compared("Durbin-Watson", ours.statistic, durbin_watson(e))
    p = durbin_watson_p(float(durbin_watson(e)), x)
    yield Compared("Durbin-Watson, p", ours.p, p if abs(ours.p - p) > 1e-12 else ours.p)
    godfrey = check(result, "serial_order")
    if case.spec.intercept and case.spec.weight is None:
        theirs = sm.OLS(case.y[order], x).fit()
        lagrange, p, *_ = acorr_breusch_godfrey(theirs, LAGS)
    else:
        lagged = np.column_stack([np.concatenate([np.zeros(k), e[:-k]]) for k in range(1, LAGS + 1)])
        rest = e - np.column_stack([x, lagged]) @ np.linalg.lstsq(np.column_stack([x, lagged]), e, rcond=None)[0]
        lagrange = len(e) * (1 - rest @ rest / (e @ e))
        p = scipy.stats.chi2.sf(lagrange, LAGS)
    yield Compared("Breusch-Godfrey", godfrey.statistic, lagrange)
    yield Compared("Breusch-Godfrey, p", godfrey.p, p)


def durbin_watson_p(d: float, x: np.ndarray) -> float:
    """Two-sided, by Imhof's (1961) integral in the logarithm of its variable; eigenvalues beyond the columns of x."""
    beyond = scipy.linalg.null_space(x.T)
    steps = np.diff(beyond, axis=0)
    weights = np.linalg.eigvalsh(steps.T @ steps) - d

    def integrand(log_u: float) -> float:
        products = weights * np.exp(log_u)
        angle = np.sum(np.arctan(products)) / 2
        return float(np.sin(angle) * np.exp(-np.sum(np.log1p(products**2)) / 4))

    pieces = [-50.0, -20.0, -8.0, -6.0, -5.0, -4.0, -3.0, -2.0, -1.0, 0.0, 1.0, 3.0, 30.0]
    total = sum(
        scipy.integrate.quad(integrand, low, high, epsabs=1e-15, epsrel=1e-13, limit=200)[0]
        for low, high in pairwise(pieces)
    )
    lower = 0.5 - total / np.pi
    return float(min(1.0, 2 * min(lower, 1 - lower)))


def _form(case: Case) -> Iterator[Compared]:
    fitted = case.result.fit.fitted
    scaled = (fitted - (fitted.mean() if case.spec.intercept else 0.0)) / np.ptp(fitted)
    ours = check(case.result, "form")
    if not ours.note:
        more = sm.OLS(case.y, np.column_stack([case.x, *(scaled**k * case.root for k in (2, 3))])).fit()
        f, p, _ = more.compare_f_test(case.theirs)
        yield Compared("RESET", ours.statistic, f)
        yield Compared("RESET, p", _not_tiny(ours.p), _not_tiny(p))
        if case.spec.weight is None:
            raw = np.column_stack([case.x, *(fitted**k / np.abs(fitted**k).max() for k in (2, 3))])
            if np.linalg.cond(raw) < 1e5:
                theirs = linear_reset(case.theirs, power=3, use_f=True)
                yield Compared("RESET, linear_reset", ours.statistic, theirs.fvalue, 1e-6)
    lack = [one for one in case.result.checks if one.key == "lack_of_fit" and np.isfinite(one.statistic)]
    if lack:
        _, cells = np.unique(case.result.design.matrix, axis=0, return_inverse=True)
        dummies = np.eye(cells.max() + 1)[cells] * case.root[:, None]
        f, p, _ = sm.OLS(case.y, dummies).fit().compare_f_test(case.theirs)
        yield Compared("lack of fit", lack[0].statistic, f)
        yield Compared("lack of fit, p", _not_tiny(lack[0].p), _not_tiny(p))


def _normality(case: Case) -> Iterator[Compared]:
    ours = check(case.result, "normality")
    w, p = scipy.stats.shapiro(case.residual)
    yield Compared("Shapiro-Wilk", ours.statistic, w, 1e-8)
    yield Compared("Shapiro-Wilk, p", ours.p, p, 1e-5)
    a2 = anderson_darling(case.residual)
    yield Compared("Anderson-Darling", a2, scipy.stats.anderson(case.residual).statistic)
    theirs, p = normal_ad(case.residual)
    if abs(theirs / a2 - 1) < 1e-11:
        yield Compared("Anderson-Darling, p", anderson_p(a2, len(case.y)), p)


# --- overlap of predictors -----------------------------------------------------------------------------------


def _overlap(case: Case) -> Iterator[Compared]:
    x, ours = case.x, case.result.collinearity
    scaled = x / np.sqrt(np.sum(x**2, axis=0))
    _, values, right = np.linalg.svd(scaled, full_matrices=False)
    yield Compared("condition indexes", ours.condition_indexes, values[0] / values)
    yield Compared("condition number", case.result.fit.condition_number, values[0] / values[-1])
    shares = (right / values[:, None]) ** 2
    yield Compared("variance shares", ours.variance_shares, shares / shares.sum(axis=0))
    places: dict[str, list[int]] = {}
    for j, column in enumerate(case.result.design.columns):
        if column.factors:
            places.setdefault(column.term, []).append(j)
    within = x[:, int(case.spec.intercept) :]
    if case.spec.intercept:
        within = x - np.outer(case.root, case.root @ x / (case.root @ case.root))
    lengths = np.sqrt(np.sum(within**2, axis=0))
    correlations = within.T @ within / np.outer(lengths, lengths)
    start = int(case.spec.intercept)
    everything = list(range(start, x.shape[1]))
    for term in ours.terms:
        at = places[term.term]
        if len(at) == 1 and x.shape[1] > 1 and case.spec.weight is None:
            yield Compared("VIF", term.gvif, variance_inflation_factor(x, at[0], standardize=False))
        others = [j for j in everything if j not in at]
        logs = [_log_det(correlations, at), _log_det(correlations, others), -_log_det(correlations, everything)]
        yield Compared("GVIF", term.gvif, np.exp(sum(logs)))
        yield Compared("GVIF^(1/(2 df))", term.scaled, np.exp(sum(logs) / 2 / len(at)))


def _log_det(matrix: np.ndarray, at: list[int]) -> float:
    return float(np.linalg.slogdet(matrix[np.ix_(at, at)])[1]) if at else 0.0


# --- rows left out -----------------------------------------------------------------------------------------


def _left_out(case: Case) -> Iterator[Compared]:
    """Against refitting each fold by lstsq, the transformed response's mean by Duan's smearing; and scikit-learn."""
    ours, x = case.result.cross_validation, case.x / case.root[:, None]
    y = case.y / case.root
    predicted = np.empty(len(y))
    for fold in range(ours.folds):
        inside = ours.fold_of == fold
        b = np.linalg.lstsq(case.x[~inside], case.y[~inside], rcond=None)[0]
        eta, residual = x[inside] @ b, (y - x @ b)[~inside]
        if case.spec.response_shape is Shape.LOG:
            eta = np.exp(eta) * np.mean(np.exp(residual))
        elif case.spec.response_shape is Shape.ROOT:
            eta = np.mean((eta[:, None] + residual) ** 2, axis=1)
        predicted[inside] = eta
    known = np.isfinite(ours.predicted)
    yield Compared("cross-validated rows", ours.predicted[known], predicted[known])
    miss = float(np.sqrt(np.mean((case.result.observed - predicted)[known] ** 2)))
    yield Compared("cross-validated miss", ours.rmse, miss)
    if case.spec.response_shape is Shape.AS_IS and case.spec.weight is None and known.all():
        line = LinearRegression(fit_intercept=False, tol=0)
        theirs = cross_val_predict(line, x, y, cv=PredefinedSplit(ours.fold_of))
        yield Compared("cross-validated rows (scikit-learn)", ours.predicted, theirs)


# --- the rest ----------------------------------------------------------------------------------------------


def _resistant(case: Case) -> Iterator[Compared]:
    ours = fit_model(replace(case.spec, fit_by=FitBy.RESISTANT), case.observations).fit
    model = sm.RLM(case.y, case.x, sm.robust.norms.HuberT(1.345))
    theirs = model.fit(cov="H1", tol=1e-14, maxiter=500)
    yield Compared("Huber, coefficients", ours.coefficients, theirs.params / case.lengths, 1e-8)
    yield Compared("Huber, standard errors", ours.standard_errors, theirs.bse / case.lengths, 1e-8)
    yield Compared("Huber, weights", ours.robust_weights, theirs.weights, 1e-8)


def _nested(case: Case) -> Iterator[Compared]:
    if len(case.spec.terms) < 2:
        return
    kept = case.spec.terms[:-1]
    columns = {term.column for term in kept}
    crossed = tuple(one for one in case.spec.crossed if {one.first, one.second} <= columns)
    smaller = fit_model(replace(case.spec, terms=kept, crossed=crossed), case.observations)
    (found,) = nested.compare({"small": smaller, "large": case.result})
    x = smaller.design.matrix * case.root[:, None]
    f, p, df = case.theirs.compare_f_test(sm.OLS(case.y, x, hasconst=case.spec.intercept).fit())
    assert (found.small, found.large, found.df) == ("small", "large", df)
    yield Compared("partial F", found.f, f)
    yield Compared("partial F, p", _not_tiny(found.p), _not_tiny(p))


def _inverse(case: Case) -> Iterator[Compared]:
    """The ends of Fieller's interval: where a line's interval for a single reading (statsmodels') reaches y."""
    term = next((one for one in case.spec.terms if isinstance(one, NumberTerm)), None)
    if term is None or case.spec.response_shape is not Shape.AS_IS:
        return
    spec = replace(case.spec, terms=(NumberTerm(term.column),), crossed=())
    result = fit_model(spec, case.observations)
    y = float(np.quantile(result.observed, 0.7))
    ours = inverse.estimate(result, y)
    weights = case.root**2
    theirs = sm.WLS(result.observed, result.design.matrix, weights=weights).fit()
    t2 = scipy.stats.t.ppf((1 + spec.level) / 2, theirs.df_resid) ** 2

    def beyond(x: float) -> float:
        row = np.array([1.0, x]) if spec.intercept else np.array([x])
        return float((y - row @ theirs.params) ** 2 - t2 * (theirs.mse_resid + row @ theirs.cov_params() @ row))

    assert abs(beyond(ours.x)) > 0
    if ours.low is None or ours.high is None:
        far = 1e9 * max(abs(ours.x), 1.0)
        assert min(beyond(far), beyond(-far)) <= 0 or theirs.tvalues[-1] ** 2 < t2
        return
    width = ours.high - ours.low
    for end in (ours.low, ours.high):
        found = scipy.optimize.brentq(beyond, end - 0.1 * width, end + 0.1 * width, xtol=1e-13 * max(abs(end), width))
        yield Compared("Fieller's interval", end, found if abs(found) > 1e-3 * width else end)


def _box_cox(case: Case) -> Iterator[Compared]:
    ours, observed = case.result.box_cox, case.result.observed
    if ours is None:
        assert observed.min() <= 0
        return
    logs, n = np.log(observed), len(observed)
    if not case.spec.intercept:
        logs = logs - logs.mean()

    def likelihood(power: float) -> float:
        z = logs if power == 0 else np.expm1(power * logs) / power
        z = z * case.root
        rest = z - case.x @ np.linalg.lstsq(case.x, z, rcond=None)[0]
        return float(-n / 2 * np.log(rest @ rest) + (power - 1) * logs.sum())

    best = scipy.optimize.minimize_scalar(lambda power: -likelihood(power), bounds=(-3, 3), method="bounded",
                                          options={"xatol": 1e-9})  # fmt: skip
    if -2.9 < best.x < 2.9:
        yield Compared("Box-Cox power", ours.power + 10, best.x + 10, 1e-6)
    level = likelihood(ours.power) - scipy.stats.chi2.ppf(0.95, 1) / 2
    for end in (ours.low, ours.high):
        if abs(end) < 3:
            yield Compared("Box-Cox interval", likelihood(end), level, 1e-6)
