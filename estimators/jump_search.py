"""The search for the largest maximum of a jump diffusion's likelihood, in windows in rolling position.

The likelihood has several maxima, and neighbouring windows share them. Anchors, every `STRIDE`th window of a block, are
fitted from all starting points of `driftbook.estimators.jump_starts`; the other windows start from the two largest
maxima of the last two anchors before them in their block. An anchor is a window of the past, so that later observations
move no fit; it is computed also where only later windows are wanted, and a window by itself is its own anchor.

That is no proof of the largest maximum. Of 400 windows of 250 daily steps, half simulated and half of the S&P 500 from
1990 to 2015, 99.5 % fitted by themselves came within 1e-6 of the best that 80 starts found, and 98.7 % of 400 others in
rolling position; those that did not fell short of it by 0.05 to 0.7, and nothing says so. A window fitted by itself and
the same in rolling position had the same maximum in 99 %.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.batches import Piece
from driftbook.estimators.jump_mixture import Increments, limits, standardised
from driftbook.estimators.jump_starts import condensed, starts
from driftbook.estimators.maximise import MOST_ROUNDS, Maximum, Places, maximise, maximise_from_each
from driftbook.estimators.regression import EPS
from driftbook.estimators.status import Status
from driftbook.estimators.windows import Array

STRIDE = 10  # windows from one anchor to the next
UNCHANGED = 0.05  # share of unchanged values above which a window is discrete
SAME = 1e-3  # difference of log-likelihoods below which two maxima count as one
ROUNDS = 25  # after which a window is lost, and climbs from every start
STARTS = 8  # points that are climbed from
NEAR, CLOSE = 1e-4, 1e-9  # gain that a last step may still promise, to tell maxima and to report one
AT_ONCE = 2048  # windows that climb at one time


@dataclass(frozen=True)
class Batch:
    """Windows of logarithms that can be fitted.

    Attributes
    ----------
    increments : Increments
        In units of their own.
    points : Increments
        Few that stand for them.
    mean, spread : array, shape (m,)
        These units: mean over a mean step, and jump-robust spread.
    dt : array, shape (m,)
        Mean step.
    log_values : array, shape (m,)
        Sum of the logarithms after the first, which the likelihood of the values loses.
    kurtosis : array, shape (m,)
    """

    increments: Increments
    points: Increments
    mean: Array
    spread: Array
    dt: Array
    log_values: Array
    kurtosis: Array

    @classmethod
    def of(cls, logs: Array, steps: Array | None, dt: Array) -> Batch:
        """From logarithms, shape (m, n + 1), their steps, (m, n) or None if equal, and their mean step."""
        increments, mean, spread = standardised(np.diff(logs, axis=1), steps)
        z, weight = increments.z, increments.weight
        squares = np.square(z) if weight is None else np.square(z) / weight
        kurtosis = np.square(squares).mean(axis=1) / np.square(squares.mean(axis=1))
        return cls(increments, condensed(increments), mean, spread, dt, logs[:, 1:].sum(axis=1), kurtosis)

    def take(self, places: Places) -> Batch:
        """Some of the windows."""
        each = self.mean, self.spread, self.dt, self.log_values, self.kurtosis
        return Batch(self.increments.take(places), self.points.take(places), *(values[places] for values in each))

    def of_rates(self, rates: Array) -> Array:
        """Points from rates of time, as `rates` gives them, moved into the bounds."""
        drift, variance, jumps, mean, of_jump = rates
        size = np.square(self.spread)
        point = np.stack(
            [
                ((drift + jumps * mean) * self.dt - self.mean) / self.spread,
                np.log(variance * self.dt / size),
                np.log(jumps * self.dt),
                mean / self.spread,
                np.log(of_jump / size),
            ]
        )
        bounds = limits(self.increments.z.shape[1])
        within: Array = np.clip(point, np.array(bounds.lower)[:, None], np.array(bounds.upper)[:, None])
        return within

    def rates(self, point: Array) -> Array:
        """Drift and variance of ln X, jumps per unit of time, and mean and variance of a jump, shape (5, m)."""
        b, log_v, log_L, mean, log_s = point
        size = np.square(self.spread)
        return np.stack(
            [
                (self.mean + (b - np.exp(log_L) * mean) * self.spread) / self.dt,
                np.exp(log_v) * size / self.dt,
                np.exp(log_L) / self.dt,
                mean * self.spread,
                np.exp(log_s) * size,
            ]
        )


class Anchors:
    """The fits of every `STRIDE`th window of each block, counted from its first: the best maximum, and another one.

    Parameters
    ----------
    whole : Piece
        Of logarithms, with all windows.
    skip : int
        Windows at the beginning of each block that are not wanted.
    equal : bool
        Whether steps are.
    """

    def __init__(self, whole: Piece, skip: int, equal: bool) -> None:
        self._windows, self._skip = whole.shape[-1], skip
        self._each = -(-self._windows // STRIDE)
        first = max(skip // STRIDE - 1, 0)
        offsets = np.arange(first, self._each) * STRIDE
        blocks = np.arange(int(np.prod(whole.shape[:2])))
        places = (blocks[:, None] * self._windows + offsets).reshape(-1)
        self._rates = np.full((2, 5, blocks.size * self._each), np.nan)
        for begin in range(0, places.size, AT_ONCE):
            part = places[begin : begin + AT_ONCE]
            batch, usable, _ = gathered(whole, part, equal)
            if usable.size:
                tops = _two_maxima(batch)
                rates = [np.where(top.converged, batch.rates(top.point), np.nan) for top in tops]
                self._rates[:, :, self._number(part[usable])] = np.stack(rates)

    def in_whole(self, places: Places) -> Places:
        """Places among all windows of what are places among the wanted ones."""
        wanted = self._windows - self._skip
        return places // wanted * self._windows + self._skip + places % wanted

    def climb(self, batch: Batch, places: Places) -> Maximum:
        """The maxima of windows from the best of what their last two anchors found; where lost, from every start."""
        number = self._number(places)
        before = np.where(places % self._windows >= STRIDE, number - 1, number)
        begin = [
            _better(batch, *(batch.of_rates(rates[:, each]) for each in (number, before))) for rates in self._rates
        ]
        found = _climbed(batch, _highest(batch, np.stack(begin))[0], ROUNDS)
        lost = np.flatnonzero(~found.converged)
        if lost.size:
            _put(found, lost, _two_maxima(batch.take(lost))[0])
        return found

    def _number(self, places: Places) -> Places:
        """Number of the anchor at or before each window."""
        number: Places = places // self._windows * self._each + places % self._windows // STRIDE
        return number


def _two_maxima(batch: Batch) -> tuple[Maximum, Maximum]:
    """The largest maximum of windows, and the next that is lower; not converged where there is none."""
    first, second = _highest(batch, starts(batch.points, STARTS))
    return _climbed(batch, first), _climbed(batch, second)


def _highest(batch: Batch, begin: Array) -> tuple[Array, Array]:
    """Where few points' likelihood is largest, near starts of shape (starts, 5, m), and the next maximum below it."""
    bounds = limits(batch.increments.z.shape[1])
    tops = maximise_from_each(batch.points.surface, begin, bounds, most_rounds=ROUNDS, close=NEAR)
    second = tops[1].point
    for top in tops[:0:-1]:
        second = np.where(top.converged & (top.value < tops[0].value - SAME), top.point, second)
    return tops[0].point, second


def _better(batch: Batch, a: Array, b: Array) -> Array:
    """Of two points a window the one with the larger likelihood of few points."""
    return np.where(_known(batch.points, b) > _known(batch.points, a), b, a)


def _climbed(batch: Batch, point: Array, most_rounds: int = MOST_ROUNDS) -> Maximum:
    bounds = limits(batch.increments.z.shape[1])
    return maximise(batch.increments.surface, point, bounds, most_rounds=most_rounds, close=CLOSE)


def _known(increments: Increments, point: Array) -> Array:
    """Log-likelihoods; −∞ where there is no point."""
    there = np.flatnonzero(np.isfinite(point).all(axis=0))
    values = np.full(point.shape[1], -np.inf)
    values[there] = increments.take(there).loglik(point[:, there])
    return values


def _put(found: Maximum, places: Places, better: Maximum) -> None:
    """Put maxima in the places of others."""
    found.point[:, places], found.value[places] = better.point, better.value
    found.gradient[:, places], found.hessian[:, :, places] = better.gradient, better.hessian
    found.converged[places], found.at_bound[:, places] = better.converged, better.at_bound


def gathered(whole: Piece, places: Places, equal: bool) -> tuple[Batch, Places, NDArray[np.int8]]:
    """Windows that can be fitted, which of the places they are, and the status of all."""
    at = np.unravel_index(places, whole.shape)
    logs = whole.windows[at]
    steps = None if equal else whole.window_steps[at]
    dt = whole.of_windows(whole.dt)[places] if steps is None else steps.mean(axis=1)
    status = _status(logs)
    usable = np.flatnonzero(status == Status.OK)
    return Batch.of(logs[usable], None if steps is None else steps[usable], dt[usable]), usable, status


def _status(logs: Array) -> NDArray[np.int8]:
    """Out of range, flat or discrete, or fit for a fit."""
    n = logs.shape[1] - 1
    increments = np.diff(logs, axis=1)
    varies = np.ptp(increments, axis=1) > 4 * EPS * np.maximum(1.0, np.abs(logs).max(axis=1))
    unchanged = (increments == 0).sum(axis=1) > UNCHANGED * n
    out = ~np.isfinite(logs).all(axis=1)
    return np.select([out, ~varies, unchanged], [Status.OUT_OF_RANGE, Status.FLAT, Status.DISCRETE], Status.OK).astype(
        np.int8
    )
