"""The series of a book and their settings."""

from __future__ import annotations

import difflib
from collections.abc import Collection
from dataclasses import astuple, dataclass
from datetime import datetime

import duckdb

from driftbook.store.sql import only_row, query


@dataclass(frozen=True)
class Setting:
    """How one series is to be read and estimated; the defaults are those of a series added by `--add-series`."""

    sign: str = "any"
    unit: str | None = None
    clock: str = "trading"
    periods_per_year: float | None = 252.0
    time_zone: str = "UTC"
    same_time: str = "refuse"
    stale_after_days: float = 5.0
    in_force: str = "best"
    shift: float = 0.0
    planned: bool = False


@dataclass(frozen=True)
class Series:
    """One named series of the book with the setting in force."""

    series_id: int
    name: str
    setting: Setting


@dataclass(frozen=True)
class Stamp:
    """The run that a change belongs to, and the time that its new rows carry as 'received' or 'added'."""

    run_id: int
    time: datetime


def near_name(name: str, names: Collection[str]) -> str:
    """`; did you mean 'x'?` where one of the names is near, else nothing."""
    near = difflib.get_close_matches(name, names, n=1)
    return f"; did you mean {near[0]!r}?" if near else ""


def ended(sentence: str) -> str:
    """A sentence with its full stop, unless it ends with a question."""
    return sentence if sentence.endswith("?") else f"{sentence}."


def known_series(con: duckdb.DuckDBPyConnection) -> dict[str, Series]:
    """All series of the book by name."""
    rows = con.execute(query("known_series")).fetchall()
    return {name: Series(series_id, name, Setting(*setting)) for series_id, name, *setting in rows}


def series_by_name(con: duckdb.DuckDBPyConnection) -> dict[str, Series]:
    """All series by every name that means them in files: their own, and those of the plan's `also_called`."""
    known = known_series(con)
    by_id = {series.series_id: series for series in known.values()}
    aliases = {name: by_id[series_id] for name, series_id in con.execute(query("aliases")).fetchall()}
    return aliases | known


def put_aliases_in_force(con: duckdb.DuckDBPyConnection, wanted: dict[str, int], stamp: Stamp) -> list[str]:
    """Makes `wanted` (name: series_id) the other names in force; gives those that are new."""
    current = dict(con.execute(query("aliases")).fetchall())
    gone = [name for name in current if wanted.get(name) != current[name]]
    new = [name for name in wanted if current.get(name) != wanted[name]]
    for name in gone:
        con.execute("update base.alias set run_to = ? where name = ? and run_to is null", [stamp.run_id, name])
    for name in new:
        con.execute(
            "insert into base.alias (series_id, name, run_from) values (?, ?, ?)", [wanted[name], name, stamp.run_id]
        )
    return new


def add_series(con: duckdb.DuckDBPyConnection, names: dict[str, Setting], stamp: Stamp) -> None:
    """Adds series that the book does not have yet, in the order given."""
    (first_free,) = only_row(con, query("first_free_series"))
    for series_id, (name, setting) in enumerate(names.items(), start=first_free):
        con.execute("insert into base.series values (?, ?, ?, ?)", [series_id, name, stamp.time, stamp.run_id])
        _insert_setting(con, series_id, setting, stamp)


def change_setting(con: duckdb.DuckDBPyConnection, series: Series, setting: Setting, stamp: Stamp) -> None:
    """Puts a new version of a series' setting in force."""
    con.execute(
        "update base.setting set run_to = ? where series_id = ? and run_to is null", [stamp.run_id, series.series_id]
    )
    _insert_setting(con, series.series_id, setting, stamp)


def _insert_setting(con: duckdb.DuckDBPyConnection, series_id: int, setting: Setting, stamp: Stamp) -> None:
    con.execute(query("insert_setting"), [series_id, *astuple(setting), stamp.run_id])
