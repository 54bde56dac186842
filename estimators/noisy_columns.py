"""The columns of a process with noise: parameters, standard errors and intervals, from what a search found."""

from __future__ import annotations

from statistics import NormalDist

import numpy as np

from driftbook.estimators.half_life import half_lives
from driftbook.estimators.hidden_pull import pull_ends
from driftbook.estimators.intervals import COARSEST
from driftbook.estimators.noisy_estimate import Estimate
from driftbook.estimators.pull import Pull
from driftbook.estimators.repair import Columns
from driftbook.estimators.windows import Array

TWO_SIDED = NormalDist().inv_cdf(0.975)
_NEED_A_PULL = ("half_life", "half_life_mle", "stationary_sd")


def point(estimate: Estimate) -> Columns:
    """Parameters and log-likelihood."""
    return {
        "kappa": np.where(estimate.pure, np.nan, estimate.kappa),
        "theta": estimate.theta,
        "sigma": np.where(estimate.pure, 0.0, estimate.sigma),
        "noise": estimate.noise,
        "loglik": estimate.loglik,
    }


def with_intervals(estimate: Estimate, without: Array) -> Columns:
    """The other columns; `without` is the log-likelihood of `ou`."""
    n, sigma, noise = estimate.n, estimate.sigma, estimate.noise
    own = np.maximum(1 / (2 * n), (estimate.kurtosis - 1) / (4 * n))  # of the logarithm of the innovations' scale
    sigma_se = np.sqrt(own + estimate.log_sigma_variance)
    noise_se = np.sqrt(np.where(estimate.pure, own, own + estimate.log_noise_variance))
    h = estimate.kappa * (estimate.duration / n)
    fine, reach = ~(h > COARSEST), np.exp(TWO_SIDED * sigma_se)
    ends = pull_ends(estimate.pull)
    of_pull = {
        "kappa_se": estimate.pull.slope_se / (estimate.pull.slope * (estimate.duration / n)),
        "kappa_lower": ends.lower,
        "kappa_upper": ends.upper,
        "theta_se": estimate.theta_se,
        "theta_lower": ends.theta_lower,
        "theta_upper": ends.theta_upper,
        "sigma_se": sigma * sigma_se,
        "sigma_lower": np.where(fine, sigma / reach, np.nan),
        "sigma_upper": np.where(fine, sigma * reach, np.nan),
        "kappa_median_unbiased": ends.median,
        "no_reversion_p": ends.p_no_pull,
    }
    of_pull |= _formulas({**of_pull, "kappa": estimate.kappa, "sigma": sigma})
    of_step = np.square(sigma) * (estimate.duration / n) * Pull(h).phi  # variance of an increment of X
    share = 2 * np.square(noise) / (2 * np.square(noise) + of_step)
    return {
        **{name: np.where(estimate.pure, np.nan, values) for name, values in of_pull.items()},
        "noise_se": noise * noise_se,
        "noise_lower": noise * np.sqrt(np.maximum(1 - 2 * TWO_SIDED * noise_se, 0.0)),
        "noise_upper": noise * np.sqrt(1 + 2 * TWO_SIDED * noise_se),
        "noise_share": np.where(estimate.pure, 1.0, share),
        "no_noise_p": _half_chi_square(2 * (estimate.loglik - without)),
        "kurtosis": estimate.kurtosis,
    }


def _half_chi_square(gain: Array) -> Array:
    """Probability of at least this gain, twice that of the log-likelihood, without noise."""
    from scipy.special import erfc

    return np.asarray(0.5 * erfc(np.sqrt(0.5 * np.maximum(gain, 0.0))))


def _formulas(columns: Columns) -> Columns:
    """The columns that are formulas of others, as their SQL has them."""
    kappa = columns["kappa"]
    found = {**half_lives(columns), "stationary_sd": columns["sigma"] / np.sqrt(2 * kappa)}
    for name in _NEED_A_PULL:
        found[name] = np.where(kappa > 0, found[name], np.nan)
    return found
