"""Taking in one source: from its bytes to observations, refused rows and the intake's own row."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from os import PathLike
from pathlib import Path

import duckdb

from driftbook.store.intake import naming
from driftbook.store.intake.bringing_in import bring_in
from driftbook.store.intake.opening import opened
from driftbook.store.intake.options import Options, check
from driftbook.store.intake.outcome import Outcome, Refused
from driftbook.store.intake.reading import read_rows
from driftbook.store.intake.scratch import clear, scratch
from driftbook.store.intake.source import Rows
from driftbook.store.intake.taking_up import is_awaited, take_up
from driftbook.store.series import Stamp, series_by_name
from driftbook.store.sql import query


@dataclass(frozen=True)
class _Arrival:
    source: str
    sha256: str
    options: Options
    stamp: Stamp


def take_in(
    con: duckdb.DuckDBPyConnection,
    source: object,
    options: Options,
    stamp: Stamp,
    *,
    name: str | None = None,
) -> Outcome:
    """Takes in a file or a frame: each of its rows becomes an observation, is known already, or is refused.

    `source` is a path, `-` for standard input, or a frame of polars, pandas, Arrow or anything that speaks Arrow.

    `con` writes to a private copy of the book, which is thrown away if this raises. The newest intake of the same
    source with the same bytes and options is known and taken as read.
    """
    check(options)
    naming.check_named_series(con, options)
    origin = Path(source) if isinstance(source, str | PathLike) else source
    called = name or (origin.name if isinstance(origin, Path) else "frame")
    naming.check_source(called)
    with opened(con, origin, options, called) as (sha256, rows):
        arrival = _Arrival(called, sha256, options, stamp)
        known = _known_as(con, arrival)
        if known is not None:
            return _known_already(con, known, arrival)
        with scratch(con):
            return _take(con, rows, arrival)


def _known_as(con: duckdb.DuckDBPyConnection, arrival: _Arrival) -> int | None:
    """The newest intake of the source, if it had the same bytes and options."""
    for intake_id, *identity in con.execute(query("intake_newest"), [arrival.source]).fetchall():
        if identity == [arrival.sha256, arrival.options.identity()]:
            return int(intake_id)
    return None


def _known_already(con: duckdb.DuckDBPyConnection, intake_id: int, arrival: _Arrival) -> Outcome:
    """Nothing to read again; but `--add-series` given on second thought makes names known that rows wait for."""
    added: tuple[str, ...] = ()
    if arrival.options.add_series:
        waiting = con.execute(query("intake_waiting_names"), [intake_id]).fetchall()
        added = naming.add_new(con, [name for (name,) in waiting], arrival.stamp)
        take_up(con, added, arrival.stamp, yes=arrival.options.yes)
    return Outcome(arrival.source, intake_id, 0, 0, 0, 0, 0, known_already=True, series_added=added, refused=[])


def _take(con: duckdb.DuckDBPyConnection, rows: Rows, arrival: _Arrival) -> Outcome:
    options, stamp = arrival.options, arrival.stamp
    rows_read = read_rows(con, rows, options, series_by_name(con))
    added: tuple[str, ...] = ()
    if options.add_series:
        added = naming.add_new(con, naming.unknown_names(con), stamp)
        if is_awaited(con, added):
            clear(con)
            take_up(con, added, stamp, yes=options.yes)
            rows_read = read_rows(con, rows, options, series_by_name(con))
    intake_id = _next_intake(con)
    counts = bring_in(con, rows, intake_id, stamp, rows_read=rows_read, yes=options.yes)
    con.execute(
        query("intake_insert_intake"),
        {
            "intake_id": intake_id,
            "source": arrival.source,
            "sha256": arrival.sha256,
            "options": options.identity(),
            "received_at": stamp.time,
            "read": rows_read,
            "run_id": stamp.run_id,
            **asdict(counts),
        },
    )
    return Outcome(
        source=arrival.source,
        intake_id=intake_id,
        rows_read=rows_read,
        rows_new=counts.new,
        rows_revised=counts.revised,
        rows_same=counts.same,
        rows_refused=counts.refused,
        known_already=False,
        series_added=added,
        refused=_first_refused(con, intake_id, stamp),
    )


def _next_intake(con: duckdb.DuckDBPyConnection) -> int:
    return int(con.execute("select coalesce(max(intake_id), 0) + 1 from base.intake").fetchall()[0][0])


def _first_refused(con: duckdb.DuckDBPyConnection, intake_id: int, stamp: Stamp) -> list[Refused]:
    rows = con.execute(query("intake_first_refused"), [intake_id, stamp.run_id]).fetchall()
    return [Refused(*row) for row in rows]
