"""Observations of some series as arrays, each series' in the order of their times."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import duckdb
import numpy as np
from numpy.typing import NDArray

from driftbook.store.sql import query

IN_FORCE = "o.run_to is null"
_LOCAL_DAY = """(timezone(
  (select any_value(t.time_zone) from base.setting t where t.series_id = o.series_id and t.run_to is null),
  timezone('UTC', o.observed_at))::date - date '1970-01-01')::bigint"""

Microseconds = NDArray[np.int64]
Days = NDArray[np.int64]
Values = NDArray[np.float64]


@dataclass(frozen=True)
class Observed:
    """Times in microseconds and values; where each series stands in them; the local days if they were asked for."""

    us: Microseconds
    values: Values
    days: Days
    places: dict[int, slice]

    def place(self, series_id: int) -> slice:
        """Where a series stands; empty for one without observations."""
        return self.places.get(series_id, slice(0, 0))


def observed(
    con: duckdb.DuckDBPyConnection, series: list[int], *, when: str = IN_FORCE, with_days: bool = False
) -> Observed:
    """The observations of some series that are in force, or for which the SQL condition `when` on o holds."""
    sql = query("observed").format(when=when, day=_LOCAL_DAY if with_days else "null::bigint")
    rows = con.sql(sql, params={"series": series}).to_arrow_table()
    names = ["series_id", "us", "value", *(["day"] if with_days else [])]
    columns = _in_order({name: rows.column(name).to_numpy() for name in names})
    days = columns.get("day", columns["us"][:0])
    return Observed(columns["us"], columns["value"], days, places(columns["series_id"]))


def _in_order(columns: dict[str, NDArray[Any]]) -> dict[str, NDArray[Any]]:
    """Rows put in the order of series and times: a book grows by intakes in order, that mostly bring later times."""
    if (columns["series_id"][1:] < columns["series_id"][:-1]).any():
        columns = _taken(columns, np.argsort(columns["series_id"], kind="stable"))
    series_id, us = columns["series_id"], columns["us"]
    if ((us[1:] <= us[:-1]) & (series_id[1:] == series_id[:-1])).any():
        columns = _taken(columns, np.lexsort((us, series_id)))
    return columns


def _taken(columns: dict[str, NDArray[Any]], order: NDArray[np.intp]) -> dict[str, NDArray[Any]]:
    return {name: column[order] for name, column in columns.items()}


def places(series_id: NDArray[np.int32]) -> dict[int, slice]:
    """Where the rows of each series stand among rows in the order of series."""
    bounds = [0, *(np.flatnonzero(np.diff(series_id)) + 1).tolist(), series_id.size]
    return {int(series_id[begin]): slice(begin, end) for begin, end in pairwise(bounds) if end > begin}
