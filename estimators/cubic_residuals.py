"""Residuals about a cubic drift: their squares with powers of the level, and their fourth powers, from sums.

With rates r = d/Δ and residuals e = Δ (r − f(x)) for a cubic f, sums of e² x^p and of e⁴/Δ² are polynomials in the
coefficients of f over the sums of Δ² r^q x^p: these are taken once, and serve every f.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import accumulate, pairwise

import numpy as np

from driftbook.estimators.windows import Array

HIGHEST = (12, 9, 6, 3, 0)  # power of the level with each power of the rate
TERMS = sum(highest + 1 for highest in HIGHEST)
_SPREAD = 8.0  # sums of four terms to the fourth power, over the sum of their fourth powers: 64 at most, 4 in the mean


def residual_terms(x: Array, d: Array, steps: Array) -> Iterator[Array]:
    """What is to be summed over the steps of a window, `TERMS` arrays in the order that `RateSums.of` takes."""
    rate = d / steps
    head = np.broadcast_to(steps * steps, d.shape)
    for highest in HIGHEST:
        term = head
        yield term
        for _ in range(highest):
            term = term * x
            yield term
        head = head * rate


@dataclass(frozen=True)
class Residuals:
    """Of windows.

    Attributes
    ----------
    squares : array, shape (7, m)
        Σ e² x^p for p = 0 … 6.
    fourth : array, shape (m,)
        Σ e⁴/Δ².
    size : array, shape (m,)
        What Σ e⁴/Δ² was taken from: its rounding error is a share of this.
    """

    squares: Array
    fourth: Array
    size: Array


@dataclass(frozen=True)
class RateSums:
    """Sums of Δ² r^q x^p over the steps of windows: for each q from 0 to 4 an array of shape (`HIGHEST`[q] + 1, m)."""

    sums: list[Array]

    @classmethod
    def of(cls, sums: Array) -> RateSums:
        """From sums of `residual_terms`, shape (`TERMS`, m)."""
        stops = accumulate(highest + 1 for highest in HIGHEST)
        return cls([sums[stop - highest - 1 : stop] for stop, highest in zip(stops, HIGHEST, strict=True)])

    def residuals(self, f: Array) -> Residuals:
        """Residuals about cubics, shape (4, m): each factor r of a sum in its turn becomes r − f(x)."""
        first, second, *rest = (_less(sums, more, f) for sums, more in pairwise(self.sums))
        squares, *higher = (_less(sums, more, f) for sums, more in pairwise([first, second, *rest]))
        third = [_less(sums, more, f) for sums, more in pairwise([squares, *higher])]
        (fourth,) = _less(third[0], third[1], f)
        size = self.sums[4][0] + _SPREAD * (f**4 * self.sums[0][::4]).sum(axis=0)
        return Residuals(squares, fourth, size)


def _less(sums: Array, more: Array, f: Array) -> Array:
    """Sums with a factor r − f(x), from those without it and those with the factor r."""
    found = more.copy()
    for k, each in enumerate(f):
        found -= each * sums[k : k + len(more)]
    return found
