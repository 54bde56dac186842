"""A year of a series in the height of a line: the last value of each period, and its lowest and highest."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

HEIGHT = 28
FINE, COARSE = 52, 26
_MANY = 300


@dataclass(frozen=True)
class SmallYear:
    """Paths on a paper as wide as the year has periods."""

    line: str
    band: str
    width: int


def periods_for(series: int) -> int:
    """Weeks, or for very many series fortnights, so that the sheet stays light."""
    return COARSE if series > _MANY else FINE


def small_year(row: dict[str, Any], periods: int) -> SmallYear:
    """The paths of one row of the query."""
    low, high = min(row["lowest"]), max(row["highest"])
    scale = (HEIGHT - 4) / (high - low) if high > low else 0.0
    places = [[_height(value, high, scale) for value in row[name]] for name in ("last", "lowest", "highest")]
    last, lowest, highest = places
    at = row["period"]
    around = [*zip(at, highest, strict=True), *zip(reversed(at), reversed(lowest), strict=True)]
    return SmallYear(_path(list(zip(at, last, strict=True))), _path(around), periods - 1)


def _height(value: float, high: float, scale: float) -> int:
    return round(2 + (high - value) * scale) if scale else HEIGHT // 2


def _path(points: list[tuple[int, int]]) -> str:
    """A path in steps from point to point, which is shorter than in places; one point is a short stroke."""
    (x, y), *rest = points
    path = [f"M{x} {y}l"]
    for next_x, next_y in rest:
        down = next_y - y
        path.append(f"{next_x - x}{down} " if down < 0 else f"{next_x - x} {down} ")
        x, y = next_x, next_y
    return "".join(path).rstrip() if rest else f"M{x} {y}h1"
