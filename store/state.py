"""The view `latest` with the sentence that stands above it: run, time, how many series, late, to look at."""

from __future__ import annotations

import os
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from driftbook.store.errors import UsageError
from driftbook.store.moments import parse_moment
from driftbook.store.reader import reading
from driftbook.store.series import ended, near_name
from driftbook.store.sql import only_row, query


@dataclass(frozen=True)
class State:
    """What the book says, or said: the run that it speaks for, and a row a series by column."""

    run_id: int
    moment: datetime | None
    as_of: datetime
    columns: list[str]
    rows: list[dict[str, Any]]


def latest_state(book: str | os.PathLike[str], series: list[str], as_of: str | None = None) -> State:
    """The rows of `latest`, all or some, in the order in which series were added; now or at a moment.

    Raises UsageError for a series that is not there.
    """
    moment = datetime.now(UTC) if as_of is None else parse_moment(as_of)
    with reading(Path(book)) as con:
        source = "latest" if as_of is None else "latest_as_of($moment)"
        found = con.execute(query("latest_in_order").format(latest=source), {} if as_of is None else {"moment": moment})
        columns = [column[0] for column in found.description or []]
        rows = [dict(zip(columns, row, strict=True)) for row in found.fetchall()]
        run_id, run_moment = only_row(con, query("run_in_force"), {"moment": moment})
    names = [row["series"] for row in rows]
    for name in series:
        if name not in names:
            raise UsageError(ended(f"the book says nothing of {name!r}{near_name(name, names)}"))
    chosen = [row for row in rows if row["series"] in series] if series else rows
    return State(run_id or 0, run_moment, moment, columns, chosen)
