"""The jump diffusion: its derivatives, its cases, and that windows depend on their past alone."""

import numpy as np
import pytest

from driftbook.estimators import MODELS, Status
from driftbook.estimators.jump_mixture import limits, standardised
from driftbook.estimators.jump_search import STRIDE
from driftbook.estimators.jump_starts import condensed, starts
from driftbook.estimators.models.merton import MODEL as MERTON

DT = 1 / 252
N = 120
DIFFERENCES = 1e-6  # of the largest entry: central differences over 1e-5
TRUTH = {"mu": 0.08, "sigma": 0.2, "jump_rate": 15.0, "jump_mean": -0.02, "jump_sd": 0.04}

NAMES = tuple(column.name for column in MERTON.columns)
WITHOUT_INTERVALS = ("mu", "sigma", "jump_rate", "jump_mean", "jump_sd", "loglik")


def increments(n, m, seed, dt=DT, **truth):
    """Increments of the logarithm, shape (m, n)."""
    p = TRUTH | truth
    rng = np.random.default_rng(seed)
    steps = np.broadcast_to(dt, (m, n))
    jumps = rng.poisson(p["jump_rate"] * steps)
    drift = p["mu"] - p["sigma"] ** 2 / 2 - p["jump_rate"] * np.expm1(p["jump_mean"] + p["jump_sd"] ** 2 / 2)
    sd = np.sqrt(p["sigma"] ** 2 * steps + jumps * p["jump_sd"] ** 2)
    return drift * steps + jumps * p["jump_mean"] + sd * rng.standard_normal((m, n))


def prices(n, m, seed, dt=DT, **truth):
    d = increments(n, m, seed, dt, **truth)
    return 50 * np.exp(np.concatenate([np.zeros((m, 1)), np.cumsum(d, axis=1)], axis=1))


@pytest.mark.parametrize("unequal", [False, True])
@pytest.mark.parametrize("few", [False, True])
def test_derivatives_are_those_of_the_likelihood(unequal, few):
    steps = np.random.default_rng(1).uniform(0.4, 2, (6, 80)) if unequal else None
    z, _, _ = standardised(increments(80, 6, seed=2) * 30, steps)
    points = starts(condensed(z), 8)
    z = condensed(z) if few else z
    places, h = np.arange(6), 1e-5
    for point in points:
        surface = z.surface(point, places)
        np.testing.assert_allclose(surface.value, z.loglik(point), rtol=1e-14)
        for i in range(5):
            up, down = point.copy(), point.copy()
            up[i] += h
            down[i] -= h
            by_value = (z.loglik(up) - z.loglik(down)) / (2 * h)
            by_gradient = (z.surface(up, places).gradient - z.surface(down, places).gradient) / (2 * h)
            assert np.abs(by_value - surface.gradient[i]).max() <= DIFFERENCES * np.abs(surface.gradient).max()
            assert np.abs(by_gradient - surface.hessian[i]).max() <= DIFFERENCES * np.abs(surface.hessian).max()


@pytest.mark.parametrize("n", [20, 37, 250, 1001])
def test_few_points_keep_number_mean_and_squares(n):
    z, _, _ = standardised(increments(n, 5, seed=18), None)
    points = condensed(z)
    assert points.count.sum() == n
    assert n < 250 or points.z.shape[1] < n / 3
    for power in (1, 2):
        np.testing.assert_allclose(points.z**power @ points.count, (z.z**power).sum(axis=1), rtol=1e-12, atol=1e-12 * n)


def test_few_points_tell_the_likelihood():
    """To 0.05, where maxima that matter differ by tenths: at maxima of 60 windows."""
    x = prices(250, 60, seed=19)
    z, _, _ = standardised(np.diff(np.log(x), axis=1), None)
    point = starts(condensed(z), 1)[0]
    error = np.abs(condensed(z).loglik(point) - z.loglik(point))
    assert np.quantile(error, 0.9) < 0.05


def test_em_never_goes_down():
    """A property of the algorithm (Dempster, Laird & Rubin 1977), inside the bounds; it runs in single precision."""
    from driftbook.estimators.jump_starts import _constellations, _em_step

    z, _, _ = standardised(increments(200, 20, seed=3), None)
    points = condensed(z)
    count = points.count.astype(np.float32)
    values, point = [], _constellations(points)[0].astype(np.float32)
    for _ in range(8):
        point, value = _em_step(points.z.astype(np.float32), count, point)
        values.append(value)
    assert (np.diff(values, axis=0) > -1e-4 * np.abs(values[0])).all()
    assert np.mean(values[-1] > values[0]) > 0.9


def test_a_window_alone_has_the_fit_of_its_place_in_a_series():
    """The same maximum, found from every start or from its past's: in all but a few windows."""
    x = prices(700, 4, seed=20)
    rolled = MERTON.rolling(x, DT, 250)
    alone = MERTON.fit(np.lib.stride_tricks.sliding_window_view(x, 251, axis=1)[:, ::9], DT)
    apart = np.abs(rolled.loglik[:, ::9] - alone.loglik) > 1e-6
    assert apart.mean() <= 0.02
    same = ~apart & (rolled.status[:, ::9] == Status.OK)
    volatility = rolled.total_volatility[:, ::9]
    np.testing.assert_allclose(alone.total_volatility[same], volatility[same], rtol=1e-5)


@pytest.mark.parametrize("unequal", [False, True])
def test_the_loglik_is_its_own_and_at_a_maximum(unequal):
    dt = np.tile(np.random.default_rng(4).choice([1, 1, 3], N) * DT, (12, 1)) if unequal else DT
    x = prices(N, 12, seed=5, dt=dt)
    fit = MERTON.fit(x, dt)
    usable = fit.status == Status.OK
    assert usable.sum() > 3
    at = [fit.columns[name][usable] for name in TRUTH]
    dt = dt[usable] if unequal else dt
    np.testing.assert_allclose(MERTON.loglik(x[usable], dt, *at), fit.loglik[usable], atol=1e-8)
    for k, name in enumerate(TRUTH):
        for sign in (-1, 1):
            moved = list(at)
            moved[k] = at[k] + sign * 1e-3 * fit.columns[f"{name}_se"][usable]
            assert (MERTON.loglik(x[usable], dt, *moved) <= fit.loglik[usable] + 1e-9).all(), name


def test_equal_steps_told_one_by_one_are_equal():
    x = prices(300, 2, seed=6)
    one, each = MERTON.rolling(x, DT, N), MERTON.rolling(x, np.full((2, 300), DT), N)
    for name in NAMES:
        np.testing.assert_array_equal(one.columns[name], each.columns[name])


def test_paths_for_equal_and_unequal_steps_agree():
    x = prices(N, 10, seed=7)
    nearly = np.tile(DT * (1 + 1e-8 * (np.arange(N) % 2)), (10, 1))
    equal, unequal = MERTON.fit(x, DT), MERTON.fit(x, nearly)
    np.testing.assert_array_equal(equal.status, unequal.status)
    np.testing.assert_allclose(unequal.loglik, equal.loglik, atol=1e-5)  # the steps themselves differ by 5e-9
    np.testing.assert_allclose(unequal.total_volatility, equal.total_volatility, rtol=1e-6)


def test_a_window_depends_on_its_past_in_its_block_alone():
    """The same bits with one thread or two, from a later first window, in other company, and with more data after."""
    x = prices(290, 3, seed=8)
    whole = MERTON.rolling(x, DT, N)
    alone = MERTON.rolling(x[1], DT, N)
    shorter = MERTON.rolling(x[:, :-57], DT, N)
    for name in NAMES:
        values = whole.columns[name]
        assert np.array_equal(alone.columns[name], values[1], equal_nan=True), name
        assert np.array_equal(shorter.columns[name], values[:, :-57], equal_nan=True), name
    for kwargs in ({"threads": 2}, {"first": 137}, {"first": STRIDE + 1}):
        part = MERTON.rolling(x, DT, N, **kwargs)
        for name in NAMES:
            kept = whole.columns[name][:, kwargs.get("first", 0) :]
            assert np.array_equal(part.columns[name], kept, equal_nan=True), (name, kwargs)


def test_without_intervals_the_rest_has_the_same_bits():
    x = prices(300, 2, seed=9)
    fit, without = MERTON.rolling(x, DT, N), MERTON.rolling(x, DT, N, intervals=False)
    assert np.array_equal(fit.status, without.status)
    for name in NAMES:
        if name in WITHOUT_INTERVALS:
            assert np.array_equal(fit.columns[name], without.columns[name], equal_nan=True), name
        else:
            assert np.isnan(without.columns[name]).all(), name


@pytest.mark.parametrize("scale", [1e-100, 1e-12, 1e12, 1e100])
def test_scale_of_prices_does_not_matter(scale):
    x = prices(N, 8, seed=10)
    fit, scaled = MERTON.fit(x, DT), MERTON.fit(x * scale, DT)
    np.testing.assert_array_equal(scaled.status, fit.status)
    np.testing.assert_allclose(scaled.total_volatility, fit.total_volatility, rtol=1e-6)
    np.testing.assert_allclose(scaled.loglik + N * np.log(scale), fit.loglik, atol=1e-6)


# What a row holds, case by case.

RNG = np.random.default_rng(11)
WALK = 50 * np.exp(0.01 * np.cumsum(RNG.standard_normal(N + 1)))
CASES = {
    "constant": (np.full(N + 1, 3.0), Status.FLAT),
    "exponential": (np.exp(0.01 * np.arange(N + 1)), Status.FLAT),
    "one jump": (np.where(np.arange(N + 1) < 40, 3.0, 4.0), Status.DISCRETE),
    "one in ten unchanged": (np.repeat(WALK, 2)[np.sort(np.r_[0:220:2, 1:22:2])], Status.DISCRETE),
    "a zero": (np.where(np.arange(N + 1) == 40, 0.0, WALK), Status.OUT_OF_RANGE),
    "below zero": (WALK - 60, Status.OUT_OF_RANGE),
    "not a number": (np.where(np.arange(N + 1) == 40, np.nan, WALK), Status.OUT_OF_RANGE),
    "infinite": (np.where(np.arange(N + 1) == 40, np.inf, WALK), Status.OUT_OF_RANGE),
}


@pytest.mark.parametrize("name", CASES)
def test_case_without_a_fit(name):
    x, status = CASES[name]
    healthy = prices(N, 2, seed=12)
    fit, alone = MERTON.fit(np.stack([healthy[0], x, healthy[1]]), DT), MERTON.fit(healthy, DT)
    assert Status(int(fit.status[1])) == status
    for column in NAMES:
        assert np.isnan(fit.columns[column][1]), column
        assert np.array_equal(fit.columns[column][[0, 2]], alone.columns[column], equal_nan=True), column


@pytest.mark.parametrize("unequal", [False, True])
def test_no_window_moves_those_beside_it(unequal):
    """By not one bit, whatever its values and steps; none of it is infinite."""
    healthy = prices(N, 8, seed=21, jump_rate=40.0)
    walk = np.exp(np.cumsum(0.3 * np.random.default_rng(6).standard_normal(N + 1)))
    spread = np.geomspace(1e-3, 1e6, N + 1) * walk
    jump = WALK * np.where(np.arange(N + 1) < 40, 1.0, 1e6)
    hard = [x for x, _ in CASES.values()] + [spread, jump, 1e-12 * healthy[0], 1e12 * healthy[1], 1e-300 * walk]
    x = np.stack([row for k, each in enumerate(hard) for row in (healthy[k % 8], each)])
    kept = np.arange(len(x)) % 2 == 0
    dt = np.where(kept, DT, np.geomspace(1e-9, 1e9, len(x)))
    dt = dt[:, None] * np.linspace(1, 2, N) if unequal else dt
    beside, alone = MERTON.fit(x, dt), MERTON.fit(x[kept], dt[kept])
    assert (alone.status == Status.OK).mean() > 0.5
    np.testing.assert_array_equal(beside.status[kept], alone.status)
    for name in NAMES:
        assert np.array_equal(beside.columns[name][kept], alone.columns[name], equal_nan=True), name
        assert not np.isinf(beside.columns[name]).any(), name


def test_too_short():
    assert (MERTON.fit(prices(3, 2, seed=22), DT).status == Status.TOO_SHORT).all()
    assert MERTON.fit(WALK[:15], DT).status == Status.TOO_SHORT


def test_case_jumps():
    fit = MERTON.fit(prices(1500, 1, seed=13)[0], DT)
    row = {name: float(values) for name, values in fit.columns.items()}
    assert fit.status == Status.OK
    assert not [name for name in NAMES if np.isnan(row[name])]
    for name, truth in TRUTH.items():
        assert row[f"{name}_lower"] < row[name] < row[f"{name}_upper"]
        assert abs(row[name] - truth) < 5 * row[f"{name}_se"]
    jump = row["jump_rate"] * (row["jump_mean"] ** 2 + row["jump_sd"] ** 2)
    assert row["total_volatility"] == pytest.approx(np.sqrt(row["sigma"] ** 2 + jump), rel=1e-12)


def test_jump_probability_knows_a_jump():
    x = prices(N, 1, seed=14)[0]
    calm, jumped = x.copy(), x.copy()
    calm[-1], jumped[-1] = x[-2] * 1.001, x[-2] * 0.7
    assert MERTON.fit(jumped, DT).jump_probability > 0.999
    assert MERTON.fit(calm, DT).jump_probability < 0.2


def test_case_at_bound():
    """Gaussian increments: jumps are not in the data, and the volatility that counts is gbm's."""
    rng = np.random.default_rng(15)
    x = np.exp(0.01 * np.cumsum(rng.standard_normal((60, 251)), axis=1))
    fit, gbm = MERTON.fit(x, DT), MODELS["gbm"].fit(x, DT)
    bound = fit.status == Status.AT_BOUND
    assert bound.mean() > 0.3
    assert np.isfinite(fit.loglik).all()
    np.testing.assert_allclose(fit.total_volatility, gbm.sigma, rtol=0.03)
    none = fit.jump_rate * 250 * DT < 0.1001  # a tenth of a jump in the window
    assert np.isnan(fit.jump_rate_se[none]).all()


def test_bounds_hold():
    fit = MERTON.rolling(prices(600, 3, seed=16, jump_rate=200.0, jump_mean=0.0, jump_sd=0.015), DT, N)
    d = np.diff(np.log(prices(600, 3, seed=16, jump_rate=200.0, jump_mean=0.0, jump_sd=0.015)), axis=1)
    windows = np.sort(np.lib.stride_tricks.sliding_window_view(d, N, axis=1), axis=-1)
    robust = (windows[..., N - 1 - N // 4] - windows[..., N // 4]) / 1.349 / np.sqrt(DT)
    assert (fit.sigma >= 0.25 * robust * (1 - 1e-9)).all()
    assert (fit.jump_rate * DT <= 1 + 1e-9).all()
    assert (fit.jump_rate * DT >= 0.1 / N * (1 - 1e-9)).all()
    assert limits(N).lower[1] == 2 * np.log(0.25)


def test_loglik_of_a_diffusion_without_jumps_is_gbms():
    x = prices(50, 4, seed=17)
    gbm = MODELS["gbm"].loglik(x, DT, 0.1, 0.3)
    np.testing.assert_allclose(MERTON.loglik(x, DT, 0.1, 0.3, 0.0, -0.1, 0.2), gbm, rtol=1e-13)
    assert np.isnan(MERTON.loglik(x, DT, 0.1, 0.0, 1.0, 0.0, 0.1)).all()
    assert np.isnan(MERTON.loglik(x, DT, 0.1, 0.2, -1.0, 0.0, 0.1)).all()
