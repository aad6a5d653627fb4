"""What a model says along its single number predictor: the fitted line with its bands, as points to draw."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from bridge.regression.estimates import estimate
from bridge.regression.results import Estimates, ModelResult
from bridge.regression.spec import BackOn, Observations

POINTS = 61

Floats = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Trace:
    """Values of the predictor, (k,), the bends among them, and the estimates there."""

    x: Floats
    estimates: Estimates


def trace(result: ModelResult, column: str) -> Trace | None:
    """The line over the data's reach of `column`, the only predictor; None where the reach is not known."""
    reach = next((one for one in result.ranges if one.column == column), None)
    if reach is None or not reach.low < reach.high:
        return None
    knots = [factor.knot for one in result.design.columns for factor in one.factors if factor.kind == "hinge"]
    inside = [knot for knot in knots if reach.low < knot < reach.high]
    x = np.unique([*np.linspace(reach.low, reach.high, POINTS), *inside])
    return Trace(x, in_units(result, Observations({column: x}, len(x))))


def in_units(result: ModelResult, cases: Observations) -> Estimates:
    """Estimates in the response's own units, whatever scale the request shows them on."""
    return estimate(replace(result, spec=replace(result.spec, back_on=BackOn.ORIGINAL)), cases)
