"""What commands print: text for people, one JSON object for programs."""

from __future__ import annotations

import json
from datetime import date
from decimal import Decimal
from math import isfinite
from typing import TYPE_CHECKING, Any

import typer

from driftbook.store.table import count_of, harmless, shortened

if TYPE_CHECKING:
    from driftbook.store.intake import Outcome


_LONGEST_LINE = 2000


def say(text: str, *, quiet: bool = False) -> None:
    """A line for people, without anything that a terminal would obey."""
    if not quiet:
        typer.echo("\n".join(harmless(line) for line in text.split("\n")))


def say_error(text: str) -> None:
    """A line on standard error, as harmless as `say`; what it quotes may be as long as a file."""
    typer.echo("\n".join(harmless(shortened(line, _LONGEST_LINE)) for line in text.split("\n")), err=True)


def outcome_text(outcome: Outcome, *, dry_run: bool = False) -> str:
    """What became of one file: counts, series added, the first refused rows."""
    if outcome.known_already:
        return f"{outcome.source}: these bytes are known already; nothing was done."
    counts = (
        f"{outcome.source}: {count_of(outcome.rows_read, 'row')} read, {outcome.rows_new} new, "
        f"{outcome.rows_revised} revised, {outcome.rows_same} same, {outcome.rows_refused} refused."
    )
    added = f"\n  series added: {', '.join(outcome.series_added)}" if outcome.series_added else ""
    refused = "".join(f"\n  line {row.line}: {row.reason}: {harmless(shortened(row.text))}" for row in outcome.refused)
    more = outcome.rows_refused - len(outcome.refused)
    rest = f"\n  and {more} more, in the view refused_row" if more > 0 else ""
    return counts + added + refused + rest + ("\n  (dry run: nothing was changed)" if dry_run else "")


def say_json(answer: dict[str, Any]) -> None:
    """One JSON object on standard output."""
    typer.echo(json.dumps(plain(answer), default=json_value, allow_nan=False))


def plain(value: Any) -> Any:
    """A value of which JSON has all parts: a decimal is a number, and what is no number is null."""
    if isinstance(value, dict):
        return {str(key): plain(one) for key, one in value.items()}
    if isinstance(value, list | tuple):
        return [plain(one) for one in value]
    if isinstance(value, Decimal):
        return float(value)
    return None if isinstance(value, float) and not isfinite(value) else value


def json_value(value: Any) -> Any:
    """Times in ISO 8601, numbers and text as they are, anything else as text."""
    if isinstance(value, date):
        return value.isoformat()
    return value if isinstance(value, int | float | str | None) else str(value)
