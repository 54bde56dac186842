"""Reading one time: which instant a text means, and when it could mean two."""

from __future__ import annotations

import re
from datetime import UTC, datetime, timedelta
from functools import lru_cache
from zoneinfo import ZoneInfo

from driftbook.store.intake.options import DAY_FIRST, MONTH_FIRST
from driftbook.store.intake.reasons import Reason

_MINUTES = r":(?P<minute>\d\d)(?::(?P<second>\d\d)(?:\.(?P<fraction>\d+))?)?(?P<offset>Z|[+-]\d\d(?::?\d\d)?)?"
_STRICT_CLOCK = rf"(?:[T ](?P<hour>\d\d){_MINUTES})?"
_LOOSE_CLOCK = rf"(?:[T ](?P<hour>\d\d?){_MINUTES})?"
_ISO = re.compile(rf"(?P<year>\d{{4}})-(?P<month>\d\d)-(?P<day>\d\d){_STRICT_CLOCK}", re.ASCII)
_COMPACT = re.compile(r"(?P<year>\d{4})(?P<month>\d\d)(?P<day>\d\d)", re.ASCII)
_YEAR_FIRST = re.compile(rf"(?P<year>\d{{4}})/(?P<month>\d\d?)/(?P<day>\d\d?){_LOOSE_CLOCK}", re.ASCII)
_YEAR_LAST = re.compile(
    rf"(?P<first>\d\d?)(?P<mark>[/.-])(?P<next>\d\d?)(?P=mark)(?P<year>\d{{4}}|\d\d){_LOOSE_CLOCK}", re.ASCII
)
_CLOCK_DIRECTIVE = re.compile(r"%[HIMSfpXcTR]")
_WIDEST_OFFSET = timedelta(hours=15, minutes=59)


@lru_cache(maxsize=1 << 16)
def read_time(text: str, zone: str, dates: str | None) -> datetime | Reason:
    """The instant, in UTC and without a zone mark, that a trimmed, non-empty text means; or why it means none.

    `zone` is where a time without an offset was read off the clock. A date alone is 00:00 with no shift.
    """
    if dates is not None and dates not in (DAY_FIRST, MONTH_FIRST):
        return _by_form(text, zone, dates)
    for form in (_ISO, _COMPACT, _YEAR_FIRST):
        if match := form.fullmatch(text):
            return _instant(match, int(match["year"]), int(match["month"]), int(match["day"]), zone)
    if match := _YEAR_LAST.fullmatch(text):
        return _year_last(match, zone, dates)
    return Reason.BAD_TIME


def _year_last(match: re.Match[str], zone: str, dates: str | None) -> datetime | Reason:
    first, following, year = int(match["first"]), int(match["next"]), int(match["year"])
    if len(match["year"]) == 2:
        year += 1900 if year >= 69 else 2000  # the reading of %y in strptime
    day_first = _instant(match, year, following, first, zone)
    month_first = _instant(match, year, first, following, zone)
    if dates == DAY_FIRST:
        return day_first
    if dates == MONTH_FIRST:
        return month_first
    if len(match["year"]) == 2:
        return Reason.AMBIGUOUS_DATE
    if first <= 12 and following <= 12 and first != following:
        return Reason.AMBIGUOUS_DATE
    return day_first if following <= 12 else month_first


def _instant(match: re.Match[str], year: int, month: int, day: int, zone: str) -> datetime | Reason:
    groups = match.groupdict()
    try:
        if groups.get("hour") is None:
            return datetime(year, month, day)
        fraction = (groups["fraction"] or "")[:6].ljust(6, "0")
        wall = datetime(
            year, month, day, int(groups["hour"]), int(groups["minute"]), int(groups["second"] or 0), int(fraction)
        )
        return _in_zone(wall, zone) if groups["offset"] is None else _less_offset(wall, groups["offset"])
    except (ValueError, OverflowError):
        return Reason.BAD_TIME


def _less_offset(wall: datetime, offset: str) -> datetime | Reason:
    if offset == "Z":
        return wall
    digits = offset[1:].replace(":", "").ljust(4, "0")
    hours, minutes = int(digits[:2]), int(digits[2:])
    size = timedelta(hours=hours, minutes=minutes)
    if minutes > 59 or size > _WIDEST_OFFSET:
        return Reason.BAD_TIME
    return wall + size if offset[0] == "-" else wall - size


def _in_zone(wall: datetime, zone: str) -> datetime | Reason:
    place = ZoneInfo(zone)
    earlier, later = (wall.replace(tzinfo=place, fold=fold).utcoffset() for fold in (0, 1))
    assert earlier is not None and later is not None  # noqa: S101, PT018 - a zone always knows its offset
    instant = wall - earlier
    if earlier == later:
        return instant
    comes_back = instant.replace(tzinfo=UTC).astimezone(place).replace(tzinfo=None) == wall
    return Reason.TIME_REPEATED if comes_back else Reason.TIME_SKIPPED


def _by_form(text: str, zone: str, form: str) -> datetime | Reason:
    if not text.isascii():
        return Reason.BAD_TIME
    try:
        told = datetime.strptime(text, form)
        if told.tzinfo is not None:
            return told.astimezone(UTC).replace(tzinfo=None)
        return _in_zone(told, zone) if _CLOCK_DIRECTIVE.search(form) else told
    except (ValueError, OverflowError):
        return Reason.BAD_TIME
