"""The estimators as SQL functions: a function turns its chunk into blocks, hands them to an executor, holds no formula.

`rolling_<model>(x DOUBLE[], dt DOUBLE, lookback INTEGER)` gives one STRUCT a window. A series that is too short for
its lookback, or a NULL where a value must be, gives one STRUCT whose status says so.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from concurrent.futures import Executor, Future
from dataclasses import dataclass
from functools import partial
from typing import Any

import duckdb
import numpy as np
import pyarrow as pa
from duckdb.func import FunctionNullHandling, PythonUDFType
from numpy.typing import NDArray

from driftbook.estimators import MODELS, Fit, Model, Status, rolling

_BLOCK_VALUES = 1 << 18
_PADDING = 1.25
_SQL_TYPES = {"double": "DOUBLE", "boolean": "BOOLEAN"}
_WORDS = pa.array([status.word for status in Status], pa.string())


class InlineExecutor(Executor):
    """Does the work where it is handed in; the executor of one worker."""

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
        """Runs fn at once and gives its finished future."""
        future: Future[Any] = Future()
        future.set_result(fn(*args, **kwargs))
        return future


def register(con: duckdb.DuckDBPyConnection, executor: Executor) -> None:
    """Registers the functions of every model on a connection; their blocks go to the executor."""
    for model in MODELS.values():
        con.create_function(
            f"rolling_{model.name}",
            partial(_rolling, model, executor),
            ["DOUBLE[]", "DOUBLE", "INTEGER"],
            f"{struct_type(model)}[]",
            type=PythonUDFType.ARROW,
            null_handling=FunctionNullHandling.SPECIAL,
        )


def struct_type(model: Model) -> str:
    """The SQL type of one fit: n, the model's columns, status."""
    columns = ", ".join(f"{column.name} {_SQL_TYPES[column.kind]}" for column in model.columns)
    return f"STRUCT(n INTEGER, {columns}, status VARCHAR)"


@dataclass(frozen=True)
class _Asked:
    """One row of a chunk: a series and how to roll over it; None where an argument is NULL or unusable."""

    x: NDArray[np.float64]
    dt: float
    lookback: int

    @property
    def fits(self) -> bool:
        """Whether there is at least one whole window."""
        return self.lookback >= 1 and self.dt > 0 and self.x.size > self.lookback


def _rolling(model: Model, executor: Executor, x: pa.ChunkedArray, dt: Any, lookback: Any) -> pa.Array:
    asked = [
        _Asked(series, step, steps)
        for series, step, steps in zip(_lists(x), _numbers(dt), _integers(lookback), strict=True)
    ]
    usable = [row for row, one in enumerate(asked) if one.fits]
    found: list[_Rows] = [_unusable(model, one) for one in asked]
    futures = [(rows, executor.submit(roll_block, model.name, *block)) for rows, block in _blocks(asked, usable)]
    for rows, future in futures:
        fit = future.result()
        for position, row in enumerate(rows):
            found[row] = _Rows(fit, position, asked[row].x.size - asked[row].lookback)
    return _list_of_structs(model, found)


def roll_block(name: str, x: NDArray[np.float64], dt: float, lookback: int) -> Fit:
    """What a worker does with one block of series: arrays in, arrays out."""
    return rolling(name, x, dt, lookback)


def _blocks(
    asked: list[_Asked], usable: list[int]
) -> Iterator[tuple[list[int], tuple[NDArray[np.float64], float, int]]]:
    """Series of one step and lookback and of about the same length, filled up with NaN at their ends.

    What stands behind a series does not touch its windows, so padding moves no bit of them.
    """
    ordered = sorted(usable, key=lambda row: (asked[row].dt, asked[row].lookback, asked[row].x.size))
    block: list[int] = []
    for row in ordered:
        if block and not _belongs(asked[block[0]], asked[row], len(block)):
            yield block, _padded([asked[one] for one in block])
            block = []
        block.append(row)
    if block:
        yield block, _padded([asked[one] for one in block])


def _belongs(first: _Asked, other: _Asked, size: int) -> bool:
    alike = (first.dt, first.lookback) == (other.dt, other.lookback)
    return alike and other.x.size <= _PADDING * first.x.size and (size + 1) * other.x.size <= _BLOCK_VALUES


def _padded(series: list[_Asked]) -> tuple[NDArray[np.float64], float, int]:
    x = np.full((len(series), max(one.x.size for one in series)), np.nan)
    for row, one in enumerate(series):
        x[row, : one.x.size] = one.x
    return x, series[0].dt, series[0].lookback


@dataclass(frozen=True)
class _Rows:
    """The windows of one series: a row of a fit, cut to its own length."""

    fit: Fit
    position: int
    windows: int

    def cut(self, values: NDArray[Any]) -> NDArray[Any]:
        """This series' part of one of the fit's arrays."""
        part: NDArray[Any] = values[self.position, : self.windows]
        return part


def _unusable(model: Model, asked: _Asked) -> _Rows:
    """One fit without numbers, for a series that has no whole window or that cannot be read."""
    nothing = np.full((1, 1), np.nan)
    steps = max(asked.x.size - 1, 0)
    readable = asked.lookback >= 1 and asked.dt > 0
    status = Status.TOO_SHORT if readable else Status.OUT_OF_RANGE
    fit = Fit(
        model=model.name,
        n=np.full((1, 1), steps),
        columns={column.name: nothing for column in model.columns},
        status=np.full((1, 1), status, np.int8),
    )
    return _Rows(fit, 0, 1)


def _list_of_structs(model: Model, found: list[_Rows]) -> pa.Array:
    offsets = np.concatenate([[0], np.cumsum([rows.windows for rows in found])]).astype(np.int32)
    fields = [pa.array(_joined([rows.cut(rows.fit.n) for rows in found]), pa.int32())]
    names = ["n"]
    for column in model.columns:
        values = _joined([rows.cut(rows.fit.columns[column.name]) for rows in found])
        fields.append(_nullable(values, column.kind))
        names.append(column.name)
    codes = _joined([rows.cut(rows.fit.status) for rows in found])
    fields.append(_WORDS.take(pa.array(codes.astype(np.int64))))
    return pa.ListArray.from_arrays(pa.array(offsets), pa.StructArray.from_arrays(fields, [*names, "status"]))


def _joined(parts: list[NDArray[Any]]) -> NDArray[Any]:
    return np.concatenate(parts) if parts else np.empty(0)


def _nullable(values: NDArray[np.float64], kind: str) -> pa.Array:
    if kind == "boolean":
        return pa.array(values == 1.0, mask=np.isnan(values))
    return pa.array(values, from_pandas=True)


def _lists(column: Any) -> Iterator[NDArray[np.float64]]:
    """The lists of a chunk as arrays; a NULL list is empty and a NULL inside is NaN."""
    chunk = column.combine_chunks() if isinstance(column, pa.ChunkedArray) else column
    if isinstance(chunk, pa.ChunkedArray):
        chunk = chunk.chunk(0)
    values = chunk.values.to_numpy(zero_copy_only=False)
    offsets = chunk.offsets.to_numpy()
    valid = chunk.is_valid().to_numpy(zero_copy_only=False)
    for row in range(len(chunk)):
        yield values[offsets[row] : offsets[row + 1]] if valid[row] else np.empty(0)


def _numbers(column: Any) -> list[float]:
    return [float("nan") if value is None else float(value) for value in column.to_pylist()]


def _integers(column: Any) -> list[int]:
    return [0 if value is None else int(value) for value in column.to_pylist()]
