"""Delimited text: a header and rows, one a line."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO

import duckdb

from driftbook.store.errors import IntakeError
from driftbook.store.intake.columns import has_bars, places
from driftbook.store.intake.lines import line_batches
from driftbook.store.intake.options import Options
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.source import WHITESPACE, Fields
from driftbook.store.sql import query

_DELIMITERS = (",", ";", "\t", "|")
_FIRST_BYTES = 1 << 16
_QUOTED = re.compile(r'"((?:[^"]|"")*)"')


@dataclass
class DelimitedText:
    """The rows of a delimited text file; the columns are found by the header."""

    file: BinaryIO
    options: Options
    delimiter: str
    width: int
    header_line: int
    place: dict[str, int | None]
    has_bars: bool
    has_quotes: bool

    def relation(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """One reading of the file; fields are split in bulk where quotes and width are plain."""
        con.register("intake_line", line_batches(self.file))
        sql_places = {f"{role}_at": None if at is None else at + 1 for role, at in self.place.items()}
        return query("intake_delimited_rows"), {
            **sql_places,
            "series": self.options.series,
            "delimiter": self.delimiter,
            "width": self.width,
            "header_line": self.header_line,
            "has_quotes": self.has_quotes,
            "simply_quoted": _simply_quoted(self.delimiter),
        }

    def fields_of(self, text: str, fields: Fields) -> Fields | Reason | None:
        """Splits one line with its quotes."""
        del fields
        if not text.strip(WHITESPACE):
            return None
        parts = split_line(text, self.delimiter)
        if isinstance(parts, Reason):
            return parts
        if len(parts) != self.width:
            return Reason.WRONG_FIELD_COUNT
        found = {role: None if at is None else parts[at] for role, at in self.place.items()}
        return found if self.options.series is None else {**found, "series": self.options.series}

    def close(self, con: duckdb.DuckDBPyConnection) -> None:
        """Closes the file."""
        con.unregister("intake_line")
        self.file.close()


def open_delimited(path: Path, options: Options) -> DelimitedText:
    """Opens a delimited text file and reads its header."""
    file = path.open("rb")
    try:
        header_line, header = _header(file, path.name)
        delimiter = max(_DELIMITERS, key=header.count)
        columns = split_line(header, delimiter)
        if isinstance(columns, Reason):
            raise IntakeError(f"{path.name}, line {header_line}: the header has a quote that does not end.")
        place = places(columns, options, path.name)
        return DelimitedText(
            file=file,
            options=options,
            delimiter=delimiter,
            width=len(columns),
            header_line=header_line,
            place=place,
            has_bars=has_bars(place),
            has_quotes=_has_quotes(file),
        )
    except BaseException:
        file.close()
        raise


def _simply_quoted(delimiter: str) -> str:
    """The pattern of a line whose quotes wrap whole fields, with neither quote nor delimiter inside."""
    field = f'(?:"[^"{delimiter}]*"|[^"{delimiter}]*)'
    return rf"{field}(?:[{delimiter}]{field})*[\r\n]*"


def _has_quotes(file: BinaryIO) -> bool:
    """Whether the first lines have a quote; where they have none, a later one is rare enough for a careful look."""
    file.seek(0)
    return b'"' in file.read(_FIRST_BYTES)


def _header(file: BinaryIO, source: str) -> tuple[int, str]:
    """The first line that is not blank, and its number."""
    for batch in line_batches(file):
        for row in batch.to_pylist():
            if not row["is_utf8"] or "\0" in row["text"]:
                raise IntakeError(f"{source} is no UTF-8 text with a header, nor Parquet; save it as CSV in UTF-8.")
            if row["text"].strip(WHITESPACE):
                return row["line"], row["text"]
    raise IntakeError(f"{source} is empty; it needs a header line that names its columns.")


def split_line(text: str, delimiter: str) -> list[str] | Reason:
    """The trimmed fields of one line; a quoted field has to end on its line, with nothing but space around it."""
    outer = WHITESPACE.replace(delimiter, "")
    fields = []
    rest = text.strip("\r\n")
    while True:
        start = rest.lstrip(outer)
        if start.startswith('"'):
            match = _QUOTED.match(start)
            after = start[match.end() :].lstrip(outer) if match else ""
            if match is None or (after and not after.startswith(delimiter)):
                return Reason.UNFINISHED_QUOTE
            fields.append(match[1].replace('""', '"').strip(WHITESPACE))
            found, rest = bool(after), after[1:]
        else:
            field, mark, rest = start.partition(delimiter)
            fields.append(field.strip(WHITESPACE))
            found = bool(mark)
        if not found:
            return fields
