"""What a format has to give: its columns, its rows as text fields, and the careful splitting of one of them."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from typing import Protocol

import duckdb

from driftbook.store.errors import IntakeError
from driftbook.store.intake.reasons import Reason

# An IntakeError raised in our own reading of lines comes back from DuckDB as part of its message.
_OURS = re.compile(r"\bIntakeError: (.+)")
_STREAM = re.compile(r"reading the stream registered as '\w+' failed: ")
# What is trimmed off a field.
WHITESPACE = " \t\r\n\v\f"
# What a row says; None for a role that the source has no column for.
Fields = Mapping[str, str | None]


class Source(Protocol):
    """A table of text fields, whatever it came from.

    A new format is one file with a class like this and one line in `opening`; what a line of it means is up to the
    layout (`long`, `wide`).
    """

    name: str
    columns: list[str]

    def lines(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """A query for (line, text, is_plain, fault) and what the fields are made of, and bound values.

        Where is_plain is false the fields are not to be trusted: a fault is a reason to refuse the line unread,
        and without one `split` has the word. Each call prepares one reading.
        """

    def field(self, place: int) -> str:
        """An SQL expression over `lines`: the text of the column at a place, counted from 0."""

    def number(self, place: int) -> str:
        """The same for a column of numbers; the line's end may follow, which does not disturb a number."""

    def numbers(self) -> str:
        """An SQL expression over `lines`: the list of all columns' numbers."""

    def split(self, text: str) -> list[str] | Reason | None:
        """The fields of a line that is not plain, why it has none, or None for a line that is no row.

        A source whose lines are all either plain or faulty is never asked.
        """

    def close(self, con: duckdb.DuckDBPyConnection) -> None:
        """Lets go of what the readings held."""


class Rows(Protocol):
    """Incoming rows: one value of one series at one time each, as text."""

    has_bars: bool  # whether there is a column for open, high, low or volume

    @property
    def name(self) -> str:
        """What messages call the source."""

    def relation(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """A query for (row_key, text, is_plain, fault, series, time, value, open, high, low, volume), and bound values.

        row_key says line and cell in one number, in the order of arrival (`row_key` in SQL makes it). All from text
        on but is_plain are text. Each call prepares one reading.
        """

    def fields_of(self, cell: int, text: str | None, fields: Fields) -> Fields | Reason | None:
        """The fields of a row that is not plain, why it has none, or None where there is no row.

        Asked for the cells of a line in their order; only cell 0, which each such line has, brings the text.
        """


@contextmanager
def readable(name: str) -> Iterator[None]:
    """Says in a sentence that a source turned out unreadable while DuckDB scanned it."""
    try:
        yield
    except duckdb.Error as problem:
        if "KeyboardInterrupt" in str(problem):
            raise KeyboardInterrupt from problem
        ours = _OURS.search(str(problem))
        raise IntakeError(ours[1] if ours else f"{name} cannot be read: {_first_line(problem)}.") from problem


def _first_line(problem: Exception) -> str:
    """What DuckDB says, without what it adds about the Python that it called."""
    said = str(problem).strip().splitlines()[0].partition(" Detail: Python exception")[0]
    return _STREAM.sub("", said).rstrip(".")
