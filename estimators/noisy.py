"""The AR(1) regression of values with noise, at equal steps: a profile of one variable.

With Y = X + noise·ε and X an AR(1) of slope 1 − b, increments are d_i = c − b y_{i−1} + u_i, where u is a moving
average u_i = ε_i − a ε_{i−1}; it is stationary, as X_0 is known no better than y_0 tells. So given a, the rest is
generalised least squares, by sums of filtered increments and levels (`driftbook.estimators.filtered`); with R the sum
of squares and G = Σ_{k ≤ n} a^{2k} the likelihood is largest where

    f(a) = (n/2) ln R(a) + ½ ln(1 + G)

is least. Noise has a variance where a ≥ 0, and X one of its own where 1 − 1/a ≤ b ≤ 1 − a; at either end only noise is
left, about a curve that is given. The search is over t = −ln(1 − a) at Chebyshev points, where f, f at the two ends, b
and c are known exactly; in between they are polynomials.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators import chebyshev
from driftbook.estimators.chebyshev import Panels, Places, least
from driftbook.estimators.filtered import FilteredSums, filtered_sums
from driftbook.estimators.innovations import standardised_moments
from driftbook.estimators.regression import ROUNDING, Mask
from driftbook.estimators.windows import Array

WIDTH = 1.4  # of a panel in t, at most
POINTS, MORE_POINTS = 16, 32  # of a panel, and of one for windows that are searched again
LANES = 1 << 10  # nodes by segments that are worked on at one time
FEW, FEW_LANES = 16, 1 << 13  # windows in a segment, up to which more lanes fit in the processor's cache
SLICE = 16  # windows of a segment, of those lanes, whose profiles are worked out at one time
HALF_POINT = 1.92  # half the 95 % point of χ² with one degree of freedom
NOTHING = 1e-6  # a below this is none


def panels_of(n: int, points: int) -> Panels:
    """Those of windows of n steps: up to a = 1 − 1/(4n), which n steps can't tell from a = 1."""
    high = float(np.log(4 * n))
    return Panels(0.0, high, max(1, int(np.ceil(high / WIDTH))), points)


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

    def rss(self, slope: Array) -> Array:
        """R at a given b."""
        return np.asarray(self.increments + slope * (2 * self.products + slope * self.spread))

    def value(self, slope: Array) -> Array:
        """f at a given b."""
        return np.asarray(0.5 * self.n * np.log(self.rss(slope)) + self.log_det)


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
    all_faded = n * np.log(a)
    G1, G2 = -a * np.expm1(all_faded) / (1 - a), -a * a * np.expm1(2 * all_faded) / (1 - a * a)
    gain, share = 1 / (1 - a), 1 / (1 + G2)
    h1 = gain * (G1 - G2)
    weight = np.square(gain) * (n - 2 * G1 + G2) - share * h1 * h1
    (total_d, total_x), (h_d, h_x) = np.moveaxis(sums.total, 1, 0), np.moveaxis(sums.fading, 1, 0)
    drift = (gain * (total_d - h_d) - share * h1 * h_d) / weight
    level = (gain * (total_x - h_x) - share * h1 * h_x) / weight
    dd = sums.gram(0, 0) - share * h_d * h_d - weight * drift * drift
    dx = sums.gram(0, 1) - share * h_d * h_x - weight * drift * level
    xx = sums.gram(1, 1) - share * h_x * h_x - weight * level * level
    log_det = 0.5 * np.log1p(G2)
    return Profile(n, xx, np.broadcast_to(weight, xx.shape), level, drift, dd, dx, np.broadcast_to(log_det, xx.shape))


def determinant_slope(a: Array, n: int) -> Array:
    """The derivative of ½ ln(1 + G) = ½ ln((1 − a^{2n+2})/(1 − a²)) by a."""
    last = np.exp(2 * (n + 1) * np.log(a))
    return np.asarray(a / (1 - a * a) - (n + 1) * last / (a * (1 - last)))


@dataclass(frozen=True)
class Candidates:
    """What the search found, arrays of shape (m,).

    Attributes
    ----------
    a : array
        The moving-average root; NaN where values are not numbers.
    slope : array
        b.
    pure : array of bool
        Whether only noise is left.
    swings : array of bool
        Whether values swing from step to step more than noise explains: b above 1 raises the likelihood by more than
        half the 95 % point of χ² with one degree of freedom.
    value : array
        f there.
    curvature, slope_t, lean : array
        By t: the second derivative of f, the derivative of b, and that of c less theta times that of b, which is b
        times that of theta.
    """

    a: Array
    slope: Array
    pure: Mask
    swings: Mask
    value: Array
    curvature: Array
    slope_t: Array
    lean: Array

    def take(self, places: NDArray[np.intp]) -> Candidates:
        """Some of them."""
        return Candidates(*(getattr(self, each.name)[places] for each in fields(self)))


def candidates(
    sequences: Array, usual: Array, n: int, pivot: int, windows: int, tail: int, points: int = POINTS
) -> Candidates:
    """Search in every window of segments.

    Parameters
    ----------
    sequences : array, shape (steps, 2, segments)
        Increments less `usual`, and levels before them from an origin of each segment.
    usual : array, shape (segments,)
    n : int
        Steps in a window.
    pivot, windows, tail : int
        As in `filtered_sums`.
    points : int
        Of a panel.

    Returns
    -------
    Candidates
        Shape (segments * windows,), segments one after the other.
    """
    panels = panels_of(n, points)
    at_once = max(1, (LANES if windows > FEW else FEW_LANES) // panels.nodes.size)
    found = []
    for start in range(0, sequences.shape[2], at_once):
        part = slice(start, start + at_once)
        found.append(_search(panels, np.ascontiguousarray(sequences[..., part]), usual[part], n, pivot, windows, tail))
    return Candidates(*(np.concatenate([getattr(each, f.name) for each in found]) for f in fields(Candidates)))


def _search(panels: Panels, sequences: Array, usual: Array, n: int, pivot: int, windows: int, tail: int) -> Candidates:
    a = -np.expm1(-panels.nodes)[:, None]
    sums = filtered_sums(sequences, a, pivot, windows, tail, lead=0)
    free, falling, rising, slopes, constants = _tables(sums, a, n)
    constants += np.repeat(usual, windows)
    above, below = slopes > 1 - a, slopes < 1 - 1 / a
    best = _best(np.where(above, falling, np.where(below, rising, free)))
    found = _free(panels, free, slopes, constants, best)
    found.pure[(above | below)[best, np.arange(best.size)]] = True
    pure = np.flatnonzero(found.pure)
    if pure.size:
        _only_noise(panels, falling[:, pure], rising[:, pure], pure, found)
        found.swings[pure] = (slopes[0, pure] > 1) & (found.value[pure] - free[0, pure] > HALF_POINT)
    return found


def _best(values: Array) -> Places:
    """The places of the least values, which are numbers."""
    return np.asarray(np.nan_to_num(values, nan=np.inf).argmin(axis=0), dtype=np.intp)


def _only_noise(panels: Panels, falling: Array, rising: Array, places: Places, found: Candidates) -> None:
    """Where f is least at the ends of b."""
    at, other = (least(panels, values, _best(values)) for values in (falling, rising))
    t, t_other = panels.at(at.panel, at.z), panels.at(other.panel, other.z)
    grows = other.value < at.value
    t = np.where(grows, t_other, t)
    found.a[places] = a = -np.expm1(-t)
    found.slope[places] = np.where(grows, -np.exp(-t) / a, np.exp(-t))
    found.value[places] = np.where(grows, other.value, at.value)


def _free(panels: Panels, values: Array, slopes: Array, constants: Array, best: Places) -> Candidates:
    """Where f is least near the best points; only noise is left where it falls on beyond the points next to them."""
    at = least(panels, values, best)
    t = panels.at(at.panel, at.z)
    of_slope, of_constant = panels.series(slopes, at.panel), panels.series(constants, at.panel)
    b, c = chebyshev.value(of_slope, at.z), chebyshev.value(of_constant, at.z)
    b_t = chebyshev.value(chebyshev.derivative(of_slope), at.z) / panels.half
    c_t = chebyshev.value(chebyshev.derivative(of_constant), at.z) / panels.half
    a = -np.expm1(-t)
    a[t < NOTHING] = 0.0
    pure = (b > 1 - a) | (b < 1 - 1 / a) | ((at.falls < 0) & (t > 0))
    return Candidates(a, b, pure, np.zeros_like(pure), at.value, at.curvature / panels.half**2, b_t, c_t - c / b * b_t)


def _tables(sums: FilteredSums, a: Array, n: int) -> Array:
    """f, f with b = 1 − a and b = 1 − 1/a, b and c, shape (5, nodes, all windows), segment after segment."""
    windows, _, nodes, segments = sums.total.shape
    tables = np.empty((5, nodes, segments, windows))
    for start in range(0, windows, SLICE):
        part = slice(start, start + SLICE)
        fit = profile(FilteredSums(sums.half_gram[part], sums.total[part], sums.fading[part]), a, n)
        slope = fit.slope
        values = fit.value(slope), fit.value(1 - a), fit.value(1 - 1 / a), slope, fit.drift + slope * fit.level
        for table, each in zip(tables, values, strict=True):
            table[..., part] = np.moveaxis(each, 0, -1)
    return tables.reshape(5, nodes, -1)


@dataclass(frozen=True)
class Exact:
    """Least squares at what was found, by one more run through each window; arrays of shape (m,).

    Attributes
    ----------
    n : int
        Steps in a window.
    slope, theta : array
        b, and the level at which c − b y vanishes.
    away : array
        Distance from the weighted mean of levels to theta.
    spread, weight : array
        As in `Profile`.
    rss, fourth : array
        Sums of squares and of fourth powers of the standardised innovations.
    log_det : array
        ½ ln(1 + G).
    flat : array of bool
        Whether innovations are no larger than the rounding of the values.
    """

    n: int
    slope: Array
    theta: Array
    away: Array
    spread: Array
    weight: Array
    rss: Array
    fourth: Array
    log_det: Array
    flat: Mask

    @property
    def value(self) -> Array:
        """f."""
        return np.asarray(0.5 * self.n * np.log(self.rss) + self.log_det)

    @property
    def loglik(self) -> Array:
        """Log-likelihood."""
        return np.asarray(0.5 * self.n * (np.log(self.n / (2 * np.pi)) - 1) - self.value)


def exact(windows: Array, found: Candidates) -> Exact:
    """Least squares in windows given one by one, shape (m, n + 1), with means taken off first."""
    n = windows.shape[1] - 1
    sequences, drift, level = centred(windows)
    a = found.a
    fit = profile(filtered_sums(sequences, a[None], -1, 1, n, lead=0), a[None], n)
    slope = np.where(found.pure, found.slope, fit.slope[0, 0])
    about, rest = fit.level[0, 0], fit.drift[0, 0]
    residuals = (d - rest + slope * (x - about) for d, x in sequences)
    rss, fourth = standardised_moments(residuals, a, a, np.ones_like(a))
    away = (drift + rest) / slope
    flat = ~(rss > n * np.square(ROUNDING * np.abs(windows).max(axis=1)))
    return Exact(
        n,
        slope,
        level + about + away,
        away,
        fit.spread[0, 0],
        fit.weight[0, 0],
        rss,
        fourth,
        fit.log_det[0, 0],
        flat,
    )


def centred(windows: Array) -> tuple[Array, Array, Array]:
    """Increments and levels of windows less their means, shape (n, 2, m), and these means."""
    n = windows.shape[1] - 1
    x = np.ascontiguousarray(windows.T)
    sequences = np.empty((n, 2, len(windows)))
    np.subtract(x[:-1], x[0], out=sequences[:, 1])
    np.subtract(x[1:], x[:-1], out=sequences[:, 0])
    means = np.zeros(sequences.shape[1:])
    for row in sequences:  # one by one, so that bits do not depend on how many windows there are
        means += row
    means /= n
    sequences -= means
    return sequences, means[0], x[0] + means[1]
