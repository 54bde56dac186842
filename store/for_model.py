"""How a model takes a series: what is added to its values, whether by their logarithm, and by which settings.

The settings of a model (quartic: centre and scale) are fixed when a series and lookback is first fitted, and kept, so
that its windows compare over time, whatever is corrected or computed again later.
"""

from __future__ import annotations

from dataclasses import dataclass

import duckdb

from driftbook.estimators import Model
from driftbook.store.due import Slice, steps_over_all
from driftbook.store.model_schema import settings_table
from driftbook.store.observed import Observed
from driftbook.store.runs import Run
from driftbook.store.series import Setting

Settings = dict[tuple[int, int], tuple[float, ...]]
"""By series and lookback."""


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


def settings_at(con: duckdb.DuckDBPyConnection, model: Model, run_id: int) -> Settings:
    """The settings of a model that were in force at a run, by series and lookback."""
    if not model.settings:
        return {}
    names = ", ".join(setting.name for setting in model.settings)
    rows = con.execute(
        f"select series_id, lookback, {names} from base.{settings_table(model)} where run_from <= ?", [run_id]
    ).fetchall()
    return {(series_id, lookback): tuple(values) for series_id, lookback, *values in rows}


def fix_settings(run: Run, model: Model, slices: list[Slice], known: Observed) -> Settings:
    """The settings of a model, with those of series and lookbacks that now have their first whole window."""
    fixed = settings_at(run.con, model, run.stamp.run_id)
    if not model.settings:
        return fixed
    found: Settings = {}
    for one in slices:
        x = known.values[known.place(one.series_id)]
        steps = one.lookback or steps_over_all(x.size)
        if one.entry not in fixed and x.size > steps:
            found[one.entry] = tuple(float(number) for number in model.settings_of(x, steps))
    rows = [[*entry, *numbers, run.stamp.run_id] for entry, numbers in found.items()]
    if rows:
        marks = ", ".join("?" * len(rows[0]))
        run.con.executemany(f"insert into base.{settings_table(model)} values ({marks})", rows)
    return fixed | found
