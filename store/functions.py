"""The estimators as SQL functions: a function turns its chunk into blocks, hands them to an executor, holds no formula.

For each model there are, with x a list of values in time order and steps in years (or seconds):

    fit_<model>(x, dt), fit_<model>_at(t, x)                       one STRUCT: the fit of the whole list
    rolling_<model>(x, dt, lookback), rolling_<model>_at(t, x, lookback)    STRUCT[]: one a window
    loglik_<model>(x, dt, <settings>, <parameters>)                the log-likelihood at given parameters

and for a list of returns: realised_variance(r), bipower_variation(r).

A model with settings (quartic: centre and scale) takes them from the first window of a list. A model that is fitted to
the level of some series and the logarithm of others (ou_noise, inertial) fits the values of a list as they are.

The forms with _at take times and count Act/365. A list that is too short for its lookback, or a NULL where a value
must be, gives one STRUCT whose status says so; a query is never killed by its data.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import Executor, Future
from dataclasses import dataclass
from functools import cache, partial
from typing import Any

import duckdb
import numpy as np
import pyarrow as pa
from duckdb.func import FunctionNullHandling, PythonUDFType
from numpy.typing import NDArray

from driftbook.estimators import MODELS, Fit, Model, Status
from driftbook.estimators.model import Column
from driftbook.estimators.realised import bipower_variation, realised_variance
from driftbook.store.clocks import MICROSECONDS_PER_YEAR
from driftbook.store.due import steps_over_all

_BLOCK_VALUES = 1 << 18
_PADDING = 1.25
_SQL_TYPES = {"double": "DOUBLE", "boolean": "BOOLEAN", "word": "VARCHAR"}
# What DuckDB keeps for the times 'infinity' and '-infinity'; a NULL becomes a number below.
_ENDLESS = np.iinfo(np.int64).max

Values = NDArray[np.float64]


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
        fits = partial(_fits, model, executor)
        one, many = struct_type(model), f"{struct_type(model)}[]"
        name = model.name
        _add(con, f"fit_{name}", partial(_fit, fits), ["DOUBLE[]", "DOUBLE"], one)
        _add(con, f"fit_{name}_at", partial(_fit_at, fits), ["TIMESTAMP[]", "DOUBLE[]"], one)
        _add(con, f"rolling_{name}", partial(_rolling, fits), ["DOUBLE[]", "DOUBLE", "INTEGER"], many)
        _add(con, f"rolling_{name}_at", partial(_rolling_at, fits), ["TIMESTAMP[]", "DOUBLE[]", "INTEGER"], many)


def register_likelihoods(con: duckdb.DuckDBPyConnection) -> None:
    """Registers the log-likelihood of every model: a macro that names its parameters, over one function."""
    for model in MODELS.values():
        parameters = ", ".join(one.name for one in (*model.settings, *model.parameters))
        _add(con, f"loglik_of_{model.name}", partial(_loglik, model), ["DOUBLE[]", "DOUBLE", "DOUBLE[]"], "DOUBLE")
        con.execute(
            f"create macro main.loglik_{model.name}(x, dt, {parameters}) as "
            f"loglik_of_{model.name}(x, dt, [{parameters}]::double[])"
        )


def register_measures(con: duckdb.DuckDBPyConnection) -> None:
    """Registers the measures of a list of returns on a connection."""
    for measure in (realised_variance, bipower_variation):
        _add(con, measure.__name__, partial(_measure, measure), ["DOUBLE[]"], "DOUBLE")


@dataclass(frozen=True)
class Stretch:
    """A series, its steps (one number, or one a step), and the windows that are wanted.

    `settings` are those of a model that has any; without, they are found in the stretch. `on_logs` asks for the model
    of the logarithm.
    """

    x: Values
    steps: Values
    lookback: int
    first: int = 0
    settings: tuple[float, ...] = ()
    on_logs: bool = False

    @property
    def is_readable(self) -> bool:
        """Whether lookback and steps can be used at all."""
        if self.steps.size == 1:
            return self.lookback >= 1 and 0 < float(self.steps[0]) < np.inf
        usable = self.steps.size == self.x.size - 1
        return self.lookback >= 1 and usable and bool((np.isfinite(self.steps) & (self.steps > 0)).all())

    @property
    def windows(self) -> int:
        """How many windows are wanted."""
        return max(self.x.size - self.lookback - self.first, 0)

    @property
    def shape(self) -> tuple[object, ...]:
        """What series must share to be worked on in one block."""
        step = float(self.steps[0]) if self.steps.size == 1 else None
        told = len(self.settings)
        return (self.steps.size == 1, step or 0.0, self.lookback, self.first, told, self.on_logs)


def rolled(model: Model, executor: Executor, stretches: Iterable[Stretch]) -> tuple[NDArray[np.int64], pa.StructArray]:
    """What rolling_<model> gives for stretches of series.

    How many windows each has, and the fits of all, one after the other.
    """
    found = _fits(model, executor, list(stretches))
    if not found:
        return np.empty(0, np.int64), _structs([_without_numbers(model, Stretch(np.empty(0), np.empty(0), 1))])[:0]
    return np.array([rows.windows for rows in found], np.int64), _structs(found)


def struct_type(model: Model) -> str:
    """The SQL type of one fit: n, the model's columns, status."""
    columns = ", ".join(f"{column.name} {_SQL_TYPES[column.kind]}" for column in model.columns)
    return f"STRUCT(n INTEGER, {columns}, status VARCHAR)"


def roll_block(name: str, x: Values, steps: Values, lookback: int, first: int, settings: Values, on_logs: bool) -> Fit:
    """What a worker does with one block of series: arrays in, arrays out."""
    model = MODELS[name].of_logs if on_logs else MODELS[name]
    if model is None:
        raise ValueError(f"{name} is not fitted to logarithms")
    if not settings.size:
        return model.rolling(x, steps, lookback, first=first)
    return model.rolling_by(list(settings.T), x, steps, lookback, first=first)


def _add(con: duckdb.DuckDBPyConnection, name: str, function: Callable[..., Any], takes: list[Any], gives: str) -> None:
    con.create_function(
        name, function, takes, gives, type=PythonUDFType.ARROW, null_handling=FunctionNullHandling.SPECIAL
    )


def _fits(model: Model, executor: Executor, asked: list[Stretch]) -> list[_Rows]:
    """The wanted windows of each row; blocks of similar rows are worked on together."""
    usable = [row for row, one in enumerate(asked) if one.is_readable and one.windows]
    futures = [(rows, executor.submit(roll_block, model.name, *block)) for rows, block in _blocks(asked, usable)]
    found = {}
    for rows, future in futures:
        fit = future.result()
        for position, row in enumerate(rows):
            found[row] = _Rows(fit, position, asked[row].windows)
    return [found[row] if row in found else _without_numbers(model, one) for row, one in enumerate(asked)]


def _fit(fits: Callable[[list[Stretch]], list[_Rows]], x: pa.ChunkedArray, dt: Any) -> pa.Array:
    asked = [_whole(series, np.array([step])) for series, step in zip(_lists(x), _numbers(dt), strict=True)]
    return _structs(fits(asked))


def _fit_at(fits: Callable[[list[Stretch]], list[_Rows]], t: pa.ChunkedArray, x: pa.ChunkedArray) -> pa.Array:
    asked = [_whole(series, _steps_at(times, series)) for times, series in zip(_lists(t), _lists(x), strict=True)]
    return _structs(fits(asked))


def _rolling(fits: Callable[[list[Stretch]], list[_Rows]], x: pa.ChunkedArray, dt: Any, lookback: Any) -> pa.Array:
    rows = zip(_lists(x), _numbers(dt), _integers(lookback), strict=True)
    return _lists_of_structs(fits([Stretch(series, np.array([step]), steps) for series, step, steps in rows]))


def _rolling_at(
    fits: Callable[[list[Stretch]], list[_Rows]], t: pa.ChunkedArray, x: pa.ChunkedArray, lookback: Any
) -> pa.Array:
    rows = zip(_lists(t), _lists(x), _integers(lookback), strict=True)
    return _lists_of_structs(fits([Stretch(series, _steps_at(times, series), steps) for times, series, steps in rows]))


def _loglik(model: Model, x: pa.ChunkedArray, dt: Any, parameters: pa.ChunkedArray) -> pa.Array:
    """Lists of one length are worked on together, each with its own step and parameters."""
    lists, given = list(_lists(x)), list(_lists(parameters))
    steps = np.array(_numbers(dt))
    found = np.full(len(lists), np.nan)
    for rows in _alike([one.size for one in lists], padding=1.0):
        usable = [row for row in rows if lists[row].size > 1 and steps[row] > 0 and np.isfinite(steps[row])]
        if usable:
            values = np.stack([lists[row] for row in usable])
            found[usable] = model.loglik(values, steps[usable], *np.stack([given[row] for row in usable], axis=-1))
    return pa.array(found, from_pandas=True)


def _measure(measure: Callable[..., Values], r: pa.ChunkedArray) -> pa.Array:
    lists = list(_lists(r))
    found = np.full(len(lists), np.nan)
    for rows in _alike([one.size for one in lists], padding=_PADDING):
        counts = [lists[row].size for row in rows]
        together = np.zeros((len(rows), max(counts)))
        for at, row in enumerate(rows):
            together[at, : counts[at]] = lists[row]
        found[rows] = measure(together, counts=np.array(counts))
    return pa.array(found, from_pandas=True)


def _alike(sizes: list[int], padding: float) -> Iterator[list[int]]:
    """Rows by the size of their lists, as many at a time as fit together: the longest up to `padding` the shortest."""
    group: list[int] = []
    for row in sorted(range(len(sizes)), key=lambda row: sizes[row]):
        size = sizes[row]
        if group and (size > padding * sizes[group[0]] or (len(group) + 1) * size > _BLOCK_VALUES):
            yield group
            group = []
        group.append(row)
    if group:
        yield group


def _whole(x: Values, steps: Values) -> Stretch:
    return Stretch(x, steps, steps_over_all(x.size))


def _steps_at(times: NDArray[Any], x: Values) -> Values:
    """Steps between times in years of 365 days; NaN, which no model takes, where a time is missing or has no end."""
    if times.size != x.size:
        return np.array([np.nan])
    microseconds: NDArray[np.int64] = times.astype("datetime64[us]").astype(np.int64)
    known = (microseconds > -_ENDLESS) & (microseconds < _ENDLESS)
    return np.where(known[1:] & known[:-1], np.diff(microseconds) / MICROSECONDS_PER_YEAR, np.nan)


_Block = tuple[Values, Values, int, int, Values, bool]


def _blocks(asked: list[Stretch], usable: list[int]) -> Iterator[tuple[list[int], _Block]]:
    """Rows of one shape and of about the same length, filled up with NaN at their ends.

    What stands behind a series does not touch its windows, so padding moves no bit of them.
    """
    shapes = {row: asked[row].shape for row in usable}
    block: list[int] = []
    for row in sorted(usable, key=lambda row: (*shapes[row], asked[row].x.size)):
        if block and not (shapes[row] == shapes[block[0]] and _belongs(asked[block[0]], asked[row], len(block))):
            yield block, _padded([asked[one] for one in block])
            block = []
        block.append(row)
    if block:
        yield block, _padded([asked[one] for one in block])


def _belongs(first: Stretch, other: Stretch, size: int) -> bool:
    return other.x.size <= _PADDING * first.x.size and (size + 1) * other.x.size <= _BLOCK_VALUES


def _padded(series: list[Stretch]) -> _Block:
    first = series[0]
    longest = max(one.x.size for one in series)
    x = np.full((len(series), longest), np.nan)
    steps = np.ones((len(series), longest - 1)) if first.steps.size > 1 else np.asarray(first.steps[0])
    for row, one in enumerate(series):
        x[row, : one.x.size] = one.x
        if first.steps.size > 1:
            steps[row, : one.steps.size] = one.steps
    return x, steps, first.lookback, first.first, np.array([one.settings for one in series]), first.on_logs


@dataclass(frozen=True)
class _Rows:
    """The windows of one series: the first of a row of a fit, as many as its own length gives."""

    fit: Fit
    position: int
    windows: int


def _without_numbers(model: Model, asked: Stretch) -> _Rows:
    """One fit without numbers, for a series that has no whole window or that cannot be read."""
    nothing = np.full((1, 1), np.nan)
    status = Status.TOO_SHORT if asked.is_readable or asked.x.size < 2 else Status.OUT_OF_RANGE
    fit = Fit(
        model=model.name,
        n=np.full((1, 1), max(asked.x.size - 1, 0)),
        columns={column.name: nothing for column in model.columns},
        status=np.full((1, 1), status, np.int8),
    )
    return _Rows(fit, 0, 1)


def _lists_of_structs(found: list[_Rows]) -> pa.Array:
    offsets = np.concatenate([[0], np.cumsum([rows.windows for rows in found])]).astype(np.int32)
    return pa.ListArray.from_arrays(pa.array(offsets), _structs(found))


def _structs(found: list[_Rows]) -> pa.Array:
    """The fits of all rows, one after the other."""
    model = MODELS[found[0].fit.model]
    together = list({id(rows.fit): rows.fit for rows in found}.values())
    wanted = _places(found, together)

    def values_of(parts: list[NDArray[Any]]) -> NDArray[Any]:
        values: NDArray[Any] = np.concatenate([part.reshape(-1) for part in parts])[wanted]
        return values

    fields = [pa.array(values_of([fit.n for fit in together]), pa.int32())]
    for column in model.columns:
        values = values_of([fit.columns[column.name] for fit in together])
        fields.append(_nullable(values, column))
    fields.append(_words().take(pa.array(values_of([fit.status for fit in together]).astype(np.int64))))
    return pa.StructArray.from_arrays(fields, ["n", *(column.name for column in model.columns), "status"])


def _places(found: list[_Rows], together: list[Fit]) -> NDArray[np.int64]:
    """Where the windows of each row stand in the arrays of all fits, put end to end."""
    ends = np.cumsum([fit.status.size for fit in together]).tolist()
    starts = dict(zip(map(id, together), [0, *ends], strict=False))
    places = [
        np.arange(rows.windows) + (starts[id(rows.fit)] + rows.position * rows.fit.status.shape[1]) for rows in found
    ]
    return np.concatenate(places)


@cache
def _words() -> pa.Array:
    # made when first needed: pyarrow looks for pandas at its first array, and loads it where it is installed
    return pa.array([status.word for status in Status], pa.string())


def _nullable(values: Values, column: Column) -> pa.Array:
    if column.kind == "boolean":
        return pa.array(values == 1.0, mask=np.isnan(values))
    numbers = pa.array(values, from_pandas=True)
    if column.kind == "word":
        return pa.array(column.words, pa.string()).take(numbers.cast(pa.int64()))
    return numbers


def _lists(column: pa.ChunkedArray) -> Iterator[NDArray[Any]]:
    """The lists of a chunk as arrays; a NULL list is empty and a NULL inside is NaN."""
    chunk = column.combine_chunks()
    if isinstance(chunk, pa.ChunkedArray):
        chunk = chunk.chunk(0)
    values = chunk.values.to_numpy(zero_copy_only=False)
    offsets = chunk.offsets.to_numpy()
    valid = chunk.is_valid().to_numpy(zero_copy_only=False)
    for row in range(len(chunk)):
        yield values[offsets[row] : offsets[row + 1]] if valid[row] else values[:0]


def _numbers(column: Any) -> list[float]:
    return [float("nan") if value is None else float(value) for value in column.to_pylist()]


def _integers(column: Any) -> list[int]:
    return [0 if value is None else int(value) for value in column.to_pylist()]
