"""How a model takes a series: what is added to its values, whether by their logarithm, and by which settings.

The settings of a model (quartic: centre and scale) are fixed when a series and lookback is first fitted, and kept, so
that its windows compare over time, whatever is corrected or computed again later.
"""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass

import duckdb
import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from driftbook.estimators import Model
from driftbook.store.due import Slice, steps_over_all
from driftbook.store.model_schema import settings_table
from driftbook.store.runs import Run
from driftbook.store.series import Series, Setting
from driftbook.store.sql import query

Key = tuple[int, int]  # series_id, lookback
Settings = dict[Key, tuple[float, ...]]


@dataclass(frozen=True)
class ForModel:
    """How a model takes one series."""

    shift: float
    on_logs: bool
    settings: tuple[float, ...]


def for_model(model: Model, setting: Setting, settings: tuple[float, ...]) -> ForModel:
    """A model of X > 0, or of ln X, takes X + shift; one that knows both takes prices by their logarithm."""
    on_logs = model.of_logs is not None and setting.sign == "positive"
    return ForModel(setting.shift if on_logs or model.range == "positive" else 0.0, on_logs, settings)


def slice_table(model: Model, slices: list[Slice], series: dict[int, Series], settings: Settings) -> pa.Table:
    """The slices as a table for SQL, with how the model takes each series."""
    taken = [
        for_model(model, series[one.series_id].setting, settings.get((one.series_id, one.lookback), ()))
        for one in slices
    ]
    return pa.table(
        {
            "series_id": pa.array([one.series_id for one in slices], pa.int32()),
            "lookback": pa.array([one.lookback for one in slices], pa.int32()),
            "steps": pa.array([one.steps for one in slices], pa.int32()),
            "start": pa.array([one.start for one in slices], pa.int64()),
            "first": pa.array([one.first for one in slices], pa.int64()),
            "stop": pa.array([one.stop for one in slices], pa.int64()),
            "ends": pa.array([one.ends for one in slices], pa.list_(pa.int64())),
            "shift": pa.array([one.shift for one in taken], pa.float64()),
            "on_logs": pa.array([one.on_logs for one in taken], pa.bool_()),
            "settings": pa.array([list(one.settings) for one in taken], pa.list_(pa.float64())),
        }
    )


def settings_at(con: duckdb.DuckDBPyConnection, model: Model, run_id: int) -> Settings:
    """The settings of a model that were in force at a run, by series and lookback."""
    if not model.settings:
        return {}
    names = ", ".join(setting.name for setting in model.settings)
    rows = con.execute(
        f"select series_id, lookback, {names} from base.{settings_table(model)} where run_from <= ?", [run_id]
    ).fetchall()
    return {(series_id, lookback): tuple(values) for series_id, lookback, *values in rows}


def fix_settings(run: Run, model: Model, slices: list[Slice]) -> Settings:
    """The settings of a model, with those of series and lookbacks that now have their first whole window."""
    known = settings_at(run.con, model, run.stamp.run_id)
    if not model.settings:
        return known
    missing = sorted({(one.series_id, one.lookback) for one in slices} - known.keys())
    values = _values(run.con, {series_id for series_id, _ in missing})
    none = np.empty(0)
    found: Settings = {}
    for series_id, lookback in missing:
        x = values.get(series_id, none)
        steps = lookback or steps_over_all(x.size)
        if x.size > steps:
            found[series_id, lookback] = tuple(float(one) for one in model.settings_of(x, steps))
    rows = [[*key, *numbers, run.stamp.run_id] for key, numbers in found.items()]
    if rows:
        marks = ", ".join("?" * len(rows[0]))
        run.con.executemany(f"insert into base.{settings_table(model)} values ({marks})", rows)
    return known | found


def _values(con: duckdb.DuckDBPyConnection, series: Collection[int]) -> dict[int, NDArray[np.float64]]:
    """The values in force of some series, in time order."""
    if not series:
        return {}
    rows = con.sql(query("values_in_force"), params={"series": sorted(series)}).fetchnumpy()
    ids, values = np.asarray(rows["series_id"]), np.asarray(rows["value"], np.float64)
    bounds = np.flatnonzero(np.diff(ids)) + 1
    parts = np.split(values, bounds)
    return {int(ids[start]): part for start, part in zip([0, *bounds], parts, strict=True) if part.size}
