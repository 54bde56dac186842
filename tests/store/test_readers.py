"""Readers in other processes: never refused, never shown half a run, with or without driftbook."""

import json
import subprocess
import sys
from contextlib import ExitStack

import duckdb
import pytest
from made_series import days, plan_text, wave

from driftbook import store
from driftbook.store.swap import create

FIRST_LOT = 20
LOOKBACK = 8
SWAPS = 20
ADDING = store.Options(add_series=True)

# Counts in several statements what one connection sees, over and over, and once more after a line came in.
READER = """
import json, sys, threading
{import_and_define_connect}
stop = threading.Event()
threading.Thread(target=lambda: (sys.stdin.readline(), stop.set()), daemon=True).start()
print("ready", flush=True)
seen = []
ends = False
while not ends:
    ends = stop.is_set()
    con = connect(sys.argv[1])
    count = lambda sql: con.execute(sql).fetchone()[0]
    run = count("select max(run_id) from run")
    seen.append([
        run,
        count("select count(*) from observation"),
        count("select count(*) from ou"),
        count("select count(*) from versions.ou"),
        count("select max(run_id) from ou"),
        count(f"select count(*) from ou_at_run({{run}})"),
        count("select count(*) from ou_as_of((select max(moment) from run))"),
    ])
    con.close()
print(json.dumps(seen))
"""
WITH_DRIFTBOOK = "from driftbook.store import connect"
WITHOUT_DRIFTBOOK = "import duckdb\nconnect = lambda path: duckdb.connect(path, read_only=True)"


def expected(run):
    """What a reader that opened the book after a run must see, by the reader's columns."""
    observations = FIRST_LOT + run - 1
    estimates = observations - LOOKBACK
    return [run, observations, estimates, estimates, run, estimates, estimates]


def run_once(book, run):
    first, count = (0, FIRST_LOT) if run == 1 else (FIRST_LOT + run - 2, 1)
    with store.writing(book) as work:
        work.ingest(days("pellets_fob", wave(count, first=first), first), ADDING, name=f"day {run}")
        work.refresh(plan_text({"pellets_fob": [LOOKBACK]}))


def start_reader(stack, book, how):
    script = READER.format(import_and_define_connect=how)
    reader = stack.enter_context(
        subprocess.Popen(
            [sys.executable, "-c", script, book],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
    )
    stack.callback(reader.kill)
    assert reader.stdout.readline() == "ready\n"
    return reader


def test_readers_are_never_refused_and_never_see_half_a_run(tmp_path):
    """Three processes that open the book all the time while it is swapped, and one connection that stays open."""
    book = tmp_path / "desk.duckdb"
    create(book)
    run_once(book, 1)
    with ExitStack() as stack:
        old = stack.enter_context(store.connect(book))
        readers = [start_reader(stack, book, how) for how in (WITH_DRIFTBOOK, WITHOUT_DRIFTBOOK, WITHOUT_DRIFTBOOK)]
        for run in range(2, SWAPS + 2):
            run_once(book, run)
        for reader in readers:
            said, complaint = reader.communicate("\n", timeout=60)
            assert complaint == ""
            seen = json.loads(said)
            assert [row for row in seen if row != expected(row[0])] == []
            runs = [row[0] for row in seen]
            assert runs == sorted(runs)
            assert runs[-1] == SWAPS + 1
            assert len(set(runs)) >= 5
        assert old.execute("select max(run_id), (select count(*) from observation) from run").fetchall() == [
            (1, FIRST_LOT)
        ]


def relations(con):
    """What is promised to any DuckDB client: views, versions, and both macros of each versioned view."""
    listed = con.execute(
        "select view_name from duckdb_views() where schema_name = 'main' and not internal order by all"
    ).fetchall()
    versioned = con.execute(
        "select view_name from duckdb_views() where schema_name = 'versions' order by all"
    ).fetchall()
    views = [name for (name,) in listed]
    for (name,) in versioned:
        views += [
            f"versions.{name}",
            f"{name}_at_run(3)",
            f"{name}_as_of('2026-01-07')",
            f"{name}_as_of('2026-01-07 10:00:00+02:00')",
            f"{name}_as_of(date '2026-01-06')",
            f"{name}_as_of(timestamp '2026-01-08 08:00:00')",
            f"{name}_as_of(timestamptz '2026-01-08 07:59:00+00')",
        ]
    return views


# What is handed to another DuckDB: the relations, and back come their rows.
PLAIN_READER = """
import json, sys
import duckdb
con = duckdb.connect(sys.argv[1], read_only=True)
con.execute("set TimeZone = 'UTC'")
assert not [name for name in sys.modules if name.startswith("driftbook")]
def word(value):
    return value.isoformat() if hasattr(value, "isoformat") else value
def rows_of(relation):
    return con.execute(f"select * from {relation}").fetchall()
found = {
    relation: sorted(json.dumps([word(value) for value in row]) for row in rows_of(relation))
    for relation in json.loads(sys.argv[2])
}
print(json.dumps({"version": duckdb.__version__, "found": found}))
"""


def as_words(con, relation):
    def word(value):
        return value.isoformat() if hasattr(value, "isoformat") else value

    rows = con.execute(f"select * from {relation}").fetchall()
    return sorted(json.dumps([word(value) for value in row]) for row in rows)


def read_with(python, book):
    """What a DuckDB process without driftbook reads, beside what `store.connect` reads."""
    with store.connect(book) as con:
        with duckdb.connect(book, read_only=True) as plain:
            names = relations(plain)
        ours = {name: as_words(con, name) for name in names}
    said = subprocess.run(
        [python, "-c", PLAIN_READER, book, json.dumps(names)], capture_output=True, text=True, check=False
    )
    assert said.stderr == ""
    return json.loads(said.stdout), ours


def test_any_duckdb_reads_views_macros_and_versions_without_driftbook(filled):
    theirs, ours = read_with(sys.executable, filled)
    assert theirs["found"] == ours
    assert {"ou", "observation", "run", "versions.ou", "ou_at_run(3)", "series_as_of('2026-01-07')"} <= ours.keys()
    assert all(ours[name] for name in ("ou", "observation", "run", "versions.ou", "ou_at_run(3)", "refused_row"))


@pytest.fixture(scope="session")
def python_with_old_duckdb(tmp_path_factory):
    """A Python of its own with DuckDB 1.2.2, the oldest that the book promises to be read by."""
    folder = tmp_path_factory.mktemp("old") / "venv"
    python = folder / "bin" / "python"
    for command in (
        [sys.executable, "-m", "venv", folder],
        [python, "-m", "pip", "install", "--quiet", "--disable-pip-version-check", "duckdb==1.2.2", "pytz"],
    ):
        made = subprocess.run(command, capture_output=True, text=True, check=False)
        if made.returncode != 0:
            pytest.skip(f"no environment with DuckDB 1.2.2 could be made: {made.stderr.strip().splitlines()[-1:]}")
    return python


def test_duckdb_1_2_reads_views_macros_and_versions(filled, python_with_old_duckdb):
    """Row for row what the newest DuckDB reads, in a book that the newest one has written several times."""
    theirs, ours = read_with(python_with_old_duckdb, filled)
    assert theirs["version"] == "1.2.2"
    assert theirs["found"] == ours


# Forms of one moment; those with a zone but without seconds are no TIMESTAMPTZ to DuckDB 1.2 as they stand.
MOMENT = [
    "'2026-01-07 08:00'",
    "'2026-01-07T08:00:00'",
    "'2026-01-07 10:00:00+02:00'",
    "'2026-01-07T10:00+02:00'",
    "'2026-01-07 10:00+02'",
    "'2026-01-07T08:00Z'",
    "timestamp '2026-01-07 08:00:00'",
    "timestamptz '2026-01-07 17:00:00+09'",
]


def test_duckdb_1_2_understands_a_moment_in_every_form(filled, python_with_old_duckdb):
    script = PLAIN_READER.replace("set TimeZone = 'UTC'", "set TimeZone = 'Asia/Tokyo'")
    names = [f"(select max(run_id) from observation_as_of({form}))" for form in MOMENT]
    said = subprocess.run(
        [python_with_old_duckdb, "-c", script, filled, json.dumps(names)], capture_output=True, text=True, check=False
    )
    assert said.stderr == ""
    assert json.loads(said.stdout)["found"] == {name: ["[3]"] for name in names}


def test_every_view_and_column_that_readers_see_says_what_it_means(filled):
    with duckdb.connect(filled, read_only=True) as con:
        views = con.execute(
            "select schema_name || '.' || view_name from duckdb_views() "
            "where schema_name in ('main', 'versions') and not internal and comment is null"
        ).fetchall()
        columns = con.execute(
            "select schema_name || '.' || table_name || '.' || column_name from duckdb_columns() "
            "where schema_name in ('main', 'versions') and not internal and comment is null"
        ).fetchall()
    assert (views, columns) == ([], [])


def test_connections_threads_and_processes_leave_the_book_as_it_is(filled):
    before = filled.read_bytes()
    with store.connect(filled) as con, con.cursor() as cursor:
        cursor.execute("select count(*) from ou").fetchall()
        con.execute("create temp table t as from observation")
    assert filled.read_bytes() == before
    assert sorted(path.name for path in filled.parent.iterdir()) == [filled.name]
