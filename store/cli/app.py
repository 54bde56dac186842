"""The program `driftbook`: its commands, and what becomes of an error."""

from __future__ import annotations

import json
import sys
from importlib.metadata import version
from typing import Annotated

import typer

from driftbook.store.cli import asked, begin, morning
from driftbook.store.errors import BookError

CAUTION = (
    "Numbers are statistical estimates from past data: no advice and no forecast of returns. Limits, margin "
    "and capital rules are those of your regulator and of your firm's own licensed or validated practice."
)
_INTERRUPTED = 130


app = typer.Typer(
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode="rich",
    help="Keeps the risk numbers of a book of market series, with their history, in one DuckDB file.",
    epilog=CAUTION,
)


@app.callback()
def _about(
    show_version: Annotated[bool, typer.Option("--version", help="Show the version and end.", is_eager=True)] = False,
) -> None:
    if show_version:
        typer.echo(version("driftbook"))
        raise typer.Exit


morning.add_to(app)
asked.add_to(app)
begin.add_to(app)


def main() -> None:
    """Runs the program and ends the process with its exit code."""
    sys.exit(run(sys.argv[1:]))


def run(arguments: list[str]) -> int:
    """Runs one command; gives its exit code: 0, 1, 2, 3, 4, 75 or 130."""
    try:
        code = app(arguments, prog_name="driftbook", standalone_mode=False)
    except BookError as error:
        _complain(str(error), arguments)
        return error.exit_code
    except KeyboardInterrupt:
        _complain("interrupted; the book is unchanged.", arguments)
        return _INTERRUPTED
    except Exception as error:
        return _usage(error, arguments)
    return code if isinstance(code, int) else 0


def _usage(error: Exception, arguments: list[str]) -> int:
    """A wrong option or argument is told in a sentence; what we did not foresee keeps its traceback."""
    if hasattr(error, "format_message") and hasattr(error, "exit_code"):
        _complain(error.format_message(), arguments)
        return int(error.exit_code)
    if type(error).__name__ == "Abort":
        _complain("interrupted; the book is unchanged.", arguments)
        return _INTERRUPTED
    raise error


def _complain(sentence: str, arguments: list[str]) -> None:
    if "--json" in arguments:
        typer.echo(json.dumps({"error": sentence}))
    typer.echo(f"driftbook: {sentence}", err=True)
