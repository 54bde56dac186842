"""Runs: one change of the book, all or nothing, numbered, with one moment and a digest chained to the one before."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from dataclasses import dataclass, field
from datetime import UTC, datetime
from importlib.metadata import version

import duckdb
import pyarrow as pa

from driftbook.store import digest, migrate
from driftbook.store.moments import check_told, next_moment, parse_moment
from driftbook.store.series import Stamp
from driftbook.store.sql import first_row, only_row, query
from driftbook.store.tables import columns_of, tracked_tables

NO_DIGEST = "0" * 64


@dataclass
class Windows:
    """How many windows a run computed, and for how many of them there are numbers."""

    due: int = 0
    fitted: int = 0

    @property
    def failed(self) -> int:
        """The windows for which no numbers could be given; their status says why."""
        return self.due - self.fitted


@dataclass
class Run:
    """A run under way in a draft."""

    con: duckdb.DuckDBPyConnection
    stamp: Stamp
    told: datetime | None
    last_moment: datetime | None
    started_at: datetime
    kind: str = "ingest"
    windows: Windows = field(default_factory=Windows)


@dataclass(frozen=True)
class Finished:
    """What became of a run."""

    run_id: int
    moment: datetime
    rows_written: int
    rows_closed: int
    digest: str


def begin(con: duckdb.DuckDBPyConnection, at: str | datetime | None) -> Run:
    """Starts the next run; `at` tells its moment instead of the clock."""
    last_id, last_moment = _last(con)
    told = None if at is None else parse_moment(at)
    if told is not None:
        check_told(told, last_moment)
    now = datetime.now(UTC)
    return Run(con, Stamp(last_id + 1, told or now), told, last_moment, now)


def finish(run: Run, *, migrated: bool) -> Finished | None:
    """Writes the run's row and leaves; None, and nothing written, if the run changed and computed nothing."""
    con, run_id = run.con, run.stamp.run_id
    columns = columns_of(con)
    found = _leaves_of(con, run_id, columns)
    if not found and not run.windows.due and not migrated:
        return None
    _insert_leaves(con, found)
    moment = run.told or next_moment(run.last_moment)
    rows_written = sum(leaf.rows_in for leaf in found)
    con.execute(query("insert_run"), _run_row(run, moment, rows_written))
    chained = chain(con, run_id, columns["run"])
    con.execute("update base.run set digest = ? where run_id = ?", [chained, run_id])
    return Finished(run_id, moment, rows_written, sum(leaf.rows_closed for leaf in found), chained)


def chain(con: duckdb.DuckDBPyConnection, run_id: int, columns: list[str]) -> str:
    """The digest of a run: SHA-256 over the digest before it, the run's row and its leaves.

    `columns` are those that base.run had at the run.
    """
    before = first_row(con, "select digest from base.run where run_id = ?", [run_id - 1])
    sha = hashlib.sha256((before[0] if before else NO_DIGEST).encode())
    sha.update(digest.row_bytes(_run_row_again(con, run_id, columns)))
    sha.update(digest.row_bytes(con.sql(query("leaves_of_run"), params=[run_id]).to_arrow_table()))
    return sha.hexdigest()


def _leaves_of(con: duckdb.DuckDBPyConnection, run_id: int, columns: dict[str, list[str]]) -> list[digest.Leaf]:
    migration = migrate.newest()
    per_table: Iterable[Iterable[digest.Leaf]] = (
        digest.leaves(con, table, columns[table.name], (run_id, run_id), migration) for table in tracked_tables()
    )
    return [leaf for table in per_table for leaf in table]


def _insert_leaves(con: duckdb.DuckDBPyConnection, found: list[digest.Leaf]) -> None:
    if found:
        con.register(
            "found_leaves", pa.table([list(column) for column in zip(*found, strict=True)], digest.Leaf._fields)
        )
        con.execute(query("insert_leaves"))
        con.unregister("found_leaves")


def _run_row_again(con: duckdb.DuckDBPyConnection, run_id: int, columns: list[str]) -> pa.Table:
    told = ", ".join(name for name in columns if name != "digest")
    return con.sql(f"select {told} from base.run where run_id = {int(run_id)}").to_arrow_table()


def _run_row(run: Run, moment: datetime, rows_written: int) -> list[object]:
    plan = first_row(run.con, "select plan_sha256 from base.plan where run_to is null")
    return [
        run.stamp.run_id,
        run.kind,
        moment,
        run.told is not None,
        run.started_at,
        max(datetime.now(UTC), run.started_at),
        plan[0] if plan else None,
        version("driftbook"),
        migrate.newest(),
        run.windows.due,
        run.windows.fitted,
        run.windows.failed,
        rows_written,
    ]


def _last(con: duckdb.DuckDBPyConnection) -> tuple[int, datetime | None]:
    run_id, moment = only_row(con, "select coalesce(max(run_id), 0), max(moment) from base.run")
    return run_id, None if moment is None else moment.astimezone(UTC)
