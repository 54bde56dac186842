"""The movable level: how often the steps of a window crossed it, and on which side the series is."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from driftbook.store.page import words
from driftbook.store.page.known import Known
from driftbook.store.sql import only_row, query


@dataclass(frozen=True)
class Window:
    """The window that is spoken of."""

    opens: datetime
    closes: datetime
    n: int
    status: str


@dataclass(frozen=True)
class Crossed:
    """What a level has seen of a window."""

    level: float
    up: int
    down: int
    last: datetime | None
    sentence: str


def crossed(book: Known, series: str, window: Window, level: float, value: float, unit: str) -> Crossed:
    """Counts the steps from below a level to it or above, and back."""
    values = {"series": series, "level": level, "run": book.run_id, "opens": window.opens, "closes": window.closes}
    up, down, last = only_row(book.con, query("page_crossings"), values)
    return Crossed(level, up, down, last, _sentence(level, up, down, last, value, unit))


def _sentence(level: float, up: int, down: int, last: datetime | None, value: float, unit: str) -> str:
    """The script says the same in the same words when the line is moved."""
    side = "above" if value >= level else "below"
    there = f"the last value is {side} it by {abs(value - level):.4g} {unit}".rstrip()
    if last is None:
        return f"Not crossed in the window; {there}."
    times = "once" if up + down == 1 else f"{up + down} times"
    return f"Crossed {times} in the window, {up} up and {down} down, last on {words.day(last)}; {there}."
