"""What commands print: text for people, one JSON object for programs."""

from __future__ import annotations

import json
from datetime import date
from typing import Any

import typer

from driftbook.store.table import harmless


def say(text: str, *, quiet: bool = False) -> None:
    """A line for people, without anything that a terminal would obey."""
    if not quiet:
        typer.echo("\n".join(harmless(line) for line in text.split("\n")))


def say_error(text: str) -> None:
    """A line on standard error, as harmless as `say`."""
    typer.echo("\n".join(harmless(line) for line in text.split("\n")), err=True)


def count_of(number: int, noun: str) -> str:
    """`1 window`, `2 windows`."""
    return f"{number} {noun}" if number == 1 else f"{number} {noun}s"


def say_json(answer: dict[str, Any]) -> None:
    """One JSON object on standard output."""
    typer.echo(json.dumps(answer, default=json_value))


def json_value(value: Any) -> Any:
    """Times in ISO 8601, numbers and text as they are, anything else as text."""
    if isinstance(value, date):
        return value.isoformat()
    return value if isinstance(value, int | float | str | None) else str(value)
