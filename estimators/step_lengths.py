"""Steps of windows, with their lengths where these are few, found out once for all runs of a filter."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.windows import Array

FEW = 16  # lengths of step of which each is worked out once


@dataclass(frozen=True)
class StepLengths:
    """Steps of m windows.

    Attributes
    ----------
    steps : array, shape (n, m)
        Time first.
    duration : array, shape (m,)
        The time of each window.
    lengths : array, shape (k,)
        All lengths, in rising order.
    kinds : integer array, shape (n, m), or None
        Which of them each step has; None where there are more than `FEW`.
    """

    steps: Array
    duration: Array
    lengths: Array
    kinds: NDArray[np.intp] | None

    @classmethod
    def of(cls, steps: Array) -> StepLengths:
        """Of steps, shape (n, m)."""
        lengths = np.unique(steps)
        kinds = np.searchsorted(lengths, steps) if lengths.size <= FEW else None
        duration = np.zeros(steps.shape[1])
        for each in steps:  # one by one, so that bits do not depend on how many windows there are
            duration += each
        return cls(steps, duration, lengths, kinds)

    @property
    def n(self) -> int:
        """Steps in a window."""
        return len(self.steps)

    def take(self, places: NDArray[np.intp]) -> StepLengths:
        """Those of some of the windows."""
        kinds = None if self.kinds is None else self.kinds[:, places]
        return StepLengths(self.steps[:, places], self.duration[places], self.lengths, kinds)

    def places(self) -> NDArray[np.intp]:
        """Place of each step's length in a table of shape (k, m), by step, where lengths are few."""
        m = self.duration.size
        return np.asarray(self.kinds) * m + np.arange(m)
