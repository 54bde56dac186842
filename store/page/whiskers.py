"""An estimate as a dot on its interval, and as it was at the run before: one axis in decades for all rows."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from driftbook.store.charts.scale import Scale, in_decades, number_text

Numbers = tuple[float | None, float | None, float | None]


@dataclass(frozen=True)
class Whisker:
    """Places in per cent of the axis, as text; an open end runs to the edge. Empty: nothing to draw there."""

    start: str
    width: str
    dot: str
    before: str


def shared_axis(estimates: Iterable[Iterable[float | None]]) -> Scale:
    """The axis on which all estimates are drawn."""
    return in_decades((number for estimate in estimates for number in estimate), 100.0)


def ticks(axis: Scale) -> list[tuple[str, str]]:
    """Places and numbers of an axis' marks."""
    return [(_per_cent(axis.at(number)), number_text(number)) for number in axis.ticks(3)]


def whisker(axis: Scale, now: Numbers, before: float | None) -> Whisker | None:
    """One row's mark; None without any number."""
    number, lower, upper = (end if axis.holds(end) else None for end in now)
    if number is None and lower is None and upper is None:
        return None
    start = 0.0 if lower is None else axis.at(lower)
    stop = 100.0 if upper is None else axis.at(upper)
    return Whisker(_per_cent(start), _per_cent(stop - start), _place(axis, number), _place(axis, before))


def _place(axis: Scale, number: float | None) -> str:
    if number is None or not axis.holds(number):
        return ""
    return _per_cent(min(100.0, max(0.0, axis.at(number))))


def _per_cent(place: float) -> str:
    return f"{place:.1f}".removesuffix(".0") + "%"
