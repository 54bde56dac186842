"""Moments: when a run was, as somebody tells it."""

from __future__ import annotations

import re
from datetime import UTC, date, datetime, time, timedelta

from driftbook.store.errors import UsageError

_TICK = timedelta(microseconds=1)
_BARE_DATE = re.compile(r"\d{4}-\d{2}-\d{2}")


def parse_moment(when: str | date | datetime) -> datetime:
    """A moment in UTC from text, a date or a datetime.

    Without a zone it is UTC; a bare date is the end of that UTC day, which for today is now. Raises UsageError.
    """
    if isinstance(when, datetime):
        return _in_utc(when)
    if isinstance(when, date):
        return _end_of(when)
    text = when.strip()
    try:
        if _BARE_DATE.fullmatch(text):
            return _end_of(date.fromisoformat(text))
        return _in_utc(datetime.fromisoformat(text))
    except ValueError:
        raise UsageError(
            f"{when!r} is no moment; write 2026-01-31, 2026-01-31T17:30 or 2026-01-31T17:30+01:00."
        ) from None


def check_told(moment: datetime, last: datetime | None) -> None:
    """Refuses a told moment that lies in the future or not after the last run."""
    if moment > datetime.now(UTC):
        raise UsageError(f"the moment {moment.isoformat()} lies in the future; a run is told when it was, not will be.")
    if last is not None and moment <= last:
        raise UsageError(
            f"the moment {moment.isoformat()} is not later than the last run's, {last.isoformat()}; "
            "history is told in its order."
        )


def next_moment(last: datetime | None) -> datetime:
    """Now, forced to be later than every earlier moment, whatever the machine's clock does."""
    now = datetime.now(UTC)
    return now if last is None or now > last else last + _TICK


def _end_of(day: date) -> datetime:
    now = datetime.now(UTC)
    end = datetime.combine(day, time.max, UTC)
    return now if day == now.date() else end


def _in_utc(moment: datetime) -> datetime:
    return moment.replace(tzinfo=UTC) if moment.tzinfo is None else moment.astimezone(UTC)
