"""The damped oscillator whose velocity is hidden: the exact likelihood, its true maximum, and what each case holds."""

import duckdb
import numpy as np
import pytest
from scipy.linalg import expm
from scipy.optimize import minimize
from scipy.signal import lfilter
from scipy.stats import multivariate_normal

from driftbook.estimators import MODELS, Status, rolling
from driftbook.estimators.jets import covariance, exponential, inverse, logarithm, relative, root, times, variables

MODEL, OU = MODELS["inertial"], MODELS["ou"]
NAMES = tuple(column.name for column in MODEL.columns)
PARAMETERS = ("damping", "omega", "theta", "eta")
DT = 1 / 252
SAME_DENSITY = 1e-9  # one likelihood by two ways to add some hundred terms of order one
SHORT_OF_THE_BEST = 1e-6  # of a log-likelihood, which decides nothing
# Two searches end within 1e-6 standard errors of each other; what divides by these, within somewhat more of its size.
SAME_FIT, SAME_ERROR = 1e-6, 1e-5

# damping and omega a year: slow pull, strong damping, critical, underdamped
TRUTHS = {"overdamped": (250.0, 54.8), "strong": (1000.0, 110.0), "critical": (60.0, 30.0), "swings": (20.0, 40.0)}


def law(damping, omega, dt):
    """Transition matrix and noise covariance over a step for eta = 1, by matrix exponentials (Van Loan 1978).

    Strong damping makes these grow out of range: there the covariance is what the stationary one has lost.
    """
    A = np.array([[0.0, 1.0], [-(omega**2), -damping]])
    if damping * dt > 8:
        P, B = np.diag([1 / omega**2, 1.0]) / (2 * damping), expm(A * dt)
        return B, P - B @ P @ B.T
    block = np.zeros((4, 4))
    block[:2, :2], block[:2, 2:], block[2:, 2:] = -A, [[0, 0], [0, 1]], A.T
    grown = expm(block * dt)
    return grown[2:, 2:].T, grown[2:, 2:].T @ grown[:2, 2:]


def swings(damping, omega, n, paths, *, seed, steps=DT, theta=3.0, sigma_s=0.3):
    """Positions of paths in the stationary law, shape (paths, n + 1)."""
    rng = np.random.default_rng(seed)
    steps, eta = np.broadcast_to(steps, n), sigma_s * damping
    state = rng.standard_normal((paths, 2)) * [eta / (np.sqrt(2 * damping) * omega), eta / np.sqrt(2 * damping)]
    x = np.empty((paths, n + 1))
    x[:, 0] = state[:, 0]
    laws = {dt: law(damping, omega, dt) for dt in np.unique(steps)}
    for k, dt in enumerate(steps):
        A, Q = laws[dt]
        state = state @ A.T + eta * rng.standard_normal((paths, 2)) @ np.linalg.cholesky(Q).T
        x[:, k + 1] = state[:, 0]
    return theta + x


def calendar(n, *, seed):
    """Steps of 1, 2, 3 and 4 days of a year of 365."""
    return np.random.default_rng(seed).choice([1.0, 2.0, 3.0, 4.0], size=n, p=[0.78, 0.02, 0.19, 0.01]) / 365


def dense_loglik(x, steps, damping, omega, theta, eta):
    """log p(x_1 … x_n | x_0) from the stationary autocovariance, of a process that is not observed in between."""
    t = np.concatenate([[0.0], np.cumsum(steps)])
    lag = np.abs(t[:, None] - t)
    rate = np.sqrt(complex(damping**2 / 4 - omega**2))
    a, b = -damping / 2 + rate, -damping / 2 - rate
    shape = ((a * np.exp(b * lag) - b * np.exp(a * lag)) / (a - b)).real
    S = eta**2 / (2 * damping * omega**2) * shape
    mean = theta + S[1:, 0] / S[0, 0] * (x[0] - theta)
    conditional = S[1:, 1:] - np.outer(S[1:, 0], S[0, 1:]) / S[0, 0]
    return multivariate_normal(mean, conditional, allow_singular=True).logpdf(x[1:])


@pytest.mark.parametrize("name", TRUTHS)
@pytest.mark.parametrize("steps", [np.full(100, DT), calendar(100, seed=5)], ids=["equal", "calendar"])
def test_likelihood_is_that_of_the_joint_law(name, steps):
    x = swings(*TRUTHS[name], 100, 1, seed=1, steps=steps)[0]
    damping, omega = TRUTHS[name][0] * 1.1, TRUTHS[name][1] * 0.97
    found = MODEL.loglik(x, steps, damping, omega, 2.9, 70.0)
    assert found == pytest.approx(dense_loglik(x, steps, damping, omega, 2.9, 70.0), abs=SAME_DENSITY)


@pytest.mark.parametrize("name", TRUTHS)
@pytest.mark.parametrize("steps", ["equal", "calendar"])
def test_reported_likelihood_is_that_of_the_reported_parameters(name, steps):
    given = DT if steps == "equal" else np.broadcast_to(calendar(100, seed=6), (40, 100))
    x = swings(*TRUTHS[name], 100, 40, seed=2, steps=given if steps == "equal" else given[0])
    fit = MODEL.fit(x, given)
    ok = fit.status == Status.OK
    assert ok.sum() >= 20
    again = MODEL.loglik(x, given, *(fit.columns[each] for each in PARAMETERS))
    np.testing.assert_allclose(fit.loglik[ok], again[ok], rtol=0, atol=SAME_DENSITY)


def profile(damping, omega, x):
    """Log-likelihood, largest over level and scale: steady innovations by filters, and how they begin."""
    A, Q = law(damping, omega, DT)
    n, trace, det = len(x) - 1, A[0, 0] + A[1, 1], np.exp(-damping * DT)
    c0 = Q[0, 0] * (1 + A[1, 1] ** 2) + A[0, 1] ** 2 * Q[1, 1] - 2 * A[0, 1] * A[1, 1] * Q[0, 1]
    r = (A[0, 1] * Q[0, 1] - A[1, 1] * Q[0, 0]) / c0
    psi = 2 * r / (1 + np.sqrt(1 - 4 * r * r))
    F = c0 / (1 + psi * psi)
    d = (Q[0, 0] + A[0, 1] ** 2 / (2 * damping)) / F - 1
    both = np.stack([x - x[0], np.ones(n + 1)])
    e = np.empty((2, n))
    e[:, 0] = both[:, 1] - A[0, 0] * both[:, 0]
    e[:, 1:] = both[:, 2:] - trace * both[:, 1:-1] + det * both[:, :-2]
    e = lfilter([1.0], [1.0, psi], e, axis=1)
    h = (-psi) ** np.arange(n)
    gram = e @ e.T - d / (1 + d * h @ h) * np.outer(e @ h, e @ h)
    rss = gram[0, 0] - gram[0, 1] ** 2 / gram[1, 1]
    return -0.5 * (n * (np.log(2 * np.pi * rss / n) + 1) + np.log1p(d * h @ h))


def referee(x, starts):
    """The best of Nelder–Mead searches, each restarted where it ended, over ln damping and ln omega²/damping."""

    def lost(z):
        damping = np.exp(min(z[0], 11.0))
        with np.errstate(all="ignore"):
            found = -profile(damping, np.sqrt(damping * np.exp(z[1])), x)
        return found if np.isfinite(found) else 1e10

    best = np.inf
    for start in starts:
        for _ in range(2):
            found = minimize(lost, start, method="Nelder-Mead", options={"xatol": 1e-7, "fatol": 1e-9})
            start = found.x
        best = min(best, found.fun)
    return -best


def test_maximum_is_the_maximum():
    """Over all kinds of motion; where damping ends at its bound, the best is that of `ou`."""
    windows, starts = [], []
    for seed, (damping, omega) in enumerate(TRUTHS.values()):
        windows.append(swings(damping, omega, 100, 15, seed=seed))
        starts += 15 * [[(np.log(damping), np.log(omega**2 / damping)), (5.0, 3.0)]]
    windows = np.concatenate(windows)
    fit = MODEL.fit(windows, DT)
    shortfall = [referee(x, start) - found for x, start, found in zip(windows, starts, fit.loglik, strict=True)]
    assert len(windows) >= 60
    assert (fit.status <= Status.AT_BOUND).all()
    assert max(shortfall) <= SHORT_OF_THE_BEST


def test_equal_steps_are_fitted_as_by_the_filter():
    """Steps that differ by 1e-8 go another way, which shares the transition and nothing else."""
    x = np.concatenate([swings(*truth, 100, 30, seed=3) for truth in TRUTHS.values()])
    steps = np.full((len(x), 100), DT)
    steps[:, 60] *= 1 + 1e-8
    by_sums, by_filter = MODEL.fit(x, DT), MODEL.fit(x, steps)
    assert np.array_equal(by_sums.status, by_filter.status)
    ok = by_sums.status == Status.OK
    assert ok.sum() > 90
    np.testing.assert_allclose(by_filter.loglik[ok], by_sums.loglik[ok], rtol=1e-9)
    for name in (*PARAMETERS, "kappa_s", "sigma_s"):
        se = by_sums.columns[f"{name}_se"][ok]
        assert (abs(by_filter.columns[name] - by_sums.columns[name])[ok] <= SAME_FIT * se).all(), name
        np.testing.assert_allclose(by_filter.columns[f"{name}_se"][ok], se, rtol=SAME_ERROR, err_msg=name)
    for name in ("kappa_s_upper", "theta_lower", "damping_lower", "eta_upper", "omega_upper", "kurtosis", "period"):
        np.testing.assert_allclose(
            by_filter.columns[name][ok], by_sums.columns[name][ok], rtol=SAME_ERROR, atol=1e-9, err_msg=name
        )


@pytest.mark.parametrize("damping_step", [1e4, 1e5, 1e6])
def test_strong_damping_leaves_ou(damping_step):
    """The log-likelihoods differ by some 20 over damping times a step (Smoluchowski's limit)."""
    x = swings(1000.0, 110.0, 250, 1, seed=4)[0]
    damping = damping_step / DT
    found = MODEL.loglik(x, DT, damping, np.sqrt(12.0 * damping), 3.0, 0.3 * damping)
    assert abs(found - OU.loglik(x, DT, 12.0, 3.0, 0.3)) * damping_step < 100


@pytest.mark.parametrize("steps", ["equal", "calendar"])
def test_without_inertia_the_fit_is_that_of_ou(steps):
    rng, b = np.random.default_rng(5), np.exp(-10 * DT)
    x = lfilter([1.0], [1.0, -b], rng.standard_normal((60, 151)), axis=1)
    given = DT if steps == "equal" else np.broadcast_to(calendar(150, seed=7), (60, 150))
    fit, plain = MODEL.fit(x, given), OU.fit(x, given)
    none = fit.status == Status.AT_BOUND
    assert none.sum() >= 15
    pairs = [("kappa_s", "kappa"), ("sigma_s", "sigma"), ("theta", "theta"), ("loglik", "loglik")]
    pairs += [(f"{a}_{end}", f"{b}_{end}") for a, b in pairs[:3] for end in ("se", "lower", "upper")]
    for name, of_ou in pairs:
        assert np.array_equal(fit.columns[name][none], plain.columns[of_ou][none], equal_nan=True), name
    for name in ("damping", "omega", "eta", "damping_se", "period"):
        assert np.isnan(fit.columns[name][none]).all(), name
    assert (fit.loglik >= plain.loglik - SAME_DENSITY).all()
    assert np.isnan(fit.damping_upper[none]).all()
    assert (fit.damping_lower[none] > 0).mean() > 0.9
    at_most = np.sqrt(fit.damping_lower * fit.kappa_s_lower)[none]
    np.testing.assert_allclose(fit.omega_lower[none], at_most, rtol=1e-12)


def test_lower_end_of_damping_that_is_too_strong_to_tell():
    """There the likelihood has lost no less than half a χ² allows, 1.92: the way there is taken for a parabola."""
    rng, b = np.random.default_rng(5), np.exp(-10 * DT)
    x = lfilter([1.0], [1.0, -b], rng.standard_normal((12, 151)), axis=1)
    fit = MODEL.fit(x, DT)
    lost = []
    for k in np.flatnonzero((fit.status == Status.AT_BOUND) & (fit.damping_lower > 0)):

        def minus(z, k=k):
            damping = fit.damping_lower[k]
            pull, theta, sigma = np.exp(z[0]), z[1], np.exp(z[2])
            return -float(MODEL.loglik(x[k], DT, damping, np.sqrt(pull * damping), theta, sigma * damping))

        start = [np.log(max(fit.kappa_s[k], 1.0)), fit.theta[k], np.log(fit.sigma_s[k])]
        best = minimize(minus, start, method="Nelder-Mead", options={"maxiter": 2000, "fatol": 1e-6})
        lost.append(fit.loglik[k] + best.fun)
    assert len(lost) >= 3
    assert 1.92 < min(lost) <= max(lost) < 8


def case(x, dt=DT):
    fit = MODEL.fit(x, dt)
    return Status(int(fit.status)), {name: float(values) for name, values in fit.columns.items()}


def test_case_swings():
    status, row = case(swings(20.0, 40.0, 500, 1, seed=6)[0])
    assert status == Status.OK
    assert np.isfinite(list(row.values())).all()
    assert row["damping_lower"] < row["damping"] < row["damping_upper"]
    assert row["kappa_s"] == pytest.approx(row["omega"] ** 2 / row["damping"], rel=1e-12)
    assert row["sigma_s"] == pytest.approx(row["eta"] / row["damping"], rel=1e-12)
    assert row["damping_ratio"] < 1
    assert row["period"] == pytest.approx(2 * np.pi / 40, rel=0.2)


def test_case_overdamped_has_no_period():
    status, row = case(swings(250.0, 54.8, 500, 1, seed=7)[0])
    assert status == Status.OK
    assert {name for name, value in row.items() if np.isnan(value)} <= {"period", "theta_lower", "theta_upper"}
    assert row["damping_ratio"] > 1


def test_case_no_reversion():
    """A velocity with a pull and a position without one."""
    velocity = lfilter([1.0], [1.0, -0.8], np.random.default_rng(8).standard_normal((100, 151)), axis=1)
    fit = MODEL.fit(np.cumsum(velocity, axis=1), DT)
    none = fit.status == Status.NO_REVERSION
    assert none.any()
    assert np.isnan(fit.omega[none]).all()
    assert (fit.kappa_s[none] <= 0).all()
    assert np.isfinite(fit.damping[none]).all()
    assert np.isfinite(fit.sigma_s[none]).all()


def test_case_too_coarse():
    """A swing that turns in less than four steps."""
    x = lfilter([1.0], [1.0, -2 * np.cos(2.2) * 0.97, 0.97**2], np.random.default_rng(9).standard_normal(251))
    assert case(x)[0] == Status.TOO_COARSE
    assert case(x, calendar(250, seed=3))[0] in (Status.TOO_COARSE, Status.NOT_CONVERGED)


@pytest.mark.parametrize("x", [np.full(61, np.pi), np.zeros(61), 0.1 * np.arange(61)])
def test_case_flat(x):
    status, row = case(x)
    assert status == Status.FLAT
    assert np.isnan(list(row.values())).all()


@pytest.mark.parametrize(("dt", "bad"), [(DT, np.nan), (DT, np.inf), (calendar(120, seed=3), np.nan)])
def test_case_not_finite_stays_where_it_is(dt, bad):
    x = swings(250.0, 54.8, 120, 1, seed=10)[0]
    spoilt = x.copy()
    spoilt[70] = bad
    whole, fit = rolling("inertial", x, dt, 20), rolling("inertial", spoilt, dt, 20)
    hit = np.abs(np.arange(101) + 10 - 70) <= 10
    assert (fit.status[hit] == Status.OUT_OF_RANGE).all()
    for name in NAMES:
        assert np.array_equal(fit.columns[name][~hit], whole.columns[name][~hit], equal_nan=True), name
        assert np.isnan(fit.columns[name][hit]).all()


@pytest.mark.parametrize("n", [0, 1, 3, 9])
def test_case_too_short(n):
    assert case(np.arange(n + 1.0) ** 2)[0] == Status.TOO_SHORT


@pytest.mark.parametrize("dt", [DT, calendar(90, seed=3)], ids=["equal", "calendar"])
def test_bits_depend_on_the_window_alone(dt):
    x = swings(250.0, 54.8, 90, 3, seed=11)
    steps = np.broadcast_to(dt, (3, 90)) if np.ndim(dt) else dt
    one = steps[:1] if np.ndim(dt) else steps
    whole, alone = rolling("inertial", x, steps, 20), rolling("inertial", x[:1], one, 20)
    later, threaded = rolling("inertial", x, steps, 20, first=27), rolling("inertial", x, steps, 20, threads=2)
    bare = rolling("inertial", x, steps, 20, intervals=False)
    for name in NAMES:
        values = whole.columns[name]
        assert np.array_equal(values[:1], alone.columns[name], equal_nan=True), name
        assert np.array_equal(values[:, 27:], later.columns[name], equal_nan=True), name
        assert np.array_equal(values, threaded.columns[name], equal_nan=True), name
        expected = values if name in (*PARAMETERS, "loglik") else np.full(values.shape, np.nan)
        assert np.array_equal(bare.columns[name], expected, equal_nan=True), name


@pytest.mark.parametrize("scale", [1e-100, 1e-12, 1e12, 1e100])
def test_scale_of_the_data_does_not_matter(scale):
    x = swings(250.0, 54.8, 150, 1, seed=12)[0]
    fit, scaled = rolling("inertial", x, DT, 80), rolling("inertial", x * scale, DT, 80)
    assert np.array_equal(scaled.status, fit.status)
    np.testing.assert_allclose(scaled.loglik, fit.loglik - 80 * np.log(scale), rtol=1e-9)
    for name, unit in (("damping", 1.0), ("omega", 1.0), ("theta", scale), ("eta", scale), ("sigma_s", scale)):
        gap, allowed = abs(scaled.columns[name] / unit - fit.columns[name]), SAME_FIT * fit.columns[f"{name}_se"]
        assert (gap <= allowed)[fit.status == Status.OK].all(), name


def test_formulas_in_sql_say_the_same():
    fit = MODEL.fit(np.concatenate([swings(*truth, 100, 20, seed=13) for truth in TRUTHS.values()]), DT)
    stored = [column.name for column in MODEL.stored]
    with duckdb.connect() as connection:
        connection.execute(f"CREATE TABLE fit ({', '.join(name + ' DOUBLE' for name in stored)})")
        rows = np.column_stack([fit.columns[name] for name in stored])
        values = [[None if np.isnan(each) else float(each) for each in row] for row in rows]
        connection.executemany(f"INSERT INTO fit VALUES ({', '.join('?' * len(stored))})", values)
        for column in MODEL.derived:
            found = connection.execute(f"SELECT CAST({column.sql} AS DOUBLE) FROM fit").fetchnumpy()
            found = np.ma.filled(next(iter(found.values())), np.nan)
            np.testing.assert_allclose(found, fit.columns[column.name], rtol=1e-9, err_msg=column.name)


def test_jets_are_derivatives():
    """Of one formula that holds all rules, against the derivatives worked out by hand."""
    u, v = np.array([0.7, 1.3]), np.array([0.4, 2.0])
    a, b = variables(u, v)
    product = times(exponential(a), root(b))  # e^u √v
    e, r = np.exp(u), np.sqrt(v)
    expected = [e * r, e * r, e / (2 * r), e * r, e / (2 * r), -e / (4 * r**3)]
    np.testing.assert_allclose(product, expected, rtol=1e-14)
    np.testing.assert_allclose(times(product, inverse(product))[0], 1.0, rtol=1e-14)
    np.testing.assert_allclose(times(product, inverse(product))[1:], 0.0, atol=1e-14)
    log = [u + np.log(r), [1, 1], 0.5 / v, [0, 0], [0, 0], -0.5 / v**2]
    np.testing.assert_allclose(logarithm(product), log, atol=1e-14)
    near, far = (relative(variables(np.array([z]), np.zeros(1))[0])[[0, 1, 3], 0] for z in (0.2999999, 0.3000001))
    np.testing.assert_allclose(near, far, rtol=1e-6)  # the series and the closed form meet
    found = covariance(a, product, np.broadcast_to(np.array([[2.0, 0.5], [0.5, 1.0]])[:, :, None], (2, 2, 2)))
    np.testing.assert_allclose(found, 2.0 * e * r + 0.5 * e / (2 * r), rtol=1e-14)
