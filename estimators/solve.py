"""Roots of many functions of one variable at once, each with its own end.

References
----------
Chandrupatla, T. R. (1997), A new hybrid quadratic/bisection algorithm for finding the zero of a nonlinear function
without using derivatives, Advances in Engineering Software 28, 145–149.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.windows import Array

Places = NDArray[np.intp]
MOST_ROUNDS = 80


def roots(function: Callable[[Array, Places], Array], a: Array, b: Array, fa: Array, fb: Array, tol: float) -> Array:
    """Where each function vanishes between two points at which it has opposite signs.

    Parameters
    ----------
    function : callable
        Of points and the places of the functions that are asked, both of shape (k,): their values, shape (k,).
    a, b : array, shape (m,)
        The points.
    fa, fb : array, shape (m,)
        The values there.
    tol : float
        How near, in the unit of the points.

    Returns
    -------
    array, shape (m,)
        NaN where signs are not opposite or the function is not a number.
    """
    found = np.full(a.shape, np.nan)
    at = np.flatnonzero(fa * fb <= 0)
    a, b, fa, fb = (each[at].copy() for each in (a, b, fa, fb))
    share = _first_share(fa, fb)
    for _ in range(MOST_ROUNDS):
        if not at.size:
            break
        x = a + share * (b - a)
        fx = function(x, at)
        same_side = np.signbit(fx) == np.signbit(fa)
        c, fc = np.where(same_side, a, b), np.where(same_side, fa, fb)
        b, fb = np.where(same_side, b, a), np.where(same_side, fb, fa)
        a, fa = x, fx
        best = np.where(np.abs(fa) < np.abs(fb), a, b)
        least = tol / np.abs(b - a)
        done = (least > 0.5) | (fa == 0) | np.isnan(fa)
        found[at[done]] = np.where(np.isnan(fa), np.nan, np.where(fa == 0, a, best))[done]
        with np.errstate(all="ignore"):  # where interpolation makes no sense it is not used
            share = np.clip(_share(a, b, c, fa, fb, fc), least, 1 - least)
        keep = ~done
        at, a, b, fa, fb, share = (each[keep] for each in (at, a, b, fa, fb, share))
    return found


def _first_share(fa: Array, fb: Array) -> Array:
    """Where a straight line would vanish, kept away from the ends."""
    straight: Array = np.divide(fa, fa - fb, out=np.full(fa.shape, 0.5), where=fa != fb)
    return np.asarray(np.clip(straight, 0.05, 0.95))


def _share(a: Array, b: Array, c: Array, fa: Array, fb: Array, fc: Array) -> Array:
    """How far from a to b to go: by inverse quadratic interpolation where it can be trusted, else half."""
    xi, phi = (a - b) / (c - b), (fa - fb) / (fc - fb)
    trusted = (phi * phi < xi) & (np.square(1 - phi) < 1 - xi)
    inverse: Array = fa / (fb - fa) * (fc / (fb - fc)) + (c - a) / (b - a) * (fa / (fc - fa)) * (fb / (fc - fb))
    return np.where(trusted, inverse, 0.5)
