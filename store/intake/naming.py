"""Names that the book does not know: which may become series, and which no name can be."""

from __future__ import annotations

import difflib
import unicodedata
from collections.abc import Collection

import duckdb
import pyarrow as pa

from driftbook.store.errors import IntakeError, UsageError
from driftbook.store.intake.options import Options
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.source import WHITESPACE
from driftbook.store.series import Setting, Stamp, add_series, series_by_name
from driftbook.store.sql import query

_LONGEST_NAME = 200


def unknown_names(con: duckdb.DuckDBPyConnection) -> list[str]:
    """The names among the rows read that the book does not know, in order of first appearance."""
    return [name for (name,) in con.execute(query("intake_unknown_names")).fetchall()]


def add_new(con: duckdb.DuckDBPyConnection, names: Collection[str], stamp: Stamp) -> tuple[str, ...]:
    """Adds the names that can be series, with the settings by default; gives those it added."""
    new = {name: Setting() for name in names if why_no_name(name) is None}
    add_series(con, new, stamp)
    return tuple(new)


def why_no_name(name: str) -> Reason | None:
    """Why a text can't name a series, if it can't."""
    if not name.strip():
        return Reason.NO_SERIES
    if len(name) > _LONGEST_NAME:
        return Reason.NAME_TOO_LONG
    if any(unicodedata.category(character) == "Cc" for character in name):
        return Reason.BAD_NAME
    return None


def check_source(name: str) -> None:
    """A file's name is bytes to the system; one that is no text cannot be noted in the book."""
    try:
        name.encode()
    except UnicodeEncodeError as problem:
        raise IntakeError(f"{name!r} is no UTF-8 text; rename the file.") from problem


def mark_unknown(con: duckdb.DuckDBPyConnection, names: Collection[str]) -> None:
    """Puts names whose rows are to be refused, with the reason, where SQL can join them."""
    reasons = [why_no_name(name) or Reason.UNKNOWN_SERIES for name in names]
    table = pa.table({"name": pa.array(list(names), pa.string()), "reason": pa.array(reasons, pa.string())})
    con.register("intake_names", table)
    con.execute("create or replace temp table intake_unknown as from intake_names")
    con.unregister("intake_names")


def check_named_series(con: duckdb.DuckDBPyConnection, options: Options) -> None:
    """`--series` has to name a series of the book, or one that can be added."""
    name = options.series
    if name is None:
        return
    reason = why_no_name(name)
    if reason is not None or name != name.strip(WHITESPACE):
        raise UsageError(
            f"--series {name!r} can't be a name: {reason.sentence if reason else 'it has space around it.'}"
        )
    known = series_by_name(con)
    if name in known or options.add_series:
        return
    near = difflib.get_close_matches(name, known, n=3)
    meant = f"did you mean {' or '.join(map(repr, near))}? Otherwise add it" if near else "add it"
    raise IntakeError(f"The book has no series {name!r}; {meant} with --add-series or in the plan.")
