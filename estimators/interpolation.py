"""Interpolation at Chebyshev points of the first kind, of many functions at a place each.

Weights are products of distances to the points, from either side, so that nothing is divided by a distance.

References
----------
Berrut, J.-P. & Trefethen, L. N. (2004), Barycentric Lagrange interpolation, SIAM Review 46, 501–517.
"""

from __future__ import annotations

import numpy as np

from driftbook.estimators.windows import Array


def points(low: float, high: float, count: int) -> Array:
    """The points between two places, rising, shape (count,)."""
    unit = -np.cos(np.pi * (np.arange(count) + 0.5) / count)
    return np.asarray(0.5 * (low + high) + 0.5 * (high - low) * unit)


def weights(nodes: Array, at: Array, *, bend: bool = False) -> tuple[Array, Array, Array]:
    """By what the values at points enter the value and two derivatives at places: arrays of shape (count, m).

    Parameters
    ----------
    nodes : array, shape (count,)
    at : array, shape (m,)
    bend : bool
        Whether the second derivative is wanted; it is zero otherwise.
    """
    count, span = len(nodes), 0.25 * (nodes[-1] - nodes[0])  # a product of distances over this stays near one
    away = (at - nodes[:, None]) / span
    apart = (nodes[:, None] - nodes[None, :]) / span
    np.fill_diagonal(apart, 1.0)
    below = _products(away, range(count - 1), bend=bend)
    above = _products(away, range(count - 1, 0, -1), bend=bend)
    share = 1 / apart.prod(axis=1)[:, None]
    plain = share * below[0] * above[0]
    slope = (share / span) * (below[1] * above[0] + below[0] * above[1])
    if not bend:
        return plain, slope, np.zeros((count, 1))
    curved = below[2] * above[0] + 2 * below[1] * above[1] + below[0] * above[2]
    return plain, slope, (share / span**2) * curved


def _products(away: Array, order: range, *, bend: bool) -> tuple[Array, Array, Array]:
    """At each point the product of the distances that come before it in an order, and two derivatives."""
    product, slope, curved = np.zeros((3, *away.shape))
    product[order.start] = 1.0
    for j in order:
        k = j + order.step
        np.multiply(product[j], away[j], out=product[k])
        slope[k] = slope[j] * away[j] + product[j]
        if bend:
            curved[k] = curved[j] * away[j] + 2 * slope[j]
    return product, slope, curved
