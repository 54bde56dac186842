"""The quartic fit: right digits on any data, its settings, and what each case holds."""

from importlib import resources

import duckdb
import numpy as np
import polars as pl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad

from driftbook.estimators import Fit, Status, aligned_start, cubic
from driftbook.estimators.cubic_fit import COARSEST
from driftbook.estimators.cubic_uncertainty import MORE, Uncertainty
from driftbook.estimators.data import make_drift_law
from driftbook.estimators.drift_law import COSINES, HALF_OCTAVES, reaches
from driftbook.estimators.models.quartic import MODEL
from driftbook.estimators.movements import Movements, movement_terms
from driftbook.estimators.polynomial_drift import TERMS, Sums, likelihood_terms, maximise
from driftbook.estimators.segment_powers import bridge_share, homogeneous, mean_share, squared

DT = 1 / 252
COEFFICIENTS = ("a0", "a1", "a2", "a3")
PARAMETERS = (*COEFFICIENTS, "sigma")

# The promise: a number is off by no more than this share of itself, or of its standard error.
PROMISE, OF_ERROR = 1e-9, 1e-6
# Data that are shifted or scaled are rounded anew: an estimate moves by that times what elimination cancels, which is
# up to 1e7 times: as large as the promise allows.
MOVED = 1e-6


def walk_in_wells(n, seed, *, rows=1, strength=8.0, sigma=1.5, dt=DT, substeps=8):
    """Euler's scheme in small steps for f = strength (x − x³)."""
    rng = np.random.default_rng(seed)
    x, h = rng.choice([-1.0, 1.0], rows), dt / substeps
    every = np.empty((rows, n + 1))
    for i in range(n + 1):
        every[:, i] = x
        for _ in range(substeps):
            x = x + strength * (x - x**3) * h + sigma * np.sqrt(h) * rng.standard_normal(rows)
    return every


def part(fit, where):
    columns = {name: values[where] for name, values in fit.columns.items()}
    return Fit(fit.model, fit.n[where], columns, fit.status[where])


def assert_same_bits(found, expected):
    assert np.array_equal(found.status, expected.status)
    for name, values in found.columns.items():
        assert values.tobytes() == expected.columns[name].tobytes(), name


def assert_close(found, expected, *, share=PROMISE, of_error=OF_ERROR):
    np.testing.assert_array_equal(found.status, expected.status)
    for name, values in found.columns.items():
        reference = expected.columns[name]
        unit = name.removesuffix("_lower").removesuffix("_upper").removesuffix("_se")
        error = expected.columns.get(f"{unit}_se", np.zeros(1)) if f"{unit}_se" in expected.columns else 1.0
        off = np.abs(values - reference) > share * np.abs(reference) + of_error * error
        assert not off.any(), (name, values[off][:3], reference[off][:3])
        np.testing.assert_array_equal(np.isnan(values), np.isnan(reference), err_msg=name)


# --- the pieces ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("x", "y"), [(0.3, 1.7), (-2.0, 0.5), (1.1, 1.1), (0.0, 0.0), (0.0, -1.5)])
def test_powers_averaged_over_a_segment(x, y):
    plain = homogeneous(np.array(x), np.array(y), np.array(1.0), 6)
    bridged = squared(np.array(x), np.array(y), plain)
    for p in range(7):
        mean = quad(lambda v, p=p: (x + v * (y - x)) ** p, 0, 1)[0]
        bridge = quad(lambda v, p=p: v * (1 - v) * (x + v * (y - x)) ** p, 0, 1)[0]
        np.testing.assert_allclose(plain[p] * mean_share(p), mean, rtol=1e-13, atol=1e-14)
        np.testing.assert_allclose(bridged[p] * bridge_share(p), bridge, rtol=1e-13, atol=1e-14)


ROOTS = st.lists(st.floats(-5, 5), min_size=3, max_size=3, unique=True)


@given(ROOTS, st.floats(-10, -0.1))
@settings(max_examples=80, deadline=None)
def test_three_roots_of_a_cubic(roots, leading):
    roots = np.sort(np.round(roots, 3))
    if np.diff(roots).min() < 0.01:
        return
    r, s, t = roots
    p = [np.array([leading * each]) for each in (-r * s * t, r * s + r * t + s * t, -(r + s + t), 1.0)]
    # a root moves by rounding over the slope there: 1e-16 · 100/(0.01 · 0.01)
    np.testing.assert_allclose(np.concatenate(cubic.three_roots(p)), roots, atol=1e-9)


def test_a_cubic_of_one_root_has_no_three():
    with np.errstate(invalid="ignore"):
        roots = cubic.three_roots([np.array([1.0]), np.array([-2.0]), np.array([0.0]), np.array([-1.0])])
    assert np.isnan(roots).all()


@given(st.lists(st.floats(-3, 3), min_size=4, max_size=4), st.floats(-2, 1), st.floats(0.1, 3))
@settings(max_examples=60, deadline=None)
def test_steepest_slope_between_two_places(p, low, width):
    cubic_ = [np.array([each]) for each in p]
    z = np.linspace(low, low + width, 4001)
    with np.errstate(all="ignore"):
        found = cubic.steepest(cubic_, np.array([low]), np.array([low + width]))[0]
    assert found >= np.abs(cubic.slope(p, z)).max() - 1e-9
    assert found <= np.abs(cubic.slope(p, z)).max() + 1e-5


# --- the fit ------------------------------------------------------------------------------------------------------


def test_windows_hold_the_columns_in_order():
    fit = MODEL.rolling(walk_in_wells(300, 1, rows=2), DT, 100)
    assert tuple(fit.columns) == tuple(column.name for column in MODEL.columns)
    assert fit.status.shape == (2, 201)
    assert [setting.name for setting in MODEL.settings] == ["centre", "scale"]


@pytest.mark.parametrize("lookback", [40, 250])
def test_sums_over_windows_agree_with_windows_one_by_one(lookback):
    x = walk_in_wells(900, 2)[0]
    windows = np.lib.stride_tricks.sliding_window_view(x, lookback + 1)
    rolled = MODEL.rolling(x, DT, lookback, centre=0.1, scale=0.8)
    one_by_one = MODEL.fit(windows, DT, centre=0.1, scale=0.8)
    assert (rolled.status != Status.NOT_CONVERGED).mean() > 0.99
    assert_close(rolled, one_by_one)


@pytest.mark.parametrize("steps", ["equal", "unequal"])
def test_fit_is_where_the_likelihood_is_largest(steps):
    """The density is written apart from the sums: by quadrature, step by step."""
    rng = np.random.default_rng(3)
    x = walk_in_wells(1200, 3)[0]
    dt = np.full(1200, DT) if steps == "equal" else DT * rng.choice([1.0, 1.0, 3.0, 4.0], 1200)
    fit = MODEL.rolling(x, dt, 200)
    sample = np.flatnonzero(np.isin(fit.status, [Status.OK, Status.AT_BOUND]))[::61]
    assert sample.size > 3
    for k in sample:
        window, step = x[k : k + 201], dt[k : k + 200]
        at = [fit.columns[name][k] for name in ("centre", "scale", *PARAMETERS)]
        top = MODEL.loglik(window, step, *at)
        np.testing.assert_allclose(top, fit.loglik[k], rtol=1e-11)
        for j, name in enumerate(PARAMETERS, start=2):
            # two hundredths of a standard error to either side cost 2e-4 at most, the same on both sides
            reach = 0.02 * fit.columns[f"{name}_se"][k]
            sides = [MODEL.loglik(window, step, *(p + reach * s * (i == j) for i, p in enumerate(at))) for s in (-1, 1)]
            assert max(sides) < top
            assert abs(sides[0] - sides[1]) < 0.05 * (2 * top - sum(sides)) + 1e-9


def test_equal_steps_are_the_same_however_they_are_given():
    x = walk_in_wells(700, 4)[0]
    assert_same_bits(MODEL.rolling(x, np.full(700, DT), 90), MODEL.rolling(x, DT, 90))
    uneven = np.full(700, DT)
    uneven[500:] *= 2  # windows that end before are as if all were equal
    assert_close(part(MODEL.rolling(x, uneven, 90), slice(0, 400)), part(MODEL.rolling(x, DT, 90), slice(0, 400)))


def test_without_intervals_the_parameters_are_the_same():
    x = walk_in_wells(600, 5)[0]
    full, quick = MODEL.rolling(x, DT, 120), MODEL.rolling(x, DT, 120, intervals=False)
    for name in ("centre", "scale", *PARAMETERS, "loglik"):
        np.testing.assert_allclose(quick.columns[name], full.columns[name], rtol=1e-9)
    assert np.isnan(quick.a0_se).all()
    assert np.isnan(quick.barrier).all()


# --- centre and scale ---------------------------------------------------------------------------------------------


def test_centre_and_scale_are_of_the_first_window_unless_told():
    x = walk_in_wells(400, 6, rows=3)
    fit = MODEL.rolling(x, DT, 100)
    np.testing.assert_allclose(fit.centre, np.repeat(x[:, :101].mean(axis=1)[:, None], 301, axis=1), rtol=1e-12)
    np.testing.assert_allclose(fit.scale, np.repeat(x[:, :101].std(axis=1)[:, None], 301, axis=1), rtol=1e-12)
    one = MODEL.fit(x[:, :101], DT)
    assert_close(part(fit, np.s_[:, 0]), one)


def test_a_slice_has_the_bits_of_the_whole_only_when_told_its_centre_and_scale():
    x = walk_in_wells(900, 7)[0]
    whole = MODEL.rolling(x, DT, 100)
    for first in (0, 60, 100, 250):
        start = aligned_start(first, 100)
        told = MODEL.rolling(x[start:], DT, 100, centre=whole.centre[0], scale=whole.scale[0])
        assert_same_bits(part(told, slice(first - start, None)), part(whole, slice(first, None)))
    alone = MODEL.rolling(x[100:], DT, 100)
    assert not np.allclose(alone.a1, whole.a1[100:])


def test_all_but_the_coefficients_is_free_of_centre_and_scale():
    x = walk_in_wells(500, 8)[0]
    a, b = (MODEL.rolling(x, DT, 100, centre=c, scale=s) for c, s in ((0.0, 1.0), (0.7, 0.25)))
    for name in ("sigma", "sigma_lower", "barrier", "barrier_se", "bottom_upper", "kurtosis", "loglik", "steepest"):
        np.testing.assert_allclose(a.columns[name], b.columns[name], rtol=1e-8, atol=1e-10, err_msg=name)
    for at in (-0.5, 0.3, 1.2):
        drift = [cubic.value([f.columns[k] for k in COEFFICIENTS], (at - f.centre) / f.scale) for f in (a, b)]
        np.testing.assert_allclose(drift[0], drift[1], rtol=1e-7, atol=1e-7)


@pytest.mark.parametrize(("shift", "factor"), [(1e5, 1.0), (0.0, 1e12), (0.0, 1e-12), (-40.0, 1e3)])
def test_shifted_and_scaled_data(shift, factor):
    x = walk_in_wells(400, 9)[0]
    plain, moved = MODEL.rolling(x, DT, 100), MODEL.rolling(shift + factor * x, DT, 100)
    for name in (*PARAMETERS, "sigma_lower", "a1_se"):
        error = plain.columns["sigma_se" if name.startswith("sigma") else f"{name[:2]}_se"]
        assert (np.abs(moved.columns[name] / factor - plain.columns[name]) <= MOVED * error).all(), name
    np.testing.assert_allclose(moved.loglik, plain.loglik - 100 * np.log(factor), atol=1e-6)


def test_another_unit_of_time():
    x = walk_in_wells(400, 10)[0]
    a, b = MODEL.rolling(x, DT, 100), MODEL.rolling(x, 1.0, 100)
    np.testing.assert_allclose(b.a3 / DT, a.a3, rtol=1e-9)
    np.testing.assert_allclose(b.sigma / np.sqrt(DT), a.sigma, rtol=1e-11)
    np.testing.assert_allclose(b.loglik, a.loglik, rtol=1e-11)


@pytest.mark.parametrize(
    ("told", "message"),
    [
        ({"scale": 0.0}, "scale must be positive"),
        ({"scale": np.nan}, "scale must be finite"),
        ({"centre": np.inf}, "centre must be finite"),
    ],
)
def test_settings_that_are_none_raise(told, message):
    with pytest.raises(ValueError, match=message):
        MODEL.rolling(walk_in_wells(60, 11), DT, 40, **told)


def test_functions_take_centre_and_scale_first():
    x = walk_in_wells(60, 12)[0]
    assert np.isfinite(MODEL.loglik(x, DT, 0.0, 1.0, 0.0, 8.0, 0.0, -8.0, 1.5))
    assert np.isnan(MODEL.loglik(x, DT, 0.0, 1.0, 0.0, 8.0, 0.0, -8.0, -1.5))
    with pytest.raises(ValueError, match="quartic has the parameters centre, scale, a0, a1, a2, a3, sigma; got 5"):
        MODEL.loglik(x, DT, 0.0, 8.0, 0.0, -8.0, 1.5)


# --- statuses -----------------------------------------------------------------------------------------------------


def strange_rows():
    rng = np.random.default_rng(13)
    x = np.cumsum(rng.standard_normal((12, 400)), axis=1)
    x[1, 200] = np.nan
    x[2, 250] = np.inf
    x[3] = 7.0
    x[4] *= 1e12
    x[5, 100] = 1e12
    x[6] = np.arange(400)
    x[7] *= 1e-160
    x[8] = 1e9 + 1e-3 * x[8]
    x[9] = 1e3
    x[9, 200:] += 1e-13 * rng.standard_normal(200)
    x[10] *= 1e-12
    x[11, 200:] += 1e6
    return x


@pytest.mark.parametrize("lookback", [12, 150])
@pytest.mark.parametrize("intervals", [True, False])
def test_rows_do_not_influence_each_other_by_a_bit(lookback, intervals):
    x = strange_rows()
    together = MODEL.rolling(x, DT, lookback, intervals=intervals)
    for row in range(len(x)):
        assert_same_bits(MODEL.rolling(x[row], DT, lookback, intervals=intervals), part(together, row))


def test_bits_do_not_depend_on_threads_or_pieces(monkeypatch):
    x = walk_in_wells(700, 14, rows=6)
    whole = MODEL.rolling(x, DT, 60)
    assert_same_bits(MODEL.rolling(x, DT, 60, threads=2), whole)
    assert_same_bits(MODEL.rolling(x, DT, 60, first=77), part(whole, np.s_[:, 77:]))
    monkeypatch.setattr("driftbook.estimators.batches.PIECE", 1000)
    assert_same_bits(MODEL.rolling(x, DT, 60), whole)


def test_each_strange_row_has_its_status_and_no_number_that_is_none():
    x = strange_rows()
    fit = MODEL.rolling(x, DT, 150)
    holds = np.zeros(250, dtype=bool)
    holds[50:201] = True
    np.testing.assert_array_equal(fit.status[1] == Status.OUT_OF_RANGE, holds)
    assert (fit.status[[3, 6, 9]] == Status.FLAT).all()
    given_ = np.isin(fit.status, [Status.OK, Status.AT_BOUND, Status.TOO_COARSE])
    assert given_[[0, 4, 7, 8, 10]].all()
    assert (given_[11] | (fit.status[11] == Status.NOT_CONVERGED)).all()
    for name in (*PARAMETERS, "loglik", "a0_se", "sigma_lower", "kurtosis", "centre"):
        np.testing.assert_array_equal(np.isfinite(fit.columns[name]), given_, err_msg=name)


@pytest.mark.parametrize("n_obs", [0, 1, 4, 10])
def test_window_of_too_few_steps(n_obs):
    fit = MODEL.fit(np.zeros((2, n_obs)), DT)
    assert (fit.status == Status.TOO_SHORT).all()
    assert np.isnan(fit.a0).all()


def test_statuses_say_what_the_drift_does():
    fit = MODEL.rolling(walk_in_wells(2500, 15, rows=3), DT, 60)
    coarse, bound = fit.status == Status.TOO_COARSE, fit.status == Status.AT_BOUND
    np.testing.assert_array_equal(coarse, fit.steepest > COARSEST)
    np.testing.assert_array_equal(bound, ~coarse & (fit.a3 > 0))
    assert bound.any()
    assert coarse.any()
    assert (fit.status == Status.OK).any()


def test_resting_points_are_where_a_confining_drift_vanishes():
    fit = MODEL.rolling(walk_in_wells(2500, 16), DT, 500)
    two = np.isfinite(fit.barrier)
    assert two.any()
    assert (fit.a3[two] < 0).all()
    assert (fit.bottom_lower[two] < fit.barrier[two]).all()
    assert (fit.barrier[two] < fit.bottom_upper[two]).all()
    f = [fit.columns[k][two] for k in COEFFICIENTS]
    for name, sign in (("bottom_lower", -1), ("barrier", 1), ("bottom_upper", -1)):
        z = (fit.columns[name][two] - fit.centre[two]) / fit.scale[two]
        # to the rounding of the drift, which is taken from terms that cancel
        size = cubic.value([np.abs(each) for each in f], np.abs(z))
        assert (np.abs(cubic.value(f, z)) < 1e-12 * size).all()
        assert (sign * cubic.slope(f, z) > 0).all()


def test_columns_with_a_formula_hold_what_it_says():
    fit = MODEL.rolling(walk_in_wells(600, 17)[0], DT, 200)
    connection = duckdb.connect()
    table = {name: np.asarray(values) for name, values in fit.columns.items()}
    table["x"] = np.linspace(-1, 1, fit.status.size)
    frame = pl.DataFrame(table).fill_nan(None)
    connection.register("fit", frame.to_arrow())
    for column in MODEL.derived:
        found = connection.execute(f"select {column.sql} from fit").fetchnumpy()
        values = np.ma.filled(next(iter(found.values())).astype(float), np.nan)
        np.testing.assert_allclose(values, fit.columns[column.name], rtol=1e-12, err_msg=column.name)
    drift = next(iter(connection.execute(f"select {MODEL.local_drift} from fit").fetchnumpy().values()))
    f = [fit.columns[k] for k in COEFFICIENTS]
    np.testing.assert_allclose(drift, cubic.value(f, (table["x"] - fit.centre) / fit.scale), rtol=1e-9, atol=1e-9)
    connection.close()


# --- what is not known --------------------------------------------------------------------------------------------


def local_sums(windows, dt=DT):
    """Sums, optimum and uncertainty of windows about their means, as `make_drift_law` takes them."""
    local = windows - windows.mean(axis=1)[:, None]
    x, y, d = local[:, :-1], local[:, 1:], np.diff(local, axis=1)
    steps = np.full((1, d.shape[1]), dt)
    totals = [term.sum(axis=1) for term in likelihood_terms(x, y, d, steps, more=MORE)]
    sums = Sums.of(d.shape[1], totals)
    optimum = maximise(sums)
    movements = Movements.of(d.shape[1], [t.sum(axis=1) for t in movement_terms(x, d, d, steps)], sums.plain[0])
    return local, optimum, Uncertainty.of(sums, optimum, optimum.drift, movements, totals[TERMS:])


def test_bias_is_that_of_its_definition():
    """−V⁻¹ Σ_l (∂V/∂a_l) V⁻¹ e_l with moments of the time spent at each level, by quadrature over every step."""
    local, optimum, uncertainty = local_sums(walk_in_wells(300, 20, rows=3))
    nodes, weights = np.polynomial.legendre.leggauss(8)
    for row in range(3):
        at = local[row, :-1, None] + 0.5 * (1 + nodes) * np.diff(local[row])[:, None]
        share = np.broadcast_to(0.5 * weights, at.shape) / len(at)
        g = np.stack([at**k for k in range(4)])
        G = np.stack([at ** (k + 1) / (k + 1) for k in range(4)])
        mean = np.einsum("jst,kst,st->jk", g, g, share)
        mixed = np.einsum("jst,kst,lst,st->jkl", g, g, G, share)
        with_score = mixed - mean[:, :, None] * np.einsum("lst,st->l", G, share)
        inverse = np.linalg.inv(mean)
        duration, u = 300 * DT, optimum.variance[row]
        bias = -2 / duration * inverse @ np.einsum("kml,lm->k", with_score, inverse)
        np.testing.assert_allclose([each[row] for each in uncertainty.bias], bias, rtol=1e-7)
        np.testing.assert_allclose(uncertainty.weight[row] ** 2, bias @ mean @ bias * duration / u, rtol=1e-7)
        f = optimum.drift[:, row]
        np.testing.assert_allclose(uncertainty.strength[row], f @ mean @ f * duration / u, rtol=1e-9)


def test_bias_explains_the_mean_error_to_first_order():
    windows = walk_in_wells(1000, 21, rows=2000, strength=5.0, sigma=2.0)
    _, optimum, uncertainty = local_sums(windows)
    slope, bias = (cubic.slope(each, -windows.mean(axis=1)) for each in (optimum.drift, uncertainty.bias))
    off = slope - 5.0
    error = off.std() / np.sqrt(2000)
    assert abs(off.mean()) > 5 * error
    assert abs(off.mean() - bias.mean()) < 0.5 * abs(off.mean()) + 2 * error


def test_kurtosis_is_that_of_movements():
    x = walk_in_wells(400, 22)[0]
    d = np.diff(x)
    away = d - d.mean()
    fit = MODEL.fit(x, DT)
    np.testing.assert_allclose(fit.kurtosis, np.mean(away**4) / np.mean(away**2) ** 2, rtol=1e-10)


def test_law_of_a_drift_is_even_across_the_bias_and_interpolates_its_table():
    strength = 2.0**HALF_OCTAVES
    lower, upper = reaches(strength, np.zeros((1, strength.size)))
    np.testing.assert_allclose(lower, -upper)
    table = np.load(resources.files("driftbook.estimators.data").joinpath("drift_law.npz"))["quantiles"]
    for j, cosine in enumerate(COSINES):
        lower, upper = reaches(strength, np.full((1, strength.size), cosine))
        np.testing.assert_allclose([lower[0], upper[0]], table[:, j], atol=1e-12)
    middle = reaches(strength, np.full((1, strength.size), 0.5 * (COSINES[1] + COSINES[2])))
    np.testing.assert_allclose(np.array(middle)[:, 0], table[:, 1:3].mean(axis=1), atol=1e-12)
    assert (upper > 1).all()


def test_table_of_the_law_is_what_its_simulation_gives():
    """A part of it simulated anew: as many errors lie outside its quantiles as it says, of one kind that is in it."""
    drift, sigma = make_drift_law.KINDS[4]
    rng = np.random.default_rng(23)
    with np.errstate(all="ignore"):
        strength, cosine, off = make_drift_law.errors(make_drift_law.paths(drift, sigma, 1500, 250, rng), drift)
    lower, upper = reaches(strength[0], cosine)
    outside = (off < lower).mean() + (off > upper).mean()
    assert 0.01 < outside < 0.06


@pytest.mark.parametrize("truth", [((1.0, 12.0, -2.0, -10.0), 1.8), ((0.0, -3.0, 0.0, -2.0), 1.2)])
def test_intervals_of_the_drift_hold_the_truth(truth):
    """Of kinds that the table was not made of, where ± 1.96 standard errors hold 82 to 89 %."""
    drift, sigma = truth
    with np.errstate(all="ignore"):
        x = make_drift_law.paths(drift, sigma, 1000, 250, np.random.default_rng(24))
    fit = MODEL.fit(x, DT, centre=0.0, scale=1.0)
    least = 0.92 - 3 * np.sqrt(0.05 * 0.95 / 1000)
    plain = []
    for name, value in zip(COEFFICIENTS, drift, strict=True):
        missed = (value < fit.columns[f"{name}_lower"]) | (value > fit.columns[f"{name}_upper"])
        assert 1 - missed.mean() > least, name
        plain.append(np.mean(np.abs(fit.columns[name] - value) < 1.96 * fit.columns[f"{name}_se"]))
    assert min(plain) < least  # so that the law has something to do here


def test_intervals_of_resting_points_hold_the_truth_or_have_no_end():
    with np.errstate(all="ignore"):
        x = make_drift_law.paths((0.0, 8.0, 0.0, -8.0), 1.5, 600, 1000, np.random.default_rng(25))
    fit = MODEL.fit(x, DT, centre=0.0, scale=1.0)
    two = np.isfinite(fit.barrier)
    assert two.mean() > 0.3
    least = 0.92 - 3 * np.sqrt(0.05 * 0.95 / two.sum())
    for name, value in (("bottom_lower", -1.0), ("barrier", 0.0), ("bottom_upper", 1.0)):
        lower, upper = fit.columns[f"{name}_lower"][two], fit.columns[f"{name}_upper"][two]
        assert 1 - ((value < lower) | (value > upper)).mean() > least, name
        assert (np.isfinite(lower) & np.isfinite(upper)).mean() > 0.5, name
    sure = np.isfinite(fit.barrier_lower) | np.isfinite(fit.barrier_upper)
    assert np.isnan(fit.bottom_lower_lower[~sure]).all()
