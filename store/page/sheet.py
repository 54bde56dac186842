"""A series' sheet: one column, in the order of the questions that an auditor asks."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from driftbook.store import figures, words
from driftbook.store.charts.tables import one_row
from driftbook.store.known import Known
from driftbook.store.page.level import Levelled, levelled
from driftbook.store.page.overview import changes
from driftbook.store.page.said import Said, said
from driftbook.store.page.which_model import WhichModel, which_model
from driftbook.store.page.why import Why, why
from driftbook.store.sql import query
from driftbook.store.table import count_of

_MOST_ROWS = 12


@dataclass(frozen=True)
class Asked:
    """What a reader asks of a sheet besides the series: a level, and two runs to compare."""

    level: float | None = None
    earlier: str | None = None
    later: str | None = None


@dataclass(frozen=True)
class Sheet:
    """All that a series' sheet shows; a section that has nothing to say is None."""

    series: str
    name: str
    place: str
    row: dict[str, Any]
    answer: list[str]
    small_print: str
    changed: list[tuple[str, str, str]]
    past: Levelled | None
    said: Said | None
    models: WhichModel | None
    why: Why
    source: Source


@dataclass(frozen=True)
class Source:
    """Where a series comes from: the newest intakes, how many there were, refused rows, and the run that speaks."""

    intakes: list[dict[str, Any]]
    count: int
    refused: list[dict[str, Any]]
    run: dict[str, Any] | None


def sheet(book: Known, series: str, asked: Asked, place: str = "sheet") -> Sheet | None:
    """Reads a series' sheet from the book; None for a series that was not known.

    `place` is a word that no other sheet of the same page has.
    """
    row = one_row(book, series)
    if row is None:
        return None
    found = levelled(book, row, place, asked.level)
    return Sheet(
        series=series,
        name=words.clean(series),
        place=place,
        row=row,
        answer=_answer(row),
        small_print=_small_print(row, found),
        changed=changes(row),
        past=found,
        said=said(book, row, place),
        models=which_model(book, row, place),
        why=why(book, row, asked.earlier, asked.later),
        source=_source(book, series),
    )


def _source(book: Known, series: str) -> Source:
    intakes = book.rows(query("page_intakes"), run=book.run_id, series=series, most=_MOST_ROWS)
    run = book.rows(query("page_run"), run=book.run_id)
    return Source(
        intakes=intakes,
        count=intakes[0]["intakes"] if intakes else 0,
        refused=book.rows(query("page_refused"), run=book.run_id, series=series, most=_MOST_ROWS),
        run=run[0] if run else None,
    )


def _answer(row: dict[str, Any]) -> list[str]:
    if not row["estimated"]:
        return ["The plan asks for no estimate of this series."]
    if row["model"] is None:
        reason = f": {row['note']}" if row["note"] else ""
        return [f"There is no estimate in force{reason}."]
    time = "" if row["volatility"] is None else f" {figures.volatility_time(row['volatility_unit'])}"
    return [
        f"Volatility: {words.volatility(row)}{time}.",
        f"Half-life: {words.half_life_now(row)}.",
        *_zero(row),
        f"Model: {words.model(row['model'])} ({row['model']}){_weight(row)}.",
    ]


def _zero(row: dict[str, Any]) -> list[str]:
    if row["can_reach_zero"] is None:
        return []
    return [
        "It can reach zero under this model." if row["can_reach_zero"] else "It cannot reach zero under this model."
    ]


def _weight(row: dict[str, Any]) -> str:
    return "" if row["model_weight"] is None else f", weight {row['model_weight']:.2f} among those compared"


def _small_print(row: dict[str, Any], found: Levelled | None) -> str:
    window = found.shown.window if found and found.shown.window.status else None
    if window is None:
        return f"Clock {row['clock']}."
    return (
        f"Window of {count_of(window.n, 'step')}, {words.day(window.opens)} – {words.day(window.closes)}; "
        f"clock {row['clock']}; intervals are 95 %; said by run {row['run_id']}; "
        f"status of the fit: {window.status.replace('_', ' ')}."
    )
