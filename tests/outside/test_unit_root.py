"""The slope's law against published tables of unit-root and AR(1) statistics, exact values and simulation."""

import numpy as np
import pytest
from scipy.signal import lfilter

from driftbook.estimators.data.make_slope_law import exact_cdf, exact_quantile
from driftbook.estimators.slope_law import slope_law

# Fuller, W. A. (1976), Introduction to Statistical Time Series, Wiley, Table 8.5.1, statistic with a constant (also
# Hamilton, J. D. (1994), Time Series Analysis, Princeton, Table B.5); value from memory. Percentiles of n (rho_hat − 1)
# for n observations, that is n − 1 regression pairs, times n. Smoothed simulation, printed to one or two digits:
# off by up to 0.13 in the 1 % column, and by up to 0.081 elsewhere (−14.0 for −13.919).
FULLER_P = (0.01, 0.025, 0.05, 0.1, 0.9, 0.95, 0.975, 0.99)
FULLER_OFF = (0.13, 0.082, 0.082, 0.082, 0.082, 0.082, 0.082, 0.082)
FULLER = {
    25: (-17.2, -14.6, -12.5, -10.2, -0.76, 0.01, 0.65, 1.40),
    50: (-18.9, -15.7, -13.3, -10.7, -0.81, -0.07, 0.53, 1.22),
    100: (-19.8, -16.3, -13.7, -11.0, -0.83, -0.10, 0.47, 1.14),
    250: (-20.3, -16.6, -14.0, -11.2, -0.84, -0.12, 0.43, 1.09),
    500: (-20.5, -16.8, -14.0, -11.2, -0.84, -0.13, 0.42, 1.06),
    10_000_000: (-20.7, -16.9, -14.1, -11.3, -0.85, -0.13, 0.41, 1.04),  # printed as infinity
}

# Points of N (rho_hat − 1), with a constant, N regression pairs: Imhof's inversion with the eigenvalues of the
# quadratic form (another way than the project's), rounded to three digits.
EXACT_P = (0.01, 0.025, 0.05, 0.1, 0.5, 0.9, 0.95, 0.975, 0.99)
EXACT = {
    25: (-16.631, -14.105, -12.060, -9.886, -4.084, -0.727, -0.000, 0.606, 1.323),
    50: (-18.450, -15.401, -13.008, -10.528, -4.216, -0.787, -0.074, 0.509, 1.181),
    100: (-19.488, -16.128, -13.532, -10.879, -4.285, -0.817, -0.109, 0.464, 1.116),
    250: (-20.158, -16.593, -13.864, -11.099, -4.328, -0.834, -0.129, 0.438, 1.079),
    500: (-20.390, -16.753, -13.978, -11.174, -4.342, -0.840, -0.136, 0.429, 1.066),
}
EXACT_OFF = 6e-4  # half a unit of the last digit, and the table's interpolation

# 5, 50 and 95 % quantiles of the AR(1) slope with a constant, stationary start, T regression pairs, by Imhof's
# inversion on a grid of 4001 points: good to about 1e-5. The medians invert to the estimator of Andrews, D. W. K.
# (1993), Econometrica 61, 139–165.
AR1_P = (0.05, 0.5, 0.95)
AR1_OFF = 3e-5
AR1_T = (25, 50, 100, 250)
AR1 = {
    0.0: (
        (-0.35602, -0.04094, 0.27923),
        (-0.24803, -0.02025, 0.20889),
        (-0.17289, -0.01006, 0.15311),
        (-0.10765, -0.00401, 0.09969),
    ),
    0.5: (
        (0.07295, 0.41679, 0.67578),
        (0.22653, 0.45905, 0.64321),
        (0.32181, 0.47974, 0.61203),
        (0.39585, 0.49196, 0.57747),
    ),
    0.8: (
        (0.34850, 0.68309, 0.87947),
        (0.53601, 0.74377, 0.87190),
        (0.64215, 0.77279, 0.86146),
        (0.71546, 0.78939, 0.84616),
    ),
    0.9: (
        (0.43873, 0.76522, 0.94213),
        (0.64261, 0.83541, 0.93843),
        (0.75516, 0.86932, 0.93553),
        (0.82814, 0.88831, 0.92892),
    ),
    0.95: (
        (0.48083, 0.80274, 0.97306),
        (0.69446, 0.87829, 0.96971),
        (0.81247, 0.91609, 0.96889),
        (0.88682, 0.93740, 0.96701),
    ),
    0.99: (
        (0.51092, 0.83016, 0.99523),
        (0.73193, 0.90884, 0.99357),
        (0.85575, 0.94998, 0.99366),
        (0.93436, 0.97493, 0.99374),
    ),
    1.0: (
        (0.51758, 0.83664, 0.99998),
        (0.73984, 0.91568, 0.99852),
        (0.86468, 0.95715, 0.99891),
        (0.94454, 0.98269, 0.99948),
    ),
}

# MacKinnon, J. G. (2010), Critical values for cointegration tests, Queen's Economics Department working paper 1227:
# 5 % points of the Dickey–Fuller t-statistic with a constant, as statsmodels 0.15 gives them (mackinnoncrit).
MACKINNON = {25: -2.9865, 50: -2.9214, 100: -2.8909, 250: -2.8732, 500: -2.8673}
MACKINNON_OFF = 0.012  # three standard errors of the 400 000 simulated paths, and the response surface's own error

PATHS = 100_000
STANDARD_ERRORS = 4.0  # 18 comparisons at a fixed seed


def tabulated(c, n, probabilities):
    law = slope_law(n)
    return np.array([float(law.quantile(c, p)) for p in probabilities])


@pytest.mark.parametrize("n", FULLER)
def test_points_of_fullers_table(n):
    points = n * (tabulated(0.0, n - 1, FULLER_P) - 1)
    assert np.all(np.abs(points - FULLER[n]) <= FULLER_OFF)


@pytest.mark.parametrize("n", EXACT)
def test_points_at_a_unit_root_by_another_inversion(n):
    np.testing.assert_allclose(n * (tabulated(0.0, n, EXACT_P) - 1), EXACT[n], rtol=0, atol=EXACT_OFF)
    np.testing.assert_allclose(n * (exact_quantile(EXACT_P, 0.0, n) - 1), EXACT[n], rtol=0, atol=EXACT_OFF)


@pytest.mark.parametrize("alpha", AR1)
def test_quantiles_of_the_ar1_slope_by_another_inversion(alpha):
    for n, published in zip(AR1_T, AR1[alpha], strict=True):
        c = np.inf if alpha == 0 else -n * np.log(alpha)
        np.testing.assert_allclose(exact_quantile(AR1_P, c, n), published, rtol=0, atol=AR1_OFF)
        if c <= 4 * n:
            np.testing.assert_allclose(tabulated(c, n, AR1_P), published, rtol=0, atol=AR1_OFF)


def test_median_at_a_unit_root_that_andrews_gives():
    """0.957 for about 100 observations: Andrews (1993), second model; value from memory."""
    assert round(float(slope_law(100).quantile(0.0, 0.5)), 3) == 0.957


@pytest.mark.parametrize("n", MACKINNON)
def test_critical_value_for_theta_without_pull_is_the_squared_dickey_fuller_point(n):
    assert abs(-np.sqrt(slope_law(n).theta_critical(0.0)) - MACKINNON[n]) <= MACKINNON_OFF


@pytest.mark.parametrize("n", [10, 15, 20])
@pytest.mark.parametrize("c", [0.0, 4.0])
def test_short_windows_by_simulation(n, c):
    slopes = simulated_slopes(c, n, np.random.default_rng([n, int(c)]))
    for p in (0.025, 0.5, 0.975):
        share = np.mean(slopes <= slope_law(n).quantile(c, p))
        assert abs(share - p) <= STANDARD_ERRORS * np.sqrt(p * (1 - p) / PATHS)


def test_exact_law_by_simulation_away_from_the_tabulated_probabilities():
    slopes = simulated_slopes(2.0, 33, np.random.default_rng(7))
    r = np.quantile(slopes, [0.07, 0.4, 0.8])
    error = np.sqrt(0.25 / PATHS)
    np.testing.assert_allclose(exact_cdf(r, 2.0, 33), [0.07, 0.4, 0.8], rtol=0, atol=STANDARD_ERRORS * error)


def simulated_slopes(c, n, rng):
    """Least-squares slopes with an intercept of Gaussian AR(1) paths, stationary start (0 for a random walk)."""
    shocks = rng.standard_normal((PATHS, n + 1))
    shocks[:, 0] *= 0.0 if c == 0 else 1 / np.sqrt(-np.expm1(-2 * c / n))
    x = lfilter([1.0], [1.0, -np.exp(-c / n)], shocks, axis=1)
    x -= x[:, :-1].mean(axis=1, keepdims=True)
    before, after = x[:, :-1], x[:, 1:]
    return (before * after).sum(axis=1) / (before**2).sum(axis=1)
