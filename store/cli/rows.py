"""Rows of a query, written as a table, CSV, JSON or Parquet."""

from __future__ import annotations

import csv
import json
import os
import sys
from io import StringIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

from driftbook.store.cli.output import json_value, plain
from driftbook.store.errors import UsageError
from driftbook.store.table import columns, harmless

if TYPE_CHECKING:
    import duckdb


def write_rows(rows: duckdb.DuckDBPyRelation, how: str, output: Path | None) -> None:
    """Writes the rows to a file or standard output; a query that fails leaves the file as it was."""
    try:
        if how == "parquet":
            _write_parquet(rows, output)
            return
        text = {"table": _as_table, "csv": _as_csv, "json": _as_json}[how](rows.columns, rows.fetchall())
        if output is None:
            sys.stdout.write(text)
            sys.stdout.flush()
        else:
            output.write_text(text, encoding="utf-8", newline="")
    except BrokenPipeError:
        raise
    except OSError as error:
        reason = os.strerror(error.errno) if error.errno else str(error)
        raise UsageError(f"cannot write {output}: {reason}.") from error


def _as_table(names: list[str], rows: list[tuple[Any, ...]]) -> str:
    return columns([harmless(name) for name in names], rows) + "\n"


def _as_csv(names: list[str], rows: list[tuple[Any, ...]]) -> str:
    text = StringIO(newline="")
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(names)
    writer.writerows([json_value(value) for value in row] for row in rows)
    return text.getvalue()


def _as_json(names: list[str], rows: list[tuple[Any, ...]]) -> str:
    objects = [dict(zip(names, map(plain, row), strict=True)) for row in rows]
    return json.dumps(objects, default=json_value, allow_nan=False) + "\n"


def _write_parquet(rows: duckdb.DuckDBPyRelation, output: Path | None) -> None:
    from pyarrow import parquet

    if output is None:
        raise UsageError("Parquet needs a file: add --output FILE.")
    parquet.write_table(rows.to_arrow_table(), output)
