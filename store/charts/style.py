"""How all charts look: ink on paper, round ticks, room on the left for numbers, and nothing that moves."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime

import altair as alt

from driftbook.store.charts.scale import Scale, time_ticks

WIDTH = 800
NUMBERS = 52  # pixels on the left for the numbers of the vertical axis
_MARGIN = 0.06  # of the width, at both ends, where a time would be written over the edge
_EDGE, _TIMES = 6, 22  # pixels at the other sides, and below for the times


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

    def inked(self, share: float) -> str:
        """From the colour of shade, at 0, to that of ink, at 1."""
        if not self.ink.startswith("#"):
            return f"color-mix(in srgb, {self.ink} {share:.0%}, {self.shade})"
        pairs = [(int(self.ink[at : at + 2], 16), int(self.shade[at : at + 2], 16)) for at in (1, 3, 5)]
        return "#" + "".join(f"{round(share * ink + (1 - share) * shade):02x}" for ink, shade in pairs)


PLAIN = Palette()


def milliseconds(when: datetime) -> int:
    """A time as charts count it."""
    return round((when if when.tzinfo else when.replace(tzinfo=UTC)).timestamp() * 1000)


def along(first: datetime, last: datetime, *, below: int = 4, grid: bool = True) -> alt.X:
    """Time, from edge to edge; what is written stands some pixels below the chart."""
    times, written = time_ticks(first, last)
    room = _MARGIN * (last - first)
    times = [time for time in times if first + room <= time <= last - room]
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
        ),
    )


def on_paper(
    layers: Sequence[alt.Chart], palette: Palette, height: int, title: str, *, left: int = NUMBERS, below: int = 0
) -> alt.LayerChart:
    """Layers, the first at the back, as one chart; all have the same room around them, so that their edges agree."""
    return alt.LayerChart(
        layer=list(layers),
        description=title,
        width=WIDTH - left - _EDGE,
        height=height,
        padding={"left": left, "right": _EDGE, "top": _EDGE, "bottom": _TIMES + below},
        autosize="none",
        config={
            "background": palette.paper,
            "font": palette.letters,
            "aria": False,
            "view": {"stroke": None},
            "mark": {"invalid": "break-paths-filter-domains"},
            "axis": {"gridColor": palette.rule, "labelColor": palette.soft, "labelFontSize": 12},
        },
    )
