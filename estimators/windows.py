"""Windows in rolling position: how a series is cut, and sums over every window without subtraction.

A window of ``lookback`` steps is the ``lookback + 1`` observations k … k + lookback. Windows that start in one block
of ``lookback`` steps lie in one segment, that block and the next. A sum over a window is then a sum to the end of
the first block plus a sum from the start of the second: two running sums and an addition, never a difference of long
running sums. So an error does not travel, a missing value spoils only the windows that hold it, and one large value
leaves no trace behind it.

The step ``lookback - 1`` of a segment, its *pivot*, belongs to every window of the segment. With values measured from
the pivot, the mean square of a window is at most ``lookback + 1`` times its variance, whatever the data: what central
moments lose by cancellation is bounded.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Number = TypeVar("Number", np.float64, np.complex128)


def aligned_start(first_window: int, lookback: int) -> int:
    """Where a slice of a series must start so that its windows keep their bits.

    Blocks are counted from the first observation, so a slice ``x[start:]`` with this start gives for every window
    from `first_window` on the same bits as the whole series.

    Parameters
    ----------
    first_window : int
        Number of the first window that is wanted, counted from 0.
    lookback : int
        Steps in a window.

    Returns
    -------
    int
        Number of the observation to start from; the slice's window j is the series' window ``start + j``.

    Raises
    ------
    ValueError
        If `first_window` is negative or `lookback` below 1.

    Examples
    --------
    >>> aligned_start(1000, 250), aligned_start(1100, 250)
    (1000, 1000)
    """
    if first_window < 0:
        raise ValueError(f"first_window must be 0 or more, got {first_window}")
    if lookback < 1:
        raise ValueError(f"lookback must be 1 or more, got {lookback}")
    return first_window // lookback * lookback


@dataclass(frozen=True)
class Layout:
    """How the windows of a series are spread over blocks.

    Attributes
    ----------
    lookback : int
        Steps in a window; also in a block.
    n_windows : int
        Windows of the series, 1 or more.
    """

    lookback: int
    n_windows: int

    @property
    def offsets(self) -> int:
        """Windows in a block (fewer than `lookback` only where the series has one block)."""
        return min(self.lookback, self.n_windows)

    @property
    def n_blocks(self) -> int:
        """Blocks in which a window starts."""
        return -(-self.n_windows // self.lookback)

    @property
    def segment(self) -> int:
        """Observations in a segment."""
        return self.lookback + self.offsets


def whole_blocks(x: Array, layout: Layout, first: int, last: int) -> Array:
    """The observations of the segments of blocks `first` … `last` - 1.

    Parameters
    ----------
    x : array, shape (rows, n_obs)
        Series, time last.
    layout : Layout
        Of these series.
    first, last : int
        Range of blocks.

    Returns
    -------
    array, shape (rows, (last - first) * lookback + offsets)
        A view where it can be; beyond the end of the series the last value repeats, which no window sees.
    """
    start = first * layout.lookback
    stop = last * layout.lookback + layout.offsets
    part = x[:, start:stop]
    missing = stop - start - part.shape[1]
    return np.concatenate([part, np.repeat(part[:, -1:], missing, axis=1)], axis=1) if missing else part


def segments(values: Array, lookback: int, width: int) -> Array:
    """Cut segments out of whole blocks.

    Parameters
    ----------
    values : array, shape (rows, ...)
        One value an observation, or a step, of whole blocks.
    lookback : int
        Steps in a window; also in a block.
    width : int
        Values in a segment.

    Returns
    -------
    array, shape (rows, blocks, width)
        A read-only view of every segment that fits, in which neighbouring segments share values.
    """
    blocks = (values.shape[1] - width) // lookback + 1
    strides = values.strides[0], lookback * values.strides[1], values.strides[1]
    return np.lib.stride_tricks.as_strided(values, (len(values), blocks, width), strides, writeable=False)


def window_sums(terms: NDArray[Number], lookback: int, skip: int = 0) -> NDArray[Number]:
    """Sum terms over every window of a segment.

    Parameters
    ----------
    terms : array, shape (..., lookback + offsets - 1 - skip)
        One term a step, with 1 ≤ offsets ≤ lookback, from the first step of the first wanted window on.
    lookback : int
        Terms in a window.
    skip : int
        Windows at the beginning of the segment that are not wanted; the others have the same bits for any.

    Returns
    -------
    array, shape (..., offsets - skip)
        Entry o is the sum of terms o … o + lookback - 1; its relative rounding error is at most about ``lookback``
        units in the last place of the sum of absolute terms.
    """
    return _over_windows(np.add, terms, lookback, skip)


def window_maxima(values: Array, lookback: int, skip: int = 0) -> Array:
    """The largest of the values in every window of a segment; arguments and shapes as in `window_sums`."""
    return _over_windows(np.maximum, values, lookback, skip)


def _over_windows(ufunc: np.ufunc, terms: NDArray[Number], lookback: int, skip: int) -> NDArray[Number]:
    """Reduce over every window: from each step to the pivot, and from the pivot to each step after it."""
    head, count = lookback - skip, terms.shape[-1] - lookback + 1
    to_the_pivot = np.empty((*terms.shape[:-1], head), dtype=terms.dtype)
    ufunc.accumulate(terms[..., head - 1 :: -1], axis=-1, out=to_the_pivot[..., ::-1])
    found = to_the_pivot[..., :count]
    without_tail = 0 if skip else 1
    if count > without_tail:
        tails = ufunc.accumulate(terms[..., head:], axis=-1)
        ufunc(found[..., without_tail:], tails[..., skip - 1 + without_tail :], out=found[..., without_tail:])
    return found


class PairedTerms:
    """Room for several terms of one shape, and their `window_sums`, with the same bits in less time.

    A running sum waits for each addition before it can start the next, so two sums that run side by side, as the real
    and the imaginary part of one, take no longer than one.

    Parameters
    ----------
    shape : tuple of int
        Of each term.
    count : int
        Number of terms.

    Attributes
    ----------
    parts : list of array
        One array a term, to be filled by the caller.
    """

    def __init__(self, shape: tuple[int, ...], count: int) -> None:
        self._pairs = np.empty((-(-count // 2), *shape), dtype=np.complex128)
        if count % 2:
            self._pairs[-1].imag = 0.0
        self._count = count
        self.parts = self._unpaired(self._pairs)

    def sums(self, lookback: int, skip: int = 0) -> list[Array]:
        """Window sums of each term."""
        return self._unpaired(window_sums(self._pairs, lookback, skip))

    def _unpaired(self, pairs: NDArray[np.complex128]) -> list[Array]:
        return [part for pair in pairs for part in (pair.real, pair.imag)][: self._count]
