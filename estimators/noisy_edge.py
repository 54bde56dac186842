"""What may be true of an Ornstein–Uhlenbeck process where no noise is seen: as much of it as the likelihood allows.

Without noise all columns are those of `ou`. But some noise would explain a part of the variance and of the pull, so
sigma and kappa may lie lower than they do without it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from driftbook.estimators.edge import HALF_POINT, reach, reach_of
from driftbook.estimators.filtering import Filtered
from driftbook.estimators.half_life import LN2, finite
from driftbook.estimators.jets import logarithm
from driftbook.estimators.maximise import Maximum
from driftbook.estimators.noisy import Candidates
from driftbook.estimators.noisy_profile import powers
from driftbook.estimators.pull import Pull
from driftbook.estimators.repair import Columns
from driftbook.estimators.step_lengths import StepLengths
from driftbook.estimators.windows import Array

_MOST_NOISE = 0.99  # of the variance of an increment


@dataclass(frozen=True)
class NoisyEdge:
    """With the most noise that the likelihood allows, arrays of shape (m,).

    Attributes
    ----------
    variance : array
        That of the noise, over sigma²Δ without noise.
    log_sigma : array
        By how much ln sigma is lower.
    kappa : array
    """

    variance: Array
    log_sigma: Array
    kappa: Array


def edge_by_regression(found: Candidates, n: int, dt: Array) -> NoisyEdge:
    """From a search at n equal steps that ended at a = 0."""
    t = reach(-found.rise, -found.curvature)
    a, before = -np.expm1(-t), 1 - found.slope
    rho = np.maximum(before - found.slope_t * t, a)
    log_rss = (2 / n) * (HALF_POINT - 0.5 * np.log1p(powers(a, n)[1]))
    share = np.minimum(a / rho, _MOST_NOISE)
    q, q_before = Pull(-np.log(rho)).q, Pull(-np.log(before)).q
    log_variance = log_rss + np.log((1 - share) * (1 - np.minimum(a * rho, _MOST_NOISE)) * q / q_before)
    return NoisyEdge(np.exp(log_rss) * share / q_before, np.maximum(-0.5 * log_variance, 0.0), -np.log(rho) / dt)


def edge_by_filter(found: Maximum, fit: Filtered, steps: StepLengths) -> NoisyEdge:
    """From a search at unequal steps that ended at v = 0."""
    v, along = reach_of(found, 1)
    log_rss = logarithm(fit.rss)
    log_variance = np.minimum(log_rss[2] * v + log_rss[1] * along, 0.0)
    return NoisyEdge(v * np.exp(log_variance), -0.5 * log_variance, (found.point[0] + along) / steps.duration)


def edge_columns(edge: NoisyEdge, mean_step: Array, columns: Columns) -> Columns:
    """The columns that differ from those of `ou`, given as `columns` of the same windows."""
    sigma, kappa = columns["sigma"], columns["kappa"]
    own = np.log(sigma / columns["sigma_lower"])
    lower = np.maximum(columns["kappa_lower"] - np.maximum(kappa - edge.kappa, 0.0), 0.0)
    return {
        "noise_lower": np.zeros_like(sigma),
        "noise_upper": sigma * np.sqrt(edge.variance * mean_step),
        "sigma_lower": sigma * np.exp(-np.hypot(own, edge.log_sigma)),
        "kappa_lower": lower,
        "half_life_upper": finite(LN2 / lower),
        "half_life_unbounded": np.where(np.isnan(lower), np.nan, lower == 0),
    }
