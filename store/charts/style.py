"""How all charts look: ink on paper, round ticks, room on the left for numbers, and nothing that moves."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime

import altair as alt

from driftbook.store.charts.scale import Scale, time_ticks

WIDTH = 800
_NUMBERS = 46  # pixels on the left for the numbers of the vertical axis


@dataclass(frozen=True)
class Palette:
    """The colours of a chart and its letters, as a browser names them."""

    ink: str = "#1d1c1a"
    soft: str = "#5f5b55"
    rule: str = "#d9d5cc"
    shade: str = "#f1eee7"
    band: str = "#d8d3c8"
    paper: str = "#fcfbf8"
    letters: str = "Georgia, serif"


PLAIN = Palette()


def milliseconds(when: datetime) -> int:
    """A time as charts count it."""
    return round((when if when.tzinfo else when.replace(tzinfo=UTC)).timestamp() * 1000)


def along(first: datetime, last: datetime, *, below: int = 4, grid: bool = True) -> alt.X:
    """Time, from edge to edge; what is written stands some pixels below the chart."""
    times, written = time_ticks(first, last)
    return alt.X(
        "time:T",
        scale=alt.Scale(type="utc", domain=[milliseconds(first), milliseconds(last)], nice=False),
        axis=alt.Axis(
            values=[milliseconds(time) for time in times],
            format=written,
            title=None,
            grid=grid,
            domain=False,
            ticks=False,
            labelPadding=below,
            labelFlush=True,
            labelOverlap="greedy",
        ),
    )


def up(name: str, scale: Scale, about: int = 4) -> alt.Y:
    """Numbers, from the lowest to the highest that the scale holds."""
    return alt.Y(
        f"{name}:Q",
        scale=alt.Scale(type="log" if scale.decades else "linear", domain=[scale.low, scale.high], nice=False),
        axis=alt.Axis(
            values=scale.ticks(about),
            format="~f" if 1e-4 < max(abs(scale.low), abs(scale.high)) < 1e7 else "~e",
            title=None,
            domain=False,
            ticks=False,
            labelPadding=8,
            minExtent=_NUMBERS,
            maxExtent=_NUMBERS,
        ),
    )


def on_paper(layers: Sequence[alt.Chart], palette: Palette, height: int, title: str) -> alt.LayerChart:
    """Layers, the first at the back, as one chart."""
    return alt.LayerChart(
        layer=list(layers),
        description=title,
        width=WIDTH,
        height=height,
        padding=1,
        autosize=alt.AutoSizeParams(type="fit-x", contains="padding"),
        config={
            "background": palette.paper,
            "font": palette.letters,
            "aria": False,
            "view": {"stroke": None},
            "mark": {"invalid": "break-paths-filter-domains"},
            "axis": {"gridColor": palette.rule, "labelColor": palette.soft, "labelFontSize": 12},
        },
    )
