"""Commands of every morning."""

from __future__ import annotations

import sys
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from driftbook.store.cli import options as opt
from driftbook.store.cli.output import outcome_text, say, say_json
from driftbook.store.cli.tables import explanation_text, full_table, short_table
from driftbook.store.table import count_of

if TYPE_CHECKING:
    from driftbook.store.refresh import Progress, Refreshed
    from driftbook.store.runs import Finished


def add_to(app: typer.Typer) -> None:
    """Adds these commands to the program."""
    for command in (refresh, latest, explain):
        app.command(rich_help_panel=opt.EVERY_MORNING)(command)


def refresh(
    book: opt.Book,
    plan: Annotated[Path | None, typer.Option("--plan", help="A plan file; without it the book's own plan.")] = None,
    inbox: Annotated[Path | None, typer.Option("--inbox", help="A folder; what is new there is taken in.")] = None,
    workers: Annotated[int, typer.Option("--workers", min=1, help="Processes that compute.")] = 1,
    everything: Annotated[bool, typer.Option("--all", help="Compute every window, due or not.")] = False,
    dry_run: opt.DryRun = False,
    at: opt.At = None,
    strict: opt.Strict = False,
    yes: opt.Yes = False,
    wait: opt.Wait = 0,
    quiet: opt.Quiet = False,
    as_json: opt.Json = False,
) -> int:
    """Take in what is new and estimate what is due, in one run. The cron line.

    Example: driftbook refresh desk.duckdb --plan plan.toml --inbox in
    """
    from driftbook.store.writer import writing

    with writing(book, wait=wait, at=at) as work:
        if dry_run:
            done = work.due(plan, inbox=inbox, everything=everything)
        else:
            report = None if quiet or as_json else _show
            done = work.refresh(plan, inbox=inbox, everything=everything, yes=yes, workers=workers, report=report)
    if as_json:
        say_json(_answer(done, work.finished))
    else:
        say("\n".join(_summary(done, work.finished, dry_run=dry_run)), quiet=quiet)
    imperfect = done.windows_failed or done.delivered.rows_refused or done.delivered.left
    return 3 if strict and not dry_run and imperfect else 0


def latest(
    book: opt.Book,
    series: Annotated[list[str] | None, typer.Argument(metavar="[SERIES…]", show_default=False)] = None,
    as_of: Annotated[str | None, typer.Option("--as-of", metavar="WHEN", help="As it was known at a moment.")] = None,
    full: Annotated[bool, typer.Option("--full", help="All columns.")] = False,
    quiet: opt.Quiet = False,
    as_json: opt.Json = False,
) -> None:
    """Show what the book says of each series.

    Example: driftbook latest desk.duckdb --as-of 2026-06-30
    """
    from driftbook.store.state import latest_state

    state = latest_state(book, series or [], as_of)
    if as_json:
        say_json(asdict(state))
    else:
        say(full_table(state) if full else short_table(state), quiet=quiet)


def explain(
    book: opt.Book,
    series: Annotated[str, typer.Argument(metavar="SERIES", show_default=False)],
    model: Annotated[str | None, typer.Option("--model", help="By default the model in force.")] = None,
    lookback: Annotated[int | None, typer.Option("--lookback", help="By default that of latest; 0: all.")] = None,
    earlier: Annotated[str | None, typer.Option("--from", metavar="WHEN", help="A date, a time or run:41.")] = None,
    later: Annotated[str | None, typer.Option("--to", metavar="WHEN", help="A date, a time or run:42.")] = None,
    quiet: opt.Quiet = False,
    as_json: opt.Json = False,
) -> None:
    """Say why a number moved: corrections, steps that left and came, other causes.

    Example: driftbook explain desk.duckdb pellets_fob --from 2026-06-29
    """
    from driftbook.store.explaining import explain as explain_move

    found = explain_move(book, series, model=model, lookback=lookback, earlier=earlier, later=later)
    if as_json:
        say_json(asdict(found))
    else:
        say(explanation_text(found), quiet=quiet)


def _answer(done: Refreshed, finished: Finished | None) -> dict[str, Any]:
    return {
        "run": finished.run_id if finished else None,
        "moment": finished.moment if finished else None,
        "files_taken": [outcome.source for outcome in done.delivered.outcomes if not outcome.known_already],
        "files_left": list(done.delivered.left),
        "rows_refused": done.delivered.rows_refused,
        "rows_taken_up": done.taken_up,
        "windows_due": done.windows_due,
        "windows_fitted": done.windows_fitted,
        "windows_failed": done.windows_failed,
        "rows_to_close": done.rows_to_close,
        "warnings": list(done.warnings),
        "rows_written": finished.rows_written if finished else 0,
        "digest": finished.digest if finished else None,
    }


def _summary(done: Refreshed, finished: Finished | None, *, dry_run: bool) -> list[str]:
    """What happened, as a person would tell it."""
    lines = [outcome_text(outcome) for outcome in done.delivered.outcomes if not outcome.known_already]
    lines += [f"left for the next run: {reason}" for reason in done.delivered.left]
    if done.taken_up:
        lines.append(f"{count_of(done.taken_up, 'row')} that waited for a name taken up.")
    if dry_run:
        closing = f", {count_of(done.rows_to_close, 'row')} to close" if done.rows_to_close else ""
        return [*lines, f"Due: {count_of(done.windows_due, 'window')}{closing}; nothing was changed."]
    lines += [f"warning: {warning}" for warning in done.warnings]
    if finished is None:
        return [*lines, "Nothing new; nothing was written."]
    failed = f", {done.windows_failed} without numbers" if done.windows_failed else ""
    closed = f"; {count_of(done.rows_to_close, 'row')} of entries taken out closed" if done.rows_to_close else ""
    return [
        *lines,
        f"Run {finished.run_id}: {count_of(done.windows_due, 'window')} computed{failed}, "
        f"{count_of(finished.rows_written, 'row')} written{closed}.",
    ]


def _show(progress: Progress) -> None:
    """How far the work is: on a terminal in place, else as plain lines."""
    line = f"{progress.done} of {progress.due} windows"
    if sys.stderr.isatty():
        typer.echo(f"\r{line}", err=True, nl=progress.done == progress.due)
    else:
        typer.echo(line, err=True)
