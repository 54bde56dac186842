"""Functions of one variable known at Chebyshev points, many at once: their polynomials, and where they are least.

A range is cut into panels; in each a function is the polynomial through its values at the panel's Chebyshev points of
the first kind, and where it is analytic the error falls geometrically with their number. A range in one panel is also
interpolated by weights, which are products of distances to the points, from either side, so that nothing is divided by
a distance.

References
----------
Trefethen, L. N. (2013), Approximation Theory and Approximation Practice, SIAM. Clenshaw, C. W. (1955), A note on the
summation of Chebyshev series, Mathematics of Computation 9, 118–120. Berrut, J.-P. & Trefethen, L. N. (2004),
Barycentric Lagrange interpolation, SIAM Review 46, 501–517.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.solve import roots
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]
TOLERANCE = 1e-12  # of a place within its panel, which is 2 long


@dataclass(frozen=True)
class Panels:
    """A range from `low` to `high` in `count` panels of `points` Chebyshev points, in rising order.

    Attributes
    ----------
    low, high : float
    count, points : int
    """

    low: float
    high: float
    count: int
    points: int

    @property
    def unit(self) -> Array:
        """The points of a panel from −1 to 1."""
        return np.cos(np.pi * (np.arange(self.points) + 0.5) / self.points)[::-1]

    @property
    def half(self) -> float:
        """Half the width of a panel."""
        return 0.5 * (self.high - self.low) / self.count

    @property
    def nodes(self) -> Array:
        """All points, shape (count * points,)."""
        middles = self.low + self.half * (2 * np.arange(self.count) + 1)
        return (middles[:, None] + self.half * self.unit).ravel()

    def at(self, panel: Places, z: Array) -> Array:
        """Places in the range, from places from −1 to 1 in panels."""
        return np.asarray(self.low + self.half * (2 * panel + 1 + z))

    def series(self, values: Array, panel: Places) -> Array:
        """Chebyshev coefficients of functions in a panel each.

        Parameters
        ----------
        values : array, shape (count * points, m)
            The functions at all points.
        panel : integer array, shape (m,)

        Returns
        -------
        array, shape (points, m)
        """
        order = np.arange(self.points)
        transform = np.cos(order[:, None] * np.arccos(self.unit)) * (2 / self.points)
        transform[0] /= 2
        functions = np.arange(panel.size)
        coefficients = np.zeros((self.points, panel.size))
        for j in range(self.points):  # one by one, so that bits do not depend on how many functions there are
            coefficients += transform[:, j, None] * values[panel * self.points + j, functions]
        return coefficients


def derivative(coefficients: Array) -> Array:
    """Chebyshev coefficients of the derivative, shape (points, m); the last is zero."""
    found = np.zeros_like(coefficients)
    for k in range(len(coefficients) - 2, -1, -1):
        after = found[k + 2] if k + 2 < len(found) else 0.0
        found[k] = after + 2 * (k + 1) * coefficients[k + 1]
    found[0] /= 2
    return found


def value(coefficients: Array, z: Array) -> Array:
    """Chebyshev series, shape (points, m), at a place of each, shape (m,)."""
    twice, b1, b2 = 2 * z, np.zeros_like(z), np.zeros_like(z)
    for c in coefficients[:0:-1]:
        b1, b2 = c + twice * b1 - b2, b1
    return np.asarray(coefficients[0] + z * b1 - b2)


@dataclass(frozen=True)
class Least:
    """Where functions are least, arrays of shape (m,).

    Attributes
    ----------
    panel : integer array
    z : array
        Place in the panel, from −1 to 1: −1 in the first and 1 in the last where a function is least at an end of the
        range. NaN where it is not a number.
    value, curvature : array
        The function and its second derivative by z.
    slope : array
        The function's derivative by z.
    falls : array
        The slope at the next point if the function falls on beyond it, at the end of the range or because the point
        was not the best; else 0.
    """

    panel: Places
    z: Array
    value: Array
    slope: Array
    falls: Array
    curvature: Array


def least(panels: Panels, values: Array, best: Places) -> Least:
    """The least of each function near the point at which it is least.

    Parameters
    ----------
    panels : Panels
    values : array, shape (panels.count * panels.points, m)
    best : integer array, shape (m,)
        The points.
    """
    panel, place = np.divmod(best, panels.points)
    ends = np.concatenate([[-1.0], panels.unit, [1.0]])
    low, high = ends[place], ends[place + 2]
    series = panels.series(values, panel)
    slope = derivative(series)
    beyond = np.where(value(slope, high) < 0, 1, np.where(value(slope, low) > 0, -1, 0))
    beyond[(panel + beyond < 0) | (panel + beyond >= panels.count)] = 0
    moved = np.flatnonzero(beyond)  # only between the outermost points of two panels
    if moved.size:
        panel = panel + beyond
        low, high = np.where(beyond > 0, -1.0, low), np.where(beyond < 0, 1.0, high)
        high, low = np.where(beyond > 0, ends[1], high), np.where(beyond < 0, ends[-2], low)
        series[:, moved] = panels.series(values[:, moved], panel[moved])
        slope[:, moved] = derivative(series[:, moved])
    at_low, at_high = value(slope, low), value(slope, high)
    z = roots(lambda z, places: value(slope[:, places], z), low, high, at_low, at_high, TOLERANCE)
    z = np.where(at_low >= 0, low, np.where(at_high <= 0, high, z))
    falls = np.where(at_high < 0, at_high, 0.0)
    return Least(panel, z, value(series, z), value(slope, z), falls, value(derivative(slope), z))


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
