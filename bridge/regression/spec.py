"""What is to be fitted: the model in terms of columns, and the columns' values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray


class Shape(StrEnum):
    """A transformation of a number column. LOG is the natural logarithm."""

    AS_IS = "as is"
    LOG = "log"
    ROOT = "root"
    RECIPROCAL = "reciprocal"


class Errors(StrEnum):
    """How standard errors are made."""

    ORDINARY = "ordinary"
    UNEVEN_SPREAD = "uneven spread"  # HC3
    GROUPED = "grouped"  # CR1
    SERIAL = "serial"  # Newey-West


class FitBy(StrEnum):
    """The criterion the coefficients minimise."""

    LEAST_SQUARES = "least squares"
    RESISTANT = "resistant"  # Huber's M estimate


class Search(StrEnum):
    """By what the best subset of the candidates is chosen."""

    NONE = "none"
    ADJUSTED_R2 = "adjusted R2"
    CP = "Cp"
    BIC = "BIC"
    CROSS_VALIDATION = "cross-validation"


class BackOn(StrEnum):
    """The scale estimates of a log or root response are shown on."""

    ORIGINAL = "original"
    FITTED = "fitted"


@dataclass(frozen=True, slots=True)
class NumberTerm:
    """A number column as predictor: x (shaped), its powers up to `degree`, or x with hinges at `bends`.

    `degree` above 1 and `bends` go with Shape.AS_IS only. A bend at k adds max(x - k, 0).
    """

    column: str
    shape: Shape = Shape.AS_IS
    degree: int = 1
    bends: tuple[float, ...] = ()
    candidate: bool = False


@dataclass(frozen=True, slots=True)
class CategoryTerm:
    """A column of levels, treatment coded against `base` (None: the most frequent level; ties: first by name)."""

    column: str
    base: str | None = None
    candidate: bool = False


@dataclass(frozen=True, slots=True)
class CrossedTerm:
    """All products of the design columns of two terms, named by their columns. Both must be terms of the model."""

    first: str
    second: str


@dataclass(frozen=True, slots=True)
class ModelSpec:
    """One model. Column names refer to an `Observations`.

    `level` is the interval level as a fraction. `lags` (serial errors) None: floor(4 (n/100)^(2/9)).
    """

    response: str
    response_shape: Shape = Shape.AS_IS
    terms: tuple[NumberTerm | CategoryTerm, ...] = ()
    crossed: tuple[CrossedTerm, ...] = ()
    intercept: bool = True
    weight: str | None = None
    order: str | None = None
    group: str | None = None
    level: float = 0.95
    errors: Errors = Errors.ORDINARY
    lags: int | None = None
    fit_by: FitBy = FitBy.LEAST_SQUARES
    search: Search = Search.NONE
    folds: int = 10
    back_on: BackOn = BackOn.ORIGINAL


@dataclass(frozen=True, slots=True)
class Levels:
    """A text column as codes into its level names (sorted); shape (n,)."""

    codes: NDArray[np.intp]
    names: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Observations:
    """The rows used, complete and finite: each column an array of shape (n,), or levels.

    Numbers are the doubles nearest to the decimals as typed; the exact path reads those decimals back
    (the shortest decimal that gives the double).
    """

    columns: Mapping[str, NDArray[np.float64] | Levels]
    n: int

    def numbers(self, name: str) -> NDArray[np.float64]:
        """A number column, shape (n,). Raises TypeError for a column of levels."""
        column = self.columns[name]
        if isinstance(column, Levels):
            raise TypeError(f"{name} is a column of levels")
        return column

    def levels(self, name: str) -> Levels:
        """A column of levels. Raises TypeError for a number column."""
        column = self.columns[name]
        if not isinstance(column, Levels):
            raise TypeError(f"{name} is a number column")
        return column
