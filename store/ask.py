"""One query of a stranger on a book: read-only, in a process of its own, away from files, the network and settings."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

from driftbook.store.contained import Limits, contained
from driftbook.store.errors import UsageError

if TYPE_CHECKING:
    import duckdb

# of a child's memory; the rest is for what Python makes of the rows
_FOR_THE_QUERY = 0.8
# The book itself is open already; after these no other file can be, and no setting can be changed back.
_LOCKED = (
    "set enable_external_access = false",
    "set disabled_filesystems = 'LocalFileSystem'",
    "set lock_configuration = true",
)


def ask(
    book: Path,
    sql: str,
    written: Callable[[duckdb.DuckDBPyRelation], bytes],
    limits: Limits,
    *,
    rows: int | None = None,
) -> AbstractContextManager[Iterator[bytes]]:
    """The rows of one SELECT, `rows` of them at most, as `written` puts them into bytes.

    Raises UsageError for anything else, for a query that fails, and for one that goes beyond the limits.
    """
    return contained(partial(_locked, book, limits.memory), partial(_answer, sql, written, rows), limits)


@contextmanager
def _locked(book: Path, memory: int) -> Iterator[duckdb.DuckDBPyConnection]:
    from driftbook.store.reader import reading

    with reading(book) as con:
        con.execute(f"set memory_limit = '{int(_FOR_THE_QUERY * memory)}B'")
        for setting in _LOCKED:
            con.execute(setting)
        yield con


def _answer(
    sql: str,
    written: Callable[[duckdb.DuckDBPyRelation], bytes],
    rows: int | None,
    con: duckdb.DuckDBPyConnection,
) -> bytes:
    import duckdb

    try:
        found = con.sql(_only_statement(con, sql).query)
        return written(found if rows is None else found.limit(rows))
    except duckdb.OutOfMemoryException as error:
        raise MemoryError from error
    except duckdb.Error as error:
        raise UsageError(f"the query failed: {str(error).strip()}") from error


def _only_statement(con: duckdb.DuckDBPyConnection, sql: str) -> duckdb.Statement:
    from duckdb import StatementType

    statements = con.extract_statements(sql)
    if len(statements) != 1:
        raise UsageError(f"give exactly one statement; there are {len(statements)}.")
    if statements[0].type not in (StatementType.SELECT, StatementType.EXPLAIN):
        raise UsageError("only a SELECT is run here; a book is changed by `ingest` and `refresh`.")
    return statements[0]
