"""Comparing models on one window: information criteria and the weights made of them.

They describe fit, and are no probabilities: with a unit root under one of the models they have not even the usual
large-sample meaning.

References
----------
Akaike, H. (1974), A new look at the statistical model identification, IEEE Trans. Automatic Control 19, 716–723.
Schwarz, G. (1978), Estimating the dimension of a model, Annals of Statistics 6, 461–464.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

AIC_SQL = "2 * {k} - 2 * {loglik}"
BIC_SQL = "{k} * ln({n}) - 2 * {loglik}"


def aic(loglik: ArrayLike, k: ArrayLike, /) -> NDArray[np.float64]:
    """2 k − 2 loglik, for k parameters; any shapes that broadcast."""
    return np.asarray(2 * np.asarray(k) - 2 * np.asarray(loglik, dtype=np.float64))


def bic(loglik: ArrayLike, k: ArrayLike, n: ArrayLike, /) -> NDArray[np.float64]:
    """k ln n − 2 loglik, for k parameters and n steps; any shapes that broadcast."""
    return np.asarray(np.asarray(k) * np.log(np.asarray(n)) - 2 * np.asarray(loglik, dtype=np.float64))


def weights(criterion: ArrayLike, /) -> NDArray[np.float64]:
    """exp(−½ (criterion − its least)), normalised over the last axis.

    Parameters
    ----------
    criterion : array_like, shape (..., models)
        bic or aic of each model; NaN for a model that is not usable.

    Returns
    -------
    array of the same shape
        NaN where the criterion is NaN.
    """
    values = np.asarray(criterion, dtype=np.float64)
    least = np.fmin.reduce(values, axis=-1, keepdims=True)
    ratios = np.exp(-0.5 * (values - least))
    return np.asarray(ratios / np.nansum(ratios, axis=-1, keepdims=True))
