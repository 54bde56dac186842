"""The pull at which a profile is least: a coarse look over its whole range, then a root of its derivative.

The look goes over powers of four, the same for all windows, of which each takes those from 1/(4 T) up to the first at
which even its shortest step holds a pull of `COARSEST`; below zero it goes as far as values can run away.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.profile import Profile
from driftbook.estimators.regression import Mask
from driftbook.estimators.solve import roots
from driftbook.estimators.windows import Array

Places = NDArray[np.intp]
Integers = NDArray[np.int64]

COARSEST = 8.0  # pull over the shortest step at which steps hold no trace of where they began
FARTHEST = 256.0  # of a negative pull: over the window,
FASTEST = 30.0  # and over its longest step
_HALVINGS = 40
TOLERANCE = 1e-13  # of asinh(kappa T): so that what follows a curve exactly is seen to


@dataclass(frozen=True)
class Times:
    """Lengths of time in windows, shape (m,): of all steps, of the shortest and of the longest."""

    duration: Array
    shortest: Array
    longest: Array

    def take(self, places: Places) -> Times:
        """The same for some of the windows."""
        return Times(self.duration[places], self.shortest[places], self.longest[places])


@dataclass(frozen=True)
class Found:
    """Pulls of windows, shape (m,); NaN where there is none, and whether that is for the profile rising to the end."""

    kappa: Array
    rising: Mask


@dataclass(frozen=True)
class _Bracket:
    """Points between which the profile has its least, and its derivatives there."""

    low: Array
    high: Array
    at_low: Array
    at_high: Array


def look(profile: Profile, times: Times) -> tuple[Integers, Integers, Integers]:
    """The power of four at which the profile is least, or one below the first where it is least at zero.

    Returns
    -------
    best, first, last : integer array, shape (m,)
    """
    first = np.floor(np.log2(0.25 / times.duration) / 2).astype(np.int64)
    last = np.ceil(np.log2(COARSEST / times.shortest) / 2).astype(np.int64)
    least, best = profile.value(np.zeros(1)), first - 1
    for power in range(int(first.min()), int(last.max()) + 1):
        value = profile.value(np.array([4.0**power]))
        better = (value < least) & (first <= power) & (power <= last)
        least, best = np.where(better, value, least), np.where(better, power, best)
    return best, first, last


def settle(profile: Profile, times: Times, best: Integers, first: Integers, last: Integers) -> Found:
    """The least of the profile near what `look` found."""
    rising = best == last
    kappa = np.full(best.shape, np.nan)
    inside = np.flatnonzero((best >= first) & ~rising)
    kappa[inside] = _solved(profile.take(inside), times.take(inside), best[inside], first[inside])
    at_zero = np.flatnonzero(best < first)
    kappa[at_zero] = _solved_near_zero(profile.take(at_zero), times.take(at_zero), first[at_zero])
    return Found(kappa, rising)


def _powers(exponents: Integers) -> Array:
    """Four to these powers."""
    return np.ldexp(1.0, 2 * exponents)


def _solved(profile: Profile, times: Times, best: Integers, first: Integers) -> Array:
    middle, above = _powers(best), _powers(best + 1)
    below = np.where(best > first, _powers(best - 1), 0.0)
    at_middle = profile.slope(middle)
    up = at_middle < 0
    other = np.where(up, above, below)
    bracket = _Bracket(middle, other, at_middle, profile.slope(other))
    _narrow(profile, bracket)
    return _roots(profile, times, bracket)


def _narrow(profile: Profile, bracket: _Bracket) -> None:
    """Halve brackets whose far end lies beyond a second rise, where the derivative has the sign of the near end.

    The profile is not lower at the far end, and falls from the near one, so that it has its least in between.
    """
    places = np.flatnonzero(bracket.at_low * bracket.at_high > 0)
    for _ in range(_HALVINGS):
        if not places.size:
            return
        some = profile.take(places)
        middle = 0.5 * (bracket.low[places] + bracket.high[places])
        slope = some.slope(middle)
        nearer = (some.value(middle) < some.value(bracket.low[places])) & (slope * bracket.at_low[places] > 0)
        bracket.low[places[nearer]], bracket.at_low[places[nearer]] = middle[nearer], slope[nearer]
        bracket.high[places[~nearer]], bracket.at_high[places[~nearer]] = middle[~nearer], slope[~nearer]
        places = places[bracket.at_low[places] * bracket.at_high[places] > 0]


def _solved_near_zero(profile: Profile, times: Times, first: Integers) -> Array:
    """On either side of zero; below it, going down by powers of four until the profile falls towards zero."""
    zero, step = np.zeros(first.shape), _powers(first)
    at_zero = profile.slope(zero)
    up = at_zero < 0
    bottom = -np.minimum(FARTHEST / times.duration, FASTEST / times.longest)
    low, at_low = zero, at_zero
    high, at_high = np.where(up, step, zero), np.where(up, profile.slope(step), at_zero)
    going = np.flatnonzero(~up)
    while going.size:
        point = np.maximum(np.where(low[going] == 0, -step[going], 4 * low[going]), bottom[going])
        slope = profile.take(going).slope(point)
        falls = slope < 0
        high[going], at_high[going] = low[going], at_low[going]
        low = _put(low, going, point)
        at_low = _put(at_low, going, slope)
        going = going[~falls & (point > bottom[going])]
    return _roots(profile, times, _Bracket(low, high, at_low, at_high))


def _put(values: Array, places: Places, new: Array) -> Array:
    values = values.copy()
    values[places] = new
    return values


def _roots(profile: Profile, times: Times, bracket: _Bracket) -> Array:
    """Roots of the derivative on the scale y = asinh(kappa T), on which it is nearly straight."""
    T = times.duration

    def slope(y: Array, places: Places) -> Array:
        return profile.take(places).slope(np.sinh(y) / T[places]) * np.cosh(y)

    a, b = np.arcsinh(bracket.low * T), np.arcsinh(bracket.high * T)
    found = roots(slope, a, b, bracket.at_low * np.cosh(a), bracket.at_high * np.cosh(b), TOLERANCE)
    return np.asarray(np.sinh(found) / T)
