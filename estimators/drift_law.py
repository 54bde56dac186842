"""How far estimates of a drift may be from the truth, in their standard errors: a law read from a table.

A drift that is linear in its parameters, f = Σ a_k g_k, is estimated by least squares, with errors that are normal only
where a window is long beside the time its values take to come back. In short ones the pull is found too strong, and
t-statistics of it are neither centred nor normal: as for the slope of an AR(1), which is the case g = (1, x). What
says how far a window is from the normal case are three numbers:

* Q, the square of the drift in its standard errors, a′Va with V the information;
* B, the size of the estimate's bias in its standard errors, to first order in one over the length of the window:
  b = −V⁻¹ Σ_l (∂V/∂a_l) V⁻¹ e_l (Cox & Snell 1968), in which the derivative is the covariance of V with the score;
* for a linear function of a, the cosine |b·r|/(B se) of the angle between it and the bias.

Quantiles of (estimate − truth)/se in the direction of the bias are tabulated by Q and the cosine from a simulation of
cubic drifts of many kinds, random walks among them, by `driftbook.estimators.data.make_drift_law`. They depend on the
truth by little more than Q says, not by nothing: the shares of intervals that hold the truth are in the docs of
`driftbook.estimators.models.quartic`.

References
----------
Cox, D. R. & Snell, E. J. (1968), A general definition of residuals, J. Royal Statistical Society B 30, 248–275. Tang,
C. Y. & Chen, S. X. (2009), Parameter estimation and bias correction for diffusion processes, J. Econometrics 149,
65–81.
"""

from __future__ import annotations

from functools import lru_cache
from importlib import resources

import numpy as np

from driftbook.estimators.windows import Array

HALF_OCTAVES = np.arange(2, 15) / 2
"""Binary logarithms of Q in the table; beyond the last it does not change."""
COSINES = np.arange(5) / 5
"""Cosines in the table."""


@lru_cache(maxsize=1)
def _quantiles() -> Array:
    """Lower and upper quantile, by cosine and Q, shape (2, 5, 13)."""
    with resources.files("driftbook.estimators.data").joinpath("drift_law.npz").open("rb") as file:
        return np.asarray(np.load(file)["quantiles"])


def reaches(strength: Array, cosine: Array) -> tuple[Array, Array]:
    """Quantiles of an estimate's error against and with the direction of its bias, in standard errors.

    Parameters
    ----------
    strength : array, shape (m,)
        Q.
    cosine : array, shape (k, m)
        Of functions of the parameters.

    Returns
    -------
    lower, upper : array, shape (k, m)
        Between which 95 % of errors lie; most lower ones are negative.
    """
    octave = np.log2(np.maximum(strength, 1.0))
    lower, upper = (_along(table, octave, cosine) for table in _quantiles())
    return lower, upper


def _along(table: Array, octave: Array, cosine: Array) -> Array:
    """Between the points of one table; `np.interp` along the first argument, hats along the second."""
    rows = [np.interp(octave, HALF_OCTAVES, row) for row in table]
    width = COSINES[1]
    found = rows[0] + np.zeros_like(cosine)
    for start, before, after in zip(COSINES, rows, rows[1:], strict=False):
        found += np.clip(cosine - start, 0.0, width) * ((after - before) / width)
    return np.asarray(found)
