"""Windows by the batch: cuts series into pieces that stay in the processor's cache, and puts the answers together."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.windows import Array, Layout, segments, whole_blocks, window_sums

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
        Step of each segment: the one at its pivot.
    steps : array, shape (rows, blocks * lookback + offsets - 1), or None
        Every step; None where the steps of each series are equal.
    lookback : int
        Steps in a window.
    offsets : int
        Windows in a block.
    skip : int
        Windows at the beginning of each block that are not wanted.
    intervals : bool
        Whether intervals are wanted.
    """

    x: Array
    dt: Array
    steps: Array | None
    lookback: int
    offsets: int
    skip: int
    intervals: bool

    @property
    def shape(self) -> tuple[int, int, int]:
        """Rows, blocks, and wanted windows in a block: the shape of an answer."""
        return (*self.dt.shape, self.offsets - self.skip)

    @property
    def pivot(self) -> int:
        """Place of the step, in what `by_step` gives, that belongs to every window."""
        return self.lookback - 1 - self.skip

    @property
    def windows(self) -> Array:
        """Observations of each window, shape (rows, blocks, windows, lookback + 1); a view."""
        return self._in_windows(self.x, self.lookback + 1)

    @property
    def window_steps(self) -> Array:
        """Steps of each window, shape (rows, blocks, windows, lookback); a view."""
        if self.steps is None:
            return np.broadcast_to(self.dt[..., None, None], (*self.shape, self.lookback))
        return self._in_windows(self.steps, self.lookback)

    def by_step(self, values: Array) -> Array:
        """The part of each segment that wanted windows see of values by step, shape (rows, blocks, steps); a view."""
        return segments(values, self.lookback, self.lookback + self.offsets - 1)[..., self.skip :]

    def by_window(self, values: Array) -> Array:
        """Values that belong to a window's first observation, shape (rows, blocks, windows); a view."""
        return segments(values, self.lookback, self.offsets)[:, : self.dt.shape[1], self.skip :]

    def sums(self, terms: Array) -> Array:
        """Sums over every window of what `by_step` gives, or terms made of it."""
        return window_sums(terms, self.lookback, self.skip)

    def of_windows(self, values: Array) -> Array:
        """Values of each segment, shape (rows, blocks), for each of its windows in one dimension."""
        return np.repeat(values, self.shape[-1])

    def _in_windows(self, values: Array, width: int) -> Array:
        cut = segments(values, self.lookback, width + self.offsets - 1)[..., self.skip :]
        return np.lib.stride_tricks.sliding_window_view(cut, width, axis=-1)


@dataclass(frozen=True)
class Answer:
    """A model's answer to a piece: arrays with `Piece.shape`, or with one axis for all three.

    Which columns there are may depend on `Piece.lookback` and `Piece.intervals`, and on nothing else of the piece.
    """

    columns: Mapping[str, Array]
    status: NDArray[np.int8]


T = TypeVar("T", bound=np.generic)

Kernel = Callable[[Piece], Answer]


def in_pieces(
    kernel: Kernel, x: Array, steps: Array, lookback: int, *, intervals: bool, threads: int = 1, first: int = 0
) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """Let a kernel fit every wanted window of every series.

    Parameters
    ----------
    kernel : callable
        Fits one piece. Each of its windows must depend on its own observations and its place in the segment only.
    x : array, shape (rows, n_obs)
        Series, with at least one row and one wanted window.
    steps : array, shape (rows, n_obs - 1) or (rows, 1)
        Every step, or the one step of each series.
    lookback : int
        Steps in a window.
    intervals : bool
        Passed on.
    threads : int
        Pieces that are worked on at one time. The bits do not depend on it.
    first : int
        The first wanted window. The bits do not depend on it.

    Returns
    -------
    columns : dict of str to array, shape (rows, windows - first)
    status : int8 array, shape (rows, windows - first)
    """
    layout = Layout(lookback, x.shape[1] - lookback)
    shape = x.shape[0], layout.n_windows - first
    cuts = list(_cuts(x.shape[0], layout, first, PIECE if threads == 1 else SHARED_PIECE))

    def answer(cut: _Cut) -> Answer:
        with np.errstate(all="ignore"):
            return kernel(_piece(cut, x, steps, layout, intervals=intervals))

    columns: dict[str, Array] = {}
    status = np.empty(shape, dtype=np.int8)
    for cut, found in zip(cuts, _each(answer, cuts, threads), strict=True):
        begin = cut.first * lookback + cut.skip - first
        place = cut.rows, slice(begin, min(cut.last * lookback, layout.n_windows) - first)
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
    skip: int


def _cuts(rows: int, layout: Layout, first: int, size: int) -> Iterator[_Cut]:
    """Rows and range of blocks of each piece: many blocks of one series, or several whole series.

    A block of which not all windows are wanted makes pieces of its own.
    """
    block, skip = divmod(first, layout.lookback)
    if skip:
        yield from _in_cuts(rows, layout, block, block + 1, skip, size)
        block += 1
    yield from _in_cuts(rows, layout, block, layout.n_blocks, 0, size)


def _in_cuts(rows: int, layout: Layout, begin: int, end: int, skip: int, size: int) -> Iterator[_Cut]:
    if begin == end:
        return
    blocks = max(1, min(end - begin, size // layout.segment))
    at_once = max(1, size // (layout.segment * (end - begin)))
    for row in range(0, rows, at_once):
        for first in range(begin, end, blocks):
            yield _Cut(slice(row, min(row + at_once, rows)), first, min(first + blocks, end), skip)


def _piece(cut: _Cut, x: Array, steps: Array, layout: Layout, *, intervals: bool) -> Piece:
    part = whole_blocks(x[cut.rows], layout, cut.first, cut.last)
    if steps.shape[1] == 1:
        dt, every = np.repeat(steps[cut.rows], cut.last - cut.first, axis=1), None
    else:
        dt = steps[cut.rows, (cut.first + 1) * layout.lookback - 1 : cut.last * layout.lookback : layout.lookback]
        every = whole_blocks(steps[cut.rows], layout, cut.first, cut.last)[:, : part.shape[1] - 1]
    return Piece(part, dt, every, layout.lookback, layout.offsets, cut.skip, intervals)


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
