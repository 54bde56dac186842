"""The temporary tables of one intake."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import closing, contextmanager, suppress

import duckdb

from driftbook.store.intake.options import BAR_ROLES

_OURS = "select table_name from duckdb_tables() where temporary and starts_with(table_name, 'intake_')"

_BARS = ", ".join(BAR_ROLES)
_NO_BARS = ", ".join(f"null::double as {role}" for role in BAR_ROLES)


@contextmanager
def scratch(con: duckdb.DuckDBPyConnection) -> Iterator[None]:
    """Room for temporary tables named intake_…, which are gone afterwards."""
    try:
        yield
    finally:
        with unless_aborted():
            clear(con)


def unless_aborted() -> suppress:
    """For tidying up: a transaction that an error has ended takes its temporary tables and views with it."""
    return suppress(duckdb.TransactionException)


def clear(con: duckdb.DuckDBPyConnection) -> None:
    """Drops the temporary tables of an intake."""
    con.execute("drop view if exists intake_ordered")
    for (table,) in con.execute(_OURS).fetchall():
        con.execute(f"drop table {table}")


def keep_rows(con: duckdb.DuckDBPyConnection, sql: str, values: dict[str, object], *, has_bars: bool) -> None:
    """Keeps the plain rows, without bars where there are none: four columns of NULL would double the memory."""
    bars = f", {_BARS}" if has_bars else ""
    with as_written(con):
        con.execute(
            f"create temp table intake_row as select row_key, series_id, name, observed_at, value{bars} from ({sql})",
            values,
        )


def keep_ordered(con: duckdb.DuckDBPyConnection, sql: str, *, has_bars: bool) -> None:
    """Keeps the rows to settle clustered as the observations are; row_key keeps the order of arrival."""
    bars = f", {_BARS}" if has_bars else ""
    con.execute(
        f"create temp table intake_sorted as select row_key, series_id, observed_at, value{bars} from ({sql}) "
        "order by series_id, observed_at, row_key"
    )
    con.execute(f"create temp view intake_ordered as select *{'' if has_bars else ', ' + _NO_BARS} from intake_sorted")


@contextmanager
def as_written(con: duckdb.DuckDBPyConnection) -> Iterator[None]:
    """Joins build their right side, as written: the optimizer can't know how long a stream of rows is, and turning
    a join round would also lose the order of the rows.

    Set through a connection of its own, which also works once an error has ended the transaction.
    """
    with closing(con.cursor()) as beside:
        before = beside.execute("select current_setting('disabled_optimizers')").fetchall()[0][0]
        beside.execute("set disabled_optimizers = 'build_side_probe_side'")
        try:
            yield
        finally:
            beside.execute(f"set disabled_optimizers = '{before}'")
