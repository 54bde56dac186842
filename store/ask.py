"""One read-only query on a book, kept away from files, the network and settings."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import duckdb

from driftbook.store.errors import UsageError
from driftbook.store.reader import connect

_READS = {duckdb.StatementType.SELECT, duckdb.StatementType.EXPLAIN}
_LOCKED = ("set temp_directory = ''", "set enable_external_access = false", "set lock_configuration = true")


@contextmanager
def ask(
    book: Path, sql: str, *, timeout: float | None = None, rows: int | None = None
) -> Iterator[duckdb.DuckDBPyRelation]:
    """The rows of one SELECT, `rows` of them at most, within `timeout` seconds.

    Raises UsageError for anything else, for a query that fails, and for one that takes longer.
    """
    with connect(book) as con:
        if timeout is not None:
            con.execute(f"set max_execution_time = {max(1, round(1000 * timeout))}")
        for setting in _LOCKED:
            con.execute(setting)
        try:
            statement = _only_statement(con, sql)
            found = con.sql(statement.query)
            yield found if rows is None else found.limit(rows)
        except duckdb.Error as error:
            raise UsageError(f"the query failed: {str(error).strip()}") from error


def _only_statement(con: duckdb.DuckDBPyConnection, sql: str) -> duckdb.Statement:
    statements = con.extract_statements(sql)
    if len(statements) != 1:
        raise UsageError(f"give exactly one statement; there are {len(statements)}.")
    if statements[0].type not in _READS:
        raise UsageError("only a SELECT is run here; a book is changed by `ingest` and `refresh`.")
    return statements[0]
