"""The schema is only what the migrations say, and a review sees it change."""

import re
from importlib.resources import files
from pathlib import Path

import duckdb
import pytest
from schema_dump import dump

from driftbook.estimators import MODELS
from driftbook.store import dictionary_schema, fit_schema, migrate, model_schema
from driftbook.store.errors import BookError

GOLDEN = Path(__file__).with_name("schema.sql")


def test_all_migrations_on_an_empty_file_give_the_schema_on_record(tmp_path):
    """After a wanted change: python tests/store/schema_dump.py > tests/store/schema.sql."""
    assert dump(tmp_path / "fresh.duckdb") == GOLDEN.read_text(encoding="utf-8")


def test_migrations_are_numbered_from_one_without_a_gap():
    names = sorted(entry.name for entry in files("driftbook.migrations").iterdir() if entry.name.endswith(".sql"))
    assert all(re.fullmatch(r"\d{4}_[a-z_]+\.sql", name) for name in names)
    assert [migration.number for migration in migrate.all_migrations()] == list(range(1, len(names) + 1))


@pytest.mark.parametrize("name", MODELS)
def test_a_models_migration_is_what_the_model_says_of_itself(name):
    (migration,) = [step for step in migrate.all_migrations() if step.name == name]
    assert migration.text == model_schema.migration_text(MODELS[name])


@pytest.mark.parametrize(
    ("name", "printed"), [("fit", fit_schema.migration_text), ("dictionary", dictionary_schema.migration_text)]
)
def test_the_newest_migration_over_all_models_is_what_the_registry_says(name, printed):
    *_, newest = [step for step in migrate.all_migrations() if step.name == name]
    assert newest.text == printed()
    assert newest.number > max(step.number for step in migrate.all_migrations() if step.name in MODELS)


def test_a_failing_migration_leaves_nothing_behind():
    broken = migrate.Migration(1, "broken", "create schema base; create table base.t (a integer); select no_such;")
    with duckdb.connect() as con:
        with pytest.raises(duckdb.Error):
            migrate.apply(con, broken)
        assert con.execute("select count(*) from duckdb_tables()").fetchone() == (0,)


def test_a_migration_with_a_syntax_error_at_its_end_changes_nothing():
    broken = migrate.Migration(1, "broken", "create schema base; create table base.t (a integer); selec 1;")
    with duckdb.connect() as con:
        with pytest.raises(duckdb.Error):
            migrate.apply(con, broken)
        assert con.execute("select count(*) from duckdb_tables()").fetchone() == (0,)


@pytest.mark.parametrize("word", ["commit", "begin transaction", "rollback"])
def test_a_migration_that_would_escape_its_transaction_is_refused(word):
    with duckdb.connect() as con, pytest.raises(BookError, match="transaction statement"):
        migrate.apply(con, migrate.Migration(1, "escapes", f"create schema base; {word};"))


def test_a_book_from_a_newer_driftbook_is_refused_with_a_sentence():
    done = [(step.number, step.sha256) for step in migrate.all_migrations()]
    with pytest.raises(BookError, match=r"desk\.duckdb was written by a newer driftbook \(schema 9001"):
        migrate.check_known([*done, (9001, "")], "desk.duckdb")


def test_a_book_whose_migration_had_another_text_is_refused():
    with pytest.raises(BookError, match="another text of migration 0001"):
        migrate.check_known([(1, "0" * 64)], "desk.duckdb")
