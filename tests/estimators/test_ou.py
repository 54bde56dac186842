"""The Ornstein–Uhlenbeck fit: right digits on any data, and what each case holds."""

import duckdb
import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.signal import lfilter

from driftbook.estimators import MODELS, Status, rolling

OU = MODELS["ou"]
DT = 1 / 252
N = 250

# The promise: a number is off by no more than this share of itself or of its standard error.
PROMISE = 1e-9
# Two ways to write the same formula in float64.
ROUNDING = 1e-12
# Data that are shifted or scaled are rounded anew: the fit answers with that times the number of steps.
EQUIVARIANCE = 1e-9

WITHOUT_INTERVALS = ("kappa", "theta", "sigma", "loglik")
STANDARD_ERRORS = ("kappa_se", "theta_se", "sigma_se")
IN_UNITS_OF_X = ("theta", "theta_se", "theta_lower", "theta_upper", "sigma", "sigma_se", "sigma_lower", "sigma_upper")
OF_PULL = ("kappa", "kappa_se", "kappa_lower", "kappa_upper", "kappa_median_unbiased", "no_reversion_p", "kurtosis")


def ar1(b, n, *, seed, scale=1.0, level=0.0):
    """x_0 … x_n of an AR(1) with slope b."""
    return level + scale * lfilter([1.0], [1.0, -b], np.random.default_rng(seed).standard_normal(n + 1))


def windows_of(x, lookback):
    """Every window of a series, one a row."""
    return np.lib.stride_tricks.sliding_window_view(x, lookback + 1)


def plain_fit(windows, dt):
    """The textbook formulas of the regression of x_{i+1} on x_i: two passes, in long double."""
    first = np.asarray(windows, dtype=np.longdouble)[..., :1]
    w = windows - first
    x, step = w[..., :-1], np.diff(w, axis=-1)
    n = np.longdouble(x.shape[-1])
    x_mean, drift = x.mean(-1, keepdims=True), step.mean(-1, keepdims=True)
    u, d = x - x_mean, step - drift
    x_mean, drift = x_mean[..., 0], drift[..., 0]
    A = (u**2).sum(-1)
    with np.errstate(all="ignore"):
        beta = (u * d).sum(-1) / A
        e = d - beta[..., None] * u
        rss = (e**2).sum(-1)
        h = -np.log1p(beta)
        h_se = np.sqrt(rss / (n - 2) / A) / (1 + beta)
        away = drift / beta
        theta_se = np.sqrt(rss / (n - 2) * (1 / n + away**2 / A)) / abs(beta)
        sigma = np.sqrt(rss / n * 2 * h / (-np.expm1(-2 * h)) / dt)
        g = 1 / h - 2 / np.expm1(2 * h)
        return {
            "kappa": h / dt,
            "kappa_se": h_se / dt,
            "theta": first[..., 0] + x_mean - away,
            "theta_se": theta_se,
            "sigma": sigma,
            "sigma_se": sigma * np.sqrt(1 / (2 * n) + (g * h_se / 2) ** 2),
            "half_life_mle": np.where(h > 0, np.log(np.longdouble(2)) * dt / h, np.nan),
            "stationary_sd": np.where(h > 0, sigma / np.sqrt(2 * h / dt), np.nan),
            "kurtosis": n * (e**4).sum(-1) / rss**2,
            "loglik": -n / 2 * (np.log(2 * np.pi * rss / n) + 1),
        }


def bank():
    """Data that break running sums, by name."""
    rng = np.random.default_rng(20)
    i = np.arange(1500)
    walk = 0.02 * np.cumsum(rng.standard_normal(1500))
    pull = lfilter([1.0], [1.0, -0.95], rng.standard_normal(1500))
    return {
        "plain": pull,
        "a small movement about a large level": 1e9 + pull,
        "alternating about a large level": 1e7 + 0.1 * (-1.0) ** i,
        "a price from 1e-3 to 1e6": np.exp(np.linspace(np.log(1e-3), np.log(1e6), 1500) + walk),
        "a price from 1e6 to 1e-3": np.exp(np.linspace(np.log(1e6), np.log(1e-3), 1500) + walk),
        "one spike of 1e12": np.where(i == 700, 1e12, 1.0) + rng.standard_normal(1500),
        "1e3 flat, then noise of 1e-9": 1e3 + np.where(i < 600, 0.0, 1e-9 * rng.standard_normal(1500)),
        "a ramp": 0.1 * i,
        "a ramp with noise of 1e-6": i + 1e-6 * rng.standard_normal(1500),
        "a steep trend": np.cumsum(10 + rng.standard_normal(1500)),
        "smooth": np.cumsum(lfilter([1.0], [1.0, -0.99], rng.standard_normal(1500))),
        "very fat tails": np.cumsum(rng.standard_t(1.5, 1500)),
        "in units of 1e12": 1e12 * pull,
        "in units of 1e-12": 1e-12 * pull,
        "in units of 1e100": 1e100 * pull,
        "in units of 1e-100": 1e-100 * pull,
    }


BANK = bank()


@pytest.mark.parametrize("lookback", [37, 250])
@pytest.mark.parametrize("name", BANK)
def test_every_window_is_right(name, lookback):
    """Against two passes in long double, over all windows."""
    x = BANK[name]
    fit, plain = rolling("ou", x, DT, lookback), plain_fit(windows_of(x, lookback), DT)
    usable = np.isin(fit.status, (Status.OK, Status.NO_REVERSION))
    size = {column: np.abs(plain[column][usable]) for column in plain}
    # What a parameter divides by the pull is as uncertain as the pull is small.
    strength = 1 + size["kappa_se"] / size["kappa"]
    allowed = {column: PROMISE * size[column] for column in plain}
    for column in ("kappa", "theta", "sigma"):
        allowed[column] = PROMISE * np.maximum(size[column], size[f"{column}_se"])
    for column in ("theta_se", "half_life_mle", "stationary_sd"):
        allowed[column] = PROMISE * size[column] * strength
    allowed["theta"] = allowed["theta"] * strength
    for column, values in plain.items():
        found, expected = fit.columns[column][usable], values[usable]
        assert np.array_equal(np.isnan(found), np.isnan(expected)), column
        assert (np.isnan(expected) | (abs(found - expected) <= allowed[column])).all(), column


@pytest.mark.parametrize(
    ("name", "status"),
    [("alternating about a large level", Status.ALTERNATING), ("a ramp", Status.FLAT), ("plain", Status.OK)],
)
def test_bank_has_the_expected_status(name, status):
    assert (rolling("ou", BANK[name], DT, 250).status == status).all()


def test_flat_part_is_flat_and_noise_above_rounding_is_not():
    fit = rolling("ou", BANK["1e3 flat, then noise of 1e-9"], DT, 100)
    assert (fit.status[:500] == Status.FLAT).all()
    assert not (fit.status[502:] == Status.FLAT).any()


@pytest.mark.parametrize("scale", [1e-100, 1e-12, 1e12, 1e100])
def test_scale_of_the_data_does_not_matter(scale):
    x = BANK["plain"]
    fit, scaled = rolling("ou", x, DT, 250), rolling("ou", x * scale, DT, 250)
    assert np.array_equal(scaled.status, fit.status)
    for column in IN_UNITS_OF_X:
        np.testing.assert_allclose(scaled.columns[column] / scale, fit.columns[column], rtol=PROMISE, err_msg=column)
    for column in (*OF_PULL, "half_life", "half_life_mle"):
        np.testing.assert_allclose(scaled.columns[column], fit.columns[column], rtol=PROMISE, err_msg=column)
    np.testing.assert_allclose(scaled.loglik, fit.loglik - 250 * np.log(scale), rtol=PROMISE)


def test_without_intervals_the_rest_has_the_same_bits():
    x = BANK["plain"]
    fit, without = rolling("ou", x, DT, 100), rolling("ou", x, DT, 100, intervals=False)
    assert np.array_equal(fit.status, without.status)
    for column in fit.columns:
        if column in WITHOUT_INTERVALS:
            assert np.array_equal(fit.columns[column], without.columns[column], equal_nan=True), column
        else:
            assert np.isnan(without.columns[column]).all(), column


# What a row holds, case by case.

NAMES = tuple(column.name for column in OU.columns)
HALF_LIFE = ("half_life", "half_life_lower", "half_life_upper")


def one(x, dt=DT):
    """Status and columns of one window, both ways to fit it giving the same."""
    fit = OU.fit(x, dt)
    row = {name: float(values) for name, values in fit.columns.items()}
    return Status(int(fit.status)), row


def empty(row):
    return {name for name, value in row.items() if np.isnan(value)}


def test_case_clear_pull():
    status, row = one(ar1(0.8, N, seed=1))
    assert status == Status.OK
    assert empty(row) == set()
    assert 0 < row["kappa_lower"] < row["kappa_median_unbiased"] < row["kappa_upper"]
    assert row["half_life_unbounded"] == 0.0
    assert row["no_reversion_p"] < 0.025
    for at in ("lower", "upper"):
        assert np.isfinite(row[f"theta_{at}"])
    assert row["half_life_lower"] < row["half_life"] < row["half_life_upper"]
    assert row["half_life"] == np.log(2) / row["kappa_median_unbiased"]
    assert row["half_life_lower"] == np.log(2) / row["kappa_upper"]
    assert row["half_life_upper"] == np.log(2) / row["kappa_lower"]
    assert row["half_life_mle"] == np.log(2) / row["kappa"]
    assert row["stationary_sd"] == pytest.approx(row["sigma"] / np.sqrt(2 * row["kappa"]), rel=ROUNDING)


def weak_pulls():
    fit = OU.fit(np.array([ar1(0.99, N, seed=seed) for seed in range(200)]), DT)
    chosen = (fit.status == Status.OK) & (fit.kappa_lower == 0)
    return {name: values[chosen] for name, values in fit.columns.items()}


def test_case_pull_that_may_be_none():
    weak = weak_pulls()
    assert len(weak["kappa"]) > 50
    assert (weak["kappa"] > 0).all()
    assert (weak["kappa_upper"] > 0).all()
    assert (weak["half_life_unbounded"] == 1.0).all()
    assert np.isfinite(weak["half_life_lower"]).all()
    assert np.isnan(weak["half_life_upper"]).all()
    assert np.array_equal(np.isnan(weak["half_life"]), weak["kappa_median_unbiased"] == 0)
    assert 0 < np.isnan(weak["half_life"]).mean() < 1
    assert np.isnan(weak["theta_lower"]).any()
    assert np.array_equal(np.isnan(weak["theta_lower"]), np.isnan(weak["theta_upper"]))
    for column in ("theta", "theta_se", "sigma", "sigma_lower", "sigma_upper", "stationary_sd", "half_life_mle"):
        assert np.isfinite(weak[column]).all(), column


def without_pull():
    """A path with a slope just above one, so that the interval still reaches above zero."""
    for seed in range(400):
        status, row = one(ar1(1.0, N, seed=seed))
        if status == Status.NO_REVERSION and row["kappa_upper"] > 0:
            return status, row
    raise AssertionError("no such path")


def test_case_slope_beyond_one():
    status, row = without_pull()
    assert status == Status.NO_REVERSION
    assert row["kappa"] < 0
    assert row["kappa_lower"] == 0 < row["kappa_upper"]
    assert row["half_life_unbounded"] == 1.0
    assert empty(row) >= {"half_life", "half_life_upper", "half_life_mle", "stationary_sd"}
    assert empty(row) <= {
        "half_life",
        "half_life_upper",
        "half_life_mle",
        "stationary_sd",
        "theta_lower",
        "theta_upper",
    }
    assert row["half_life_lower"] == np.log(2) / row["kappa_upper"]


def test_case_slope_beyond_one_so_far_that_no_pull_fits():
    status, row = one(ar1(1.05, N, seed=3))
    assert status == Status.NO_REVERSION
    assert row["kappa"] < 0
    assert row["kappa_lower"] == row["kappa_upper"] == row["kappa_median_unbiased"] == 0
    assert row["no_reversion_p"] > 0.975
    assert empty(row) >= {*HALF_LIFE, "half_life_mle", "stationary_sd"}
    assert np.isfinite([row["theta"], row["sigma"], row["loglik"]]).all()


def test_case_slope_of_exactly_one():
    """Increments that have nothing to do with the level: theta does not exist, the rest has its limit."""
    x = zero_slope()
    n, rss = len(x) - 1, ((np.diff(x) - np.diff(x).mean()) ** 2).sum()
    status, row = one(x, dt=0.25)
    assert status == Status.NO_REVERSION
    assert row["kappa"] == 0
    assert not np.signbit(row["kappa"])
    assert np.isnan([row["theta"], row["theta_se"], row["half_life"], row["stationary_sd"]]).all()
    assert row["sigma"] == pytest.approx(np.sqrt(rss / n / 0.25), rel=ROUNDING)
    assert row["kappa_se"] > 0
    assert row["sigma_se"] > row["sigma"] / np.sqrt(2 * n)


def zero_slope():
    """A short path of small integers whose increments are exactly uncorrelated with its levels."""
    rng = np.random.default_rng(0)
    while True:
        x = np.cumsum(rng.integers(-2, 3, 13)).astype(float)
        n, u, d = 12, x[:-1], np.diff(x)
        if n * (u * d).sum() == u.sum() * d.sum() and n * (d * d).sum() > d.sum() ** 2:
            return x


@pytest.mark.parametrize("b", [-0.5, -0.95])
def test_case_alternating(b):
    status, row = one(ar1(b, N, seed=4))
    assert status == Status.ALTERNATING
    assert empty(row) == set(NAMES)


@pytest.mark.parametrize("x", [np.full(N + 1, np.pi), np.zeros(N + 1), 0.1 * np.arange(N + 1), 5 - np.arange(N + 1.0)])
def test_case_flat(x):
    status, row = one(x)
    assert status == Status.FLAT
    assert empty(row) == set(NAMES)


def test_case_flat_but_for_one_change():
    """A spike has variation and swings back; a step stays where it is."""
    x = np.zeros(N + 1)
    x[100] = 1.0
    assert one(x)[0] == Status.ALTERNATING
    assert one(np.where(np.arange(N + 1) < 100, 0.0, 1.0))[0] == Status.OK


@pytest.mark.parametrize("n", [0, 1, 2, 3, 4])
def test_case_too_short(n):
    status, row = one(ar1(0.5, n, seed=5))
    assert status == Status.TOO_SHORT
    assert empty(row) == set(NAMES)


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("place", [0, 100, N])
def test_case_not_finite(bad, place):
    x = ar1(0.9, N, seed=6)
    x[place] = bad
    status, row = one(x)
    assert status == Status.OUT_OF_RANGE
    assert empty(row) == set(NAMES)


def test_case_sampled_too_coarsely_for_sigma():
    status, row = one(ar1(0.3, N, seed=7))
    assert row["kappa"] * DT > 0.8
    assert status == Status.OK
    assert empty(row) == {"sigma_lower", "sigma_upper"}


@pytest.mark.parametrize("n", [5, 9])
def test_case_shorter_than_the_table(n):
    """Below ten steps there is no law of the slope: estimates, and no ends."""
    windows = np.array([ar1(0.5, n, seed=seed) for seed in range(50)])
    fit = OU.fit(windows, DT)
    ok = fit.status == Status.OK
    assert ok.any()
    for name, values in fit.columns.items():
        known = name in (*WITHOUT_INTERVALS, *STANDARD_ERRORS, "kurtosis", "half_life_mle", "stationary_sd")
        assert np.array_equal(np.isfinite(values[ok]), np.full(ok.sum(), known)), name


def test_all_statuses_in_one_batch():
    bad = ar1(0.9, N, seed=8)
    bad[3] = np.nan
    rows = [ar1(0.8, N, seed=1), ar1(1.05, N, seed=3), ar1(-0.5, N, seed=4), np.full(N + 1, 2.0), bad]
    fit = OU.fit(np.array(rows), DT)
    assert fit.status.tolist() == [
        Status.OK,
        Status.NO_REVERSION,
        Status.ALTERNATING,
        Status.FLAT,
        Status.OUT_OF_RANGE,
    ]


def test_no_infinity_is_reported():
    x = np.concatenate([ar1(b, 400, seed=seed) for seed, b in enumerate((0.02, 0.3, 0.99, 1.0, 1.02, -0.3))])
    for lookback in (5, 12, 60, 250):
        for name, values in rolling("ou", x, DT, lookback).columns.items():
            assert not np.isinf(values).any(), name


def test_formulas_in_sql_say_the_same():
    x = np.concatenate([ar1(b, 300, seed=seed) for seed, b in enumerate((0.3, 0.9, 0.99, 1.0, 1.05, -0.3))])
    fit = rolling("ou", np.concatenate([x, np.full(100, x[-1])]), DT, 60)
    assert set(np.unique(fit.status)) >= {Status.OK, Status.NO_REVERSION, Status.ALTERNATING, Status.FLAT}
    stored = [column.name for column in OU.stored]
    connection = duckdb.connect()
    connection.execute(f"CREATE TABLE fit (k INTEGER, {', '.join(name + ' DOUBLE' for name in stored)})")
    values = np.array([fit.columns[name] for name in stored]).T.tolist()
    rows = [[at, *(None if v != v else v for v in row)] for at, row in enumerate(values)]
    connection.executemany(f"INSERT INTO fit VALUES ({', '.join('?' * (len(stored) + 1))})", rows)
    for column in OU.derived:
        found = connection.execute(f"SELECT ({column.sql})::DOUBLE FROM fit ORDER BY k").fetchnumpy()
        masked = next(iter(found.values()))
        told = np.ma.filled(masked.astype(float), np.nan)
        np.testing.assert_array_max_ulp(np.nan_to_num(told, nan=-1), np.nan_to_num(fit.columns[column.name], nan=-1), 1)
    connection.close()


def test_columns_have_units_and_meanings():
    assert len(NAMES) == len(set(NAMES)) == 22
    assert [parameter.name for parameter in OU.parameters] == ["kappa", "theta", "sigma"]
    for column in OU.columns:
        assert column.unit in ("", "t", "x", "1/t", "x/√t")
        assert column.meaning.endswith(".")
    assert {column.name for column in OU.columns if column.kind == "boolean"} == {"half_life_unbounded"}
    assert set(OU.stored) | set(OU.derived) == set(OU.columns)


# What shifting, scaling, turning and timing the data must do.

paths = st.builds(
    lambda b, seed, n: ar1(b, n, seed=seed),
    b=st.sampled_from([0.3, 0.8, 0.95, 0.99, 1.0]),
    seed=st.integers(0, 10_000),
    n=st.integers(10, 120),
)
few = settings(max_examples=60, deadline=None)


def assert_close(found, expected, columns, *, factor=1.0):
    strength = 1 + np.abs(expected.kappa_se / expected.kappa)
    for column in columns:
        values = expected.columns[column] * factor
        tolerance = EQUIVARIANCE * strength**2 * np.maximum(np.abs(values), np.nan_to_num(expected.kappa_se) * 1e-3)
        assert np.array_equal(np.isnan(found.columns[column]), np.isnan(values)), column
        assert np.isnan(values) or abs(found.columns[column] - values) <= tolerance, column


def settled(fit):
    """Away from the edges at which a column jumps: a slope of one, an interval that just reaches zero."""
    edges = (abs(fit.kappa / fit.kappa_se), abs(fit.no_reversion_p - 0.025), abs(fit.no_reversion_p - 0.975))
    return fit.status in (Status.OK, Status.NO_REVERSION) and min(edges) > 1e-4


@few
@given(paths, st.sampled_from([-1e3, -1.0, 0.5, 100.0]))
def test_shift_moves_theta_and_nothing_else(x, shift):
    fit, moved = OU.fit(x, DT), OU.fit(x + shift, DT)
    assume(settled(fit))
    assert moved.status == fit.status
    assert_close(moved, fit, [name for name in NAMES if name not in ("theta", "theta_lower", "theta_upper")])
    for name in ("theta", "theta_lower", "theta_upper"):
        size = (
            EQUIVARIANCE
            * (1 + fit.kappa_se / abs(fit.kappa)) ** 2
            * (abs(shift) + abs(fit.columns[name]) + fit.theta_se)
        )
        assert np.isnan(fit.columns[name]) or abs(moved.columns[name] - shift - fit.columns[name]) <= size


@few
@given(paths, st.sampled_from([1e-6, 0.01, 3.0, 1e5]))
def test_scale_multiplies_what_is_in_units_of_x(x, scale):
    fit, scaled = OU.fit(x, DT), OU.fit(x * scale, DT)
    assume(settled(fit))
    assert scaled.status == fit.status
    assert_close(scaled, fit, [*IN_UNITS_OF_X, "stationary_sd"], factor=scale)
    assert_close(scaled, fit, [*OF_PULL, *HALF_LIFE, "half_life_mle", "half_life_unbounded"])
    assert abs(scaled.loglik - (fit.loglik - fit.n * np.log(scale))) <= EQUIVARIANCE * (abs(fit.loglik) + fit.n)


@few
@given(paths)
def test_turning_the_sign_turns_theta(x):
    """By the bit: a sign is all that changes in every sum."""
    fit, turned = OU.fit(x, DT), OU.fit(-x, DT)
    assert turned.status == fit.status
    for name in NAMES:
        if not name.startswith("theta"):
            assert np.array_equal(turned.columns[name], fit.columns[name], equal_nan=True), name
    assert np.array_equal(turned.theta, -fit.theta, equal_nan=True)
    assert np.array_equal(turned.theta_lower, -fit.theta_upper, equal_nan=True)


@few
@given(paths, st.sampled_from([0.5, 4.0, 1024.0]))
def test_unit_of_time(x, factor):
    """Days for years: rates divide, half-lives multiply, volatility divides by the root, the likelihood stays."""
    fit, slow = OU.fit(x, DT), OU.fit(x, DT * factor)
    assert slow.status == fit.status
    powers = {"1/t": -1.0, "t": 1.0, "x/√t": -0.5, "x": 0.0, "": 0.0}
    for column in OU.columns:
        expected = fit.columns[column.name] * factor ** powers[column.unit]
        np.testing.assert_allclose(slow.columns[column.name], expected, rtol=ROUNDING, err_msg=column.name)


@pytest.mark.parametrize("front", [[], [1.0, 2.0, 3.0], [99.5, 100.25, 101.0], [4.0] * 5])
def test_no_memory_at_all_is_alternating_wherever_the_window_lies_in_its_block(front):
    """The covariance of neighbours is exactly zero here, and the sign of its rounding must not decide."""
    window = [105.25, 103.25, 107.0, 104.0, 103.25, 101.5, 103.5]
    fit = rolling("ou", np.array(front + window), 1 / 252, 6)
    assert fit.status[-1] == Status.ALTERNATING
    assert np.isnan(fit.kappa[-1])
