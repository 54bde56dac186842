"""What was known when: the book opened for one answer, at the newest run or at a past moment."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import duckdb

from driftbook.store.errors import UsageError
from driftbook.store.moments import parse_moment
from driftbook.store.reader import attached
from driftbook.store.sql import only_row, query


@dataclass(frozen=True)
class Known:
    """An open book and the run that it speaks for; run 0: nothing was known yet.

    Attributes
    ----------
    as_of : datetime or None
        The past moment that was asked for; None: now.
    moment : datetime
        That moment, or now.
    newest : int
        The book's newest run, whatever was asked for.
    """

    con: duckdb.DuckDBPyConnection
    run_id: int
    run_moment: datetime | None
    as_of: datetime | None
    moment: datetime
    newest: int

    def rows(self, sql: str, **values: Any) -> list[dict[str, Any]]:
        """The rows of a query by column name."""
        columns, rows = self.table(sql, **values)
        return [dict(zip(columns, row, strict=True)) for row in rows]

    def table(self, sql: str, **values: Any) -> tuple[list[str], list[tuple[Any, ...]]]:
        """The columns and rows of a query."""
        found = self.con.execute(sql, values)
        return [column[0] for column in found.description or []], found.fetchall()

    def latest(self) -> tuple[str, dict[str, Any]]:
        """How a query names the view `latest` as known here, and the values that this takes."""
        if self.as_of is None:
            return "latest", {}
        return "latest_as_of($moment)", {"moment": self.as_of}


@contextmanager
def known(book: Path, as_of: str | None = None) -> Iterator[Known]:
    """The book as it is, or as it was known at a moment; what it says does not change while it is open.

    Raises UsageError for what is no moment, or one that is still to come.
    """
    told = _told(as_of)
    with attached(book) as con:
        yield _known(con, told)


def known_on(con: duckdb.DuckDBPyConnection, as_of: str | None = None) -> Known:
    """As `known`, on a book that is open."""
    return _known(con, _told(as_of))


def _known(con: duckdb.DuckDBPyConnection, told: datetime | None) -> Known:
    moment = told or datetime.now(UTC)
    run_id, run_moment = only_row(con, query("run_in_force"), {"moment": moment})
    (newest,) = only_row(con, query("page_newest"))
    return Known(con, run_id or 0, run_moment, told, moment, newest or 0)


def _told(as_of: str | None) -> datetime | None:
    told = parse_moment(as_of) if as_of else None
    if told is not None and told > datetime.now(UTC):
        raise UsageError(f"{as_of} is still to come; nobody knows yet what will be known then.")
    return told
