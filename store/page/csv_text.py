"""Tables as CSV that a spreadsheet can open without obeying it."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence
from datetime import UTC, datetime
from typing import Any

# A spreadsheet takes a cell that begins so for a formula, or drops the character.
_OBEYED = ("=", "+", "-", "@", "\t", "\r")


def csv_text(columns: Sequence[str], rows: Iterable[Sequence[Any]], above: str | None = None) -> str:
    """Rows as CSV; `above` is a first line that says what they are, behind a #."""
    out = io.StringIO()
    if above:
        out.write(f"# {above}\n")
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows([_cell(value) for value in row] for row in rows)
    return out.getvalue()


def _cell(value: Any) -> Any:
    if isinstance(value, str):
        return f"'{value}" if value.startswith(_OBEYED) else value
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, datetime):
        return value.astimezone(UTC).isoformat() if value.tzinfo else value.isoformat()
    return value
