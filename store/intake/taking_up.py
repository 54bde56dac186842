"""Taking up rows that were refused because nobody knew their series, once somebody does."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass

import duckdb

from driftbook.store.intake.bringing_in import bring_in
from driftbook.store.intake.options import from_identity
from driftbook.store.intake.reading import read_rows
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.scratch import scratch
from driftbook.store.intake.source import Fields
from driftbook.store.series import Stamp, series_by_name
from driftbook.store.sql import query


@dataclass
class LateRows:
    """The rows of one intake that wait for names which are known now."""

    intake_id: int
    names: list[str]
    has_bars: bool = True

    @property
    def name(self) -> str:
        """What messages call them."""
        return f"what waits of intake {self.intake_id}"

    def relation(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """One reading of the waiting rows."""
        del con
        return query("intake_late_rows"), {"intake_id": self.intake_id, "names": self.names}

    def fields_of(self, cell: int, text: str | None, fields: Fields) -> Fields | Reason | None:
        """They were split when they arrived."""
        del cell, text
        return fields


def is_awaited(con: duckdb.DuckDBPyConnection, names: Collection[str]) -> bool:
    """Whether refused rows wait for one of the names."""
    return bool(_waiting(con, names))


def take_up(con: duckdb.DuckDBPyConnection, names: Collection[str], stamp: Stamp, *, yes: bool = False) -> int:
    """Turns the refused rows of series that are known now into observations; gives the number of rows taken up.

    They come in the order of their intakes and lines, by the rules of their intake; the observation keeps the old
    intake's number and the intake its counts. A row that turns out bad is refused anew, with the new reason. Like an
    intake they need `yes` to withdraw more than a tenth of a series.
    """
    taken = 0
    for intake_id, identity in _waiting(con, names):
        late = LateRows(intake_id, list(names))
        with scratch(con):
            rows_read = read_rows(con, late, from_identity(identity), series_by_name(con))
            counts = bring_in(con, late, intake_id, stamp, rows_read=rows_read, yes=yes)
        con.execute(query("intake_close_late"), {"intake_id": intake_id, "names": list(names), "run_id": stamp.run_id})
        taken += rows_read - counts.refused
    return taken


def _waiting(con: duckdb.DuckDBPyConnection, names: Collection[str]) -> list[tuple[int, str]]:
    return con.execute(query("intake_late_intakes"), {"names": list(names)}).fetchall()
