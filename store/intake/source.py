"""What a format has to give: its rows as text fields, and the careful splitting of one of them."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Protocol

import duckdb

from driftbook.store.intake.reasons import Reason

# What is trimmed off a field.
WHITESPACE = " \t\r\n\v\f"
# What a row says; None for a role that the source has no column for.
Fields = Mapping[str, str | None]


class Rows(Protocol):
    """Incoming rows as text, whatever they came from.

    A new format is one file with a class like this and one line in `opening`.
    """

    has_bars: bool  # whether there is a column for open, high, low or volume

    def relation(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """A query for (line, text, is_plain, fault, series, time, value, open, high, low, volume), and bound values.

        All but line and is_plain are text. Where is_plain is false the fields are not to be trusted and
        `fields_of` has the word; a fault is a reason to refuse the row unread. Each call prepares one reading.
        """

    def fields_of(self, text: str, fields: Fields) -> Fields | Reason | None:
        """The fields of a row that needs a careful look, why it has none, or None for a line that is no row."""

    def close(self, con: duckdb.DuckDBPyConnection) -> None:
        """Lets go of what the readings held."""
