"""What a person says about a source; all but the two last change what its bytes mean."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import Literal
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from driftbook.store.errors import UsageError

DAY_FIRST = "day-first"
MONTH_FIRST = "month-first"
BAR_ROLES = ("open", "high", "low", "volume")
NUMBER_ROLES = ("value", *BAR_ROLES)
ROLES = ("series", "time", *NUMBER_ROLES)


@dataclass(frozen=True)
class Options:
    """How to read a source.

    `series`: all rows are this series. `columns`: role to column name. `dates`: day-first, month-first or a
    strptime form. `zone`: the zone of times without one, instead of the series' own. `layout`: long, one row a line,
    or wide, a column of times and a column for each series. `decimal`: the decimal mark of numbers that are written as
    text. `blank`: texts that mean an empty value. `add_series`: unknown names become series. `yes`: more than a tenth
    of a series may be withdrawn at once.
    """

    series: str | None = None
    columns: Mapping[str, str] = field(default_factory=dict)
    dates: str | None = None
    zone: str | None = None
    layout: Literal["long", "wide"] = "long"
    decimal: str = "."
    blank: Sequence[str] = ()
    add_series: bool = False
    yes: bool = False

    def identity(self) -> str:
        """The options that change the meaning of bytes, as JSON; with the bytes they say whether an intake is known."""
        meaning = {
            "series": self.series,
            "columns": dict(self.columns),
            "dates": self.dates,
            "zone": self.zone,
            "layout": self.layout,
            "decimal": self.decimal,
            "blank": sorted(self.blank),
        }
        return json.dumps(meaning, sort_keys=True, ensure_ascii=False)

    @property
    def has_date_form(self) -> bool:
        """Whether `dates` is a strptime form, which then is the only accepted one."""
        return self.dates is not None and self.dates not in (DAY_FIRST, MONTH_FIRST)


def from_identity(text: str) -> Options:
    """The options of an earlier intake."""
    return Options(**json.loads(text))


def check(options: Options) -> None:
    """Refuses options that no row could be read with."""
    for role in options.columns:
        if role not in ROLES:
            raise UsageError(f"--columns knows no {role!r}; say one of {', '.join(ROLES)}.")
    if options.layout == "wide":
        _check_wide(options)
    if options.decimal not in (".", ","):
        raise UsageError(f"--decimal {options.decimal!r} is no decimal mark; say . or , instead.")
    if options.zone is not None:
        _check_zone(options.zone)
    if options.dates is not None and options.has_date_form and not tells_the_year(options.dates):
        raise UsageError(f"--dates {not_dates(options.dates)}.")


def _check_wide(options: Options) -> None:
    if options.series is not None:
        raise UsageError("--series says that all rows are one series, but in the wide layout each column is its own.")
    for role in options.columns:
        if role != "time":
            raise UsageError(
                f"--columns {role}=… makes no sense in the wide layout: all columns but the time are series."
            )


def _check_zone(zone: str) -> None:
    try:
        ZoneInfo(zone)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        raise UsageError(f"--zone {zone!r} is no time zone; say a name like Europe/Berlin or UTC.") from None


def tells_the_year(form: str) -> bool:
    """A strptime form must give back the year at least; strptime would silently put 1900 in its place."""
    sample = datetime(2023, 11, 1, tzinfo=UTC)
    try:
        return datetime.strptime(sample.strftime(form), form).year == sample.year
    except ValueError:
        return False


def not_dates(form: str) -> str:
    """Why a text says nothing of how dates are written."""
    return (
        f"{form!r} is neither {DAY_FIRST} nor {MONTH_FIRST} nor a strptime form that holds a year, "
        "such as %d.%m.%Y or %y%m%d"
    )
