"""Constant elasticity of volatility with a linear pull: dX = kappa (theta − X) dt + sigma X^gamma dW, X > 0.

There is no closed transition density; the likelihood is the closed-form expansion of second order in the step, in the
coordinate of unit volatility (`driftbook.estimators.elastic`): never that of first order, which is no density. Given
gamma it is exactly quadratic in the drift; its sums are interpolated in gamma from a few Chebyshev points, for windows
in rolling position, and gamma in [−1, 2.5] is where the derivative of the profile vanishes next to its best point.

How far the expansion is from the exact density, as E|ln p − ln p_exact| a step in the stationary law with theta = 1,
against the Fokker–Planck equation solved numerically (`driftbook.estimators.transition`), and of Euler's scheme:

=====  =====  =====  =======  ========  =========  =======
gamma  kappa  sigma  kappa Δ  sigma √Δ  expansion  Euler
=====  =====  =====  =======  ========  =========  =======
½      4      0.4    0.016    0.025     8.4e-8     1.2e-2
½      4      0.4    0.077    0.055     9.3e-6     4.1e-2
½      4      0.4    0.333    0.115     7.0e-4     1.5e-1
1      4      0.4    0.016    0.025     9.1e-8     2.0e-2
1      4      0.4    0.077    0.055     1.0e-5     5.3e-2
1      4      0.4    0.333    0.115     7.4e-4     1.6e-1
1½     4      0.4    0.016    0.025     1.0e-7     2.9e-2
1½     4      0.4    0.333    0.115     8.4e-4     1.8e-1
½      20     1      0.079    0.063     1.0e-5     4.3e-2
½      20     1      0.385    0.139     1.1e-3     1.7e-1
½      20     1      1.667    0.289     6.5e-2     6.0e-1
1      20     1      0.385    0.139     1.1e-3     1.9e-1
=====  =====  =====  =======  ========  =========  =======

It grows with the third power of the step. Where the pull over the longest step exceeds a half, the fit is `too_coarse`:
its numbers stand, but the likelihood is not to be compared. Near zero it is not adequate either.

sigma and gamma by themselves are hard to tell apart (the standard error of gamma is about 1/(√(2n) sd(ln X))); the
volatility at the window's geometric mean m, `local_volatility` = sigma m^gamma, is well determined where they are not.
For gamma > 1 theta is not the stationary mean, and a stationary law may exist with kappa ≤ 0: no half-life is given.

Standard errors are those of the observed information. Intervals:

* kappa: the slope's law of the AR(1) is fed e^{−kappa T/n}, widened by the ratio of the standard error of that slope to
  what the AR(1) would have;
* theta: all theta₀ for which (alpha − theta₀ kappa)² ≤ k Var(alpha − theta₀ kappa), with that law's critical value;
* gamma: estimate ± 1.96 standard errors; where it stopped at its edge neither it nor sigma has an interval;
* sigma and local_volatility: on the logarithm, with (kurtosis − 3)/(4n) more where movements have fat tails.

Zero can be reached if gamma < ½, and not if gamma > ½ while kappa theta > 0 (Feller 1952): `can_reach_zero` is told
where the interval of gamma lies on one side.

A window in which a step multiplies the value by more than 4.4, or a value is e^6 times the geometric mean or its
inverse, is not_converged.
sigma² is looked for within a factor of 3 of the mean square of the movement: far from there the expansion is no density
and can be larger without bound.

References
----------
Chan, K. C., Karolyi, G. A., Longstaff, F. A. & Sanders, A. B. (1992), An empirical comparison of alternative models of
the short-term interest rate, J. Finance 47, 1209–1227. Aït-Sahalia, Y. (2002), Maximum likelihood estimation of
discretely sampled diffusions, Econometrica 70, 223–262. Feller, W. (1952), The parabolic differential equations and the
associated semi-groups of transformations, Annals of Mathematics 55, 468–519. Fieller, E. C. (1954), Some problems in
interval estimation, J. Royal Statistical Society B 16, 175–185.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from driftbook.estimators.elastic import at_midpoint
from driftbook.estimators.elastic_fit import fit_piece
from driftbook.estimators.elastic_sums import LAST
from driftbook.estimators.log_segments import shapes
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.models import ou
from driftbook.estimators.windows import Array

SHORTEST = 10

PARAMETERS = (
    Parameter("kappa", "1/t", "Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average."),
    Parameter("theta", "x", "Level that the drift pulls to; the stationary mean where gamma is 1 or less."),
    Parameter("sigma", "x^(1-gamma)/√t", "Volatility of the driving noise: times x^gamma it is that of the series."),
    Parameter("gamma", "", "Power of the level in the volatility; between -1 and 2.5."),
)

_OF_PULL = {
    "half_life": "ln(2) / nullif(kappa_median_unbiased, 0)",
    "half_life_mle": "ln(2) / kappa",
}


def _like_ou(column: Column) -> Column:
    """A column of the Ornstein–Uhlenbeck fit; half-lives are empty where gamma is above 1."""
    if column.name in _OF_PULL:
        return replace(column, sql=f"CASE WHEN kappa > 0 AND gamma <= 1 THEN {_OF_PULL[column.name]} END")
    for end, other in (("lower", "upper"), ("upper", "lower")):
        if column.name == f"half_life_{end}":
            return replace(column, sql=f"CASE WHEN kappa_{other} > 0 AND gamma <= 1 THEN ln(2) / kappa_{other} END")
    return column


_TAKEN_FROM_OU = tuple(
    _like_ou(column) for column in ou.COLUMNS[4 * len(ou.PARAMETERS) : -2] if column.name != "stationary_sd"
)

COLUMNS = (
    *(column for parameter in PARAMETERS for column in parameter_columns(parameter)),
    *_TAKEN_FROM_OU,
    *parameter_columns(
        Parameter(
            "local_volatility", "x/√t", "Volatility at the geometric mean of the window: sigma times its power gamma."
        )
    ),
    Column(
        "can_reach_zero",
        "",
        "Whether paths reach zero; empty where the interval of gamma holds a half, or kappa theta is not positive.",
        "CASE WHEN gamma_upper < 0.5 THEN true WHEN gamma_lower > 0.5 AND kappa * theta > 0 THEN false END",
        "boolean",
    ),
    Column("kurtosis", "", "Fourth moment of movements in the coordinate of unit volatility over the squared second."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)


def log_density(x: Array, steps: Array, kappa: Array, theta: Array, sigma: Array, gamma: Array) -> Array:
    """Log-likelihood of windows, shape (..., n + 1), at given parameters."""
    kappa, theta, sigma, g = (each[..., None] for each in (kappa, theta, sigma, gamma))
    a, b, u = kappa * theta, -kappa, np.square(sigma)
    x = np.where(x > 0, x, np.nan)
    half = 0.5 * np.log1p(np.diff(x, axis=-1) / x[..., :-1])
    m, change, q = np.sqrt(x[..., :-1] * x[..., 1:]), 2 * half, half * half
    by = {name: at_midpoint(series, q) for name, series in shapes(g, LAST.terms).items()}
    E, k = m ** (-2 * g), 0.5 * g - 0.25 * g * g
    square = E * (a * a * by["square"] + 2 * a * b * m * by["cross"] + b * b * m * m * by["last"])
    V = m ** (2 * g - 2)
    near = square / u - 2 * g * a * by["inverse"] / m + b * (1 - 2 * g) + u * k * V
    bridged = (a * a * by["bridge square"] / m + 2 * a * b * by["bridge cross"]) / m + b * b * by["bridge last"]
    bridged += -2 * g * a * u * V / m * by["bridge inverse"] + u * u * k * V * V * by["bridge volatility"]
    terms = -0.5 * np.log(2 * np.pi * u * steps) - g * (np.log(x[..., 1:]) + half)
    terms -= 0.5 * np.square(change * m) * E * by["hh"] / (u * steps)
    terms += change * E * m * (a * by["first"] + b * m * by["second"]) / u
    terms -= 0.5 * steps * near + 0.25 * steps * steps * bridged
    usable = (sigma[..., 0] > 0) & (np.abs(change) <= LAST.step).all(axis=-1)
    return np.where(usable, terms.sum(axis=-1), np.nan)


_RELATIVE = "sigma * x ** gamma"

MODEL = Model(
    name="ckls",
    revision=1,
    equation="dX = kappa (theta - X) dt + sigma X^gamma dW",
    range="positive",
    has_pull=True,
    is_relative=False,
    local_volatility=(
        _RELATIVE,
        f"{_RELATIVE} * local_volatility_lower / local_volatility",
        f"{_RELATIVE} * local_volatility_upper / local_volatility",
    ),
    local_drift="kappa * (theta - x)",
    reaches_zero=None,
    steps="any",
    shortest=SHORTEST,
    parameters=PARAMETERS,
    columns=COLUMNS,
    kernel=fit_piece,
    log_density=log_density,
)
