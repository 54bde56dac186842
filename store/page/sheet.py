"""A series' sheet: one column, in the order of the questions that an auditor asks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from itertools import groupby
from typing import Any

from driftbook.estimators import MODELS
from driftbook.store.local_sql import local_columns
from driftbook.store.page import words
from driftbook.store.page.chart import Chart, Clock, Place, band, heights, line
from driftbook.store.page.known import Known
from driftbook.store.page.level import Crossed, Window, crossed
from driftbook.store.page.overview import changes, one_row
from driftbook.store.page.scale import Scale, in_decades, straight, within_reach
from driftbook.store.sql import first_row, query
from driftbook.store.table import count_of

_PICTURE, _STRIP, _RAIL = 300.0, 130.0, 12
_MOST_VALUES, _ALL_STEPS = 4000, 2000
_WINDOWS_SHOWN = 3


@dataclass(frozen=True)
class Picture:
    """The past values with the window's edge, corrections and the level line, and what a script needs to move it."""

    chart: Chart
    window_at: str
    level_at: str
    level: Crossed
    step: str
    low: str
    high: str
    values: str
    times: str
    summary: str
    opened_by: str


@dataclass(frozen=True)
class Said:
    """One quantity over the window ends: now in force, with earlier statements faint."""

    title: str
    answer: str
    chart: Chart
    summary: str


@dataclass(frozen=True)
class ModelRow:
    """One model's weight over the window ends, as cells of ink."""

    model: str
    word: str
    cells: list[tuple[str, str, str]]
    latest: str


@dataclass(frozen=True)
class Sheet:
    """All that a series' sheet shows besides why a number moved."""

    series: str
    name: str
    row: dict[str, Any]
    answer: list[str]
    small_print: str
    changed: list[tuple[str, str, str]]
    window: Window | None
    picture: Picture | None
    said: list[Said]
    said_answer: str
    corrections: list[dict[str, Any]]
    rail: list[Place]
    models: list[ModelRow]
    models_answer: str
    models_times: list[Place]
    intakes: list[dict[str, Any]]
    intakes_count: int
    refused: list[dict[str, Any]]
    run: dict[str, Any] | None


def sheet(book: Known, series: str, level: float | None = None) -> Sheet | None:
    """Reads a series' sheet from the book; None for a series that was not known."""
    row = one_row(book, series)
    if row is None:
        return None
    window = window_of(book, row)
    corrections = book.rows(query("page_corrections"), run=book.run_id, series=series)
    picture = _picture(book, row, window, corrections, level)
    said, said_answer, rail = _said(book, row, corrections)
    models, models_answer, models_times = _models(book, row)
    intakes = book.rows(query("page_intakes"), run=book.run_id, series=series, most=12)
    return Sheet(
        series=series,
        name=words.clean(series),
        row=row,
        answer=_answer(row),
        small_print=_small_print(row, window),
        changed=changes(row),
        window=window,
        picture=picture,
        said=said,
        said_answer=said_answer,
        corrections=corrections,
        rail=rail,
        models=models,
        models_answer=models_answer,
        models_times=models_times,
        intakes=intakes,
        intakes_count=intakes[0]["intakes"] if intakes else 0,
        refused=book.rows(query("page_refused"), run=book.run_id, series=series, most=12),
        run=_run(book),
    )


def window_of(book: Known, row: dict[str, Any]) -> Window | None:
    """The window that `latest` speaks of."""
    values = {"run": book.run_id, "series": row["series"], "lookback": row["lookback"], "model": row["model"]}
    found = first_row(book.con, query("page_window"), values)
    return Window(*found) if found else None


def values_table(book: Known, row: dict[str, Any], window: Window | None) -> tuple[list[str], list[tuple[Any, ...]]]:
    """The last observations of a series: some windows' worth of them."""
    most = min(_MOST_VALUES, (row["lookback"] or _ALL_STEPS) * _WINDOWS_SHOWN + 1)
    opens, closes = (window.opens, window.closes) if window else (None, None)
    return book.table(
        query("page_values"), run=book.run_id, series=row["series"], most=most, opens=opens, closes=closes
    )


def statements_table(book: Known, row: dict[str, Any], model: str) -> tuple[list[str], list[tuple[Any, ...]]]:
    """What a model said of every window of the headline lookback, in every version."""
    sql = query("page_statements").format(**local_columns(MODELS[model]))
    return book.table(sql, run=book.run_id, series=row["series"], lookback=row["lookback"])


def models_table(book: Known, row: dict[str, Any]) -> tuple[list[str], list[tuple[Any, ...]]]:
    """The weight of each model on every window of the headline lookback."""
    return book.table(query("page_models"), run=book.run_id, series=row["series"], lookback=row["lookback"])


def _run(book: Known) -> dict[str, Any] | None:
    found = book.rows(query("page_run"), run=book.run_id)
    return found[0] if found else None


def _answer(row: dict[str, Any]) -> list[str]:
    if not row["estimated"]:
        return ["The plan asks for no estimate of this series."]
    if row["model"] is None:
        reason = f": {row['note']}" if row["note"] else ""
        return [f"There is no estimate in force{reason}."]
    time = words.volatility_time(row["volatility_unit"])
    return [
        f"Volatility {words.volatility(row)} {time}.",
        f"Half-life {words.half_life_now(row)}.",
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


def _small_print(row: dict[str, Any], window: Window | None) -> str:
    if window is None:
        return f"Clock {row['clock']}."
    return (
        f"Window of {count_of(window.n, 'step')}, {words.day(window.opens)} – {words.day(window.closes)}; "
        f"clock {row['clock']}; intervals are 95 %; said by run {row['run_id']}; "
        f"status of the fit: {window.status.replace('_', ' ')}."
    )


def _picture(
    book: Known, row: dict[str, Any], window: Window | None, corrections: list[dict[str, Any]], level: float | None
) -> Picture | None:
    _, rows = values_table(book, row, window)
    if not rows:
        return None
    times, values = [row[0] for row in rows], [row[1] for row in rows]
    scale, clock = straight(values, _PICTURE), Clock(times[0], times[-1])
    seen = window or Window(times[0], times[-1], len(rows) - 1, "")
    unit = words.clean(row["unit"])
    place = _middle(scale) if level is None else level
    inside = [(time, value) for time, value, is_inside, _ in rows if is_inside or window is None]
    return Picture(
        chart=Chart(
            height=int(_PICTURE),
            up=heights(scale, 5),
            along=clock.places(),
            lines=[line(clock, scale, list(zip(times, values, strict=True)))],
            marks=[
                Place(clock.per_cent(one["observed_at"]), _corrected(one))
                for one in corrections
                if times[0] <= one["observed_at"] <= times[-1]
            ],
        ),
        window_at=clock.per_cent(seen.opens),
        level_at=f"{scale.length - scale.at(place):.1f}",
        level=crossed(book, row["series"], seen, place, values[-1], unit),
        step=_step(scale),
        low=repr(scale.low),
        high=repr(scale.high),
        values=" ".join(repr(value) for _, value in inside),
        times=" ".join(words.day(time).replace(" ", "_") for time, _ in inside),
        summary=_values_summary(row, times, values),
        opened_by=words.day(seen.opens),
    )


def _middle(scale: Scale) -> float:
    """A round level to begin with, near the middle of what is seen."""
    return min(scale.ticks(9), key=lambda tick: abs(2 * scale.at(tick) - scale.length))


def _step(scale: Scale) -> str:
    """A hundredth of what is seen, as a round number, so that arrow keys move the line."""
    return f"{(scale.high - scale.low) / 100:.0e}"


def _values_summary(row: dict[str, Any], times: Sequence[datetime], values: Sequence[float]) -> str:
    unit = words.clean(row["unit"])
    return (
        f"Values of {words.clean(row['series'])} from {words.day(times[0])} to {words.day(times[-1])}: "
        f"{count_of(len(values), 'observation')}, lowest {min(values):.6g}, highest {max(values):.6g}, "
        f"last {values[-1]:.6g} {unit}".rstrip()
        + "."
    )


def _corrected(one: dict[str, Any]) -> str:
    now = "withdrawn" if one["after"] is None else f"corrected to {one['after']:.6g}"
    return f"{words.day(one['observed_at'])}: {one['before']:.6g} {now} in run {one['run_id']}"


def _said(book: Known, row: dict[str, Any], corrections: list[dict[str, Any]]) -> tuple[list[Said], str, list[Place]]:
    if row["model"] is None:
        return [], "", []
    columns, rows = statements_table(book, row, row["model"])
    there = [dict(zip(columns, one, strict=True)) for one in rows]
    if not there:
        return [], "", []
    pulled = there if MODELS[row["model"]].has_half_life else _heaviest_with_pull(book, row)
    ends = [one["window_end"] for one in there if one["run_to"] is None] or [one["window_end"] for one in there]
    clock = Clock(min(ends), max(ends))
    unit, time = words.volatility_unit(row["volatility_unit"]), words.volatility_time(row["volatility_unit"])
    factor = 100.0 if words.is_relative(row["volatility_unit"]) else 1.0
    told = [
        _one_said(clock, there, "volatility", f"Volatility, {unit} {time}", words.volatility(row), factor),
        _one_said(clock, pulled, "half_life_days", "Half-life, calendar days", words.half_life_now(row), 1.0, True),
        _one_said(clock, there, "drift", _drift_title(row, unit), _drift(row, factor), factor),
    ]
    replaced = sum(one["run_to"] is not None for one in there)
    answer = (
        f"{count_of(replaced, 'earlier statement')} of {count_of(len(set(ends)), 'window')} "
        f"{'was' if replaced == 1 else 'were'} replaced; {count_of(len(corrections), 'correction')} came."
        if replaced or corrections
        else f"Nothing that was said of {count_of(len(set(ends)), 'window')} has been replaced since."
    )
    return [one for one in told if one is not None], answer, _rail(clock, corrections)


def _drift_title(row: dict[str, Any], unit: str) -> str:
    span = "second" if "second" in (row["volatility_unit"] or "") else "year"
    return f"Drift at the last value, {unit} a {span}"


def _drift(row: dict[str, Any], factor: float) -> str:
    if row["drift"] is None:
        return words.NOTHING
    three_digits = float(f"{row['drift'] * factor:.3g}")
    return f"{three_digits:.10g}, without an interval so far"


def _rail(clock: Clock, corrections: list[dict[str, Any]]) -> list[Place]:
    inside = [one for one in corrections if clock.first <= one["observed_at"] <= clock.last]
    return [Place(clock.per_cent(one["observed_at"]), _corrected(one)) for one in inside]


def _heaviest_with_pull(book: Known, row: dict[str, Any]) -> list[dict[str, Any]]:
    """The statements of the model from which the half-life is told when the one in force has none."""
    columns, rows = models_table(book, row)
    weights = [dict(zip(columns, one, strict=True)) for one in rows if one[0] == row["window_end"]]
    with_pull = [one for one in weights if one["model"] in MODELS and MODELS[one["model"]].has_half_life]
    if not with_pull:
        return []
    heaviest = max(with_pull, key=lambda one: one["model_weight"] or 0.0)
    names, found = statements_table(book, row, heaviest["model"])
    return [dict(zip(names, one, strict=True)) for one in found]


def _one_said(
    clock: Clock,
    rows: list[dict[str, Any]],
    name: str,
    title: str,
    answer: str,
    factor: float,
    decades: bool = False,
) -> Said | None:
    names = _ends(name)
    numbers = [[_times(one.get(column), factor) for column in names] for one in rows]
    in_force = [three for one, three in zip(rows, numbers, strict=True) if one["run_to"] is None]
    drawn = within_reach(
        [three[0] for three in in_force], [end for three in in_force for end in three[1:]], decades=decades
    )
    if not drawn:
        return None
    scale = in_decades(drawn, _STRIP) if decades else straight(drawn, _STRIP)
    now = [(one["window_end"], *three) for one, three in zip(rows, numbers, strict=True) if one["run_to"] is None]
    before = [(one["run_to"], one["window_end"], three[0]) for one, three in zip(rows, numbers, strict=True)]
    before = sorted((one for one in before if one[0] is not None), key=lambda one: (one[0], one[1]))
    chart = Chart(
        height=int(_STRIP),
        up=heights(scale, 3),
        along=clock.places(),
        lines=[line(clock, scale, [(when, number) for when, number, _, _ in now])],
        bands=[] if name == "drift" else band(clock, scale, [(when, low, high) for when, _, low, high in now]),
        faint=[
            line(clock, scale, [(when, number) for _, when, number in group])
            for _, group in groupby(before, key=lambda one: one[0])
        ],
    )
    return Said(title, answer, chart, _said_summary(title, [number for _, number, _, _ in now], len(before)))


def _ends(name: str) -> tuple[str, str, str]:
    if name == "half_life_days":
        return "half_life_days", "half_life_lower_days", "half_life_upper_days"
    return name, f"{name}_lower", f"{name}_upper"


def _times(number: float | None, factor: float) -> float | None:
    return None if number is None else number * factor


def _said_summary(title: str, numbers: list[float | None], replaced: int) -> str:
    known = [number for number in numbers if number is not None]
    if not known:
        return f"{title}: {count_of(len(numbers), 'window')}, none with a number."
    last = "none" if numbers[-1] is None else f"{numbers[-1]:.4g}"
    return (
        f"{title}, over {count_of(len(numbers), 'window')}: lowest {min(known):.4g}, highest {max(known):.4g}, "
        f"last {last}; {count_of(replaced, 'earlier statement')} faint."
    )


def _models(book: Known, row: dict[str, Any]) -> tuple[list[ModelRow], str, list[Place]]:
    _, rows = models_table(book, row)
    if not rows:
        return [], "", []
    ends = sorted({one[0] for one in rows})
    clock = Clock(ends[0], ends[-1])
    names = [name for name in MODELS if any(one[1] == name for one in rows)]
    weights = {name: {one[0]: one[2] for one in rows if one[1] == name} for name in names}
    found = [
        ModelRow(name, words.model(name), _cells(ends, weights[name]), _last_weight(weights[name].get(ends[-1])))
        for name in names
    ]
    return found, _leader(ends, weights), clock.places()


def _last_weight(weight: float | None) -> str:
    return "not used" if weight is None else f"{weight:.2f}"


def _cells(ends: list[datetime], weight: dict[datetime, float | None]) -> list[tuple[str, str, str]]:
    """At most 120 cells: place, width, and the ink of the mean weight there."""
    count = min(120, len(ends))
    cells = []
    for at in range(count):
        part = ends[at * len(ends) // count : (at + 1) * len(ends) // count]
        there = [weight.get(end) or 0.0 for end in part]
        cells.append((f"{100 * at / count:.2f}%", f"{100 / count + 0.1:.2f}%", f"{sum(there) / len(there):.2f}"))
    return cells


def _leader(ends: list[datetime], weights: dict[str, dict[datetime, float | None]]) -> str:
    """Who leads now, and since when."""
    leaders = [max(weights, key=lambda name: weights[name].get(end) or 0.0) for end in ends]
    known = [any(weights[name].get(end) for name in weights) for end in ends]
    if not known[-1]:
        return "No model could be used on the last window."
    last = leaders[-1]
    since = next((at for at in range(len(ends) - 1, -1, -1) if leaders[at] != last), None)
    if since is None:
        return f"{words.model(last).capitalize()} ({last}) has led on every window."
    return (
        f"{words.model(last).capitalize()} ({last}) has led since the window that ends on "
        f"{words.day(ends[since + 1])}; before that {leaders[since]} did."
    )
