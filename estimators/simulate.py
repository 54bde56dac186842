"""Paths of the models by their exact transition laws, for demonstrations, tests and studies."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.signal import lfilter


def simulate_ou(
    rng: np.random.Generator,
    *,
    kappa: float,
    theta: float,
    sigma: float,
    dt: float,
    steps: int,
    paths: int = 1,
    start: float | None = None,
) -> NDArray[np.float64]:
    """Paths of dX = kappa (theta − X) dt + sigma dW, without discretisation error.

    Parameters
    ----------
    rng : numpy.random.Generator
        The only source of chance.
    kappa, theta, sigma : float
        Pull (1/yr, at least 0), mean (x) and volatility (x/√yr).
    dt : float
        Step in years.
    steps, paths : int
        Steps of a path, and how many paths.
    start : float, optional
        First value; None draws it from the stationary law, which needs kappa > 0.

    Returns
    -------
    array of shape (paths, steps + 1)

    References
    ----------
    Uhlenbeck & Ornstein (1930); transition law as in Vasicek (1977).
    """
    decay = np.exp(-kappa * dt)
    step_sd = sigma * np.sqrt(-np.expm1(-2 * kappa * dt) / (2 * kappa)) if kappa > 0 else sigma * np.sqrt(dt)
    if start is None:
        first = sigma / np.sqrt(2 * kappa) * rng.standard_normal((paths, 1))
    else:
        first = np.full((paths, 1), start - theta)
    driven = np.concatenate([first, step_sd * rng.standard_normal((paths, steps))], axis=1)
    deviations: NDArray[np.float64] = lfilter([1.0], [1.0, -decay], driven, axis=1)
    return deviations + theta
