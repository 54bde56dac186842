"""The page's charts as altair objects, for a notebook.

values
    Where a series has been, and a level.
said
    What was said of each window, and is said now: volatility, half-life or drift.
models
    The weight of each model on each window.

Each takes a connection of `driftbook.store.connect`, and `as_of`, a past moment, for what was known then.
"""

from __future__ import annotations

from importlib.util import find_spec
from typing import Any

import duckdb

from driftbook.store.errors import UsageError

if find_spec("altair") is None:
    raise ImportError("the charts need altair: pip install 'driftbook[page]'")

import altair as alt

from driftbook.store.charts import past, statements, weights
from driftbook.store.charts.style import PLAIN
from driftbook.store.charts.tables import one_row
from driftbook.store.known import Known, known_on

__all__ = ["models", "said", "values"]


def values(
    con: duckdb.DuckDBPyConnection, series: str, *, level: float | None = None, as_of: str | None = None
) -> alt.LayerChart:
    """Where a series has been: its values, the window's edge, corrections, and a level if one is named."""
    found = past.past(*_known(con, series, as_of))
    if found is None:
        raise UsageError(f"{series!r} has no values yet.")
    return past.draw(found, PLAIN, level)


def said(
    con: duckdb.DuckDBPyConnection, series: str, quantity: str = "volatility", *, as_of: str | None = None
) -> alt.LayerChart:
    """What was said of each window, and is said now, of `volatility`, `half_life` or `drift`."""
    if quantity not in statements.QUANTITIES:
        raise UsageError(f"there is no chart of {quantity!r}; there are {', '.join(statements.QUANTITIES)}.")
    found = statements.statements(*_known(con, series, as_of))
    shown = statements.said(found, quantity) if found else None
    if shown is None:
        raise UsageError(f"nothing was said of the {quantity.replace('_', '-')} of {series!r}.")
    return statements.draw(shown, PLAIN)


def models(con: duckdb.DuckDBPyConnection, series: str, *, as_of: str | None = None) -> alt.LayerChart:
    """The weight of each model on each window."""
    found = weights.weights(*_known(con, series, as_of))
    if found is None:
        raise UsageError(f"{series!r} has not been estimated yet; put it into the plan and refresh.")
    return weights.draw(found, PLAIN)


def _known(con: duckdb.DuckDBPyConnection, series: str, as_of: str | None) -> tuple[Known, dict[str, Any]]:
    book = known_on(con, as_of)
    row = one_row(book, series)
    if row is None:
        raise UsageError(f"the book knows no series {series!r}.")
    return book, row
