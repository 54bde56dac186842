"""Runs the island's desk end to end: several mornings, a correction and its effect, a run computed again."""

from __future__ import annotations

from collections.abc import Callable
from importlib.resources import files
from pathlib import Path
from tempfile import TemporaryDirectory

from driftbook.store.demo.deliveries import deliveries
from driftbook.store.errors import UsageError
from driftbook.store.explaining import Explanation, explain
from driftbook.store.reproducing import reproduce
from driftbook.store.state import State, latest_state
from driftbook.store.swap import create
from driftbook.store.writer import writing

_NOW = "2026-06-30T11:00Z"
_BEFORE = "2026-06-30T05:30Z"


def run_demo(
    folder: Path,
    say: Callable[[str], None],
    show_state: Callable[[State], str],
    show_explanation: Callable[[Explanation], str],
) -> None:
    """Makes the folder with an inbox, a plan and a book, and tells what happens.

    Raises UsageError if the folder exists.
    """
    if folder.exists():
        raise UsageError(f"{folder} exists already; name another folder: driftbook demo FOLDER.")
    _make(folder)
    book = folder / "island.duckdb"
    say("The desk of a small island utility; all data are made up.\n")
    say(show_state(latest_state(book, [], _NOW)))
    say("\nAt 05:30, before a slipped comma of 11 June was corrected, it had said of pellets:\n")
    say(show_state(latest_state(book, ["pellets_fob"], _BEFORE)))
    say("\nWhat the correction did:\n")
    say(show_explanation(explain(book, "pellets_fob", model="ou", earlier=_BEFORE, later=_NOW)))
    (again,) = reproduce(book)
    say(f"\nRun {again.run_id} computed again: {again.rows} rows, {again.identical} identical to the bit.")
    say("\nTo copy:")
    say(f"  driftbook latest {book} --as-of 2026-06-30")
    say(f"  driftbook refresh {book} --inbox {folder / 'inbox'}")
    say(f"  driftbook explain {book} power_da")


def _make(folder: Path) -> None:
    """Runs the mornings in a folder beside and renames it at the end, so that an interrupted demo leaves nothing."""
    folder.parent.mkdir(parents=True, exist_ok=True)
    with TemporaryDirectory(prefix=".driftbook-demo-", dir=folder.parent) as made:
        unfinished = Path(made) / folder.name
        inbox, plan, book = unfinished / "inbox", unfinished / "plan.toml", unfinished / "island.duckdb"
        inbox.mkdir(parents=True)
        plan.write_text(files(__package__).joinpath("plan.toml").read_text(encoding="utf-8"), encoding="utf-8")
        create(book)
        *taken, waiting = deliveries()
        for delivery in taken:
            delivery.put_into(inbox)
            with writing(book, at=delivery.told) as work:
                work.refresh(plan, inbox=inbox)
        waiting.put_into(inbox)
        unfinished.rename(folder)
