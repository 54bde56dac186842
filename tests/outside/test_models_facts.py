"""Facts of the trade that the models must show, and intervals that hold the truth as often as they say.

Truths are simulated from exact transition laws, by a code of its own, from fixed seeds; shares are compared within
three of their standard errors.
"""

from functools import cache

import numpy as np
import pytest
from scipy.stats import norm

from driftbook.estimators import MODELS, Status, rolling

ABM, GBM, OU, EXP_OU = (MODELS[name] for name in ("abm", "gbm", "ou", "exp_ou"))
STANDARD_ERRORS = 3.0


def brownian(steps, mu, sigma, paths, seed, noise=None):
    """Paths from 0 at given steps."""
    z = np.random.default_rng(seed).standard_normal((paths, steps.size)) if noise is None else noise
    d = mu * steps + sigma * np.sqrt(steps) * z
    return np.concatenate([np.zeros((paths, 1)), d.cumsum(axis=1)], axis=1)


def share_within(share, expected, trials):
    return abs(share - expected) <= STANDARD_ERRORS * np.sqrt(expected * (1 - expected) / trials)


def test_an_arithmetic_price_goes_below_zero():
    """From 100 with 20 a year, after 25 years: Φ(−1) = 0.158655…; the model says so."""
    paths = 20_000
    ends = 100 + brownian(np.full(25, 1.0), 0.0, 20.0, paths, seed=1)
    assert norm.cdf(-1) == pytest.approx(0.158655253931457, abs=1e-15)
    assert share_within((ends[:, -1] < 0).mean(), norm.cdf(-1), paths)
    assert ABM.reaches_zero
    assert OU.reaches_zero
    fit = ABM.fit(ends[ends.min(axis=1) < 0][:50], 1.0)  # such a path is nothing special to it
    assert (fit.status == Status.OK).all()


@pytest.mark.parametrize("seed", range(5))
def test_a_geometric_price_never_reaches_zero(seed):
    prices = 100 * np.exp(brownian(np.full(500, 1 / 50), -0.3, 0.8, 200, seed))
    assert prices.min() > 0
    assert not GBM.reaches_zero
    assert not EXP_OU.reaches_zero
    assert (GBM.fit(prices, 1 / 50).status == Status.OK).all()


def test_a_geometric_price_grows_at_mu_in_the_mean_and_less_in_the_median():
    """S0 = 100, mu = 0.1, sigma = 0.2, two years: mean 122.140…, variance 1242.497…; the median at mu − sigma²/2."""
    mu, sigma, years, paths = 0.1, 0.2, 2.0, 40_000
    ends = 100 * np.exp(brownian(np.full(8, years / 8), mu - sigma**2 / 2, sigma, paths, seed=2)[:, -1])
    mean, variance = 122.140275816017, 1242.49704551623
    assert abs(ends.mean() - mean) < STANDARD_ERRORS * np.sqrt(variance / paths)
    fourth = np.exp(4 * mu * years) * np.exp(6 * sigma**2 * years) * 100**4  # a bound on the spread of the variance
    assert abs(ends.var() - variance) < STANDARD_ERRORS * np.sqrt((fourth - mean**4) / paths)
    assert share_within((ends < 100 * np.exp((mu - sigma**2 / 2) * years)).mean(), 0.5, paths)
    # with sigma²/2 over mu nearly every path sinks while the mean grows: 12.18 and 0.223 after fifty years
    assert np.exp(0.05 * 50) == pytest.approx(12.1825, abs=1e-4)
    assert np.exp((0.05 - 0.4**2 / 2) * 50) == pytest.approx(0.22313, abs=1e-5)
    fit = GBM.fit(np.exp(brownian(np.full(100_000, 1 / 252), 0.05 - 0.08, 0.4, 1, seed=3)), 1 / 252)
    assert abs(fit.mu[0] - 0.05) < STANDARD_ERRORS * fit.mu_se[0]
    assert fit.sigma[0] == pytest.approx(0.4, rel=0.01)


def test_error_of_the_drift_depends_on_the_span_alone():
    """20 % volatility and 25 years: 4 % a year, whether seen daily, weekly or at uneven times."""
    n = 25 * 252
    x = brownian(np.full(n, 1 / 252), 0.05, 0.2, 20, seed=4)
    uneven = np.sort(np.random.default_rng(5).choice(np.arange(1, n), 600, replace=False))
    uneven = np.concatenate([[0], uneven, [n]])
    for at in (np.arange(n + 1), np.arange(0, n + 1, 5), uneven):
        steps = np.tile(np.diff(at) / 252, (20, 1))
        for model, values in ((ABM, x), (GBM, np.exp(x))):
            fit = model.fit(values[:, at], steps)
            np.testing.assert_allclose(fit.mu_se, 0.04, rtol=0.12)  # as sigma is estimated from some 600 steps
            np.testing.assert_allclose(fit.mu_se / fit.sigma, 0.2, rtol=0.01)


def test_error_of_the_volatility_depends_on_the_count_alone():
    """250 steps: 4.47 %, whether they are minutes, days or months."""
    for step in (1e-5, 1 / 252, 1 / 12):
        fit = ABM.fit(brownian(np.full(250, step), 0.0, 0.3, 4000, seed=6), step)
        np.testing.assert_allclose(fit.sigma_se / fit.sigma, 0.0447213595, rtol=1e-8)
        assert fit.sigma.std() / 0.3 == pytest.approx(0.0447, rel=0.05)


def test_vasicek_transition():
    """Vasicek (1977): monthly, kappa 0.261, theta 0.0717, sigma 0.02237, from 0.05: mean, deviation, density there."""
    kappa, theta, sigma, x0, dt = 0.261, 0.0717, 0.02237, 0.05, 1 / 12
    mean, sd, density = 0.0504668792826889, 0.00638806797831900, 62.4511639130073
    at_mean = OU.loglik([x0, mean], dt, kappa, theta, sigma)
    assert np.exp(at_mean) == pytest.approx(density, rel=1e-13)
    for deviations in (-2.0, 0.5, 3.0):
        away = OU.loglik([x0, mean + deviations * sd], dt, kappa, theta, sigma)
        assert at_mean - away == pytest.approx(deviations**2 / 2, rel=1e-11)
    assert sigma / np.sqrt(2 * kappa) == pytest.approx(0.0309621230721361, rel=1e-13)
    assert np.log(2) / kappa == pytest.approx(2.65573632398446, rel=1e-13)


@pytest.mark.parametrize(
    ("r0", "a", "b", "s", "prices"),
    [
        (0.05, 0.1, 0.05, 0.01, (0.951244142965, 0.779935605266, 0.611649766059, 0.241693892150)),
        (0.1, 0.3, 0.1, 0.03, (0.904946466915, 0.610805182908, 0.377811045746, 0.056416371574)),
        (0.05, 0.261, 0.0717, 0.02237, (0.948824093389, 0.745624392072, 0.536698068828, 0.138235117178)),
    ],
)
def test_vasicek_bond_prices_by_integrating_the_transition(r0, a, b, s, prices):
    """E exp(−∫r dt) from our transition law: the mean of r is read off the likelihood's peak, its spread off its width.

    For a Gaussian integral the price is exp(−mean + variance/2) with Cov(r_u, r_v) = e^{−a(v−u)} Var(r_u).
    """
    for years, price in zip((1, 5, 10, 30), prices, strict=True):
        t, weights = np.polynomial.legendre.leggauss(40)
        t, weights = years * (t + 1) / 2, weights * years / 2
        mean, variance = law(r0, t, a, b, s)
        to_the_end = -np.expm1(-a * (years - t)) / a  # ∫ e^{−a(v−u)} dv over v from u on
        found = np.exp(-(weights @ mean) + weights @ (variance * to_the_end))
        assert found == pytest.approx(price, rel=1e-9)


def law(x0, t, kappa, theta, sigma):
    """Mean and variance of the transition, from three values of our log-likelihood at each time."""
    at = np.array([-0.01, 0.0, 0.01])
    paths = np.stack([np.full((t.size, 3), x0), np.broadcast_to(x0 + at, (t.size, 3))], axis=-1)
    low, middle, high = OU.loglik(paths, np.repeat(t[:, None], 3, axis=1), kappa, theta, sigma).T
    curvature = (low - 2 * middle + high) / 0.01**2
    return x0 - (high - low) / 0.02 / curvature, -1 / curvature


@pytest.mark.parametrize("kind", ["calendar", "irregular"])
def test_kappa_is_biased_upwards_by_some_four_over_the_span_at_any_steps(kind):
    """Tang & Chen (2009): the span decides, not how often it is looked at."""
    n, kappa, paths = 250, 5.0, 800
    rng = np.random.default_rng(7)
    steps = rng.choice([1, 1, 1, 1, 3], n) / 365 if kind == "calendar" else rng.exponential(1 / 252, n)
    x = pulled(steps, np.full(paths, kappa), seed=8)
    found = OU.fit(x, np.tile(steps, (paths, 1)), intervals=False).kappa
    error = found.std() / np.sqrt(paths) * steps.sum() / 4
    assert abs((found.mean() - kappa) * steps.sum() / 4 - 1.1) < 0.2 + STANDARD_ERRORS * error


def test_euler_regression_sees_less_than_the_pull_and_swings_have_none():
    """(1 − e^{−κΔ})/Δ: 5 seen monthly is 4.08911. A slope below zero has no pull at all, and is said to have none."""
    assert -np.expm1(-5 / 12) * 12 == pytest.approx(4.08911, abs=1e-5)
    swing = (-1.0) ** np.arange(200) + 0.1 * np.random.default_rng(9).standard_normal(200)
    for dt in (1 / 12, np.random.default_rng(10).choice([1, 3], 199) / 365):
        assert OU.fit(swing, dt).status == Status.ALTERNATING
        assert EXP_OU.fit(np.exp(swing), dt).status == Status.ALTERNATING


# Coverage.


def holds(lower, truth, upper):
    """Whether each interval holds the truth; NaN is an open end."""
    return ~(truth < lower) & ~(truth > upper)


def assert_share(held, least, most):
    """The share held, within three standard errors of the simulation of a band."""
    error = STANDARD_ERRORS * np.sqrt(0.05 * 0.95 / held.size)
    assert least - error <= held.mean() <= most + error, held.mean()


def uneven(windows, n, seed):
    return np.random.default_rng(seed).choice([1, 1, 1, 3, 4], (windows, n)) / 365


@pytest.mark.parametrize("sigma", [0.2, 1.5])
@pytest.mark.parametrize("n", [10, 60, 250])
def test_gaussian_intervals_of_brownian_motion(n, sigma):
    """mu by Student's t and for gbm with the error of sigma²/2; sigma by χ², a little wide as tails are estimated."""
    windows, mu = 6000, 0.1
    dt = uneven(windows, n, seed=n)
    z = np.random.default_rng(n + 1).standard_normal((windows, n))
    d = (mu - sigma**2 / 2) * dt + sigma * np.sqrt(dt) * z
    x = np.concatenate([np.zeros((windows, 1)), d.cumsum(axis=1)], axis=1)
    arithmetic, geometric = ABM.fit(x, dt), GBM.fit(np.exp(x), dt)
    assert_share(holds(arithmetic.mu_lower, mu - sigma**2 / 2, arithmetic.mu_upper), 0.945, 0.955)
    assert_share(holds(geometric.mu_lower, mu, geometric.mu_upper), 0.945, 0.955)
    assert_share(holds(geometric.sigma_lower, sigma, geometric.sigma_upper), 0.95, 0.96)


def test_fat_tails():
    """Student's t of five degrees, a year of days: sigma is held in 90 % and more, where χ² alone falls below 85."""
    windows, n = 8000, 250
    z = np.random.default_rng(11).standard_t(5, (windows, n)) / np.sqrt(5 / 3)
    x = brownian(np.full(n, 1 / 252), 0.0, 0.3, windows, seed=None, noise=z)
    fit = ABM.fit(x, 1 / 252)
    assert_share(holds(fit.sigma_lower, 0.3, fit.sigma_upper), 0.90, 0.94)
    assert_share(holds(fit.mu_lower, 0.0, fit.mu_upper), 0.945, 0.955)
    narrow = np.exp(1.96 / np.sqrt(2 * n))
    assert holds(fit.sigma / narrow, 0.3, fit.sigma * narrow).mean() < 0.85


def pulled(steps, kappa, seed, theta=0.0, sigma=1.0):
    """Exact paths at steps of shape (n,) or (paths, n), with a pull each; from the stationary law, or 0."""
    steps = np.broadcast_to(steps, (kappa.size, np.shape(steps)[-1]))
    z = np.random.default_rng(seed).standard_normal((kappa.size, steps.shape[1] + 1))
    safe = np.where(kappa > 0, kappa, 1)
    x = np.empty(z.shape)
    x[:, 0] = np.where(kappa > 0, sigma * z[:, 0] / np.sqrt(2 * safe), 0)
    for i in range(steps.shape[1]):
        decay = np.exp(-kappa * steps[:, i])
        sd = np.where(kappa > 0, np.sqrt((1 - decay**2) / (2 * safe)), np.sqrt(steps[:, i]))
        x[:, i + 1] = x[:, i] * decay + sigma * sd * z[:, i + 1]
    return theta + x


UNEQUAL = [(kind, n, c) for kind in ("calendar", "irregular") for n, c in ((60, 5.0), (250, 1.0), (250, 20.0))]


@cache
def fitted(kind, n, c):
    """Fits of windows with the pull c = kappa T over each, at steps of their own."""
    windows = 2000 if kind == "calendar" else 1000
    rng = np.random.default_rng([n, int(c)])
    steps = uneven(windows, n, seed=n) if kind == "calendar" else rng.exponential(1 / 252, (windows, n)) + 1e-7
    kappa = c / steps.sum(axis=1)
    return OU.fit(pulled(steps, kappa, seed=n + int(c), theta=40.0, sigma=7.0), steps), kappa


@pytest.mark.parametrize(("kind", "n", "c"), UNEQUAL)
def test_intervals_at_unequal_steps(kind, n, c):
    fit, kappa = fitted(kind, n, c)
    assert (fit.status <= Status.NO_REVERSION).all()
    assert_share(holds(fit.kappa_lower, kappa, fit.kappa_upper), 0.94, 0.976)
    assert_share(holds(fit.theta_lower, 40.0, fit.theta_upper), 0.94, 0.975)
    given = np.isfinite(fit.sigma_lower)
    assert given.mean() > 0.95
    assert_share(holds(fit.sigma_lower, 7.0, fit.sigma_upper)[given], 0.94, 0.968)
    above = fit.kappa_median_unbiased > kappa
    assert abs(above.mean() - 0.5) < 0.02 + STANDARD_ERRORS * np.sqrt(0.25 / above.size)


@pytest.mark.parametrize("kind", ["calendar", "irregular"])
def test_without_pull_at_unequal_steps(kind):
    """One side only can miss, so 97.5 %; and 5 % of walks look pulled at the 5 % level."""
    fit, _ = fitted(kind, 250, 0.0)
    assert_share(holds(fit.kappa_lower, 0.0, fit.kappa_upper), 0.965, 1.0)
    assert share_within((fit.no_reversion_p < 0.05).mean(), 0.05, fit.kappa.size)


def test_a_few_long_gaps_widen_the_interval():
    """Days, and three steps in a hundred of some months: they hold most of the time, and tell little of the pull."""
    windows, n, c = 1500, 250, 20.0
    rng = np.random.default_rng(12)
    steps = np.where(rng.random((windows, n)) < 0.03, 0.3, 1 / 365) * rng.uniform(0.9, 1.1, (windows, n))
    kappa = c / steps.sum(axis=1)
    fit = OU.fit(pulled(steps, kappa, seed=13), steps)
    assert_share(holds(fit.kappa_lower, kappa, fit.kappa_upper), 0.94, 0.975)


def test_one_price_four_models():
    """Likelihoods compare: on pulled logs exp_ou is best, and each model with a pull beats its own without."""
    x = np.exp(pulled(np.full(1000, 1 / 252), np.array([20.0]), seed=14, theta=3.0, sigma=0.8))
    loglik = {name: rolling(name, x, 1 / 252, 1000).loglik[0, 0] for name in MODELS}
    assert loglik["exp_ou"] == max(loglik.values())
    assert loglik["ou"] > loglik["abm"]
    assert loglik["exp_ou"] > loglik["gbm"]
