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

_LONG = 64

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
    sql = query("observed").format(when=when, day=f", {_LOCAL_DAY} as day" if with_days else "")
    rows = con.sql(sql, params={"series": series}).to_arrow_table()
    names = ["series_id", "us", "value", *(["day"] if with_days else [])]
    columns = _in_order({name: rows.column(name).to_numpy() for name in names})
    days = columns.get("day", columns["us"][:0])
    return Observed(columns["us"], columns["value"], days, places(columns["series_id"]))


def places(series_id: NDArray[np.int32]) -> dict[int, slice]:
    """Where the rows of each series stand among rows in the order of series."""
    return {int(series_id[place.start]): place for place in _stretches(series_id)}


def _stretches(series_id: NDArray[np.int32]) -> list[slice]:
    """The longest stretches of rows that are of one series."""
    bounds = [0, *(np.flatnonzero(series_id[1:] != series_id[:-1]) + 1).tolist(), series_id.size]
    return [slice(begin, end) for begin, end in pairwise(bounds) if end > begin]


def _in_order(columns: dict[str, NDArray[Any]]) -> dict[str, NDArray[Any]]:
    """Rows put in the order of series and times.

    Most intakes are in order and bring later times: where that makes long stretches, they are put one behind the other.
    """
    series_id, us = columns["series_id"], columns["us"]
    stretches = _stretches(series_id)
    if len(stretches) * _LONG < series_id.size:
        stretches.sort(key=lambda one: (int(series_id[one.start]), int(us[one.start])))
        columns = {name: np.concatenate([values[one] for one in stretches]) for name, values in columns.items()}
        series_id, us = columns["series_id"], columns["us"]
    step = series_id[1:] - series_id[:-1]
    if not ((step > 0) | ((step == 0) & (us[1:] > us[:-1]))).all():
        order = np.lexsort((us, series_id))
        columns = {name: values[order] for name, values in columns.items()}
    return columns
