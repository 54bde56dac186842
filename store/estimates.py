"""Estimates as versions: a new version only where the numbers changed; the old one is closed, never overwritten.

Two estimates are the same when their status, steps and window agree, their log-likelihoods agree within 1e-6, and
every other number within 1e-9 of its size or 1e-6 of its parameter's standard error, whichever is larger.
"""

from __future__ import annotations

import duckdb
import pyarrow as pa

from driftbook.estimators import Model
from driftbook.store.due import Span, span_table
from driftbook.store.model_schema import stored_columns
from driftbook.store.sql import query

_KEY = "series_id, lookback, window_end"
_OF_AN_ESTIMATE = ("_se", "_lower", "_upper", "_median_unbiased")


class EstimateTable:
    """The SQL that keeps one model's table, made from what the model says of itself."""

    def __init__(self, model: Model) -> None:
        self.model = model
        self.stored = [name for name, _ in stored_columns(model)]
        self._kinds = dict(stored_columns(model))

    def in_force(self, con: duckdb.DuckDBPyConnection) -> dict[tuple[int, int], int]:
        """How many rows are in force for each (series, lookback)."""
        rows = con.execute(
            f"select series_id, lookback, count(*) from base.{self.model.name} where run_to is null group by all"
        ).fetchall()
        return {(series_id, lookback): count for series_id, lookback, count in rows}

    def write(self, con: duckdb.DuckDBPyConnection, fresh: pa.Table, spans: list[Span], run_id: int) -> None:
        """Puts what changed in force, and closes what it replaces and what is no longer there within the spans."""
        name = self.model.name
        con.register("fresh", fresh)
        con.execute(query("find_changed").format(table=name, same=self.same()))
        con.execute(query("close_replaced").format(table=name), {"run": run_id})
        if spans:
            con.register("due_span", span_table(spans))
            con.execute(query("close_vanished").format(table=name), {"run": run_id})
            con.unregister("due_span")
        columns = ", ".join(["series_id", "lookback", "window_start", "window_end", "n", *self.stored, "status"])
        con.execute(
            f"insert into base.{name} ({columns}, revision, run_from) "
            f"select {columns}, {self.model.revision}, {run_id} from changed order by {_KEY}"
        )
        con.execute("drop table changed")
        con.unregister("fresh")

    def close_entries(self, con: duckdb.DuckDBPyConnection, entries: list[tuple[int, int]], run_id: int) -> None:
        """Closes all rows in force of some (series, lookback)."""
        if entries:
            values = {
                "run": run_id,
                "series": [series_id for series_id, _ in entries],
                "lookbacks": [lookback for _, lookback in entries],
            }
            con.execute(query("close_entries").format(table=self.model.name), values)

    def identical(self) -> str:
        """SQL: whether a computed row f and a stored row b are equal to the bit."""
        columns = ["n", "window_start", "status", *self.stored]
        return " and ".join(f"f.{name} is not distinct from b.{name}" for name in columns)

    def same(self) -> str:
        """SQL: whether a computed row f and a stored row b say the same."""
        exact = ["f.n = b.n", "f.window_start = b.window_start", "f.status = b.status"]
        return " and ".join([*exact, *(self._close(name) for name in self.stored)])

    def _close(self, name: str) -> str:
        same = f"f.{name} is not distinct from b.{name}"
        if self._kinds[name] != "double":
            return same
        error = self._standard_error(name)
        tolerance = f"1e-9 * abs(b.{name})"
        if error:
            tolerance = f"greatest({tolerance}, 1e-6 * coalesce(b.{error}, 0))"
        if name == "loglik":
            tolerance = "1e-6"
        apart = f"abs(f.{name} - b.{name}) <= {tolerance}"
        return f"({same} or coalesce({apart}, false))"

    def _standard_error(self, name: str) -> str | None:
        """The standard error by which a number is measured: of what it is an estimate of, or an end, or an error."""
        stem = next((name.removesuffix(end) for end in _OF_AN_ESTIMATE if name.endswith(end)), name)
        return next((f"{one}_se" for one in (name, stem) if f"{one}_se" in self._kinds), None)
