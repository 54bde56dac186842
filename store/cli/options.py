"""Options and arguments that several commands share."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

Book = Annotated[Path, typer.Argument(metavar="BOOK", help="The book's file.", show_default=False)]
Quiet = Annotated[bool, typer.Option("--quiet", help="Say nothing but errors.")]
Json = Annotated[bool, typer.Option("--json", help="One JSON object on standard output.")]
Wait = Annotated[float, typer.Option("--wait", metavar="SECONDS", min=0, help="Wait for another writer.")]
At = Annotated[
    str | None,
    typer.Option("--at", metavar="WHEN", help="The run's moment, told instead of taken from the clock; in UTC."),
]
Strict = Annotated[bool, typer.Option("--strict", help="Exit 3 if rows were refused or fits failed.")]
Yes = Annotated[bool, typer.Option("--yes", help="Do it although much would be closed or withdrawn.")]
DryRun = Annotated[bool, typer.Option("--dry-run", help="Say what would be done; change nothing.")]

EVERY_MORNING = "Every morning"
WHEN_ASKED = "When somebody asks"
TO_BEGIN = "To begin"
