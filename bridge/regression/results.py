"""What comes out of a fit and its examination, as frozen values.

Shapes: n rows used, p coefficients kept (aliased columns are not among them), m design columns before aliasing.
Everything is on the fitted scale (log y for a log response) unless a field says original.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from bridge.regression.spec import ModelSpec

Array = NDArray[np.float64]


# --- the design ---------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Factor:
    """One factor of a design column, as a function of a data column.

    kind: `power` (x^exponent, 1 to 12), `log`, `root`, `reciprocal`, `hinge` (max(x - knot, 0)),
    `level` (1 where the category equals `level`, else 0).
    """

    column: str
    kind: str
    exponent: int = 1
    knot: float = 0.0
    level: str = ""


@dataclass(frozen=True, slots=True)
class DesignColumn:
    """A column of the design matrix: the product of its factors (none: the intercept).

    `term` groups columns that stand or fall together (`hull`, `length_m x hull`); `label` is what tables show:
    `intercept`, `length_m`, `log length_m`, `length_m^2`, `length_m above 15`, `hull steel`,
    `length_m x hull steel`.
    """

    label: str
    term: str
    factors: tuple[Factor, ...]


@dataclass(frozen=True, slots=True)
class Alias:
    """A column that the data cannot tell apart from others: label = sum of coefficient x other label."""

    label: str
    depends_on: tuple[tuple[str, float], ...]
    exact: bool


@dataclass(frozen=True, slots=True)
class Design:
    """The design matrix of the columns kept, shape (n, p), and what was left out.

    `bases` gives each category's base level, `levels` each category's levels with their counts.
    """

    columns: tuple[DesignColumn, ...]
    matrix: Array
    aliased: tuple[Alias, ...]
    bases: tuple[tuple[str, str], ...]
    levels: tuple[tuple[str, tuple[tuple[str, int], ...]], ...]


# --- the fit ------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Fit:
    """Coefficients and the figures that follow from them.

    `r_inverse` (p, p): R^-1 with (X'WX)^-1 = R^-1 R^-T, upper triangular, in the order of the columns.
    `covariance` (p, p): of the coefficients, made as the spec asks. `covariance_factor` (p, p): C, C C' = covariance
    (for ordinary errors residual_sd * r_inverse), so that the standard error of x'b is the length of x'C.
    `df_interval`: degrees of freedom of t for coefficients and intervals (grouped errors: groups - 1).
    `robust_f`: Wald F of all slopes where the errors are not ordinary, else None.
    `r_squared` is about the mean with an intercept, about zero without. `digits` None: exact path.
    `weights` (n,) None: unweighted. `robust_weights` (n,): Huber's, resistant fits only.
    `fitted`, `residual`: (n,) on the fitted scale, unweighted residuals.
    `coefficients_low` (p,): what the coefficients lack by being rounded to doubles, for sums whose terms cancel.
    """

    n: int
    df_residual: int
    df_interval: float
    coefficients: Array
    standard_errors: Array
    t: Array
    p: Array
    low: Array
    high: Array
    standardised: Array
    vif: Array  # (p,), NaN for the intercept; GVIF^(1/(2 df)) squared for terms of several columns, see collinearity
    r_inverse: Array
    covariance: Array
    covariance_factor: Array
    residual_sd: float
    r_squared: float
    adjusted_r_squared: float
    loo_r_squared: float
    ss_residual: float
    ss_total: float
    f: float
    f_p: float
    f_df: tuple[int, int]
    robust_f: float | None
    robust_f_p: float | None
    log_likelihood: float
    aic: float
    bic: float
    fitted: Array
    residual: Array
    weights: Array | None
    robust_weights: Array | None
    condition_number: float
    digits: float | None
    coefficients_low: Array | None = None


@dataclass(frozen=True, slots=True)
class AnovaRow:
    """A line of the ANOVA table; figures that do not apply are NaN. `block`: main, fit, added last, added in order."""

    source: str
    block: str
    df: int
    ss: float
    ms: float
    f: float
    p: float


@dataclass(frozen=True, slots=True)
class Anova:
    """Rows in the order of the sheet: regression, residual, (lack of fit, pure error,) total; added last; in order."""

    rows: tuple[AnovaRow, ...]


# --- the examination ----------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Influence:
    """Case by case, each (n,): leverage, studentised residuals, Cook's distance, DFFITS; `dfbetas` (n, p) or None."""

    leverage: Array
    internal: Array
    external: Array
    cooks_distance: Array
    dffits: Array
    dfbetas: Array | None
    outlier_index: int
    outlier_p: float  # of the largest |external|, times n (Bonferroni), at most 1


@dataclass(frozen=True, slots=True)
class Check:
    """A test of an assumption.

    key: spread (Koenker), spread_any_form (White), normality (Shapiro-Wilk or Anderson-Darling),
    serial (Durbin-Watson), serial_order (Breusch-Godfrey), form (RESET), lack_of_fit.
    `p` NaN: not available, `note` says why.
    `estimate`: an extra figure a sentence needs (the first-order correlation, ...), else NaN.
    """

    key: str
    method: str
    statistic_name: str
    statistic: float
    df: tuple[float, ...]
    p: float
    estimate: float
    source: str
    note: str = ""


@dataclass(frozen=True, slots=True)
class TermVif:
    """Generalised variance inflation of a term: GVIF, its columns, and GVIF^(1/(2 df))."""

    term: str
    df: int
    gvif: float
    scaled: float


@dataclass(frozen=True, slots=True)
class Collinearity:
    """Condition indexes (p,) largest last, variance shares (p indexes, p coefficients); columns scaled to length 1."""

    terms: tuple[TermVif, ...]
    condition_indexes: Array
    variance_shares: Array


@dataclass(frozen=True, slots=True)
class CrossValidation:
    """Miss on rows left out in turn, original units: root mean square, as a share of the mean observed, and by fold.

    `predicted` (n,): each row's estimate from the fit without its fold, original units (transformed responses: mean).
    `grouped`: whole groups were left out together. `includes_search`: the subset search was redone within each fold.
    """

    rmse: float
    rmse_percent: float
    folds: int
    fold_of: NDArray[np.intp]
    predicted: Array
    grouped: bool
    includes_search: bool


@dataclass(frozen=True, slots=True)
class BackTransform:
    """From a log or root response back to original units.

    log: mean = exp(eta) * smear (Duan's smearing factor), median = exp(eta).
    root: mean = eta^2 + 2 eta shift + smear, with smear the mean squared residual and shift the mean residual
    (0 with an intercept); median = max(eta, 0)^2.
    """

    kind: str
    smear: float
    shift: float


@dataclass(frozen=True, slots=True)
class BoxCox:
    """Profile likelihood of the power of the response: best power, its 95% interval, the plain power nearest to it."""

    power: float
    low: float
    high: float
    suggestion: str  # "as is", "log", "root", "reciprocal", ""


@dataclass(frozen=True, slots=True)
class Subset:
    """One subset met by the search: the terms kept and its figure of merit (smaller is better for Cp, BIC, miss)."""

    terms: tuple[str, ...]
    figure: float


@dataclass(frozen=True, slots=True)
class SearchResult:
    """The search over candidates: the chosen terms, the runners-up best first, and how many subsets were judged."""

    by: str
    chosen: tuple[str, ...]
    dropped: tuple[str, ...]
    best: tuple[Subset, ...]
    subsets: int


@dataclass(frozen=True, slots=True)
class Range:
    """The data's reach of a number column: smallest, mean and largest value among the rows used."""

    column: str
    low: float
    mean: float
    high: float


@dataclass(frozen=True, slots=True)
class ModelResult:
    """Everything about one fitted model. `spec` is the spec as fitted (after a search: with the chosen terms)."""

    spec: ModelSpec
    asked: ModelSpec
    design: Design
    fit: Fit
    anova: Anova
    influence: Influence
    checks: tuple[Check, ...]
    collinearity: Collinearity
    cross_validation: CrossValidation
    back: BackTransform | None
    box_cox: BoxCox | None
    search: SearchResult | None
    ranges: tuple[Range, ...]
    observed: Array  # (n,) response, original units
    max_leverage: float  # largest leverage among the rows used, weights aside: x'(X'WX)^-1 x


@dataclass(frozen=True, slots=True)
class Nested:
    """Model `small` is contained in `large` (same rows, response, weights): partial F on (df, df_residual).

    `robust`: Wald's F with the larger model's own covariance, and its degrees of freedom of t as `df_residual`.
    """

    small: str
    large: str
    f: float
    df: int
    df_residual: int
    p: float
    robust: bool = False


@dataclass(frozen=True, slots=True)
class Estimates:
    """Estimates for new cases, each (k,). Original units unless `back_on` is fitted.

    `estimate` is the mean; `median` equals it where the response is not transformed.
    `case_low`/`case_high` are NaN where a weighted model has no weight for the case.
    `leverage`: x'(X'WX)^-1 x.
    """

    estimate: Array
    median: Array
    mean_low: Array
    mean_high: Array
    case_low: Array
    case_high: Array
    leverage: Array


@dataclass(frozen=True, slots=True)
class InverseEstimate:
    """Which x gave a mean response y on a straight line: x and Fieller's interval (None: unbounded)."""

    x: float
    low: float | None
    high: float | None
