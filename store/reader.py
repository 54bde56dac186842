"""Reading a book: a private in-memory DuckDB with the book attached read-only and all functions registered."""

from __future__ import annotations

import os
import re
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import duckdb

from driftbook.store import functions, migrate
from driftbook.store.damage import THE_WAY_BACK, is_damage
from driftbook.store.errors import BookError, BookLocked
from driftbook.store.sql import query
from driftbook.store.swap import require_book
from driftbook.store.window_fit import add_window_fit

_BOOK = "book"


def connect(book: str | os.PathLike[str]) -> duckdb.DuckDBPyConnection:
    """A read-only connection to a book, with its views, macros and the estimators' functions.

    The connection keeps the version of the book that it opened, whatever writers do; connect again for a newer one.
    It may be used for any number of queries, cursors and threads.

    Raises
    ------
    BookError
        There is no book at that path, it is of another schema than this driftbook's, or it cannot be opened.
    """
    con = _opened(Path(book))
    try:
        _mirror(con)
        functions.register(con, functions.InlineExecutor())
        functions.register_likelihoods(con)
        functions.register_measures(con)
        add_window_fit(con)
    except BaseException:
        con.close()
        raise
    return con


@contextmanager
def attached(book: Path) -> Iterator[duckdb.DuckDBPyConnection]:
    """The bare book, read-only, as the default catalog: for what looks at the base tables themselves."""
    with _opened(book) as con:
        con.execute(f"use {_BOOK}")
        yield con


def _opened(path: Path) -> duckdb.DuckDBPyConnection:
    require_book(path)
    con = duckdb.connect(":memory:")
    try:
        con.execute("set TimeZone = 'UTC'")
        # what does not fit into memory would be written where we happen to be, for anyone to read
        con.execute("set temp_directory = ''")
        _attach(con, path)
        _check_schema(con, path)
    except BaseException:
        con.close()
        raise
    return con


def _attach(con: duckdb.DuckDBPyConnection, path: Path) -> None:
    quoted = str(path).replace("'", "''")
    try:
        con.execute(f"attach '{quoted}' as {_BOOK} (read_only)")
    except duckdb.Error as error:
        message = str(error).splitlines()[0]
        if "Could not set lock on file" in message:
            raise BookLocked(
                f"{path} is open for writing outside driftbook; close it there, then try again."
            ) from error
        hint = f"; {THE_WAY_BACK}." if is_damage(error) else ""
        raise BookError(f"{path} cannot be opened as a book: {message}{hint}") from error


def _check_schema(con: duckdb.DuckDBPyConnection, path: Path) -> None:
    try:
        done = migrate.applied(con, _BOOK)
    except duckdb.Error as error:
        raise BookError(f"{path} cannot be read: {str(error).splitlines()[0]}; {THE_WAY_BACK}.") from error
    migrate.check_known(done, str(path))
    if done[-1][0] < migrate.newest():
        raise BookError(
            f"{path} has schema {done[-1][0]} and this driftbook reads {migrate.newest()}; "
            f"the next writer upgrades it: run `driftbook refresh {path}`."
        )


def _mirror(con: duckdb.DuckDBPyConnection) -> None:
    """Makes the book's tables, views and macros again here, under the names that they have in the book.

    The names then resolve for every cursor, which a `USE` would not do.
    """
    con.execute("begin")  # a commit for each of a hundred statements would take its time
    for schema in ("base", "versions"):
        con.execute(f"create schema {schema}")
    for schema, name, meaning in con.execute(query("relations_of"), {"book": _BOOK}).fetchall():
        con.execute(f"create view {schema}.{name} as from {_BOOK}.{schema}.{name}")
        if meaning is not None:
            con.execute(f"comment on view {schema}.{name} is '{meaning.replace(chr(39), chr(39) * 2)}'")
    for migration in migrate.all_migrations():
        for statement in con.extract_statements(migration.text):
            if _is_macro(statement.query):
                con.execute(statement)
    con.execute("commit")


def _is_macro(sql: str) -> bool:
    text = "\n".join(line for line in sql.splitlines() if not line.startswith("--")).strip().lower()
    return re.match(r"(create (or replace )?|comment on )macro ", text) is not None
