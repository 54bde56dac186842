"""The section "What we said, and say now"."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from driftbook.store import words
from driftbook.store.charts import statements
from driftbook.store.known import Known
from driftbook.store.page.drawn import PAPER, Picture, drawn
from driftbook.store.table import count_of


@dataclass(frozen=True)
class Strip:
    """One quantity over the window ends."""

    title: str
    answer: str
    picture: Picture


@dataclass(frozen=True)
class Said:
    """The section: its answer, its strips, and the corrections in words."""

    answer: str
    strips: list[Strip]
    corrections: list[str]


def said(book: Known, row: dict[str, Any], place: str) -> Said | None:
    """Reads the section; None if nothing was said."""
    found = statements.statements(book, row)
    if found is None:
        return None
    strips = [_strip(found, quantity, place) for quantity in statements.QUANTITIES]
    return Said(_answer(found), [one for one in strips if one is not None], _corrections(found))


def _strip(found: statements.Statements, quantity: str, place: str) -> Strip | None:
    shown = statements.said(found, quantity)
    if shown is None:
        return None
    picture = drawn(statements.draw(shown, PAPER), f"{place}-{quantity}", shown.summary)
    return Strip(shown.title, _now(found.row, quantity), picture)


def _now(row: dict[str, Any], quantity: str) -> str:
    if quantity == "volatility":
        return words.volatility(row)
    if quantity == "half_life":
        return words.half_life_now(row)
    return words.drift(row)


def _answer(found: statements.Statements) -> str:
    windows = count_of(len(found.windows), "window")
    if not found.replaced and not found.corrections:
        return f"Nothing that was said of {windows} has been replaced since."
    replaced = count_of(found.replaced, "earlier statement")
    return (
        f"{replaced} of {windows} {'was' if found.replaced == 1 else 'were'} replaced; "
        f"{count_of(len(found.corrections), 'correction')} came."
    )


def _corrections(found: statements.Statements) -> list[str]:
    return [words.correction(one) for one in found.corrections]
