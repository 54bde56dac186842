"""Commands to begin with."""

from __future__ import annotations

import difflib
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from driftbook.store.cli import options as opt
from driftbook.store.cli.output import outcome_text, say, say_json
from driftbook.store.cli.tables import explanation_text, short_table
from driftbook.store.errors import UsageError

if TYPE_CHECKING:
    from driftbook.store.intake import Outcome

_ROLES = ("series", "time", "value", "open", "high", "low", "volume")


def add_to(app: typer.Typer) -> None:
    """Adds these commands to the program."""
    app.command(rich_help_panel=opt.TO_BEGIN)(demo)
    app.command(rich_help_panel=opt.TO_BEGIN)(new)
    app.command(rich_help_panel=opt.TO_BEGIN)(ingest)
    app.command(rich_help_panel=opt.TO_BEGIN)(forget)


def demo(
    folder: Annotated[Path, typer.Argument(metavar="[FOLDER]", help="Where to put it.")] = Path("island"),
    quiet: opt.Quiet = False,
    as_json: opt.Json = False,
) -> None:
    """Make a book of an invented island utility, with deliveries and a plan, and run it end to end.

    Example: driftbook demo
    """
    from driftbook.store.demo import run_demo

    lines: list[str] = []
    tell = lines.append if as_json else partial(say, quiet=quiet)
    run_demo(folder, tell, short_table, explanation_text)
    if as_json:
        say_json({"folder": str(folder), "said": lines})


def new(book: opt.Book, quiet: opt.Quiet = False, as_json: opt.Json = False) -> None:
    """Make an empty book.

    Example: driftbook new desk.duckdb
    """
    from driftbook.store.swap import create

    create(book)
    if as_json:
        say_json({"book": str(book)})
    else:
        say(f"Made {book}. Next: driftbook ingest {book} FILE --add-series", quiet=quiet)


def ingest(
    book: opt.Book,
    files: Annotated[
        list[Path],
        typer.Argument(
            metavar="FILE…",
            help="CSV, JSON lines, Parquet, Arrow, any of them .gz; - is standard input.",
            show_default=False,
        ),
    ],
    series: Annotated[str | None, typer.Option("--series", help="All rows are this series.")] = None,
    add_series: Annotated[bool, typer.Option("--add-series", help="Add series that the book lacks.")] = False,
    wide: Annotated[bool, typer.Option("--wide", help="A column of times, and a column for each series.")] = False,
    columns: Annotated[
        str | None, typer.Option("--columns", metavar="time=…,value=…", help="Which column is what.")
    ] = None,
    dates: Annotated[
        str | None, typer.Option("--dates", metavar="day-first|month-first|FORMAT", help="How dates are written.")
    ] = None,
    decimal: Annotated[
        str, typer.Option("--decimal", metavar="MARK", help="The decimal mark of numbers, . or a comma.")
    ] = ".",
    zone: Annotated[str | None, typer.Option("--zone", help="Zone of times that have none.")] = None,
    blank: Annotated[
        list[str] | None,
        typer.Option("--blank", metavar="TEXT", help="Means an empty value, such as NA; can be given several times."),
    ] = None,
    dry_run: opt.DryRun = False,
    at: opt.At = None,
    strict: opt.Strict = False,
    yes: opt.Yes = False,
    wait: opt.Wait = 0,
    quiet: opt.Quiet = False,
    as_json: opt.Json = False,
) -> int:
    """Take in files without estimating.

    Example: driftbook ingest desk.duckdb prices.csv --add-series
    """
    from driftbook.store.intake import Options
    from driftbook.store.writer import writing

    chosen = Options(
        series=series,
        columns=_roles(columns),
        dates=dates,
        zone=zone,
        layout="wide" if wide else "long",
        decimal=decimal,
        blank=blank or (),
        add_series=add_series,
        yes=yes,
    )
    with writing(book, wait=wait, at=at) as work:
        outcomes = [work.ingest(file, chosen) for file in files]
        if dry_run:
            work.discard()
    refused = sum(outcome.rows_refused for outcome in outcomes)
    if as_json:
        run_id = work.finished.run_id if work.finished else None
        say_json({"run": run_id, "dry_run": dry_run, "intakes": [_as_dict(outcome) for outcome in outcomes]})
    else:
        for outcome in outcomes:
            say(outcome_text(outcome, dry_run=dry_run), quiet=quiet)
    return 3 if strict and refused else 0


def forget(
    book: opt.Book,
    series: Annotated[str, typer.Argument(metavar="SERIES", show_default=False)],
    before: Annotated[
        str | None, typer.Option("--before", metavar="WHEN", help="Only what it says of times before this.")
    ] = None,
    yes: Annotated[bool, typer.Option("--yes", help="It cannot be undone.")] = False,
    at: opt.At = None,
    wait: opt.Wait = 0,
    quiet: opt.Quiet = False,
    as_json: opt.Json = False,
) -> None:
    """Delete a series, or its past, for good; the digest chain says so, and no byte of it is left.

    Example: driftbook forget desk.duckdb diesel --before 2020-01-01 --yes
    """
    from driftbook.store.forgetting import forget as delete

    done = delete(book, series, before=before, yes=yes, wait=wait, at=at)
    if as_json:
        say_json({"run": done.run.run_id, "rows": done.rows, "digest": done.run.digest})
    else:
        rows = ", ".join(f"{count} of {table}" for table, count in done.rows.items())
        say(f"Run {done.run.run_id}: deleted for good {rows}.", quiet=quiet)


def _roles(text: str | None) -> dict[str, str]:
    """`time=Date,value=Close` as a mapping."""
    roles = {}
    for part in text.split(",") if text else []:
        role, equals, column = part.partition("=")
        if not equals or role not in _ROLES:
            near = difflib.get_close_matches(role, _ROLES, n=1)
            hint = f"did you mean {near[0]}=…?" if near else f"there are {', '.join(_ROLES)}"
            raise UsageError(f"--columns: {part!r} is no role=column; {hint}")
        roles[role] = column
    return roles


def _as_dict(outcome: Outcome) -> dict[str, object]:
    return {
        "source": outcome.source,
        "intake": outcome.intake_id,
        "known_already": outcome.known_already,
        "rows_read": outcome.rows_read,
        "rows_new": outcome.rows_new,
        "rows_revised": outcome.rows_revised,
        "rows_same": outcome.rows_same,
        "rows_refused": outcome.rows_refused,
        "series_added": list(outcome.series_added),
        "refused": [{"line": row.line, "reason": row.reason, "text": row.text} for row in outcome.refused],
    }
