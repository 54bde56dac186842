"""The ckls fit: right digits on any data, and what each case holds."""

import duckdb
import mpmath
import numpy as np
import polars as pl
import pytest

from driftbook.estimators import Fit, Status, aligned_start
from driftbook.estimators.chebyshev import points, weights
from driftbook.estimators.elastic_fit import COARSEST
from driftbook.estimators.log_segments import bridge, mean_series, quotient
from driftbook.estimators.models.ckls import MODEL

DT = 1 / 252
PARAMETERS = ("kappa", "theta", "sigma", "gamma")

# The promise: a number is off by no more than this share of itself, or of its standard error.
PROMISE, OF_ERROR = 1e-9, 1e-6
# Second derivatives are taken by differences: standard errors and ends agree to this share.
DIFFERENCES = 1e-5


def paths(n, seed, *, rows=1, kappa=5.0, theta=0.05, relative=0.4, gamma=0.8, dt=DT, substeps=6):
    """Milstein's scheme in small steps."""
    rng = np.random.default_rng(seed)
    sigma, h = relative * theta ** (1 - gamma), dt / substeps
    x, every = np.full(rows, theta), np.empty((rows, n + 1))
    for i in range(n + 1):
        every[:, i] = x
        for _ in range(substeps):
            z = np.sqrt(h) * rng.standard_normal(rows)
            b = sigma * x**gamma
            x = np.maximum(x + kappa * (theta - x) * h + b * z + 0.5 * b * b * gamma / x * (z * z - h), 1e-6)
    return every


def part(fit, where):
    columns = {name: values[where] for name, values in fit.columns.items()}
    return Fit(fit.model, fit.n[where], columns, fit.status[where])


def assert_same_bits(found, expected):
    assert np.array_equal(found.status, expected.status)
    for name, values in found.columns.items():
        assert values.tobytes() == expected.columns[name].tobytes(), name


def assert_close(found, expected):
    np.testing.assert_array_equal(found.status, expected.status)
    for name in (*PARAMETERS, "loglik"):
        error = expected.columns[f"{name}_se"] if name in PARAMETERS else 0.0
        off = np.abs(found.columns[name] - expected.columns[name])
        error = np.where(np.isfinite(error), error, 0.0)
        assert not (off > PROMISE * np.abs(expected.columns[name]) + OF_ERROR * error).any(), name
    for name, values in found.columns.items():
        reference, stem = expected.columns[name], name.rpartition("_")[0]
        error = expected.columns.get(f"{stem}_se", np.zeros(1)) if name.endswith(("_lower", "_upper")) else np.zeros(1)
        # without a clear gamma, sigma is known to within orders of magnitude: so are its ends
        share = 1e-3 if name in {"sigma_lower", "sigma_upper", "theta_se"} else DIFFERENCES
        reach = share * (np.abs(reference) + np.where(np.isfinite(error), error, 0.0)) + 1e-7
        assert not (np.abs(values - reference) > reach).any(), name
        np.testing.assert_array_equal(np.isnan(values), np.isnan(reference), err_msg=name)


# --- the pieces ---------------------------------------------------------------------------------------------------


def test_interpolation_is_exact_for_polynomials_and_their_slopes():
    nodes, at = points(-1.0, 2.5, 9), np.array([-1.0, -0.2, 0.5, 2.5, points(-1.0, 2.5, 9)[3]])
    plain, slope, bend = weights(nodes, at, bend=True)
    for p in range(9):
        np.testing.assert_allclose(nodes**p @ plain, at**p, rtol=1e-11, atol=1e-11)
        np.testing.assert_allclose(nodes**p @ slope, p * at ** max(p - 1, 0), rtol=1e-10, atol=1e-9)
        np.testing.assert_allclose(nodes**p @ bend, p * (p - 1) * at ** max(p - 2, 0), rtol=1e-9, atol=1e-8)


@pytest.mark.parametrize("gamma", [-0.7, 0.0, 0.5, 1.0, 1.8])
@pytest.mark.parametrize("p", [-1.0, 0.6, 2.0])
def test_means_over_a_step_against_quadrature(gamma, p):
    """Over eta, between x = m e^{−l/2} and m e^{l/2}, by mpmath."""
    length, e = 0.4, 1 - gamma
    q = length * length / 4

    def t(v):
        if abs(e) < 1e-12:
            return mpmath.exp(-length / 2 + v * length)
        low, high = mpmath.exp(-e * length / 2), mpmath.exp(e * length / 2)
        return (low + v * (high - low)) ** (1 / e)

    mean = mpmath.quad(lambda v: t(v) ** p, [0, 1])
    bridged = mpmath.quad(lambda v: v * (1 - v) * p * (p + gamma - 1) * t(v) ** (p + 2 * gamma - 2), [0, 1])
    over = quotient(mean_series(np.array(p + e), 12), mean_series(np.array(e), 12))
    np.testing.assert_allclose(sum(c * q**k for k, c in enumerate(over)), float(mean), rtol=1e-13)
    series = bridge(np.array(p), np.array(e), 12)
    np.testing.assert_allclose(sum(c * q**k for k, c in enumerate(series)), float(bridged), rtol=1e-12, atol=1e-15)


# --- the fit ------------------------------------------------------------------------------------------------------


def test_windows_hold_the_columns_in_order():
    fit = MODEL.rolling(paths(300, 1, rows=2), DT, 100)
    assert tuple(fit.columns) == tuple(column.name for column in MODEL.columns)
    assert fit.status.shape == (2, 201)


@pytest.mark.parametrize(("lookback", "relative"), [(60, 0.2), (60, 0.9), (250, 0.6), (250, 1.6)])
def test_sums_over_windows_agree_with_windows_one_by_one(lookback, relative):
    """Over all tiers of range and step; the windows are summed in another place, at more points and in more terms."""
    x = paths(3 * lookback, 2, relative=relative)[0]
    windows = np.lib.stride_tricks.sliding_window_view(x, lookback + 1)[::7]
    from driftbook.estimators.elastic_fit import _from_windows

    with np.errstate(all="ignore"):
        columns, status = _from_windows(True, windows, np.full((len(windows), lookback), DT))
    rolled = part(MODEL.rolling(x, DT, lookback), slice(None, None, 7))
    ordered = {name: columns[name] for name in rolled.columns}
    assert_close(rolled, Fit("ckls", rolled.n, ordered, status))


@pytest.mark.parametrize("steps", ["equal", "unequal"])
def test_fit_is_where_the_likelihood_is_largest(steps):
    """The density is computed apart from the sums, step by step."""
    rng = np.random.default_rng(3)
    x = paths(900, 3)[0]
    dt = np.full(900, DT) if steps == "equal" else DT * rng.choice([1.0, 1.0, 3.0, 4.0], 900)
    fit = MODEL.rolling(x, dt, 200)
    for k in range(0, 700, 97):
        window, step = x[k : k + 201], dt[k : k + 200]
        at = [fit.columns[name][k] for name in PARAMETERS]
        top = MODEL.loglik(window, step, *at)
        np.testing.assert_allclose(top, fit.loglik[k], atol=1e-8)  # where the series of a step are cut off
        for j, name in enumerate(PARAMETERS):
            reach = 0.01 * fit.columns[f"{name}_se"][k] * (0.05 if name in {"sigma", "gamma"} else 1.0)
            sides = [MODEL.loglik(window, step, *(p + reach * s * (i == j) for i, p in enumerate(at))) for s in (-1, 1)]
            assert max(sides) < top + 1e-9
            assert abs(sides[0] - sides[1]) < 0.1 * (2 * top - sum(sides)) + 1e-8


def test_standard_errors_are_those_of_the_information():
    """By second differences of the density, with the volatility at the geometric mean in place of sigma."""
    x = paths(250, 4)[0]
    fit, mean = MODEL.fit(x, DT), np.log(x[:-1]).mean()
    names = ("kappa", "theta", "local_volatility", "gamma")
    at = np.array([float(fit.columns[name]) for name in names])
    errors = np.array([float(fit.columns[f"{name}_se"]) for name in names])

    def loglik(p):
        return MODEL.loglik(x, DT, p[0], p[1], p[2] * np.exp(-p[3] * mean), p[3])

    unit = 0.03 * np.diag(errors)
    corners = ((1, 1), (1, -1), (-1, 1), (-1, -1))
    four = np.array([[[loglik(at + a * e + b * f) for a, b in corners] for f in unit] for e in unit])
    information = -(four @ [1, -1, -1, 1]) / 4 / np.outer(0.03 * errors, 0.03 * errors)
    # the differences are off by 0.03² of fourth derivatives
    np.testing.assert_allclose(errors, np.sqrt(np.diag(np.linalg.inv(information))), rtol=3e-3)


def test_equal_steps_are_the_same_however_they_are_given():
    x = paths(500, 5)[0]
    assert_same_bits(MODEL.rolling(x, np.full(500, DT), 90), MODEL.rolling(x, DT, 90))


def test_without_intervals_the_parameters_are_the_same():
    x = paths(500, 6)[0]
    full, quick = MODEL.rolling(x, DT, 120), MODEL.rolling(x, DT, 120, intervals=False)
    for name in (*PARAMETERS, "loglik"):
        np.testing.assert_allclose(quick.columns[name], full.columns[name], rtol=1e-9)
    assert np.isnan(quick.local_volatility).all()


@pytest.mark.parametrize("factor", [1e-6, 100.0, 1e12])
def test_scaled_data(factor):
    x = paths(300, 7)[0]
    plain, scaled = MODEL.rolling(x, DT, 100), MODEL.rolling(factor * x, DT, 100)
    np.testing.assert_array_equal(plain.status, scaled.status)
    for name, power in (
        ("kappa", 0),
        ("gamma", 0),
        ("theta", 1),
        ("local_volatility", 1),
        ("local_volatility_upper", 1),
    ):
        np.testing.assert_allclose(scaled.columns[name], factor**power * plain.columns[name], rtol=1e-5, err_msg=name)
    np.testing.assert_allclose(scaled.loglik, plain.loglik - 100 * np.log(factor), atol=1e-7)
    np.testing.assert_allclose(scaled.sigma, plain.sigma * factor ** (1 - plain.gamma), rtol=1e-5)


def test_another_unit_of_time():
    x = paths(300, 8)[0]
    a, b = MODEL.rolling(x, DT, 100), MODEL.rolling(x, 1.0, 100)
    np.testing.assert_allclose(b.kappa / DT, a.kappa, rtol=1e-7, atol=1e-6)
    np.testing.assert_allclose(b.loglik, a.loglik, rtol=1e-11)


def test_values_close_to_each_other_lose_nothing():
    """A quote that moves in its seventh digit: the volatility is that of the plain walk, whatever gamma."""
    x = 1 + 1e-7 * np.cumsum(np.random.default_rng(9).standard_normal(300))
    fit = MODEL.rolling(x, DT, 100)
    assert not np.isin(fit.status, [Status.NOT_CONVERGED, Status.FLAT]).any()
    mean_square = np.lib.stride_tricks.sliding_window_view(np.diff(x) ** 2, 100).mean(axis=1)
    np.testing.assert_allclose(fit.local_volatility, np.sqrt(mean_square / DT), rtol=0.1)


# --- statuses -----------------------------------------------------------------------------------------------------


def strange_rows():
    rng = np.random.default_rng(10)
    x = np.exp(0.03 * np.cumsum(rng.standard_normal((12, 400)), axis=1))
    x[1, 200] = np.nan
    x[2, 250] = np.inf
    x[3] = 7.0
    x[4] *= 1e12
    x[5, 100] = 1e12
    x[6] = np.exp(0.01 * np.arange(400))
    x[7, 200] = 0.0
    x[8, 250] = -1.0
    x[9] = 1e3 * (1 + 1e-16 * rng.standard_normal(400))
    x[10] *= 1e-12
    x[11, 200:] *= 3
    return x


@pytest.mark.parametrize("lookback", [12, 100])
@pytest.mark.parametrize("intervals", [True, False])
def test_rows_do_not_influence_each_other_by_a_bit(lookback, intervals):
    x = strange_rows()
    together = MODEL.rolling(x, DT, lookback, intervals=intervals)
    for row in range(len(x)):
        assert_same_bits(MODEL.rolling(x[row], DT, lookback, intervals=intervals), part(together, row))


def test_bits_do_not_depend_on_threads_pieces_or_slices(monkeypatch):
    x = paths(500, 11, rows=4)
    whole = MODEL.rolling(x, DT, 60)
    assert_same_bits(MODEL.rolling(x, DT, 60, threads=2), whole)
    assert_same_bits(MODEL.rolling(x, DT, 60, first=77), part(whole, np.s_[:, 77:]))
    start = aligned_start(130, 60)
    assert_same_bits(part(MODEL.rolling(x[:, start:], DT, 60), np.s_[:, 10:]), part(whole, np.s_[:, 130:]))
    monkeypatch.setattr("driftbook.estimators.batches.PIECE", 1000)
    assert_same_bits(MODEL.rolling(x, DT, 60), whole)


def test_each_strange_row_has_its_status_and_no_number_that_is_none():
    fit = MODEL.rolling(strange_rows(), DT, 100)
    for row, place in ((1, 200), (2, 250), (7, 200), (8, 250)):
        holds = np.zeros(300, dtype=bool)
        holds[place - 100 : place + 1] = True
        np.testing.assert_array_equal(fit.status[row] == Status.OUT_OF_RANGE, holds)
    assert (fit.status[[3, 6, 9]] == Status.FLAT).all()
    assert (fit.status[5, :101] == Status.NOT_CONVERGED).all()
    given = np.isin(fit.status, [Status.OK, Status.NO_REVERSION, Status.AT_BOUND, Status.TOO_COARSE])
    for name in ("kappa", "sigma", "gamma", "loglik", "local_volatility", "kurtosis"):
        np.testing.assert_array_equal(np.isfinite(fit.columns[name]), given, err_msg=name)
    assert given[[0, 4, 10, 11]].all()


@pytest.mark.parametrize("n_obs", [0, 1, 4, 10])
def test_window_of_too_few_steps(n_obs):
    fit = MODEL.fit(np.ones((2, n_obs)), DT)
    assert (fit.status == Status.TOO_SHORT).all()


def test_statuses_and_ends_say_what_was_found():
    fit = MODEL.rolling(paths(900, 12, rows=4, relative=0.15), DT, 60)
    coarse, bound = fit.status == Status.TOO_COARSE, fit.status == Status.AT_BOUND
    assert bound.any()
    np.testing.assert_array_equal(coarse, np.abs(fit.kappa) * DT > COARSEST)
    at_edge = np.isin(fit.gamma, [-1.0, 2.5])
    np.testing.assert_array_equal(bound, ~coarse & at_edge)
    np.testing.assert_array_equal(np.isnan(fit.gamma_lower), at_edge)
    np.testing.assert_array_equal(fit.status == Status.NO_REVERSION, ~coarse & ~bound & (fit.kappa <= 0))
    above = fit.gamma > 1
    for name in ("half_life", "half_life_lower", "half_life_upper", "half_life_mle"):
        assert np.isnan(fit.columns[name][above]).all()
    assert (fit.local_volatility_lower < fit.local_volatility).all()
    assert (fit.local_volatility < fit.local_volatility_upper).all()


@pytest.mark.parametrize("dt", [1.0, [1.0, 1.0, 20.0]])
def test_a_pull_of_more_than_a_half_over_the_longest_step_is_too_coarse(dt):
    x = paths(300, 14, kappa=9.0)[0]
    steps = DT * np.resize(dt, 300)
    fit = MODEL.rolling(x, steps, 100)
    longest = np.lib.stride_tricks.sliding_window_view(steps, 100).max(axis=1)
    np.testing.assert_array_equal(fit.status == Status.TOO_COARSE, np.abs(fit.kappa) * longest > COARSEST)
    assert (fit.status == Status.TOO_COARSE).any() == (np.ndim(dt) == 1)
    assert np.isfinite(fit.kappa_lower[fit.status == Status.TOO_COARSE]).all()


def test_columns_with_a_formula_hold_what_it_says():
    fit = MODEL.rolling(paths(600, 13)[0], DT, 200)
    connection = duckdb.connect()
    frame = pl.DataFrame({name: np.asarray(values) for name, values in fit.columns.items()}).fill_nan(None)
    connection.register("fit", frame.with_columns(x=0.05).to_arrow())
    for column in MODEL.derived:
        (found,) = connection.execute(f"select ({column.sql})::double from fit").fetchnumpy().values()
        np.testing.assert_allclose(
            np.ma.filled(found, np.nan), fit.columns[column.name], rtol=1e-12, err_msg=column.name
        )
    low, here, high = (
        next(iter(connection.execute(f"select {sql} from fit").fetchnumpy().values()))
        for sql in (MODEL.local_volatility[1], MODEL.local_volatility[0], MODEL.local_volatility[2])
    )
    connection.close()
    np.testing.assert_allclose(here, fit.sigma * 0.05**fit.gamma, rtol=1e-12)
    assert (low < here).all()
    assert (here < high).all()
