"""Whatever is changed in a book outside driftbook, `verify` finds it and says where."""

import json
import shutil

import duckdb
import pytest
from made_series import days, wave

from driftbook import store
from driftbook.estimators import MODELS
from driftbook.store import digest, lock, runs
from driftbook.store.cli import app
from driftbook.store.errors import BookError
from driftbook.store.migrate import newest
from driftbook.store.tables import columns_at, tracked_tables

# what forget notes is tampered with in test_forget
TABLES = {table.name: table for table in tracked_tables() if table.name != "forgotten_leaf"}
CLOSING = [name for name, table in TABLES.items() if table.closes]
# one value of a type made another, as little as the type allows
NUDGE = {
    "DOUBLE": "coalesce(nextafter({0}, 'inf'::double), 0.5)",
    "INTEGER": "coalesce({0} + 1, 0)",
    "BIGINT": "coalesce({0} + 1, 0)",
    "VARCHAR": "coalesce({0} || ' ', '')",
    "BOOLEAN": "not coalesce({0}, false)",
    "TIMESTAMP": "{0} + interval 1 microsecond",
    "TIMESTAMP WITH TIME ZONE": "{0} + interval 1 microsecond",
}


def tamper(book, *statements):
    """Runs statements with plain DuckDB, as somebody would who does not have driftbook; each must change something."""
    with duckdb.connect(book) as con:
        for sql in statements:
            changed = con.execute(sql).fetchall()
            assert changed != [(0,)], f"changes nothing: {sql}"


def findings(book):
    before = book.read_bytes()
    found = store.verify(book).findings
    assert book.read_bytes() == before
    return found


def found_at(book):
    """(table, series, run) of every finding."""
    return {(finding.table_name, finding.series, finding.run_id) for finding in findings(book)}


def ask(book, sql):
    with duckdb.connect(book, read_only=True) as con:
        return con.execute(sql).fetchall()


def a_row(book, table, where="true"):
    """The rowid, run_from and series of one row in the middle of a table."""
    series = (
        "(select s.series from base.series s where s.series_id = t.series_id)" if TABLES[table].by_series else "null"
    )
    sql = f"select t.rowid, t.run_from, {series} from base.{table} t where {where} order by t.rowid"
    rows = ask(book, sql)
    return rows[len(rows) // 2]


# an untouched book


def test_an_untouched_book_is_whole(filled):
    seen = store.verify(filled)
    assert seen.findings == []
    (counts,) = ask(filled, "select max(run_id), (select count(*) from base.leaf), sum(rows_written) from base.run")
    assert (seen.runs, seen.leaves, seen.rows) == counts
    assert seen.last_digest == ask(filled, "select digest from base.run order by run_id desc limit 1")[0][0]


def test_the_book_that_is_tampered_with_has_something_in_every_table(filled):
    """Else a parametrised test below would pass without having looked."""
    for table in TABLES:
        assert ask(filled, f"select count(*) > 0 from base.{table}") == [(True,)]
    closed = {name for name in CLOSING if ask(filled, f"select count(run_to) > 0 from base.{name}") == [(True,)]}
    assert closed == set(CLOSING) - {"model_revision"}


def test_reading_and_rewriting_a_book_with_plain_duckdb_is_no_difference(filled):
    with duckdb.connect(filled) as con:
        con.execute("create table t as select 1")
        con.execute("drop table t")
        con.execute("checkpoint")
    assert findings(filled) == []


# rows


def columns():
    """Every column of every table; of the models' tables, which are of one make, those of one and a few of the rest."""
    of_the_rest = {"lookback", "loglik", "status"}
    alike = set(MODELS) - {"ou"}
    return [
        (table, column)
        for table in TABLES
        for column in columns_at(newest())[table]
        if table not in alike or column in of_the_rest
    ]


@pytest.mark.parametrize(("table", "column"), columns())
def test_a_changed_value_is_found(filled, table, column):
    """In any column of any table, however little it changed, by table, series and run."""
    rowid, run, series = a_row(filled, table)
    ((kind,),) = ask(
        filled,
        "select data_type from information_schema.columns "
        f"where table_schema = 'base' and table_name = '{table}' and column_name = '{column}'",
    )
    tamper(filled, f"update base.{table} set {column} = {NUDGE[kind].format(column)} where rowid = {rowid}")
    if (table, column) in {("series", "series"), ("series", "series_id")}:
        series = dict(ask(filled, "select rowid, series from base.series")).get(rowid)
    places = found_at(filled)
    assert (table, series, run) in places or (column == "series_id" and (table, run) in {(t, r) for t, _, r in places})


@pytest.mark.parametrize(
    ("table", "column"), [("ou", "kappa_lower"), ("setting", "periods_per_year"), ("refused_row", "name")]
)
def test_a_value_that_was_erased_is_found(filled, table, column):
    rowid, run, series = a_row(filled, table, f"{column} is not null")
    tamper(filled, f"update base.{table} set {column} = null where rowid = {rowid}")
    assert (table, series, run) in found_at(filled)


@pytest.mark.parametrize("table", TABLES)
def test_a_removed_row_is_found(filled, table):
    rowid, run, series = a_row(filled, table)
    tamper(filled, f"delete from base.{table} where rowid = {rowid}")
    if table == "series":
        series = f"number {ask(filled, f'select {rowid} + 1')[0][0]}"
    assert (table, series, run) in found_at(filled)


@pytest.mark.parametrize("table", TABLES)
def test_a_row_that_stands_there_twice_is_found(filled, table):
    rowid, run, series = a_row(filled, table)
    tamper(filled, f"insert into base.{table} from base.{table} where rowid = {rowid}")
    assert (table, series, run) in found_at(filled)


@pytest.mark.parametrize("table", TABLES)
def test_a_row_that_no_run_wrote_is_found(filled, table):
    """Also when it claims to be of a run that the book does not have."""
    rowid, _, _ = a_row(filled, table)
    tamper(
        filled, f"insert into base.{table} select * replace (99 as run_from) from base.{table} where rowid = {rowid}"
    )
    assert (table, 99) in {(name, run) for name, _, run in found_at(filled)}


@pytest.mark.parametrize("table", CLOSING)
def test_an_open_row_that_was_closed_is_found(filled, table):
    """By the run that is said to have closed it."""
    rowid, _, series = a_row(filled, table, "run_to is null")
    tamper(filled, f"update base.{table} set run_to = 6 where rowid = {rowid}")
    assert (table, series, 6) in found_at(filled)


@pytest.mark.parametrize("table", CLOSING)
def test_an_open_row_that_was_closed_by_a_run_to_come_is_found(filled, table):
    rowid, _, series = a_row(filled, table, "run_to is null")
    tamper(filled, f"update base.{table} set run_to = 99 where rowid = {rowid}")
    assert (table, series, 99) in found_at(filled)


@pytest.mark.parametrize("table", [name for name in CLOSING if name != "model_revision"])
def test_a_closed_row_that_was_reopened_is_found(filled, table):
    """By the run that had closed it."""
    rowid, _, series = a_row(filled, table, "run_to is not null")
    ((run_to,),) = ask(filled, f"select run_to from base.{table} where rowid = {rowid}")
    tamper(filled, f"update base.{table} set run_to = null where rowid = {rowid}")
    assert (table, series, run_to) in found_at(filled)


@pytest.mark.parametrize("table", [name for name in CLOSING if name != "model_revision"])
def test_a_row_that_was_closed_by_another_run_is_found(filled, table):
    rowid, _, series = a_row(filled, table, "run_to is not null")
    ((run_to,),) = ask(filled, f"select run_to from base.{table} where rowid = {rowid}")
    tamper(filled, f"update base.{table} set run_to = {6 if run_to < 6 else 5} where rowid = {rowid}")
    assert (table, series, run_to) in found_at(filled)


def pairs(book, table, same_run):
    """Rowids of a closed version and one in force of the same subject."""
    subject = " and ".join(f"a.{name} = b.{name}" for name in TABLES[table].subject) or "true"
    sql = f"select a.rowid, b.rowid, a.run_to from base.{table} a join base.{table} b on {subject} "
    return ask(
        book, sql + f"where a.run_to is not null and b.run_to is null and (a.run_from = b.run_from) = {same_run}"
    )


@pytest.mark.parametrize(
    ("table", "same_run"),
    [
        ("observation", False),
        ("observation", True),
        ("ou", False),
        ("plan", False),
        ("setting", False),
        ("setting", True),
    ],
)
def test_an_exchange_of_which_of_two_versions_is_closed_is_found(filled, table, same_run):
    """Also when both are of the same run, so that only their place in it tells them apart."""
    closed, in_force, run_to = pairs(filled, table, same_run)[0]
    tamper(
        filled,
        f"update base.{table} set run_to = null where rowid = {closed}",
        f"update base.{table} set run_to = {run_to} where rowid = {in_force}",
    )
    assert (table, run_to) in {(name, run) for name, _, run in found_at(filled)}


@pytest.mark.parametrize("table", ["observation", "ou"])
def test_an_exchange_of_two_values_is_found(filled, table):
    """Two rows of one series and run, each with the other's number."""
    column = {"observation": "value", "ou": "kappa"}[table]
    rows = ask(filled, f"select rowid, {column} from base.{table} where series_id = 1 and run_from = 1 limit 2")
    (one, first), (two, second) = rows
    tamper(
        filled,
        f"update base.{table} set {column} = '{second!r}'::double where rowid = {one}",
        f"update base.{table} set {column} = '{first!r}'::double where rowid = {two}",
    )
    assert found_at(filled) == {(table, "pellets_fob", 1)}


def test_rows_in_another_order_are_no_difference(filled):
    """What is proven is the rows, not where they lie."""
    tamper(
        filled,
        "create temp table rows as from base.observation order by value",
        "delete from base.observation",
        "insert into base.observation from rows",
    )
    assert findings(filled) == []


def test_a_changed_value_is_told_once_and_in_a_sentence(filled):
    tamper(filled, "update base.observation set value = 1.5 where series_id = 2 and observed_at = '2024-01-03'")
    (finding,) = findings(filled)
    assert (finding.table_name, finding.series, finding.run_id) == ("observation", "power_da", 1)
    assert finding.sentence == (
        "observation, series 'power_da', run 1: has the right count of rows (24 and 0 closed) but other contents."
    )


def test_two_versions_in_force_at_once_are_told(filled):
    """Beside the broken digest, since whoever reads the row would get two answers."""
    rowid, run, series = a_row(filled, "ou", "run_to is null")
    tamper(filled, f"insert into base.ou from base.ou where rowid = {rowid}")
    sentences = [finding.sentence for finding in findings(filled)]
    assert f"ou, series {series!r}, run {run}: 1 rows have another version in force at the same time." in sentences


# runs and leaves


@pytest.mark.parametrize("column", [name for name in columns_at(newest())["run"] if name != "run_id"])
def test_a_changed_column_of_a_run_is_found(filled, column):
    ((kind,),) = ask(
        filled,
        "select data_type from information_schema.columns "
        f"where table_schema = 'base' and table_name = 'run' and column_name = '{column}'",
    )
    tamper(filled, f"update base.run set {column} = {NUDGE[kind].format(column)} where run_id = 3")
    assert ("run", None, 3) in found_at(filled)


@pytest.mark.parametrize("column", columns_at(newest())["leaf"])
def test_a_changed_column_of_a_leaf_is_found(filled, column):
    """By the table, series and run that it is about."""
    ((kind,),) = ask(
        filled,
        "select data_type from information_schema.columns "
        f"where table_schema = 'base' and table_name = 'leaf' and column_name = '{column}'",
    )
    tamper(
        filled,
        f"update base.leaf set {column} = {NUDGE[kind].format(column)} "
        "where run_id = 3 and table_name = 'observation' and series_id = 1",
    )
    places = found_at(filled)
    assert ("observation", "pellets_fob", 3) in places
    assert ("run", None, 3) in places


@pytest.mark.parametrize("migration", [-1, 0, 1, 99])
def test_a_run_of_another_migration_is_found(filled, migration):
    tamper(filled, f"update base.run set migration = {migration} where run_id = 3")
    assert ("run", None, 3) in found_at(filled)


def test_a_removed_leaf_is_found(filled):
    tamper(filled, "delete from base.leaf where run_id = 3 and table_name = 'observation' and series_id = 2")
    assert {("observation", "power_da", 3), ("run", None, 3)} <= found_at(filled)


def test_an_added_leaf_is_found(filled):
    """One more of the same, or one about rows that are not there."""
    copy = filled.with_name("copy.duckdb")
    shutil.copyfile(filled, copy)
    of_run_3 = "from base.leaf where run_id = 3 and table_name = 'observation' and series_id = 2"
    tamper(filled, f"insert into base.leaf {of_run_3}")
    assert found_at(filled) == {("run", None, 3)}
    tamper(copy, f"insert into base.leaf select * replace (3 as series_id) {of_run_3}")
    assert found_at(copy) == {("observation", "peg", 3), ("run", None, 3)}


def test_a_removed_run_is_found(filled):
    """With all that it wrote and closed, from the middle of the chain."""
    statements = ["delete from base.run where run_id = 2", "delete from base.leaf where run_id = 2"]
    statements += ["delete from base.observation where run_from = 2", "delete from base.intake where run_from = 2"]
    tamper(filled, *statements)
    assert ("run", None, 3) in found_at(filled)


def test_a_run_that_stands_there_twice_is_found(filled):
    tamper(filled, "insert into base.run from base.run where run_id = 3")
    assert ("run", None, 3) in found_at(filled)


def test_runs_whose_moments_do_not_follow_each_other_are_found(filled):
    tamper(filled, "update base.run set moment = moment - interval 9 day where run_id = 4")
    assert "run 4: its number or its moment does not follow the run before it." in {
        finding.sentence for finding in findings(filled)
    }


def test_the_last_run_cannot_be_taken_back_unnoticed_by_its_row_and_leaves(filled):
    tamper(filled, "delete from base.run where run_id = 6", "delete from base.leaf where run_id = 6")
    assert {("observation", "pellets_fob", 6), ("ou", "pellets_fob", 6), ("intake", None, 6)} <= found_at(filled)


def undo_last_run(book, run):
    """Takes the last run back with every trace in the file."""
    with duckdb.connect(book) as con:
        for name, table in TABLES.items():
            con.execute(f"delete from base.{name} where run_from = {run}")
            if table.closes:
                con.execute(f"update base.{name} set run_to = null where run_to = {run}")
        con.execute(f"delete from base.leaf where run_id = {run}")
        con.execute(f"delete from base.run where run_id = {run}")


def test_a_last_run_taken_back_with_every_trace_leaves_an_older_book(filled):
    """Within the file that is a whole book; the digest that somebody noted of it is the one thing that tells."""
    noted = store.verify(filled).last_digest
    ((before,),) = ask(filled, "select digest from base.run where run_id = 5")
    undo_last_run(filled, 6)
    seen = store.verify(filled)
    assert (seen.runs, seen.findings) == (5, [])
    assert seen.last_digest == before != noted


def test_a_last_run_taken_back_with_every_trace_is_told_by_the_lock_file(filled):
    """Where the lock file still notes a later run than the book has."""
    with store.writing(filled) as work:
        work.ingest(days("pellets_fob", wave(1), 60), name="seventh")
    assert lock.last_look(filled).found == "run 7"
    undo_last_run(filled, 7)
    assert ("run", None, 7) in found_at(filled)


def forge(book):
    """Changes a value and makes the leaf of its run fit."""
    with duckdb.connect(book) as con:
        con.execute("set TimeZone = 'UTC'")
        con.execute("update base.observation set value = 1.5 where series_id = 2 and observed_at = '2024-01-03'")
        columns = columns_at(newest())["observation"]
        (leaf,) = [
            one for one in digest.leaves(con, TABLES["observation"], columns, (1, 1), newest()) if one.series_id == 2
        ]
        con.execute(
            "update base.leaf set sha256 = ? where run_id = 1 and table_name = 'observation' and series_id = 2",
            [leaf.sha256],
        )


def chain_again(con, run_id):
    """Gives a run the digest that fits what stands there now."""
    digest_now = runs.chain(con, run_id, columns_at(newest())["run"])
    con.execute("update base.run set digest = ? where run_id = ?", [digest_now, run_id])


def test_a_leaf_that_was_made_to_fit_is_found_in_the_chain(filled):
    forge(filled)
    assert found_at(filled) == {("run", None, 1)}


def test_a_run_that_was_made_to_fit_is_found_in_the_next_one(filled):
    forge(filled)
    with duckdb.connect(filled) as con:
        con.execute("set TimeZone = 'UTC'")
        chain_again(con, 1)
    assert found_at(filled) == {("run", None, 2)}


def test_a_book_forged_from_end_to_end_has_another_last_digest(filled):
    noted = store.verify(filled).last_digest
    forge(filled)
    with duckdb.connect(filled) as con:
        con.execute("set TimeZone = 'UTC'")
        for run_id in range(1, 7):
            chain_again(con, run_id)
    seen = store.verify(filled)
    assert seen.findings == []
    assert seen.last_digest != noted


def test_an_intake_that_does_not_add_up_is_told(filled):
    tamper(filled, "update base.intake set rows_read = rows_read + 1 where intake_id = 2")
    found = {finding.sentence: finding for finding in findings(filled)}
    finding = found["intake 2, run 2: rows read are not new + revised + same + refused."]
    assert (finding.table_name, finding.run_id) == ("intake", 2)
    assert ("intake", None, 2) in {(one.table_name, one.series, one.run_id) for one in found.values()}


# schema


SCHEMA = {
    "a view dropped": ("drop view main.ou", "main.ou is missing"),
    "a view changed": (
        "create or replace view main.ou as select * from base.ou_rows where run_to is null and status = 'ok'",
        "main.ou is defined differently",
    ),
    "a view of versions changed": (
        "create or replace view versions.plan as select 1 as plan_sha256",
        "versions.plan is defined differently",
    ),
    "a private view changed": (
        "create or replace view base.observation_rows as select s.series, o.observed_at, o.value + 1 as value, o.open, "
        "o.high, o.low, o.volume, o.intake_id, o.run_from, o.run_to "
        "from base.observation o join base.series s on s.series_id = o.series_id",
        "base.observation_rows is defined differently",
    ),
    "a macro dropped": ("drop macro table main.ou_at_run", "main.ou_at_run is missing"),
    "a table macro changed": (
        "create or replace macro main.ou_at_run(run) as table select * from base.ou_rows where run_from <= run",
        "main.ou_at_run is defined differently",
    ),
    "a scalar macro changed": ("create or replace macro base.run_at(us) as 1", "base.run_at is defined differently"),
    "a macro given a second form": (
        "create or replace macro main.plan_at_run(run) as table (select x.* exclude (run_from, run_to), x.run_from as "
        "run_id from base.plan_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run)), "
        "(run, other) as table (select 1 as a)",
        "main.plan_at_run is defined differently",
    ),
    "a comment on a view": ("comment on view main.ou is 'other'", "main.ou is defined differently"),
    "a comment on a column": ("comment on column main.ou.kappa is 'other'", "main.ou.kappa is defined differently"),
    "a comment taken away": ("comment on column main.ou.kappa is null", "main.ou.kappa is defined differently"),
    "a comment on a macro": ("comment on macro table main.ou_at_run is 'x'", "main.ou_at_run is defined differently"),
    "a table added": ("create table main.t (a integer)", "main.t is in the book"),
    "a view added": ("create view main.v as select 1 as a", "main.v is in the book"),
    "a macro added": ("create macro main.m(a) as a + 1", "main.m is in the book"),
    "a column added": ("alter table base.ou add column note varchar", "base.ou is defined differently"),
    "a column dropped": ("alter table base.ou drop column kurtosis", "base.ou is defined differently"),
    "a type changed": (
        "alter table base.observation alter take type bigint",
        "base.observation is defined differently",
    ),
    "a table dropped": ("drop table base.leaf", "base.leaf is missing"),
    "the table of runs dropped": ("drop table base.run", "base.run is missing"),
    "a table of numbers dropped": ("drop table base.ou", "base.ou is missing"),
}


@pytest.mark.parametrize("case", SCHEMA)
def test_a_changed_schema_is_found(filled, case):
    sql, words = SCHEMA[case]
    tamper(filled, sql)
    sentences = [finding.sentence for finding in findings(filled)]
    assert any(words in sentence for sentence in sentences), sentences


@pytest.mark.parametrize(
    "sql",
    [
        "update base.migration set name = 'other' where number = 2",
        "update base.migration set sha256 = 'other' where number = 2",
        "delete from base.migration where number = 2",
        "delete from base.migration where number = (select max(number) from base.migration)",
        "insert into base.migration from base.migration where number = 2",
        "insert into base.migration select max(number) + 1, 'other', '' from base.migration",
    ],
)
def test_a_changed_record_of_migrations_is_found(filled, sql):
    """Or the book is refused outright, with a sentence that says that it is not of this driftbook's schema."""
    tamper(filled, sql)
    try:
        sentences = [finding.sentence for finding in store.verify(filled).findings]
    except BookError as error:
        sentences = [str(error)]
    assert any("migration" in sentence or "schema" in sentence for sentence in sentences), sentences


def test_a_truncated_file_is_no_book(filled):
    content = filled.read_bytes()
    filled.write_bytes(content[: len(content) // 2])
    with pytest.raises(BookError):
        store.verify(filled)


# the command


def test_the_command_ends_with_0_for_a_whole_book(filled, capsys):
    assert app.run(["verify", str(filled)]) == 0
    assert capsys.readouterr().out.splitlines()[-1] == "The book is whole."


def test_the_command_ends_with_4_and_says_where(filled, capsys):
    tamper(filled, "update base.observation set value = 1.5 where series_id = 2 and observed_at = '2024-01-03'")
    assert app.run(["verify", str(filled)]) == 4
    assert "observation, series 'power_da', run 1: " in capsys.readouterr().out
    assert app.run(["verify", str(filled), "--quiet"]) == 4
    assert "observation, series 'power_da', run 1: " in capsys.readouterr().out


def test_the_command_tells_findings_as_json(filled, capsys):
    tamper(filled, "update base.observation set value = 1.5 where series_id = 2 and observed_at = '2024-01-03'")
    assert app.run(["verify", str(filled), "--json"]) == 4
    (finding,) = json.loads(capsys.readouterr().out)["findings"]
    assert (finding["table_name"], finding["series"], finding["run_id"]) == ("observation", "power_da", 1)
