"""The schema of a model, from what the model says of itself.

`python -m driftbook.store.model_schema NAME` prints the migration for a registered model.
"""

from __future__ import annotations

import sys

from driftbook.estimators import MODELS, Model

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
VERSIONED = (
    ("run_from", "run from which the row is in force"),
    ("run_to", "run from which it is no longer in force; NULL: still in force"),
    ("in_force_from", "moment of run_from"),
    ("in_force_to", "moment of run_to"),
)
_SQL_TYPES = {"double": "double", "boolean": "boolean"}


def stored_columns(model: Model) -> list[tuple[str, str]]:
    """The (name, SQL type) of the columns that are stored; the others are formulas of these, in the view."""
    return [(column.name, _SQL_TYPES[column.kind]) for column in model.stored]


def migration_text(model: Model) -> str:
    """The migration that gives a book the table, views and macros of a model."""
    return "\n".join([*_table(model), *_rows_view(model), *_readers(model), *_comments(model)]) + "\n"


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


def _readers(model: Model) -> list[str]:
    name, rows = model.name, f"base.{model.name}_rows"
    reader = "select x.* exclude (run_from, run_to), x.run_from as run_id"
    return [
        f"create view main.{name} as",
        f"{reader} from {rows} x where x.run_to is null;",
        "",
        f"create macro main.{name}_at_run(run) as table",
        f"{reader} from {rows} x",
        "where x.run_from <= run and (x.run_to is null or x.run_to > run);",
        "",
        f"create macro main.{name}_as_of(moment) as table",
        "with k as (select base.run_at(base.moment_us(moment)) as run_id)",
        f"{reader} from {rows} x",
        "where x.run_from <= (select k.run_id from k)",
        "  and (x.run_to is null or x.run_to > (select k.run_id from k));",
        "",
        f"create view versions.{name} as",
        "select x.*, f.moment as in_force_from, t.moment as in_force_to",
        f"from {rows} x",
        "join base.run f on f.run_id = x.run_from",
        "left join base.run t on t.run_id = x.run_to;",
        "",
    ]


def _comments(model: Model) -> list[str]:
    numbers = [(column.name, f"{column.meaning} [{column.unit or '1'}]") for column in model.columns]
    described = [*IDENTITY, *numbers, *_CLOSING]
    name = model.name
    return [
        f"comment on view main.{name} is '{_quoted(model.equation)}: estimates in force, one row per fit';",
        *column_comments(f"main.{name}", [*described, ("run_id", "run that wrote the row")]),
        f"comment on view versions.{name} is '{_quoted(model.equation)}: every version of every estimate';",
        *column_comments(f"versions.{name}", [*described, *VERSIONED]),
        f"comment on macro table main.{name}_at_run is 'the view {name} as it was after a run: {name}_at_run(41)';",
        f"comment on macro table main.{name}_as_of is "
        f"'the view {name} as it was known at a moment: {name}_as_of(''2026-01-31'')';",
    ]


def column_comments(view: str, described: list[tuple[str, str]]) -> list[str]:
    """The statements that put the meaning of a view's columns beside them."""
    return [f"comment on column {view}.{column} is '{_quoted(meaning)}';" for column, meaning in described]


def _quoted(text: str) -> str:
    return text.replace("'", "''")


if __name__ == "__main__":
    print(migration_text(MODELS[sys.argv[1]]), end="")
