"""Large charts: lines, bands and ticks over time, as places on paper for the templates to draw."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import datetime
from typing import Any

from driftbook.store.page.scale import Scale, number_text, time_ticks

WIDTH = 1000
_MOST_POINTS = 700
_LETTERS = 14  # pixels that a tick's number needs above its line
Point = tuple[datetime, float | None]


@dataclass(frozen=True)
class Place:
    """A place along the chart, in per cent, or down it, in pixels; with what is written there."""

    at: str
    text: str
    align: str = "middle"


@dataclass(frozen=True)
class Chart:
    """One chart; paths are drawn on a paper 1000 wide and as high as it is."""

    height: int
    up: list[Place]
    along: list[Place]
    lines: list[str] = field(default_factory=list)
    bands: list[str] = field(default_factory=list)
    faint: list[str] = field(default_factory=list)
    marks: list[Place] = field(default_factory=list)


@dataclass(frozen=True)
class Clock:
    """Time along a chart."""

    first: datetime
    last: datetime

    def at(self, when: datetime) -> float:
        """Where a time lies, of 0 … 1000."""
        span = (self.last - self.first).total_seconds()
        return WIDTH * (when - self.first).total_seconds() / span if span else WIDTH / 2

    def per_cent(self, when: datetime) -> str:
        """Where a time lies, in per cent of the width."""
        return f"{self.at(when) / 10:.2f}%"

    def places(self) -> list[Place]:
        """Marks at round times; those near the edges are written inwards."""
        return [
            Place(self.per_cent(time), text, _align(self.at(time))) for time, text in time_ticks(self.first, self.last)
        ]


def heights(scale: Scale, about: int = 4) -> list[Place]:
    """Marks at round numbers, from the top of the chart."""
    tops = [(scale.length - scale.at(number), number) for number in scale.ticks(about)]
    return [Place(f"{top:.1f}", number_text(number)) for top, number in tops if top >= _LETTERS]


def line(clock: Clock, scale: Scale, points: Sequence[Point]) -> str:
    """A path through points; it breaks where there is no number."""
    path, pen = [], "M"
    for when, number in thinned(points):
        if number is None or not scale.holds(number):
            pen = "M"
            continue
        path.append(f"{pen}{clock.at(when):.1f} {scale.length - scale.at(number):.1f}")
        pen = "L"
    return "".join(path)


def band(clock: Clock, scale: Scale, ends: Sequence[tuple[datetime, float | None, float | None]]) -> list[str]:
    """Paths between lower and upper ends; an open end runs to the edge, and nothing known breaks the band."""
    pieces: list[list[tuple[datetime, float | None, float | None]]] = [[]]
    for when, lower, upper in thinned(ends):
        if lower is None and upper is None:
            pieces.append([])
        else:
            pieces[-1].append((when, lower, upper))
    return [_ring(clock, scale, piece) for piece in pieces if piece]


def thinned(points: Sequence[Any]) -> Sequence[Any]:
    """As many points as can be seen, evenly, and always the last."""
    every = -(-len(points) // _MOST_POINTS)
    return points if every <= 1 else [*points[:-1:every], points[-1]]


def _ring(clock: Clock, scale: Scale, piece: list[tuple[datetime, float | None, float | None]]) -> str:
    over = [f"{clock.at(when):.1f} {_down(scale, upper, 0.0):.1f}" for when, _, upper in piece]
    under = [f"{clock.at(when):.1f} {_down(scale, lower, scale.length):.1f}" for when, lower, _ in reversed(piece)]
    return "M" + "L".join([*over, *under]) + "Z"


def _down(scale: Scale, number: float | None, otherwise: float = 0.0) -> float:
    """Pixels from the top, held on the paper."""
    if number is None or not scale.holds(number):
        return otherwise
    return min(scale.length, max(0.0, scale.length - scale.at(number)))


def _align(at: float) -> str:
    return "start" if at < 60 else "end" if at > WIDTH - 60 else "middle"
