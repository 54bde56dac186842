"""A refresh: puts the plan in force, then computes what is due and writes what changed."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

import duckdb
import numpy as np

from driftbook.estimators import MODELS
from driftbook.store import intake
from driftbook.store.due import Asked, Microseconds, Slice, Span, due, slice_table, span_table
from driftbook.store.errors import PlanError, UsageError
from driftbook.store.estimates import EstimateTable
from driftbook.store.plan import Plan, PlanText, parse_plan
from driftbook.store.runs import Run
from driftbook.store.series import Series, add_series, change_setting, known_series
from driftbook.store.sql import first_row, only_row, query

_WINDOWS_AT_ONCE = 400_000


@dataclass(frozen=True)
class Progress:
    """How far a refresh is: windows done of windows due."""

    done: int
    due: int


@dataclass(frozen=True)
class Refreshed:
    """What a refresh did, or would do."""

    windows_due: int
    windows_fitted: int
    entries_closed: int
    rows_to_close: int
    taken_up: int
    plan_changed: bool

    @property
    def windows_failed(self) -> int:
        """The windows for which no numbers could be given."""
        return self.windows_due - self.windows_fitted


@dataclass
class _Work:
    """What is due for one model."""

    table: EstimateTable
    slices: list[Slice] = field(default_factory=list)
    spans: list[Span] = field(default_factory=list)
    in_force: int = 0
    leaving: dict[tuple[int, int], int] = field(default_factory=dict)


def refresh(
    run: Run,
    plan: PlanText | None,
    *,
    everything: bool = False,
    yes: bool = False,
    dry_run: bool = False,
    report: Callable[[Progress], None] | None = None,
) -> Refreshed:
    """Estimates what is due in the draft of a run; `plan` None means the plan in force.

    Raises PlanError for a plan that does not fit the book, UsageError where a person has to say yes.
    """
    con = run.con
    chosen, changed = _plan_in_force(run, plan, yes)
    taken_up = _put_settings_in_force(run, chosen)
    works = _find_work(run, chosen, everything)
    leaving = sum(sum(work.leaving.values()) for work in works)
    _ask_before_closing(works, leaving, yes)
    due_count = sum(one.windows for work in works for one in work.slices)
    closed = sum(len(work.leaving) for work in works)
    if dry_run:
        return Refreshed(due_count, due_count, closed, leaving, taken_up, changed)
    run.kind = "refresh"
    fitted = 0
    for work in works:
        work.table.close_entries(con, list(work.leaving), run.stamp.run_id)
        for windows_due, windows_fitted in _estimate(run, work):
            run.windows.due += windows_due
            run.windows.fitted += windows_fitted
            fitted += windows_fitted
            if report is not None:
                report(Progress(run.windows.due, due_count))
    return Refreshed(run.windows.due, fitted, closed, leaving, taken_up, changed)


def _plan_in_force(run: Run, given: PlanText | None, yes: bool) -> tuple[Plan, bool]:
    """Replaces the book's plan if another text was given; the plan to follow and whether it changed."""
    stored = first_row(run.con, "select plan_sha256, name, text from base.plan where run_to is null")
    if given is None:
        if stored is None:
            raise UsageError("the book has no plan yet; give one with --plan plan.toml.")
        return parse_plan(stored[2], "the book's plan").plan, False
    if stored is not None and stored[0] == given.sha256:
        return given.plan, False
    if stored is not None and stored[1] != given.plan.name and not yes:
        raise PlanError(
            f"the book's plan is called {stored[1]!r} and this one {given.plan.name!r}; "
            "if it shall take its place, say so with --yes."
        )
    run.con.execute("update base.plan set run_to = ? where run_to is null", [run.stamp.run_id])
    run.con.execute(
        "insert into base.plan (plan_sha256, name, text, run_from) values (?, ?, ?, ?)",
        [given.sha256, given.plan.name, given.text, run.stamp.run_id],
    )
    return given.plan, True


def _put_settings_in_force(run: Run, plan: Plan) -> int:
    """Adds the plan's series, puts their settings in force, takes up the rows that waited for a name."""
    known = known_series(run.con)
    planned = {series.name: series.setting for series in plan.series}
    for name, setting in planned.items():
        if name in known and known[name].setting != setting:
            _check_time_zone(run.con, known[name], setting.time_zone)
            change_setting(run.con, known[name], setting, run.stamp)
    for name, series in known.items():
        if series.setting.planned and name not in planned:
            change_setting(run.con, series, replace(series.setting, planned=False), run.stamp)
    new = {name: setting for name, setting in planned.items() if name not in known}
    add_series(run.con, new, run.stamp)
    return intake.take_up(run.con, list(new), run.stamp) if new else 0


def _check_time_zone(con: duckdb.DuckDBPyConnection, series: Series, zone: str) -> None:
    if series.setting.time_zone == zone:
        return
    if first_row(con, "select 1 from base.observation where series_id = ? limit 1", [series.series_id]):
        raise PlanError(
            f"series {series.name!r}: time_zone cannot change from {series.setting.time_zone} to {zone}, "
            "since there are observations; add a series of another name."
        )


def _find_work(run: Run, plan: Plan, everything: bool) -> list[_Work]:
    """What is due for each model, and the entries in force that the plan no longer has."""
    con = run.con
    series = known_series(con)
    last = _last_refresh(con)
    reset = {series_id for (series_id,) in con.execute(query("settings_since"), [last]).fetchall()}
    works = []
    wanted: dict[str, list[Asked]] = {name: [] for name in MODELS}
    tables = {name: EstimateTable(model) for name, model in MODELS.items()}
    in_force = {name: table.in_force(con) for name, table in tables.items()}
    revised = {name for name in MODELS if _put_revision_in_force(run, name)}
    for entry in plan.entries:
        one = series[entry.series]
        whole = (
            everything
            or one.series_id in reset
            or entry.model in revised
            or (one.series_id, entry.lookback) not in in_force[entry.model]
        )
        wanted[entry.model].append(Asked(one.series_id, entry.lookback, _step(one), whole))
    for name, asked in wanted.items():
        kept = {(one.series_id, one.lookback) for one in asked}
        leaving = {key: count for key, count in in_force[name].items() if key not in kept}
        works.append(_Work(tables[name], in_force=sum(in_force[name].values()), leaving=leaving))
    _find_due(con, last, list(wanted.values()), works)
    return works


def _find_due(con: duckdb.DuckDBPyConnection, last: int, wanted: list[list[Asked]], works: list[_Work]) -> None:
    changed = _times_of(con.sql(query("changed_since"), params={"last": last}))
    concerned = {one.series_id for asked in wanted for one in asked if one.whole or one.series_id in changed}
    times = _times_of(con.sql(query("times_in_force"), params={"series": sorted(concerned)}))
    none = np.empty(0, np.int64)
    for asked, work in zip(wanted, works, strict=True):
        for one in asked:
            slices, spans = due(one, times.get(one.series_id, none), changed.get(one.series_id, none))
            work.slices += slices
            work.spans += spans


def _times_of(relation: duckdb.DuckDBPyRelation) -> dict[int, Microseconds]:
    """Ascending times by series, from rows (series_id, microseconds) in that order."""
    columns = relation.fetchnumpy()
    series, times = np.asarray(columns["series_id"]), np.asarray(columns["us"], np.int64)
    bounds = np.flatnonzero(np.diff(series)) + 1
    parts = np.split(times, bounds)
    return {int(series[start]): part for start, part in zip([0, *bounds], parts, strict=True) if part.size}


def _estimate(run: Run, work: _Work) -> Iterator[tuple[int, int]]:
    """Computes and writes what is due for one model, some series at a time so that memory stays bounded."""
    for series in _portions(work):
        slices = [one for one in work.slices if one.series_id in series]
        spans = [one for one in work.spans if one.series_id in series]
        yield work.table.estimate(run.con, sorted(series), slice_table(slices))
        work.table.write(run.con, span_table(spans), run.stamp.run_id)


def _portions(work: _Work) -> Iterator[set[int]]:
    weights: dict[int, int] = {one.series_id: 0 for one in work.spans}
    for one in work.slices:
        weights[one.series_id] += one.windows
    portion: set[int] = set()
    weight = 0
    for series_id, windows in sorted(weights.items()):
        if portion and weight + windows > _WINDOWS_AT_ONCE:
            yield portion
            portion, weight = set(), 0
        portion.add(series_id)
        weight += windows
    if portion:
        yield portion


def _ask_before_closing(works: list[_Work], leaving: int, yes: bool) -> None:
    in_force = sum(work.in_force for work in works)
    if not yes and 2 * leaving > in_force:
        raise UsageError(
            f"the plan would close {leaving} of {in_force} estimates in force, more than half; "
            "if it shall, say so with --yes."
        )


def _put_revision_in_force(run: Run, name: str) -> bool:
    """Notes with which revision of a model the book is estimated; whether that is another than before."""
    revision = MODELS[name].revision
    stored = first_row(run.con, "select revision from base.model_revision where model = ? and run_to is null", [name])
    if stored and stored[0] == revision:
        return False
    run.con.execute(
        "update base.model_revision set run_to = ? where model = ? and run_to is null", [run.stamp.run_id, name]
    )
    run.con.execute(
        "insert into base.model_revision (model, revision, run_from) values (?, ?, ?)",
        [name, revision, run.stamp.run_id],
    )
    return True


def _last_refresh(con: duckdb.DuckDBPyConnection) -> int:
    return int(only_row(con, "select coalesce(max(run_id), 0) from base.run where kind = 'refresh'")[0])


def _step(series: Series) -> float:
    periods = series.setting.periods_per_year
    assert periods is not None  # noqa: S101 - the clock `trading`, the only one so far, has periods
    return 1.0 / periods
