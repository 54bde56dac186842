"""Figures, times and models as people read them on the page."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from typing import Any

from driftbook.estimators import MODELS
from driftbook.store.digits import with_interval
from driftbook.store.table import harmless

_MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"]
NOTHING = "no number"
_PER_TIME = {"√year": "a √year", "√second": "a √second"}


def clean(text: str | None) -> str:
    """A name or a unit from a file, with what could turn the reading direction made visible."""
    return harmless(text or "")


def value(row: dict[str, Any]) -> str:
    """The last value with its unit."""
    return NOTHING if row["value"] is None else f"{row['value']:.6g} {clean(row['unit'])}".rstrip()


def is_relative(unit: str | None) -> bool:
    """Whether a volatility is a fraction of the value, and so shown in per cent."""
    return (unit or "").startswith("1/")


def volatility_unit(unit: str | None) -> str:
    """`1/√year` is per cent; any other unit without its time."""
    return "%" if is_relative(unit) else clean((unit or "").rpartition("/")[0])


def volatility_time(unit: str | None) -> str:
    """What a volatility is counted over."""
    return _PER_TIME.get((unit or "").rpartition("/")[2], "")


def volatility(row: dict[str, Any], of: str = "") -> str:
    """A volatility with its interval and unit, of now or of before."""
    unit = row[f"{of}volatility_unit"]
    number, lower, upper = (scaled(row[f"{of}volatility{end}"], unit) for end in ("", "_lower", "_upper"))
    return amount(number, lower, upper, volatility_unit(unit))


def scaled(number: float | None, unit: str | None) -> float | None:
    """A volatility as it is shown: fractions in per cent."""
    return number * 100 if number is not None and is_relative(unit) else number


def amount(number: float | None, lower: float | None, upper: float | None, unit: str) -> str:
    """`23.4 (21.3–25.5) %`, or that there is none."""
    if number is None:
        return NOTHING
    without = "" if (lower, upper) != (None, None) else ", no interval"
    return f"{with_interval(number, lower, upper)} {unit}".rstrip() + without


def half_life(number: float | None, lower: float | None, upper: float | None, *, unbounded: bool | None) -> str:
    """`28 d (12 d – no end)`; without evidence of a pull, from where on it lies."""
    if number is None and lower is not None and upper is None:
        return f"over {with_interval(lower, None, None)} d"
    if number is None and lower is None and upper is None:
        return "no pull seen" if unbounded else NOTHING
    return with_interval(number, lower, upper, "d")


def half_life_now(row: dict[str, Any]) -> str:
    """The half-life that is in force."""
    return half_life(
        row["half_life_days"],
        row["half_life_days_lower"],
        row["half_life_days_upper"],
        unbounded=row["half_life_unbounded"],
    )


def half_life_before(row: dict[str, Any]) -> str:
    """The half-life of the run before."""
    return half_life(
        row["before_half_life"],
        row["before_half_life_lower"],
        row["before_half_life_upper"],
        unbounded=row["before_half_life_unbounded"],
    )


def model(name: str | None) -> str:
    """A model in words: whether it has a pull, and whether it works in proportions."""
    if name is None:
        return "none"
    if name not in MODELS:
        return name
    found = MODELS[name]
    pull = "pulled to a level" if found.has_pull else "no pull"
    return f"{pull}, in proportion" if found.is_relative else pull


def day(when: datetime | None) -> str:
    """`29 Jun 2026`, with its time unless that is midnight."""
    if when is None:
        return ""
    clock = f", {when:%H:%M}" if (when.hour, when.minute, when.second) != (0, 0, 0) else ""
    return f"{when.day} {_MONTHS[when.month - 1]} {when.year}{clock}"


def moment(when: datetime | None) -> str:
    """`30 Jun 2026, 11:00 UTC`."""
    if when is None:
        return ""
    there = when.astimezone(UTC)
    return f"{there.day} {_MONTHS[there.month - 1]} {there.year}, {there:%H:%M} UTC"


def as_known(when: datetime) -> str:
    """The line that a past moment puts on everything."""
    return f"As known on {moment(when)}: not the latest numbers"


def age(row: dict[str, Any], now: datetime) -> int:
    """Days since the last observation."""
    observed_at: datetime = row["observed_at"]
    return (now.replace(tzinfo=None) - observed_at) // timedelta(days=1)
