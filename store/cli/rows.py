"""Rows of a query, written as a table, CSV, JSON or Parquet."""

from __future__ import annotations

import csv
import json
import os
import sys
from collections.abc import Iterable
from decimal import Decimal
from io import BytesIO, StringIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

from driftbook.store.cli.output import json_value, plain
from driftbook.store.errors import UsageError
from driftbook.store.table import columns, harmless

if TYPE_CHECKING:
    import duckdb

# What a spreadsheet takes for the beginning of a formula, also in the wide letters of East Asian keyboards.
_FORMULA = tuple("=+-@\t\r\n＝＋－＠")


class _Lines(StringIO):
    """Rows that end with a line feed alone; the writer itself has to know of both, to quote a text that holds one."""

    def write(self, row: str) -> int:
        """Takes one row."""
        return super().write(row.removesuffix("\r\n") + "\n")


def as_table(rows: duckdb.DuckDBPyRelation) -> bytes:
    """Aligned columns for people."""
    return f"{columns([harmless(name) for name in rows.columns], rows.fetchall())}\n".encode()


def as_csv(rows: duckdb.DuckDBPyRelation, *, guarded: bool, shown: bool) -> bytes:
    """A header and a line for each row.

    `guarded`: a text that a spreadsheet would take for a formula begins with an apostrophe, and each text is quoted,
    whatever delimiter the spreadsheet believes in. `shown`: on a terminal, which must not obey what a text says.
    """
    text = _Lines(newline="")
    writer = csv.writer(text, lineterminator="\r\n", quoting=csv.QUOTE_NONNUMERIC if guarded else csv.QUOTE_MINIMAL)
    told = _unlike_a_formula if guarded else json_value
    writer.writerow(map(told, rows.columns))
    writer.writerows(map(told, row) for row in rows.fetchall())
    said = text.getvalue()
    return ("\n".join(map(harmless, said.split("\n"))) if shown else said).encode()


def as_json(rows: duckdb.DuckDBPyRelation) -> bytes:
    """A list of objects."""
    return _json([dict(zip(rows.columns, map(plain, row), strict=True)) for row in rows.fetchall()])


def as_object(rows: duckdb.DuckDBPyRelation) -> bytes:
    """One object with all columns and all rows, as `--json` asks for."""
    return _json(plain({"columns": rows.columns, "rows": rows.fetchall()}))


def as_parquet(rows: duckdb.DuckDBPyRelation) -> bytes:
    """A Parquet file."""
    from pyarrow import parquet

    file = BytesIO()
    parquet.write_table(rows.to_arrow_table(), file)
    return file.getvalue()


def deliver(pieces: Iterable[bytes], output: Path | None) -> None:
    """Writes to a file or to standard output."""
    if output is None:
        sys.stdout.flush()
        for piece in pieces:
            sys.stdout.buffer.write(piece)
        sys.stdout.buffer.flush()
        return
    try:
        with output.open("wb") as file:
            file.writelines(pieces)
    except OSError as error:
        reason = os.strerror(error.errno) if error.errno else str(error)
        raise UsageError(f"cannot write {output}: {reason}.") from error


def _json(value: Any) -> bytes:
    return f"{json.dumps(value, default=json_value, allow_nan=False)}\n".encode()


def _unlike_a_formula(value: Any) -> Any:
    if isinstance(value, Decimal):
        return value
    told = json_value(value)
    return f"'{told}" if isinstance(told, str) and told.lstrip(" ").startswith(_FORMULA) else told
