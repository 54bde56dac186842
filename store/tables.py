"""The tables that runs are proven over: what identifies a row's version, and whether rows are closed."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import duckdb

from driftbook.estimators import MODELS
from driftbook.store import migrate
from driftbook.store.model_schema import settings_table
from driftbook.store.sql import query


@dataclass(frozen=True)
class Tracked:
    """A base table with run_from and, if its rows are closed, run_to.

    `subject` is what may be in force only once at a time; with run_from and `also` it identifies one version.
    """

    name: str
    subject: tuple[str, ...]
    by_series: bool = True
    closes: bool = True
    also: tuple[str, ...] = ()

    @property
    def key(self) -> tuple[str, ...]:
        """The columns that identify one version of a row, in digest order."""
        return (*self.subject, "run_from", *self.also)


BOOK_TABLES = (
    Tracked("series", ("series_id",), closes=False),
    Tracked("setting", ("series_id",), also=("planned",)),
    Tracked("latest", ("series_id",)),
    Tracked("alias", ("name",), also=("series_id",)),
    Tracked("forgotten_leaf", ("run_id", "table_name", "series_id"), by_series=False, closes=False),
    Tracked("intake", ("intake_id",), by_series=False, closes=False),
    Tracked("observation", ("series_id", "observed_at"), also=("take",)),
    Tracked("refused_row", ("intake_id", "line", "cell"), by_series=False, also=("reason",)),
    Tracked("plan", (), by_series=False, also=("plan_sha256",)),
    Tracked("model_revision", ("model",), by_series=False),
)


def tracked_tables() -> tuple[Tracked, ...]:
    """All tracked tables: those of the book, and of each registered model its estimates, and settings if it has any."""
    models = (Tracked(name, ("series_id", "lookback", "window_end")) for name in MODELS)
    settings = (
        Tracked(settings_table(model), ("series_id", "lookback"), closes=False)
        for model in MODELS.values()
        if model.settings
    )
    return (*BOOK_TABLES, *models, *settings)


@cache
def columns_at(migration: int) -> dict[str, list[str]]:
    """The columns of every base table at a migration, without run_to, in their order."""
    with duckdb.connect(":memory:") as con:
        for step in migrate.all_migrations():
            if step.number <= migration:
                migrate.apply(con, step)
        return columns_of(con)


def columns_of(con: duckdb.DuckDBPyConnection) -> dict[str, list[str]]:
    """The columns that every base table of the default catalog has, without run_to, in their order."""
    rows = con.execute(query("columns_of_base")).fetchall()
    return {table: [name for name in columns if name != "run_to"] for table, columns in rows}
