"""The program `driftbook`: its commands, and what becomes of an error."""

from __future__ import annotations

import json
import os
import signal
import sys
from typing import Annotated

import typer

from driftbook.store import interrupts
from driftbook.store.cli import asked, begin, morning, page_command
from driftbook.store.cli.output import say_error
from driftbook.store.errors import BookError, UsageError

CAUTION = (
    "Numbers are statistical estimates from past data: no advice and no forecast of returns. Limits, margin "
    "and capital rules are those of your regulator and of your firm's own licensed or validated practice."
)
_INTERRUPTED = 130
_SHOW_TRACEBACK = "DRIFTBOOK_TRACEBACK"


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
        from importlib.metadata import version  # slow, and seldom needed

        typer.echo(version("driftbook"))
        raise typer.Exit


morning.add_to(app)
asked.add_to(app)
page_command.add_to(app)
begin.add_to(app)


def main() -> None:
    """Runs the program and ends the process with its exit code."""
    code = run(sys.argv[1:])
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # all is done but to end
    sys.exit(code)


def run(arguments: list[str]) -> int:
    """Runs one command; gives its exit code: 0, 1, 2, 3, 4, 75 or 130."""
    before = interrupts.swaps()
    try:
        with interrupts.listening():
            _check_text(arguments)
            code = app(arguments, prog_name="driftbook", standalone_mode=False)
    except (BrokenPipeError, SystemExit):  # typer exits on a broken pipe: whoever read, as `head` does, has enough
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except (Exception, KeyboardInterrupt) as error:
        interrupted = interrupts.heard() or isinstance(error, KeyboardInterrupt) or type(error).__name__ == "Abort"
        code, sentence = _interrupted(before) if interrupted else _ended_by(error, before)
        _complain(sentence, arguments)
        return code
    if code == _INTERRUPTED:  # typer took the interrupt itself
        _complain(_interrupted(before)[1], arguments)
    return code if isinstance(code, int) else 0


def _check_text(arguments: list[str]) -> None:
    """Bytes that are no UTF-8 come as letters that nothing can write down again."""
    for argument in arguments:
        if any("\ud800" <= letter <= "\udfff" for letter in argument):
            raise UsageError(f"{argument!r} is no UTF-8 text; rename or write it in UTF-8.")


def _interrupted(before: int) -> tuple[int, str]:
    return _INTERRUPTED, f"interrupted; {_what_of_the_book(before)}."


def _ended_by(error: Exception | KeyboardInterrupt, before: int) -> tuple[int, str]:
    """The exit code and the sentence for an error; a traceback only for one not foreseen, and only on request."""
    if isinstance(error, BookError):
        return error.exit_code, str(error)
    if hasattr(error, "format_message") and hasattr(error, "exit_code"):  # a wrong option
        return int(error.exit_code), error.format_message()
    if os.environ.get(_SHOW_TRACEBACK):
        raise error
    if isinstance(error, OSError) and error.strerror:
        where = f" ({error.filename})" if error.filename else ""
        return 1, f"the system refuses: {error.strerror}{where}; {_what_of_the_book(before)}."
    if "Corrupt database file" in str(error):
        return 1, "the book's file is damaged; `driftbook verify` says what can still be read, and the way back."
    first_line = (str(error).splitlines() or [""])[0]
    return 1, (
        f"this should not have happened, {type(error).__name__}: {first_line.rstrip('.')}; "
        f"{_what_of_the_book(before)}; set {_SHOW_TRACEBACK}=1 and run it again to see where."
    )


def _what_of_the_book(before: int) -> str:
    return "the book is unchanged" if interrupts.swaps() == before else "the run was done and is in the book"


def _complain(sentence: str, arguments: list[str]) -> None:
    if "--json" in arguments:
        typer.echo(json.dumps({"error": sentence}))
    say_error(f"driftbook: {sentence}")
