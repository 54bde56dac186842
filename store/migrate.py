"""Migrations: plain SQL files applied in order, each in one transaction with its record and digest."""

from __future__ import annotations

import hashlib
import re
from dataclasses import dataclass
from functools import cache
from importlib.resources import files

import duckdb

from driftbook.store.errors import BookError
from driftbook.store.sql import first_row

_FILE = re.compile(r"(\d{4})_(\w+)\.sql")
_RECORD_TABLE = "create table base.migration (number integer not null, name varchar not null, sha256 varchar not null)"


@dataclass(frozen=True)
class Migration:
    """One numbered step of the schema."""

    number: int
    name: str
    text: str

    @property
    def sha256(self) -> str:
        """The digest of the file's text, kept in the book so that an edited migration is noticed."""
        return hashlib.sha256(self.text.encode()).hexdigest()


@cache
def all_migrations() -> tuple[Migration, ...]:
    """The migrations of this driftbook in order; numbers run from 1 without a gap."""
    found = []
    for file in files("driftbook.migrations").iterdir():
        match = _FILE.fullmatch(file.name)
        if match:
            found.append(Migration(int(match[1]), match[2], file.read_text(encoding="utf-8")))
    return tuple(sorted(found, key=lambda migration: migration.number))


def newest() -> int:
    """The number of the newest migration that this driftbook has."""
    return all_migrations()[-1].number


def applied(con: duckdb.DuckDBPyConnection, catalog: str | None = None) -> list[tuple[int, str]]:
    """The (number, sha256) of the migrations in a book, in order; empty where there are none."""
    where = "database_name = coalesce(?, current_database()) and schema_name = 'base' and table_name = 'migration'"
    if first_row(con, f"select 1 from duckdb_tables() where {where}", [catalog]) is None:
        return []
    prefix = f"{catalog}." if catalog else ""
    return con.execute(f"select number, sha256 from {prefix}base.migration order by number").fetchall()


def check_known(done: list[tuple[int, str]], book: str) -> None:
    """Refuses a file that is no book, a book of a newer driftbook, and one whose migrations differ from ours."""
    if not done:
        raise BookError(f"{book} is a DuckDB file but no driftbook book; make a book with `driftbook new`.")
    ours = {migration.number: migration.sha256 for migration in all_migrations()}
    if done[-1][0] > newest():
        raise BookError(
            f"{book} was written by a newer driftbook (schema {done[-1][0]}, this one knows {newest()}); "
            "upgrade with `pip install --upgrade driftbook`."
        )
    for number, sha256 in done:
        if ours[number] != sha256:
            raise BookError(
                f"{book} was made with another text of migration {number:04d} than this driftbook has; "
                "use the driftbook that wrote it, or restore a copy."
            )


def pending(con: duckdb.DuckDBPyConnection) -> list[Migration]:
    """The migrations that the book does not have yet; writes nothing."""
    done = {number for number, _ in applied(con)}
    return [migration for migration in all_migrations() if migration.number not in done]


def apply_pending(con: duckdb.DuckDBPyConnection) -> None:
    """Applies what is pending, each migration in one transaction with its record."""
    for migration in pending(con):
        apply(con, migration)


def apply(con: duckdb.DuckDBPyConnection, migration: Migration) -> None:
    """Applies one migration; on an error nothing of it remains."""
    statements = con.extract_statements(migration.text)
    if any(statement.type == duckdb.StatementType.TRANSACTION for statement in statements):
        raise BookError(f"migration {migration.number:04d} holds a transaction statement; take it out.")
    con.begin()
    try:
        for statement in statements:
            con.execute(statement)
        if migration.number == 1:
            con.execute(_RECORD_TABLE)
        con.execute("insert into base.migration values (?, ?, ?)", [migration.number, migration.name, migration.sha256])
        con.commit()
    except BaseException:
        con.rollback()
        raise
