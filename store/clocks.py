"""Clocks: how the time between two observations becomes a number of years, or of seconds."""

from __future__ import annotations

MICROSECONDS_PER_YEAR = 31_536_000 * 1_000_000
_MICROSECONDS_PER_SECOND = 1_000_000


def equal_step(clock: str, periods_per_year: float | None) -> float | None:
    """The length of every step in years under the clock `trading`; None under clocks that count elapsed time."""
    return 1.0 / periods_per_year if clock == "trading" and periods_per_year else None


def microseconds_per_unit(clock: str) -> int:
    """How many microseconds make one unit of an elapsed-time clock: a year of 365 days, or a second."""
    return MICROSECONDS_PER_YEAR if clock == "act365" else _MICROSECONDS_PER_SECOND
