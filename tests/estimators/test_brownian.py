"""Arithmetic and geometric Brownian motion: right digits on any data and steps, and what changes of unit must do."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import chi2, t

from driftbook.estimators import MODELS, Status, rolling

N_OBS = 1500
PROMISE = 1e-9  # a number is off by no more than this share of itself or of its standard error
ROUNDING = 1e-12  # two ways to write the same formula in float64
RNG = np.random.default_rng(0)
STEPS = {
    "equal": np.full(N_OBS - 1, 1 / 252),
    "calendar": RNG.choice([1, 1, 1, 1, 3, 4], N_OBS - 1) / 365,
    "irregular": RNG.exponential(1 / 252, N_OBS - 1) + 1e-7,
}


def bank():
    """Data that break running sums, by name."""
    rng, i = np.random.default_rng(20), np.arange(N_OBS)
    walk = rng.standard_normal(N_OBS).cumsum()
    return {
        "plain": 300 + walk,
        "a small movement about a large level": 1e9 + walk,
        "a price from 1e-3 to 1e6": np.exp(np.linspace(np.log(1e-3), np.log(1e6), N_OBS) + 0.02 * walk),
        "one spike of 1e12": 10 + np.where(i == 700, 1e12, 1.0) + rng.standard_normal(N_OBS),
        "1e3 flat, then noise of 1e-9": 1e3 + np.where(i < 600, 0.0, 1e-9 * rng.standard_normal(N_OBS)),
        "a ramp with noise of 1e-6": 1 + i + 1e-6 * rng.standard_normal(N_OBS),
        "smooth": 1e5 + walk.cumsum(),
        "very fat tails": rng.standard_t(1.5, N_OBS).cumsum() + 1e5,
        "in units of 1e12": 1e12 * (100 + walk),
        "in units of 1e-100": 1e-100 * (100 + walk),
    }


BANK = bank()


def windows_of(values, width):
    return np.lib.stride_tricks.sliding_window_view(values, width)


def plain_fit(windows, steps):
    """The textbook formulas, in long double, the mean taken off first."""
    d, dt = np.diff(np.asarray(windows, dtype=np.longdouble), axis=1), np.asarray(steps, dtype=np.longdouble)
    n, T = d.shape[1], dt.sum(axis=1)
    mu = d.sum(axis=1) / T
    z = (d - mu[:, None] * dt) / np.sqrt(dt)
    squares = (z**2).sum(axis=1)
    with np.errstate(all="ignore"):
        s2 = squares / (n - 1)
        return {
            "mu": mu,
            "mu_se": np.sqrt(s2 / T),
            "sigma": np.sqrt(squares / n),
            "sigma_se": np.sqrt(squares / n / (2 * n)),
            "kurtosis": n * (z**4).sum(axis=1) / squares**2,
            "loglik": -(n * np.log(2 * np.pi * squares / n) + n + np.log(dt).sum(axis=1)) / 2,
        }


@pytest.mark.parametrize("lookback", [7, 250])
@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("name", BANK)
def test_every_window_is_right(name, steps, lookback):
    x, dt = BANK[name], STEPS[steps]
    fit = rolling("abm", x, dt, lookback)
    plain = plain_fit(windows_of(x, lookback + 1), windows_of(dt, lookback))
    ok = fit.status == Status.OK
    assert np.isin(fit.status[~ok], Status.FLAT).all()
    for column, values in plain.items():
        found, expected = fit.columns[column][ok], values[ok]
        size = np.abs(expected) if column != "mu" else np.maximum(np.abs(expected), plain["mu_se"][ok])
        assert (np.abs(found - expected) <= PROMISE * size).all(), column


@pytest.mark.parametrize("steps", STEPS)
def test_flat_part_is_flat_and_noise_above_rounding_is_not(steps):
    fit = rolling("abm", BANK["1e3 flat, then noise of 1e-9"], STEPS[steps], 100)
    assert (fit.status[:500] == Status.FLAT).all()
    assert not (fit.status[502:] == Status.FLAT).any()


@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("name", ["plain", "a price from 1e-3 to 1e6", "very fat tails"])
def test_geometric_is_arithmetic_of_the_logarithm(name, steps):
    x, dt = BANK[name], STEPS[steps]
    fit, on_logs = rolling("gbm", x, dt, 60), rolling("abm", np.log(x), dt, 60)
    assert np.array_equal(fit.status, on_logs.status)
    for column in ("sigma", "sigma_se", "sigma_lower", "sigma_upper", "kurtosis"):
        np.testing.assert_array_equal(fit.columns[column], on_logs.columns[column], err_msg=column)
    np.testing.assert_allclose(fit.mu, on_logs.mu + on_logs.sigma**2 / 2, rtol=ROUNDING)
    jacobian = windows_of(np.log(x[1:]), 60).sum(axis=1)
    np.testing.assert_allclose(fit.loglik, on_logs.loglik - jacobian, rtol=0, atol=1e-8)


@pytest.mark.parametrize("n", [5, 20, 250])
def test_intervals_are_the_textbook_ones_for_thin_tails(n):
    """Student's t for the mean; χ² for the volatility, since the kurtosis of an arcsine law is below 3."""
    z = np.sin(np.arange(n + 1) ** 2.0)
    x, s = z.cumsum(), np.diff(z.cumsum()).std(ddof=1)
    fit = MODELS["abm"].fit(x, 0.5)
    assert fit.kurtosis < 3
    reach = t.ppf(0.975, n - 1) * s / 0.5 / np.sqrt(n)
    assert fit.mu_lower == pytest.approx(np.diff(x).mean() / 0.5 - reach, rel=PROMISE)
    assert fit.mu_upper == pytest.approx(np.diff(x).mean() / 0.5 + reach, rel=PROMISE)
    sd = s / np.sqrt(0.5)
    assert fit.sigma_lower == pytest.approx(sd * np.sqrt((n - 1) / chi2.ppf(0.975, n - 1)), rel=PROMISE)
    assert fit.sigma_upper == pytest.approx(sd * np.sqrt((n - 1) / chi2.ppf(0.025, n - 1)), rel=PROMISE)


def test_fat_tails_widen_the_interval_of_sigma_by_the_fourth_moment():
    z = np.random.default_rng(1).standard_t(3, 250)
    fit = MODELS["abm"].fit(np.concatenate([[0], z.cumsum()]), 1.0)
    stretch = np.sqrt((fit.kurtosis - 1) / 4 / 250 / (1 / 2 / 249))
    below = np.log(chi2.ppf(0.975, 249) / 249) / 2
    assert fit.kurtosis > 4
    assert np.log(z.std(ddof=1) / fit.sigma_lower) == pytest.approx(stretch * below, rel=PROMISE)


def test_without_intervals_there_are_parameters_and_likelihood():
    for name in ("abm", "gbm"):
        for dt in STEPS.values():
            fit, without = rolling(name, BANK["plain"], dt, 100), rolling(name, BANK["plain"], dt, 100, intervals=False)
            for column, values in without.columns.items():
                if column in ("mu", "sigma", "loglik"):
                    np.testing.assert_allclose(values, fit.columns[column], rtol=PROMISE, err_msg=column)
                else:
                    assert np.isnan(values).all(), column


paths = st.builds(
    lambda seed, n: (
        np.random.default_rng(seed).standard_normal(n + 1).cumsum(),
        np.random.default_rng(seed + 1).choice([1, 1, 3, 4.5], n) / 365,
    ),
    seed=st.integers(0, 10_000),
    n=st.integers(8, 80),
)
few = settings(max_examples=40, deadline=None)
POWERS = {"x": (1, 0), "x/t": (1, -1), "x/√t": (1, -0.5), "1/t": (0, -1), "1/√t": (0, -0.5), "": (0, 0)}


@few
@given(paths, st.sampled_from([-1e3, 0.5, 100.0]), st.sampled_from([1e-6, 3.0, 1e5]), st.sampled_from([0.25, 365.0]))
def test_shift_scale_and_unit_of_time_of_an_arithmetic_price(path, shift, scale, time):
    x, dt = path
    fit, moved = MODELS["abm"].fit(x, dt), MODELS["abm"].fit((x + shift) * scale, dt * time)
    assert moved.status == fit.status
    for column in MODELS["abm"].columns:
        in_x, in_t = POWERS[column.unit]
        expected = fit.columns[column.name] * scale**in_x * time**in_t
        if column.name == "loglik":
            expected = fit.loglik - fit.n * np.log(scale)
        size = max(abs(expected), fit.mu_se * scale / time if column.unit == "x/t" else 0)
        assert abs(moved.columns[column.name] - expected) <= PROMISE * (1 + abs(shift)) * size, column.name


@few
@given(paths, st.sampled_from([1e-6, 3.0, 1e5]), st.sampled_from([0.25, 365.0]))
def test_scale_and_unit_of_time_of_a_geometric_price(path, scale, time):
    """The unit of a price changes its likelihood and nothing else."""
    x, dt = np.exp(0.02 * path[0]), path[1]
    fit, moved = MODELS["gbm"].fit(x, dt), MODELS["gbm"].fit(x * scale, dt * time)
    assert moved.status == fit.status
    for column in MODELS["gbm"].columns:
        expected = fit.columns[column.name] * time ** POWERS[column.unit][1]
        if column.name == "loglik":
            expected = fit.loglik - fit.n * np.log(scale)
        size = max(abs(expected), fit.mu_se / time if column.unit == "1/t" else 0)
        assert abs(moved.columns[column.name] - expected) <= PROMISE * size, column.name


@few
@given(paths)
def test_a_drift_that_is_added_is_added_to_the_estimate(path):
    x, dt = path
    line = np.concatenate([[0.0], dt.cumsum()])
    fit, moved = MODELS["abm"].fit(x, dt), MODELS["abm"].fit(x + 7 * line, dt)
    assert moved.mu == pytest.approx(fit.mu + 7, abs=PROMISE * fit.mu_se)
    assert moved.sigma == pytest.approx(float(fit.sigma), rel=PROMISE)
