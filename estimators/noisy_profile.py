"""Generalised least squares of the AR(1) regression of values with noise, at given moving-average roots.

What the letters mean stands in `driftbook.estimators.noisy`, which searches for the best root.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from driftbook.estimators.filtered import FilteredSums
from driftbook.estimators.windows import Array


@dataclass(frozen=True)
class Profile:
    """Generalised least squares at given a; arrays of one shape, windows by nodes by segments.

    Attributes
    ----------
    n : int
        Steps in a window.
    spread, weight : array
        Sum of squares of the filtered levels about the filtered constant, and that of the latter.
    level, drift : array
        Weighted means of levels and increments.
    slope : array
        b.
    increments, products : array
        Sum of squares of the filtered increments about the filtered constant, and of their products with levels.
    log_det : array
        ½ ln(1 + G).
    """

    n: int
    spread: Array
    weight: Array
    level: Array
    drift: Array
    increments: Array
    products: Array
    log_det: Array

    @property
    def slope(self) -> Array:
        """The best b."""
        return np.asarray(-self.products / self.spread)

    @property
    def value(self) -> Array:
        """f at the best b."""
        rss = self.increments + self.slope * self.products
        return np.asarray(0.5 * self.n * np.log(rss) + self.log_det)


def profile(sums: FilteredSums, a: Array, n: int) -> Profile:
    """Least squares from the sums of filtered increments and levels.

    Parameters
    ----------
    sums : FilteredSums
        Of increments and levels, in this order.
    a : array, shape (nodes, 1 or segments)
    n : int
        Steps in a window.
    """
    G1, G2 = powers(a, n)
    gain, share = 1 / (1 - a), 1 / (1 + G2)
    h1, weight = gain * (G1 - G2), weight_of_one(a, n, G1, G2)
    (total_d, total_x), (h_d, h_x) = np.moveaxis(sums.total, 1, 0), np.moveaxis(sums.fading, 1, 0)
    drift = (gain * (total_d - h_d) - share * h1 * h_d) / weight
    level = (gain * (total_x - h_x) - share * h1 * h_x) / weight
    dd = sums.gram(0, 0) - share * h_d * h_d - weight * drift * drift
    dx = sums.gram(0, 1) - share * h_d * h_x - weight * drift * level
    xx = sums.gram(1, 1) - share * h_x * h_x - weight * level * level
    log_det = 0.5 * np.log1p(G2)
    return Profile(n, xx, np.broadcast_to(weight, xx.shape), level, drift, dd, dx, np.broadcast_to(log_det, xx.shape))


def powers(a: Array, n: int) -> tuple[Array, Array]:
    """Σ a^k and Σ a^{2k} over k = 1 … n."""
    all_faded = n * np.log(a)
    return -a * np.expm1(all_faded) / (1 - a), -a * a * np.expm1(2 * all_faded) / (1 - a * a)


def weight_of_one(a: Array, n: int, G1: Array, G2: Array) -> Array:
    """Sum of squares of the filtered constant; G1 and G2 are `powers`."""
    h1 = G1 - G2
    return np.asarray((n - 2 * G1 + G2 - h1 * h1 / (1 + G2)) / np.square(1 - a))


def determinant_slope(a: Array, n: int) -> Array:
    """The derivative of ½ ln(1 + G) = ½ ln((1 − a^{2n+2})/(1 − a²)) by a."""
    last = np.exp(2 * (n + 1) * np.log(a))
    return np.asarray(a / (1 - a * a) - (n + 1) * last / (a * (1 - last)))
