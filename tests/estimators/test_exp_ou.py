"""The exponential Ornstein–Uhlenbeck fit is that of the logarithm, with the likelihood of the value itself."""

import numpy as np
import pytest
from scipy.signal import lfilter

from driftbook.estimators import Status, rolling

N_OBS, LOOKBACK = 900, 120
STEPS = {
    "equal": np.full(N_OBS - 1, 1 / 252),
    "calendar": np.random.default_rng(1).choice([1, 1, 1, 3], N_OBS - 1) / 365,
    "irregular": np.random.default_rng(2).exponential(1 / 252, N_OBS - 1) + 1e-7,
}
ROUNDING = 1e-9


def logs(b=0.97):
    return 3 + 0.02 * lfilter([1.0], [1.0, -b], np.random.default_rng(3).standard_normal(N_OBS))


@pytest.mark.parametrize("steps", STEPS)
def test_columns_are_those_of_the_logarithm(steps):
    x, dt = np.exp(logs()), STEPS[steps]
    fit, on_logs = rolling("exp_ou", x, dt, LOOKBACK), rolling("ou", np.log(x), dt, LOOKBACK)
    assert np.array_equal(fit.status, on_logs.status)
    for column, values in on_logs.columns.items():
        if column != "loglik":
            np.testing.assert_array_equal(fit.columns[column], values, err_msg=column)
    jacobian = np.lib.stride_tricks.sliding_window_view(np.log(x[1:]), LOOKBACK).sum(axis=1)
    np.testing.assert_allclose(fit.loglik, on_logs.loglik - jacobian, rtol=0, atol=1e-8)
    np.testing.assert_array_equal(fit.long_run_median[fit.kappa > 0], np.exp(fit.theta[fit.kappa > 0]))
    assert np.isnan(fit.long_run_median[~(fit.kappa > 0)]).all()


@pytest.mark.parametrize("steps", STEPS)
def test_a_unit_of_the_price_moves_theta_by_its_logarithm(steps):
    x, dt = np.exp(logs()), STEPS[steps]
    fit, in_cents = rolling("exp_ou", x, dt, LOOKBACK), rolling("exp_ou", 100 * x, dt, LOOKBACK)
    usable = (fit.status <= Status.NO_REVERSION) & (abs(fit.kappa) > 0.1 * fit.kappa_se)
    assert usable.mean() > 0.9
    for column in ("kappa", "sigma", "kappa_se", "sigma_se", "stationary_sd", "kurtosis"):
        np.testing.assert_allclose(in_cents.columns[column][usable], fit.columns[column][usable], rtol=1e-7)
    away = np.abs(in_cents.theta - fit.theta - np.log(100))[usable]
    assert (away <= ROUNDING * (10 + fit.theta_se[usable] * 100)).all()
    np.testing.assert_allclose(in_cents.loglik, fit.loglik - LOOKBACK * np.log(100), rtol=0, atol=1e-7)


def test_a_median_too_large_to_be_a_number_is_left_out():
    """Nearly no pull, and a level far away that nothing has seen."""
    fit = rolling("exp_ou", np.exp(logs(1.0)), 1 / 252, 60)
    far = (fit.kappa > 0) & (fit.theta > 700)
    assert np.isnan(fit.long_run_median[far]).all()
    assert not np.isinf(fit.long_run_median).any()


def test_one_value_that_is_not_positive_spoils_its_windows():
    x = np.exp(logs())
    x[400] = 0.0
    for dt in STEPS.values():
        status = rolling("exp_ou", x, dt, LOOKBACK).status
        holds = np.zeros(N_OBS - LOOKBACK, dtype=bool)
        holds[400 - LOOKBACK : 401] = True
        assert np.array_equal(status == Status.OUT_OF_RANGE, holds)
