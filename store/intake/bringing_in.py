"""From rows read to observations and refused rows."""

from __future__ import annotations

from dataclasses import replace

import duckdb

from driftbook.store.errors import IntakeError
from driftbook.store.intake import naming
from driftbook.store.intake.reading import name_known, over
from driftbook.store.intake.scratch import as_written, keep_ordered
from driftbook.store.intake.settling import Counts, settle
from driftbook.store.intake.source import WHITESPACE, Rows, readable
from driftbook.store.series import Stamp, series_by_name
from driftbook.store.sql import query


def bring_in(
    con: duckdb.DuckDBPyConnection, rows: Rows, intake_id: int, stamp: Stamp, *, rows_read: int, yes: bool
) -> Counts:
    """Settles the rows read, keeps those that are refused, and sees that each row is counted once."""
    name_known(con, series_by_name(con))
    naming.mark_unknown(con, naming.unknown_names(con))
    con.execute(query("intake_refuse_unread"))
    keep_ordered(con, query("intake_to_settle"), has_bars=rows.has_bars)
    con.execute("drop table intake_row")
    counts = replace(
        settle(con, rows.name, intake_id, stamp, yes=yes), refused=_keep_refused(con, rows, intake_id, stamp)
    )
    if rows_read != counts.new + counts.revised + counts.same + counts.refused:
        raise IntakeError(f"{rows_read} rows were read but counted as {counts}; this is a mistake in driftbook.")
    return counts


def _keep_refused(con: duckdb.DuckDBPyConnection, rows: Rows, intake_id: int, stamp: Stamp) -> int:
    refused = int(con.execute("select count(*) from intake_refusal").fetchall()[0][0])
    if refused:
        sql, values = rows.relation(con)
        told = {"intake_id": intake_id, "run_id": stamp.run_id, "whitespace": WHITESPACE}
        with as_written(con), readable(rows.name):
            con.execute(over("intake_keep_refused", sql), {**values, **told})
    return refused
