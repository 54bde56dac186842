"""The AR(1) regression of values with noise, at equal steps: a profile of one variable.

With Y = X + noise·ε and X an AR(1) of slope 1 − b, increments are d_i = c − b y_{i−1} + u_i, where u is a moving
average u_i = ε_i − a ε_{i−1}; it is stationary, as X_0 is known no better than y_0 tells. So given a, the rest is
generalised least squares, by sums of filtered increments and levels (`driftbook.estimators.filtered`); with R the sum
of squares and G = Σ_{k ≤ n} a^{2k} the likelihood is largest where

    f(a) = (n/2) ln R(a) + ½ ln(1 + G)

is least. Noise has a variance where a ≥ 0, and X one of its own where 1 − 1/a ≤ b ≤ 1 − a; at either end only noise is
left, about a curve that is given. The search is over t = −ln(1 − a) at Chebyshev points, where f, f at the two ends, b
and the means that give c are known exactly; in between they are polynomials. One run through each window then gives the
likelihood at what was found, to all digits.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from itertools import pairwise

import numpy as np

from driftbook.estimators import chebyshev
from driftbook.estimators.chebyshev import Least, Panels, Places, least
from driftbook.estimators.edge import HALF_POINT
from driftbook.estimators.filtered import FilteredSums, filtered_sums
from driftbook.estimators.innovations import standardised_moments
from driftbook.estimators.noisy_profile import powers, profile, weight_of_one
from driftbook.estimators.regression import ROUNDING, Mask
from driftbook.estimators.windows import Array

WIDTH = 1.4  # of a panel in t, at most
POINTS, MORE_POINTS = 16, 32  # of a panel, and of one for windows that are searched again
LANES = 1 << 10  # nodes by segments that are worked on at one time
FEW, FEW_LANES = 16, 1 << 13  # windows in a segment, up to which more lanes fit in the processor's cache
SLICE = 16  # windows of a segment, of those lanes, whose profiles are worked out at one time
NOTHING = 1e-6  # a below this is none


def panels_of(n: int, points: int) -> Panels:
    """Those of windows of n steps: up to a = 1 − 1/(4n), which n steps can't tell from a = 1."""
    high = float(np.log(4 * n))
    return Panels(0.0, high, max(1, int(np.ceil(high / WIDTH))), points)


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
    level, drift : array
        Weighted means of levels and of increments.
    spread : array
        As in `Profile`.
    rise, curvature, slope_t, lean : array
        By t: the first and second derivative of f, the derivative of b, and that of c less theta times that of b, which
        is b times that of theta.
    """

    a: Array
    slope: Array
    pure: Mask
    swings: Mask
    value: Array
    level: Array
    drift: Array
    spread: Array
    rise: Array
    curvature: Array
    slope_t: Array
    lean: Array

    def take(self, places: Places) -> Candidates:
        """Some of them."""
        return Candidates(*(getattr(self, each.name)[places] for each in fields(self)))


@dataclass(frozen=True)
class Segments:
    """What is searched.

    Attributes
    ----------
    sequences : array, shape (steps, 2, segments)
        Increments less `usual`, and levels before them less `origin`.
    usual, origin : array, shape (segments,)
    """

    sequences: Array
    usual: Array
    origin: Array

    def take(self, part: slice) -> Segments:
        """Some of them."""
        return Segments(np.ascontiguousarray(self.sequences[..., part]), self.usual[part], self.origin[part])


def candidates(segments: Segments, n: int, pivot: int, windows: int, tail: int, points: int = POINTS) -> Candidates:
    """Search in every window of segments.

    Parameters
    ----------
    segments : Segments
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
    starts = range(0, segments.usual.size, at_once)
    found = [_search(panels, segments.take(slice(k, k + at_once)), n, pivot, windows, tail) for k in starts]
    return Candidates(*(np.concatenate([getattr(each, f.name) for each in found]) for f in fields(Candidates)))


def _search(panels: Panels, segments: Segments, n: int, pivot: int, windows: int, tail: int) -> Candidates:
    a = -np.expm1(-panels.nodes)[:, None]
    tables = _tables(filtered_sums(segments.sequences, a, pivot, windows, tail, lead=0), a, n)
    for table, pivots in ((tables.drift, segments.usual), (tables.level, segments.origin)):
        table += np.tile(pivots, windows)
    best = _best(tables.free)
    outside = _outside(tables.slope[best, np.arange(best.size)], a[best, 0])
    doubtful = np.flatnonzero(outside)
    if doubtful.size:
        best[doubtful] = _best_inside(tables.take(doubtful), a, n)
        outside[doubtful] = _outside(tables.slope[best[doubtful], doubtful], a[best[doubtful], 0])
    found = _free(panels, tables, best)
    found.pure[outside] = True
    pure = np.flatnonzero(found.pure)
    if pure.size:
        _only_noise(panels, tables.take(pure), a, n, pure, found)
        swings = (tables.slope[0, pure] > 1) & (found.value[pure] - tables.free[0, pure] > HALF_POINT)
        found.swings[pure] = swings
    by_segment = np.arange(best.size).reshape(windows, -1).T.ravel()
    return found.take(by_segment)


@dataclass(frozen=True)
class Tables:
    """At every point of the panels, arrays of shape (nodes, windows * segments), window after window.

    Attributes
    ----------
    free : array
        f.
    slope, level, drift, spread : array
        As in `Profile`.
    """

    free: Array
    slope: Array
    level: Array
    drift: Array
    spread: Array

    def at_ends(self, a: Array, n: int) -> tuple[Array, Array]:
        """f with b = 1 − a, and with b = 1 − 1/a."""
        log_det = 0.5 * np.log1p(powers(a, n)[1])
        rss = np.exp((self.free - log_det) * (2 / n))
        ends = (rss + self.spread * np.square(b - self.slope) for b in (1 - a, 1 - 1 / a))
        falling, rising = (0.5 * n * np.log(each) + log_det for each in ends)
        return falling, rising

    def take(self, places: Places) -> Tables:
        """For some of the windows."""
        return Tables(*(getattr(self, each.name)[:, places] for each in fields(self)))


def _tables(sums: FilteredSums, a: Array, n: int) -> Tables:
    windows, _, nodes, segments = sums.total.shape
    tables = np.empty((len(fields(Tables)), nodes, windows, segments))
    for start in range(0, windows, SLICE):
        part = slice(start, start + SLICE)
        fit = profile(FilteredSums(sums.half_gram[part], sums.total[part], sums.fading[part]), a, n)
        values = fit.value, fit.slope, fit.level, fit.drift, fit.spread
        for table, each in zip(tables, values, strict=True):
            table[:, part] = each.transpose(1, 0, 2)
    return Tables(*tables.reshape(len(tables), nodes, -1))


def _best(values: Array) -> Places:
    """The places of the least values, which are numbers."""
    return np.asarray(np.nan_to_num(values, nan=np.inf).argmin(axis=0), dtype=np.intp)


def _outside(b: Array, a: Array) -> Mask:
    """Whether X would have a variance below zero."""
    found: Mask = (b > 1 - a) | (b < 1 - 1 / a)
    return found


def _best_inside(tables: Tables, a: Array, n: int) -> Places:
    """The places of the least values where X has a variance or none."""
    falling, rising = tables.at_ends(a, n)
    return _best(np.where(tables.slope > 1 - a, falling, np.where(tables.slope < 1 - 1 / a, rising, tables.free)))


def _free(panels: Panels, tables: Tables, best: Places) -> Candidates:
    """Where f is least near the best points; only noise is left where it falls on beyond the points next to them."""
    at = least(panels, tables.free, best)
    t = panels.at(at.panel, at.z)
    (b, b_t), (level, level_t), (drift, drift_t) = (
        _with_slope(panels, table, at) for table in (tables.slope, tables.level, tables.drift)
    )
    spread = chebyshev.value(panels.series(tables.spread, at.panel), at.z)
    a = -np.expm1(-t)
    a[t < NOTHING] = 0.0
    pure = _outside(b, a) | ((at.falls < 0) & (t > 0))
    lean = drift_t + b * level_t - drift / b * b_t
    rise, curvature = at.slope / panels.half, at.curvature / panels.half**2
    return Candidates(a, b, pure, np.zeros_like(pure), at.value, level, drift, spread, rise, curvature, b_t, lean)


def _with_slope(panels: Panels, table: Array, at: Least) -> tuple[Array, Array]:
    """Values and derivatives by t of what is known at all points."""
    series = panels.series(table, at.panel)
    return chebyshev.value(series, at.z), chebyshev.value(chebyshev.derivative(series), at.z) / panels.half


def _only_noise(panels: Panels, tables: Tables, a: Array, n: int, places: Places, found: Candidates) -> None:
    """Where f is least at the ends of b."""
    at, other = (least(panels, values, _best(values)) for values in tables.at_ends(a, n))
    grows = other.value < at.value
    panel, z = np.where(grows, other.panel, at.panel), np.where(grows, other.z, at.z)
    t = panels.at(panel, z)
    found.a[places] = root = -np.expm1(-t)
    found.slope[places] = np.where(grows, -np.exp(-t) / root, np.exp(-t))
    found.value[places] = np.where(grows, other.value, at.value)
    for name in ("level", "drift", "spread"):
        getattr(found, name)[places] = chebyshev.value(panels.series(getattr(tables, name), panel), z)


@dataclass(frozen=True)
class Exact:
    """The likelihood at what was found, by a run through each window; arrays of shape (m,).

    Attributes
    ----------
    n : int
        Steps in a window.
    theta : array
        The level at which c − b y vanishes.
    away : array
        Distance from the weighted mean of levels to theta.
    weight : array
        As in `Profile`.
    rss, fourth : array
        Sums of squares and of fourth powers of the standardised innovations.
    log_det : array
        ½ ln(1 + G).
    flat : array of bool
        Whether innovations are no larger than the rounding of the values.
    """

    n: int
    theta: Array
    away: Array
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
    """The likelihood of windows given one by one, shape (m, n + 1)."""
    n, a, b = windows.shape[1] - 1, found.a, found.slope
    x = np.ascontiguousarray(windows.T)
    about = x[0] - found.level
    x -= x[0]
    residuals = (after - before - found.drift + b * (before + about) for before, after in pairwise(x))
    rss, fourth = standardised_moments(residuals, a, a, np.ones_like(a))
    away = found.drift / b
    G1, G2 = powers(a, n)
    flat = ~(rss > n * np.square(ROUNDING * np.abs(windows).max(axis=1)))
    weight = weight_of_one(a, n, G1, G2)
    return Exact(n, found.level + away, away, weight, rss, fourth, 0.5 * np.log1p(G2), flat)


def centred(windows: Array) -> Segments:
    """Windows, shape (m, n + 1), as segments of their own, with their means taken off."""
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
    return Segments(sequences, means[0], x[0] + means[1])
