"""Ornstein–Uhlenbeck windows of unequal steps: the pull of each, and the regression at equal steps that it amounts to.

With T the time of a window and Δ = T/n its mean step, estimates with the errors found here are those of a regression
of increments on levels at steps of Δ, as in `driftbook.estimators.regression`, with the slope e^{−kappa Δ} − 1 on the
level. So what holds for that regression, intervals above all, is used for any steps, and at equal steps it is the same.

Where a few long gaps hold much of T they tell less of the pull than as many equal steps would. The interval of kappa
is widened by that too: by the root of the information that steps of Δ would hold over the information there is.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.batches import Piece
from driftbook.estimators.gaps import FEW, Segments, by_length, by_octaves, by_range, distinct_lengths, segments_of
from driftbook.estimators.profile import NodeProfile, Spot, StepProfile, told, unbiased
from driftbook.estimators.pull import Pull
from driftbook.estimators.regression import ROUNDING, Mask, Regression
from driftbook.estimators.repair import GATHERED, Places
from driftbook.estimators.search import Times, look, settle
from driftbook.estimators.windows import Array

AT_ONCE = 1 << 12  # steps in the segments that are worked on at one time: with all nodes, what fits in the cache
FEW_WINDOWS = 512  # that are worked on at one time in any case
LOOK_POINTS = 4  # interpolation points an octave to look over the whole range: f is right to some 0.01
POINTS = 20  # points of the range up to the longest step
LONGEST_LOOK, LONGEST_PULL = 4.0, 4.5  # pull over that range up to which they serve: before, and after all is found


@dataclass(frozen=True)
class Solution:
    """What was found for some windows, arrays of shape (k,).

    Attributes
    ----------
    n : int
        Steps in a window.
    kappa : array
        NaN where the search did not settle.
    rising : array of bool
        Where the likelihood rises up to a pull that leaves no trace over the shortest step.
    spot : Spot
        Least squares there.
    duration, log_steps : array
        Time of all steps, and the sum of their logarithms.
    origin : array
        What values were measured from.
    kurtosis, widening : array or None
        Of the standardised residuals; White's over the ordinary variance of kappa.
    """

    n: int
    kappa: Array
    rising: Mask
    spot: Spot
    duration: Array
    log_steps: Array
    origin: Array
    kurtosis: Array | None = None
    widening: Array | None = None

    @property
    def theta(self) -> Array:
        """The level that values are pulled to."""
        return np.asarray(self.origin + self.spot.alpha / self.kappa)

    @property
    def sigma(self) -> Array:
        """The volatility."""
        return np.sqrt(self.spot.rss / self.n)

    @property
    def kappa_se(self) -> Array:
        """Standard error of kappa, from the expected information at the estimates, with n − 2 in the variance."""
        information = self.spot.information * ((self.n - 2) / self.spot.rss) + self.spot.variance_information
        return np.asarray(1 / np.sqrt(information))

    @property
    def theta_se(self) -> Array:
        """Standard error of theta: at given kappa, and by how theta moves with it."""
        spot = self.spot
        at_kappa = spot.rss / (self.n - 2) / spot.weight
        return np.sqrt(at_kappa + np.square((spot.lean + spot.alpha / self.kappa) * self.kappa_se)) / np.abs(self.kappa)

    @property
    def sigma_se(self) -> Array:
        """Standard error of sigma: at given kappa, and by how sigma moves with it."""
        of_kappa = 0.5 * self.spot.variance_slope * self.kappa_se
        return np.asarray(self.sigma * np.sqrt(1 / (2 * self.n) + np.square(of_kappa)))

    @property
    def loglik(self) -> Array:
        """Log-likelihood at the estimates."""
        n, R = self.n, self.spot.rss
        return np.asarray(-0.5 * (n * (np.log(R) + (np.log(2 * np.pi / n) + 1)) + self.log_steps - self.spot.log_q))


def from_sums(piece: Piece) -> Iterator[tuple[Places, Solution, Mask]]:
    """Solve the windows of a piece of unequal steps from sums over windows, some at a time.

    Yields
    ------
    places : integer array, shape (k,)
        Windows of the piece, counted over all of it. Windows in none of these have to be solved from themselves.
    solution : Solution
    sound : array of bool, shape (k,)
        False where sums lost digits or met a value that is not finite: what is said there means nothing.
    """
    whole = segments_of(piece)
    at_once = max(1, AT_ONCE // whole.steps.shape[1], FEW_WINDOWS // whole.windows)
    for start in range(0, len(whole.steps), at_once):
        segments = whole.take(slice(start, start + at_once))
        for places, solution, sound in _solved(segments):
            here = places + start * whole.windows
            yield here, _with_fourth(piece, here, solution) if piece.intervals else solution, sound


def _solved(segments: Segments) -> Iterator[tuple[Places, Solution, Mask]]:
    few = distinct_lengths(segments) <= FEW
    times = Times(
        segments.sums(segments.steps).reshape(-1), segments.shortest().reshape(-1), segments.longest().reshape(-1)
    )
    if few.any():
        places = np.flatnonzero(few)
        profile, own = by_length(segments, few).take(places), times.take(places)
        yield _settled(segments, places, profile, own, *look(profile, own))
    if few.all():
        return
    places = np.flatnonzero(~few)
    found = look(by_octaves(segments, LOOK_POINTS).take(places), times.take(places))
    best, first, last = found
    exponent = np.frexp(times.longest[places])[1]
    pull = np.where(best < first, 0.0, np.ldexp(1.0, 2 * best + exponent))
    usable = (pull <= LONGEST_LOOK) & (best < last)
    for each in np.unique(exponent[usable]):
        some = np.flatnonzero(usable & (exponent == each))
        profile, own = by_range(segments, int(each), POINTS).take(places[some]), times.take(places[some])
        part, solution, sound = _settled(segments, places[some], profile, own, *(array[some] for array in found))
        yield part, solution, sound & (np.abs(np.ldexp(solution.kappa, each)) <= LONGEST_PULL)


def _settled(
    segments: Segments,
    places: Places,
    profile: NodeProfile,
    times: Times,
    best: NDArray[np.int64],
    first: NDArray[np.int64],
    last: NDArray[np.int64],
) -> tuple[Places, Solution, Mask]:
    found = settle(profile, times, best, first, last)
    spot = profile.spot(found.kappa)
    origin = np.repeat(segments.origin, segments.windows)[places]
    log_steps = segments.sums(np.log(segments.steps)).reshape(-1)[places]
    solution = Solution(segments.n, found.kappa, found.rising, spot, times.duration, log_steps, origin)
    away = profile.XX[0].copy()
    for node in profile.XX[1:]:
        away += np.abs(node)
    largest = np.square(origin) + away / times.shortest  # no square of a value of the window is twice as large
    sound: Mask = spot.sound & (8 * segments.n * ROUNDING**2 * largest / times.shortest < spot.rss)
    return places, solution, sound | (found.rising & np.isfinite(away))


def _with_fourth(piece: Piece, places: Places, solution: Solution) -> Solution:
    """Add what depends on the fourth degree of residuals, in one pass through the windows."""
    windows, steps = piece.windows, piece.window_steps
    kurtosis, widening = np.empty(places.shape), np.empty(places.shape)
    at_once = max(1, GATHERED // (piece.lookback + 1))
    for start in range(0, places.size, at_once):
        part = slice(start, start + at_once)
        where = np.unravel_index(places[part], piece.shape)
        profile = step_profile(windows[where], steps[where], solution.origin[part])
        spot = solution.spot
        kurtosis[part], widening[part] = profile.fourth(solution.kappa[part], spot.alpha[part], spot.lean[part])
    return replace(solution, kurtosis=kurtosis, widening=widening)


def step_profile(windows: Array, steps: Array, origin: Array) -> StepProfile:
    """The profile of windows given one by one, shape (m, n + 1), with values measured from an origin of each."""
    x = np.ascontiguousarray(windows.T)
    return StepProfile(x[:-1] - origin, np.diff(x, axis=0), np.ascontiguousarray(steps.T))


def from_windows(windows: Array, steps: Array, *, fourth: bool) -> tuple[Solution, Array, Mask]:
    """Solve windows of finite values from themselves, without loss.

    Parameters
    ----------
    windows : array, shape (m, n + 1)
    steps : array, shape (m, n)
    fourth : bool
        Whether to add what depends on the fourth degree.

    Returns
    -------
    solution : Solution
        Of observations divided by `unit`.
    unit : array, shape (m,)
        A power of two a window, near its largest value.
    flat : array of bool, shape (m,)
        True where values do not vary, or residuals are no larger than the rounding of the values.
    """
    exponent = np.frexp(np.abs(windows).max(axis=1))[1] - 1
    scaled = np.ldexp(windows, -exponent[:, None])
    origin = scaled[:, :-1].mean(axis=1)
    profile = step_profile(scaled, steps, origin)
    times = Times(steps.sum(axis=1), steps.min(axis=1), steps.max(axis=1))
    found = settle(profile, times, *look(profile, times))
    spot = profile.spot(np.where(np.isnan(found.kappa), 0.0, found.kappa))
    least = np.fmin(spot.rss, profile.spot(np.zeros(len(steps))).rss)  # of a straight line at zero
    flat = ~(ROUNDING**2 * (np.square(scaled[:, :-1]) / steps).sum(axis=1) < least)
    log_steps = np.log(steps).sum(axis=1)
    solution = Solution(len(steps[0]), found.kappa, found.rising, spot, times.duration, log_steps, origin)
    if fourth:
        kurtosis, widening = profile.fourth(found.kappa, spot.alpha, spot.lean)
        solution = replace(solution, kurtosis=kurtosis, widening=widening)
    return solution, np.ldexp(1.0, exponent), flat


def as_regression(solution: Solution) -> Regression:
    """The regression at equal steps that has these estimates and their errors."""
    n, spot, step = solution.n, solution.spot, solution.duration / solution.n
    h = solution.kappa * step
    pull, growth = Pull(h), Pull(-h)
    variance = spot.rss / (n - 2)
    s2 = variance * step / pull.q
    spread = s2 / np.square(pull.decay * solution.kappa_se * step)
    gain = -np.expm1(-h)
    bend = growth.phi_slope + growth.phi  # ((e^h − 1)/h − 1)/h
    rss = s2 * (n - 2)
    return Regression(
        n,
        level=solution.origin - spot.alpha * step * bend - spot.lean * growth.phi,
        drift=growth.phi * (gain * spot.lean + step * pull.phi * spot.alpha),
        slope=-gain,
        spread=spread,
        rss=rss,
        robust=None if solution.widening is None else _widened(solution, solution.widening, step) * spread * rss / n,
        fourth=None if solution.kurtosis is None else solution.kurtosis * np.square(rss) / n,
        evenness=solution.duration * pull.tau / spot.weight,
        log_b=-h,
    )


def _widened(solution: Solution, widening: Array, step: Array) -> Array:
    """The square by which the interval of kappa is widened: for uneven variance, and for what long gaps do not tell."""
    spot, duration = solution.spot, solution.duration
    likely = unbiased(solution.kappa, duration)
    of_gaps = duration * told(likely, step) / (spot.told + 2 * np.maximum(likely, 0.0) * spot.variance_information)
    return np.asarray(np.maximum(widening, 1.0) * np.maximum(of_gaps, 1.0))
