"""The tables of `latest` and `explain` for people, at 80 columns."""

from __future__ import annotations

from datetime import datetime
from shutil import get_terminal_size
from typing import TYPE_CHECKING, Any

from rich.cells import cell_len

from driftbook.store import figures
from driftbook.store.digits import with_interval
from driftbook.store.table import columns, count_of, word

if TYPE_CHECKING:
    from driftbook.store.explaining import Explanation, Statement
    from driftbook.store.state import State

_DAY = 86_400
_HEADER = ("series", "value", "volatility", "half-life", "model")


def short_table(state: State) -> str:
    """One sentence and the table that fits a terminal; a note that does not fit stands below its row.

    A narrow terminal has the unit of a volatility once, in the value beside it, where both are the same. Where not even
    the model fits beside the figures, it goes below with the note.
    """
    if not state.rows:
        return _sentence(state)
    notes = [note(row, state.as_of) for row in state.rows]
    width = get_terminal_size().columns
    rows = [_row(row) for row in state.rows]
    if _widest(columns(_HEADER, rows)) > width:
        rows = [_row(row, unit_once=True) for row in state.rows]
    if _widest(columns(_HEADER, rows)) > width:
        notes = [f"{row[-1]}; {words}" if words else row[-1] for row, words in zip(rows, notes, strict=True)]
        rows = [row[:-1] for row in rows]
    table = columns(_HEADER[: len(rows[0])], rows)
    return "\n".join([_sentence(state), "", *_with_notes(table, notes, width)])


def _widest(table: str) -> int:
    return max(map(cell_len, table.split("\n")))


def _with_notes(table: str, notes: list[str], width: int) -> list[str]:
    """The rows with their notes beside them, or below where a terminal of this width has no room."""
    header, *lines = table.split("\n")
    column = _widest(table) + 2
    if column + max(map(cell_len, notes)) > width:
        return [header, *(f"{line}\n  {words}" if words else line for line, words in zip(lines, notes, strict=True))]
    beside = [("note" if any(notes) else "", header), *zip(notes, lines, strict=True)]
    return [line + " " * (column - cell_len(line)) + words if words else line for words, line in beside]


def full_table(state: State) -> str:
    """One sentence and every column, a series after the other."""
    blocks = [columns(("", ""), [(name, word(row[name])) for name in state.columns]) for row in state.rows]
    return "\n".join([_sentence(state), *blocks])


def note(row: dict[str, Any], as_of: datetime) -> str:
    """What needs a look, in words, with what only the moment of reading can tell."""
    words = [row["note"]] if row["note"] else []
    if row["stale"]:
        age = as_of.replace(tzinfo=None) - row["observed_at"]
        words.append(f"stale {age.total_seconds() // _DAY:.0f} d")
    return "; ".join(words)


def explanation_text(found: Explanation) -> str:
    """Two statements side by side, and below what came between them."""
    one, other = found.earlier, found.later
    lookback = "all steps" if not found.lookback else count_of(found.lookback, "step")
    head = f"{found.series}, {found.model}, {lookback}: run {one.run_id} and run {other.run_id}."
    rows = [(name, _estimate(*one.numbers[name]), _estimate(*other.numbers[name])) for name in one.numbers]
    rows.append(("window", f"{word(one.window_start)} – {word(one.window_end)}",
                 f"{word(other.window_start)} – {word(other.window_end)}"))  # fmt: skip
    rows.append(("status", one.status, other.status))
    table = columns(("", _run(one), _run(other)), rows)
    return "\n".join([head, "", table, "", *_between(found)])


def _estimate(value: float | None, lower: float | None, upper: float | None) -> str:
    without = ", no interval" if value is not None and (lower, upper) == (None, None) else ""
    return with_interval(value, lower, upper) + without


def _run(statement: Statement) -> str:
    return f"run {statement.run_id}, {statement.moment:%Y-%m-%d %H:%M}Z"


def _between(found: Explanation) -> list[str]:
    lines = [
        f"{word(one.observed_at)} corrected from {word(one.before)} to {word(one.after)} in run {one.run_id}."
        if one.after is not None
        else f"{word(one.observed_at)}, {word(one.before)}, withdrawn in run {one.run_id}."
        for one in found.corrections
    ]
    if found.steps_that_came or found.steps_that_left:
        came, left = count_of(found.steps_that_came, "step"), count_of(found.steps_that_left, "step")
        lines.append(f"{came} came, {left} left.")
    lines += [f"{cause[0].upper()}{cause[1:]}." for cause in found.causes]
    return lines or ["Nothing came between them."]


def _sentence(state: State) -> str:
    if state.moment is None:
        return "No run yet: take in files, then refresh with a plan."
    late = sum(bool(row["stale"]) for row in state.rows)
    look = sum(bool(note(row, state.as_of)) for row in state.rows)
    return (
        f"Run {state.run_id} of {state.moment:%Y-%m-%d %H:%M}Z: {len(state.rows)} series, {late} late, "
        f"{look} to look at."
    )


def _row(row: dict[str, Any], *, unit_once: bool = False) -> tuple[str, ...]:
    value = figures.with_unit(row["value"], row["unit"])
    return row["series"], value, _volatility(row, unit_once=unit_once), _half_life(row), row["model"] or "–"


def _volatility(row: dict[str, Any], *, unit_once: bool) -> str:
    unit = row["volatility_unit"]
    shown_unit = None if unit_once and not figures.is_relative(unit) else unit
    return figures.volatility(row["volatility"], row["volatility_lower"], row["volatility_upper"], shown_unit)


def _half_life(row: dict[str, Any]) -> str:
    ends = row["half_life_days"], row["half_life_days_lower"], row["half_life_days_upper"]
    return figures.half_life(*ends, unbounded=row["half_life_unbounded"])
