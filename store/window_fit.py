"""`window_fit(name, model, …)`: the estimates of one stored series' window, computed now from the data as known then.

The macro gathers the series as it was known at a moment up to the window's end; the function behind it computes the
last window of that list, in the blocks that a refresh would use, so that the numbers are those of the book.
"""

from __future__ import annotations

from typing import Any

import duckdb
import numpy as np
import pyarrow as pa
from duckdb.func import FunctionNullHandling, PythonUDFType

from driftbook.estimators import MODELS, Status, aligned_start
from driftbook.store.clocks import equal_step, microseconds_per_unit
from driftbook.store.due import steps_over_all
from driftbook.store.errors import UsageError
from driftbook.store.for_model import for_model
from driftbook.store.functions import roll_block
from driftbook.store.model_schema import settings_table
from driftbook.store.series import Setting, ended, near_name
from driftbook.store.sql import query

_TAKES: list[Any] = [
    "VARCHAR", "DOUBLE[]", "BIGINT[]", "VARCHAR", "DOUBLE", "DOUBLE", "VARCHAR", "DOUBLE[]", "INTEGER"
]  # fmt: skip
_GIVES = "STRUCT(parameter VARCHAR, value DOUBLE, se DOUBLE, lower DOUBLE, upper DOUBLE, n INTEGER, status VARCHAR)[]"
_STATUSES = {int(status): status for status in Status}


def add_window_fit(con: duckdb.DuckDBPyConnection) -> None:
    """Adds the macro `window_fit` and the function behind it to a connection."""
    con.create_function(
        "parameters_of_window",
        _parameters_of_windows,
        _TAKES,
        _GIVES,
        type=PythonUDFType.ARROW,
        null_handling=FunctionNullHandling.SPECIAL,
    )
    con.execute(query("window_fit").format(settings=_settings_sql()))


def _settings_sql() -> str:
    """The settings of a model that were in force then, as a list; NULL for a model without."""
    of_models = [
        f"when '{model.name}' then (select [{', '.join(f'q.{one.name}' for one in model.settings)}] "
        f"from base.{settings_table(model)} q where q.series_id = a.series_id and q.lookback = a.steps "
        "and q.run_from <= (select k.run_id from k))"
        for model in MODELS.values()
        if model.settings
    ]
    return f"case model {' '.join(of_models)} end"


def _parameters_of_windows(
    model: pa.ChunkedArray,
    x: pa.ChunkedArray,
    times: pa.ChunkedArray,
    clock: pa.ChunkedArray,
    periods_per_year: pa.ChunkedArray,
    shift: pa.ChunkedArray,
    sign: pa.ChunkedArray,
    settings: pa.ChunkedArray,
    lookback: pa.ChunkedArray,
) -> pa.Array:
    columns = (model, x, times, clock, periods_per_year, shift, sign, settings, lookback)
    rows = zip(*(column.to_pylist() for column in columns), strict=True)
    return pa.array([_parameters(*row) for row in rows])


def _parameters(
    name: str | None,
    x: list[float | None] | None,
    times: list[int] | None,
    clock: str,
    periods_per_year: float | None,
    shift: float,
    sign: str,
    settings: list[float] | None,
    lookback: int | None,
) -> list[dict[str, Any]]:
    """One entry a setting or parameter of the last window of a list; a status alone where there is no such window."""
    if name is None or name not in MODELS:
        near = near_name(str(name), list(MODELS)) or f"; there are {', '.join(MODELS)}"
        raise UsageError(ended(f"no model is called {name!r}{near}"))
    model = MODELS[name]
    values = np.array([np.nan if value is None else value for value in x or []], np.float64)
    steps_wanted = lookback or steps_over_all(values.size)
    told = [one.name for one in (*model.settings, *model.parameters)]
    if steps_wanted < 1:
        return [_entry(one, None, max(values.size - 1, 0), Status.OUT_OF_RANGE) for one in told]
    if values.size <= steps_wanted:
        return [_entry(one, None, max(values.size - 1, 0), Status.TOO_SHORT) for one in told]
    given = settings or [float(one) for one in model.settings_of(values, steps_wanted)]
    taken = for_model(model, Setting(sign=sign, shift=shift), tuple(given))
    values = values + taken.shift
    first = values.size - 1 - steps_wanted
    start = aligned_start(first, steps_wanted)
    step = equal_step(clock, periods_per_year)
    steps: Any = step or np.diff(np.array(times, np.int64))[None, start:] / microseconds_per_unit(clock)
    by = np.array([taken.settings])
    fit = roll_block(name, values[None, start:], steps, steps_wanted, first - start, by, taken.on_logs)
    status = _STATUSES[int(fit.status[0, 0])]
    ends = ("", "_se", "_lower", "_upper")
    return [
        _entry(one, [float(fit.columns[one + end][0, 0]) if one + end in fit.columns else np.nan for end in ends],
               int(fit.n[0, 0]), status)
        for one in told
    ]  # fmt: skip


def _entry(name: str, numbers: list[float] | None, n: int, status: Status) -> dict[str, Any]:
    value, se, lower, upper = (None if np.isnan(one) else one for one in numbers or [np.nan] * 4)
    told = {"value": value, "se": se, "lower": lower, "upper": upper}
    return {"parameter": name, **told, "n": n, "status": status.word}
