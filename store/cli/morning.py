"""Commands of every morning."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from driftbook.store.cli import options as opt
from driftbook.store.cli.output import count_of, say, say_json

if TYPE_CHECKING:
    from driftbook.store.refresh import Progress


def add_to(app: typer.Typer) -> None:
    """Adds these commands to the program."""
    app.command(rich_help_panel=opt.EVERY_MORNING)(refresh)


def refresh(
    book: opt.Book,
    plan: Annotated[Path | None, typer.Option("--plan", help="A plan file; without it the book's own plan.")] = None,
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
    """Estimate what is due, in one run.

    Example: driftbook refresh desk.duckdb --plan plan.toml
    """
    from driftbook.store.writing import writing

    with writing(book, wait=wait, at=at) as work:
        if dry_run:
            done = work.due(plan, everything=everything)
        else:
            report = None if quiet or as_json else _show
            done = work.refresh(plan, everything=everything, yes=yes, workers=workers, report=report)
    answer = {
        "run": work.finished.run_id if work.finished else None,
        "moment": work.finished.moment if work.finished else None,
        "windows_due": done.windows_due,
        "windows_fitted": None if dry_run else done.windows_fitted,
        "windows_failed": None if dry_run else done.windows_failed,
        "rows_written": work.finished.rows_written if work.finished else 0,
        "rows_to_close": done.rows_to_close,
        "digest": work.finished.digest if work.finished else None,
    }
    if as_json:
        say_json(answer)
    else:
        say(_summary(answer, dry_run), quiet=quiet)
    return 3 if strict and not dry_run and done.windows_failed else 0


def _summary(answer: dict[str, Any], dry_run: bool) -> str:
    if dry_run:
        closing = f", {count_of(answer['rows_to_close'], 'row')} to close" if answer["rows_to_close"] else ""
        return f"Due: {count_of(answer['windows_due'], 'window')}{closing}; nothing was changed."
    if answer["run"] is None:
        return "Nothing new; nothing was written."
    failed = f", {answer['windows_failed']} without numbers" if answer["windows_failed"] else ""
    closed = f"; {answer['rows_to_close']} rows of entries taken out were closed" if answer["rows_to_close"] else ""
    return (
        f"Run {answer['run']}: {count_of(answer['windows_due'], 'window')} computed{failed}, "
        f"{answer['rows_written']} rows written{closed}."
    )


def _show(progress: Progress) -> None:
    """How far the work is: on a terminal in place, else as plain lines."""
    line = f"{progress.done} of {progress.due} windows"
    if sys.stderr.isatty():
        typer.echo(f"\r{line}", err=True, nl=progress.done == progress.due)
    else:
        typer.echo(line, err=True)
