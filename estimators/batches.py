"""Windows by the batch: cuts series into pieces that stay in the processor's cache, and puts the answers together."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.windows import Array, Layout, segments, whole_blocks

PIECE = 1 << 16  # observations in the segments of one piece: its arrays, of half a megabyte, mostly stay in cache
SHARED_PIECE = 1 << 17  # the same with several threads, which hand over the interpreter at every operation


@dataclass(frozen=True)
class Piece:
    """Some segments of some series, as a model is asked to fit them.

    Attributes
    ----------
    x : array, shape (rows, blocks * lookback + offsets)
        Observations; see `driftbook.estimators.windows`.
    dt : array, shape (rows, blocks)
        Step of each segment.
    lookback : int
        Steps in a window.
    offsets : int
        Windows in a block.
    intervals : bool
        Whether intervals are wanted.
    """

    x: Array
    dt: Array
    lookback: int
    offsets: int
    intervals: bool

    @property
    def shape(self) -> tuple[int, int, int]:
        """Rows, blocks, and windows in a block: the shape of an answer."""
        return (*self.dt.shape, self.offsets)

    @property
    def windows(self) -> Array:
        """Observations of each window, shape (rows, blocks, offsets, lookback + 1); a view."""
        cut = segments(self.x, self.lookback, self.lookback + self.offsets)
        return np.lib.stride_tricks.sliding_window_view(cut, self.lookback + 1, axis=-1)


@dataclass(frozen=True)
class Answer:
    """A model's answer to a piece: arrays with `Piece.shape`, or with one axis for all three."""

    columns: Mapping[str, Array]
    status: NDArray[np.int8]


T = TypeVar("T", bound=np.generic)

Kernel = Callable[[Piece], Answer]


def in_pieces(
    kernel: Kernel, x: Array, dt: Array, lookback: int, *, intervals: bool, threads: int = 1
) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """Let a kernel fit every window of every series.

    Parameters
    ----------
    kernel : callable
        Fits one piece. Each of its windows must depend on its own observations and its place in the segment only.
    x : array, shape (rows, n_obs)
        Series, with at least one row and one window.
    dt : array, shape (rows, n_obs - 1)
        Steps, equal in each row (a broadcast view will do).
    lookback : int
        Steps in a window.
    intervals : bool
        Passed on.
    threads : int
        Pieces that are worked on at one time. The bits do not depend on it.

    Returns
    -------
    columns : dict of str to array, shape (rows, windows)
    status : int8 array, shape (rows, windows)
    """
    layout = Layout(lookback, x.shape[1] - lookback)
    shape = x.shape[0], layout.n_windows
    cuts = list(_cuts(x.shape[0], layout, PIECE if threads == 1 else SHARED_PIECE))

    def answer(cut: _Cut) -> Answer:
        with np.errstate(all="ignore"):
            return kernel(_piece(cut, x, dt, layout, intervals=intervals))

    columns: dict[str, Array] = {}
    status = np.empty(shape, dtype=np.int8)
    for cut, found in zip(cuts, _each(answer, cuts, threads), strict=True):
        place = cut.rows, slice(cut.first * lookback, min(cut.last * lookback, layout.n_windows))
        status[place] = _in_rows(found.status, status[place])
        for name, values in found.columns.items():
            if name not in columns:
                columns[name] = np.empty(shape)
            columns[name][place] = _in_rows(values, status[place])
    return columns, status


@dataclass(frozen=True)
class _Cut:
    rows: slice
    first: int
    last: int


def _cuts(rows: int, layout: Layout, size: int) -> Iterator[_Cut]:
    """Rows and range of blocks of each piece: many blocks of one series, or several whole series."""
    blocks = max(1, min(layout.n_blocks, size // layout.segment))
    at_once = max(1, size // (layout.segment * layout.n_blocks))
    for row in range(0, rows, at_once):
        for first in range(0, layout.n_blocks, blocks):
            yield _Cut(slice(row, min(row + at_once, rows)), first, min(first + blocks, layout.n_blocks))


def _piece(cut: _Cut, x: Array, dt: Array, layout: Layout, *, intervals: bool) -> Piece:
    pivots = slice((cut.first + 1) * layout.lookback - 1, cut.last * layout.lookback, layout.lookback)
    part = whole_blocks(x[cut.rows], layout, cut.first, cut.last)
    return Piece(part, dt[cut.rows, pivots], layout.lookback, layout.offsets, intervals)


def _in_rows(values: NDArray[T], place: NDArray[np.int8]) -> NDArray[T]:
    """Lay the blocks of a series side by side and drop what lies beyond its last window."""
    rows, windows = place.shape
    return values.reshape(rows, -1)[:, :windows]


def _each(work: Callable[[_Cut], Answer], cuts: list[_Cut], threads: int) -> Iterator[Answer]:
    if threads == 1:
        yield from map(work, cuts)
        return
    with ThreadPoolExecutor(threads) as pool:
        yield from pool.map(work, cuts)
