"""Delimited text: a header and rows, mostly one a line."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO

import duckdb
import pyarrow as pa

from driftbook.store.errors import IntakeError
from driftbook.store.intake.lines import SCHEMA, line_batches
from driftbook.store.intake.quoting import DELIMITERS, MOST_LINES, Broken, joined, split_line
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.scratch import unless_aborted
from driftbook.store.intake.source import WHITESPACE
from driftbook.store.sql import query

_FIRST_BYTES = 1 << 16
_PADDED = re.compile(rb"[,;\t|\n] | [,;\t|\r\n]")


@dataclass
class DelimitedText:
    """A delimited text file; its columns are found by the header.

    `has_quotes` and `has_padding` say how the first lines look: in other files a quote or a space beside a field is
    rare enough for a careful look at its line.
    """

    name: str
    columns: list[str]
    file: BinaryIO
    delimiter: str
    header_line: int
    has_quotes: bool
    has_padding: bool

    def lines(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """One reading of the file; fields are split in bulk where quotes and width are plain."""
        batches = joined(line_batches(self.file, self.name), self.delimiter, len(self.columns))
        con.register("intake_line", pa.RecordBatchReader.from_batches(SCHEMA, batches))
        return query("intake_delimited_lines"), {
            "delimiter": self.delimiter,
            "width": len(self.columns),
            "header_line": self.header_line,
            "has_quotes": self.has_quotes,
            "simply_quoted": _simply_quoted(self.delimiter),
            "whitespace": WHITESPACE,
        }

    def field(self, place: int) -> str:
        """The last column loses the line's end here: trimming every field would cost more than all the rest."""
        part = self.number(place)
        if place == len(self.columns) - 1:
            part = f"rtrim({part}, e'\\r\\n')"
        return f"trim({part})" if self.has_padding else part

    def number(self, place: int) -> str:
        """A part of the line."""
        return f"part[{place + 1}]"

    def numbers(self) -> str:
        """All parts of the line."""
        return "part"

    def split(self, text: str) -> list[str] | Reason | None:
        """Splits one row with its quotes."""
        if not text.strip(WHITESPACE):
            return None
        parts = split_line(text, self.delimiter)
        if isinstance(parts, Broken):
            return Reason.UNFINISHED_QUOTE
        return parts if len(parts) == len(self.columns) else Reason.WRONG_FIELD_COUNT

    def close(self, con: duckdb.DuckDBPyConnection) -> None:
        """Closes the file."""
        with unless_aborted():
            con.unregister("intake_line")
        self.file.close()


def open_delimited(path: Path, name: str) -> DelimitedText:
    """Opens a delimited text file and reads its header."""
    file = path.open("rb")
    try:
        delimiter, header_line, columns = _header(file, name)
        first = _first_bytes(file)
        return DelimitedText(
            name=name,
            columns=columns,
            file=file,
            delimiter=delimiter,
            header_line=header_line,
            has_quotes=b'"' in first,
            has_padding=_PADDED.search(first) is not None,
        )
    except BaseException:
        file.close()
        raise


def _simply_quoted(delimiter: str) -> str:
    """The pattern of a line whose quotes wrap whole fields, with neither quote nor delimiter inside."""
    field = f'(?: *"[^"{delimiter}]*" *|[^"{delimiter}]*)'
    return rf"{field}(?:[{delimiter}]{field})*[\r\n]*"


def _first_bytes(file: BinaryIO) -> bytes:
    file.seek(0)
    return file.read(_FIRST_BYTES)


def _header(file: BinaryIO, name: str) -> tuple[str, int, list[str]]:
    """The delimiter, the header's last line and its columns; the header is the first line that is not blank."""
    header = ""
    first_line = 0
    for row in _one_by_one(line_batches(file, name)):
        if not row["is_utf8"] or "\0" in row["text"]:
            raise IntakeError(
                f"{name} begins with no line of UTF-8 text, and is no Parquet, Arrow or gzip file; save it as CSV in "
                "UTF-8."
            )
        header += row["text"]
        if not header.strip(WHITESPACE):
            continue
        first_line = first_line or row["line"]
        delimiter = max(DELIMITERS, key=header.count)
        columns = split_line(header.lstrip("\r\n"), delimiter)
        if isinstance(columns, list):
            return delimiter, row["line"], columns
        if columns is Broken.MISPLACED or row["line"] - first_line >= MOST_LINES:
            break
    if first_line:
        raise IntakeError(f"{name}, line {first_line}: the header has a quote that does not end its field.")
    raise IntakeError(f"{name} is empty; it needs a header line that names its columns.")


def _one_by_one(batches: Iterable[pa.RecordBatch]) -> Iterator[dict[str, Any]]:
    """The lines without making Python of a whole batch for the first few."""
    for batch in batches:
        for place in range(batch.num_rows):
            yield from batch.slice(place, 1).to_pylist()
