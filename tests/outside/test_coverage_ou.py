"""Whether the 95 % intervals of `ou` hold the truth in 95 % of simulated windows, also where a pull is weak or absent.

The truth is simulated from the exact transition law with a stationary start, by a code of its own.
"""

from functools import cache

import numpy as np
import pytest
from scipy.signal import lfilter

from driftbook.estimators import MODELS
from driftbook.estimators.slope_law import slope_law

WINDOWS = 8000
STANDARD_ERRORS = 3.0
STEP = 1 / 252
THETA, SIGMA = 40.0, 7.0
GRID = [(n, c) for n in (60, 250) for c in (1.0, 5.0, 20.0)]
COARSE = [(n, 0.4 * n) for n in (60, 250)]  # a pull of 0.4 per step


@cache
def windows(n, c):
    """Simulated windows with n steps and the pull c = kappa·T over each."""
    h = c / n
    shocks = np.random.default_rng([n, int(1000 * c)]).standard_normal((WINDOWS, n + 1))
    if c > 0:
        kappa = h / STEP
        shocks[:, 1:] *= SIGMA * np.sqrt(-np.expm1(-2 * h) / (2 * kappa))
        shocks[:, 0] *= SIGMA / np.sqrt(2 * kappa)
    else:
        shocks *= SIGMA * np.sqrt(STEP)
    return THETA + lfilter([1.0], [1.0, -np.exp(-h)], shocks, axis=1)


@cache
def fitted(n, c):
    """Fits of those windows, each of which has a pull and its interval."""
    fit = MODELS["ou"].fit(windows(n, c), STEP)
    assert np.isfinite(fit.kappa).all()
    assert np.isfinite(fit.kappa_lower).all()
    return fit


def holds(lower, truth, upper):
    """Whether each interval holds the truth; NaN is an open end."""
    return ~(truth < lower) & ~(truth > upper)


def assert_share(held, least, most):
    """The share held, within three standard errors of the simulation of a band."""
    share = held.mean()
    error = np.sqrt(0.05 * 0.95 / held.size)
    assert least - STANDARD_ERRORS * error <= share <= most + STANDARD_ERRORS * error, share


@pytest.mark.parametrize(("n", "c"), GRID + COARSE)
def test_kappa(n, c):
    fit = fitted(n, c)
    assert_share(holds(fit.kappa_lower, c / (n * STEP), fit.kappa_upper), 0.94, 0.965)


@pytest.mark.parametrize("n", [60, 250])
def test_kappa_without_pull(n):
    """One side only can miss at the boundary, so the interval holds zero in 97.5 %."""
    fit = fitted(n, 0.0)
    assert_share(holds(fit.kappa_lower, 0.0, fit.kappa_upper), 0.965, 1.0)


@pytest.mark.parametrize(("n", "c"), GRID + COARSE)
def test_half_life_holds_the_truth_where_kappa_does(n, c):
    fit = fitted(n, c)
    kappa = c / (n * STEP)
    in_kappa = holds(fit.kappa_lower, kappa, fit.kappa_upper)
    in_half_life = holds(fit.half_life_lower, np.log(2) / kappa, fit.half_life_upper)
    no_pull = fit.kappa_upper == 0  # the set [0, 0]: no half-life is given at all
    np.testing.assert_array_equal(in_half_life[~no_pull], in_kappa[~no_pull])
    assert np.isnan(fit.half_life_lower[no_pull]).all()
    assert np.isnan(fit.half_life_upper[no_pull]).all()


@pytest.mark.parametrize(("n", "c"), GRID + COARSE)
def test_theta(n, c):
    fit = fitted(n, c)
    assert_share(holds(fit.theta_lower, THETA, fit.theta_upper), 0.94, 0.97)


@pytest.mark.parametrize(("n", "c"), [(60, 0.25), (250, 0.25), *GRID, *COARSE])
def test_theta_set_with_its_unbounded_parts(n, c):
    """The test that the set inverts, at the true theta: where the set is all but a gap, the gap must miss it too."""
    law, x = slope_law(n), windows(n, c) - THETA
    before, after = x[:, :-1], x[:, 1:]
    origin, to = before.mean(axis=1), after.mean(axis=1)
    u = before - origin[:, None]
    A = (u**2).sum(axis=1)
    slope = (u * after).sum(axis=1) / A
    s2 = ((after - to[:, None] - slope[:, None] * u) ** 2).sum(axis=1) / (n - 2)
    statistic = (to - slope * origin) ** 2 / (s2 * (1 / n + origin**2 / A))
    assert_share(statistic <= law.theta_critical(law.lower_90(slope)), 0.94, 0.97)


@pytest.mark.parametrize(("n", "c", "least"), [(60, 20.0, 0.8), (250, 20.0, 0.85), (250, 100.0, 0.999)])
def test_theta_has_ends_where_the_pull_is_clear(n, c, least):
    fit = fitted(n, c)
    assert np.isfinite(fit.theta_lower).mean() > least
    np.testing.assert_array_equal(np.isfinite(fit.theta_upper), np.isfinite(fit.theta_lower))


@pytest.mark.parametrize(("n", "c"), [(60, 0.0), (250, 0.0), *GRID, *COARSE])
def test_sigma(n, c):
    """Among windows that have an interval: it is withheld where the estimated pull per step is over 0.8."""
    fit = fitted(n, c)
    given = np.isfinite(fit.sigma_lower)
    assert given.mean() > 0.9
    assert_share(holds(fit.sigma_lower, SIGMA, fit.sigma_upper)[given], 0.94, 0.965)


@pytest.mark.parametrize(("n", "c"), GRID + COARSE)
def test_median_unbiased_kappa_is_too_high_as_often_as_too_low(n, c):
    fit = fitted(n, c)
    above = fit.kappa_median_unbiased > c / (n * STEP)
    assert abs(above.mean() - 0.5) <= STANDARD_ERRORS * np.sqrt(0.25 / WINDOWS)


@pytest.mark.parametrize("n", [60, 250])
def test_p_value_of_no_pull_is_uniform_without_pull(n):
    p = fitted(n, 0.0).no_reversion_p
    for level in (0.01, 0.05, 0.1, 0.5):
        error = np.sqrt(level * (1 - level) / WINDOWS)
        assert abs(np.mean(p < level) - level) <= STANDARD_ERRORS * error
