"""Figures of `latest` as people read them, on the terminal and on the page: with unit and interval, or a word."""

from __future__ import annotations

from driftbook.store.digits import with_interval
from driftbook.store.table import harmless

NOTHING = "no number"
_PER_TIME = {"√year": "a √year", "√second": "a √second"}


def with_unit(value: float | None, unit: str | None) -> str:
    """A single value with its unit."""
    return NOTHING if value is None else f"{value:.6g} {harmless(unit or '')}".rstrip()


def is_relative(unit: str | None) -> bool:
    """Whether a volatility is a fraction of the value, and so shown in per cent."""
    return (unit or "").startswith("1/")


def volatility_unit(unit: str | None) -> str:
    """`1/√year` is per cent; any other unit without its time."""
    return "%" if is_relative(unit) else harmless((unit or "").rpartition("/")[0])


def volatility_time(unit: str | None) -> str:
    """What a volatility is counted over."""
    return _PER_TIME.get((unit or "").rpartition("/")[2], "")


def scaled(number: float | None, unit: str | None) -> float | None:
    """A volatility as it is shown: fractions in per cent."""
    return number * 100 if number is not None and is_relative(unit) else number


def volatility(number: float | None, lower: float | None, upper: float | None, unit: str | None) -> str:
    """`23.4 (21.3–25.5) %`, or that there is no interval, or no number."""
    if number is None:
        return NOTHING
    without = "" if (lower, upper) != (None, None) else ", no interval"
    shown = with_interval(scaled(number, unit), scaled(lower, unit), scaled(upper, unit))
    return f"{shown} {volatility_unit(unit)}".rstrip() + without


def half_life(number: float | None, lower: float | None, upper: float | None, *, unbounded: bool | None) -> str:
    """`3.9 (2.7–6.4) d`, `28 d (12 d – no end)`; without evidence of a pull, from where on it lies."""
    if number is None and lower is not None and upper is None:
        return f"over {with_interval(lower, None, None)} d"
    if (number, lower, upper) == (None, None, None):
        return "no pull seen" if unbounded else NOTHING
    if lower is None or upper is None:
        return with_interval(number, lower, upper, "d")
    return f"{with_interval(number, lower, upper)} d"
