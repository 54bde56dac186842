"""Rows that come with typed columns: Parquet files, Arrow files and streams, data frames."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import duckdb
import polars as pl
import pyarrow as pa

from driftbook.store.errors import IntakeError
from driftbook.store.intake.landing import check_growth
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.scratch import unless_aborted
from driftbook.store.intake.source import readable
from driftbook.store.sql import query

_WITH_ZONE = ("TIMESTAMP WITH TIME ZONE", "TIMESTAMPTZ_NS")
_BYTES_A_VALUE = 8
_FRACTIONAL = ("FLOAT", "DOUBLE", "DECIMAL")


@dataclass
class TypedTable:
    """A table; each column is turned into the text that the rules of intake read."""

    name: str
    columns: list[str]
    kinds: list[str]
    sql: str
    values: Mapping[str, object]
    prepare: Callable[[duckdb.DuckDBPyConnection], object]
    decimal: str

    def lines(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """One reading of the table."""
        self.prepare(con)
        return self.sql, dict(self.values)

    def field(self, place: int) -> str:
        """A time with a zone as its instant in UTC, everything else as DuckDB shows it."""
        return _as_text(f"column_{place}", self.kinds[place])

    def number(self, place: int) -> str:
        """A number by its type has a point, whatever `--decimal` says of texts."""
        text = self.field(place)
        is_fraction = self.decimal != "." and self.kinds[place].startswith(_FRACTIONAL)
        return f"replace({text}, '.', ',')" if is_fraction else text

    def numbers(self) -> str:
        """All columns."""
        return f"[{', '.join(self.number(place) for place in range(len(self.columns)))}]"

    def split(self, text: str) -> list[str] | Reason | None:
        """A row of a table is split by nature."""
        raise AssertionError(text)

    def close(self, con: duckdb.DuckDBPyConnection) -> None:
        """Lets go of the frame."""
        with unless_aborted():
            con.unregister("intake_frame")


def open_frame(con: duckdb.DuckDBPyConnection, frame: pl.DataFrame, name: str, decimal: str) -> TypedTable:
    """The rows of a frame, counted from 1."""
    return _streamed(con, lambda con: con.register("intake_frame", frame), name, decimal)


def open_parquet(con: duckdb.DuckDBPyConnection, path: Path, name: str, decimal: str) -> TypedTable:
    """The rows of a Parquet file, counted from 1."""
    table = "read_parquet($path, file_row_number = true)"
    found = _described(con, table, "file_row_number + 1", {"path": str(path)}, lambda _: None, name, decimal)
    with readable(name):
        rows = con.execute("select num_rows from parquet_file_metadata($path)", {"path": str(path)}).fetchall()[0][0]
    _check_rows(rows, len(found.columns), path, name)
    return found


def open_arrow(con: duckdb.DuckDBPyConnection, path: Path, name: str, decimal: str, *, is_stream: bool) -> TypedTable:
    """The rows of an Arrow file or stream, counted from 1."""

    def prepare(con: duckdb.DuckDBPyConnection) -> object:
        try:
            schema, batches = _arrow_batches(path, name, is_stream=is_stream)
        except pa.ArrowException as problem:
            raise IntakeError(f"{name} is a broken Arrow file: {str(problem).rstrip('.')}. Get it again.") from problem
        return con.register("intake_frame", pa.RecordBatchReader.from_batches(schema, batches))

    return _streamed(con, prepare, name, decimal)


def _arrow_batches(path: Path, name: str, *, is_stream: bool) -> tuple[pa.Schema, Iterator[pa.RecordBatch]]:
    """The batches of a file, each checked: DuckDB would trust the offsets in a broken one."""
    reader = pa.ipc.open_stream(pa.OSFile(str(path))) if is_stream else pa.ipc.open_file(pa.OSFile(str(path)))
    count = None if is_stream else reader.num_record_batches

    def batches() -> Iterator[pa.RecordBatch]:
        rows = 0
        for batch in reader if count is None else map(reader.get_batch, range(count)):
            rows += batch.num_rows
            _check_rows(rows, batch.num_columns, path, name)
            batch.validate(full=True)
            yield batch

    return reader.schema, batches()


def _check_rows(rows: int, columns: int, path: Path, name: str) -> None:
    """Columns that say the same over and over, or nothing, take next to no room however many rows they have."""
    check_growth(rows * columns * _BYTES_A_VALUE, path.stat().st_size, name, "take it in in parts")


def _streamed(
    con: duckdb.DuckDBPyConnection, prepare: Callable[[duckdb.DuckDBPyConnection], object], name: str, decimal: str
) -> TypedTable:
    with readable(name):
        prepare(con)
    return _described(con, "intake_frame", "row_number() over ()", {}, prepare, name, decimal)


def _described(
    con: duckdb.DuckDBPyConnection,
    table: str,
    line: str,
    values: dict[str, object],
    prepare: Callable[[duckdb.DuckDBPyConnection], object],
    name: str,
    decimal: str,
) -> TypedTable:
    with readable(name):
        described = con.execute(f"describe select * from {table}", values).fetchall()
    columns = {column: kind for column, kind, *_ in described if column != "file_row_number"}
    if not columns:
        raise IntakeError(f"{name} has no columns; it needs one for the time and one for the value.")
    quoted = [_quoted(column) for column in columns]
    shown = ", ".join(f"coalesce({_as_text(*one)}, '')" for one in zip(quoted, columns.values(), strict=True))
    numbered = ", ".join(f"{column} as column_{place}" for place, column in enumerate(quoted))
    return TypedTable(
        name=name,
        columns=list(columns),
        kinds=list(columns.values()),
        sql=query("intake_table_lines").format(table=table, line=line, shown=shown, columns=numbered),
        values=values,
        prepare=prepare,
        decimal=decimal,
    )


def _as_text(column: str, kind: str) -> str:
    if kind in _WITH_ZONE:
        return f"make_timestamp(epoch_us({column}::timestamptz))::varchar || 'Z'"
    return f"{column}::varchar"


def _quoted(column: str) -> str:
    return '"' + column.replace('"', '""') + '"'
