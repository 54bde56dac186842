"""Proof that a book is whole: its schema, its counts, its versions, and the chain of digests over every run."""

from __future__ import annotations

import os
import re
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from itertools import groupby
from pathlib import Path
from tempfile import TemporaryDirectory

import duckdb

from driftbook.store import digest, lock, migrate
from driftbook.store.damage import THE_WAY_BACK, find_damage
from driftbook.store.errors import BookError
from driftbook.store.reader import attached
from driftbook.store.runs import NO_DIGEST, chain
from driftbook.store.sql import only_row, query
from driftbook.store.swap import create
from driftbook.store.tables import Tracked, columns_at, tracked_tables

# DuckDB keeps the names behind EXCLUDE as a set and writes them in any order.
_EXCLUDED = re.compile(r"EXCLUDE \(([^)]*)\)")


_Catalog = dict[str, tuple[str, str | None]]
_Constants = dict[str, list[tuple[object, ...]]]
_Stored = dict[tuple[str, int | None, int], digest.Leaf]


@dataclass(frozen=True)
class Finding:
    """One thing that is not as it was written: where, and a sentence."""

    sentence: str
    table_name: str | None = None
    series: str | None = None
    run_id: int | None = None


@dataclass(frozen=True)
class Verified:
    """What `verify` saw."""

    runs: int
    leaves: int
    rows: int
    last_digest: str
    look: lock.LastLook
    findings: list[Finding]


def verify(book: str | os.PathLike[str]) -> Verified:
    """Checks a book against its digests; changes nothing.

    Every row that was changed, added, removed, closed or reopened outside driftbook is found, by table, series and run;
    of a file that is damaged, what can still be read. Raises BookError for one that cannot be opened.
    """
    path = Path(book)
    with attached(path) as con:
        try:
            return _verified(con, lock.last_look(path))
        except duckdb.Error as error:
            raise BookError(f"{path} cannot be read to its end: {str(error).splitlines()[0]}") from error


def _verified(con: duckdb.DuckDBPyConnection, look: lock.LastLook) -> Verified:
    fundamental = [*_damage_findings(con)] or [
        *_schema_findings(con),
        *_migration_findings(con),
        *_constant_findings(con),
    ]
    if fundamental:
        return Verified(0, 0, 0, NO_DIGEST, look, fundamental)
    findings = [
        *_leaf_findings(con),
        *_chain_findings(con),
        *_run_findings(con, look),
        *_intake_findings(con),
        *(finding for table in tracked_tables() if table.closes for finding in _version_findings(con, table)),
    ]
    runs, last = only_row(con, "select count(*), coalesce(max_by(digest, run_id), '') from base.run")
    leaves, rows = only_row(con, "select count(*), coalesce(sum(rows_in), 0) from base.leaf")
    return Verified(runs, leaves, int(rows), last or NO_DIGEST, look, findings)


def _damage_findings(con: duckdb.DuckDBPyConnection) -> Iterator[Finding]:
    damaged = find_damage(con)
    for one in damaged:
        yield Finding(one.sentence, one.table_name)
    if damaged:
        yield Finding(f"All other columns and tables can be read. To be whole again, {THE_WAY_BACK}.")


def _schema_findings(con: duckdb.DuckDBPyConnection) -> Iterator[Finding]:
    """The catalog against that of a fresh book."""
    expected, _ = _fresh()
    found = _catalog(con)
    for name in sorted(expected.keys() | found.keys()):
        if name not in found:
            yield Finding(f"{name} is missing from the book.")
        elif name not in expected:
            yield Finding(f"{name} is in the book and driftbook did not make it.")
        elif expected[name] != found[name]:
            yield Finding(f"{name} is defined differently from what the migrations say.")


def _migration_findings(con: duckdb.DuckDBPyConnection) -> Iterator[Finding]:
    stored = con.execute("select number, name, sha256 from base.migration order by number").fetchall()
    if stored != [(one.number, one.name, one.sha256) for one in migrate.all_migrations()]:
        yield Finding("base.migration does not list the migrations of this driftbook, each once.")


def _constant_findings(con: duckdb.DuckDBPyConnection) -> Iterator[Finding]:
    """Tables that only migrations write, against those of a fresh book."""
    _, expected = _fresh()
    found = _constants(con)
    for table in sorted(expected.keys() | found.keys()):
        if expected.get(table) != found.get(table):
            yield Finding(f"{table} does not hold what the migrations put there.", table)


@cache
def _fresh() -> tuple[_Catalog, _Constants]:
    # read back from a file, since definitions come back from one in another wording than they were given in
    with TemporaryDirectory() as folder:
        create(Path(folder) / "fresh.duckdb")
        with attached(Path(folder) / "fresh.duckdb") as fresh:
            return _catalog(fresh), _constants(fresh)


def _constants(con: duckdb.DuckDBPyConnection) -> _Constants:
    written = ["run", "leaf", "migration", *(table.name for table in tracked_tables())]
    tables = con.execute(query("tables_of_migrations"), [written]).fetchall()
    return {table: con.execute(f"from base.{table} order by all").fetchall() for (table,) in tables}


def _catalog(con: duckdb.DuckDBPyConnection) -> _Catalog:
    rows = con.execute(query("catalog_of_book")).fetchall()
    return {f"{kind} {name}": (_EXCLUDED.sub(_in_order, sql), comment) for kind, name, sql, comment in rows}


def _in_order(excluded: re.Match[str]) -> str:
    return f"EXCLUDE ({', '.join(sorted(excluded[1].split(', ')))})"


def _leaf_findings(con: duckdb.DuckDBPyConnection) -> Iterator[Finding]:
    """Every leaf computed again from the rows that are there."""
    stored = {
        (leaf.table_name, leaf.series_id, leaf.run_id): leaf
        for leaf in (digest.Leaf(*row) for row in con.execute(query("all_leaves")).fetchall())
    }
    stored = _with_what_was_forgotten(con, stored)
    names = dict(con.execute("select series_id, series from base.series").fetchall())
    seen = set()
    for leaf in _leaves_again(con):
        where = (leaf.table_name, leaf.series_id, leaf.run_id)
        seen.add(where)
        if where not in stored:
            yield _finding(leaf, names, f"holds {leaf.rows_in} rows and {leaf.rows_closed} closed that no run wrote")
        elif stored[where] != leaf:
            yield _finding(leaf, names, _difference(stored[where], leaf))
    for where in sorted(stored.keys() - seen, key=str):
        gone = stored[where]
        yield _finding(gone, names, f"has lost the {gone.rows_in} rows and {gone.rows_closed} closed of this run")


def _with_what_was_forgotten(con: duckdb.DuckDBPyConnection, stored: _Stored) -> _Stored:
    """The leaves as `forget` left them; the chain is over those that were there before."""
    left = dict(stored)
    for run_id, table_name, series_id, rows_in, rows_closed, sha256 in con.execute(
        query("forgotten_leaves")
    ).fetchall():
        where = (table_name, series_id, run_id)
        if where in stored and (rows_in or rows_closed):
            left[where] = stored[where]._replace(rows_in=rows_in, rows_closed=rows_closed, sha256=sha256)
        else:
            left.pop(where, None)
    return left


def _leaves_again(con: duckdb.DuckDBPyConnection) -> Iterator[digest.Leaf]:
    bounds = con.execute("select run_id, migration from base.run order by run_id").fetchall()
    last = max((run_id for run_id, _ in bounds), default=0)
    for table in tracked_tables():
        for migration, group in groupby(bounds, key=lambda run: run[1]):
            runs = [run_id for run_id, _ in group]
            if table.name in columns_at(migration):
                columns = columns_at(migration)[table.name]
                yield from digest.leaves(con, table, columns, (runs[0], runs[-1]), migration)
        if _beyond(con, table, last):
            columns = columns_at(migrate.newest())[table.name]
            yield from digest.leaves(con, table, columns, (last + 1, 2**31 - 1), migrate.newest())


def _beyond(con: duckdb.DuckDBPyConnection, table: Tracked, last: int) -> bool:
    """Whether a table holds rows of runs that the book does not know."""
    closed = "or run_to > $last" if table.closes else ""
    sql = f"select count(*) from base.{table.name} where run_from > $last {closed}"
    return bool(only_row(con, sql, {"last": last})[0])


def _difference(stored: digest.Leaf, found: digest.Leaf) -> str:
    if (stored.rows_in, stored.rows_closed) != (found.rows_in, found.rows_closed):
        return (
            f"holds {found.rows_in} rows and {found.rows_closed} closed "
            f"where the run wrote {stored.rows_in} and closed {stored.rows_closed}"
        )
    return f"has the right count of rows ({found.rows_in} and {found.rows_closed} closed) but other contents"


def _finding(leaf: digest.Leaf, names: dict[int, str], what: str) -> Finding:
    series = None if leaf.series_id is None else names.get(leaf.series_id, f"number {leaf.series_id}")
    of_series = "" if series is None else f", series {series!r}"
    return Finding(f"{leaf.table_name}{of_series}, run {leaf.run_id}: {what}.", leaf.table_name, series, leaf.run_id)


def _chain_findings(con: duckdb.DuckDBPyConnection) -> Iterator[Finding]:
    runs = con.execute("select run_id, migration, digest from base.run order by run_id").fetchall()
    for run_id, migration, stored in runs:
        is_known = 1 <= migration <= migrate.newest()
        if not is_known or chain(con, run_id, columns_at(migration)["run"]) != stored:
            yield Finding(
                f"run {run_id}: its row, its leaves or the digest before it are not those that it was written with.",
                "run",
                run_id=run_id,
            )


def _run_findings(con: duckdb.DuckDBPyConnection, look: lock.LastLook) -> Iterator[Finding]:
    for (run_id,) in con.execute(query("runs_out_of_order")).fetchall():
        sentence = f"run {run_id}: its number or its moment does not follow the run before it."
        yield Finding(sentence, "run", run_id=run_id)
    (last,) = only_row(con, "select coalesce(max(run_id), 0) from base.run")
    noted = re.fullmatch(r"run (\d+)", look.found or "")
    if noted and int(noted[1]) > last:
        sentence = (
            f"run {noted[1]}: the lock file notes that it was made, and the book ends with run {last}: an older copy "
            f"was put here. Take in again what came after run {last}; once a new run is made, this is said no more."
        )
        yield Finding(sentence, "run", run_id=int(noted[1]))


def _intake_findings(con: duckdb.DuckDBPyConnection) -> Iterator[Finding]:
    for intake_id, run_id in con.execute(query("intakes_that_do_not_add_up")).fetchall():
        sentence = f"intake {intake_id}, run {run_id}: rows read are not new + revised + same + refused."
        yield Finding(sentence, "intake", run_id=run_id)


def _version_findings(con: duckdb.DuckDBPyConnection, table: Tracked) -> Iterator[Finding]:
    """Rows of which two versions are in force at once."""
    subject = ", ".join(table.subject) or "1"
    series = "series_id" if table.by_series else "null"
    names = dict(con.execute("select series_id, series from base.series").fetchall())
    sql = query("overlapping_versions").format(table=table.name, subject=subject, series=series)
    for series_id, run_id, count in con.execute(sql).fetchall():
        leaf = digest.Leaf(run_id, table.name, series_id, 0, 0, 0, "")
        yield _finding(leaf, names, f"{count} rows have another version in force at the same time")
