"""Intervals from the sums of an AR(1) regression: limits, units, and where there is no end."""

import mpmath
import numpy as np
import pytest

from driftbook.estimators.intervals import (
    COARSEST,
    exact_over_euler,
    exact_over_euler_gradient,
    sigma_interval,
    theta_set,
    widened_pull,
)
from driftbook.estimators.slope_law import slope_law

N = 100
LAW = slope_law(N)
ROUNDING = 1e-13  # a few operations in double precision
Z = 1.959963984540054  # 97.5 % point of the normal


def pieces(slope=0.8, mean_from=0.3, mean_to=0.32, A=40.0, s2=0.2):
    """A regression with a clear pull: the squared t-statistic of the slope against one is 8 at slope 0.8."""
    return {"slope": slope, "mean_from": mean_from, "mean_to": mean_to, "A": A, "s2": s2}


def theta(**changes):
    given = pieces(**changes)
    return theta_set(LAW, given.pop("slope"), **given)


def statistic(level, *, slope, mean_from, mean_to, A, s2):
    """Squared t-statistic of the intercept when values are measured from `level`."""
    intercept = (mean_to - level) - slope * (mean_from - level)
    return intercept**2 / (s2 * (1 / N + (mean_from - level) ** 2 / A))


def sigma(slope=0.9, median_pull=8.0, A=40.0, s2=0.2, kurtosis=3.0, step=0.01):
    return sigma_interval(N, slope, median_pull=median_pull, A=A, s2=s2, kurtosis=kurtosis, step=step)


# the pull


def test_without_widening_the_interval_is_the_laws():
    slope = np.array([0.5, 0.9, 1.0])
    found = widened_pull(LAW, slope)
    np.testing.assert_allclose(found.lower, LAW.lower(slope), rtol=ROUNDING)
    np.testing.assert_array_equal(found.median, LAW.median(slope))
    np.testing.assert_allclose(found.upper, LAW.upper(slope), rtol=ROUNDING)


def test_widening_below_one_does_not_narrow():
    narrow, plain = widened_pull(LAW, 0.7, 0.5), widened_pull(LAW, 0.7)
    assert (narrow.lower, narrow.upper) == (plain.lower, plain.upper)


def test_widening_stretches_both_sides_about_the_median():
    plain, wide = widened_pull(LAW, 0.6), widened_pull(LAW, 0.6, 1.25)
    assert wide.median == plain.median
    np.testing.assert_allclose(wide.median - wide.lower, 1.25 * (plain.median - plain.lower), rtol=ROUNDING)
    np.testing.assert_allclose(wide.upper - wide.median, 1.25 * (plain.upper - plain.median), rtol=ROUNDING)


def test_widened_lower_end_stops_at_zero():
    assert widened_pull(LAW, 0.8).lower > 0
    assert widened_pull(LAW, 0.8, 5.0).lower == 0


def test_widening_leaves_the_set_zero():
    found = widened_pull(LAW, 1.2, 3.0)
    assert (found.lower, found.median, found.upper) == (0.0, 0.0, 0.0)


def test_widening_leaves_infinite_ends():
    slope = np.array([0.1, -0.05, -0.9])  # no upper end; no median either; nothing at all
    plain, wide = widened_pull(LAW, slope), widened_pull(LAW, slope, 2.0)
    np.testing.assert_array_equal(np.isinf(plain.upper), [True, True, True])
    np.testing.assert_array_equal(np.isinf(plain.median), [False, True, True])
    np.testing.assert_array_equal(wide.upper, plain.upper)
    np.testing.assert_array_equal(wide.lower[1:], plain.lower[1:])
    assert wide.lower[0] < plain.lower[0]


def test_nan_slope_has_no_interval():
    found = widened_pull(LAW, np.nan, 1.5)
    assert np.isnan([found.lower, found.median, found.upper]).all()


# the long-run level


def test_ends_of_the_theta_set_are_where_the_statistic_is_critical():
    given = pieces(slope=0.6)
    found = theta(slope=0.6)
    k = LAW.theta_critical(LAW.lower_90(0.6))
    np.testing.assert_allclose(statistic(found.lower, **given), k, rtol=1e-12)
    np.testing.assert_allclose(statistic(found.upper, **given), k, rtol=1e-12)
    estimate = 0.3 + 0.02 / 0.4
    assert found.lower < estimate < found.upper


def test_theta_set_moves_with_the_data():
    moved, still = theta(mean_from=1000.3, mean_to=1000.32), theta()
    np.testing.assert_allclose(moved.lower - 1000, still.lower, rtol=0, atol=1e-11)  # 1e-13 of the level, over g
    np.testing.assert_allclose(moved.upper - 1000, still.upper, rtol=0, atol=1e-11)


def test_theta_set_scales_with_the_data():
    scaled, plain = theta(mean_from=0.3 * 8, mean_to=0.32 * 8, A=40.0 * 64, s2=0.2 * 64), theta()
    assert scaled.lower == 8 * plain.lower
    assert scaled.upper == 8 * plain.upper


def test_theta_set_turns_over_with_the_data():
    turned, plain = theta(mean_from=-0.3, mean_to=-0.32), theta()
    assert turned.lower == -plain.upper
    assert turned.upper == -plain.lower


def test_theta_set_survives_a_small_spread_about_a_large_level():
    """Values 1e7 apart from zero with steps of 1e-6, relative to one of them, give the set of the steps alone."""
    rng = np.random.default_rng(3)
    x = np.zeros(N + 1)
    for i in range(N):
        x[i + 1] = np.rint(0.5 * x[i]) + rng.integers(-512, 513)
    found = {}
    for name, level, unit in (("plain", 0.0, 1.0), ("small", 1e7, 2.0**-29)):  # exact in double precision
        values = level + unit * x
        u = values - values[0]
        mean_from, mean_to = u[:-1].mean(), u[1:].mean()
        A = ((u[:-1] - mean_from) ** 2).sum()
        slope = ((u[:-1] - mean_from) * u[1:]).sum() / A
        s2 = ((u[1:] - mean_to - slope * (u[:-1] - mean_from)) ** 2).sum() / (N - 2)
        answer = theta_set(LAW, slope, mean_from=mean_from, mean_to=mean_to, A=A, s2=s2)
        found[name] = np.array([answer.lower, answer.upper]) / unit
    np.testing.assert_allclose(found["small"], found["plain"], rtol=1e-12)


def test_weak_pull_leaves_theta_without_ends():
    """Unbounded exactly where the squared t-statistic of the slope is at most the critical value."""
    slope = np.linspace(0.75, 0.99, 25)
    t_squared = (1 - slope) ** 2 / (0.2 / 40.0)
    bounded = t_squared > LAW.theta_critical(LAW.lower_90(slope))
    assert 0 < bounded.sum() < len(slope)
    found = theta(slope=slope)
    np.testing.assert_array_equal(np.isfinite(found.lower), bounded)
    np.testing.assert_array_equal(np.isfinite(found.upper), bounded)


@pytest.mark.parametrize("changes", [{"A": 0.0}, {"A": 0.0, "s2": 0.0}, {"slope": np.nan}, {"s2": np.nan}])
def test_theta_has_no_ends_without_a_regression(changes):
    found = theta(**changes)
    assert np.isnan([found.lower, found.upper]).all()


@pytest.mark.parametrize("mean_to", [0.3, 0.32])
def test_theta_set_of_a_path_without_noise_is_a_point(mean_to):
    found = theta(s2=0.0, mean_to=mean_to)
    np.testing.assert_allclose([found.lower, found.upper], 0.3 + (mean_to - 0.3) / (1 - 0.8), rtol=ROUNDING)


# the volatility


def test_factors_of_the_exact_variance_are_right_down_to_no_pull():
    h = np.array([0.0, 5e-324, 1e-300, 1e-17, 1e-8, 1e-4, 0.0199, 0.02, 0.0201, 0.3, 0.8, 4.0])
    with mpmath.workdps(700):
        exact = [(1.0, 1.0)] + [
            (float(2 * x / (1 - mpmath.exp(-2 * x))), float(1 / x - 2 / mpmath.expm1(2 * x)))
            for x in (mpmath.mpf(float(each)) for each in h[1:])
        ]
    ratio, gradient = zip(*exact, strict=True)
    np.testing.assert_allclose(exact_over_euler(h), ratio, rtol=ROUNDING)
    np.testing.assert_allclose(exact_over_euler_gradient(h), gradient, rtol=ROUNDING)


def test_sigma_without_pull_is_the_residuals_own():
    found = sigma(slope=1.0, median_pull=0.0)
    reach = Z * np.sqrt(1 / (2 * (N - 2)) + 0.25 * 0.2 / 40.0)
    np.testing.assert_allclose(found.lower, np.sqrt(0.2 / 0.01) * np.exp(-reach), rtol=ROUNDING)
    np.testing.assert_allclose(found.upper, np.sqrt(0.2 / 0.01) * np.exp(reach), rtol=ROUNDING)


def test_sigma_is_centred_on_the_exact_variance():
    found, h = sigma(median_pull=8.0), 8.0 / N
    centre = np.sqrt(found.lower * found.upper)
    np.testing.assert_allclose(centre, np.sqrt(0.2 / 0.01 * 2 * h / (1 - np.exp(-2 * h))), rtol=ROUNDING)


def test_sigma_takes_the_slopes_pull_where_the_median_is_infinite():
    given, at_slope = sigma(slope=0.6, median_pull=np.inf), sigma(slope=0.6, median_pull=-N * np.log(0.6))
    np.testing.assert_allclose(given.lower, at_slope.lower, rtol=ROUNDING)


def test_fat_tails_widen_sigma():
    fat = sigma(slope=1.0, median_pull=0.0, kurtosis=9.0)
    reach = Z * np.sqrt(8 / (4 * N) + 0.25 * 0.2 / 40.0)
    np.testing.assert_allclose(np.log(fat.upper / fat.lower), 2 * reach, rtol=ROUNDING)


def test_thin_tails_do_not_narrow_sigma():
    thin, normal = sigma(kurtosis=1.5), sigma()
    assert (thin.lower, thin.upper) == (normal.lower, normal.upper)


def test_sigma_scales_with_the_data_and_with_time():
    plain = sigma()
    for scaled in (sigma(A=40.0 * 16, s2=0.2 * 16), sigma(step=0.01 / 16)):
        np.testing.assert_allclose([scaled.lower, scaled.upper], [4 * plain.lower, 4 * plain.upper], rtol=ROUNDING)


def test_sigma_has_no_ends_beyond_the_coarsest_step():
    found = sigma(slope=np.exp([-COARSEST + 0.01, -COARSEST - 0.01]), median_pull=60.0)
    np.testing.assert_array_equal(np.isnan(found.lower), [False, True])
    np.testing.assert_array_equal(np.isnan(found.upper), [False, True])


@pytest.mark.parametrize("changes", [{"slope": 0.0}, {"slope": -0.3}, {"slope": np.nan}, {"s2": 0.0}, {"A": 0.0}])
def test_sigma_has_no_ends_without_a_regression(changes):
    found = sigma(**changes)
    assert np.isnan([found.lower, found.upper]).all()


def test_batch_is_loop():
    slope = np.array([[0.3, 0.6, 0.9], [1.0, 1.1, -0.2]])
    pull, level, vol = widened_pull(LAW, slope, 1.1), theta(slope=slope), sigma(slope=slope)
    for where in np.ndindex(slope.shape):
        one = widened_pull(LAW, slope[where], 1.1), theta(slope=slope[where]), sigma(slope=slope[where])
        for batch, single in zip((pull, level, vol), one, strict=True):
            np.testing.assert_array_equal(batch.lower[where], single.lower)
            np.testing.assert_array_equal(batch.upper[where], single.upper)
