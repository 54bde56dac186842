"""The movable level over the past values: how often it was crossed, and on which side the series is."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Any

from driftbook.store import words
from driftbook.store.charts import past
from driftbook.store.charts.scale import Scale
from driftbook.store.known import Known
from driftbook.store.page.drawn import PAPER, Picture, drawn
from driftbook.store.sql import only_row, query


@dataclass(frozen=True)
class Crossed:
    """What a level has seen of a window."""

    level: float
    up: int
    down: int
    last: datetime | None
    sentence: str

    @property
    def written(self) -> str:
        """The level without needless digits."""
        return f"{self.level:.15g}"


@dataclass(frozen=True)
class Levelled:
    """The past values with a level line, and what a script needs to move it."""

    picture: Picture
    shown: past.Past
    level: Crossed
    step: str
    values: str
    times: str
    height: int = past.HEIGHT


def levelled(book: Known, row: dict[str, Any], place: str, level: float | None) -> Levelled | None:
    """The past values of a series and a level, by default a round one near the middle; None without values."""
    shown = past.past(book, row)
    if shown is None:
        return None
    chosen = _middle(shown.scale) if level is None else level
    return Levelled(
        picture=drawn(past.draw(shown, PAPER, chosen), f"{place}-values", shown.summary),
        shown=shown,
        level=crossed(book, shown, row["series"], chosen),
        step=f"{(shown.scale.high - shown.scale.low) / 100:.0e}",
        values=" ".join(repr(value) for _, value in shown.inside),
        times=" ".join(words.day(time).replace(" ", "_") for time, _ in shown.inside),
    )


def crossed(book: Known, shown: past.Past, series: str, level: float) -> Crossed:
    """Counts the steps from below a level to it or above, and back."""
    window = shown.window
    values = {"series": series, "level": level, "run": book.run_id, "opens": window.opens, "closes": window.closes}
    up, down, last = only_row(book.con, query("page_crossings"), values)
    return Crossed(level, up, down, last, _sentence(level, up, down, last, shown.values[-1], shown.unit))


def _sentence(level: float, up: int, down: int, last: datetime | None, value: float, unit: str) -> str:
    """The script says the same in the same words when the line is moved."""
    side = "above" if value >= level else "below"
    there = f"the last value is {side} it by {abs(value - level):.4g} {unit}".rstrip()
    if last is None:
        return f"Not crossed in the window; {there}."
    times = "once" if up + down == 1 else f"{up + down} times"
    return f"Crossed {times} in the window, {up} up and {down} down, last on {words.day(last)}; {there}."


def _middle(scale: Scale) -> float:
    return min(scale.ticks(9), key=lambda tick: abs(2 * scale.at(tick) - scale.length))
