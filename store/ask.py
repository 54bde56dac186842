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
def ask(book: Path, sql: str) -> Iterator[duckdb.DuckDBPyRelation]:
    """The rows of one SELECT; raises UsageError for anything else and for a query that fails."""
    with connect(book) as con:
        for setting in _LOCKED:
            con.execute(setting)
        try:
            statement = _only_statement(con, sql)
            rows = con.sql(statement.query)
            yield rows if rows is not None else con.sql("select null where false")
        except duckdb.Error as error:
            raise UsageError(f"the query failed: {str(error).strip()}") from error


def _only_statement(con: duckdb.DuckDBPyConnection, sql: str) -> duckdb.Statement:
    statements = con.extract_statements(sql)
    if len(statements) != 1:
        raise UsageError(f"give exactly one statement; there are {len(statements)}.")
    if statements[0].type not in _READS:
        raise UsageError("only a SELECT is run here; a book is changed by `ingest` and `refresh`.")
    return statements[0]
