"""Where a series has been: its values, the window that the numbers speak of, corrections, and a level."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Any

import altair as alt
import polars as pl

from driftbook.store.charts.scale import Scale, straight
from driftbook.store.charts.style import Palette, along, milliseconds, on_paper, up
from driftbook.store.charts.tables import Window, as_rows, corrections_table, values_table, window_of
from driftbook.store.known import Known
from driftbook.store.table import count_of
from driftbook.store.words import clean, day

HEIGHT = 300
_TICK = 10


@dataclass(frozen=True)
class Past:
    """What the chart shows; `inside` are the values of the window."""

    series: str
    unit: str
    times: list[datetime]
    values: list[float]
    inside: list[tuple[datetime, float]]
    window: Window
    corrections: list[dict[str, Any]]
    scale: Scale

    @property
    def summary(self) -> str:
        """The chart in words."""
        last = f"last {self.values[-1]:.6g} {self.unit}".rstrip()
        corrected = f"; {count_of(len(self.corrections), 'correction')}" if self.corrections else ""
        return (
            f"Values of {self.series} from {day(self.times[0])} to {day(self.times[-1])}: "
            f"{count_of(len(self.values), 'observation')}, lowest {min(self.values):.6g}, "
            f"highest {max(self.values):.6g}, {last}{corrected}."
        )


def past(book: Known, row: dict[str, Any]) -> Past | None:
    """Reads the values of a series; None if there are none."""
    window = window_of(book, row)
    _, rows = values_table(book, row, window)
    if not rows:
        return None
    times, values = [row[0] for row in rows], [row[1] for row in rows]
    corrections = as_rows(corrections_table(book, row))
    return Past(
        series=clean(row["series"]),
        unit=clean(row["unit"]),
        times=times,
        values=values,
        inside=[(time, value) for time, value, is_inside, _ in rows if is_inside or window is None],
        window=window or Window(times[0], times[-1], len(rows) - 1, ""),
        corrections=[one for one in corrections if times[0] <= one["observed_at"] <= times[-1]],
        scale=straight(values, HEIGHT),
    )


def draw(shown: Past, palette: Palette, level: float | None = None) -> alt.LayerChart:
    """The chart; the layer called `level` is the level line."""
    x, y = along(shown.times[0], shown.times[-1]), up("value", shown.scale, 5)
    bounds = {"time": [milliseconds(shown.window.opens)], "until": [milliseconds(shown.times[-1])]}
    values = pl.DataFrame({"time": [milliseconds(time) for time in shown.times], "value": shown.values})
    layers = [
        alt.Chart(pl.DataFrame(bounds)).mark_rect(color=palette.shade).encode(x, x2="until:T"),
        alt.Chart(values).mark_line(color=palette.ink, strokeWidth=1.4, strokeJoin="round").encode(x, y),
    ]
    if shown.corrections:
        layers.append(_ticks(shown, palette, x))
    if level is not None:
        line = alt.Chart(pl.DataFrame({"value": [level]}), name="level")
        layers.append(line.mark_rule(color=palette.ink, strokeWidth=1.6, strokeDash=[7, 4], clip=True).encode(y))
    return on_paper(layers, palette, HEIGHT, shown.summary)


def _ticks(shown: Past, palette: Palette, x: alt.X) -> alt.Chart:
    times = pl.DataFrame({"time": [milliseconds(one["observed_at"]) for one in shown.corrections]})
    mark = alt.Chart(times).mark_rule(color=palette.ink, strokeWidth=2)
    ticks: alt.Chart = mark.encode(x, y=alt.value(HEIGHT - _TICK), y2=alt.value(HEIGHT))
    return ticks
