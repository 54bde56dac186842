"""Figures, times and models as people read them."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from typing import Any

from driftbook.store import figures
from driftbook.store.table import harmless

_MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"]
_MODELS = {
    "abm": "no pull",
    "gbm": "no pull, in proportion",
    "ou": "pulled to a level",
    "exp_ou": "pulled to a level, in proportion",
    "cir": "pulled to a level, calmer near zero",
    "ckls": "pulled to a level, moves by a power of it",
    "quartic": "one or two resting levels",
    "merton": "no pull, with jumps",
    "inertial": "swings about a level",
    "ou_noise": "pulled to a level, seen through noise",
}


def clean(text: str | None) -> str:
    """A name or a unit from a file, with what could turn the reading direction made visible."""
    return harmless(text or "")


def value(row: dict[str, Any]) -> str:
    """The last value with its unit."""
    return figures.with_unit(row["value"], row["unit"])


def volatility(row: dict[str, Any], of: str = "") -> str:
    """A volatility with its interval and unit, of now or of before."""
    number, lower, upper = (row[f"{of}volatility{end}"] for end in ("", "_lower", "_upper"))
    return figures.volatility(number, lower, upper, row[f"{of}volatility_unit"])


def half_life_now(row: dict[str, Any]) -> str:
    """The half-life that is in force."""
    return figures.half_life(
        row["half_life_days"],
        row["half_life_days_lower"],
        row["half_life_days_upper"],
        unbounded=row["half_life_unbounded"],
    )


def half_life_before(row: dict[str, Any]) -> str:
    """The half-life of the run before."""
    return figures.half_life(
        row["before_half_life"],
        row["before_half_life_lower"],
        row["before_half_life_upper"],
        unbounded=row["before_half_life_unbounded"],
    )


def drift(row: dict[str, Any]) -> str:
    """The drift at the last value, in three digits."""
    number = figures.scaled(row["drift"], row["volatility_unit"])
    return figures.NOTHING if number is None else f"{float(f'{number:.3g}'):.10g}, without an interval so far"


def correction(one: dict[str, Any]) -> str:
    """What became of an observation, and in which run."""
    now = "withdrawn" if one["after"] is None else f"corrected to {one['after']:.6g}"
    return f"{day(one['observed_at'])}: {one['before']:.6g} {now} in run {one['run_id']}"


def model(name: str | None) -> str:
    """A model in words; one without words goes by its name."""
    return "none" if name is None else _MODELS.get(name, name)


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
