"""Why a number moved: what two statements of one series say, and what came between them."""

from __future__ import annotations

import os
import re
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

import duckdb

from driftbook.estimators import MODELS
from driftbook.store.errors import UsageError
from driftbook.store.moments import parse_moment
from driftbook.store.reader import reading
from driftbook.store.series import ended, near_name
from driftbook.store.sql import first_row, query


@dataclass(frozen=True)
class Statement:
    """What the book said of a series' latest window at a run: each parameter with its interval."""

    run_id: int
    moment: datetime
    window_start: datetime
    window_end: datetime
    n: int
    status: str
    numbers: dict[str, tuple[float | None, float | None, float | None]]


@dataclass(frozen=True)
class Correction:
    """An observation in one of the windows that was corrected or withdrawn between the two runs."""

    observed_at: datetime
    before: float
    after: float | None
    run_id: int


@dataclass(frozen=True)
class Explanation:
    """Two statements and what came between them."""

    series: str
    model: str
    lookback: int
    earlier: Statement
    later: Statement
    corrections: list[Correction]
    steps_that_left: int
    steps_that_came: int
    causes: list[str]


def explain(
    book: str | os.PathLike[str],
    series: str,
    *,
    model: str | None = None,
    lookback: int | None = None,
    earlier: str | None = None,
    later: str | None = None,
) -> Explanation:
    """Compares what the book said of a series at two times.

    `earlier` and `later` are moments or `run:41`; by default the run before the last that changed the latest window,
    and now. model and lookback default to what `latest` speaks of. Raises UsageError where there is nothing to compare.
    """
    with reading(Path(book)) as con:
        return explain_on(con, series, model=model, lookback=lookback, earlier=earlier, later=later)


def explain_on(
    con: duckdb.DuckDBPyConnection,
    series: str,
    *,
    model: str | None = None,
    lookback: int | None = None,
    earlier: str | None = None,
    later: str | None = None,
) -> Explanation:
    """As `explain`, on a book that is open."""
    _check_series(con, series)
    chosen_model, chosen_lookback = _chosen(con, series, model, lookback)
    runs = _runs_of(con, series, chosen_model, chosen_lookback)
    if not runs:
        raise UsageError(f"there is no estimate of {chosen_model} on {series!r} with that lookback.")
    last = _run_at(con, later) if later else runs[-1]
    before = [run for run in runs if run < last]
    first = _run_at(con, earlier) if earlier else (before[-1] if before else runs[0])
    if first > last:
        raise UsageError(f"--from is run {first} and --to is run {last}; the earlier comes first.")
    one = _statement(con, series, chosen_model, chosen_lookback, first)
    other = _statement(con, series, chosen_model, chosen_lookback, last)
    left, came = _steps(con, series, one, other)
    return Explanation(
        series=series,
        model=chosen_model,
        lookback=chosen_lookback,
        earlier=one,
        later=other,
        corrections=_corrections(con, series, one, other),
        steps_that_left=left,
        steps_that_came=came,
        causes=_causes(con, series, first, last),
    )


def _runs_of(con: duckdb.DuckDBPyConnection, series: str, model: str, lookback: int) -> list[int]:
    values = {"series": series, "model": model, "lookback": lookback}
    return [run_id for (run_id,) in con.execute(query("runs_of"), values).fetchall()]


def _check_series(con: duckdb.DuckDBPyConnection, series: str) -> None:
    names = [name for (name,) in con.execute("select series from series").fetchall()]
    if series not in names:
        raise UsageError(ended(f"the book has no series {series!r}{near_name(series, names)}"))


def _chosen(con: duckdb.DuckDBPyConnection, series: str, model: str | None, lookback: int | None) -> tuple[str, int]:
    if model is not None and model not in MODELS:
        near = near_name(model, list(MODELS)) or f"; there are {', '.join(MODELS)}"
        raise UsageError(ended(f"no model is called {model!r}{near}"))
    row = first_row(con, query("headline_of"), {"series": series})
    if row is None:
        raise UsageError(f"{series!r} has not been estimated yet; put it into the plan and refresh.")
    if model is None and row[0] is None:
        raise UsageError(f"no model is in force for {series!r}; say which with --model.")
    return model or row[0], row[1] if lookback is None else lookback


def _run_at(con: duckdb.DuckDBPyConnection, when: str) -> int:
    told = re.fullmatch(r"run:(\d+)", when)
    if told:
        row = first_row(con, "select run_id from run where run_id = ?", [int(told[1])])
    else:
        row = first_row(con, "select max(run_id) from run where moment <= ?", [parse_moment(when)])
    if row is None or row[0] is None:
        raise UsageError(f'the book has no run at {when}; see driftbook sql BOOK "from run".')
    return int(row[0])


def _statement(con: duckdb.DuckDBPyConnection, series: str, model: str, lookback: int, run_id: int) -> Statement:
    parameters = [parameter.name for parameter in MODELS[model].parameters]
    numbers = ", ".join(f"{name}, {name}_lower, {name}_upper" for name in parameters)
    sql = query("statement_at").format(model=model, numbers=numbers)
    row = first_row(con, sql, {"series": series, "lookback": lookback, "run": run_id})
    if row is None:
        raise UsageError(f"after run {run_id} there was no estimate of {model} on {series!r} with that lookback.")
    start, end, n, status, moment, *values = row
    told = {name: (values[3 * at], values[3 * at + 1], values[3 * at + 2]) for at, name in enumerate(parameters)}
    return Statement(run_id, moment, start, end, n, status, told)


def _corrections(con: duckdb.DuckDBPyConnection, series: str, one: Statement, other: Statement) -> list[Correction]:
    values = {
        "series": series,
        "first": one.run_id,
        "last": other.run_id,
        "opens": min(one.window_start, other.window_start),
        "closes": max(one.window_end, other.window_end),
    }
    return [Correction(*row) for row in con.execute(query("corrections_between"), values).fetchall()]


def _steps(con: duckdb.DuckDBPyConnection, series: str, one: Statement, other: Statement) -> tuple[int, int]:
    """How many observations left between two windows, and how many came; late ones come too."""
    values = {"series": series, "first": one.run_id, "last": other.run_id}
    bounds = {"one_start": one.window_start, "other_start": other.window_start}
    ends = {"one_end": one.window_end, "other_end": other.window_end}
    row = first_row(con, query("steps_between"), {**values, **bounds, **ends})
    return (0, 0) if row is None else (int(row[0]), int(row[1]))


def _causes(con: duckdb.DuckDBPyConnection, series: str, first: int, last: int) -> list[str]:
    values = {"series": series, "first": first, "last": last}
    return [cause for (cause,) in con.execute(query("causes_between"), values).fetchall()]
