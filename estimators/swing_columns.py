"""The columns of a damped oscillator: parameters, standard errors and intervals, from what a search found."""

from __future__ import annotations

from statistics import NormalDist

import numpy as np

from driftbook.estimators.edge import reach_of
from driftbook.estimators.hidden_pull import hidden_pull, pull_ends
from driftbook.estimators.jets import Jet, constant, covariance, inverse, logarithm, times
from driftbook.estimators.maximise import Maximum
from driftbook.estimators.maximise import inverse as inverse_of
from driftbook.estimators.regression import Mask
from driftbook.estimators.repair import Columns
from driftbook.estimators.swing_estimate import Estimate
from driftbook.estimators.windows import Array

TWO_SIDED = NormalDist().inv_cdf(0.975)
STRONG = 2.0  # damping times a step from which on 1/damping is what the data tell
TURNS = 4 * np.pi  # omega times a window's time from which on motion swings for long


def swing_columns(estimate: Estimate, *, intervals: bool) -> Columns:
    """All columns, or without `intervals` the parameters and the log-likelihood."""
    damping, stiffness, eta = estimate.damping[0], estimate.stiffness[0], np.exp(0.5 * estimate.log_eta2[0])
    omega = np.sqrt(np.where(stiffness > 0, stiffness, np.nan))
    columns = {
        "damping": damping,
        "omega": omega,
        "theta": estimate.first + estimate.theta[0],
        "eta": eta,
        "loglik": estimate.loglik,
    }
    if intervals:
        columns |= {"kappa_s": stiffness / damping, "sigma_s": eta / damping, "kurtosis": estimate.kurtosis}
        swings = stiffness > 0.25 * damping**2
        turn = np.sqrt(np.where(swings, stiffness - 0.25 * damping**2, np.nan))
        columns |= {"period": 2 * np.pi / turn, "damping_ratio": damping / (2 * omega)}
        columns |= _uncertainty(estimate, columns, (damping < omega) & (omega * estimate.duration > TURNS))
    return columns


def _uncertainty(estimate: Estimate, columns: Columns, swings: Mask) -> Columns:
    """Standard errors and intervals, by the delta method from the curvature of the likelihood.

    `swings` tells where motion swings for long, so that normal theory serves for omega, kappa_s and theta.
    """
    n, of_parameters = estimate.n, inverse_of(-estimate.found.hessian) * (estimate.n / (estimate.n - 2))
    own = np.maximum(1 / (2 * n), (estimate.kurtosis - 1) / (4 * n))  # of ln eta
    log_damping = logarithm(estimate.damping)
    kappa = times(estimate.stiffness, inverse(estimate.damping))
    log_sigma = 0.5 * estimate.log_eta2 - log_damping

    def se(jet: Jet, more: Array | float = 0.0) -> Array:
        return np.sqrt(covariance(jet, jet, of_parameters) + more)

    given = n / ((n - 2) * estimate.theta_weight)
    damping_se, eta_se, sigma_se = se(log_damping), se(0.5 * estimate.log_eta2, own), se(log_sigma, own)
    omega_se = se(0.5 * times(estimate.stiffness, constant(1 / estimate.stiffness[0], own.shape)))
    found = {
        "damping_se": columns["damping"] * damping_se,
        "omega_se": columns["omega"] * omega_se,
        "theta_se": se(estimate.theta, given),
        "eta_se": columns["eta"] * eta_se,
        "kappa_s_se": se(kappa),
        "sigma_s_se": columns["sigma_s"] * sigma_se,
    }
    found |= _on_logs("sigma_s", columns["sigma_s"], sigma_se)
    strong = estimate.damping[0] * estimate.duration / n > STRONG
    found |= _on_logs_or_inverses("damping", columns["damping"], damping_se, strong)
    found |= _on_logs_or_inverses("eta", columns["eta"], np.where(strong, damping_se, eta_se), strong)
    pull = pull_ends(hidden_pull(n, estimate.duration, kappa, estimate.theta, estimate.first, given, of_parameters))
    found |= {
        "kappa_s_lower": pull.lower,
        "kappa_s_upper": pull.upper,
        "theta_lower": pull.theta_lower,
        "theta_upper": pull.theta_upper,
        "no_reversion_p": pull.p_no_pull,
    }
    # bias of a rate of return: Tang, C. Y. & Chen, S. X. (2009), J. Econometrics 149, 65–81
    too_strong = 1 + 4 / np.maximum(estimate.damping[0] * estimate.duration, 2.0)
    found["damping_lower"] /= too_strong
    for name in ("kappa_s_upper", "sigma_s_upper"):
        found[name] *= too_strong
    found |= _of_swing(columns, found, omega_se, swings)
    return found


def overdamped_columns(found: Maximum, mean_step: Array, columns: Columns) -> Columns:
    """Ends of what strong damping leaves without an estimate, where the likelihood is largest at the strongest.

    `columns` are those of the same windows, with kappa_s and sigma_s from `ou`.
    """
    s = found.point[0] + reach_of(found, 0)[0]
    damping = 1 / (np.expm1(s) * mean_step)
    return {
        "damping_lower": damping,
        "omega_lower": np.sqrt(damping * columns["kappa_s_lower"]),
        "eta_lower": damping * columns["sigma_s_lower"],
    }


def _on_logs(name: str, value: Array, se: Array) -> Columns:
    """The interval on the scale of the logarithm."""
    reach = np.exp(TWO_SIDED * se)
    return {f"{name}_lower": value / reach, f"{name}_upper": value * reach}


def _on_logs_or_inverses(name: str, value: Array, se: Array, strong: Mask) -> Columns:
    """The interval on the scale of the logarithm, or where damping is strong on that of one over the value."""
    ends, far = _on_logs(name, value, se), 1 - TWO_SIDED * se
    by_inverse = value / (1 + TWO_SIDED * se), np.where(far > 0, value / far, np.nan)
    return {end: np.where(strong, other, ends[end]) for end, other in zip(ends, by_inverse, strict=True)}


def _of_swing(columns: Columns, found: Columns, omega_se: Array, swings: Mask) -> Columns:
    """Normal theory where motion swings for long; else the ends of omega from those of kappa_s and damping."""
    by_theory = _on_logs("omega", columns["omega"], omega_se)
    by_theory |= _on_logs("kappa_s", columns["kappa_s"], found["kappa_s_se"] / columns["kappa_s"])
    reach = TWO_SIDED * found["theta_se"]
    by_theory |= {"theta_lower": columns["theta"] - reach, "theta_upper": columns["theta"] + reach}
    other = dict(found)
    for end, sign in (("lower", -1.0), ("upper", 1.0)):
        of_both = (np.log(found[f"{name}_{end}"] / columns[name]) for name in ("kappa_s", "damping"))
        other[f"omega_{end}"] = columns["omega"] * np.exp(0.5 * sign * np.hypot(*of_both))
    return {name: np.where(swings, values, other[name]) for name, values in by_theory.items()}
