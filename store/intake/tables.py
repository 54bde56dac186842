"""Rows that come with typed columns: Parquet files and data frames."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

import duckdb
import polars as pl

from driftbook.store.errors import IntakeError
from driftbook.store.intake.columns import has_bars, places
from driftbook.store.intake.options import ROLES, Options
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.source import Fields
from driftbook.store.sql import query


@dataclass
class TypedTable:
    """The rows of a table; each column is turned into the text that the rules of intake read."""

    sql: str
    values: Mapping[str, object]
    prepare: Callable[[duckdb.DuckDBPyConnection], object]
    has_bars: bool

    def relation(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """One reading of the table."""
        self.prepare(con)
        return self.sql, dict(self.values)

    def fields_of(self, text: str, fields: Fields) -> Fields | Reason | None:
        """A row of a table is split by nature."""
        del text
        return fields

    def close(self, con: duckdb.DuckDBPyConnection) -> None:
        """Lets go of the frame."""
        con.unregister("intake_frame")


def open_frame(con: duckdb.DuckDBPyConnection, frame: pl.DataFrame, options: Options, source: str) -> TypedTable:
    """The rows of a frame, counted from 1."""

    def prepare(con: duckdb.DuckDBPyConnection) -> object:
        return con.register("intake_frame", frame)

    prepare(con)
    return _typed_table(con, "intake_frame", "row_number() over ()", {}, prepare, options, source)


def open_parquet(con: duckdb.DuckDBPyConnection, path: Path, options: Options) -> TypedTable:
    """The rows of a Parquet file, counted from 1."""
    table = "read_parquet($path, file_row_number = true)"
    return _typed_table(con, table, "file_row_number + 1", {"path": str(path)}, lambda _: None, options, path.name)


def _typed_table(
    con: duckdb.DuckDBPyConnection,
    table: str,
    line: str,
    values: dict[str, object],
    prepare: Callable[[duckdb.DuckDBPyConnection], object],
    options: Options,
    source: str,
) -> TypedTable:
    try:
        described = con.execute(f"describe select * from {table}", values).fetchall()
    except duckdb.Error as problem:
        raise IntakeError(f"{source} cannot be read: {str(problem).splitlines()[0]}") from problem
    columns = [(name, kind) for name, kind, *_ in described if name != "file_row_number"]
    place = places([name for name, _ in columns], options, source)
    texts = {role: "null::varchar" if at is None else _as_text(*columns[at]) for role, at in place.items()}
    shown = ", ".join(f"coalesce({_as_text(*column)}, '')" for column in columns)
    return TypedTable(
        sql=query("intake_table_rows").format(
            table=table, line=line, shown=shown, **{role: texts[role] for role in ROLES}
        ),
        values={**values, "series": options.series},
        prepare=prepare,
        has_bars=has_bars(place),
    )


def _as_text(column: str, kind: str) -> str:
    """A column as text: a time with a zone as its instant in UTC, everything else as DuckDB shows it."""
    quoted = '"' + column.replace('"', '""') + '"'
    if kind in ("TIMESTAMP WITH TIME ZONE", "TIMESTAMPTZ_NS"):
        return f"make_timestamp(epoch_us({quoted}::timestamptz))::varchar || 'Z'"
    return f"{quoted}::varchar"
