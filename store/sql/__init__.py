"""Named SQL: every statement of more than a line lives in a .sql file here, with a name and a comment."""

from __future__ import annotations

import re
from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import duckdb

_NAME = re.compile(r"^-- name: (\w+)\n", re.MULTILINE)


@cache
def _queries() -> dict[str, str]:
    found: dict[str, str] = {}
    for file in sorted(files(__name__).iterdir(), key=lambda entry: entry.name):
        if file.name.endswith(".sql"):
            _, *parts = _NAME.split(file.read_text(encoding="utf-8"))
            found.update(zip(parts[0::2], parts[1::2], strict=True))
    return found


def only_row(con: duckdb.DuckDBPyConnection, sql: str, values: Any = None) -> tuple[Any, ...]:
    """The row of a query that gives exactly one, read to its end: an unread result would block the connection."""
    (row,) = con.execute(sql, values).fetchall()
    return tuple(row)


def first_row(con: duckdb.DuckDBPyConnection, sql: str, values: Any = None) -> tuple[Any, ...] | None:
    """The first row of a query, or None, read to its end."""
    rows = con.execute(sql, values).fetchall()
    return tuple(rows[0]) if rows else None


def query(name: str) -> str:
    """The SQL text of a named query."""
    return _queries()[name]
