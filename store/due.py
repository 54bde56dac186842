"""Which windows are due: those that hold, or held, an observation that changed since the last refresh.

A window is named here by the index of its last observation, its end. With `every` other than observation only the
last observation of each day, week or month ends a window.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from driftbook.estimators import aligned_start
from driftbook.store.observed import Days, Microseconds

_EARLIEST = np.iinfo(np.int64).min
_LATEST = np.iinfo(np.int64).max

OBSERVATION = "observation"
_THURSDAY_TO_MONDAY = 3  # 1 January 1970 was a Thursday
# The fewest steps that a window over all observations is asked for; a shorter series is too short.
_FEWEST = 5

Indexes = NDArray[np.int64]


class Asked(NamedTuple):
    """One series and lookback of a model; lookback 0 has one window, from the first to the latest observation."""

    series_id: int
    lookback: int
    every: str
    whole: bool


@dataclass(frozen=True)
class Slice:
    """Windows to compute, by index in the series: observations start … stop, windows of `steps` steps.

    Windows that begin before `first` are left out, and so are those that do not end in `ends`, unless it is None.
    """

    series_id: int
    lookback: int
    steps: int
    start: int
    first: int
    stop: int
    ends: Indexes | None = None

    @property
    def entry(self) -> tuple[int, int]:
        """Series and lookback."""
        return self.series_id, self.lookback

    @property
    def windows(self) -> int:
        """How many windows are due; a series shorter than its lookback has the one that says so."""
        if self.ends is not None:
            return self.ends.size
        return max(self.stop - self.steps - self.first, 0) + 1


@dataclass(frozen=True)
class Span:
    """Window ends whose estimates in force are closed unless they are computed again: from … to, microseconds."""

    series_id: int
    lookback: int
    opens: int
    closes: int


def due(asked: Asked, times: Microseconds, changed: Microseconds, days: Days) -> tuple[list[Slice], list[Span]]:
    """The slices to compute and the spans to close for one series and lookback.

    times: the observations in force, ascending. changed: the times added, corrected or withdrawn, ascending. days: the
    local day of each observation, counted from 1970; used unless every observation ends a window.
    """
    if not asked.whole and changed.size == 0:
        return [], []
    if asked.whole or times.size <= asked.lookback or asked.lookback == 0:
        return _everything(asked, times, days), [_span(asked, _EARLIEST, _LATEST)]
    if asked.every == OBSERVATION and np.array_equal(times[-changed.size :], changed):
        return _at_the_end(asked, times, changed.size)
    at = np.searchsorted(times, changed)
    still_there = times[np.minimum(at, times.size - 1)] == changed
    # the last window end that holds a changed observation, or bridges the gap that a withdrawn one left
    last = at + asked.lookback - np.where(still_there, 0, 1)
    # the observation before a change is the only other one that may begin or cease to be the last of its period
    first = at if asked.every == OBSERVATION else np.maximum(at - 1, 0)
    opens = changed if asked.every == OBSERVATION else np.minimum(changed, times[np.minimum(first, times.size - 1)])
    until = np.where(last < times.size, times[np.minimum(last, times.size - 1)], _LATEST)
    ends = _merged(np.maximum(first, asked.lookback), np.minimum(last, times.size - 1))
    may_lose = np.flatnonzero(~still_there | (asked.every != OBSERVATION))
    spans = [_span(asked, int(opens[one]), int(until[one])) for one in may_lose]
    if at[0] <= asked.lookback:
        spans.append(_before_the_first(asked, times))
    return _slices(asked, ends, times.size, days), spans


def steps_over_all(observations: int) -> int:
    """The steps of the one window over all observations; of fewer than six, more than there are: it is too short."""
    return max(observations - 1, _FEWEST)


def slice_of(asked: Asked, ends: Indexes, size: int) -> Slice:
    """The slice that computes the windows with these ends again, bit for bit."""
    if size <= asked.lookback or asked.lookback == 0:
        return _everything(asked, np.empty(size, np.int64), ends)[0]
    return _windows_ending(asked, int(ends[0]), int(ends[-1]), ends)


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


def _everything(asked: Asked, times: Microseconds, days: Days) -> list[Slice]:
    last = times.size - 1
    if times.size <= asked.lookback or asked.lookback == 0:
        steps = asked.lookback or steps_over_all(times.size)
        return [Slice(asked.series_id, asked.lookback, steps, 0, 0, last)] if times.size else []
    return _slices(asked, [(asked.lookback, last)], times.size, days)


def _at_the_end(asked: Asked, times: Microseconds, new: int) -> tuple[list[Slice], list[Span]]:
    """What is due when all that changed is at the end, as on most days: the windows that end there."""
    before = times.size - new
    first_end = max(before, asked.lookback)
    spans = [_before_the_first(asked, times)] if before <= asked.lookback else []
    return [_windows_ending(asked, first_end, times.size - 1)], spans


def _before_the_first(asked: Asked, times: Microseconds) -> Span:
    """Where what a series that was too short had in force may stand."""
    return _span(asked, _EARLIEST, int(times[asked.lookback]) - 1)


def _slices(asked: Asked, ranges: list[tuple[int, int]], size: int, days: Days) -> list[Slice]:
    lasting = None if asked.every == OBSERVATION else _last_of_period(asked.every, days, size)
    found = []
    for first_end, last_end in ranges:
        ends = None if lasting is None else lasting[(lasting >= first_end) & (lasting <= last_end)]
        if ends is None:
            found.append(_windows_ending(asked, first_end, last_end))
        elif ends.size:
            found.append(slice_of(asked, ends, size))
    return found


def _windows_ending(asked: Asked, first_end: int, last_end: int, ends: Indexes | None = None) -> Slice:
    """The slice from where the blocks of its first window begin."""
    first = first_end - asked.lookback
    start = aligned_start(first, asked.lookback)
    return Slice(asked.series_id, asked.lookback, asked.lookback, start, first, last_end, ends)


def _last_of_period(every: str, days: Days, size: int) -> Indexes:
    """The indexes of the last observation of each day, week (from Monday) or month; the latest is always one."""
    if every == "day":
        period = days
    elif every == "week":
        period = (days + _THURSDAY_TO_MONDAY) // 7
    else:
        period = days.astype("datetime64[D]").astype("datetime64[M]").astype(np.int64)
    return np.append(np.flatnonzero(np.diff(period)), size - 1)


def _span(asked: Asked, opens: int, closes: int) -> Span:
    return Span(asked.series_id, asked.lookback, opens, closes)
