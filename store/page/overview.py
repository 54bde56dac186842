"""The first sheet: what the book says of all series, in the plan's order, and what has to be looked at."""

from __future__ import annotations

import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from functools import lru_cache
from typing import Any

from markupsafe import Markup

from driftbook.store import figures, words
from driftbook.store.charts.scale import Scale
from driftbook.store.known import Known
from driftbook.store.page.small_year import periods_for, small_years
from driftbook.store.page.whiskers import shared_axis, whisker
from driftbook.store.sql import first_row, query


@dataclass(frozen=True)
class Line:
    """One series on the first sheet."""

    series: str
    name: str
    unit: str
    value: str
    observed: str
    year: Markup
    volatility: str
    volatility_mark: Markup
    volatility_moved: bool
    half_life: str
    half_life_mark: Markup
    half_life_moved: bool
    model: str
    model_name: str
    weight: str
    model_moved: bool
    note: str
    needs_a_look: bool
    is_late: bool


@dataclass(frozen=True)
class Cause:
    """A series that has to be explained: why, and what it said before and says now."""

    series: str
    name: str
    note: str
    changes: list[tuple[str, str, str]]
    since_run: int
    since: datetime


@dataclass(frozen=True)
class Overview:
    """All that the first sheet shows."""

    lines: list[Line]
    causes: list[Cause]
    late: list[tuple[str, str, int]]
    volatility_axis: Scale
    half_life_axis: Scale


def overview(book: Known) -> Overview:
    """Reads the first sheet from the book."""
    source, told = book.latest()
    sql = query("page_rows").format(latest=source, chosen="true")
    rows = in_plan_order(book.rows(sql, run=book.run_id, **told), _planned(book))
    for row in rows:
        row["now"] = said_now(row)
        row["changes"] = changes(row)
        row["moved"] = {what for what, _, _ in row["changes"]}
    years = years_of(book, len(rows))
    volatility_axis = shared_axis((*_volatility(row), _volatility_before(row)) for row in rows)
    half_life_axis = shared_axis((*_half_life(row), _half_life_before(row)) for row in rows)
    lines = [_line(row, book, years.get(row["series"], Markup()), volatility_axis, half_life_axis) for row in rows]
    return Overview(
        lines=lines,
        causes=[_cause(row) for row in rows if row["note"]],
        late=[(row["series"], words.clean(row["series"]), words.age(row, book.moment)) for row in rows if row["stale"]],
        volatility_axis=volatility_axis,
        half_life_axis=half_life_axis,
    )


def years_of(book: Known, series: int) -> dict[str, Markup]:
    """The small years by series."""
    told = {"run": book.run_id, "periods": periods_for(series)}
    columns = book.con.execute(query("page_years"), told).fetchnumpy()
    return dict(small_years(columns, told["periods"]))


def in_plan_order(rows: list[dict[str, Any]], planned: Sequence[str]) -> list[dict[str, Any]]:
    """Rows as the plan names their series, then the others as they were added."""
    place = {name: at for at, name in enumerate(planned)}
    return sorted(rows, key=lambda row: place.get(row["series"], len(place)))


def _planned(book: Known) -> tuple[str, ...]:
    row = first_row(book.con, query("page_plan"), {"run": book.run_id})
    return _series_named(row[0]) if row else ()


@lru_cache(maxsize=4)
def _series_named(plan: str) -> tuple[str, ...]:
    """The series in the order of a plan's text, which seldom changes and is long when they are many."""
    return tuple(one["name"] for one in tomllib.loads(plan).get("series", []))


def _volatility(row: dict[str, Any]) -> tuple[float | None, float | None, float | None]:
    unit = row["volatility_unit"]
    number, lower, upper = (row[f"volatility{end}"] for end in ("", "_lower", "_upper"))
    return figures.scaled(number, unit), figures.scaled(lower, unit), figures.scaled(upper, unit)


def _volatility_before(row: dict[str, Any]) -> float | None:
    """Where it was at the run before, if that is another figure than now."""
    moved = "volatility" in row["moved"]
    return figures.scaled(row["before_volatility"], row["before_volatility_unit"]) if moved else None


def _half_life_before(row: dict[str, Any]) -> float | None:
    return row["before_half_life"] if "half-life" in row["moved"] else None


def _half_life(row: dict[str, Any]) -> tuple[float | None, float | None, float | None]:
    return row["half_life_days"], row["half_life_days_lower"], row["half_life_days_upper"]


def _line(row: dict[str, Any], book: Known, year: Markup, volatility_axis: Scale, half_life_axis: Scale) -> Line:
    now, moved = row["now"], row["moved"]
    in_own_unit = row["estimated"] and not figures.is_relative(row["volatility_unit"])
    return Line(
        series=row["series"],
        name=words.clean(row["series"]),
        unit=words.clean(row["unit"]),
        value=f"{row['value']:.6g}" if row["value"] is not None else "",
        observed=words.day(row["observed_at"]),
        year=year,
        volatility=now["volatility"],
        volatility_mark=whisker(volatility_axis, _volatility(row), _volatility_before(row), square=in_own_unit),
        volatility_moved="volatility" in moved,
        half_life=now["half-life"],
        half_life_mark=whisker(half_life_axis, _half_life(row), _half_life_before(row)),
        half_life_moved="half-life" in moved,
        model=now["model"] if row["estimated"] else "not estimated",
        model_name=row["model"] or "",
        weight="" if row["model_weight"] is None else f"{row['model_weight']:.2f}",
        model_moved="model" in moved,
        note=_note(row, book),
        needs_a_look=bool(row["note"]),
        is_late=row["stale"],
    )


def said_now(row: dict[str, Any]) -> dict[str, str]:
    """What is said of a series, in the digits shown."""
    return {
        "volatility": words.volatility(row),
        "half-life": words.half_life_now(row),
        "model": words.model(row["model"]),
    }


def changes(row: dict[str, Any]) -> list[tuple[str, str, str]]:
    """What is said otherwise than at the run before, in the digits shown: what, from, to."""
    if not row["said_before"] or not row["estimated"]:
        return []
    before = {
        "volatility": words.volatility(row, "before_"),
        "half-life": words.half_life_before(row),
        "model": words.model(row["before_model"]),
    }
    return [(what, before[what], now) for what, now in said_now(row).items() if before[what] != now]


def _cause(row: dict[str, Any]) -> Cause:
    return Cause(row["series"], words.clean(row["series"]), row["note"], row["changes"], row["run_id"], row["said_at"])


def _note(row: dict[str, Any], book: Known) -> str:
    late = [f"late {words.age(row, book.moment)} d"] if row["stale"] else []
    return "; ".join([row["note"], *late] if row["note"] else late)
