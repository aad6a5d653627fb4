"""The demos' rows lead back to the stated truth. Reference fits: statsmodels, on the cells of the workbooks."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
import statsmodels.formula.api as smf

from demo_workbooks.make.truth import BOATYARD, COLD_STORE, FLOW_METER, SET_FLOWS
from tests.samples import data

FOLDER = Path(__file__).parents[2] / "demo_workbooks"


def _near(fit: sm.regression.linear_model.RegressionResultsWrapper, truth: Mapping[str, float]) -> None:
    """Every coefficient lies within 4 of its standard errors of the truth."""
    assert set(truth) == set(fit.params.index)
    for term, value in truth.items():
        assert abs(fit.params[term] - value) < 4 * fit.bse[term], term


def test_boatyard() -> None:
    """Model C: log-log, a slope per hull material; model A's spread grows, model C's does not."""
    rows = data(FOLDER / "boatyard.xlsx", "Refits", 4).rename(columns={"length (m)": "length"})
    assert len(rows) == 128
    assert list(rows.isna().sum()[["hours", "length", "coats"]]) == [2, 0, 1]
    rows = rows.dropna()
    hull = "C(hull, Treatment('oak'))"
    crossed = smf.ols(f"np.log(hours) ~ np.log(length) * {hull} + coats + crew", rows).fit()
    truth = {"Intercept": BOATYARD.start["oak"], "np.log(length)": BOATYARD.slope["oak"]}
    for other in ("steel", "glass fibre"):
        truth[f"{hull}[T.{other}]"] = BOATYARD.start[other] - BOATYARD.start["oak"]
        truth[f"np.log(length):{hull}[T.{other}]"] = BOATYARD.slope[other] - BOATYARD.slope["oak"]
    _near(crossed, truth | {"coats": BOATYARD.coat, "crew": BOATYARD.crew})
    assert crossed.mse_resid**0.5 == pytest.approx(BOATYARD.sd, rel=0.2)
    straight = smf.ols(f"hours ~ length + {hull} + coats + crew", rows).fit()
    koenker = [sm.stats.diagnostic.het_breuschpagan(fit.resid, fit.model.exog)[1] for fit in (straight, crossed)]
    assert koenker[0] < 0.05
    assert koenker[1] > 0.05


def test_cold_store() -> None:
    """Model bend: two slopes; its errors carry over; without the bend the miss is far larger."""
    rows = data(FOLDER / "cold store.xlsx", "Daily")
    assert len(rows) == 198
    assert rows["throughput (t)"].isna().sum() == 2
    assert (rows["date"].diff().dropna() == pd.Timedelta(days=1)).all()
    rows = rows.dropna().rename(
        columns={"energy (kWh)": "energy", "outdoor temperature (°C)": "degrees", "throughput (t)": "tonnes"}
    )
    rows["warm"] = np.maximum(rows["degrees"] - COLD_STORE.bend, 0)
    bend = smf.ols("energy ~ degrees + warm + tonnes", rows).fit(cov_type="HAC", cov_kwds={"maxlags": 4})
    truth = {"Intercept": COLD_STORE.start, "degrees": COLD_STORE.below, "warm": COLD_STORE.above - COLD_STORE.below}
    _near(bend, truth | {"tonnes": COLD_STORE.per_tonne})
    assert sm.stats.durbin_watson(bend.resid) < 1.5
    assert smf.ols("energy ~ degrees + tonnes", rows).fit().mse_resid > 2 * bend.mse_resid


def test_flow_meter() -> None:
    """The weighted line; weights are 1/flow^1.5; the intercept is surer with them; no lack of fit."""
    rows = data(FOLDER / "flow meter.xlsx", "Calibration").rename(
        columns={"reference flow (m³/h)": "flow", "reading (m³/h)": "reading"}
    )
    np.testing.assert_allclose(rows["weight"], rows["flow"] ** -1.5, rtol=1e-14)
    assert rows["flow"].value_counts().to_dict() == dict.fromkeys(SET_FLOWS, 12)
    weighted = smf.wls("reading ~ flow", rows, weights=rows["weight"]).fit()
    _near(weighted, {"Intercept": FLOW_METER.start, "flow": FLOW_METER.slope})
    assert weighted.mse_resid**0.5 == pytest.approx(FLOW_METER.sd, rel=0.2)
    assert smf.ols("reading ~ flow", rows).fit().bse["Intercept"] > 3 * weighted.bse["Intercept"]
    levels = smf.wls("reading ~ C(flow)", rows, weights=rows["weight"]).fit()
    assert levels.compare_f_test(weighted)[1] > 0.05
