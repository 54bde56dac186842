"""From numbers to places on paper: straight, in decades, and in time; with the ticks that people expect."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from datetime import datetime, timedelta
from math import ceil, floor, isfinite, log10

_STEPS = (1, 2, 2.5, 5, 10)


@dataclass(frozen=True)
class Scale:
    """Numbers from low to high, drawn over a length; in decades if `decades`."""

    low: float
    high: float
    length: float
    decades: bool = False

    def at(self, number: float) -> float:
        """Where a number lies, from 0 at low to the length at high."""
        low, high, here = (self._straight(one) for one in (self.low, self.high, number))
        return self.length * (here - low) / (high - low)

    def holds(self, number: float | None) -> bool:
        """Whether a number can be drawn at all."""
        return number is not None and isfinite(number) and (number > 0 or not self.decades)

    def ticks(self, about: int = 4) -> list[float]:
        """Round numbers within the scale."""
        return self._decades(about) if self.decades else _round_numbers(self.low, self.high, about)

    def _straight(self, number: float) -> float:
        return log10(number) if self.decades else number

    def _decades(self, about: int) -> list[float]:
        first, last = ceil(log10(self.low) - 1e-9), floor(log10(self.high) + 1e-9)
        found = [10.0**power for power in range(first, last + 1)]
        if len(found) >= 2:
            return found[:: max(1, ceil(len(found) / max(about, 1)))]
        finer = [digit * 10.0**power for power in range(first - 1, last + 2) for digit in (1, 2, 5)]
        inside = [number for number in finer if self.low <= number <= self.high]
        return inside or _round_numbers(self.low, self.high, about)


def straight(numbers: Iterable[float | None], length: float) -> Scale:
    """A straight scale that holds all numbers with a little room."""
    there = [number for number in numbers if number is not None and isfinite(number)] or [0.0, 1.0]
    low, high = min(there), max(there)
    room = (high - low) * 0.06 or abs(high) * 0.05 or 1.0
    return Scale(low - room, high + room, length)


def in_decades(numbers: Iterable[float | None], length: float) -> Scale:
    """A scale in decades that holds all numbers above zero with a little room."""
    there = [number for number in numbers if number is not None and isfinite(number) and number > 0] or [1.0, 10.0]
    low, high = min(there), max(there)
    return Scale(low / 1.4, high * 1.4, length, decades=True)


def within_reach(numbers: Iterable[float | None], ends: Iterable[float | None], *, decades: bool) -> list[float]:
    """All numbers, and those ends of intervals that leave the numbers readable; farther ones run off the paper."""
    there = [number for number in numbers if number is not None and isfinite(number) and (number > 0 or not decades)]
    if not there:
        return [end for end in ends if end is not None and isfinite(end)]
    low, high = min(there), max(there)
    room = max(high - low, abs(high) * 0.5)
    low, high = (low / 10, high * 10) if decades else (low - room, high + room)
    return [*there, *(min(high, max(low, end)) for end in ends if end is not None and isfinite(end))]


def number_text(number: float) -> str:
    """A tick's number without needless digits."""
    return f"{number:.10g}" if abs(number) < 1e6 else f"{number:.0e}"


def _round_numbers(low: float, high: float, about: int) -> list[float]:
    rough = (high - low) / max(about, 1)
    power = 10.0 ** floor(log10(rough))
    step = next(one * power for one in _STEPS if one * power >= rough * 0.999)
    found = [round(k * step, 12) for k in range(ceil(low / step), floor(high / step) + 1)]
    return found if len(found) > 1 else _round_numbers(low, high, about + 2)


def time_ticks(first: datetime, last: datetime, about: int = 5) -> tuple[list[datetime], str]:
    """Round times between two and how they are written: years, months, days or hours, whatever is right."""
    span = last - first
    if span > timedelta(days=60):
        return _months(first, last, about)
    unit = timedelta(days=1) if span > timedelta(days=3) else timedelta(hours=1)
    every = unit * max(1, ceil(span / unit / about))
    start = first.replace(hour=0, minute=0, second=0, microsecond=0)
    times = [start + every * k for k in range(ceil((last - start) / every) + 1)]
    written = "%-d %b" if unit == timedelta(days=1) else "%-d %b, %H:%M"
    return [time for time in times if first <= time <= last], written


def _months(first: datetime, last: datetime, about: int) -> tuple[list[datetime], str]:
    months = (last.year - first.year) * 12 + last.month - first.month
    every = next((one for one in (1, 2, 3, 6, 12, 24, 60) if months / one <= about), 120)
    counts = [count for count in range(first.year * 12, last.year * 12 + last.month) if count % every == 0]
    times = [datetime(count // 12, count % 12 + 1, 1) for count in counts]
    return [time for time in times if first <= time <= last], "%b %Y" if every < 12 else "%Y"
