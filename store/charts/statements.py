"""What was said of each window, and is said now: one quantity with its band, replaced statements faint."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any

import altair as alt
import polars as pl

from driftbook.estimators import MODELS
from driftbook.store.charts.scale import Scale, in_decades, straight, within_reach
from driftbook.store.charts.style import Palette, along, milliseconds, on_paper, up
from driftbook.store.charts.tables import as_rows, corrections_table, models_table, statements_table
from driftbook.store.figures import is_relative, volatility_time, volatility_unit
from driftbook.store.known import Known
from driftbook.store.table import count_of

HEIGHT = 130
QUANTITIES = ("volatility", "half_life", "drift")
_MOST_POINTS = 700
_RAIL, _TICK = 4, 9  # pixels below the chart where the ticks of the corrections begin, and how long they are
_COLUMNS = {
    "volatility": ("volatility", "volatility_lower", "volatility_upper"),
    "half_life": ("half_life_days", "half_life_lower_days", "half_life_upper_days"),
    "drift": ("drift", None, None),
}
Point = tuple[datetime, float | None, float | None, float | None]


@dataclass(frozen=True)
class Statements:
    """What the model in force said of each window, what the half-life is told from, and the corrections between."""

    row: dict[str, Any]
    told: list[dict[str, Any]]
    pulled: list[dict[str, Any]]
    corrections: list[dict[str, Any]]

    @property
    def windows(self) -> list[datetime]:
        """The ends of the windows that are spoken of."""
        in_force = {one["window_end"] for one in self.told if one["run_to"] is None}
        return sorted(in_force or {one["window_end"] for one in self.told})

    @property
    def replaced(self) -> int:
        """How many statements are not in force any more."""
        return sum(one["run_to"] is not None for one in self.told)


@dataclass(frozen=True)
class Said:
    """One quantity: in force now, and before, by the run that replaced it."""

    title: str
    now: list[Point]
    before: list[tuple[int, datetime, float | None]]
    corrections: list[datetime]
    scale: Scale
    first: datetime
    last: datetime

    @property
    def summary(self) -> str:
        """The chart in words."""
        numbers = [number for _, number, _, _ in self.now]
        known = [number for number in numbers if number is not None]
        if not known:
            return f"{self.title}: {count_of(len(numbers), 'window')}, none with a number."
        last = "none" if numbers[-1] is None else f"{numbers[-1]:.4g}"
        return (
            f"{self.title}, over {count_of(len(numbers), 'window')}: lowest {min(known):.4g}, highest "
            f"{max(known):.4g}, last {last}; {count_of(len(self.before), 'earlier statement')} faint."
        )


def statements(book: Known, row: dict[str, Any]) -> Statements | None:
    """Reads what was said of a series; None without a model in force."""
    if row["model"] is None:
        return None
    told = as_rows(statements_table(book, row))
    pulled = told if _has_half_life(row["model"]) else _heaviest_with_half_life(book, row)
    return Statements(row, told, pulled, as_rows(corrections_table(book, row))) if told else None


def said(found: Statements, quantity: str) -> Said | None:
    """One quantity of what was said; None if no number of it was."""
    number, lower, upper = _COLUMNS[quantity]
    factor = 100.0 if quantity != "half_life" and is_relative(found.row["volatility_unit"]) else 1.0
    rows = found.pulled if quantity == "half_life" else found.told
    points = [
        (one["run_to"], one["window_end"], *(_times(one.get(name or ""), factor) for name in (number, lower, upper)))
        for one in rows
    ]
    now = [point[1:] for point in points if point[0] is None]
    scale = _scale(now, decades=quantity == "half_life")
    if scale is None:
        return None
    first, last = found.windows[0], found.windows[-1]
    return Said(
        title=title(found.row, quantity),
        now=now,
        before=sorted(point[:3] for point in points if point[0] is not None),
        corrections=[one["observed_at"] for one in found.corrections if first <= one["observed_at"] <= last],
        scale=scale,
        first=first,
        last=last,
    )


def title(row: dict[str, Any], quantity: str) -> str:
    """A quantity with its unit."""
    unit = volatility_unit(row["volatility_unit"])
    if quantity == "half_life":
        return "Half-life, calendar days"
    if quantity == "volatility":
        return f"Volatility, {unit} {volatility_time(row['volatility_unit'])}"
    span = "second" if "second" in (row["volatility_unit"] or "") else "year"
    return f"Drift at the last value, {unit} a {span}"


def draw(shown: Said, palette: Palette) -> alt.LayerChart:
    """The chart of one quantity, with a rail of ticks below it where corrections came."""
    x, y = along(shown.first, shown.last, below=_RAIL + _TICK + 4), up("value", shown.scale, 3)
    now = thinned(shown.now)
    frame = pl.DataFrame(
        {
            "time": [milliseconds(when) for when, *_ in now],
            "value": [number for _, number, _, _ in now],
            "lower": [_end(shown.scale, point, 2, shown.scale.low) for point in now],
            "upper": [_end(shown.scale, point, 3, shown.scale.high) for point in now],
        },
        schema={"time": pl.Int64, "value": pl.Float64, "lower": pl.Float64, "upper": pl.Float64},
    )
    band = alt.Chart(frame).mark_area(color=palette.band, clip=True)
    line = alt.Chart(frame).mark_line(color=palette.ink, strokeWidth=1.4, strokeJoin="round", clip=True)
    layers = [band.encode(x, up("lower", shown.scale, 3), y2="upper:Q"), line.encode(x, y)]
    if shown.before:
        layers.insert(1, _faint(shown, palette).encode(x, y, detail="run:N"))
    if shown.corrections:
        times = pl.DataFrame({"time": [milliseconds(when) for when in shown.corrections]})
        rail = alt.Chart(times).mark_rule(color=palette.ink, strokeWidth=2)
        layers.append(rail.encode(x, y=alt.value(HEIGHT + _RAIL), y2=alt.value(HEIGHT + _RAIL + _TICK)))
    return on_paper(layers, palette, HEIGHT, shown.summary, below=_RAIL + _TICK)


def thinned(points: Sequence[Any]) -> Sequence[Any]:
    """As many points as can be seen, evenly, and always the last."""
    every = -(-len(points) // _MOST_POINTS)
    return points if every <= 1 else [*points[:-1:every], points[-1]]


def _faint(shown: Said, palette: Palette) -> alt.Chart:
    before = thinned(shown.before)
    frame = pl.DataFrame(
        {
            "time": [milliseconds(when) for _, when, _ in before],
            "value": [number for _, _, number in before],
            "run": [run for run, _, _ in before],
        },
        schema={"time": pl.Int64, "value": pl.Float64, "run": pl.Int64},
    )
    line: alt.Chart = alt.Chart(frame).mark_line(color=palette.soft, strokeWidth=1, strokeDash=[2, 3], clip=True)
    return line


def _scale(now: list[Point], *, decades: bool) -> Scale | None:
    ends = [end for point in now for end in point[2:]]
    drawn = within_reach([number for _, number, _, _ in now], ends, decades=decades)
    if not drawn:
        return None
    return in_decades(drawn, HEIGHT) if decades else straight(drawn, HEIGHT)


def _end(scale: Scale, point: Point, at: int, edge: float) -> float | None:
    """An end of an interval, held on the paper; an open one runs to the edge, and nothing known breaks the band."""
    if point[2] is None and point[3] is None:
        return None
    end = point[at]
    known = isinstance(end, float) and scale.holds(end)
    return min(scale.high, max(scale.low, end)) if known and isinstance(end, float) else edge


def _times(number: float | None, factor: float) -> float | None:
    return None if number is None else number * factor


def _has_half_life(model: str) -> bool:
    return any(column.name == "half_life" for column in MODELS[model].columns)


def _heaviest_with_half_life(book: Known, row: dict[str, Any]) -> list[dict[str, Any]]:
    """The statements of the model from which the half-life is told when the one in force has none."""
    weights = [one for one in as_rows(models_table(book, row)) if one["window_end"] == row["window_end"]]
    with_pull = [one for one in weights if one["model"] in MODELS and _has_half_life(one["model"])]
    if not with_pull:
        return []
    heaviest = max(with_pull, key=lambda one: one["model_weight"] or 0.0)
    return as_rows(statements_table(book, row, heaviest["model"]))
