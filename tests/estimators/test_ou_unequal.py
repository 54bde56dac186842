"""The Ornstein–Uhlenbeck fit at unequal steps: the largest likelihood there is, to the last digits, on any data."""

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from driftbook.estimators import MODELS, Status, rolling
from driftbook.estimators.models import ou
from driftbook.estimators.unequal import as_regression, from_windows

OU = MODELS["ou"]
PROMISE = 1e-9  # a number is off by no more than this share of itself or of its standard error
NEWTON = 1e-8  # the same as a long double can tell it, by differences, where the profile is skew
LOGLIK = 1e-8  # of a log-likelihood, which is a number of hundreds
PARAMETERS = ("kappa", "theta", "sigma")
N_OBS = 700


def calendar(n, seed=0):
    """Days between trades: weekends, and holidays now and then."""
    rng = np.random.default_rng(seed)
    return rng.choice([1, 1, 1, 1, 3, 3, 4, 2], n) / 365


def irregular(n, seed=0):
    """Waiting times without memory, from a thousandth of their mean to ten times it."""
    return np.random.default_rng(seed).exponential(1 / 252, n) + 1e-6


def gappy(n, seed=0):
    """Days, and now and then a gap of months."""
    rng = np.random.default_rng(seed)
    return np.where(rng.random(n) < 0.02, 0.5, 1 / 365) * rng.uniform(0.9, 1.1, n)


STEPS = {"calendar": calendar, "irregular": irregular, "gappy": gappy}


def path(steps, *, kappa, theta=0.0, sigma=1.0, seed=0):
    """x_0 … x_n by the exact transition law."""
    z = np.random.default_rng(seed).standard_normal(steps.size + 1)
    decay = np.exp(-kappa * steps)
    sd = sigma * np.sqrt(-np.expm1(-2 * kappa * steps) / (2 * kappa)) if kappa else sigma * np.sqrt(steps)
    x = np.empty(steps.size + 1)
    x[0] = sigma / np.sqrt(2 * kappa) * z[0] if kappa else 0.0
    for i in range(steps.size):
        x[i + 1] = x[i] * decay[i] + sd[i] * z[i + 1]
    return theta + x


def windows_of(values, width):
    return np.lib.stride_tricks.sliding_window_view(values, width)


def profile(windows, steps, kappa):
    """Likelihood, theta and sigma at given kappa, from the density itself, in long double, with means taken off."""
    x = np.asarray(windows, dtype=np.longdouble)
    x, dt, kappa = x - x[:, :1], np.asarray(steps, dtype=np.longdouble), np.asarray(kappa, dtype=np.longdouble)[:, None]
    gain = -np.expm1(-kappa * dt)
    variance = -np.expm1(-2 * kappa * dt) / (2 * kappa)
    d = np.diff(x, axis=1) + gain * x[:, :-1]
    theta = (gain * d / variance).sum(axis=1) / (gain**2 / variance).sum(axis=1)
    residual = d - gain * theta[:, None]
    n = dt.shape[1]
    sigma2 = (residual**2 / variance).sum(axis=1) / n
    loglik = -(n * np.log(2 * np.pi * sigma2) + n + np.log(variance).sum(axis=1)) / 2
    return loglik, windows[:, 0] + theta, np.sqrt(sigma2)


def bank():
    rng, i = np.random.default_rng(20), np.arange(N_OBS)
    walk = rng.standard_normal(N_OBS).cumsum()
    return {
        "a random walk": walk,
        "a small movement about a large level": 1e8 + walk,
        "a steep trend": np.cumsum(10 + rng.standard_normal(N_OBS)),
        "a price from 1e-3 to 1e6": np.exp(np.linspace(np.log(1e-3), np.log(1e6), N_OBS) + 0.02 * walk),
        "one spike of 1e9": np.where(i == 350, 1e9, 1.0) + 0.1 * walk,
        "very fat tails": rng.standard_t(1.5, N_OBS).cumsum(),
        "noise": rng.standard_normal(N_OBS),
        "in units of 1e-100": 1e-100 * walk,
        "in units of 1e100": 1e100 * walk,
    }


BANK = bank()


@pytest.mark.parametrize("lookback", [20, 150])
@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("name", [*BANK, "pull"])
def test_every_window_is_the_largest_likelihood(name, steps, lookback):
    """Against a step of Newton's in long double, and a look over the whole range of kappa."""
    dt = STEPS[steps](N_OBS - 1)
    x = path(dt, kappa=15.0, theta=40.0) if name == "pull" else BANK[name]
    fit = rolling("ou", x, dt, lookback)
    usable = np.flatnonzero(fit.status <= Status.NO_REVERSION)[::5]
    windows, gaps = windows_of(x, lookback + 1)[usable], windows_of(dt, lookback)[usable]
    kappa, se = fit.kappa[usable], fit.kappa_se[usable]
    best, theta, sigma = profile(windows, gaps, kappa)
    assert (abs(fit.loglik[usable] - best) <= LOGLIK).all()
    np.testing.assert_allclose(fit.sigma[usable], np.float64(sigma), rtol=PROMISE)
    strength = 1 + se / np.abs(kappa)
    size = np.maximum(np.abs(np.float64(theta)), fit.theta_se[usable])
    assert (np.abs(fit.theta[usable] - np.float64(theta)) <= PROMISE * strength * size).all()

    def derivatives(h):
        above, below = profile(windows, gaps, kappa + h)[0], profile(windows, gaps, kappa - h)[0]
        return (above - below) / (2 * h), (above - 2 * best + below) / h**2

    wide, curvature = derivatives(1e-3 * se)
    slope = (4 * derivatives(5e-4 * se)[0] - wide) / 3  # off by the fourth power of the share of se
    clear = se < 4 * abs(kappa)  # so that a difference over a thousandth of se sees no other curvature
    assert (abs(slope / curvature) <= NEWTON * np.maximum(se, abs(kappa)))[clear].all()
    assert clear.mean() > 0.5
    for power in range(-4, 40):
        other = np.full(usable.size, 2.0**power) / gaps.sum(axis=1)
        coarse = other * gaps.min(axis=1) > 8
        assert (coarse | ~(profile(windows, gaps, other)[0] > best + LOGLIK)).all()


@pytest.mark.parametrize("lookback", [6, 20, 150])
@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("kappa", [0.0, 3.0, 30.0, 300.0])
def test_sums_and_windows_themselves_agree(kappa, steps, lookback):
    dt = STEPS[steps](N_OBS - 1, seed=1)
    x = path(dt, kappa=kappa, theta=5.0, seed=1)
    fit = rolling("ou", x, dt, lookback)
    with np.errstate(all="ignore"):
        columns, status = ou._from_unequal_windows(True, windows_of(x, lookback + 1), windows_of(dt, lookback))
    assert (fit.status == status).mean() > 0.998  # the profile may be flat to rounding where it hardly rises
    same = (fit.status == status) & (status <= Status.NO_REVERSION) & (abs(fit.kappa) > 1e-3 * fit.kappa_se)
    for name, values in columns.items():
        np.testing.assert_allclose(fit.columns[name][same], values[same], rtol=1e-7, atol=1e-9, err_msg=name)


@pytest.mark.parametrize("n", [12, 60, 250])
@pytest.mark.parametrize("kappa", [0.0, 5.0, 40.0])
def test_equal_steps_by_this_way_are_those_of_the_regression(n, kappa):
    """All columns, with standard errors and intervals, though one comes from a profile and one from a closed form."""
    dt = np.full(n, 1 / 252)
    x = np.array([path(dt, kappa=kappa, theta=3.0, seed=seed) for seed in range(60)])
    fit = OU.fit(x, 1 / 252)
    with np.errstate(all="ignore"):
        columns, status = ou._from_unequal_windows(True, x, np.tile(dt, (60, 1)))
    usable = fit.status <= Status.NO_REVERSION
    assert np.array_equal(status[usable], fit.status[usable])
    steady = usable & (abs(fit.kappa) > 0.01 * fit.kappa_se)
    for name, values in columns.items():
        expected = fit.columns[name][steady]
        assert np.array_equal(np.isnan(values[steady]), np.isnan(expected)), name
        if f"{name}_se" in columns:
            size = np.maximum(np.abs(expected), fit.columns[f"{name}_se"][steady])
            assert (np.abs(values[steady] - expected) <= PROMISE * size).all(), name
        else:
            np.testing.assert_allclose(values[steady], expected, rtol=1e-7, atol=1e-9, err_msg=name)


def test_regression_that_it_amounts_to_is_the_regression_at_equal_steps():
    dt = np.full((30, 100), 0.02)
    x = np.array([path(dt[0], kappa=4.0, theta=50.0, seed=seed) for seed in range(30)])
    solution, unit, _ = from_windows(x, dt, fourth=True)
    found = as_regression(solution)
    u, d = x[:, :-1] - x[:, :-1].mean(axis=1, keepdims=True), np.diff(x, axis=1)
    slope = (u * d).sum(axis=1) / (u * u).sum(axis=1)
    e = d - d.mean(axis=1, keepdims=True) - slope[:, None] * u
    expected = {
        "level": x[:, :-1].mean(axis=1) / unit,
        "drift": d.mean(axis=1) / unit,
        "slope": slope,
        "spread": (u * u).sum(axis=1) / unit**2,
        "rss": (e * e).sum(axis=1) / unit**2,
        "robust": np.maximum((u * u * e * e).sum(axis=1), (u * u).sum(axis=1) * (e * e).mean(axis=1)) / unit**4,
        "fourth": (e**4).sum(axis=1) / unit**4,
    }
    for name, values in expected.items():
        np.testing.assert_allclose(getattr(found, name), values, rtol=1e-8, err_msg=name)
    np.testing.assert_allclose(found.evenness, 1.0, rtol=1e-13)


@pytest.mark.parametrize("steps", STEPS)
def test_standard_errors_are_those_of_the_curvature(steps):
    """In a long window, where the expected and the observed information hardly differ."""
    dt = STEPS[steps](3000, seed=3)
    x = path(dt, kappa=8.0, theta=2.0, seed=3)
    fit = OU.fit(x, dt)
    best = np.array([float(fit.columns[name]) for name in PARAMETERS])
    h = 1e-3 * np.array([float(fit.columns[f"{name}_se"]) for name in PARAMETERS])
    hessian = np.empty((3, 3))
    for i in range(3):
        for j in range(3):
            a, b = np.eye(3)[i] * h, np.eye(3)[j] * h
            corners = [OU.loglik(x, dt, *(best + s * a + r * b)) * s * r for s in (1, -1) for r in (1, -1)]
            hessian[i, j] = sum(corners) / (4 * h[i] * h[j])
    observed = np.sqrt(np.diag(np.linalg.inv(-hessian)))
    np.testing.assert_allclose([float(fit.columns[f"{name}_se"]) for name in PARAMETERS], observed, rtol=0.05)


def test_statuses():
    """Rising to the end; running away; flat."""
    dt = calendar(60)
    swinging = (-1.0) ** np.arange(61) + 0.01 * np.random.default_rng(0).standard_normal(61)
    away = np.exp(8 * np.concatenate([[0], dt.cumsum()]))
    curve = 3 + 2 * np.exp(-5 * np.concatenate([[0], dt.cumsum()]))
    noisy = away + 0.01 * np.random.default_rng(0).standard_normal(61)
    fit = OU.fit(np.array([swinging, noisy, curve, np.full(61, 2.0)]), np.tile(dt, (4, 1)))
    assert fit.status.tolist() == [Status.ALTERNATING, Status.NO_REVERSION, Status.FLAT, Status.FLAT]
    assert fit.kappa[1] == pytest.approx(-8, rel=0.01)
    for name, values in fit.columns.items():
        assert np.isnan(values[[0, 2, 3]]).all(), name


def test_no_infinity_is_reported():
    for steps in STEPS.values():
        dt = steps(N_OBS - 1)
        for x in (*BANK.values(), path(dt, kappa=1000.0)):
            for lookback in (5, 12, 60):
                for name, values in rolling("ou", x, dt, lookback).columns.items():
                    assert not np.isinf(values).any(), name


# What changes of unit must do, and an observation that is left out.

cases = st.builds(
    lambda kappa, seed, n, steps: (path(STEPS[steps](n, seed), kappa=kappa, seed=seed), STEPS[steps](n, seed)),
    kappa=st.sampled_from([0.0, 5.0, 50.0]),
    seed=st.integers(0, 10_000),
    n=st.integers(12, 100),
    steps=st.sampled_from(sorted(STEPS)),
)
few_cases = settings(max_examples=40, deadline=None)


def settled(fit):
    """Away from the edges at which a column jumps."""
    edges = (abs(fit.kappa / fit.kappa_se), abs(fit.no_reversion_p - 0.025), abs(fit.no_reversion_p - 0.975))
    return fit.status <= Status.NO_REVERSION and min(edges) > 1e-3


@few_cases
@given(cases, st.sampled_from([-100.0, 0.5]), st.sampled_from([1e-3, 7.0]), st.sampled_from([0.25, 3.0, 365.0]))
def test_shift_scale_and_unit_of_time(case, shift, scale, time):
    x, dt = case
    fit, moved = OU.fit(x, dt), OU.fit((x + shift) * scale, dt * time)
    assume(settled(fit))
    assert moved.status == fit.status
    powers = {"1/t": (0, -1), "t": (0, 1), "x/√t": (1, -0.5), "x": (1, 0), "": (0, 0)}
    for column in OU.columns:
        in_x, in_t = powers[column.unit]
        expected = fit.columns[column.name]
        if column.name in ("theta", "theta_lower", "theta_upper"):
            expected = expected + shift
        if column.name == "loglik":
            expected = expected - fit.n * np.log(scale)
        expected = expected * scale**in_x * time**in_t
        found = moved.columns[column.name]
        assert np.isnan(found) == np.isnan(expected), column.name
        size = max(abs(expected), 1e-2) if column.unit == "" else abs(expected)
        if column.unit == "x":
            size = max(size, (abs(shift) + fit.theta_se) * scale)
        strength = (1 + fit.kappa_se / abs(fit.kappa)) ** 2
        assert np.isnan(found) or abs(found - expected) <= 1e-7 * strength * size, column.name


@few_cases
@given(cases, st.data())
def test_dropping_an_observation_is_the_longer_step(case, data):
    """The law over two steps is that of one of their length: likelihoods differ by what was known of the middle."""
    x, dt = case
    at = data.draw(st.integers(1, len(dt) - 1))
    fewer, longer = np.delete(x, at), np.concatenate([dt[: at - 1], [dt[at - 1] + dt[at]], dt[at + 1 :]])
    kappa, theta, sigma = 6.0, 0.3, 1.2
    with_it, without = OU.loglik(x, dt, kappa, theta, sigma), OU.loglik(fewer, longer, kappa, theta, sigma)
    # the middle given both sides is Gaussian: a bridge
    a, b = dt[at - 1], dt[at]
    before, after = x[at - 1] - theta, x[at + 1] - theta
    whole = np.sinh(kappa * (a + b))
    mean = theta + (before * np.sinh(kappa * b) + after * np.sinh(kappa * a)) / whole
    variance = sigma**2 / kappa * np.sinh(kappa * a) * np.sinh(kappa * b) / whole
    bridge = -0.5 * (np.log(2 * np.pi * variance) + (x[at] - mean) ** 2 / variance)
    assert with_it - without == pytest.approx(bridge, rel=1e-8, abs=1e-8)


@pytest.mark.parametrize("model", ["abm", "ou"])
def test_observations_that_lie_where_they_are_expected_change_no_drift(model):
    """A path, and the same seen twice as often at the mean between: the drift and theta stay nearly the same."""
    dt = calendar(300)
    x = path(dt, kappa=5.0, seed=7)
    fit = MODELS[model].fit(x, dt)
    more, half = np.interp(np.arange(601) / 2, np.arange(301), x), np.repeat(dt / 2, 2)
    twice = MODELS[model].fit(more, half)
    name = "mu" if model == "abm" else "theta"
    assert twice.columns[name] == pytest.approx(float(fit.columns[name]), abs=0.5 * float(fit.columns[f"{name}_se"]))
