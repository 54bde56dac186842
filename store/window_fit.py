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

from driftbook.estimators import MODELS, Status, aligned_start, rolling
from driftbook.store.clocks import equal_step, microseconds_per_unit
from driftbook.store.due import steps_over_all
from driftbook.store.errors import UsageError
from driftbook.store.series import ended, near_name
from driftbook.store.sql import query

_TAKES: list[Any] = ["VARCHAR", "DOUBLE[]", "BIGINT[]", "VARCHAR", "DOUBLE", "DOUBLE", "INTEGER"]
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
    con.execute(query("window_fit"))


def _parameters_of_windows(
    model: pa.ChunkedArray,
    x: pa.ChunkedArray,
    times: pa.ChunkedArray,
    clock: pa.ChunkedArray,
    periods_per_year: pa.ChunkedArray,
    shift: pa.ChunkedArray,
    lookback: pa.ChunkedArray,
) -> pa.Array:
    columns = (model, x, times, clock, periods_per_year, shift, lookback)
    rows = zip(*(column.to_pylist() for column in columns), strict=True)
    return pa.array([_parameters(*row) for row in rows])


def _parameters(
    model: str | None,
    x: list[float | None] | None,
    times: list[int] | None,
    clock: str,
    periods_per_year: float | None,
    shift: float,
    lookback: int | None,
) -> list[dict[str, Any]]:
    """One entry a parameter of the last window of a list; a status alone where there is no such window."""
    if model is None or model not in MODELS:
        near = near_name(str(model), list(MODELS)) or f"; there are {', '.join(MODELS)}"
        raise UsageError(ended(f"no model is called {model!r}{near}"))
    values = np.array([np.nan if value is None else value for value in x or []], np.float64)
    steps_wanted = lookback or steps_over_all(values.size)
    names = [parameter.name for parameter in MODELS[model].parameters]
    if steps_wanted < 1:
        return [_entry(name, None, max(values.size - 1, 0), Status.OUT_OF_RANGE) for name in names]
    if values.size <= steps_wanted:
        return [_entry(name, None, max(values.size - 1, 0), Status.TOO_SHORT) for name in names]
    if MODELS[model].range == "positive":
        values = values + shift
    first = values.size - 1 - steps_wanted
    start = aligned_start(first, steps_wanted)
    step = equal_step(clock, periods_per_year)
    steps: Any = step or np.diff(np.array(times, np.int64))[start:] / microseconds_per_unit(clock)
    fit = rolling(model, values[start:], steps, steps_wanted, first=first - start)
    status = _STATUSES[int(fit.status[0])]
    ends = ("", "_se", "_lower", "_upper")
    return [_entry(name, [float(fit.columns[name + end][0]) for end in ends], int(fit.n[0]), status) for name in names]


def _entry(name: str, numbers: list[float] | None, n: int, status: Status) -> dict[str, Any]:
    value, se, lower, upper = (None if np.isnan(one) else one for one in numbers or [np.nan] * 4)
    told = {"value": value, "se": se, "lower": lower, "upper": upper}
    return {"parameter": name, **told, "n": n, "status": status.word}
