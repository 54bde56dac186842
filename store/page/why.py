"""Why a number moved: `explain` on the page, between two runs that the reader chooses."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from driftbook.estimators import MODELS
from driftbook.estimators.model import Parameter
from driftbook.store import words
from driftbook.store.digits import with_interval
from driftbook.store.errors import UsageError
from driftbook.store.explaining import Explanation, Statement, explain_on
from driftbook.store.known import Known
from driftbook.store.table import count_of


@dataclass(frozen=True)
class Why:
    """Two statements side by side, and what came between them; or the sentence that says why there are none."""

    sentence: str
    first: str = ""
    last: str = ""
    first_run: int = 0
    last_run: int = 0
    rows: tuple[tuple[str, str, str], ...] = ()
    between: tuple[str, ...] = ()


def why(book: Known, row: dict[str, Any], earlier: str | None, later: str | None) -> Why:
    """Explains a series between two runs; by default the last change of its latest window that was known then."""
    then = f"run:{book.run_id}" if book.as_of and book.run_id else None
    try:
        found = explain_on(book.con, row["series"], earlier=earlier, later=later or then)
    except UsageError as error:
        text = str(error)
        return Why(text[:1].upper() + text[1:])
    one, other = found.earlier, found.later
    if one.run_id == other.run_id:
        return Why(f"There is one statement so far, of run {one.run_id}; nothing has moved yet.")
    return Why(
        _sentence(found), _head(one), _head(other), one.run_id, other.run_id, _rows(found, row), tuple(_between(found))
    )


def _head(one: Statement) -> str:
    return f"Run {one.run_id}, {words.moment(one.moment)}"


def _sentence(found: Explanation) -> str:
    causes = []
    if found.corrections:
        causes.append(count_of(len(found.corrections), "correction"))
    if found.steps_that_came or found.steps_that_left:
        causes.append(f"{count_of(found.steps_that_came, 'step')} that came and {found.steps_that_left} that left")
    causes += found.causes
    return f"Between run {found.earlier.run_id} and run {found.later.run_id}: {'; '.join(causes) or 'nothing came'}."


def _rows(found: Explanation, row: dict[str, Any]) -> tuple[tuple[str, str, str], ...]:
    one, other = found.earlier, found.later
    names = [(parameter.name, _named(parameter, row)) for parameter in MODELS[found.model].parameters]
    return (
        *((shown, with_interval(*one.numbers[name]), with_interval(*other.numbers[name])) for name, shown in names),
        ("window", _window(one), _window(other)),
        ("status", one.status.replace("_", " "), other.status.replace("_", " ")),
    )


def _named(parameter: Parameter, row: dict[str, Any]) -> str:
    """A parameter with its unit: the registry counts in x, the unit of the series, and t, that of its clock."""
    time = "second" if row["clock"] == "seconds" else "year"
    of_series = words.clean(row["unit"]) or "unit"
    unit = parameter.unit.replace("t", time)
    for power in ("√x", "x^"):
        unit = unit.replace(power, power.replace("x", f"({of_series})"))
    unit = unit.replace("x", of_series)
    return f"{parameter.name}, {unit}" if unit else parameter.name


def _window(said: Statement) -> str:
    return f"{words.day(said.window_start)} – {words.day(said.window_end)}"


def _between(found: Explanation) -> list[str]:
    return [
        f"{words.day(one.observed_at)}: {one.before:.6g} withdrawn in run {one.run_id}."
        if one.after is None
        else f"{words.day(one.observed_at)}: {one.before:.6g} corrected to {one.after:.6g} in run {one.run_id}."
        for one in found.corrections
    ]
