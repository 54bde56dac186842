"""What is not known of a cubic drift and its volatility: standard errors, bias, and 95 % intervals.

Standard errors are those of the observed information or of White's (1980) sandwich, whichever are larger; the latter
has the squares of movements in place of those of residuals, all brought to the size of sigma². Intervals of linear
functions of the drift's coefficients have the quantiles of `driftbook.estimators.drift_law` in place of ± 1.96. The
bias that they are looked up with follows from sums of powers up to ten: with H_p = Σ Δ ∫ t^p, G the inverse of the
matrix of H_{j+k}, and T the length of the window,

    b = −2 G v,    v_k = Σ_{l,m} G_{lm} H_{k+l+m+1}/(l + 1) − H_{k+1}/((k + 1) T).

A place at which the drift vanishes is inverted from the test that it does (Fieller 1954), on the drift's tangent: its
interval has no end on a side where the slope is not sure, or where it is farther off than the window is wide.

References
----------
White, H. (1980), A heteroskedasticity-consistent covariance matrix estimator, Econometrica 48, 817–838. Fieller, E. C.
(1954), Some problems in interval estimation, J. Royal Statistical Society B 16, 175–185.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from statistics import NormalDist

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.drift_law import reaches
from driftbook.estimators.movements import Movements
from driftbook.estimators.polynomial_drift import SIZE, Optimum, Sums
from driftbook.estimators.segment_powers import mean_share
from driftbook.estimators.symmetric import Factor, factor
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]
Row = Sequence[Array]
"""By what coefficients enter a function of them: four arrays of one shape, (m,) or (k, m)."""

MORE = 4
"""Sums of powers beyond those of the likelihood."""

_TWO_SIDED = NormalDist().inv_cdf(0.975)


def dot(row: Row, values: Sequence[Array] | Array) -> Array:
    """Σ row_k values_k."""
    total = row[0] * values[0]
    for left, right in zip(row[1:], values[1:], strict=True):
        total = total + left * right
    return total


@dataclass(frozen=True)
class Reach:
    """How far the 95 % interval of a function of the drift reaches below and above its estimate."""

    below: Array
    above: Array


@dataclass(frozen=True)
class Uncertainty:
    """Of the coefficients of windows, in the coordinate of their sums; arrays of shape (m,).

    Attributes
    ----------
    n : int
        Steps in a window.
    factor : Factor
        Of the information on the coefficients, times sigma².
    variance, curvature, response : array
        As in `Optimum`.
    middle : list of 7 array
        Σ e² x^p, of the sandwich.
    bias : list of 4 array
    weight, strength : array
        B and Q of `driftbook.estimators.drift_law`.
    """

    n: int
    factor: Factor
    variance: Array
    curvature: Array
    response: Array
    middle: list[Array]
    bias: list[Array]
    weight: Array
    strength: Array

    @classmethod
    def of(
        cls, sums: Sums, optimum: Optimum, drift: Sequence[Array] | Array, movements: Movements, higher: Sequence[Array]
    ) -> Uncertainty:
        """With the whole drift, and the sums of `likelihood_terms` that `more` asks for."""
        u, duration = optimum.variance, sums.plain[0]
        solved = factor(sums.matrix(u), SIZE)
        size = u * duration / movements.squares[0]
        middle = [each * size for each in movements.squares]
        powers = [*sums.plain, *(total * mean_share(p) for p, total in enumerate(higher, start=7))]
        plain = factor(lambda i, j: powers[i + j], SIZE)
        v = _towards(plain, powers)
        bias = [-2 * each for each in plain.solve(v)]
        weight = np.sqrt(np.maximum(-2 * dot(bias, v) / u, 0.0))
        strength = dot(_square(drift), sums.plain) / u
        return cls(sums.n, solved, u, optimum.curvature, optimum.response, middle, bias, weight, strength)

    def take(self, places: Places) -> Uncertainty:
        """Of some of the windows."""
        return Uncertainty(
            self.n,
            self.factor.take(places),
            self.variance[places],
            self.curvature[places],
            self.response[:, places],
            [each[places] for each in self.middle],
            [each[places] for each in self.bias],
            self.weight[places],
            self.strength[places],
        )

    def covariance(self, weights: Row, other: Row) -> Array:
        """By the information, of two functions: one by `Factor.solve` of its row, one by its row."""
        return self.variance * dot(other, weights)

    def errors(self, row: Row, weights: Row) -> Array:
        """Standard errors of a function of the coefficients, given by its row and `Factor.solve` of that."""
        by_information = self.variance * dot(row, weights)
        sandwich = np.zeros_like(by_information)
        for j, left in enumerate(weights):
            along = left * self.middle[2 * j]
            for k in range(j):
                along += 2 * weights[k] * self.middle[j + k]
            along *= left
            sandwich += along
        with_sigma = np.square(dot(row, self.response)) / self.curvature
        return np.asarray(np.sqrt((np.maximum(by_information, sandwich) + with_sigma) * (self.n / (self.n - SIZE))))

    def reach(self, row: Row, errors: Array) -> Reach:
        """Of a function of the coefficients, in its unit."""
        bias = dot(row, self.bias)
        lower, upper = reaches(self.strength, np.abs(bias) / (errors * self.weight))
        up = bias > 0
        return Reach(errors * np.where(up, upper, -lower), errors * np.where(up, -lower, upper))


def _square(p: Sequence[Array] | Array) -> list[Array]:
    """Coefficients of the square of a cubic."""
    middle, last = p[1] * p[2] + p[0] * p[3], p[2] * p[3]
    low = [p[0] * p[0], 2 * p[0] * p[1], p[1] * p[1] + 2 * p[0] * p[2]]
    return [*low, 2 * middle, p[2] * p[2] + 2 * p[1] * p[3], 2 * last, p[3] * p[3]]


def _towards(plain: Factor, powers: Sequence[Array]) -> list[Array]:
    """The vector v of the bias."""
    G = plain.inverse()
    by_order = []
    for order in range(2 * SIZE - 1):
        pairs = [(i, order - i) for i in range(SIZE) if 0 <= order - i <= i]
        shares = [mean_share(i) + mean_share(j) if i != j else mean_share(i) for i, j in pairs]
        by_order.append(sum(share * G[i][j] for share, (i, j) in zip(shares, pairs, strict=True)))
    found = []
    for k in range(SIZE):
        total = powers[k + 1] * (-mean_share(k) / powers[0])
        for order, each in enumerate(by_order, start=k + 1):
            total += each * powers[order]
        found.append(total)
    return found


def where_it_vanishes(uncertainty: Uncertainty, slope: Array, z: Array, width: Array) -> tuple[Array, Array, Array]:
    """Standard errors and ends of the intervals of places, shape (k, m), at which drifts vanish with a slope.

    Parameters
    ----------
    uncertainty : Uncertainty
    slope, z : array, shape (k, m)
        Slope of the drift, and the place.
    width : array, shape (m,)
        Of the range of values, beyond which the tangent says nothing.

    Returns
    -------
    errors, below, above : array, shape (k, m)
        How far the interval reaches on either side; NaN where it has no end.
    """
    one = np.ones_like(z)
    value, by_place = (one, z, z * z, z * z * z), (np.zeros_like(z), one, 2 * z, 3 * z * z)
    weights = uncertainty.factor.solve(value)
    errors = uncertainty.errors(value, weights)
    reach = uncertainty.reach(value, errors)
    own = uncertainty.covariance(weights, value)
    mixed = uncertainty.covariance(weights, by_place) / own
    of_slope = uncertainty.covariance(uncertainty.factor.solve(by_place), by_place) / own
    falls = slope < 0
    steep = np.abs(slope)
    below = _far(steep, np.where(falls, reach.below, reach.above), -mixed, of_slope)
    above = _far(steep, np.where(falls, reach.above, reach.below), mixed, of_slope)
    below, above = (np.where(each <= width, each, np.nan) for each in (below, above))
    return errors / steep, below, above


def _far(slope: Array, reach: Array, mixed: Array, of_slope: Array) -> Array:
    """Where slope · far = reach · √(1 + 2 mixed far + of_slope far²); NaN where it never is."""
    square = np.square(np.maximum(reach, 0.0))
    rest, middle = slope * slope - square * of_slope, square * mixed
    return np.where(rest > 0, (middle + np.sqrt(middle * middle + rest * square)) / rest, np.nan)


def of_sigma(n: int, sigma: Array, optimum: Optimum, kurtosis: Array) -> dict[str, Array]:
    """Standard error and interval, on ln sigma: centred for the parameters of the drift, and wider with fat tails."""
    by_information = 0.25 / optimum.curvature
    own = np.maximum(1 / (2 * (n - SIZE)), (kurtosis - 1) / (4 * n))
    reach = np.exp(_TWO_SIDED * np.sqrt(own + np.maximum(by_information - 1 / (2 * n), 0.0)))
    centre = sigma * np.sqrt(n / (n - SIZE))
    return {"sigma_se": sigma * np.sqrt(by_information), "sigma_lower": centre / reach, "sigma_upper": centre * reach}
