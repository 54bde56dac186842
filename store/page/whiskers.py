"""An estimate as a dot on its interval, and as it was at the run before: one axis in decades for all rows.

There are two of them in each of very many rows: hence no quotes where HTML needs none.
"""

from __future__ import annotations

from collections.abc import Iterable

from markupsafe import Markup

from driftbook.store.charts.scale import Scale, in_decades, number_text

Numbers = tuple[float | None, float | None, float | None]


def shared_axis(estimates: Iterable[Iterable[float | None]]) -> Scale:
    """The axis on which all estimates are drawn."""
    return in_decades((number for estimate in estimates for number in estimate), 100.0)


def ticks(axis: Scale) -> list[tuple[str, str]]:
    """Places and numbers of an axis' marks."""
    return [(_per_cent(axis.at(number)), number_text(number)) for number in axis.ticks(3)]


def whisker(axis: Scale, now: Numbers, before: float | None, *, square: bool = False) -> Markup:
    """One row's mark: an open end runs to the edge, no interval has no bar, and no number leaves nothing."""
    number, lower, upper = (end if axis.holds(end) else None for end in now)
    if number is None and lower is None and upper is None:
        return Markup()
    bar = "" if lower is None and upper is None else _bar(axis, lower, upper)
    hollow = f"<circle cx={_place(axis, before)} />" if before is not None and axis.holds(before) else ""
    solid = "" if number is None else _solid(_place(axis, number), square=square)
    return Markup(f"<svg class=w aria-hidden=true>{bar}{hollow}{solid}</svg>")  # noqa: S704


def _bar(axis: Scale, lower: float | None, upper: float | None) -> str:
    start = 0.0 if lower is None else axis.at(lower)
    stop = 100.0 if upper is None else axis.at(upper)
    return f"<rect x={_per_cent(start)} width={_per_cent(stop - start)} />"


def _solid(place: str, *, square: bool) -> str:
    return f"<rect class=d x={place} />" if square else f"<circle class=d cx={place} />"


def _place(axis: Scale, number: float) -> str:
    return _per_cent(min(100.0, max(0.0, axis.at(number))))


def _per_cent(place: float) -> str:
    return f"{place:.1f}".removesuffix(".0") + "%"
