"""The days on which a zone's clock is plain: one offset from the day before to the day after.

Times on plain days are converted in bulk; the few others are read one by one. Both ask the same zone data, so they
cannot differ.
"""

from __future__ import annotations

from collections.abc import Iterable
from datetime import UTC, date, datetime, timedelta
from functools import cache
from zoneinfo import ZoneInfo

import pyarrow as pa

# Years in which most data lie; times in others are read one by one.
_FIRST, _LAST = date(1970, 1, 1), date(2050, 1, 1)


_SCHEMA = pa.schema([("zone", pa.string()), ("day", pa.date32()), ("utc_offset", pa.duration("us"))])


@cache
def _plain_days(zone: str) -> pa.Table:
    place = ZoneInfo(zone)
    midnight = datetime.combine(_FIRST, datetime.min.time(), UTC)
    offsets = [
        (midnight + timedelta(days=day)).astimezone(place).utcoffset() for day in range(-1, (_LAST - _FIRST).days + 3)
    ]
    days, plain = [], []
    for number in range((_LAST - _FIRST).days):
        if len(set(offsets[number : number + 4])) == 1:
            days.append(_FIRST + timedelta(days=number))
            plain.append(offsets[number])
    return pa.table([[zone] * len(days), days, plain], schema=_SCHEMA)


def plain_days(zones: Iterable[str]) -> pa.Table:
    """The plain days of the zones, with what to take away from the local time to get UTC."""
    return pa.concat_tables([_SCHEMA.empty_table(), *map(_plain_days, sorted(set(zones) - {"UTC"}))])
