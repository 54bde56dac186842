"""Data frames of any make as one: polars."""

from __future__ import annotations

from typing import Any, Protocol, TypeGuard, cast, runtime_checkable

import polars as pl
import pyarrow as pa

from driftbook.store.errors import IntakeError, UsageError


@runtime_checkable
class ArrowStream(Protocol):
    """Any table that can hand itself over as a stream of Arrow batches: pandas, Arrow, DuckDB and many others."""

    def __arrow_c_stream__(self, requested_schema: object | None = None) -> object:
        """The stream as a capsule."""


_NO_TABLE = (pl.exceptions.PolarsError, pl.exceptions.PanicException, pa.ArrowException, TypeError, ValueError)


class _PandasFrame(Protocol):
    index: object

    def reset_index(self) -> _PandasFrame:
        """The frame with its index as columns."""


def as_polars(frame: object, name: str) -> pl.DataFrame:
    """A frame as polars; the index of a pandas frame becomes a column unless it merely counts the rows.

    In a pandas frame NaN is an empty value, as pandas means it.
    """
    try:
        found = frame if isinstance(frame, pl.DataFrame) else _converted(frame)
    except _NO_TABLE as problem:
        raise IntakeError(f"{name} cannot be read as a table: {problem}") from problem
    if not isinstance(found, pl.DataFrame):
        raise UsageError(f"{name} is a single column; give a frame with columns for time and value.")
    if not found.width:
        raise IntakeError(f"{name} has no columns; it needs one for the time and one for the value.")
    return found


def _converted(frame: object) -> pl.DataFrame | pl.Series:
    if _is_pandas(frame):
        counts_rows = type(frame.index).__name__ == "RangeIndex"
        return pl.from_pandas(cast("Any", frame if counts_rows else frame.reset_index()))
    if isinstance(frame, pa.Table | pa.RecordBatch | pa.RecordBatchReader):
        return pl.from_arrow(frame)
    if isinstance(frame, ArrowStream):
        return pl.DataFrame(frame)
    raise UsageError(f"a {type(frame).__name__} is neither a path nor a polars, pandas or Arrow frame.")


def _is_pandas(frame: object) -> TypeGuard[_PandasFrame]:
    return type(frame).__module__.partition(".")[0] == "pandas" and hasattr(frame, "reset_index")
