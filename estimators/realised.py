"""Measures within a day, from returns of log prices (or, for series of any sign, of levels).

Functions take returns of shape (..., n), time last. Days of different length go into one array: fill up their ends with
anything and say how many returns count by `counts`.

References
----------
Andersen, T. G., Bollerslev, T., Diebold, F. X. & Labys, P. (2003), Modeling and forecasting realized volatility,
Econometrica 71, 579–625. Barndorff-Nielsen, O. E. & Shephard, N. (2004), Power and bipower variation with stochastic
volatility and jumps, J. Financial Econometrics 2, 1–37.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]


def realised_variance(returns: ArrayLike, /, *, counts: ArrayLike | None = None) -> Floats:
    """Sum of squared returns, in squared units of the returns.

    Parameters
    ----------
    returns : array_like, shape (..., n)
    counts : array_like, shape (...), optional
        How many of the returns count, from the first; all by default.

    Returns
    -------
    array of shape (...)
        NaN where there is no return or one that counts is not finite.
    """
    r, n = _counted(returns, counts)
    return _known((r * r).sum(axis=-1), n >= 1)


def bipower_variation(returns: ArrayLike, /, *, counts: ArrayLike | None = None) -> Floats:
    """(π/2) (n/(n − 1)) Σ |r_i| |r_{i−1}|: the variance without what single jumps add; see `realised_variance`.

    NaN where there are fewer than two returns.
    """
    r, n = _counted(returns, counts)
    size = np.abs(r)
    products = (size[..., 1:] * size[..., :-1]).sum(axis=-1)
    return _known(np.pi / 2 * n / np.maximum(n - 1, 1) * products, n >= 2)


def _counted(returns: ArrayLike, counts: ArrayLike | None) -> tuple[Floats, Floats]:
    """Returns with zeros where they do not count, and how many count."""
    r = np.asarray(returns, dtype=np.float64)
    if r.ndim < 1:
        raise ValueError("returns must have a time axis, got a single number")
    n = np.broadcast_to(np.asarray(r.shape[-1] if counts is None else counts, dtype=np.float64), r.shape[:-1])
    return np.where(np.arange(r.shape[-1]) < n[..., None], r, 0.0), n


def _known(values: Floats, enough: NDArray[np.bool_]) -> Floats:
    return np.where(enough & np.isfinite(values), values, np.nan)
