"""Equal and unequal steps: which windows have which, and how each is fitted by the code that suits it.

Whether the steps of a window are equal is asked of the window alone, so that its fit does not depend on steps before
or after it.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from driftbook.estimators.batches import Answer, Kernel, Piece
from driftbook.estimators.regression import Mask
from driftbook.estimators.windows import window_maxima

EQUAL_STEPS = 1e-9  # steps count as equal when they differ by no more than this share


def by_steps(even: Kernel, uneven: Kernel) -> Kernel:
    """A kernel that fits windows of equal steps by `even`, and others by `uneven`."""

    def fit_piece(piece: Piece) -> Answer:
        if piece.steps is None:
            return even(piece)
        equal = has_equal_steps(piece).reshape(-1)
        if not equal.any():
            return uneven(piece)
        of_equal = even(replace(piece, steps=None))
        return of_equal if equal.all() else _merged(equal, of_equal, uneven(piece))

    return fit_piece


def has_equal_steps(piece: Piece) -> Mask:
    """Whether the steps of each window are equal but for rounding, shape `Piece.shape`."""
    if piece.steps is None:
        return np.ones(piece.shape, dtype=np.bool_)
    steps = piece.by_step(piece.steps)
    longest = window_maxima(steps, piece.lookback, piece.skip)
    shortest = -window_maxima(-steps, piece.lookback, piece.skip)
    equal: Mask = longest - shortest <= EQUAL_STEPS * shortest
    return equal


def _merged(first: Mask, a: Answer, b: Answer) -> Answer:
    """Answer a where `first`, b elsewhere."""
    columns = {name: np.where(first, a.columns[name].reshape(-1), b.columns[name].reshape(-1)) for name in a.columns}
    return Answer(columns, np.where(first, a.status.reshape(-1), b.status.reshape(-1)).astype(np.int8))
