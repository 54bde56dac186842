"""What became of an intake's rows."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Refused:
    """A row that was not taken; in the wide layout `cell` is the number of its column."""

    line: int
    text: str
    reason: str
    cell: int = 0


@dataclass(frozen=True)
class Outcome:
    """The counts of one intake; of the refused rows the first twenty are here and all are in the book."""

    source: str
    intake_id: int | None
    rows_read: int
    rows_new: int
    rows_revised: int
    rows_same: int
    rows_refused: int
    known_already: bool
    series_added: tuple[str, ...]
    refused: list[Refused]
