"""What running sums can't vouch for, fitted again from the windows themselves."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.batches import Piece
from driftbook.estimators.status import Status
from driftbook.estimators.windows import Array

GATHERED = 1 << 17  # observations in the windows that are repaired at one time: 1 MB

Columns = dict[str, Array]
Statuses = NDArray[np.int8]
Places = NDArray[np.intp]


def repair(
    piece: Piece,
    doubtful: Places,
    fit: Callable[[Array, Array], tuple[Columns, Statuses]],
    columns: Columns,
    status: Statuses,
) -> None:
    """Fit doubtful windows one by one, and put what is found in their places.

    Parameters
    ----------
    piece : Piece
    doubtful : integer array, shape (m,)
        Places of windows in the piece, counted over all its rows, blocks and offsets.
    fit : callable
        Of windows of finite values, shape (k, n + 1), and their steps, (k, n): columns and statuses, shape (k,).
    columns, status : arrays of one dimension
        Of all windows of the piece; changed in place. A window with a value that is not finite is out of range.
    """
    windows, steps = piece.windows, piece.window_steps
    at_once = max(1, GATHERED // (piece.lookback + 1))
    for start in range(0, doubtful.size, at_once):
        part = doubtful[start : start + at_once]
        where = np.unravel_index(part, piece.shape)
        gathered = windows[where]
        finite = np.isfinite(np.abs(gathered).max(axis=1))
        status[part[~finite]] = Status.OUT_OF_RANGE
        blank(columns, part[~finite])
        if not finite.any():
            continue
        there = tuple(index[finite] for index in where)
        found, status[part[finite]] = fit(gathered[finite], steps[there])
        for name, values in columns.items():
            values[part[finite]] = found[name]


def blank(columns: Columns, where: Places) -> None:
    """NaN in every column at these places."""
    for values in columns.values():
        values[where] = np.nan
