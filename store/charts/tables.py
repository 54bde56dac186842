"""What the charts and the page's tables are made of: one series as a run knew it."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Any

from driftbook.estimators import MODELS
from driftbook.store.known import Known
from driftbook.store.local_sql import local_columns
from driftbook.store.sql import first_row, query

Table = tuple[list[str], list[tuple[Any, ...]]]

_MOST_VALUES, _ALL_STEPS = 4000, 2000
_WINDOWS_SHOWN = 3


@dataclass(frozen=True)
class Window:
    """The window that is spoken of."""

    opens: datetime
    closes: datetime
    n: int
    status: str


def one_row(book: Known, series: str) -> dict[str, Any] | None:
    """What the book says of one series; None if it was not known."""
    source, told = book.latest()
    sql = query("page_rows").format(latest=source, chosen="s.series = $series")
    found = book.rows(sql, run=book.run_id, series=series, **told)
    return found[0] if found else None


def window_of(book: Known, row: dict[str, Any]) -> Window | None:
    """The window that `latest` speaks of."""
    values = {"run": book.run_id, "series": row["series"], "lookback": row["lookback"], "model": row["model"]}
    found = first_row(book.con, query("page_window"), values)
    return Window(*found) if found else None


def values_table(book: Known, row: dict[str, Any], window: Window | None) -> Table:
    """The last observations of a series: some windows' worth of them."""
    most = min(_MOST_VALUES, (row["lookback"] or _ALL_STEPS) * _WINDOWS_SHOWN + 1)
    opens, closes = (window.opens, window.closes) if window else (None, None)
    return book.table(
        query("page_values"), run=book.run_id, series=row["series"], most=most, opens=opens, closes=closes
    )


def corrections_table(book: Known, row: dict[str, Any]) -> Table:
    """Observations of a series that were corrected or withdrawn."""
    return book.table(query("page_corrections"), run=book.run_id, series=row["series"])


def statements_table(book: Known, row: dict[str, Any], model: str | None = None) -> Table:
    """What a model, by default the one in force, said of every window of the headline lookback, in every version."""
    asked = MODELS[model or row["model"] or next(iter(MODELS))]
    sql = query("page_statements").format(**local_columns(asked))
    return book.table(sql, run=book.run_id, series=row["series"], lookback=row["lookback"])


def models_table(book: Known, row: dict[str, Any]) -> Table:
    """The weight of each model on every window of the headline lookback."""
    return book.table(query("page_models"), run=book.run_id, series=row["series"], lookback=row["lookback"])


def as_rows(table: Table) -> list[dict[str, Any]]:
    """A table's rows by column name."""
    columns, rows = table
    return [dict(zip(columns, row, strict=True)) for row in rows]
