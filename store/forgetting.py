"""Forgetting: deletes a series, or its past, for good, says so in the digest chain, and leaves no byte of it.

The leaves of the runs that had written what is deleted stay, since later digests are made of them; beside each stands
what is left of it, in `base.forgotten_leaf`, whose rows the run of the forgetting proves like any others.
"""

from __future__ import annotations

import os
from collections.abc import Iterable
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

import duckdb
import pyarrow as pa

from driftbook.store import digest, migrate, runs
from driftbook.store.errors import UsageError
from driftbook.store.mentions import mentioned, note_mentions
from driftbook.store.moments import parse_moment
from driftbook.store.series import Series, known_series, near_name
from driftbook.store.sql import only_row, query
from driftbook.store.swap import rewriting
from driftbook.store.tables import Tracked, columns_at, tracked_tables

# What a series leaves in tables that hold a time: from which column on a row is about the past.
_ABOUT = {"observation": "observed_at"}
_WINDOW_OPENS = "window_start"
_TEXT = "refused_row.text"


@dataclass(frozen=True)
class Forgotten:
    """What was deleted: rows of each table, texts of rows that stay, and the run that says so."""

    run: runs.Finished
    rows: dict[str, int]


def forget(
    book: str | os.PathLike[str],
    series: str,
    *,
    before: str | None = None,
    yes: bool = False,
    wait: float = 0.0,
    at: str | datetime | None = None,
) -> Forgotten:
    """Deletes a series for good, or what it says of times before a moment.

    With `before`, observations and refused rows of earlier times go, and estimates of windows that begin earlier;
    without, everything of the series. Refused lines of wide files, which may hold its values beside others', lose their
    text. The plan's text and what was said of a file stay: its name and options. Raises UsageError where a person has
    to say yes, or where there is nothing to forget.
    """
    if not yes:
        raise UsageError(f"forgetting {series!r} cannot be undone; say so with --yes.")
    with rewriting(Path(book), wait) as draft:
        con = draft.con
        run = runs.begin(con, at)
        run.kind = "forget"
        one = _series(con, series)
        if before is None:
            _check_not_planned(one)
        moment = None if before is None else parse_moment(before)
        note_mentions(con, one, moment)
        conditions = dict(_conditions(one, moment))
        touched = _touched_leaves(con, {**conditions, "refused_row": mentioned()})
        counts = {name: _delete(con, name, where) for name, where in conditions.items()}
        counts[_TEXT] = _empty_texts(con)
        if not any(counts.values()):
            raise UsageError(f"{series!r} has nothing before {before} to forget.")
        _note_what_is_left(con, one, touched, run.stamp.run_id)
        finished = runs.finish(run, migrated=draft.migrated)
        assert finished is not None  # noqa: S101 - rows were noted, so there is a run
        draft.kept = draft.rewritten = True
        draft.outcome = f"run {finished.run_id}"
    return Forgotten(finished, {name: count for name, count in counts.items() if count})


def _series(con: duckdb.DuckDBPyConnection, name: str) -> Series:
    known = known_series(con)
    if name not in known:
        raise UsageError(f"the book has no series {name!r}{near_name(name, list(known))}.")
    return known[name]


def _check_not_planned(series: Series) -> None:
    if series.setting.planned:
        raise UsageError(
            f"the plan names {series.name!r} and the next refresh would add it again; take it out of the plan first."
        )


def _conditions(series: Series, before: datetime | None) -> Iterable[tuple[str, str]]:
    """For each table, which of its rows go."""
    mine = f"series_id = {series.series_id}"
    there = columns_at(migrate.newest())
    for table in tracked_tables():
        if before is None:
            if table.by_series:
                yield table.name, mine
            continue
        about = _ABOUT.get(table.name) or (_WINDOW_OPENS if _WINDOW_OPENS in there[table.name] else None)
        if table.by_series and about:
            yield table.name, f"{mine} and {about} < make_timestamp({round(before.timestamp() * 1_000_000)})"
    yield "refused_row", mentioned("is_its_own")


def _touched_leaves(con: duckdb.DuckDBPyConnection, conditions: dict[str, str]) -> set[tuple[Tracked, int]]:
    """The tables and runs whose leaves will no longer be those that were written."""
    touched = set()
    for table in tracked_tables():
        if table.name not in conditions:
            continue
        where = conditions[table.name]
        sql = f"select run_from from base.{table.name} where {where}"
        if table.closes:
            sql += f" union select run_to from base.{table.name} where {where} and run_to is not null"
        touched |= {(table, run_id) for (run_id,) in con.execute(sql).fetchall()}
    return touched


def _delete(con: duckdb.DuckDBPyConnection, table: str, where: str) -> int:
    return int(only_row(con, f"delete from base.{table} where {where}")[0])


def _empty_texts(con: duckdb.DuckDBPyConnection) -> int:
    """What is noted and still there are lines of several series: their text goes, their place and reason stay."""
    return int(only_row(con, f"update base.refused_row set text = '' where {mentioned()}")[0])


def _note_what_is_left(
    con: duckdb.DuckDBPyConnection, series: Series, touched: set[tuple[Tracked, int]], run_id: int
) -> None:
    left = [_left(con, table, series.series_id if table.by_series else None, one) for table, one in touched]
    con.register("left_of_leaves", pa.Table.from_pylist(left))
    con.execute(query("insert_forgotten_leaves"), {"run": run_id})
    con.unregister("left_of_leaves")


def _left(con: duckdb.DuckDBPyConnection, table: Tracked, series_id: int | None, run_id: int) -> dict[str, object]:
    """The leaf of one run, table and series over the rows that are still there."""
    (migration,) = only_row(con, "select migration from base.run where run_id = ?", [run_id])
    columns = columns_at(migration)[table.name]
    leaf = next(digest.leaves(con, table, columns, (run_id, run_id), migration, series_id=series_id), None)
    return {
        "run_id": run_id,
        "table_name": table.name,
        "series_id": series_id,
        "rows_in": leaf.rows_in if leaf else 0,
        "rows_closed": leaf.rows_closed if leaf else 0,
        "sha256": leaf.sha256 if leaf else "",
    }
