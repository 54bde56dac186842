"""Geometric Brownian motion dX = mu X dt + sigma X dW, at any steps: arithmetic Brownian motion of ln X.

The drift of ln X is m = mu − sigma²/2, so with m and sigma as for `driftbook.estimators.models.abm`,
mu = m + sigma²/2. Its error is that of both: with s² the unbiased variance of ln X per unit of time,

    SE² = s²/T + (s²)² V,    V = max(1/(2n), (kurtosis − 1)/(4n)),

and its interval is m + s²/2 ± t SE, with Student's t of n − 1 degrees of freedom.

References
----------
Osborne, M. F. M. (1959), Brownian motion in the stock market, Operations Research 7, 145–173.
Samuelson, P. A. (1965), Rational theory of warrant pricing, Industrial Management Review 6, 13–39.
"""

from __future__ import annotations

import numpy as np

from driftbook.estimators.increments import Increments
from driftbook.estimators.intervals import mean_interval
from driftbook.estimators.logs import density_on_logs, on_logs
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.models import abm
from driftbook.estimators.windows import Array

PARAMETERS = (
    Parameter("mu", "1/t", "Drift: expected change per unit of time, as a share of the value."),
    Parameter("sigma", "1/√t", "Volatility, as a share of the value."),
)

COLUMNS = (
    *(column for parameter in PARAMETERS for column in parameter_columns(parameter)),
    Column(
        "kurtosis", "", "Fourth moment of the standardised log-increments over the squared second: 3 for a Gaussian."
    ),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)


def estimates(increments: Increments) -> dict[str, Array]:
    """Columns of sound increments of ln X; all of them if they have a kurtosis."""
    columns = abm.estimates(increments)
    n, variance = increments.n, np.square(increments.volatility)
    columns["mu"] = increments.rate + variance / 2
    if increments.kurtosis is not None:
        unbiased = variance * (n / (n - 1))
        of_variance = np.square(unbiased) * np.maximum(2, increments.kurtosis - 1) / (4 * n)
        mu_se = np.sqrt(unbiased / increments.duration + of_variance)
        mu = mean_interval(n, increments.rate + unbiased / 2, mu_se)
        columns |= {"mu_se": mu_se, "mu_lower": mu.lower, "mu_upper": mu.upper}
    return columns


def log_density(x: Array, steps: Array, mu: Array, sigma: Array) -> Array:
    """Log-likelihood of the logarithm of windows, shape (..., n + 1), at given parameters."""
    return abm.log_density(x, steps, mu - np.square(sigma) / 2, sigma)


MODEL = Model(
    name="gbm",
    revision=1,
    equation="dX = mu X dt + sigma X dW",
    range="positive",
    has_pull=False,
    is_relative=True,
    local_volatility=("sigma", "sigma_lower", "sigma_upper"),
    local_drift="mu",
    reaches_zero=False,
    steps="any",
    shortest=abm.SHORTEST,
    parameters=PARAMETERS,
    columns=COLUMNS,
    kernel=on_logs(abm.brownian_kernel(estimates)),
    log_density=density_on_logs(log_density),
)
