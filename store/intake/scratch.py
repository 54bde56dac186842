"""The temporary tables of one intake."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager

import duckdb

_OURS = "select table_name from duckdb_tables() where temporary and starts_with(table_name, 'intake_')"


@contextmanager
def scratch(con: duckdb.DuckDBPyConnection) -> Iterator[None]:
    """Room for temporary tables named intake_…, which are gone afterwards."""
    try:
        yield
    finally:
        clear(con)


def clear(con: duckdb.DuckDBPyConnection) -> None:
    """Drops the temporary tables of an intake."""
    for (table,) in con.execute(_OURS).fetchall():
        con.execute(f"drop table {table}")


@contextmanager
def as_written(con: duckdb.DuckDBPyConnection) -> Iterator[None]:
    """Joins build their right side, as written: the optimizer can't know how long a stream of rows is, and turning
    a join round would also lose the order of the rows."""
    before = con.execute("select current_setting('disabled_optimizers')").fetchall()[0][0]
    con.execute("set disabled_optimizers = 'build_side_probe_side'")
    try:
        yield
    finally:
        con.execute(f"set disabled_optimizers = '{before}'")
