"""The data behind each table and chart, as CSV."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from driftbook.store import words
from driftbook.store.charts.statements import statements
from driftbook.store.charts.tables import Table, corrections_table, models_table, one_row, values_table, window_of
from driftbook.store.errors import UsageError
from driftbook.store.known import Known
from driftbook.store.page.csv_text import csv_text
from driftbook.store.page.small_year import periods_for
from driftbook.store.sql import only_row, query


def csv_of(book: Known, kind: str, series: str | None = None) -> str:
    """The data of one kind; a past moment says so in the first line.

    Raises UsageError for a kind or a series that is not there.
    """
    columns, rows = _table(book, kind, series)
    return csv_text(columns, rows, words.as_known(book.as_of) if book.as_of else None)


def _table(book: Known, kind: str, series: str | None) -> Table:
    if kind in _OF_BOOK:
        return _OF_BOOK[kind](book)
    if kind not in _OF_SERIES:
        raise UsageError(f"there are no data called {kind}; there are {', '.join([*_OF_BOOK, *_OF_SERIES])}.")
    row = one_row(book, series or "")
    if row is None:
        raise UsageError(f"the book knows no series {series!r}.")
    return _OF_SERIES[kind](book, row)


def _latest(book: Known) -> Table:
    source, told = book.latest()
    return book.table(query("page_latest_csv").format(latest=source), **told)


def _years(book: Known) -> Table:
    (series,) = only_row(book.con, "select count(*) from series_at_run($run)", {"run": book.run_id})
    return book.table(query("page_years"), run=book.run_id, periods=periods_for(series))


def _statements(book: Known, row: dict[str, Any]) -> Table:
    """What the model in force said, then the one that the half-life is told from if that is another."""
    found = statements(book, row)
    if found is None:
        return ["model", "window_end"], []
    told = found.told if found.pulled is found.told else [*found.told, *found.pulled]
    return list(told[0]), [tuple(one.values()) for one in told]


_OF_BOOK: dict[str, Callable[[Known], Table]] = {"latest": _latest, "years": _years}
_OF_SERIES: dict[str, Callable[[Known, dict[str, Any]], Table]] = {
    "values": lambda book, row: values_table(book, row, window_of(book, row)),
    "statements": _statements,
    "models": models_table,
    "corrections": corrections_table,
}
