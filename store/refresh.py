"""A refresh: puts the plan in force, then computes what is due and writes what changed."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor
from dataclasses import dataclass, field, replace

import duckdb

from driftbook.estimators import MODELS
from driftbook.store import intake
from driftbook.store.computing import computed
from driftbook.store.errors import PlanError, UsageError
from driftbook.store.for_model import Settings, fix_settings
from driftbook.store.inbox import Delivered
from driftbook.store.latest import write_latest
from driftbook.store.plan import Plan, PlanText, parse_plan
from driftbook.store.runs import Run
from driftbook.store.series import Series, add_series, change_setting, known_series, put_aliases_in_force
from driftbook.store.sql import first_row, only_row, query
from driftbook.store.work import Work, find_work


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
    rows_to_close: int
    taken_up: int = 0
    plan_changed: bool = False
    warnings: tuple[str, ...] = ()
    delivered: Delivered = field(default_factory=Delivered)

    @property
    def windows_failed(self) -> int:
        """The windows for which no numbers could be given."""
        return self.windows_due - self.windows_fitted


def put_plan_in_force(run: Run, given: PlanText | None, *, yes: bool) -> tuple[Plan, bool, int]:
    """Replaces the book's plan if another text was given, and puts its series, settings and other names in force.

    Gives the plan to follow, whether it changed, and how many rows that waited for a name were taken up. Raises
    PlanError for a plan that does not fit the book, UsageError where there is none.
    """
    plan, changed = _replace_plan(run, given, yes)
    return plan, changed, _put_settings_in_force(run, plan, yes=yes)


def refresh(
    run: Run,
    plan: Plan,
    executor: Executor,
    *,
    everything: bool = False,
    yes: bool = False,
    dry_run: bool = False,
    report: Callable[[Progress], None] | None = None,
) -> Refreshed:
    """Estimates what is due in the draft of a run, in blocks that go to the executor.

    Raises UsageError where a person has to say yes.
    """
    last = last_refresh(run.con)
    revised = {name for name in MODELS if _put_revision_in_force(run, name)}
    work = find_work(run.con, plan, last, revised, everything=everything)
    _ask_before_closing(work, yes)
    if dry_run:
        return Refreshed(work.windows, work.windows, work.rows_leaving)
    run.kind = "refresh"
    for model in work.models:
        model.table.close_entries(run.con, list(model.leaving), run.stamp.run_id)
    fixed = {model.name: fix_settings(run, model.table.model, model.slices, work.known) for model in work.models}
    for portion in work.portions():
        _estimate(run, work, portion, fixed, executor)
        if report is not None:
            report(Progress(run.windows.due, work.windows))
    write_latest(run, plan, work, last)
    return Refreshed(run.windows.due, run.windows.fitted, work.rows_leaving, warnings=_warnings(run.con))


def last_refresh(con: duckdb.DuckDBPyConnection) -> int:
    """The number of the last run that estimated; 0 before the first."""
    return int(only_row(con, "select coalesce(max(run_id), 0) from base.run where kind = 'refresh'")[0])


def _warnings(con: duckdb.DuckDBPyConnection) -> tuple[str, ...]:
    """What the plan may not have meant: elapsed time for series that keep no weekends."""
    names = [name for (name,) in con.execute(query("weekday_series_on_elapsed_time")).fetchall()]
    return tuple(
        f"{name} has no weekends and its clock counts them: its volatility comes out 7 to 9 % too high; "
        'clock = "trading" counts steps instead.'
        for name in names
    )


def _estimate(run: Run, work: Work, portion: list[int], fixed: dict[str, Settings], executor: Executor) -> None:
    """Computes and writes what is due for some series."""
    chosen = set(portion)
    for model in work.models:
        slices = [one for one in model.slices if one.series_id in chosen]
        spans = [one for one in model.spans if one.series_id in chosen]
        if slices or spans:
            fresh = computed(model.table.model, slices, work.known, work.series, fixed[model.name], executor)
            model.table.write(run.con, fresh, spans, run.stamp.run_id)
            run.windows.due += len(fresh)
            run.windows.fitted += len(fresh) - fresh.column("loglik").null_count


def _replace_plan(run: Run, given: PlanText | None, yes: bool) -> tuple[Plan, bool]:
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


def _put_settings_in_force(run: Run, plan: Plan, *, yes: bool) -> int:
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
    awaited = [*new, *_put_aliases_in_force(run, plan)]
    return intake.take_up(run.con, awaited, run.stamp, yes=yes) if awaited else 0


def _put_aliases_in_force(run: Run, plan: Plan) -> list[str]:
    known = known_series(run.con)
    own = set(known)
    wanted = {}
    for series in plan.series:
        for name in series.also_called:
            if name in own:
                raise PlanError(f"series {series.name!r}: also_called names {name!r}, which is a series of the book.")
            wanted[name] = known[series.name].series_id
    return put_aliases_in_force(run.con, wanted, run.stamp)


def _check_time_zone(con: duckdb.DuckDBPyConnection, series: Series, zone: str) -> None:
    if series.setting.time_zone == zone:
        return
    if first_row(con, "select 1 from base.observation where series_id = ? limit 1", [series.series_id]):
        raise PlanError(
            f"series {series.name!r}: time_zone cannot change from {series.setting.time_zone} to {zone}, "
            f'since there are observations; leave it and say zone = "{zone}" where its files are read, or begin a '
            "series of another name: the plan first, its files second."
        )


def _ask_before_closing(work: Work, yes: bool) -> None:
    if not yes and 2 * work.rows_leaving > work.rows_in_force:
        raise UsageError(
            f"the plan would close {work.rows_leaving} of {work.rows_in_force} estimates in force, more than half; "
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
