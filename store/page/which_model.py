"""The section "Which model"."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Any

from driftbook.store import words
from driftbook.store.charts import weights
from driftbook.store.in_force import LEAD
from driftbook.store.known import Known
from driftbook.store.page.drawn import PAPER, Picture, drawn
from driftbook.store.plan import BEST


@dataclass(frozen=True)
class WhichModel:
    """The section: who leads, and the weights."""

    answer: str
    picture: Picture


def which_model(book: Known, row: dict[str, Any], place: str) -> WhichModel | None:
    """Reads the section; None if no model was fitted."""
    found = weights.weights(book, row)
    if found is None:
        return None
    answer = " ".join([_leader(found), *_in_force(found, row)])
    return WhichModel(answer, drawn(weights.draw(found, PAPER), f"{place}-models", found.summary))


def _leader(found: weights.Weights) -> str:
    """Who leads now, and since when."""
    leaders = [_heaviest(found, end) for end in found.ends]
    last, end = leaders[-1], found.ends[-1]
    if not any(weight.get(end) for weight in found.by_model.values()):
        return "No model could be used on the last window."
    other = [at for at, leader in enumerate(leaders) if leader != last]
    lead = f"{words.model(last).capitalize()} ({last}) has led"
    if not other:
        return f"{lead} on every window."
    since = words.day(found.ends[other[-1] + 1])
    return f"{lead} since the window that ends on {since}; before that {leaders[other[-1]]} did."


def _heaviest(found: weights.Weights, end: datetime) -> str:
    return max(found.by_model, key=lambda name: found.by_model[name].get(end) or 0.0)


def _in_force(found: weights.Weights, row: dict[str, Any]) -> list[str]:
    """Why another than the leader is in force."""
    if row["model"] is None or row["model"] == _heaviest(found, found.ends[-1]):
        return []
    if row["in_force"] != BEST:
        return [f"In force is {row['model']}, which the plan names."]
    return [
        f"In force is {row['model']}: another takes its place when it leads by {LEAD:.0f} in bic on two runs in a row, "
        "and one with a pull only while the pull is significant."
    ]
