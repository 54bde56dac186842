"""From text fields to typed rows: in bulk what is plain, one by one what needs a careful look."""

from __future__ import annotations

import json
from collections.abc import Iterable, Iterator, Mapping

import duckdb
import pyarrow as pa

from driftbook.store.intake.forms import Form, plain_form
from driftbook.store.intake.numerals import read_number
from driftbook.store.intake.options import DAY_FIRST, MONTH_FIRST, NUMBER_ROLES, ROLES, Options
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.scratch import as_written, keep_rows
from driftbook.store.intake.source import WHITESPACE, Fields, Rows, readable
from driftbook.store.intake.times import read_time
from driftbook.store.intake.zones import plain_days
from driftbook.store.series import Series
from driftbook.store.sql import query

_DAY_AND_MONTH = {DAY_FIRST: "%d/%m", MONTH_FIRST: "%m/%d"}
_ODD = pa.schema(
    [
        ("row_key", pa.int64()),
        ("series_id", pa.int32()),
        ("name", pa.string()),
        ("observed_at", pa.timestamp("us")),
        *((role, pa.float64()) for role in NUMBER_ROLES),
        ("reason", pa.string()),
        ("fields", pa.string()),
    ]
)
_BATCH = 50_000


def read_rows(con: duckdb.DuckDBPyConnection, rows: Rows, options: Options, known: Mapping[str, Series]) -> int:
    """Fills intake_row with what is plain and intake_odd with the rest; gives the number of rows."""
    _prepare(con, options, known)
    sql, values = rows.relation(con)
    with readable(rows.name):
        keep_rows(con, over("intake_read_plain", sql), {**values, **_meaning(options)}, has_bars=rows.has_bars)
    plain, odd = con.execute("select count(observed_at), count(*) - count(observed_at) from intake_row").fetchall()[0]
    if odd == 0:
        return int(plain)
    looked_at = _insert_odd(con, _look_at_odd(con, rows, options, known))
    return int(plain) + looked_at


def _meaning(options: Options) -> dict[str, object]:
    """What the bulk reading has to know."""
    form = plain_form(options.dates) if options.dates and options.has_date_form else Form()
    return {
        "reads_plain_times": not options.has_date_form,
        "told_form": form.padded,
        "told_form_unpadded": form.unpadded,
        "told_form_has_clock": form.has_clock,
        "day_and_month": _DAY_AND_MONTH.get(options.dates or ""),
        "zone": options.zone,
        "whitespace": WHITESPACE,
    }


def over(name: str, fields: str) -> str:
    """A named query that reads the incoming rows' text fields."""
    return query(name).replace("(fields)", f"({fields})")


def _prepare(con: duckdb.DuckDBPyConnection, options: Options, known: Mapping[str, Series]) -> None:
    for table_or_macro in (
        "intake_point_numbers" if options.decimal == "." else "intake_comma_numbers",
        "intake_number_checks",
        "intake_empty_checks",
        "intake_with_clock",
        "intake_told_time",
        "intake_row_key",
        "intake_odd_table",
    ):
        con.execute(query(table_or_macro))
    name_known(con, known)
    zones = [options.zone] if options.zone else [series.setting.time_zone for series in known.values()]
    days = plain_days(zones)
    con.register("intake_days", days)
    con.execute("create or replace temp table intake_plain_day as from intake_days")
    con.unregister("intake_days")


def name_known(con: duckdb.DuckDBPyConnection, known: Mapping[str, Series]) -> None:
    """Puts the names, numbers and settings of the known series where SQL can join them."""
    table = pa.table(
        {
            "name": pa.array(list(known), pa.string()),
            "series_id": pa.array([series.series_id for series in known.values()], pa.int32()),
            "time_zone": pa.array([series.setting.time_zone for series in known.values()], pa.string()),
            "same_time": pa.array([series.setting.same_time for series in known.values()], pa.string()),
        }
    )
    con.register("intake_names", table)
    con.execute("create or replace temp table intake_known as from intake_names")
    con.unregister("intake_names")


def _look_at_odd(
    con: duckdb.DuckDBPyConnection, rows: Rows, options: Options, known: Mapping[str, Series]
) -> Iterator[dict[str, object]]:
    sql, values = rows.relation(con)
    with as_written(con), readable(rows.name):
        found = con.execute(over("intake_odd_rows", sql), values)
        while chunk := found.fetchmany(_BATCH):
            for row_key, cell, text, is_plain, fault, *said in chunk:
                fields: Fields | Reason | None = dict(zip(ROLES, said, strict=True))
                if not is_plain:
                    fields = Reason(fault) if fault else rows.fields_of(cell, text, dict(zip(ROLES, said, strict=True)))
                if fields is not None:
                    yield {"row_key": row_key, **_look(fields, options, known)}


def _look(fields: Fields | Reason, options: Options, known: Mapping[str, Series]) -> dict[str, object]:
    if isinstance(fields, Reason):
        return {"reason": fields}
    fields = {role: _cleaned(role, fields[role], options) for role in ROLES}
    name = fields["series"]
    if not name:
        return {"reason": Reason.NO_SERIES}
    series = known.get(name)
    if series is None:
        told: dict[str, object] = {"name": name, "fields": _as_json(fields)}
    else:
        told = {"series_id": series.series_id}
    zone = options.zone or (series.setting.time_zone if series else "UTC")
    return {**told, **_read_fields(fields, zone, options)}


def _cleaned(role: str, said: str | None, options: Options) -> str | None:
    """A field without the space around it; empty if its text means an empty value."""
    trimmed = said and said.strip(WHITESPACE)
    return "" if role in NUMBER_ROLES and trimmed in options.blank else trimmed


def _read_fields(fields: Fields, zone: str, options: Options) -> dict[str, object]:
    if not fields["time"]:
        return {"reason": Reason.NO_TIME}
    observed_at = read_time(fields["time"], zone, options.dates)
    if isinstance(observed_at, Reason):
        return {"reason": observed_at}
    found: dict[str, object] = {"observed_at": observed_at}
    for role in NUMBER_ROLES:
        said = fields[role]
        number = read_number(said, options.decimal) if said else None
        if isinstance(number, Reason):
            return {"reason": number}
        found[role] = number
    is_withdrawal = found["value"] is None
    return {"observed_at": observed_at} if is_withdrawal else found


def _as_json(fields: Fields) -> str:
    return json.dumps({role: fields[role] for role in ROLES if role != "series"}, ensure_ascii=False)


def _insert_odd(con: duckdb.DuckDBPyConnection, odd: Iterable[dict[str, object]]) -> int:
    """Inserts once all are read: the connection is busy with the reading until then."""
    batches: list[pa.RecordBatch] = []
    pending: list[dict[str, object]] = []
    for row in odd:
        pending.append(row)
        if len(pending) == _BATCH:
            batches.append(pa.RecordBatch.from_pylist(pending, schema=_ODD))
            pending.clear()
    batches.append(pa.RecordBatch.from_pylist(pending, schema=_ODD))
    table = pa.Table.from_batches(batches)
    con.register("intake_looked_at", table)
    con.execute("insert into intake_odd from intake_looked_at")
    con.unregister("intake_looked_at")
    return int(table.num_rows)
