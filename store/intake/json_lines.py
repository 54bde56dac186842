"""JSON lines: one object a line, its keys the columns."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO

import duckdb
import pyarrow as pa

from driftbook.store.errors import IntakeError
from driftbook.store.intake.lines import SCHEMA, line_batches
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.scratch import unless_aborted
from driftbook.store.intake.source import WHITESPACE, readable
from driftbook.store.sql import query


@dataclass
class JsonLines:
    """A file of JSON objects; a key that an object lacks is an empty field."""

    name: str
    columns: list[str]
    file: BinaryIO
    decimal: str

    def lines(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """One reading of the file."""
        return _lines(con, self.file, self.name)

    def field(self, place: int) -> str:
        """A string as it stands there without its quotes, anything else as JSON."""
        return f"json_extract_string(object, {self._pointer(place)})"

    def number(self, place: int) -> str:
        """A number of JSON has a point, whatever `--decimal` says of texts."""
        if self.decimal == ".":
            return self.field(place)
        return f"intake_json_number(json_extract(object, {self._pointer(place)}))"

    def numbers(self) -> str:
        """All keys' values at once, so that the object is read once."""
        pointers = ", ".join(self._pointer(place) for place in range(len(self.columns)))
        if self.decimal == ".":
            return f"json_extract_string(object, [{pointers}])"
        return f"list_transform(json_extract(object, [{pointers}]), lambda found: intake_json_number(found))"

    def split(self, text: str) -> list[str] | Reason | None:
        """A line is an object or it is not."""
        raise AssertionError(text)

    def close(self, con: duckdb.DuckDBPyConnection) -> None:
        """Closes the file."""
        with unless_aborted():
            con.unregister("intake_line")
        self.file.close()

    def _pointer(self, place: int) -> str:
        key = self.columns[place].replace("~", "~0").replace("/", "~1").replace("'", "''")
        return f"'/{key}'"


def open_json_lines(con: duckdb.DuckDBPyConnection, path: Path, name: str, decimal: str) -> JsonLines:
    """Opens a file of JSON lines; all of it is read for its keys, since any object may bring another one."""
    file = path.open("rb")
    try:
        con.execute(query("intake_json_number"))
        sql, values = _lines(con, file, name)
        with readable(name):
            keys = con.execute(query("intake_json_keys").replace("(lines)", f"({sql})"), values).fetchall()
        if not keys:
            raise IntakeError(f"{name} holds no line that is a JSON object with each key once.")
        return JsonLines(name, [key for (key,) in keys], file, decimal)
    except BaseException:
        with unless_aborted():
            con.unregister("intake_line")
        file.close()
        raise


def _lines(con: duckdb.DuckDBPyConnection, file: BinaryIO, name: str) -> tuple[str, dict[str, object]]:
    con.register("intake_line", pa.RecordBatchReader.from_batches(SCHEMA, line_batches(file, name)))
    return query("intake_json_lines"), {"whitespace": WHITESPACE}
