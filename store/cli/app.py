"""The program `driftbook`: its commands, and what becomes of an error."""

from __future__ import annotations

import json
import os
import signal
import sys
from importlib.metadata import version
from threading import current_thread, main_thread
from typing import Annotated

import typer

from driftbook.store.cli import asked, begin, morning, page_command
from driftbook.store.cli.output import say_error
from driftbook.store.errors import BookError

CAUTION = (
    "Numbers are statistical estimates from past data: no advice and no forecast of returns. Limits, margin "
    "and capital rules are those of your regulator and of your firm's own licensed or validated practice."
)
_INTERRUPTED = 130
_SAY_INTERRUPTED = "interrupted; the book is unchanged."
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
        typer.echo(version("driftbook"))
        raise typer.Exit


morning.add_to(app)
asked.add_to(app)
page_command.add_to(app)
begin.add_to(app)


def main() -> None:
    """Runs the program and ends the process with its exit code."""
    sys.exit(run(sys.argv[1:]))


def run(arguments: list[str]) -> int:
    """Runs one command; gives its exit code: 0, 1, 2, 3, 4, 75 or 130."""
    interrupts = _Interrupts()
    try:
        with interrupts:
            code = app(arguments, prog_name="driftbook", standalone_mode=False)
    except BookError as error:
        _complain(str(error), arguments)
        return error.exit_code
    except BrokenPipeError:  # whoever read, as `head` does, has read enough
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except (Exception, KeyboardInterrupt) as error:
        return _other(error, arguments, interrupted=interrupts.seen or isinstance(error, KeyboardInterrupt))
    if code == _INTERRUPTED:  # typer took the interrupt itself
        _complain(_SAY_INTERRUPTED, arguments)
    return code if isinstance(code, int) else 0


class _Interrupts:
    """Notes Ctrl-C: DuckDB turns the interrupt of a running query into an error of another name."""

    def __init__(self) -> None:
        self.seen = False

    def __enter__(self) -> None:
        if current_thread() is main_thread():
            signal.signal(signal.SIGINT, self._note)

    def __exit__(self, *error: object) -> None:
        if current_thread() is main_thread():
            signal.signal(signal.SIGINT, signal.default_int_handler)

    def _note(self, *_: object) -> None:
        self.seen = True
        raise KeyboardInterrupt


def _other(error: BaseException, arguments: list[str], *, interrupted: bool) -> int:
    """A wrong option is told in a sentence, and so is what we did not foresee; a traceback only on request."""
    if interrupted or type(error).__name__ == "Abort":
        _complain(_SAY_INTERRUPTED, arguments)
        return _INTERRUPTED
    if hasattr(error, "format_message") and hasattr(error, "exit_code"):
        _complain(error.format_message(), arguments)
        return int(error.exit_code)
    if os.environ.get(_SHOW_TRACEBACK):
        raise error
    first_line = (str(error).splitlines() or [""])[0]
    _complain(
        f"this should not have happened, {type(error).__name__}: {first_line} The book is unchanged; "
        f"set {_SHOW_TRACEBACK}=1 and run it again to see where.",
        arguments,
    )
    return 1


def _complain(sentence: str, arguments: list[str]) -> None:
    if "--json" in arguments:
        typer.echo(json.dumps({"error": sentence}))
    say_error(f"driftbook: {sentence}")
