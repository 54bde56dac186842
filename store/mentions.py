"""Refused rows that say something of a series.

Their text is what a file said, so it is read for the names that mean the series. A line of a wide file may hold values
of any series, in a column whose name stands elsewhere.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterator
from datetime import UTC, datetime

import duckdb
import pyarrow as pa

from driftbook.store.intake.options import Options, from_identity
from driftbook.store.intake.times import read_time
from driftbook.store.series import Series
from driftbook.store.sql import query

_KEY = ("intake_id", "line", "cell", "reason", "run_from")
_SCHEMA = pa.schema(
    [*((name, pa.string() if name == "reason" else pa.int64()) for name in _KEY), ("is_its_own", pa.bool_())]
)
_BETWEEN_FIELDS = r'[,;\t|"\r\n]'


def note_mentions(con: duckdb.DuckDBPyConnection, series: Series, before: datetime | None) -> None:
    """Fills the table `mention` with the refused rows that speak of a series, of times before a moment if there is one.

    `is_its_own` tells the rows of the series from lines that hold other series too.
    """
    names = [name for (name,) in con.execute(query("names_of_series"), [series.series_id]).fetchall()]
    told = {"names": names, "pattern": _pattern(names), "series_id": series.series_id}
    rows = con.execute(query("refused_rows_that_mention"), told).fetchall()
    found = [
        dict(zip(_SCHEMA.names, (*key, is_its_own), strict=True))
        for *key, is_its_own, text, options in rows
        if before is None or _is_of_before(text, from_identity(options), series, before)
    ]
    con.register("mentions", pa.Table.from_pylist(found, schema=_SCHEMA))
    con.execute("create or replace temp table mention as from mentions")
    con.unregister("mentions")


def mentioned(which: str = "true") -> str:
    """A condition on refused rows: they are noted, and `which` holds of the note."""
    key = ", ".join(_KEY)
    return f"({key}) in (select ({key}) from mention where {which})"


def _pattern(names: list[str]) -> str:
    """One of the names as a whole field, in any spelling that a file can give it."""
    spellings = "|".join(re.escape(one) for one in sorted({one for name in names for one in _spellings(name)}))
    return rf"(?:^|{_BETWEEN_FIELDS})\s*(?:{spellings})\s*(?:$|{_BETWEEN_FIELDS})"


def _spellings(name: str) -> Iterator[str]:
    yield name
    yield name.replace('"', '""')
    yield json.dumps(name)[1:-1]
    yield json.dumps(name, ensure_ascii=False)[1:-1]
    # what is not UTF-8 is kept with its bytes escaped
    yield name.encode("latin-1", "replace").decode("utf-8", "backslashreplace")


def _is_of_before(text: str, options: Options, series: Series, before: datetime) -> bool:
    """Whether any field of a row reads as an earlier time."""
    zone = options.zone or series.setting.time_zone
    fields = (field.strip() for field in re.split(_BETWEEN_FIELDS, text))
    times = (read_time(field, zone, options.dates) for field in fields if field)
    moment = before.astimezone(UTC).replace(tzinfo=None)
    return any(time < moment for time in times if isinstance(time, datetime))
