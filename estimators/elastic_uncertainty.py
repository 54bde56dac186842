"""What is not known of a ckls fit: standard errors, 95 % intervals, and the columns that follow from them."""

from __future__ import annotations

from dataclasses import dataclass
from statistics import NormalDist

import numpy as np

from driftbook.estimators.elastic import Elastic, Spot
from driftbook.estimators.elastic_search import Top
from driftbook.estimators.half_life import finite, half_lives
from driftbook.estimators.intervals import theta_set, widened_pull
from driftbook.estimators.repair import Columns
from driftbook.estimators.slope_law import slope_law
from driftbook.estimators.windows import Array

TWO_SIDED = NormalDist().inv_cdf(0.975)
NAMES = (
    *("kappa_se", "theta_se", "sigma_se", "sigma_lower", "sigma_upper", "gamma_se", "gamma_lower", "gamma_upper"),
    *("local_volatility", "local_volatility_se", "local_volatility_lower", "local_volatility_upper", "kurtosis"),
    *("kappa_lower", "kappa_upper", "kappa_median_unbiased", "no_reversion_p", "theta_lower", "theta_upper"),
    *("half_life", "half_life_lower", "half_life_upper", "half_life_mle", "half_life_unbounded", "can_reach_zero"),
)
"""Columns that `uncertainty` makes."""
_CURVATURE_STEP = 1e-3  # in gamma, for second derivatives


def uncertainty(sums: Elastic, top: Top, columns: Columns, origin: Array) -> Columns:
    """Standard errors, intervals, and what follows from them."""
    n, spot, gamma = sums.n, top.spot, top.gamma
    V = _Covariance.of(sums, top)
    kurtosis = n * top.near.rows[13] / np.square(top.near.rows[0])
    more = np.maximum(kurtosis - 3, 0.0) / (4 * n)
    gamma_se = np.sqrt(V.gg)
    level = sums.level + np.log(origin)
    of_sigma = np.sqrt(0.25 * V.uu - level * V.ug + np.square(level) * V.gg)
    level_volatility, of_level = origin * np.sqrt(spot.u), 0.5 * np.sqrt(V.uu)
    centre = np.sqrt(n / (n - 2))
    reach, level_reach = (np.exp(TWO_SIDED * np.sqrt(each * each + more)) for each in (of_sigma, of_level))
    found = {
        "kappa_se": np.sqrt(V.bb),
        "theta_se": origin
        * np.sqrt(V.aa + 2 * V.ab * (columns["theta"] / origin - 1) + V.bb * np.square(columns["theta"] / origin - 1))
        / np.abs(spot.b),
        "sigma_se": np.where(top.at_edge, np.nan, columns["sigma"] * of_sigma),
        "sigma_lower": np.where(top.at_edge, np.nan, columns["sigma"] * centre / reach),
        "sigma_upper": np.where(top.at_edge, np.nan, columns["sigma"] * centre * reach),
        "gamma_se": np.where(top.at_edge, np.nan, gamma_se),
        "gamma_lower": np.where(top.at_edge, np.nan, gamma - TWO_SIDED * gamma_se),
        "gamma_upper": np.where(top.at_edge, np.nan, gamma + TWO_SIDED * gamma_se),
        "local_volatility": level_volatility,
        "local_volatility_se": level_volatility * of_level,
        "local_volatility_lower": level_volatility * centre / level_reach,
        "local_volatility_upper": level_volatility * centre * level_reach,
        "kurtosis": kurtosis,
    }
    found |= _of_pull(sums, spot, V, origin)
    return found | _formulas({**columns, **found})


@dataclass(frozen=True)
class _Covariance:
    """Of alpha (a), b, ln u and gamma: arrays of shape (m,)."""

    aa: Array
    ab: Array
    bb: Array
    uu: Array
    ug: Array
    gg: Array

    @classmethod
    def of(cls, sums: Elastic, top: Top) -> _Covariance:
        """From second derivatives: by ln u exact, by gamma from differences of first ones at either side."""
        spot, u = top.spot, top.spot.u
        sides = []
        for step in (-_CURVATURE_STEP, _CURVATURE_STEP):
            rows, slopes = top.near.at(np.full(u.shape, step))
            there = sums.spot(top.gamma + step, rows, u)
            sides.append((sums.slope(top.gamma + step, rows, slopes, there), there.slope, there.alpha, there.b))
        by_gamma = [(high - low) / (2 * _CURVATURE_STEP) for low, high in zip(*sides, strict=True)]
        Igg, Iug, a_g, b_g = -by_gamma[0], -by_gamma[1], by_gamma[2], by_gamma[3]
        Iuu = spot.curvature
        det = Iuu * Igg - Iug * Iug
        free = ~top.at_edge
        uu = np.where(free, Igg / det, 1 / Iuu)
        ug, gg = np.where(free, -Iug / det, 0.0), np.where(free, Iuu / det, 0.0)
        M00, M01, M11 = spot.matrix
        det = M00 * M11 - M01 * M01
        a_u, b_u = spot.alpha_moves, spot.b_moves
        aa = u * M11 / det + a_u * a_u * uu + 2 * a_u * a_g * ug + a_g * a_g * gg
        ab = -u * M01 / det + a_u * b_u * uu + (a_u * b_g + a_g * b_u) * ug + a_g * b_g * gg
        bb = u * M00 / det + b_u * b_u * uu + 2 * b_u * b_g * ug + b_g * b_g * gg
        return cls(aa, ab, bb, uu, ug, gg)


def _of_pull(sums: Elastic, spot: Spot, V: _Covariance, origin: Array) -> Columns:
    """Intervals of kappa and theta by the exact law of the slope of an AR(1)."""
    n, duration = sums.n, sums.duration
    law = slope_law(n)
    if law is None:
        nothing = np.full(spot.b.shape, np.nan)
        names = ("kappa_lower", "kappa_upper", "kappa_median_unbiased", "no_reversion_p", "theta_lower", "theta_upper")
        return {name: nothing.copy() for name in names}
    dt = duration / n
    rho = np.exp(spot.b * dt)
    plain = np.sqrt(np.maximum(1 - rho * rho, 0.0) / n + 4 / n**2)
    pull = widened_pull(law, rho, rho * np.sqrt(V.bb) * dt / plain)
    per_step = np.where(spot.b == 0, dt, np.expm1(spot.b * dt) / spot.b)
    surest = -V.ab / V.bb  # away from the origin
    least = (V.aa - V.ab * V.ab / V.bb) * np.square(per_step)
    mean_to = (spot.alpha + spot.b * surest) * per_step
    theta = theta_set(
        law, rho, mean_from=0.0, mean_to=mean_to, A=least * n / (V.bb * np.square(per_step)), s2=least * n
    )
    return {
        "kappa_lower": finite(pull.lower / duration),
        "kappa_upper": finite(pull.upper / duration),
        "kappa_median_unbiased": finite(pull.median / duration),
        "no_reversion_p": law.p_no_pull(rho),
        "theta_lower": origin * (1 + surest + theta.lower),
        "theta_upper": origin * (1 + surest + theta.upper),
    }


def _formulas(columns: Columns) -> Columns:
    """The columns that are formulas of others, as their SQL has them."""
    kappa, gamma = columns["kappa"], columns["gamma"]
    linear = gamma <= 1
    reach_zero = np.where(columns["gamma_upper"] < 0.5, 1.0, np.nan)
    never = (columns["gamma_lower"] > 0.5) & (kappa * columns["theta"] > 0)
    found = half_lives(columns)
    for name in ("half_life", "half_life_mle"):
        found[name] = np.where(linear & (kappa > 0), found[name], np.nan)
    for name in ("half_life_lower", "half_life_upper"):
        found[name] = np.where(linear, found[name], np.nan)
    return {**found, "can_reach_zero": np.where(never, 0.0, reach_zero)}
