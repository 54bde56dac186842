"""The Ornstein–Uhlenbeck fit with noise: the exact likelihood, its true maximum, and what each case holds."""

import duckdb
import numpy as np
import pytest
from scipy.optimize import minimize
from scipy.signal import lfilter
from scipy.stats import multivariate_normal

from driftbook.estimators import MODELS, Status, rolling
from driftbook.estimators.chebyshev import Panels, derivative, least, value
from driftbook.estimators.filtered import filtered_sums

MODEL, OU = MODELS["ou_noise"], MODELS["ou"]
NAMES = tuple(column.name for column in MODEL.columns)
PARAMETERS = ("kappa", "theta", "sigma", "noise")
DT = 1 / 252
SAME_DENSITY = 1e-9  # one likelihood by two ways to add some hundred terms of order one
SHORT_OF_THE_BEST = 1e-6  # of a log-likelihood, which decides nothing
# Two searches end within 1e-6 standard errors of each other; what divides by these, within somewhat more of its size.
SAME_FIT, SAME_ERROR = 1e-6, 1e-5


def noisy(kappa, noise, n, paths, *, seed, steps=DT, sigma=0.3, theta=3.0):
    """Paths of shape (paths, n + 1); from the stationary law where there is one, else from theta."""
    rng = np.random.default_rng(seed)
    steps = np.broadcast_to(steps, (paths, n))
    x = np.full((paths, n + 1), theta)
    if kappa > 0:
        x[:, 0] += sigma / np.sqrt(2 * kappa) * rng.standard_normal(paths)
    for k in range(n):
        b = np.exp(-kappa * steps[:, k])
        variance = (1 - b * b) / (2 * kappa) if kappa else steps[:, k]
        x[:, k + 1] = theta + (x[:, k] - theta) * b + sigma * np.sqrt(variance) * rng.standard_normal(paths)
    return x + noise * rng.standard_normal(x.shape)


def calendar(n, paths, *, seed):
    """Steps of 1, 2, 3 and 4 days of a year of 365."""
    rng = np.random.default_rng(seed)
    return rng.choice([1.0, 2.0, 3.0, 4.0], size=(paths, n), p=[0.78, 0.02, 0.19, 0.01]) / 365


def dense_loglik(y, steps, kappa, theta, sigma, noise):
    """log p(y_1 … y_n | y_0) from the means and covariances of all, X_0 being N(y_0, noise²)."""
    t = np.cumsum(steps)
    decay = np.exp(-kappa * t)
    early = np.minimum(t[:, None], t)
    lag = np.abs(t[:, None] - t)
    of_path = early if kappa == 0 else np.exp(-kappa * lag) * -np.expm1(-2 * kappa * early) / (2 * kappa)
    covariance = sigma**2 * of_path + noise**2 * (np.outer(decay, decay) + np.eye(len(t)))
    return multivariate_normal(theta + (y[0] - theta) * decay, covariance).logpdf(y[1:])


@pytest.mark.parametrize("kappa", [-1.0, 0.0, 3.0, 40.0])
@pytest.mark.parametrize("steps", [np.full(100, DT), calendar(100, 1, seed=5)[0]], ids=["equal", "calendar"])
def test_likelihood_is_that_of_the_joint_law(kappa, steps):
    y = noisy(3.0, 0.01, 100, 1, seed=1)[0]
    for noise in (0.0, 0.004, 0.03):
        found = MODEL.loglik(y, steps, kappa, 2.9, 0.35, noise)
        assert found == pytest.approx(dense_loglik(y, steps, kappa, 2.9, 0.35, noise), abs=SAME_DENSITY)


@pytest.mark.parametrize("steps", ["equal", "calendar"])
@pytest.mark.parametrize("noise", [0.004, 0.012, 0.03])
def test_reported_likelihood_is_that_of_the_reported_parameters(steps, noise):
    given = DT if steps == "equal" else calendar(120, 60, seed=6)
    x = noisy(10.0, noise, 120, 60, seed=2, steps=given)
    fit = MODEL.fit(x, given)
    assert (fit.status <= Status.AT_BOUND).all()
    with_kappa = ~np.isnan(fit.kappa)
    again = MODEL.loglik(x, given, *(fit.columns[name] for name in PARAMETERS))
    np.testing.assert_allclose(fit.loglik[with_kappa], again[with_kappa], rtol=0, atol=SAME_DENSITY)


def profile(phi, y):
    """Log-likelihood at a moving-average root, largest over all else, by filters through the whole window."""
    n = len(y) - 1
    y = y - y.mean()
    h = phi ** np.arange(1, n + 1)
    filtered = lfilter([1.0], [1.0, -phi], np.stack([np.diff(y), y[:-1], np.ones(n)]), axis=1)
    weights = np.eye(n) - np.outer(h, h) / (1 + h @ h)
    gram = filtered @ weights @ filtered.T

    def at(slope):
        e = gram[0] + slope * gram[1]
        rss = e[0] + slope * e[1] - e[2] ** 2 / gram[2, 2]
        return -0.5 * (n * (np.log(2 * np.pi * rss / n) + 1) + np.log1p(h @ h))

    cleared = gram[:2, :2] - np.outer(gram[:2, 2], gram[:2, 2]) / gram[2, 2]
    return at(np.clip(-cleared[0, 1] / cleared[1, 1], 1 - 1 / phi if phi else -np.inf, 1 - phi))


def referee(y):
    """The best of restarted Nelder–Mead searches over ln(1 − phi), and of no noise."""

    def lost(t):
        return -profile(float(-np.expm1(-abs(t[0]))), y)

    best = np.inf
    for start in (0.1, 1.0, 3.0):
        found = minimize(lost, [start], method="Nelder-Mead", options={"xatol": 1e-9, "fatol": 1e-12})
        again = minimize(lost, found.x, method="Nelder-Mead", options={"xatol": 1e-9, "fatol": 1e-12})
        best = min(best, again.fun)
    return -best


def test_maximum_is_the_maximum():
    """Over pulls from none to strong and noise from none to nearly all there is."""
    n, windows = 120, []
    for k, kappa in enumerate((0.0, 2.0, 10.0, 40.0)):
        for j, noise in enumerate((0.0, 0.004, 0.012, 0.03, 0.1)):
            windows.append(noisy(kappa, noise, n, 3, seed=100 * k + j))
    windows = np.concatenate(windows)
    fit = MODEL.fit(windows, DT)
    shortfall = np.array([referee(y) for y in windows]) - fit.loglik
    assert len(windows) >= 60
    assert (fit.status <= Status.AT_BOUND).all()
    assert shortfall.max() <= SHORT_OF_THE_BEST


def test_equal_steps_are_fitted_as_by_the_filter():
    """Steps that differ by 1e-8 go another way, which shares no formula with the first."""
    x = noisy(10.0, 0.012, 120, 200, seed=3)
    steps = np.full((200, 120), DT)
    steps[:, 60] *= 1 + 1e-8
    by_regression, by_filter = MODEL.fit(x, DT), MODEL.fit(x, steps)
    assert np.array_equal(by_regression.status, by_filter.status)
    ok = by_regression.status == Status.OK
    assert ok.sum() > 150
    np.testing.assert_allclose(by_filter.loglik[ok], by_regression.loglik[ok], rtol=1e-9)
    for name in PARAMETERS:
        se = by_regression.columns[f"{name}_se"][ok]
        assert (abs(by_filter.columns[name] - by_regression.columns[name])[ok] <= SAME_FIT * se).all(), name
        np.testing.assert_allclose(by_filter.columns[f"{name}_se"][ok], se, rtol=SAME_ERROR, err_msg=name)
    for name in ("kappa_upper", "kappa_median_unbiased", "theta_lower", "sigma_lower", "noise_upper", "kurtosis"):
        np.testing.assert_allclose(
            by_filter.columns[name][ok], by_regression.columns[name][ok], rtol=SAME_ERROR, atol=1e-9, err_msg=name
        )


@pytest.mark.parametrize("steps", ["equal", "calendar"])
def test_where_no_noise_is_seen_the_fit_is_that_of_ou(steps):
    given = DT if steps == "equal" else calendar(150, 60, seed=7)
    x = noisy(10.0, 0.0, 150, 60, seed=4, steps=given)
    fit, plain = MODEL.fit(x, given), OU.fit(x, given)
    none = fit.status == Status.AT_BOUND
    assert 15 <= none.sum() <= 45  # half of them; four standard deviations
    for name in (
        "kappa",
        "theta",
        "sigma",
        "loglik",
        "kappa_upper",
        "theta_upper",
        "sigma_se",
        "half_life",
        "kurtosis",
    ):
        assert np.array_equal(fit.columns[name][none], plain.columns[name][none], equal_nan=True), name
    assert (fit.noise[none] == 0).all()
    assert (fit.noise_share[none] == 0).all()
    assert (fit.no_noise_p[none] == 1).all()
    assert np.isnan(fit.noise_se[none]).all()
    assert (fit.loglik >= plain.loglik - SAME_DENSITY).all()
    assert (fit.noise_lower[none] == 0).all()
    assert (fit.kappa_lower[none] <= plain.kappa_lower[none]).all()
    assert (fit.sigma_lower[none] < plain.sigma_lower[none]).all()


@pytest.mark.parametrize("steps", ["equal", "calendar"])
def test_upper_end_of_noise_that_is_not_seen(steps):
    """There the likelihood has lost what half a χ² allows, 1.92; the way there is taken for a parabola."""
    given = DT if steps == "equal" else calendar(150, 12, seed=7)
    x = noisy(10.0, 0.0, 150, 12, seed=4, steps=given)
    fit = MODEL.fit(x, given)
    lost = []
    for k in np.flatnonzero(fit.status == Status.AT_BOUND):
        own = given if steps == "equal" else given[k]

        def minus(z, k=k, own=own):
            return -float(MODEL.loglik(x[k], own, z[0], z[1], np.exp(z[2]), fit.noise_upper[k]))

        start = [fit.kappa[k], fit.theta[k], np.log(fit.sigma[k])]
        best = minimize(minus, start, method="Nelder-Mead", options={"maxiter": 2000, "fatol": 1e-6})
        lost.append(fit.loglik[k] + best.fun)
    assert len(lost) >= 3
    assert 0.8 < min(lost) <= max(lost) < 4


def test_only_noise():
    """Values that do not depend on each other: sigma is zero and kappa is not known, or noise takes nearly all."""
    x = np.random.default_rng(8).standard_normal((300, 201))
    fit = MODEL.fit(x, DT)
    pure = (fit.status == Status.AT_BOUND) & (fit.sigma == 0)
    assert pure.mean() > 0.4
    assert np.isnan(fit.kappa[pure]).all()
    assert (fit.noise_share[pure] == 1).all()
    np.testing.assert_allclose(fit.noise[pure], x[pure].std(axis=1), rtol=0.05)  # a slow way back may take a little
    assert np.isnan(fit.sigma_lower[pure]).all()


def case(x, dt=DT):
    fit = MODEL.fit(x, dt)
    return Status(int(fit.status)), {name: float(values) for name, values in fit.columns.items()}


def test_case_ok():
    status, row = case(noisy(40.0, 0.012, 250, 1, seed=9)[0])
    assert status == Status.OK
    assert np.isfinite(list(row.values())).all()
    assert 0 < row["kappa_lower"] < row["kappa_median_unbiased"] < row["kappa_upper"]
    assert row["noise_lower"] < row["noise"] < row["noise_upper"]
    assert row["no_noise_p"] < 0.05
    of_step = row["sigma"] ** 2 * -np.expm1(-row["kappa"] * DT) / row["kappa"]
    assert row["noise_share"] == pytest.approx(2 * row["noise"] ** 2 / (2 * row["noise"] ** 2 + of_step), rel=1e-12)


def test_case_no_reversion():
    fit = MODEL.fit(noisy(0.0, 0.02, 150, 300, seed=10), DT)
    none = fit.status == Status.NO_REVERSION
    assert none.any()
    assert (fit.kappa[none] <= 0).all()
    assert np.isnan(fit.half_life[none]).all()
    assert np.isnan(fit.stationary_sd[none]).all()
    assert (fit.kappa_lower[none] == 0).all()
    assert np.isfinite(fit.noise[none]).all()


def test_case_alternating():
    x = lfilter([1.0], [1.0, 0.9], np.random.default_rng(11).standard_normal(251))
    status, row = case(x)
    assert status == Status.ALTERNATING
    assert np.isnan(list(row.values())).all()


@pytest.mark.parametrize("x", [np.full(61, np.pi), np.zeros(61), 0.1 * np.arange(61)])
def test_case_flat(x):
    for dt in (DT, calendar(60, 1, seed=3)[0]):
        status, row = case(x, dt)
        if dt is DT or np.ptp(x) == 0:  # a ramp over unequal steps is no line
            assert status == Status.FLAT
            assert np.isnan(list(row.values())).all()


@pytest.mark.parametrize("bad", [np.nan, np.inf])
@pytest.mark.parametrize("dt", [DT, calendar(120, 1, seed=3)[0]], ids=["equal", "calendar"])
def test_case_not_finite_stays_where_it_is(bad, dt):
    x = noisy(10.0, 0.01, 120, 1, seed=12)[0]
    spoilt = x.copy()
    spoilt[70] = bad
    whole, fit = rolling("ou_noise", x, dt, 40), rolling("ou_noise", spoilt, dt, 40)
    hit = np.abs(np.arange(81) + 20 - 70) <= 20
    assert (fit.status[hit] == Status.OUT_OF_RANGE).all()
    for name in NAMES:
        assert np.array_equal(fit.columns[name][~hit], whole.columns[name][~hit], equal_nan=True), name
        assert np.isnan(fit.columns[name][hit]).all()


@pytest.mark.parametrize("n", [0, 1, 3, 9])
def test_case_too_short(n):
    assert case(np.arange(n + 1.0) ** 2)[0] == Status.TOO_SHORT


@pytest.mark.parametrize("dt", [DT, calendar(90, 1, seed=3)[0]], ids=["equal", "calendar"])
def test_bits_depend_on_the_window_alone(dt):
    x = noisy(10.0, 0.01, 90, 3, seed=13)
    steps = np.broadcast_to(dt, (3, 90)) if np.ndim(dt) else dt
    one = steps[:1] if np.ndim(dt) else steps
    whole, alone = rolling("ou_noise", x, steps, 20), rolling("ou_noise", x[:1], one, 20)
    later, threaded = rolling("ou_noise", x, steps, 20, first=27), rolling("ou_noise", x, steps, 20, threads=2)
    bare = rolling("ou_noise", x, steps, 20, intervals=False)
    for name in NAMES:
        values = whole.columns[name]
        assert np.array_equal(values[:1], alone.columns[name], equal_nan=True), name
        assert np.array_equal(values[:, 27:], later.columns[name], equal_nan=True), name
        assert np.array_equal(values, threaded.columns[name], equal_nan=True), name
        expected = values if name in (*PARAMETERS, "loglik") else np.full(values.shape, np.nan)
        assert np.array_equal(bare.columns[name], expected, equal_nan=True), name


@pytest.mark.parametrize("scale", [1e-100, 1e-12, 1e12, 1e100])
@pytest.mark.parametrize("dt", [DT, calendar(150, 1, seed=3)[0]], ids=["equal", "calendar"])
def test_scale_of_the_data_does_not_matter(scale, dt):
    x = noisy(10.0, 0.012, 150, 1, seed=14)[0]
    fit, scaled = rolling("ou_noise", x, dt, 80), rolling("ou_noise", x * scale, dt, 80)
    assert np.array_equal(scaled.status, fit.status)
    np.testing.assert_allclose(scaled.loglik, fit.loglik - 80 * np.log(scale), rtol=1e-9)
    ok = fit.status == Status.OK
    for name, unit in (("kappa", 1.0), ("theta", scale), ("sigma", scale), ("noise", scale)):
        gap = abs(scaled.columns[name] / unit - fit.columns[name])[ok]
        assert (gap <= SAME_FIT * fit.columns[f"{name}_se"][ok]).all(), name


def test_one_large_value_leaves_no_trace():
    x = noisy(10.0, 0.012, 300, 1, seed=15)[0]
    spoilt = x.copy()
    spoilt[100] = 1e12
    whole, fit = rolling("ou_noise", x, DT, 60), rolling("ou_noise", spoilt, DT, 60)
    for name in NAMES:
        assert np.array_equal(fit.columns[name][101:], whole.columns[name][101:], equal_nan=True), name


def test_formulas_in_sql_say_the_same():
    fit = MODEL.fit(np.concatenate([noisy(k, 0.01, 100, 40, seed=16) for k in (0.0, 5.0, 40.0)]), DT)
    stored = [column.name for column in MODEL.stored]
    with duckdb.connect() as connection:
        connection.execute(f"CREATE TABLE fit ({', '.join(name + ' DOUBLE' for name in stored)})")
        rows = np.column_stack([fit.columns[name] for name in stored])
        values = [[None if np.isnan(each) else float(each) for each in row] for row in rows]
        connection.executemany(f"INSERT INTO fit VALUES ({', '.join('?' * len(stored))})", values)
        for column in MODEL.derived:
            found = connection.execute(f"SELECT CAST({column.sql} AS DOUBLE) FROM fit").fetchnumpy()
            found = np.ma.filled(next(iter(found.values())), np.nan)
            np.testing.assert_allclose(found, fit.columns[column.name], rtol=1e-12, err_msg=column.name)


# The helpers by themselves.


@pytest.mark.parametrize("lead", [0, 1])
@pytest.mark.parametrize("skip", [0, 4])
def test_filtered_sums_are_those_of_a_loop(lead, skip):
    n = offsets = 13
    w = np.random.default_rng(0).standard_normal((n + offsets - 1 - skip, 2, 3))
    decays = np.array([0.0, 0.3, 0.99, -0.3])
    found = filtered_sums(w, decays[:, None], n - 1 - skip, offsets - skip, skip, lead)
    for o in range(offsets - skip):
        for j, a in enumerate(decays):
            filtered = lfilter([1.0], [1.0, -a], w[o + lead : o + n], axis=0)
            fading = a ** np.arange(1, n - lead + 1)
            np.testing.assert_allclose(found.total[o, :, j], filtered.sum(axis=0), atol=1e-12)
            np.testing.assert_allclose(found.fading[o, :, j], np.tensordot(fading, filtered, axes=1), atol=1e-12)
            for p in range(2):
                for q in range(2):
                    expected = (filtered[:, p] * filtered[:, q]).sum(axis=0)
                    np.testing.assert_allclose(found.gram(p, q)[o, j], expected, atol=1e-11)


def test_panels_find_the_least():
    panels, where = Panels(0.0, 5.5, 5, 16), np.array([0.3, 1.09, 1.1, 1.11, 2.3, 5.4])
    values = np.cosh(panels.nodes[:, None] - where)
    found = least(panels, values, values.argmin(axis=0))
    np.testing.assert_allclose(panels.at(found.panel, found.z), where, atol=1e-12)
    np.testing.assert_allclose(found.value, 1.0, rtol=1e-13)
    np.testing.assert_allclose(found.curvature / panels.half**2, 1.0, rtol=1e-8)
    slope = value(derivative(panels.series(values, found.panel)), found.z + 0.01) / panels.half
    np.testing.assert_allclose(slope, np.sinh(0.01 * panels.half), rtol=1e-8)
