"""What every model declares and keeps: columns, local values, statuses, the likelihood at given parameters."""

import duckdb
import numpy as np
import pytest
from scipy.stats import norm

from driftbook.estimators import MODELS, Status

DT = 1 / 252
N = 60
# Settings and parameters. Those that are an AR(1) when sampled, whose facts are told here; of the others test_cir.py
# and its like tell more, and what `latest` makes of them stands with the store's tests.
PARAMETERS = {
    "abm": (3.0, 5.0),
    "gbm": (0.1, 0.3),
    "ou": (4.0, 48.0, 6.0),
    "exp_ou": (4.0, 3.8, 0.3),
    "cir": (4.0, 48.0, 1.5),
    "ckls": (4.0, 48.0, 0.5, 0.8),
    "quartic": (50.0, 5.0, 3.0, -20.0, 1.0, -4.0, 15.0),
    "merton": (0.1, 0.3, 5.0, -0.02, 0.05),
    "inertial": (60.0, 20.0, 48.0, 900.0),
    "ou_noise": (4.0, 48.0, 6.0, 0.5),
}
SAMPLED_AR = ("abm", "gbm", "ou", "exp_ou")
VOLATILITY = {"ckls": 2, "merton": 1, "ou_noise": 2}  # its place, where it is not the last
STEPS = {"equal": np.full(N, DT), "unequal": np.random.default_rng(1).choice([1, 1, 3, 4], N) / 365}
ROUNDING = 1e-12  # two ways to write the same formula


def prices(*rows, seed=0):
    return 50 * np.exp(0.02 * np.random.default_rng(seed).standard_normal((*rows, N + 1)).cumsum(axis=-1))


# Whether it is for values above zero, leads back to a level, speaks in fractions of the value, and reaches zero.
FACTS = {
    "abm": (False, False, False, True),
    "gbm": (True, False, True, False),
    "ou": (False, True, False, True),
    "exp_ou": (True, True, True, False),
    "cir": (True, True, False, None),
    "ckls": (True, True, False, None),
    "quartic": (False, True, False, True),
    "merton": (True, False, True, False),
    "inertial": (False, True, False, True),
    "ou_noise": (False, True, False, True),
}


def facts(model):
    return model.range == "positive", model.has_pull, model.is_relative, model.reaches_zero


def test_registry():
    assert {name: facts(model) for name, model in MODELS.items()} == FACTS
    for name, model in MODELS.items():
        assert model.name == name
        assert model.revision == 1
        assert model.steps == "any"
        assert ("can_reach_zero" in {column.name for column in model.columns}) == (model.reaches_zero is None)
    of_logs = {name: facts(model.of_logs) for name, model in MODELS.items() if model.of_logs}
    assert of_logs == dict.fromkeys(["inertial", "ou_noise"], (True, True, True, False))


@pytest.mark.parametrize("model", MODELS.values(), ids=MODELS)
def test_columns(model):
    names = [column.name for column in model.columns]
    assert len(names) == len(set(names))
    expected = [f"{p.name}{end}" for p in model.parameters for end in ("", "_se", "_lower", "_upper")]
    expected = [setting.name for setting in model.settings] + expected
    assert names[: len(expected)] == expected
    assert [name for name in names[-3:] if name != "fitted_on"][-2:] == ["kurtosis", "loglik"]
    units = ("", "t", "x", "1/t", "x/t", "x/√t", "1/√t", "√x/√t", "x^(1-gamma)/√t", "x/t√t")
    for column in model.columns:
        assert column.unit in units
        assert column.meaning.endswith(".")


def test_columns_beside_the_parameters():
    own = {name: [c.name for c in model.columns][4 * len(model.parameters) :] for name, model in MODELS.items()}
    assert own["abm"] == own["gbm"] == ["kurtosis", "loglik"]
    assert set(own["exp_ou"]) - set(own["ou"]) == {"long_run_median"}
    assert [c.name for c in MODELS["exp_ou"].derived if c.name == "long_run_median"]


@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("model", MODELS.values(), ids=MODELS)
def test_what_is_derived_is_what_its_sql_says(model, steps):
    fit = model.fit(prices(300), np.tile(STEPS[steps], (300, 1)))
    stored = [column.name for column in model.stored]
    with duckdb.connect() as connection:
        connection.execute(f"CREATE TABLE fit (k INTEGER, {', '.join(name + ' DOUBLE' for name in stored)})")
        rows = np.column_stack([np.arange(300), *(fit.columns[name] for name in stored)])
        values = [[None if np.isnan(value) else value for value in row] for row in rows.tolist()]
        connection.executemany(f"INSERT INTO fit VALUES ({', '.join('?' * (1 + len(stored)))})", values)
        for column in model.derived:
            found = connection.execute(f"SELECT ({column.sql})::DOUBLE AS v FROM fit ORDER BY k").fetchnumpy()["v"]
            filled = np.ma.filled(found, np.nan)
            np.testing.assert_allclose(filled, fit.columns[column.name], rtol=ROUNDING, err_msg=column.name)


@pytest.mark.parametrize("model", [MODELS[name] for name in SAMPLED_AR], ids=SAMPLED_AR)
def test_local_values_are_sql_over_stored_columns_and_the_last_value(model):
    x = prices(20)
    fit = model.fit(x, DT)
    with duckdb.connect() as connection:
        for place in range(20):
            stored = {column.name: float(fit.columns[column.name][place]) for column in model.stored}
            given = {name: "NULL" if np.isnan(value) else f"{value!r}::DOUBLE" for name, value in stored.items()}
            columns = ", ".join(
                f"{value} AS {name}" for name, value in (given | {"x": repr(float(x[place, -1]))}).items()
            )
            asked = ", ".join((*model.local_volatility, model.local_drift))
            volatility, lower, upper, drift = connection.execute(f"SELECT {asked} FROM (SELECT {columns})").fetchone()
            assert lower < volatility < upper
            assert drift == pytest.approx(local_drift(model, stored, x[place, -1]), rel=ROUNDING)


def local_drift(model, row, x):
    """The derivative of the mean by the time ahead, at zero, from the transition law."""
    if model.name in ("abm", "gbm"):
        return row["mu"]
    if model.name == "ou":
        return row["kappa"] * (row["theta"] - x)
    return row["kappa"] * (row["theta"] - np.log(x)) + row["sigma"] ** 2 / 2


# Statuses.


def status_of(model, x, dt=DT):
    fit = model.fit(x, dt)
    return Status(int(fit.status)), {name for name, values in fit.columns.items() if np.isnan(values)}


@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("model", MODELS.values(), ids=MODELS)
def test_statuses(model, steps):
    dt = STEPS[steps]
    every = {column.name for column in model.columns}
    missing = prices()
    missing[7] = np.nan
    assert status_of(model, np.full(N + 1, 7.0), dt) == (Status.FLAT, every)
    assert status_of(model, missing, dt) == (Status.OUT_OF_RANGE, every)
    assert status_of(model, np.where(np.arange(N + 1) == 3, np.inf, prices()), dt) == (Status.OUT_OF_RANGE, every)
    assert status_of(model, prices()[:4], dt[:3]) == (Status.TOO_SHORT, every)
    assert status_of(model, prices()[:1], dt[:0]) == (Status.TOO_SHORT, every)


@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("model", [MODELS[name] for name in SAMPLED_AR], ids=SAMPLED_AR)
def test_statuses_of_a_line_a_swing_and_a_flight(model, steps):
    dt = STEPS[steps]
    every = {column.name for column in model.columns}
    line = np.concatenate([[0.0], dt.cumsum()])
    straight = 50 * np.exp(line) if model.range == "positive" else 3 + line
    assert status_of(model, straight, dt) == (Status.FLAT, every)
    if len(model.parameters) == 2:
        assert status_of(model, prices(), dt) == (Status.OK, set())
    else:
        swinging = 50 + (-1.0) ** np.arange(N + 1) + 0.01 * np.random.default_rng(0).standard_normal(N + 1)
        assert status_of(model, swinging, dt) == (Status.ALTERNATING, every)
        away = np.exp(np.exp(3 * line) / 10) + 1e-4 * np.random.default_rng(0).standard_normal(N + 1)
        became, empty = status_of(model, away, dt)
        assert became == Status.NO_REVERSION
        assert empty >= {"half_life", "stationary_sd"} | ({"long_run_median"} & every)
        assert not empty & {"kappa", "theta", "sigma", "loglik", "kappa_lower", "kappa_upper"}


@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("bad", [0.0, -1.0, -np.inf])
def test_positive_models_say_where_values_are_not(bad, steps):
    x = prices(3)
    x[1, 20] = bad
    for model in MODELS.values():
        fit = model.fit(x, np.tile(STEPS[steps], (3, 1)))
        outside = model.range == "positive" or np.isinf(bad)
        assert (fit.status[1] == Status.OUT_OF_RANGE) == outside
        assert np.isfinite(fit.loglik[[0, 2]]).all()


# The likelihood at given parameters.


def plain_loglik(name, x, dt, parameters):
    """One step after the other, by scipy's normal density."""
    if name in ("gbm", "exp_ou"):
        mu, sigma = parameters[0], parameters[-1]
        inner = ("abm", (mu - sigma**2 / 2, sigma)) if name == "gbm" else ("ou", parameters)
        return plain_loglik(inner[0], np.log(x), dt, inner[1]) - np.log(x[1:]).sum()
    if name == "abm":
        mu, sigma = parameters
        return norm.logpdf(x[1:], x[:-1] + mu * dt, sigma * np.sqrt(dt)).sum()
    kappa, theta, sigma = parameters
    decay = np.exp(-kappa * dt)
    sd = sigma * np.sqrt((1 - decay**2) / (2 * kappa))
    return norm.logpdf(x[1:], theta + (x[:-1] - theta) * decay, sd).sum()


@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("name", SAMPLED_AR)
def test_loglik(name, steps):
    x, dt = prices(), STEPS[steps]
    found = MODELS[name].loglik(x, dt, *PARAMETERS[name])
    assert found.shape == ()
    assert found == pytest.approx(plain_loglik(name, x, dt, PARAMETERS[name]), rel=1e-11)


@pytest.mark.parametrize("steps", STEPS)
@pytest.mark.parametrize("name", SAMPLED_AR)
def test_loglik_of_a_fit_is_its_own_and_no_other_is_larger(name, steps):
    model, x, dt = MODELS[name], prices(40), np.tile(STEPS[steps], (40, 1))
    fit = model.fit(x, dt)
    best = [fit.columns[parameter.name] for parameter in model.parameters]
    np.testing.assert_allclose(model.loglik(x, dt, *best), fit.loglik, rtol=1e-9)
    for place in range(len(best)):
        for factor in (0.999, 1.001):
            near = [values * (factor if place == at else 1) for at, values in enumerate(best)]
            assert (model.loglik(x, dt, *near) < fit.loglik).all()


@pytest.mark.parametrize("name", MODELS)
def test_parameters_broadcast_with_windows(name):
    model, x, given = MODELS[name], prices(3), PARAMETERS[name]
    each = [float(model.loglik(row, DT, *given)) for row in x]
    assert model.loglik(x, DT, *given).tolist() == pytest.approx(each, rel=ROUNDING)
    assert model.loglik(x[0], DT, given[0], *(np.full(4, value) for value in given[1:])).shape == (4,)
    grid = model.loglik(x, DT, *(np.full((2, 1), value) for value in given))
    np.testing.assert_allclose(grid, np.broadcast_to(each, (2, 3)), rtol=ROUNDING)
    a_step_each = model.loglik(x, np.full((3, N), DT), *given)
    np.testing.assert_allclose(a_step_each, each, rtol=ROUNDING)


@pytest.mark.parametrize("name", MODELS)
def test_loglik_is_nan_where_there_is_no_density(name):
    model, x, given = MODELS[name], prices(), PARAMETERS[name]
    at = VOLATILITY.get(name, -1) % len(given)
    for sigma in (0.0, -1.0, np.nan, np.inf):
        if (name, sigma) != ("ou_noise", 0.0):  # of which the noise is left
            assert np.isnan(model.loglik(x, DT, *given[:at], sigma, *given[at + 1 :]))
    for bad in (np.nan, np.inf):
        broken = x.copy()
        broken[5] = bad
        assert np.isnan(model.loglik(broken, DT, *given))
    x[5] = -1.0
    assert np.isnan(model.loglik(x, DT, *given)) == (model.range == "positive")
    assert np.isnan(model.loglik(x[:1], DT, *given))


@pytest.mark.parametrize("name", ["ou", "exp_ou"])
def test_loglik_without_pull_is_that_of_its_limit(name):
    model, x, (_, theta, sigma) = MODELS[name], prices(), PARAMETERS[name]
    at_zero = model.loglik(x, DT, 0.0, theta, sigma)
    assert at_zero == pytest.approx(float(model.loglik(x, DT, 1e-12, theta, sigma)), rel=1e-9)
    simpler = "abm" if name == "ou" else "gbm"
    mu = 0.0 if name == "ou" else sigma**2 / 2
    assert at_zero == pytest.approx(float(MODELS[simpler].loglik(x, DT, mu, sigma)), rel=ROUNDING)
    assert np.isfinite(model.loglik(x, DT, -2.0, theta, sigma))


def test_misuse_of_loglik_raises():
    ou, x = MODELS["ou"], prices()
    with pytest.raises(ValueError, match="ou has the parameters kappa, theta, sigma; got 2 numbers"):
        ou.loglik(x, DT, 1.0, 2.0)
    with pytest.raises(TypeError, match="theta must hold real numbers"):
        ou.loglik(x, DT, 1.0, "high", 2.0)
    with pytest.raises(ValueError, match="dt must be positive"):
        ou.loglik(x, 0.0, 1.0, 2.0, 3.0)
    with pytest.raises(ValueError, match="dt must have shape"):
        ou.loglik(x, np.ones(3), 1.0, 2.0, 3.0)
    with pytest.raises(ValueError, match="time axis"):
        ou.loglik(1.0, DT, 1.0, 2.0, 3.0)
    with pytest.raises(ValueError, match="broadcast"):
        ou.loglik(prices(3), DT, np.ones(2), 2.0, 3.0)
