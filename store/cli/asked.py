"""Commands for when somebody asks."""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import asdict
from enum import StrEnum
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from driftbook.store.cli import options as opt
from driftbook.store.cli.output import say, say_json
from driftbook.store.errors import DifferenceFound, UsageError
from driftbook.store.table import count_of

if TYPE_CHECKING:
    import duckdb

    from driftbook.store.proof import Verified
    from driftbook.store.reproducing import Reproduced


class Format(StrEnum):
    """How the rows of a query are written."""

    TABLE = "table"
    CSV = "csv"
    JSON = "json"
    PARQUET = "parquet"


def add_to(app: typer.Typer) -> None:
    """Adds these commands to the program."""
    for command in (sql, reproduce, verify):
        app.command(rich_help_panel=opt.WHEN_ASKED)(command)


def sql(
    book: opt.Book,
    statement: Annotated[
        str, typer.Argument(metavar="SQL", help='One SELECT; "-" reads standard input.', show_default=False)
    ],
    how: Annotated[Format, typer.Option("--format", help="How rows are written.")] = Format.TABLE,
    output: Annotated[Path | None, typer.Option("--output", help="A file instead of standard output.")] = None,
    guarded: Annotated[
        bool, typer.Option("--guard-formulas", help="CSV for a spreadsheet: no text can be taken for a formula.")
    ] = False,
    timeout: Annotated[
        float, typer.Option("--timeout", metavar="SECONDS", min=0, help="Give up after this time.")
    ] = 600.0,
    most: Annotated[int | None, typer.Option("--rows", metavar="N", min=0, help="At most so many rows.")] = None,
    quiet: opt.Quiet = False,
    as_json: opt.Json = False,
) -> None:
    """Query the book, read-only, with all functions registered.

    Example: driftbook sql desk.duckdb "from ou where series = 'pellets_fob' order by window_end desc limit 3"
    """
    from driftbook.store.ask import ask
    from driftbook.store.cli.rows import deliver
    from driftbook.store.contained import Limits

    if as_json and output is not None:
        raise UsageError("--json writes to standard output; write a file with --format json.")
    written = _written("object" if as_json else how.value, output, guarded=guarded)
    _check_output(book, output)
    with ask(
        book, _from_standard_input() if statement == "-" else statement, written, Limits(timeout), rows=most
    ) as pieces:
        deliver(pieces, output)
    if output is not None:
        say(f"written to {output}", quiet=quiet)


def _from_standard_input() -> str:
    try:
        return sys.stdin.buffer.read().decode()
    except UnicodeDecodeError as error:
        raise UsageError("standard input is no UTF-8 text.") from error


def _written(how: str, output: Path | None, *, guarded: bool) -> Callable[[duckdb.DuckDBPyRelation], bytes]:
    """How the rows become bytes."""
    from driftbook.store.cli import rows

    if guarded and how != "csv":
        raise UsageError("--guard-formulas is for --format csv.")
    if how == "parquet" and output is None:
        raise UsageError("Parquet needs a file: add --output FILE.")
    if how == "csv":
        return partial(rows.as_csv, guarded=guarded, shown=output is None and sys.stdout.isatty())
    return {"table": rows.as_table, "json": rows.as_json, "object": rows.as_object, "parquet": rows.as_parquet}[how]


def _check_output(book: Path, output: Path | None) -> None:
    if output is not None and output.exists() and book.exists() and output.samefile(book):
        raise UsageError(f"{output} is the book itself; name another file.")


def verify(book: opt.Book, quiet: opt.Quiet = False, as_json: opt.Json = False) -> int:
    """Prove the book whole: schema, counts, versions, and the digest of every run.

    Example: driftbook verify desk.duckdb
    """
    from driftbook.store.proof import verify as verify_book

    seen = verify_book(book)
    if as_json:
        say_json(asdict(seen))
    else:
        say(_report(seen), quiet=quiet and not seen.findings)
    return DifferenceFound.exit_code if seen.findings else 0


def reproduce(
    book: opt.Book,
    run: Annotated[int | None, typer.Option("--run", metavar="N", help="By default the last.")] = None,
    every: Annotated[bool, typer.Option("--all", help="Every run.")] = False,
    quiet: opt.Quiet = False,
    as_json: opt.Json = False,
) -> int:
    """Compute a run again from the data as known then, and compare; change nothing.

    Example: driftbook reproduce desk.duckdb --run 41
    """
    from driftbook.store.reproducing import reproduce as compute_again

    found = compute_again(book, run, every=every)
    different = any(one.different or one.other_revision for one in found)
    if as_json:
        say_json({"runs": [asdict(one) for one in found]})
    else:
        say("\n".join(line for one in found for line in _again(one)), quiet=quiet and not different)
    return DifferenceFound.exit_code if different else 0


def _again(found: Reproduced) -> list[str]:
    if not found.rows and not found.other_revision:
        return [f"Run {found.run_id} wrote no estimates."]
    lines = [
        f"Run {found.run_id}: {count_of(found.rows, 'row')} computed again, {found.identical} identical to the bit, "
        f"{found.same} within rounding, {found.different} different."
    ]
    lines += [
        f"  {count} of {model} were made by a revision that is not installed; they were not computed."
        for model, count in found.other_revision.items()
    ]
    lines += [
        f"  {one.series}, {one.model} {one.lookback}, {one.window_end}: {one.column} {one.stored} then, {one.again} now"
        for one in found.worst
    ]
    return lines


def _report(seen: Verified) -> str:
    look = f"{seen.look.looked_at}, {seen.look.found}" if seen.look.looked_at else "not recorded"
    count = len(seen.findings)
    found = [f"  {finding.sentence}" for finding in seen.findings]
    verdict = f"The book is not as it was written: {count} difference{'s' if count > 1 else ''}."
    return "\n".join(
        [
            f"{seen.runs} runs, {seen.leaves} digests over {seen.rows} rows computed again.",
            f"last digest   {seen.last_digest}",
            f"last look     {look}",
            *([verdict, *found] if found else ["The book is whole."]),
        ]
    )
