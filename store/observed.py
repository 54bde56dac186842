"""Observations of some series as arrays, each series' in the order of their times."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

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
    series_id, us = rows.column("series_id").to_numpy(), rows.column("us").to_numpy()
    values, days = rows.column("value").to_numpy(), rows.column("day").to_numpy() if with_days else us[:0]
    order = _order(series_id, us)
    if order is not None:
        series_id, us, values = series_id[order], us[order], values[order]
        days = days[order] if with_days else days
    return Observed(us, values, days, places(series_id))


def places(series_id: NDArray[np.int32]) -> dict[int, slice]:
    """Where the rows of each series stand among rows in the order of series."""
    bounds = [0, *(np.flatnonzero(np.diff(series_id)) + 1).tolist(), series_id.size]
    return {int(series_id[begin]): slice(begin, end) for begin, end in pairwise(bounds) if end > begin}


def _order(series_id: NDArray[np.int32], us: Microseconds) -> NDArray[np.intp] | None:
    """What puts rows into the order of series and time; None where they lie in it.

    They mostly do, or nearly: a book grows by intakes that are in order, and later ones bring later times.
    """
    if _is_in_order(series_id, us):
        return None
    order = np.argsort(series_id, kind="stable")
    return order if _is_in_order(series_id[order], us[order]) else np.lexsort((us, series_id))


def _is_in_order(series_id: NDArray[np.int32], us: Microseconds) -> bool:
    later = (series_id[1:] > series_id[:-1]) | ((series_id[1:] == series_id[:-1]) & (us[1:] > us[:-1]))
    return bool(later.all())
