"""What every versioned view gives its readers: what is in force, at a run, as of a moment, and every version.

The rows come from the private view base.<name>_rows, which ends with run_from and run_to.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable

VERSIONED = (
    ("run_from", "run from which the row is in force"),
    ("run_to", "run from which it is no longer in force; NULL: still in force"),
    ("in_force_from", "moment of run_from"),
    ("in_force_to", "moment of run_to"),
)


def plain(name: str, where: str) -> str:
    """A SELECT of the rows that a condition on x admits, with run_id for run_from."""
    return f"select x.* exclude (run_from, run_to), x.run_from as run_id from base.{name}_rows x where {where}"


def readers(name: str, select: Callable[[str, str], str] = plain) -> list[str]:
    """The view of what is in force, and the macros at a run and as of a moment; `select(name, condition)` is SQL."""
    as_of = "x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k))"
    return [
        f"create view main.{name} as",
        f"{select(name, 'x.run_to is null')};",
        "",
        f"create macro main.{name}_at_run(run) as table",
        f"{select(name, 'x.run_from <= run and (x.run_to is null or x.run_to > run)')};",
        "",
        f"create macro main.{name}_as_of(moment) as table",
        "with k as (select base.run_at(base.moment_us(moment)) as run_id)",
        f"{select(name, as_of)};",
        "",
    ]


def versions(name: str) -> list[str]:
    """The view of every version."""
    return [
        f"create view versions.{name} as",
        "select x.*, f.moment as in_force_from, t.moment as in_force_to",
        f"from base.{name}_rows x",
        "join base.run f on f.run_id = x.run_from",
        "left join base.run t on t.run_id = x.run_to;",
        "",
    ]


def replacing(sql: str) -> str:
    """Statements that make views and macros, as ones that also replace those that are there."""
    return sql.replace("create view ", "create or replace view ").replace("create macro ", "create or replace macro ")


def comments(name: str, *, in_force: str, every_version: str, columns: Iterable[tuple[str, str]]) -> list[str]:
    """What the views, their columns and the macros mean; `columns` without those that say which version it is."""
    described = list(columns)
    return [
        f"comment on view main.{name} is '{_quoted(in_force)}';",
        *_column_comments(f"main.{name}", [*described, ("run_id", "run that wrote the row")]),
        f"comment on view versions.{name} is '{_quoted(every_version)}';",
        *_column_comments(f"versions.{name}", [*described, *VERSIONED]),
        f"comment on macro table main.{name}_at_run is 'the view {name} as it was after a run: {name}_at_run(41)';",
        f"comment on macro table main.{name}_as_of is "
        f"'the view {name} as it was known at a moment: {name}_as_of(''2026-01-31'')';",
    ]


def _column_comments(view: str, described: Iterable[tuple[str, str]]) -> list[str]:
    return [f"comment on column {view}.{column} is '{_quoted(meaning)}';" for column, meaning in described]


def _quoted(text: str) -> str:
    return text.replace("'", "''")
