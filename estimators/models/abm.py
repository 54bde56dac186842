"""Arithmetic Brownian motion dX = mu dt + sigma dW, at any steps.

With increments d_i over steps Δ_i, T = Σ Δ_i and R = Σ (d_i − mu Δ_i)²/Δ_i, the likelihood is largest at

    mu = (x_n − x_0)/T    sigma² = R/n    loglik = −½ (n ln(2 π sigma²) + n + Σ ln Δ_i).

With s² = R/(n − 1), mu has the standard error s/√T, which depends on the time span alone, and the interval of
Student's t; sigma has the standard error sigma/√(2n), and the χ² interval stretched for fat tails.

References
----------
Bachelier, L. (1900), Théorie de la spéculation, Annales scientifiques de l'École normale supérieure 17, 21–86.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import partial

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.batches import Answer, Kernel, Piece
from driftbook.estimators.increments import Increments, from_sums, from_windows
from driftbook.estimators.intervals import log_sd_interval, mean_interval
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.repair import blank, repair
from driftbook.estimators.status import Status
from driftbook.estimators.stepping import by_steps
from driftbook.estimators.windows import Array

SHORTEST = 5

PARAMETERS = (
    Parameter("mu", "x/t", "Drift: expected change per unit of time."),
    Parameter("sigma", "x/√t", "Volatility."),
)

COLUMNS = (
    *(column for parameter in PARAMETERS for column in parameter_columns(parameter)),
    Column("kurtosis", "", "Fourth moment of the standardised increments over the squared second: 3 for a Gaussian."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)

Estimates = Callable[[Increments], dict[str, Array]]
"""Columns of increments."""


def estimates(increments: Increments) -> dict[str, Array]:
    """Columns of sound increments; all of them if they have a kurtosis."""
    n, sigma = increments.n, increments.volatility
    loglik = -0.5 * (n * (2 * np.log(sigma) + (np.log(2 * np.pi) + 1)) + increments.log_steps)
    columns = {"mu": increments.rate, "sigma": sigma, "loglik": loglik}
    if increments.kurtosis is None:
        return columns
    unbiased = sigma * np.sqrt(n / (n - 1))
    mu_se = unbiased / np.sqrt(increments.duration)
    mu, volatility = mean_interval(n, increments.rate, mu_se), log_sd_interval(n, unbiased, increments.kurtosis)
    return columns | {
        "mu_se": mu_se,
        "mu_lower": mu.lower,
        "mu_upper": mu.upper,
        "sigma_se": sigma / np.sqrt(2 * n),
        "sigma_lower": volatility.lower,
        "sigma_upper": volatility.upper,
        "kurtosis": increments.kurtosis,
    }


def brownian_kernel(estimates: Estimates) -> Kernel:
    """The kernel that fits every window of a piece, by these estimates from its increments."""
    fit_piece = partial(_fit_piece, estimates)
    return by_steps(fit_piece, fit_piece)


def _fit_piece(estimates: Estimates, piece: Piece) -> Answer:
    increments, sound = from_sums(piece)
    columns = estimates(increments)
    status = np.zeros(sound.shape, dtype=np.int8)
    doubtful = np.flatnonzero(~sound)
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, estimates, piece.intervals), columns, status)
    return Answer(columns, status)


def _from_windows(
    estimates: Estimates, intervals: bool, windows: Array, steps: Array
) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """Columns and status of windows of finite values, shape (m, n + 1)."""
    increments, flat = from_windows(windows, steps, fourth=intervals)
    columns = estimates(increments)
    blank(columns, np.flatnonzero(flat))
    return columns, np.where(flat, np.int8(Status.FLAT), np.int8(Status.OK))


def log_density(x: Array, steps: Array, mu: Array, sigma: Array) -> Array:
    """Log-likelihood of windows, shape (..., n + 1), at given parameters."""
    deviation = (np.diff(x, axis=-1) - mu[..., None] * steps) / sigma[..., None]
    variance = np.square(sigma)[..., None] * steps
    terms = np.log(2 * np.pi * variance) + np.square(deviation) / steps
    return np.asarray(np.where(sigma > 0, -0.5 * terms.sum(axis=-1), np.nan))


MODEL = Model(
    name="abm",
    revision=1,
    equation="dX = mu dt + sigma dW",
    range="real",
    has_pull=False,
    is_relative=False,
    local_volatility=("sigma", "sigma_lower", "sigma_upper"),
    local_drift="mu",
    reaches_zero=True,
    steps="any",
    shortest=SHORTEST,
    parameters=PARAMETERS,
    columns=COLUMNS,
    kernel=brownian_kernel(estimates),
    log_density=log_density,
)
