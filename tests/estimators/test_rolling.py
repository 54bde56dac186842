"""Fits in rolling position: shapes, and a window's bits that depend on its own observations alone."""

import pickle

import numpy as np
import pytest
from scipy.signal import lfilter

from driftbook.estimators import MODELS, Fit, Status, aligned_start, rolling, unequal

DT = 1 / 252


def ar1(b, n_obs, *, seed, level=0.0):
    """An AR(1) with slope b."""
    return level + lfilter([1.0], [1.0, -b], np.random.default_rng(seed).standard_normal(n_obs))


def windows_of(x, lookback):
    """Every window of a series, one a row."""
    return np.lib.stride_tricks.sliding_window_view(x, lookback + 1)


def assert_same_bits(found, expected):
    assert np.array_equal(found.status, expected.status)
    assert np.array_equal(found.n, expected.n)
    assert list(found.columns) == list(expected.columns)
    for name, values in found.columns.items():
        assert values.tobytes() == expected.columns[name].tobytes(), name


def part(fit, where):
    columns = {name: values[where] for name, values in fit.columns.items()}
    return Fit(fit.model, fit.n[where], columns, fit.status[where])


@pytest.mark.parametrize("batch", [(), (3,), (2, 3), (1, 1, 2)])
@pytest.mark.parametrize("intervals", [True, False])
def test_windows_take_the_place_of_time(batch, intervals):
    x = np.random.default_rng(0).standard_normal((*batch, 40))
    fit = rolling("ou", x, DT, 12, intervals=intervals)
    assert fit.model == "ou"
    assert tuple(fit.columns) == tuple(column.name for column in MODELS["ou"].columns)
    assert fit.status.shape == fit.n.shape == (*batch, 28)
    assert fit.status.dtype == np.int8
    assert fit.n.dtype.kind == "i"
    assert (fit.n == 12).all()
    for values in fit.columns.values():
        assert values.shape == (*batch, 28)
        assert values.dtype == np.float64


@pytest.mark.parametrize("lookback", [5, 12, 100, 249])
def test_window_k_holds_observations_k_to_k_plus_lookback(lookback):
    x = ar1(0.9, 250, seed=1)
    fit, one_by_one = rolling("ou", x, DT, lookback), MODELS["ou"].fit(windows_of(x, lookback), DT)
    assert np.array_equal(fit.status, one_by_one.status)
    for name, values in fit.columns.items():
        np.testing.assert_allclose(values, one_by_one.columns[name], rtol=1e-8, atol=1e-12, err_msg=name)


@pytest.mark.parametrize("lookback", [5, 7, 30, 64, 250, 700])
def test_slice_from_an_aligned_start_has_the_same_bits(lookback):
    x = ar1(0.97, 1500, seed=2, level=50.0)
    whole = rolling("ou", x, DT, lookback)
    for first in {0, 1, lookback - 1, lookback, lookback + 1, 3 * lookback // 2, len(x) - lookback - 1}:
        start = aligned_start(first, lookback)
        assert_same_bits(
            part(rolling("ou", x[start:], DT, lookback), slice(first - start, None)), part(whole, slice(first, None))
        )


def test_later_observations_do_not_change_earlier_windows():
    x = ar1(0.97, 1200, seed=3)
    whole = rolling("ou", x, DT, 100)
    for end in (101, 150, 200, 201, 950):
        assert_same_bits(rolling("ou", x[:end], DT, 100), part(whole, slice(0, end - 100)))


def strange_rows():
    rng = np.random.default_rng(4)
    x = np.cumsum(rng.standard_normal((9, 700)), axis=1)
    x[1, 300] = np.nan
    x[2, 350] = np.inf
    x[3] = 7.0
    x[4] *= 1e12
    x[5, 100] = 1e12
    x[6] = np.arange(700)
    x[7] *= 1e-160
    return x


@pytest.mark.parametrize("lookback", [6, 50, 333])
@pytest.mark.parametrize("intervals", [True, False])
def test_rows_do_not_influence_each_other_by_a_bit(lookback, intervals):
    x = strange_rows()
    together = rolling("ou", x, DT, lookback, intervals=intervals)
    for row in range(len(x)):
        assert_same_bits(rolling("ou", x[row], DT, lookback, intervals=intervals), part(together, row))


def test_missing_value_spoils_only_windows_that_hold_it():
    x = ar1(0.95, 600, seed=5)
    clean = rolling("ou", x, DT, 80)
    x[250] = np.nan
    fit = rolling("ou", x, DT, 80)
    holds = np.zeros(520, dtype=bool)
    holds[170:251] = True
    assert np.array_equal(fit.status == Status.OUT_OF_RANGE, holds)
    other_segments = np.r_[0:160, 320:520]
    assert_same_bits(part(fit, other_segments), part(clean, other_segments))


def test_bits_do_not_depend_on_threads_or_pieces(monkeypatch):
    x = np.cumsum(np.random.default_rng(6).standard_normal((40, 900)), axis=1)
    whole = rolling("ou", x, DT, 60)
    assert_same_bits(rolling("ou", x, DT, 60, threads=3), whole)
    monkeypatch.setattr("driftbook.estimators.batches.PIECE", 1000)
    assert_same_bits(rolling("ou", x, DT, 60), whole)
    assert_same_bits(rolling("ou", np.asfortranarray(x), DT, 60), whole)


@pytest.mark.parametrize("dtype", [np.float32, np.int64, np.int16, np.uint8, ">f8"])
def test_narrow_numbers_are_computed_in_float64(dtype):
    x = (ar1(0.9, 100, seed=7) * 10 + 100).astype(dtype)
    fit = rolling("ou", x, DT, 50)
    assert_same_bits(fit, rolling("ou", x.astype(np.float64), DT, 50))
    assert fit.kappa.dtype == np.float64


def test_lists_will_do():
    assert rolling("ou", [[1, 3, 2, 2.5, 1.5, 2, 1, 4]], 0.1, 5).kappa.shape == (1, 3)


def test_step_may_be_one_for_all_one_a_series_or_one_a_step():
    x = np.random.default_rng(8).standard_normal((3, 60)).cumsum(axis=1)
    dt = np.array([0.1, 0.2, 0.5])
    per_series = rolling("ou", x, dt, 20)
    for row in range(3):
        assert_same_bits(rolling("ou", x[row], dt[row], 20), part(per_series, row))
    assert_same_bits(rolling("ou", x, np.repeat(dt[:, None], 59, axis=1), 20), per_series)
    assert_same_bits(rolling("ou", x[0], np.full(59, 0.1), 20), part(per_series, 0))


def test_steps_that_differ_by_rounding_count_as_equal():
    x = ar1(0.9, 601, seed=9)
    steps = np.diff(2000 + np.arange(601) / 252)
    fit = rolling("ou", x, steps, 100)
    np.testing.assert_allclose(fit.kappa, rolling("ou", x, DT, 100).kappa, rtol=1e-9)
    start = aligned_start(350, 100)
    assert_same_bits(part(rolling("ou", x[start:], steps[start:], 100), slice(50, None)), part(fit, slice(350, None)))


@pytest.mark.parametrize(
    ("x", "dt", "lookback", "message"),
    [
        (np.zeros(20), 0.0, 5, "dt must be positive and finite"),
        (np.zeros(20), -1.0, 5, "dt must be positive and finite"),
        (np.zeros(20), np.nan, 5, "dt must be positive and finite"),
        (np.zeros(20), np.inf, 5, "dt must be positive and finite"),
        (np.zeros((2, 20)), [1.0, 0.0], 5, "dt must be positive and finite"),
        (np.zeros((2, 20)), [1.0, 1.0, 1.0], 5, r"dt must have shape \(\), \(2,\) or \(2, 19\), got \(3,\)"),
        (np.zeros(20), 1.0, 0, "lookback must be 1 or more, got 0"),
        (np.float64(3), 1.0, 5, "x must have a time axis"),
    ],
)
def test_misuse_raises(x, dt, lookback, message):
    with pytest.raises(ValueError, match=message):
        rolling("ou", x, dt, lookback)


@pytest.mark.parametrize("x", [np.array(["a"] * 9), np.zeros(9, dtype=complex), np.zeros(9, dtype="M8[s]")])
def test_what_is_no_number_raises(x):
    with pytest.raises(TypeError, match="x must hold real numbers, got"):
        rolling("ou", x, 1.0, 5)


def test_a_lookback_that_is_no_integer_raises():
    with pytest.raises(TypeError):
        rolling("ou", np.zeros(20), 1.0, 5.0)  # type: ignore[arg-type]


def test_threads_below_one_raise():
    with pytest.raises(ValueError, match="threads must be 1 or more, got 0"):
        rolling("ou", np.zeros(20), 1.0, 5, threads=0)


def test_unknown_model_names_those_there_are():
    with pytest.raises(ValueError, match="no model is called 'uo'; there are abm, gbm, ou, exp_ou"):
        rolling("uo", np.zeros(20), 1.0, 5)


@pytest.mark.parametrize(("n_obs", "windows"), [(0, 0), (1, 0), (8, 0), (9, 1), (10, 2)])
def test_short_series_have_no_windows(n_obs, windows):
    fit = rolling("ou", np.zeros(n_obs), 1.0, 8)
    assert fit.status.shape == fit.kappa.shape == (windows,)


def test_no_series_at_all():
    assert rolling("ou", np.zeros((0, 20)), 1.0, 8).kappa.shape == (0, 12)
    assert rolling("ou", np.zeros((0, 20)), np.zeros(0), 8).kappa.shape == (0, 12)


@pytest.mark.parametrize("n_obs", [0, 1, 2, 5])
def test_window_of_too_few_steps(n_obs):
    fit = MODELS["ou"].fit(np.zeros((3, n_obs)), 1.0)
    assert (fit.status == Status.TOO_SHORT).all()
    assert fit.status.shape == (3,)
    assert (fit.n == max(n_obs - 1, 0)).all()
    assert all(np.isnan(values).all() for values in fit.columns.values())


def test_fit_of_one_window_is_a_batch_of_one():
    x = ar1(0.9, 60, seed=10)
    fit = MODELS["ou"].fit(x, DT)
    assert fit.kappa.shape == fit.status.shape == ()
    assert_same_bits(part(MODELS["ou"].fit(x[None], DT), 0), fit)


def test_columns_are_attributes():
    fit = rolling("ou", ar1(0.9, 60, seed=11), DT, 30)
    assert fit.half_life is fit.columns["half_life"]
    with pytest.raises(AttributeError, match="ou has no column 'gamma'; it has kappa, "):
        _ = fit.gamma


def test_a_fit_survives_a_trip_to_another_process():
    fit = rolling("ou", ar1(0.9, 60, seed=12), DT, 30)
    assert_same_bits(pickle.loads(pickle.dumps(fit)), fit)


# Windows from some on, and unequal steps: of every model.

STEPS = {
    "equal": lambda n: np.full(n, DT),
    "calendar": lambda n: np.random.default_rng(20).choice([1, 1, 1, 1, 3, 4], n) / 365,
    "irregular": lambda n: np.random.default_rng(21).exponential(DT, n) + 1e-6,
    "all in turn": lambda n: np.where(
        np.arange(n) % 300 < 100,
        1 / 365,
        np.where(np.arange(n) % 300 < 200, STEPS["calendar"](n), STEPS["irregular"](n)),
    ),
}
SEARCHED = ("cir", "ckls", "quartic", "merton", "inertial", "ou_noise")  # a search a window: fewer and shorter cases
ALL = [(model, steps) for model in MODELS for steps in STEPS if model not in SEARCHED or steps in ("equal", "calendar")]


def at_lookbacks(*lookbacks):
    """Every model and kind of steps at every lookback; a model that is searched for at the second only."""
    return [
        (*one, lookback) for one in ALL for lookback in lookbacks if one[0] not in SEARCHED or lookback == lookbacks[1]
    ]


def prices(n_obs, rows=None, *, seed=30):
    shape = n_obs if rows is None else (rows, n_obs)
    return 50 * np.exp(0.01 * np.random.default_rng(seed).standard_normal(shape).cumsum(axis=-1))


@pytest.mark.parametrize(("model", "steps", "lookback"), at_lookbacks(6, 50, 333))
def test_windows_from_first_on_have_the_same_bits(model, steps, lookback):
    n, rows = (200, 2) if model in SEARCHED else (700, 3)
    x, dt = prices(n + 1, rows), np.tile(STEPS[steps](n), (rows, 1))
    whole = rolling(model, x, dt, lookback)
    for first in {0, 1, lookback - 1, lookback, 2 * lookback + 1, n - lookback}:
        assert_same_bits(rolling(model, x, dt, lookback, first=first), part(whole, np.s_[:, first:]))


def test_first_beyond_the_last_window_leaves_none():
    for first in (51, 52, 1000):
        fit = rolling("ou", prices(101), DT, 50, first=first)
        assert fit.kappa.shape == fit.status.shape == (0,)
    assert rolling("ou", prices(101), DT, 50, first=50).kappa.shape == (1,)
    assert rolling("ou", prices(3), DT, 2, first=0).status.tolist() == [Status.TOO_SHORT]


def test_first_below_zero_raises():
    with pytest.raises(ValueError, match="first must be 0 or more, got -1"):
        rolling("ou", prices(101), DT, 50, first=-1)
    with pytest.raises(TypeError):
        rolling("ou", prices(101), DT, 50, first=1.0)  # type: ignore[arg-type]


# A model with settings takes them from all values where none are given, so a slice has others.
@pytest.mark.parametrize(
    ("model", "steps", "lookback"), [one for one in at_lookbacks(7, 60, 250) if not MODELS[one[0]].settings]
)
def test_bits_of_slices_and_of_longer_series(model, steps, lookback):
    n = 270 if model in SEARCHED else 900
    x, dt = prices(n), STEPS[steps](n - 1)
    whole = rolling(model, x, dt, lookback)
    for first in {lookback, lookback + 1, n * 5 // 9}:
        start = aligned_start(first, lookback)
        assert_same_bits(rolling(model, x[start:], dt[start:], lookback), part(whole, slice(start, None)))
    for end in {lookback + 3, 2 * lookback, 2 * lookback + 1, n * 7 // 9}:
        assert_same_bits(rolling(model, x[:end], dt[: end - 1], lookback), part(whole, slice(0, end - lookback)))


@pytest.mark.parametrize(
    ("model", "lookback"),
    [(model, lookback) for model in MODELS for lookback in (6, 60) if lookback > 6 or model not in SEARCHED],
)
def test_rows_of_other_steps_do_not_influence_each_other_by_a_bit(model, lookback, monkeypatch):
    n = 120 if model in SEARCHED else 600
    x = strange_rows()[:, :n] + 100
    dt = np.array([STEPS[name](n - 1) for name in (*STEPS, *STEPS)] + [np.full(n - 1, 1.0)])
    together = rolling(model, x, dt, lookback)
    for row in range(len(x)):
        assert_same_bits(rolling(model, x[row], dt[row], lookback), part(together, row))
    assert_same_bits(rolling(model, x[::-1], dt[::-1], lookback), part(together, np.s_[::-1]))
    assert_same_bits(rolling(model, x, dt, lookback, threads=3), together)
    monkeypatch.setattr("driftbook.estimators.batches.PIECE", 500)
    monkeypatch.setattr(unequal, "AT_ONCE", 1)
    assert_same_bits(rolling(model, x, dt, lookback), together)


@pytest.mark.parametrize(("model", "steps"), ALL)
def test_a_missing_value_spoils_only_windows_that_hold_it_at_any_steps(model, steps):
    x, dt = prices(500), STEPS[steps](499)
    clean = rolling(model, x, dt, 60)
    x[250] = np.nan
    fit = rolling(model, x, dt, 60)
    holds = np.zeros(440, dtype=bool)
    holds[190:251] = True
    assert np.array_equal(fit.status == Status.OUT_OF_RANGE, holds)
    other_segments = np.r_[0:120, 300:440]
    assert_same_bits(part(fit, other_segments), part(clean, other_segments))


@pytest.mark.parametrize("model", MODELS)
def test_equal_steps_as_arrays_are_one_step(model):
    x = prices(400)
    assert_same_bits(rolling(model, x, np.full(399, DT), 60), rolling(model, x, DT, 60))
    mixed = np.full(399, DT)
    mixed[300:] = 2 * DT  # windows of equal steps beside others
    fit, equal = rolling(model, x, mixed, 60), rolling(model, x, DT, 60)
    assert_same_bits(part(fit, slice(0, 240)), part(equal, slice(0, 240)))
