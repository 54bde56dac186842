"""Runs the island's desk end to end: several mornings, a correction and its effect, the number as said before."""

from __future__ import annotations

from collections.abc import Callable
from importlib.resources import files
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

from driftbook.store.demo.deliveries import write_deliveries
from driftbook.store.digits import with_interval
from driftbook.store.errors import UsageError
from driftbook.store.intake import Options
from driftbook.store.reader import connect
from driftbook.store.sql import query
from driftbook.store.swap import create
from driftbook.store.table import columns
from driftbook.store.writer import writing

# When the desk took in each delivery, told: the demo reads the same on any day.
_TOLD = (
    "2026-06-25T05:30Z",
    "2026-06-26T05:30Z",
    "2026-06-29T05:30Z",
    "2026-06-30T05:30Z",
    "2026-06-30T11:00Z",
)


def run_demo(folder: Path, say: Callable[[str], None]) -> None:
    """Makes the folder with an inbox, a plan and a book, and tells what happens; raises UsageError if it exists."""
    if folder.exists():
        raise UsageError(f"{folder} exists already; name another folder: driftbook demo FOLDER.")
    waiting = _make(folder)
    book = folder / "island.duckdb"
    say("The desk of a small island utility (all data made up): what it tells at 11:00 on 30 June 2026.\n")
    say(_table(_rows(book, "demo_now")))
    say("\nAt 05:30 it had said, of pellets, before a misplaced comma of 11 June was corrected:\n")
    say(_table(_rows(book, "demo_before")))
    say("\nTo copy:")
    say(f'  driftbook sql {book} "from ou order by window_end desc limit 3"')
    say(f"  driftbook verify {book}")
    say(f"  driftbook ingest {book} {waiting}")


def _make(folder: Path) -> Path:
    """Runs the mornings in a folder beside and renames it at the end, so that an interrupted demo leaves nothing."""
    folder.parent.mkdir(parents=True, exist_ok=True)
    with TemporaryDirectory(prefix=".driftbook-demo-", dir=folder.parent) as made:
        unfinished = Path(made) / folder.name
        deliveries = write_deliveries(unfinished / "inbox")
        plan, book = unfinished / "plan.toml", unfinished / "island.duckdb"
        plan.write_text(files(__package__).joinpath("plan.toml").read_text(encoding="utf-8"), encoding="utf-8")
        create(book)
        for delivery, told in zip(deliveries, _TOLD, strict=False):
            with writing(book, at=told) as work:
                work.ingest(delivery, Options(add_series=delivery.name == "history.csv"))
                work.refresh(plan)
        unfinished.rename(folder)
    return folder / "inbox" / deliveries[-1].name


def _rows(book: Path, name: str) -> list[tuple[Any, ...]]:
    with connect(book) as con:
        return con.execute(query(name)).fetchall()


def _table(rows: list[tuple[Any, ...]]) -> str:
    told = [
        (series, unit, with_interval(sigma, low, high), with_interval(days, least, most, "d"), str(day))
        for series, unit, sigma, low, high, days, least, most, day in rows
    ]
    return columns(("series", "unit", "volatility, per √year", "half-life", "to"), told)
