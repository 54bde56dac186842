"""Rows of a query, written as a table, CSV, JSON or Parquet."""

from __future__ import annotations

import csv
import json
import sys
from contextlib import nullcontext
from pathlib import Path
from typing import TYPE_CHECKING, TextIO

from driftbook.store.cli.output import json_value
from driftbook.store.errors import UsageError
from driftbook.store.table import columns, harmless

if TYPE_CHECKING:
    import duckdb


def write_rows(rows: duckdb.DuckDBPyRelation, how: str, output: Path | None) -> None:
    """Writes the rows to a file or standard output."""
    if how == "parquet":
        _write_parquet(rows, output)
        return
    with output.open("w", encoding="utf-8", newline="") if output else nullcontext(sys.stdout) as stream:
        {"table": _write_table, "csv": _write_csv, "json": _write_json}[how](rows, stream)


def _write_table(rows: duckdb.DuckDBPyRelation, stream: TextIO) -> None:
    found = rows.fetchall()
    stream.write(columns([harmless(name) for name in rows.columns], found) + "\n")


def _write_csv(rows: duckdb.DuckDBPyRelation, stream: TextIO) -> None:
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(rows.columns)
    writer.writerows([json_value(value) for value in row] for row in rows.fetchall())


def _write_json(rows: duckdb.DuckDBPyRelation, stream: TextIO) -> None:
    names = rows.columns
    json.dump([dict(zip(names, row, strict=True)) for row in rows.fetchall()], stream, default=json_value)
    stream.write("\n")


def _write_parquet(rows: duckdb.DuckDBPyRelation, output: Path | None) -> None:
    from pyarrow import parquet

    if output is None:
        raise UsageError("Parquet needs a file: add --output FILE.")
    parquet.write_table(rows.to_arrow_table(), output)
