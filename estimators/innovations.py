"""The exact Gaussian likelihood of an ARMA model by its steady innovations and one term for how it begins.

With one moving-average root a, residuals filtered from a window's first step on are e_k = ε_k + h_k ε_0, where ε_k are
innovations of variance F, h_k = h_1 a^{k−1}, and ε_0, of variance d F, is what the first values leave unknown. So
e ~ N(0, F (I + d h h′)), whose inverse and determinant are those of a matrix of rank one:

    ⟨a, b⟩ = a′b − (h′a)(h′b) d/(1 + d h′h)        log det = n ln F + ln(1 + d h′h)

References
----------
Harvey, A. C. & Phillips, G. D. A. (1979), Maximum likelihood estimation of regression models with
autoregressive-moving average disturbances, Biometrika 66, 49–58. Sherman, J. & Morrison, W. J. (1950), Adjustment of
an inverse matrix corresponding to a change in one element of a given matrix, Annals of Mathematical Statistics 21.
"""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from driftbook.estimators.windows import Array


def standardised_moments(residuals: Iterable[Array], decay: Array, first: Array, d: Array) -> tuple[Array, Array]:
    """Sums of squares and of fourth powers of the standardised innovations, for F = 1.

    Parameters
    ----------
    residuals : n arrays, shape (m,)
        Residuals before they are filtered, step by step.
    decay : array, shape (m,)
        The moving-average root a.
    first : array, shape (m,)
        h_1.
    d : array, shape (m,)
        Variance of ε_0 over F.

    Returns
    -------
    squares, fourth : array, shape (m,)
        The first is ⟨e, e⟩.
    """
    e, mean, squares, fourth = np.zeros((4, *decay.shape))
    h, variance = first.copy(), d.copy()
    for u in residuals:
        e *= decay
        e += u
        hv = h * variance
        spread = 1 + h * hv
        miss = e - h * mean
        hv /= spread
        mean += hv * miss
        variance /= spread
        miss *= miss
        miss /= spread
        squares += miss
        fourth += miss * miss
        h *= decay
    return squares, fourth
