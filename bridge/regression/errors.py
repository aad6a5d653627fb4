"""What can keep a model from being fitted, as the numeric core sees it.

RegressionError
  TooFewRows          rows <= coefficients
  ConstantResponse    the response does not vary
  OneLevel            a category has a single level among the rows used
  UnknownBase         the base level asked for does not occur
  NothingToFit        no term and no intercept
  OutOfDomain         log of a number <= 0, root of a negative, reciprocal of 0
  BadWeight           a weight that is not positive
  TooManyColumns      the design would be wider than this core fits
  UnknownLevel        a new case has a level that the data of the fit do not have
"""

from __future__ import annotations


class RegressionError(Exception):
    """Base of the above. `column` names the column concerned, `index` the first row (of those used), if any."""

    def __init__(self, text: str, column: str | None = None, index: int | None = None) -> None:
        super().__init__(text)
        self.column = column
        self.index = index


class TooFewRows(RegressionError):
    """Not more rows than coefficients."""

    def __init__(self, rows: int, coefficients: int) -> None:
        super().__init__(f"{rows} rows for {coefficients} coefficients")
        self.rows = rows
        self.coefficients = coefficients


class ConstantResponse(RegressionError):
    """The response is the same in every row."""


class OneLevel(RegressionError):
    """A category with a single level."""


class UnknownBase(RegressionError):
    """The base level asked for does not occur."""


class NothingToFit(RegressionError):
    """No term and no intercept."""


class OutOfDomain(RegressionError):
    """A value that the shape asked for cannot take."""


class BadWeight(RegressionError):
    """A weight that is not a positive number."""


class TooManyColumns(RegressionError):
    """The design matrix would have too many columns."""


class UnknownLevel(RegressionError):
    """A new case has a level that the data of the fit do not have."""
