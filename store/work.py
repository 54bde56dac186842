"""What a refresh has to do: for each model, the windows that are due and the entries that leave."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

import duckdb
import numpy as np

from driftbook.estimators import MODELS
from driftbook.store.due import OBSERVATION, Asked, Slice, Span, due
from driftbook.store.errors import PlanError
from driftbook.store.estimates import EstimateTable
from driftbook.store.observed import Microseconds, Observed, observed, places
from driftbook.store.plan import Entry, Plan, parse_plan
from driftbook.store.series import Series, known_series
from driftbook.store.sql import only_row, query

_WINDOWS_AT_ONCE = 400_000


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
    known: Observed

    @property
    def windows(self) -> int:
        """How many windows are due."""
        return sum(one.windows for model in self.models for one in model.slices)

    @property
    def series_due(self) -> set[int]:
        """The series of which windows are due, or may have vanished."""
        slices = {one.series_id for model in self.models for one in model.slices}
        return slices | {one.series_id for model in self.models for one in model.spans}

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
        weights = dict.fromkeys(self.series_due, 0)
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


def find_work(con: duckdb.DuckDBPyConnection, plan: Plan, last: int, revised: set[str], *, everything: bool) -> Work:
    """What is due under a plan since run `last`; `revised` models are due as a whole."""
    series = known_series(con)
    tables = {name: EstimateTable(model) for name, model in MODELS.items()}
    reset = {series_id for (series_id,) in con.execute(query("settings_since"), [last]).fetchall()}
    before = _entries_at(con, last, plan)
    in_force = _in_force(con, tables, last, before, plan)
    asked: dict[str, list[Asked]] = {name: [] for name in MODELS}
    for entry in plan.entries:
        series_id = series[entry.series].series_id
        whole = (
            everything
            or series_id in reset
            or entry.model in revised
            or entry not in before
            or (in_force is not None and (series_id, entry.lookback) not in in_force[entry.model])
        )
        asked[entry.model].append(Asked(series_id, entry.lookback, entry.every, whole))
    models = []
    for name, wanted in asked.items():
        there = in_force[name] if in_force is not None else {}
        kept = {(one.series_id, one.lookback) for one in wanted}
        leaving = {key: count for key, count in there.items() if key not in kept}
        models.append(ModelWork(tables[name], in_force=sum(there.values()), leaving=leaving))
    by_id = {one.series_id: one for one in series.values()}
    return _with_what_is_due(con, last, list(asked.values()), models, by_id)


def _in_force(
    con: duckdb.DuckDBPyConnection, tables: dict[str, EstimateTable], last: int, before: set[Entry], plan: Plan
) -> dict[str, dict[tuple[int, int], int]] | None:
    """How many estimates each entry has in force; None, unread, where none left the plan and none was forgotten."""
    (forgettings,) = only_row(con, query("forgettings_since"), [last])
    if before and before.issubset(plan.entries) and not forgettings:
        return None
    return {name: table.in_force(con) for name, table in tables.items()}


def _entries_at(con: duckdb.DuckDBPyConnection, run_id: int, plan: Plan) -> set[Entry]:
    """The entries of the plan at a run, which may be `plan`, in force now; none if it can no longer be read."""
    found = con.execute(query("plan_at"), {"run": run_id}).fetchall()
    try:
        plans = [plan if is_in_force else parse_plan(text, "the plan before").plan for text, is_in_force in found]
    except PlanError:
        return set()
    return {entry for one in plans for entry in one.entries}


def _with_what_is_due(
    con: duckdb.DuckDBPyConnection,
    last: int,
    asked: list[list[Asked]],
    models: list[ModelWork],
    series: dict[int, Series],
) -> Work:
    changed = _changed_since(con, last)
    concerned = sorted({one.series_id for each in asked for one in each if one.whole or one.series_id in changed})
    thinned = any(one.every != OBSERVATION for each in asked for one in each)
    known = observed(con, concerned, with_days=thinned)
    none = np.empty(0, np.int64)
    found: dict[Asked, tuple[list[Slice], list[Span]]] = {}  # models mostly ask for the same
    for each, model in zip(asked, models, strict=True):
        for one in each:
            if one not in found:
                place = known.place(one.series_id)
                found[one] = due(one, known.us[place], changed.get(one.series_id, none), known.days[place])
            slices, spans = found[one]
            model.slices += slices
            model.spans += spans
    return Work(models, series, known)


def _changed_since(con: duckdb.DuckDBPyConnection, last: int) -> dict[int, Microseconds]:
    """When observations of each series were added, corrected or withdrawn after a run."""
    rows = con.sql(query("changed_since"), params={"last": last}).to_arrow_table()
    us = rows.column("us").to_numpy()
    return {series_id: us[place] for series_id, place in places(rows.column("series_id").to_numpy()).items()}
