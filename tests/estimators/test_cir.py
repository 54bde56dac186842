"""The square-root fit: the same numbers by sums and transition by transition, and what each case holds."""

import duckdb
import numpy as np
import pytest

from driftbook.estimators import Status
from driftbook.estimators.models.cir import MODEL as CIR

DT = 1 / 252
N = 100

LOGLIK = 1e-8
RATIO = 1e-6  # of what second derivatives are taken for: they are those of the last point but one

NAMES = tuple(column.name for column in CIR.columns)
WITHOUT_INTERVALS = ("kappa", "theta", "sigma", "loglik")


def paths(kappa, theta, sigma, n, m, seed, dt=DT):
    """Paths of the exact transition law with a stationary start, shape (m, n + 1)."""
    rng = np.random.default_rng(seed)
    x = np.empty((m, n + 1))
    x[:, 0] = rng.gamma(2 * kappa * theta / sigma**2, sigma**2 / (2 * kappa), m)
    dt = np.broadcast_to(dt, n)
    for i, step in enumerate(dt):
        c = 2 * kappa / (sigma**2 * -np.expm1(-kappa * step))
        x[:, i + 1] = rng.noncentral_chisquare(4 * kappa * theta / sigma**2, 2 * c * np.exp(-kappa * step) * x[:, i])
        x[:, i + 1] /= 2 * c
    return np.maximum(x, 1e-300)


SETS = {
    "far from zero": (4.0, 0.05, 0.15),
    "near zero": (1.0, 0.03, 0.25),
    "at zero": (0.5, 0.02, 0.3),
    "a strong pull": (40.0, 3.0, 0.8),
}


def series(name, n=420, m=2):
    return paths(*SETS[name], n, m, seed=[1, len(name)])


@pytest.mark.parametrize("name", SETS)
def test_sums_and_single_transitions_agree(name):
    """Steps that differ by 1e-8 are unequal: no sums are used."""
    x = series(name)
    by_sums = CIR.rolling(x, DT, N)
    uneven = np.broadcast_to(DT * (1 + 1e-8 * (np.arange(199) % 2)), (2, 199))
    single = CIR.rolling(x[:, 200:400], uneven, N)
    kept = slice(200, 200 + single.status.shape[1])
    # The steps themselves differ by 5e-9 on average, which moves rates by as much.
    part = {column: values[:, kept] for column, values in by_sums.columns.items()}
    np.testing.assert_array_equal(by_sums.status[:, kept], single.status)
    for column in ("kappa", "sigma", "loglik"):
        np.testing.assert_allclose(single.columns[column], part[column], rtol=1e-6, atol=1e-5, err_msg=column)
    for column in ("kappa_se", "sigma_se", "kurtosis", "kappa_upper", "sigma_lower", "feller_ratio_upper"):
        np.testing.assert_allclose(single.columns[column], part[column], rtol=1e-4, err_msg=column)


@pytest.mark.parametrize("name", SETS)
def test_the_gradient_is_zero_and_the_loglik_its_own(name):
    x = series(name)
    fit = CIR.rolling(x, DT, N)
    inside = fit.status == Status.OK
    windows = np.lib.stride_tricks.sliding_window_view(x, N + 1, axis=-1)[inside]
    at = [fit.columns[each][inside] for each in ("kappa", "theta", "sigma")]
    np.testing.assert_allclose(CIR.loglik(windows, DT, *at), fit.loglik[inside], atol=LOGLIK)
    for k, each in enumerate(("kappa", "theta", "sigma")):
        for sign in (-1, 1):
            moved = [values.copy() for values in at]
            moved[k] = moved[k] + sign * 1e-3 * fit.columns[f"{each}_se"][inside]
            assert (CIR.loglik(windows, DT, *moved) <= fit.loglik[inside] + LOGLIK).all()


@pytest.mark.parametrize("name", SETS)
def test_standard_errors_are_those_of_the_information(name):
    """Against second differences of the log-likelihood in kappa, alpha = kappa theta and ln sigma."""
    x = series(name)[:, : N + 40]
    fit = CIR.rolling(x, DT, N)
    inside = np.argwhere(fit.status == Status.OK)[::9]
    for row, k in inside:
        window = x[row, k : k + N + 1]
        kappa, theta, sigma = (float(fit.columns[each][row, k]) for each in ("kappa", "theta", "sigma"))
        h = 0.02 * np.array([fit.kappa_se[row, k], kappa * theta, 0.1])

        def at(i, j, a, b, h=h, kappa=kappa, theta=theta, sigma=sigma, window=window):
            move = np.zeros(3)
            move[i] += a * h[i]
            move[j] += b * h[j]
            alpha = kappa * theta + move[1]
            return float(CIR.loglik(window, DT, kappa + move[0], alpha / (kappa + move[0]), sigma * np.exp(move[2])))

        H = np.empty((3, 3))
        for i in range(3):
            for j in range(3):
                H[i, j] = (at(i, j, 1, 1) - at(i, j, 1, -1) - at(i, j, -1, 1) + at(i, j, -1, -1)) / (4 * h[i] * h[j])
        C = np.linalg.inv(-H)
        slope = np.array([-theta / kappa, 1 / kappa, 0])
        expected = np.sqrt([C[0, 0], slope @ C @ slope, C[2, 2] * sigma**2])
        found = [float(fit.columns[f"{each}_se"][row, k]) for each in ("kappa", "theta", "sigma")]
        np.testing.assert_allclose(found, expected, rtol=0.02)  # differences over 0.04 standard errors


@pytest.mark.parametrize("scale", [1e-100, 1e-12, 1e12, 1e100])
@pytest.mark.parametrize("name", ["far from zero", "at zero"])
def test_scale_of_the_data_does_not_matter(name, scale):
    x = series(name, n=140)
    fit, scaled = CIR.rolling(x, DT, N), CIR.rolling(x * scale, DT, N)
    assert np.array_equal(scaled.status, fit.status)
    for column in ("kappa", "kappa_lower", "kappa_upper", "kurtosis", "feller_ratio", "feller_ratio_upper"):
        np.testing.assert_allclose(scaled.columns[column], fit.columns[column], rtol=RATIO, atol=1e-7, err_msg=column)
    np.testing.assert_allclose(scaled.theta / scale, fit.theta, rtol=RATIO)
    np.testing.assert_allclose(scaled.sigma / np.sqrt(scale), fit.sigma, rtol=RATIO)
    np.testing.assert_allclose(scaled.loglik + N * np.log(scale), fit.loglik, atol=1e-6)


def test_time_may_be_in_any_unit():
    x = series("near zero", n=250)
    years, seconds = CIR.rolling(x, DT, N), CIR.rolling(x, DT * 31_536_000, N)
    np.testing.assert_array_equal(years.status, seconds.status)
    np.testing.assert_allclose(seconds.kappa * 31_536_000, years.kappa, rtol=RATIO, atol=1e-7)
    np.testing.assert_allclose(seconds.loglik, years.loglik, atol=1e-7)


def test_a_window_does_not_depend_on_the_others():
    x = np.concatenate([series("near zero"), series("far from zero"), series("at zero")])
    whole = CIR.rolling(x, DT, N)
    for kwargs in ({"threads": 2}, {"first": 137}):
        part = CIR.rolling(x, DT, N, **kwargs)
        for name in NAMES:
            kept = whole.columns[name][:, kwargs.get("first", 0) :]
            assert np.array_equal(part.columns[name], kept, equal_nan=True), (name, kwargs)
    for row in (0, 5):
        alone = CIR.rolling(x[row], DT, N)
        for name in NAMES:
            assert np.array_equal(alone.columns[name], whole.columns[name][row], equal_nan=True), name
    one = CIR.fit(np.stack([x[0, : N + 1], x[3, : N + 1]]), np.tile(np.linspace(1, 2, N) * DT, (2, 1)))
    alone = CIR.fit(x[0, : N + 1], np.linspace(1, 2, N) * DT)
    for name in NAMES:
        assert np.array_equal(alone.columns[name], one.columns[name][0], equal_nan=True), name


def test_bad_windows_leave_the_others_alone():
    x = series("far from zero", m=3)
    spoiled = x.copy()
    spoiled[1, 150], spoiled[2, 300] = np.nan, 0.0
    fit, whole = CIR.rolling(spoiled, DT, N), CIR.rolling(x, DT, N)
    for row, at in ((1, 150), (2, 300)):
        hit = np.arange(whole.status.shape[1])
        hit = (hit <= at) & (hit >= at - N)
        assert (fit.status[row, hit] == Status.OUT_OF_RANGE).all()
        assert np.isnan(fit.loglik[row, hit]).all()
        for name in NAMES:
            kept = fit.columns[name][row, ~hit], whole.columns[name][row, ~hit]
            assert np.array_equal(*kept, equal_nan=True), name


def test_without_intervals_the_rest_has_the_same_bits():
    x = np.concatenate([series("near zero"), series("far from zero")])
    fit, without = CIR.rolling(x, DT, N), CIR.rolling(x, DT, N, intervals=False)
    assert np.array_equal(fit.status, without.status)
    for name in NAMES:
        if name in WITHOUT_INTERVALS:
            assert np.array_equal(fit.columns[name], without.columns[name], equal_nan=True), name
        else:
            assert np.isnan(without.columns[name]).all(), name


# What a row holds, case by case.

RNG = np.random.default_rng(5)
WALK = 3 + 0.02 * np.cumsum(RNG.standard_normal(N + 1))
CASES = {
    "constant": (np.full(N + 1, 3.0), Status.FLAT),
    "a line": (1 + 0.01 * np.arange(N + 1), Status.FLAT),
    "two values in turn": (1 + 0.1 * (-1.0) ** np.arange(N + 1), Status.FLAT),
    "swings": (1 + 0.1 * (-1.0) ** np.arange(N + 1) + 0.01 * RNG.standard_normal(N + 1), Status.ALTERNATING),
    "one jump": (np.where(np.arange(N + 1) < 40, 3.0, 4.0), Status.DISCRETE),
    "a zero": (np.where(np.arange(N + 1) == 40, 0.0, WALK), Status.OUT_OF_RANGE),
    "below zero": (WALK - 3, Status.OUT_OF_RANGE),
    "not a number": (np.where(np.arange(N + 1) == 40, np.nan, WALK), Status.OUT_OF_RANGE),
    "infinite": (np.where(np.arange(N + 1) == 40, np.inf, WALK), Status.OUT_OF_RANGE),
    "hardly a movement": (1e9 + WALK, Status.NOT_CONVERGED),
    "from 1e-20 to 1e20, without memory": (np.exp(20 * RNG.standard_normal(N + 1)), Status.ALTERNATING),
}


@pytest.mark.parametrize("unequal", [False, True])
@pytest.mark.parametrize("name", CASES)
def test_case_without_a_fit(name, unequal):
    x, status = CASES[name]
    dt = DT * np.linspace(1, 1.5, N) if unequal else DT
    if unequal and name == "a line":
        x = 1 + np.concatenate([[0], np.cumsum(dt)])
        status = Status.FLAT if not unequal else None  # a line in time is a curve in steps
    fit = CIR.fit(x, dt)
    if status is not None:
        assert Status(int(fit.status)) == status
        for column in NAMES:
            assert np.isnan(fit.columns[column]), column
    assert not np.isfinite(fit.loglik) or np.isfinite(fit.kappa)


def healthy_and_hard():
    """Windows with a fit, and between them every case without one, and values of every size."""
    healthy = np.concatenate([series(name, n=N, m=2) for name in SETS])
    walk = np.exp(np.cumsum(0.3 * np.random.default_rng(6).standard_normal(N + 1)))
    spread = np.geomspace(1e-3, 1e6, N + 1) * walk
    hard = [x for x, _ in CASES.values()] + [spread, 1e-12 * healthy[0], 1e12 * healthy[2], 1e-300 * walk]
    rows = [row for k, each in enumerate(hard) for row in (healthy[k % len(healthy)], each)]
    return np.stack(rows), np.arange(len(rows)) % 2 == 0


@pytest.mark.parametrize("unequal", [False, True])
def test_no_case_moves_the_windows_beside_it(unequal):
    """By not one bit; with steps of every length too."""
    x, kept = healthy_and_hard()
    dt = np.where(kept, DT, np.geomspace(1e-9, 1e9, len(x)))
    dt = dt[:, None] * np.linspace(1, 2, N) if unequal else dt
    beside, alone = CIR.fit(x, dt), CIR.fit(x[kept], dt[kept])
    assert (alone.status == Status.OK).mean() > 0.5
    assert np.isin(beside.status, list(Status)).all()
    np.testing.assert_array_equal(beside.status[kept], alone.status)
    for name in NAMES:
        assert np.array_equal(beside.columns[name][kept], alone.columns[name], equal_nan=True), name
        assert not np.isinf(beside.columns[name]).any(), name


def test_too_short():
    assert CIR.fit(np.array([1.0, 2.0, 1.5, 1.2]), DT).status == Status.TOO_SHORT
    assert (CIR.fit(series("near zero", n=3), DT).status == Status.TOO_SHORT).all()


def test_case_clear_pull():
    x = paths(30.0, 3.0, 0.8, 1000, 1, seed=3)[0]
    fit = CIR.fit(x, DT)
    row = {name: float(values) for name, values in fit.columns.items()}
    assert fit.status == Status.OK
    assert not [name for name in NAMES if np.isnan(row[name])]
    assert row["kappa_lower"] < 30 < row["kappa_upper"]
    assert row["theta_lower"] < row["theta"] < row["theta_upper"]
    assert row["sigma_lower"] < row["sigma"] < row["sigma_upper"]
    assert row["feller_ratio_lower"] < row["feller_ratio"] < row["feller_ratio_upper"]
    assert row["feller_ratio"] == 2 * row["kappa"] * row["theta"] / row["sigma"] ** 2
    assert row["can_reach_zero"] == 0.0
    assert row["half_life"] == np.log(2) / row["kappa_median_unbiased"]
    assert row["half_life_unbounded"] == 0.0


def test_case_reaches_zero():
    fit = CIR.fit(paths(20.0, 0.02, 1.4, 1000, 4, seed=1), DT)  # the ratio is 0.41
    assert (fit.can_reach_zero == 1.0).any()
    assert not (fit.can_reach_zero == 0.0).any()


def test_case_no_reversion_and_at_bound():
    x = np.concatenate([series("at zero", m=3), series("far from zero", m=6)])
    rolled = CIR.rolling(x, DT, 40)
    none = rolled.status == Status.NO_REVERSION
    assert none.any()
    assert (rolled.kappa[none] <= 0).all()
    for name in ("half_life", "half_life_mle", "stationary_sd"):
        assert np.isnan(rolled.columns[name][none]).all()
    bound = rolled.status == Status.AT_BOUND
    assert bound.any()
    assert (rolled.theta[bound] == 0).all()
    assert (rolled.feller_ratio[bound] == 0).all()
    for name in ("theta_se", "theta_lower", "feller_ratio_upper", "can_reach_zero"):
        assert np.isnan(rolled.columns[name][bound]).all(), name
    assert np.isfinite(rolled.kappa_se[bound]).all()
    assert np.isfinite(rolled.loglik[bound]).all()


def test_sql_formulas_are_the_columns():
    """Every derived column, computed by DuckDB from the stored ones."""
    fit = CIR.rolling(np.concatenate([series("at zero"), series("near zero"), series("far from zero")]), DT, N)
    stored = {c.name: fit.columns[c.name].reshape(-1) for c in CIR.stored}
    connection = duckdb.connect()
    names = ", ".join(f'CASE WHEN isnan("{name}") THEN NULL ELSE "{name}" END AS "{name}"' for name in stored)
    relation = connection.from_arrow(_table(stored))
    connection.register("raw", relation.to_arrow_table())
    connection.execute(f"CREATE TABLE fit AS SELECT {names} FROM raw")
    for column in CIR.derived:
        found = connection.execute(f"SELECT CAST({column.sql} AS DOUBLE) AS v FROM fit").fetchnumpy()["v"]
        found = np.ma.filled(found.astype(float), np.nan)
        np.testing.assert_allclose(found, fit.columns[column.name].reshape(-1), rtol=1e-14, err_msg=column.name)
    connection.close()


def _table(columns):
    import pyarrow

    return pyarrow.table(columns)


def test_loglik_takes_parameters_at_the_edge():
    x = np.array([1.0, 1.1, 0.9])
    assert np.isfinite(CIR.loglik(x, DT, 1.0, 0.0, 0.2))  # alpha = 0, the limit from above
    assert np.isfinite(CIR.loglik(x, DT, 0.0, 1.0, 0.2))
    assert np.isfinite(CIR.loglik(x, DT, -1.0, -1.0, 0.2))  # alpha > 0 with kappa < 0
    assert np.isnan(CIR.loglik(x, DT, 1.0, -1.0, 0.2))
    assert np.isnan(CIR.loglik(x, DT, 1.0, 1.0, 0.0))
    assert np.isnan(CIR.loglik(np.array([1.0, -1.0]), DT, 1.0, 1.0, 0.2))
    assert CIR.loglik(x, DT, np.ones(3), 1.0, 0.2).shape == (3,)
