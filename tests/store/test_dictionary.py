"""The view `dictionary` lists what readers have, and every example in it runs."""

import duckdb
import pytest

from driftbook import store
from driftbook.store.demo import run_demo


@pytest.fixture(scope="module")
def island(tmp_path_factory):
    folder = tmp_path_factory.mktemp("dictionary") / "island"
    run_demo(folder, lambda _: None, lambda _: "", lambda _: "")
    return folder / "island.duckdb"


def test_every_example_runs(island):
    with store.connect(island) as con:
        examples = con.execute("select name, example from dictionary where example is not null").fetchall()
        assert len(examples) > 70
        for name, example in examples:
            assert con.execute(example).description, name


def test_every_view_column_macro_and_function_that_readers_have_is_listed(island):
    with store.connect(island) as con:
        listed = {name for (name,) in con.execute("select distinct name from dictionary").fetchall()}
        columns = set(con.execute("select name, column_name from dictionary where column_name is not null").fetchall())
    with duckdb.connect(island, read_only=True) as plain:
        public = "database_name = current_database() and schema_name = 'main' and not internal"
        views = {name for (name,) in plain.execute(f"select view_name from duckdb_views() where {public}").fetchall()}
        macros = {
            name for (name,) in plain.execute(f"select function_name from duckdb_functions() where {public}").fetchall()
        }
        there = set(
            plain.execute(f"select table_name, column_name from duckdb_columns() where {public}").fetchall()
        ) - {("dictionary", one) for one in ("name", "column_name", "unit", "meaning", "example")}
    assert views | macros <= listed
    assert there <= columns


def test_a_unit_stands_apart_from_the_meaning(island):
    with store.connect(island) as con:
        found = con.execute(
            "select unit, meaning from dictionary where name = 'ou' and column_name = 'sigma'"
        ).fetchall()
    assert found == [("x/√t", "Volatility of the driving noise.")]
