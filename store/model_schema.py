"""The schema of a model, from what the model says of itself.

`python -m driftbook.store.model_schema NAME` prints the migration for a registered model.
"""

from __future__ import annotations

import sys

from driftbook.estimators import MODELS, Model
from driftbook.store.reader_schema import comments, readers, versions

IDENTITY = (
    ("series", "name of the series"),
    ("lookback", "steps in the window; 0: all"),
    ("window_start", "time of the window's first observation, UTC"),
    ("window_end", "time of the window's last observation, UTC"),
    ("n", "steps used"),
)
_CLOSING = (
    ("status", "what became of the fit, in a word"),
    ("revision", "revision of the model that computed the row"),
)
_SQL_TYPES = {"double": "double", "boolean": "boolean", "word": "varchar"}


def stored_columns(model: Model) -> list[tuple[str, str]]:
    """The (name, SQL type) of the columns that are stored; the others are formulas of these, in the view."""
    return [(column.name, _SQL_TYPES[column.kind]) for column in model.stored]


def migration_text(model: Model) -> str:
    """The migration that gives a book the table, views and macros of a model."""
    given = [*readers(model.name), *versions(model.name), *_comments(model)]
    return "\n".join([*_table(model), *_settings_table(model), *_rows_view(model), *given]) + "\n"


def settings_table(model: Model) -> str:
    """The name of the table that keeps a model's settings; only a model that has some has it."""
    return f"{model.name}_setting"


def _table(model: Model) -> list[str]:
    columns = [f"  {name} {sql_type}," for name, sql_type in stored_columns(model)]
    return [
        f"-- {model.name}: {model.equation}. Printed by `python -m driftbook.store.model_schema {model.name}`.",
        f"create table base.{model.name} (",
        "  series_id integer not null,",
        "  lookback integer not null,",
        "  window_start timestamp not null,",
        "  window_end timestamp not null,",
        "  n integer not null,",
        *columns,
        "  status varchar not null,",
        "  revision integer not null,",
        "  run_from integer not null,",
        "  run_to integer",
        ");",
        "",
    ]


def _settings_table(model: Model) -> list[str]:
    if not model.settings:
        return []
    names = " and ".join(setting.name for setting in model.settings)
    return [
        f"-- {names} of each series and lookback, from the first window that was fitted; they never change.",
        f"create table base.{settings_table(model)} (",
        "  series_id integer not null,",
        "  lookback integer not null,",
        *(f"  {setting.name} double not null," for setting in model.settings),
        "  run_from integer not null",
        ");",
        "",
    ]


def _rows_view(model: Model) -> list[str]:
    columns = [
        f"  {f'{column.sql} as {column.name}' if column.sql else f'm.{column.name}'}," for column in model.columns
    ]
    return [
        f"create view base.{model.name}_rows as",
        "select s.series, m.lookback, m.window_start, m.window_end, m.n,",
        *columns,
        "  m.status, m.revision, m.run_from, m.run_to",
        f"from base.{model.name} m",
        "join base.series s on s.series_id = m.series_id;",
        "",
    ]


def _comments(model: Model) -> list[str]:
    numbers = [(column.name, f"{column.meaning} [{column.unit or '1'}]") for column in model.columns]
    return comments(
        model.name,
        in_force=f"{model.equation}: estimates in force, one row per fit",
        every_version=f"{model.equation}: every version of every estimate",
        columns=[*IDENTITY, *numbers, *_CLOSING],
    )


if __name__ == "__main__":
    print(migration_text(MODELS[sys.argv[1]]), end="")
