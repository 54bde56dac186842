"""How large movements in a window are: their squares with powers of the level, and their kurtosis, from sums."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from driftbook.estimators.windows import Array

HIGHEST = 6
TERMS = 5 + HIGHEST + 1


def movement_terms(x: Array, d: Array, beyond: Array, steps: Array) -> Iterator[Array]:
    """What is to be summed over the steps of a window, `TERMS` arrays in the order that `Movements.of` takes.

    Parameters
    ----------
    x : array, shape (..., n)
        Values before each step, from any origin.
    d, beyond : array, shape (..., n)
        Increments, and what they exceed any constant rate by: the digits of the kurtosis depend on that rate.
    steps : array, broadcasts with them
    """
    square = beyond * beyond
    yield np.broadcast_to(steps * steps, d.shape)
    yield steps * beyond
    yield square
    yield square * beyond / steps
    yield np.square(square / steps)
    square = d * d
    for power in range(HIGHEST + 1):
        if power:
            square = square * x
        yield square


@dataclass(frozen=True)
class Movements:
    """Of windows; arrays of shape (m,).

    Attributes
    ----------
    squares : sequence of 7 array
        Σ d² x^p for p = 0 … 6.
    kurtosis : array
        Fourth moment of movements over their squared second, both about the mean drift and per step.
    share : array
        What is left of fourth powers when the mean drift is taken off: rounding errors are a share of all of them.
    """

    squares: Sequence[Array]
    kurtosis: Array
    share: Array

    @classmethod
    def of(cls, n: int, sums: Sequence[Array], duration: Array) -> Movements:
        """From sums of `movement_terms`, and the lengths of windows."""
        constant, linear, second, third, fourth, *squares = sums
        rate = linear / constant
        square = rate * rate
        left = fourth - 4 * rate * third + square * (6 * second - 3 * square * constant)
        kurtosis = left * np.square(duration / (second - square * constant)) / n
        return cls(squares, kurtosis, left / (fourth + 8 * square * square * constant))
