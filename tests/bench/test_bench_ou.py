"""How fast rolling fits are: against set marks, rolling slopes and deviations of others, and a loop of optimisers.

Run by hand, on an idle machine, with the numerical libraries on one thread:

    OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1 pytest tests/bench/test_bench_ou.py -m bench -s

Each ratio comes from one run in one process, the two sides measured in turn and the best of each kept. Peers:

* polars' rolling expressions over series, and DuckDB's `regr_slope` and `stddev_pop` over a window frame, both with two
  threads: they give the slope alone, or for gbm the deviation of log-increments, where we give all parameters and the
  log-likelihood;
* a loop over windows with `scipy.optimize.minimize`: vectorised log-density, started from the closed form, variables
  scaled and decorrelated by the Cholesky factor of the start's covariance, L-BFGS-B.
"""

import time

import duckdb
import numpy as np
import polars as pl
import pytest
from scipy.optimize import minimize
from scipy.signal import lfilter

from driftbook.estimators import rolling

pytestmark = pytest.mark.bench

SERIES, VALUES, LOOKBACK, DT = 1000, 2500, 250, 1 / 252
WINDOWS = SERIES * (VALUES - LOOKBACK)

# of one core a window, without and with intervals
MOST_MICROSECONDS = {
    "abm": {False: 0.15, True: 0.3},
    "gbm": {False: 0.2, True: 0.4},
    "ou": {False: 0.2, True: 1.2},
    "exp_ou": {False: 0.25, True: 1.3},
}
MOST_UNEQUAL = {"calendar": {False: 15.0, True: 40.0}, "irregular": {False: 150.0, True: 200.0}}
UNEQUAL_SERIES = 20
LEAST_RATIO_TO_LOOP = {False: 5000, True: 1000}
LEAST_RATIO_UNEQUAL = {"calendar": 100, "irregular": 10}
MOST_SECONDS_A_DAY = 0.3
LOOPED = 30
THREADS = 2


@pytest.fixture(scope="module")
def series():
    z = np.random.default_rng(0).standard_normal((SERIES, VALUES))
    return 50 + lfilter([1.0], [1.0, -0.98], z, axis=1)


def best(*works, clock=time.perf_counter, rounds=4):
    """Seconds of the best round of each, taken in turn."""
    seconds = np.empty((rounds, len(works)))
    for taken in seconds:
        for at, work in enumerate(works):
            start = clock()
            work()
            taken[at] = clock() - start
    return seconds.min(axis=0)


@pytest.mark.parametrize("intervals", [False, True])
@pytest.mark.parametrize("model", MOST_MICROSECONDS)
def test_time_of_one_core_a_window(series, model, intervals):
    (seconds,) = best(lambda: rolling(model, series, DT, LOOKBACK, intervals=intervals), clock=time.process_time)
    microseconds = seconds / WINDOWS * 1e6
    print(f"\n{model}, intervals={intervals}: {microseconds:.3f} µs a window of one core")
    assert microseconds <= MOST_MICROSECONDS[model][intervals]


def unequal_steps(kind):
    rng = np.random.default_rng(2)
    shape = UNEQUAL_SERIES, VALUES - 1
    return rng.choice([1, 1, 1, 1, 3, 4], shape) / 365 if kind == "calendar" else rng.exponential(DT, shape) + 1e-6


@pytest.mark.parametrize("intervals", [False, True])
@pytest.mark.parametrize("kind", MOST_UNEQUAL)
def test_time_at_unequal_steps(series, kind, intervals):
    x, dt = series[:UNEQUAL_SERIES], unequal_steps(kind)
    (seconds,) = best(lambda: rolling("ou", x, dt, LOOKBACK, intervals=intervals), clock=time.process_time, rounds=2)
    microseconds = seconds / (UNEQUAL_SERIES * (VALUES - LOOKBACK)) * 1e6
    print(f"\nou, {kind}, intervals={intervals}: {microseconds:.1f} µs a window of one core")
    assert microseconds <= MOST_UNEQUAL[kind][intervals]


def test_one_new_day(series):
    """A thousand series, four models, two lookbacks, one wanted window each."""
    tails = {lookback: np.ascontiguousarray(series[:, : 2 * lookback]) for lookback in (LOOKBACK, 4 * LOOKBACK)}

    def day():
        for lookback, x in tails.items():
            for model in MOST_MICROSECONDS:
                rolling(model, x, DT, lookback, first=lookback - 1)

    (seconds,) = best(day, clock=time.process_time)
    print(f"\none new day: {seconds:.3f} s of one core")
    assert seconds <= MOST_SECONDS_A_DAY


def long_frame(series):
    frame = pl.DataFrame({"series": np.repeat(np.arange(SERIES), VALUES), "x": series.ravel()})
    return frame.with_columns(step=pl.col("x").shift(-1).over("series") - pl.col("x"))


def polars_slopes(frame):
    slope = pl.rolling_cov("x", "step", window_size=LOOKBACK) / pl.col("x").rolling_var(LOOKBACK)
    return frame.select(slope.over("series"))


def duckdb_slopes(connection):
    slope = f"regr_slope(step, x) OVER (PARTITION BY series ORDER BY at_row ROWS {LOOKBACK - 1} PRECEDING)"
    return connection.execute(f"SELECT sum(slope) FROM (SELECT {slope} AS slope FROM long)").fetchall()


def test_no_slower_than_rolling_slopes_elsewhere(series):
    frame = long_frame(series)
    connection = duckdb.connect()
    connection.execute(f"SET threads = {THREADS}")
    connection.register("frame", frame.to_arrow())
    connection.execute("CREATE TABLE long AS SELECT row_number() OVER () AS at_row, * FROM frame")
    ours, by_polars, by_duckdb = best(
        lambda: rolling("ou", series, DT, LOOKBACK, intervals=False, threads=THREADS),
        lambda: polars_slopes(frame),
        lambda: duckdb_slopes(connection),
        rounds=6,
    )
    connection.close()
    print(
        f"\nwall: ours {ours:.3f} s with {THREADS} threads; polars {by_polars:.3f} s with {pl.thread_pool_size()} "
        f"({by_polars / ours:.2f} of ours), DuckDB {by_duckdb:.3f} s with {THREADS} ({by_duckdb / ours:.2f} of ours)"
    )
    found = polars_slopes(frame)["x"].to_numpy().reshape(SERIES, VALUES)[:, LOOKBACK - 1 : -1]
    slopes = np.expm1(-rolling("ou", series, DT, LOOKBACK, intervals=False).kappa * DT)
    assert np.median(abs(found - slopes)) < 1e-9
    assert ours <= min(by_polars, by_duckdb)


def polars_deviations(frame):
    return frame.select(pl.col("move").rolling_std(LOOKBACK, ddof=0).over("series"))


def duckdb_deviations(connection):
    deviation = f"stddev_pop(move) OVER (PARTITION BY series ORDER BY at_row ROWS {LOOKBACK - 1} PRECEDING)"
    return connection.execute(f"SELECT sum(deviation) FROM (SELECT {deviation} AS deviation FROM long)").fetchall()


def test_gbm_no_slower_than_rolling_deviations_elsewhere(series):
    """Both sides begin with the prices, and take logarithms."""
    frame = long_frame(series)
    moves = pl.col("x").log().diff().over("series")
    connection = duckdb.connect()
    connection.execute(f"SET threads = {THREADS}")
    connection.register("frame", frame.with_columns(move=moves).to_arrow())
    connection.execute("CREATE TABLE long AS SELECT row_number() OVER () AS at_row, * FROM frame")
    ours, by_polars, by_duckdb = best(
        lambda: rolling("gbm", series, DT, LOOKBACK, intervals=False, threads=THREADS),
        lambda: polars_deviations(frame.with_columns(move=moves)),
        lambda: duckdb_deviations(connection),
        rounds=6,
    )
    connection.close()
    print(f"\nwall: ours {ours:.3f} s, polars {by_polars / ours:.2f} of ours, DuckDB {by_duckdb / ours:.2f} of ours")
    found = polars_deviations(frame.with_columns(move=moves))["move"].to_numpy().reshape(SERIES, VALUES)[:, LOOKBACK:]
    sigma = rolling("gbm", series, DT, LOOKBACK, intervals=False).sigma
    np.testing.assert_allclose(found / np.sqrt(DT), sigma, rtol=1e-6)
    assert ours <= min(by_polars, by_duckdb)


def test_exp_ou_no_slower_than_rolling_slopes_elsewhere(series):
    """Both sides begin with the prices."""
    frame = long_frame(series)

    def on_logs():
        logs = frame.with_columns(x=pl.col("x").log())
        return logs.with_columns(step=pl.col("x").shift(-1).over("series") - pl.col("x"))

    ours, by_polars = best(
        lambda: rolling("exp_ou", series, DT, LOOKBACK, intervals=False, threads=THREADS),
        lambda: polars_slopes(on_logs()),
        rounds=4,
    )
    print(f"\nwall: ours {ours:.3f} s with {THREADS} threads, polars {by_polars / ours:.2f} of ours")
    assert ours <= by_polars


def loop_fit(x):
    """One window by a numerical optimiser, as an able user would write it."""
    n, u, y = len(x) - 1, x[:-1] - x[:-1].mean(), x[1:]
    A = u @ u
    b = u @ y / A
    s2 = ((y - y.mean() - b * u) ** 2).sum() / n
    kappa = -np.log(min(max(b, 1e-3), 0.9999)) / DT
    theta = x[:-1].mean() + (y.mean() - x[:-1].mean()) / (1 - b)
    start = np.array([kappa, theta, 0.5 * np.log(s2 / DT)])
    # covariance of kappa and theta from that of slope and mean, of ln sigma by its information
    J = np.array([[-1 / (b * DT), 0], [(theta - x[:-1].mean()) / (1 - b), 1 / (1 - b)]])
    covariance = np.zeros((3, 3))
    covariance[:2, :2] = J @ np.diag([s2 / A, s2 / n]) @ J.T
    covariance[2, 2] = 1 / (2 * n)
    L = np.linalg.cholesky(covariance)

    def minus_loglik(z):
        kappa, theta, log_sigma = start + L @ z
        decay = np.exp(-kappa * DT)
        variance = np.exp(2 * log_sigma) * -np.expm1(-2 * kappa * DT) / (2 * kappa)
        e = y - theta - (x[:-1] - theta) * decay
        return 0.5 * (n * np.log(2 * np.pi * variance) + e @ e / variance)

    return -minimize(minus_loglik, np.zeros(3), method="L-BFGS-B").fun


@pytest.mark.parametrize("model", ["gbm", "exp_ou"])
def test_models_of_logs_against_a_loop_of_optimisers(series, model):
    """gbm against the same optimiser over its two parameters, exp_ou as ou on logarithms."""
    fit = rolling(model, series, DT, LOOKBACK)
    rng = np.random.default_rng(3)
    pull = fit.kappa * LOOKBACK * DT > 1 if model == "exp_ou" else np.ones(fit.status.shape, dtype=bool)
    sample = [tuple(place) for place in rng.choice(np.argwhere(pull), LOOPED, replace=False)]
    windows = [series[row, k : k + LOOKBACK + 1] for row, k in sample]
    one = gbm_loop_fit if model == "gbm" else lambda x: loop_fit(np.log(x)) - np.log(x[1:]).sum()
    found = []
    in_loop, ours = best(
        lambda: found.append([one(window) for window in windows]),
        lambda: rolling(model, series, DT, LOOKBACK),
        clock=time.process_time,
        rounds=3,
    )
    ratio = (in_loop / LOOPED) / (ours / WINDOWS)
    shortfall = np.array([fit.loglik[place] for place in sample]) - np.array(found[0])
    print(f"\n{model} with intervals: loop {in_loop / LOOPED * 1e3:.2f} ms a window, {ratio:,.0f} times ours")
    assert shortfall.min() > -1e-6
    assert ratio >= LEAST_RATIO_TO_LOOP[True]


def gbm_loop_fit(x):
    returns, n = np.diff(np.log(x)), len(x) - 1

    def minus_loglik(z):
        e = returns - returns.mean() - z[0] * returns.std() / np.sqrt(n)
        log_variance = 2 * np.log(returns.std()) + z[1] / np.sqrt(n)
        return 0.5 * (n * (np.log(2 * np.pi) + log_variance) + e @ e * np.exp(-log_variance))

    return -minimize(minus_loglik, np.zeros(2), method="L-BFGS-B").fun - np.log(x[1:]).sum()


def unequal_loop_fit(x, dt):
    """One window at unequal steps: the density of each step, from the closed form at the mean step."""
    n, step = len(dt), dt.mean()
    u = x[:-1] - x[:-1].mean()
    b = np.clip(u @ x[1:] / (u @ u), 0.05, 0.999)
    start = np.array([np.log(-np.log(b) / step), x.mean(), np.log(np.std(np.diff(x)) / np.sqrt(step))])
    scale = np.array([0.3, np.std(x) / 3, 1 / np.sqrt(2 * n)])

    def minus_loglik(z):
        log_kappa, theta, log_sigma = start + scale * z
        kappa = np.exp(log_kappa)
        decay = np.exp(-kappa * dt)
        variance = np.exp(2 * log_sigma) * (1 - decay**2) / (2 * kappa)
        e = x[1:] - theta - (x[:-1] - theta) * decay
        return 0.5 * (np.log(2 * np.pi * variance) + e * e / variance).sum()

    return -minimize(minus_loglik, np.zeros(3), method="L-BFGS-B").fun


@pytest.mark.parametrize("kind", MOST_UNEQUAL)
def test_unequal_steps_against_a_loop_of_optimisers(series, kind):
    x, dt = series[:UNEQUAL_SERIES], unequal_steps(kind)
    fit = rolling("ou", x, dt, LOOKBACK, intervals=False)
    rng = np.random.default_rng(4)
    sample = [tuple(place) for place in rng.choice(np.argwhere(fit.kappa > 0), LOOPED, replace=False)]
    cut = [(x[row, k : k + LOOKBACK + 1], dt[row, k : k + LOOKBACK]) for row, k in sample]
    found = []
    in_loop, ours = best(
        lambda: found.append([unequal_loop_fit(*window) for window in cut]),
        lambda: rolling("ou", x, dt, LOOKBACK, intervals=False),
        clock=time.process_time,
        rounds=2,
    )
    ratio = (in_loop / LOOPED) / (ours / fit.kappa.size)
    shortfall = np.array([fit.loglik[place] for place in sample]) - np.array(found[0])
    print(f"\nou, {kind}: loop {in_loop / LOOPED * 1e3:.2f} ms a window, {ratio:,.0f} times ours")
    assert shortfall.min() > -1e-6
    assert ratio >= LEAST_RATIO_UNEQUAL[kind]


@pytest.mark.parametrize("intervals", [False, True])
def test_against_a_loop_of_optimisers(series, intervals):
    fit = rolling("ou", series, DT, LOOKBACK, intervals=intervals)
    rng = np.random.default_rng(1)
    places = np.argwhere(fit.kappa * LOOKBACK * DT > 1)  # where the loop's own start is sound
    sample = [tuple(place) for place in rng.choice(places, LOOPED, replace=False)]
    windows = [series[row, k : k + LOOKBACK + 1] for row, k in sample]
    found = []
    in_loop, ours = best(
        lambda: found.append([loop_fit(window) for window in windows]),
        lambda: rolling("ou", series, DT, LOOKBACK, intervals=intervals),
        clock=time.process_time,
        rounds=3,
    )
    ratio = (in_loop / LOOPED) / (ours / WINDOWS)
    shortfall = np.array([fit.loglik[place] for place in sample]) - np.array(found[0])
    print(f"\nintervals={intervals}: loop {in_loop / LOOPED * 1e3:.2f} ms a window, {ratio:,.0f} times ours")
    print(f"log-likelihood, ours over the loop's: {shortfall.min():.1e} to {shortfall.max():.1e}")
    assert shortfall.min() > -1e-6
    assert ratio >= LEAST_RATIO_TO_LOOP[intervals]
