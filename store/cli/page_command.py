"""The command `page`: the book in the browser, or as one file to mail."""

from __future__ import annotations

from importlib.util import find_spec
from pathlib import Path
from typing import Annotated

import typer

from driftbook.store.cli import options as opt
from driftbook.store.cli.output import say, say_json
from driftbook.store.errors import UsageError

_NEEDS = ("altair", "vl_convert", "markdown_it", "jinja2", "starlette", "uvicorn")


def add_to(app: typer.Typer) -> None:
    """Adds this command to the program."""
    app.command(rich_help_panel=opt.WHEN_ASKED)(page)


def page(
    book: opt.Book,
    port: Annotated[int, typer.Option("--port", metavar="P", min=0, max=65535, help="0: any free one.")] = 8710,
    output: Annotated[
        Path | None, typer.Option("--output", metavar="FILE.html", help="One self-contained file instead.")
    ] = None,
    as_of: Annotated[
        str | None, typer.Option("--as-of", metavar="WHEN", help="With --output: as it was known at a moment.")
    ] = None,
    quiet: opt.Quiet = False,
    as_json: opt.Json = False,
) -> None:
    """Show the book in the browser, read-only, on this machine; or write one file to mail.

    Example: driftbook page desk.duckdb
    """
    missing = [name for name in _NEEDS if find_spec(name) is None]
    if missing:
        raise UsageError(f"the page needs {', '.join(missing)}: pip install 'driftbook[page]'")
    if output is None:
        if as_of is not None:
            raise UsageError("--as-of goes with --output; on the page, choose the moment at the top.")
        _serve(book, port, quiet=quiet, as_json=as_json)
        return
    from driftbook.store.page.mailing import write_file

    write_file(book, output, as_of)
    if as_json:
        say_json({"book": str(book), "file": str(output)})
    else:
        say(f"written to {output}", quiet=quiet)


def _serve(book: Path, port: int, *, quiet: bool, as_json: bool) -> None:
    from driftbook.store.page.serving import listening, serve
    from driftbook.store.swap import require_book

    require_book(book)
    with listening(port) as door:
        address = f"http://127.0.0.1:{door.getsockname()[1]}/"
        if as_json:
            say_json({"book": str(book), "address": address})
        else:
            say(f"{address} shows {book}, to this machine only; Ctrl-C ends it.", quiet=quiet)
        serve(book, door)
