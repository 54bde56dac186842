"""Which windows are due: those that hold, or held, an observation that changed since the last refresh."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from driftbook.estimators import aligned_start

_EARLIEST = np.iinfo(np.int64).min
_LATEST = np.iinfo(np.int64).max

Microseconds = NDArray[np.int64]


@dataclass(frozen=True)
class Asked:
    """One series and lookback of a model; `step` is the constant time between observations, in years."""

    series_id: int
    lookback: int
    step: float
    whole: bool


@dataclass(frozen=True)
class Slice:
    """Windows to compute, by index in the series: the observations start … stop, the windows from `first` on."""

    series_id: int
    lookback: int
    step: float
    start: int
    first: int
    stop: int

    @property
    def windows(self) -> int:
        """How many windows are due; a series shorter than its lookback has the one that says so."""
        return max(self.stop - self.lookback - self.first, 0) + 1


@dataclass(frozen=True)
class Span:
    """Window ends whose estimates in force are closed unless they are computed again: from … to, microseconds."""

    series_id: int
    lookback: int
    opens: int
    closes: int


def due(asked: Asked, times: Microseconds, changed: Microseconds) -> tuple[list[Slice], list[Span]]:
    """The slices to compute and the spans to close for one series and lookback.

    times: the observations in force, ascending. changed: the times added, corrected or withdrawn, ascending.
    """
    if not asked.whole and changed.size == 0:
        return [], []
    if asked.whole or times.size <= asked.lookback:
        return _slices(asked, [(0, times.size - 1)], times.size), [_span(asked, _EARLIEST, _LATEST)]
    at = np.searchsorted(times, changed)
    still_there = times[np.minimum(at, times.size - 1)] == changed
    # the last window end that holds a changed observation, or bridges the gap that a withdrawn one left
    last = at + asked.lookback - np.where(still_there, 0, 1)
    ends = _merged(np.maximum(at, asked.lookback), np.minimum(last, times.size - 1))
    until = np.where(last < times.size, times[np.minimum(last, times.size - 1)], _LATEST)
    spans = [_span(asked, int(opens), int(closes)) for opens, closes in zip(changed, until, strict=True)]
    spans.append(_span(asked, _EARLIEST, int(times[asked.lookback]) - 1))
    return _slices(asked, ends, times.size), spans


def slice_table(slices: list[Slice]) -> pa.Table:
    """The slices as a table for SQL."""
    return pa.table(
        {
            "series_id": pa.array([one.series_id for one in slices], pa.int32()),
            "lookback": pa.array([one.lookback for one in slices], pa.int32()),
            "step": pa.array([one.step for one in slices], pa.float64()),
            "start": pa.array([one.start for one in slices], pa.int64()),
            "first": pa.array([one.first for one in slices], pa.int64()),
            "stop": pa.array([one.stop for one in slices], pa.int64()),
        }
    )


def span_table(spans: list[Span]) -> pa.Table:
    """The spans as a table for SQL."""
    return pa.table(
        {
            "series_id": pa.array([one.series_id for one in spans], pa.int32()),
            "lookback": pa.array([one.lookback for one in spans], pa.int32()),
            "opens": pa.array([one.opens for one in spans], pa.int64()),
            "closes": pa.array([one.closes for one in spans], pa.int64()),
        }
    )


def _merged(firsts: NDArray[np.int64], lasts: NDArray[np.int64]) -> list[tuple[int, int]]:
    """Ranges of window ends, those that touch made one."""
    merged: list[tuple[int, int]] = []
    for first, last in sorted(zip(firsts.tolist(), lasts.tolist(), strict=True)):
        if first > last:
            continue
        if merged and first <= merged[-1][1] + 1:
            merged[-1] = (merged[-1][0], max(merged[-1][1], last))
        else:
            merged.append((first, last))
    return merged


def _slices(asked: Asked, ends: list[tuple[int, int]], size: int) -> list[Slice]:
    if size == 0:
        return []
    found = []
    for first_end, last_end in ends:
        first = max(first_end - asked.lookback, 0)
        start = aligned_start(first, asked.lookback)
        found.append(Slice(asked.series_id, asked.lookback, asked.step, start, first, last_end))
    return found


def _span(asked: Asked, opens: int, closes: int) -> Span:
    return Span(asked.series_id, asked.lookback, opens, closes)
