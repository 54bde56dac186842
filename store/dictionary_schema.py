"""The view `dictionary`: what every view, column, macro and function means, with an example that runs.

`python -m driftbook.store.dictionary_schema` prints the migration that fills it from the comments of the catalog and
from the list of functions; a later migration that adds views prints it again.
"""

from __future__ import annotations

from driftbook.estimators import MODELS, Model

_FROM_CATALOG = """insert into base.dictionary_entry
select c.table_name, c.column_name, nullif(regexp_extract(c.comment, '\\[([^\\]]*)\\]$', 1), ''),
  regexp_replace(c.comment, ' ?\\[[^\\]]*\\]$', ''), null
from duckdb_columns() c
where c.database_name = current_database() and c.schema_name = 'main' and c.comment is not null;

insert into base.dictionary_entry
select v.view_name, null, null, v.comment, 'from ' || v.view_name || ' limit 3'
from duckdb_views() v
where v.database_name = current_database() and v.schema_name = 'main' and v.comment is not null;

insert into base.dictionary_entry
select 'versions.' || v.view_name, null, null, v.comment, 'from versions.' || v.view_name || ' limit 3'
from duckdb_views() v
where v.database_name = current_database() and v.schema_name = 'versions' and v.comment is not null;

insert into base.dictionary_entry
select f.function_name, null, null, regexp_replace(f.comment, ': [a-z_]+\\(.*\\)$', ''),
  'from ' || regexp_extract(f.comment, ': ([a-z_]+\\(.*\\))$', 1)
from duckdb_functions() f
where f.database_name = current_database() and f.schema_name = 'main' and f.comment is not null;
"""
_HEAD = """-- dictionary: filled again, from the comments of the catalog and the list of functions.
-- Printed by `python -m driftbook.store.dictionary_schema`.
delete from base.dictionary_entry;

"""


def migration_text() -> str:
    """The migration that fills it, in place of what it held."""
    rows = ",\n".join(_row(*entry) for entry in _functions())
    return f"{_HEAD}{_FROM_CATALOG}\ninsert into base.dictionary_entry values\n{rows};\n"


def _functions() -> list[tuple[str, str, str]]:
    """The functions that a connection of driftbook has: name, meaning, example."""
    of_models = [entry for model in MODELS.values() for entry in _functions_of(model)]
    x = "select {0} from (select list(value order by observed_at) as x from observation group by series)"
    return [
        *of_models,
        ("realised_variance", "sum of squared returns", x.format("realised_variance(x)")),
        ("bipower_variation", "variance without what single jumps add", x.format("bipower_variation(x)")),
        (
            "window_fit",
            "estimates of one stored window, computed now from the data as known then; by default the latest window",
            "select w.* from (select min(series) as name from ou) s, window_fit(s.name, 'ou') w",
        ),
    ]


def _functions_of(model: Model) -> list[tuple[str, str, str]]:
    name = model.name
    lists = (
        "(select list(value order by observed_at) as x, list(observed_at order by observed_at) as t "
        "from observation group by series)"
    )
    given = (*model.settings, *model.parameters)
    values = ", ".join("1" for _ in given)
    parameters = ", ".join(one.name for one in given)
    return [
        (
            f"fit_{name}",
            f"{name} on a list of values: fit_{name}(x, dt)",
            f"select fit_{name}(x, 1 / 252) from {lists}",
        ),
        (
            f"fit_{name}_at",
            f"{name} on a list of values at times, Act/365: fit_{name}_at(t, x)",
            f"select fit_{name}_at(t, x) from {lists}",
        ),
        (
            f"rolling_{name}",
            f"{name} on every window of a list: rolling_{name}(x, dt, lookback)",
            f"select len(rolling_{name}(x, 1 / 252, 250)) from {lists}",
        ),
        (
            f"rolling_{name}_at",
            f"{name} on every window of a list of values at times: rolling_{name}_at(t, x, lookback)",
            f"select len(rolling_{name}_at(t, x, 250)) from {lists}",
        ),
        (
            f"loglik_{name}",
            f"log-likelihood of {name} at given parameters: loglik_{name}(x, dt, {parameters})",
            f"select loglik_{name}(x, 1 / 252, {values}) from {lists}",
        ),
    ]


def _row(name: str, meaning: str, example: str) -> str:
    return "  ({}, null, null, {}, {})".format(
        *(f"'{text.replace(chr(39), chr(39) * 2)}'" for text in (name, meaning, example))
    )


if __name__ == "__main__":
    print(migration_text(), end="")
