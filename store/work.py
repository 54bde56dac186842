"""What a refresh has to do: for each model, the windows that are due and the entries that leave."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

import duckdb
import numpy as np
import pyarrow as pa

from driftbook.estimators import MODELS
from driftbook.store.clocks import equal_step, microseconds_per_unit
from driftbook.store.due import OBSERVATION, Asked, Days, Microseconds, Slice, Span, due
from driftbook.store.errors import PlanError
from driftbook.store.estimates import EstimateTable
from driftbook.store.plan import Plan, parse_plan
from driftbook.store.series import Series, known_series
from driftbook.store.sql import query

_WINDOWS_AT_ONCE = 400_000
_LOCAL_DAY = "(timezone(t.time_zone, timezone('UTC', o.observed_at))::date - date '1970-01-01')::bigint"


@dataclass
class ModelWork:
    """What is due for one model."""

    table: EstimateTable
    slices: list[Slice] = field(default_factory=list)
    spans: list[Span] = field(default_factory=list)
    in_force: int = 0
    leaving: dict[tuple[int, int], int] = field(default_factory=dict)

    @property
    def name(self) -> str:
        """The model's name."""
        return self.table.model.name


@dataclass
class Work:
    """All that is due, and what is needed to compute it."""

    models: list[ModelWork]
    series: dict[int, Series]
    times: dict[int, Microseconds]

    @property
    def windows(self) -> int:
        """How many windows are due."""
        return sum(one.windows for model in self.models for one in model.slices)

    @property
    def rows_leaving(self) -> int:
        """How many estimates in force belong to entries that the plan no longer has."""
        return sum(sum(model.leaving.values()) for model in self.models)

    @property
    def rows_in_force(self) -> int:
        """How many estimates are in force."""
        return sum(model.in_force for model in self.models)

    def portions(self) -> Iterator[list[int]]:
        """Series, some at a time, so that what is in memory stays bounded."""
        weights = {one.series_id: 0 for model in self.models for one in model.spans}
        for model in self.models:
            for one in model.slices:
                weights[one.series_id] += one.windows
        portion: list[int] = []
        weight = 0
        for series_id, windows in sorted(weights.items()):
            if portion and weight + windows > _WINDOWS_AT_ONCE:
                yield portion
                portion, weight = [], 0
            portion.append(series_id)
            weight += windows
        if portion:
            yield portion

    def slices(self, portion: list[int]) -> list[Slice]:
        """The due slices of some series, over all models."""
        chosen = set(portion)
        return [one for model in self.models for one in model.slices if one.series_id in chosen]


def needed(slices: list[Slice], series: dict[int, Series], times: dict[int, Microseconds]) -> pa.Table:
    """The series of some slices, with the first observation that is needed and how their steps are counted."""
    starts: dict[int, int] = {}
    for one in slices:
        starts[one.series_id] = min(one.start, starts.get(one.series_id, one.start))
    settings = [series[series_id].setting for series_id in starts]
    steps = [equal_step(setting.clock, setting.periods_per_year) for setting in settings]
    units = [
        microseconds_per_unit(setting.clock) if step is None else None
        for setting, step in zip(settings, steps, strict=True)
    ]
    return pa.table(
        {
            "series_id": pa.array(list(starts), pa.int32()),
            "skipped": pa.array(list(starts.values()), pa.int64()),
            "opens": pa.array([int(times[one][start]) for one, start in starts.items()], pa.int64()),
            "step": pa.array(steps, pa.float64()),
            "unit": pa.array(units, pa.int64()),
        }
    )


def find_work(con: duckdb.DuckDBPyConnection, plan: Plan, last: int, revised: set[str], *, everything: bool) -> Work:
    """What is due under a plan since run `last`; `revised` models are due as a whole."""
    series = known_series(con)
    tables = {name: EstimateTable(model) for name, model in MODELS.items()}
    in_force = {name: table.in_force(con) for name, table in tables.items()}
    reset = {series_id for (series_id,) in con.execute(query("settings_since"), [last]).fetchall()}
    before = _entries_at(con, last)
    asked: dict[str, list[Asked]] = {name: [] for name in MODELS}
    for entry in plan.entries:
        series_id = series[entry.series].series_id
        whole = (
            everything
            or series_id in reset
            or entry.model in revised
            or entry not in before
            or (series_id, entry.lookback) not in in_force[entry.model]
        )
        asked[entry.model].append(Asked(series_id, entry.lookback, entry.every, whole))
    models = []
    for name, wanted in asked.items():
        kept = {(one.series_id, one.lookback) for one in wanted}
        leaving = {key: count for key, count in in_force[name].items() if key not in kept}
        models.append(ModelWork(tables[name], in_force=sum(in_force[name].values()), leaving=leaving))
    by_id = {one.series_id: one for one in series.values()}
    return _with_what_is_due(con, last, list(asked.values()), models, by_id)


def _entries_at(con: duckdb.DuckDBPyConnection, run_id: int) -> set[object]:
    """The entries of the plan at a run; none if that plan can no longer be read."""
    found = con.execute(query("plan_at"), {"run": run_id}).fetchall()
    try:
        return {entry for (text,) in found for entry in parse_plan(text, "the plan before").plan.entries}
    except PlanError:
        return set()


def _with_what_is_due(
    con: duckdb.DuckDBPyConnection,
    last: int,
    asked: list[list[Asked]],
    models: list[ModelWork],
    series: dict[int, Series],
) -> Work:
    changed = split(con.sql(query("changed_since"), params={"last": last}).fetchnumpy(), "us")
    concerned = sorted({one.series_id for each in asked for one in each if one.whole or one.series_id in changed})
    thinned = any(one.every != OBSERVATION for each in asked for one in each)
    sql = query("times_in_force").format(local_day=_LOCAL_DAY if thinned else "0::bigint")
    columns = con.sql(sql, params={"series": concerned}).fetchnumpy()
    times, days = split(columns, "us"), split(columns, "day")
    none = np.empty(0, np.int64)
    found: dict[Asked, tuple[list[Slice], list[Span]]] = {}  # models mostly ask for the same
    for each, model in zip(asked, models, strict=True):
        for one in each:
            if one not in found:
                key = one.series_id
                found[one] = due(one, times.get(key, none), changed.get(key, none), days.get(key, none))
            slices, spans = found[one]
            model.slices += slices
            model.spans += spans
    return Work(models, series, times)


def split(columns: dict[str, np.ndarray], column: str) -> dict[int, Days]:
    """A column's values by series, from rows in the order of series."""
    series, values = np.asarray(columns["series_id"]), np.asarray(columns[column], np.int64)
    bounds = np.flatnonzero(np.diff(series)) + 1
    parts = np.split(values, bounds)
    return {int(series[start]): part for start, part in zip([0, *bounds], parts, strict=True) if part.size}
