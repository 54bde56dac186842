"""Computing a run again from the data as known then, and comparing with what it wrote; the book is not changed."""

from __future__ import annotations

import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from tempfile import TemporaryDirectory

import duckdb
import numpy as np

from driftbook.estimators import MODELS
from driftbook.store import functions
from driftbook.store.computing import computed
from driftbook.store.due import OBSERVATION, Asked, Slice, slice_of
from driftbook.store.errors import UsageError
from driftbook.store.estimates import EstimateTable
from driftbook.store.for_model import settings_at
from driftbook.store.observed import Observed, observed
from driftbook.store.reader import attached
from driftbook.store.series import Series, Setting
from driftbook.store.sql import only_row, query

_WORST = 20


@dataclass(frozen=True)
class Deviation:
    """One number that came out differently."""

    series: str
    model: str
    lookback: int
    window_end: str
    column: str
    stored: float | str | None
    again: float | str | None
    apart: float


@dataclass
class Reproduced:
    """What came of computing one run again: rows equal to the bit, equal within what counts as the same, different."""

    run_id: int
    identical: int = 0
    same: int = 0
    different: int = 0
    other_revision: dict[str, int] = field(default_factory=dict)
    worst: list[Deviation] = field(default_factory=list)

    @property
    def rows(self) -> int:
        """The rows that were computed again."""
        return self.identical + self.same + self.different


def reproduce(book: str | os.PathLike[str], run_id: int | None = None, *, every: bool = False) -> list[Reproduced]:
    """Computes the estimates that a run wrote again, from the observations and settings in force at that run.

    `run_id` None is the last run; `every` does all runs. Rows of a model revision that is no longer installed are
    counted apart. Raises UsageError for a run that the book does not have.
    """
    with attached(Path(book)) as con, _workbench(con):
        runs = [one for (one,) in con.execute("select run_id from base.run order by run_id").fetchall()]
        if not runs:
            raise UsageError(f"{book} has no run yet.")
        wanted = runs if every else [runs[-1] if run_id is None else run_id]
        if not set(wanted) <= set(runs):
            raise UsageError(f"{book} has no run {run_id}; its runs are 1 to {runs[-1]}.")
        return [_reproduce_run(con, one) for one in wanted]


@contextmanager
def _workbench(con: duckdb.DuckDBPyConnection) -> Iterator[None]:
    """Room for temporary tables that do not fit into memory, away from the book."""
    with TemporaryDirectory() as folder:
        con.execute(f"set temp_directory = '{folder}'")
        yield
        shutil.rmtree(folder, ignore_errors=True)


def _reproduce_run(con: duckdb.DuckDBPyConnection, run_id: int) -> Reproduced:
    found = Reproduced(run_id)
    series = _series_at(con, run_id)
    for name, model in MODELS.items():
        (others,) = only_row(
            con, f"select count(*) from base.{name} where run_from = ? and revision <> ?", [run_id, model.revision]
        )
        if others:
            found.other_revision[name] = others
        _reproduce_model(con, name, run_id, series, found)
    found.worst.sort(key=lambda one: -one.apart)
    del found.worst[_WORST:]
    return found


def _series_at(con: duckdb.DuckDBPyConnection, run_id: int) -> dict[int, Series]:
    rows = con.execute(query("series_at"), {"run": run_id}).fetchall()
    return {series_id: Series(series_id, name, Setting(*setting)) for series_id, name, *setting in rows}


def _reproduce_model(
    con: duckdb.DuckDBPyConnection, name: str, run_id: int, series: dict[int, Series], found: Reproduced
) -> None:
    table = EstimateTable(MODELS[name])
    written = con.execute(query("written_by").format(table=name), {"run": run_id, "revision": table.model.revision})
    rows = written.fetchall()
    if not rows:
        return
    at_run = f"o.run_from <= {run_id} and (o.run_to is null or o.run_to > {run_id})"
    known = observed(con, sorted({row[0] for row in rows}), when=at_run)
    fixed, slices = settings_at(con, table.model, run_id), list(_slices(rows, known))
    again = computed(table.model, slices, known, series, fixed, functions.InlineExecutor())
    con.register("fresh", again)
    _compare(con, table, run_id, found)
    con.unregister("fresh")


def _slices(rows: list[tuple[int, int, list[int]]], known: Observed) -> Iterator[Slice]:
    """What computes the written windows again; one whose observations are not there comes out different."""
    for series_id, lookback, written in rows:
        there, ends = known.us[known.place(series_id)], np.array(written, np.int64)
        at = np.searchsorted(there, ends)
        earliest = lookback if there.size > lookback else 0
        found = at[np.isin(ends, there) & (at >= earliest)]
        if found.size:
            yield slice_of(Asked(series_id, lookback, OBSERVATION, whole=False), found, there.size)


def _compare(con: duckdb.DuckDBPyConnection, table: EstimateTable, run_id: int, found: Reproduced) -> None:
    name, values = table.model.name, {"run": run_id, "revision": table.model.revision}
    sql = query("compare_again").format(table=name, identical=table.identical(), same=table.same())
    identical, same, different = only_row(con, sql, values)
    found.identical += identical
    found.same += same
    found.different += different
    if different:
        for column in ("status", *table.stored):
            apart = "'infinity'::double" if column == "status" else query("apart").format(column=column)
            worst = query("worst_again").format(table=name, column=column, apart=apart, same=table.same())
            rows = con.execute(worst, {**values, "most": _WORST}).fetchall()
            found.worst += [
                Deviation(series, name, lookback, str(end), column, stored, again, apart)
                for series, lookback, end, stored, again, apart in rows
            ]
