"""SQL of a stranger: it reads this book, no other file, changes nothing, and cannot fill memory or disk or run on."""

import json
import os
import random
import resource
import shutil
import signal
import subprocess
import sys
import time
from contextlib import contextmanager
from pathlib import Path

import duckdb
import pytest

from driftbook.store import ask as asking
from driftbook.store.ask import ask
from driftbook.store.contained import Limits, contained
from driftbook.store.errors import BookError, BookLocked, UsageError
from driftbook.store.reader import attached

SECRET = "a secret of another file"
SMALL = Limits(seconds=30, memory=300 << 20)
PROGRAM = [sys.executable, "-c", "from driftbook.store.cli import main; main()"]


def written(rows):
    return repr(rows.fetchall()).encode()


def answer(book, sql, limits=SMALL):
    with ask(book, sql, written, limits) as pieces:
        return b"".join(pieces).decode()


# what a query can reach


@pytest.fixture(scope="module")
def folder(tmp_path_factory, _history):
    """A book, other files of every kind beside it, and another book."""
    folder = tmp_path_factory.mktemp("strangers")
    shutil.copyfile(_history, folder / "desk.duckdb")
    for name in ("secret.csv", "secret.json", "secret.txt", "secret.sql"):
        (folder / name).write_text(f'select 1;\n"{SECRET}"\n')
    with duckdb.connect(folder / "other.duckdb") as con:
        con.execute(f"create table secret as select '{SECRET}' as s")
        con.execute(f"copy secret to '{folder}/secret.parquet'")
    return folder


@pytest.fixture(scope="module")
def locked(folder):
    """The connection on which a stranger's statement is run, here without the process round it."""
    with asking._locked(folder / "desk.duckdb", 300 << 20) as con:
        yield con


def state(folder):
    return sorted((path.name, path.read_bytes()) for path in folder.iterdir())


def settings(con):
    return con.execute("select name, value from duckdb_settings() order by all").fetchall()


FILES = [
    f"from {function}('{{folder}}/{name}')"
    for function, name in (
        ("read_csv", "secret.csv"), ("read_csv_auto", "secret.csv"), ("sniff_csv", "secret.csv"),
        ("read_text", "secret.txt"), ("read_blob", "secret.txt"), ("read_json", "secret.json"),
        ("read_ndjson_objects", "secret.json"), ("read_parquet", "secret.parquet"), ("parquet_scan", "secret.parquet"),
        ("parquet_schema", "secret.parquet"), ("parquet_metadata", "secret.parquet"),
        ("parquet_kv_metadata", "secret.parquet"), ("read_duckdb", "other.duckdb"), ("glob", "*"),
        ("read_text", "desk.duckdb"), ("read_blob", "desk.duckdb*"), ("read_duckdb", "desk.duckdb"),
    )
]  # fmt: skip
HOSTILE = [
    *FILES,
    "from '{folder}/secret.csv'",
    "from '{folder}/secret.parquet'",
    "from '{folder}/other.duckdb'",
    "from query('from read_text(''{folder}/secret.txt'')')",
    "from query_table('{folder}/secret.csv')",
    "from json_execute_serialized_sql(json_serialize_sql('from read_text(''{folder}/secret.txt'')'))",
    "select (select content from read_text('{folder}/secret.txt'))",
    "with s as (from read_text('{folder}/secret.txt')) from s",
    "from read_text('/proc/self/environ')",
    "from read_csv('https://example.org/x.csv')",
    "from read_parquet('s3://bucket/x.parquet')",
    "copy (select 1) to '{folder}/out.csv'",
    "copy base.series from '{folder}/secret.csv'",
    "explain analyze copy (select 1) to '{folder}/out.csv'",
    "export database '{folder}/out'",
    "import database '{folder}'",
    "attach '{folder}/other.duckdb'",
    "attach '{folder}/new.duckdb'",
    "attach ':memory:' as more",
    "detach book",
    "use book",
    "install httpfs",
    "load httpfs",
    "load '{folder}/secret.txt'",
    "set threads = 1",
    "set enable_external_access = true",
    "reset lock_configuration",
    "set variable x = 1",
    "pragma enable_profiling",
    "pragma threads = 1",
    "pragma database_list",
    "explain analyze set threads = 1",
    "call enable_logging()",
    "from enable_logging('QueryLog', storage := 'file', storage_path := '{folder}/log')",
    "from enable_profiling()",
    "from add_grammar_extension('x')",
    "from create_external_resource('x')",
    "call checkpoint()",
    "checkpoint",
    "vacuum",
    "create table t as select 1",
    "create temp table t as select 1",
    "create macro m() as 1",
    "create secret (type s3)",
    "insert into base.series select * from base.series",
    "update book.base.run set digest = ''",
    "delete from book.base.observation",
    "explain analyze delete from book.base.observation",
    "with gone as (delete from book.base.series returning *) from gone",
    "drop view latest",
    "alter table book.base.run add column x integer",
    "begin",
    "commit",
    "prepare p as select 1",
    "execute p",
    "deallocate p",
    "select 1; select 2",
    "select 1; copy (select 1) to '{folder}/out.csv'",
    "; ;",
    "",
    "-- nothing",
    "select getenv('HOME')",
    "from sys.modules",
    "from os",
    "from con",
    "from book",
    "from pandas_scan(1)",
    "from arrow_scan(1, 2, 3)",
    "from python_map_function((select 1))",
]


@pytest.mark.parametrize("sql", HOSTILE)
def test_a_statement_that_reaches_beyond_the_book_is_refused_and_changes_nothing(locked, folder, sql):
    before = settings(locked), state(folder)
    with pytest.raises(UsageError) as refused:
        asking._answer(sql.replace("{folder}", str(folder)), written, None, locked)
    assert SECRET not in str(refused.value)
    assert (settings(locked), state(folder)) == before


HARMLESS = [
    "select current_setting('temp_directory')",
    "from duckdb_secrets()",
    "from duckdb_temporary_files()",
    "from duckdb_logs()",
    "from truncate_duckdb_logs()",
    "from checkpoint('book')",
    "explain select * from latest",
    "explain analyze select 1",
    "describe latest",
    "summarize series",
    "show tables",
    "table series",
    "values (1)",
    "select 1;",
]


@pytest.mark.parametrize("sql", HARMLESS)
def test_what_looks_odd_but_stays_inside_changes_nothing(locked, folder, sql):
    before = settings(locked), state(folder)
    assert SECRET not in asking._answer(sql, written, None, locked).decode()
    assert (settings(locked), state(folder)) == before


SEED = 20261201
TARGETS = [
    "{folder}/secret.csv",
    "{folder}/secret.parquet",
    "{folder}/other.duckdb",
    "{folder}/out",
    "{folder}/desk.duckdb",
    "{folder}/*",
    "/etc/passwd",
    "file://{folder}/secret.txt",
    "{folder}/./secret.txt",
    "",
    "con",
    "desk",
    "book",
]
INNER = [
    *(f"from {function}('@')" for function in (
        "read_csv", "read_text", "read_blob", "read_json", "read_parquet", "read_duckdb", "glob", "sniff_csv",
        "parquet_schema", "query_table", "which_secret", "storage_info", "read_single_csv_file")),
    "from '@'", 'from "@"', "from \"@\".secret", "copy (select 1) to '@'", "copy book.base.run to '@' (format parquet)",
    "attach '@'", "attach '@' as x (read_only)", "export database '@'", "load '@'", "install '@'",
    "set temp_directory = '@'", "set home_directory = '@'", "set allowed_paths = ['@']", "set file_search_path = '@'",
    "set enable_external_access = true", "set lock_configuration = false", "reset disabled_filesystems",
    "set variable x = '@'", "pragma import_database('@')",
    "call enable_logging(storage := 'file', storage_path := '@')",
    "delete from book.base.run", "insert into book.base.plan values ('@', '@', '@', 1, null)", "drop schema book.base",
    "create table t as from '@'", "create view v as from '@'", "select current_setting('temp_directory')",
    "select count(*) from observation", "select * from query('from read_text(''@'')')", "checkpoint", "vacuum analyze",
]  # fmt: skip
WRAPPED = [
    "{0}", "{0}", "{0};", "explain {0}", "explain analyze {0}", "select * from ({0})", "select exists({0})",
    "with w as ({0}) from w", "with w as materialized ({0}) select count(*) from w", "select 1; {0}", "{0}; select 1",
    "from query($${0}$$)", "prepare p as {0}", "describe {0}", "summarize {0}", "({0}) union all ({0})",
    "select (select count(*) from ({0}))", "begin; {0}; commit", "create macro m() as table {0}",
    "/* {0} */ {0} -- {0}",
    "select * from series s, lateral ({0}) limit 1", "from json_execute_serialized_sql(json_serialize_sql($${0}$$))",
    "pivot ({0}) on 1 using count(*)", "copy ({0}) to '{{folder}}/out.csv'", "execute immediate '{0}'", "{0} {0}",
]  # fmt: skip


def try_statements(locked, folder, count, seed):
    """Runs so many statements put together at random; gives how many were answered."""
    chance = random.Random(seed)
    before, answered = (settings(locked), state(folder)), 0
    for _ in range(count):
        sql = chance.choice(INNER)
        for _ in range(chance.choice((1, 1, 2, 3))):
            sql = chance.choice(WRAPPED).replace("{{", "{").replace("}}", "}").replace("{0}", sql)
        sql = sql.replace("@", chance.choice(TARGETS)).replace("{folder}", str(folder))
        try:
            said = asking._answer(sql, written, None, locked).decode()
            answered += 1
        except UsageError as refused:
            said = str(refused)
        assert said.replace(sql, "").find(SECRET) < 0, sql
        assert sorted(path.name for path in folder.iterdir()) == [name for name, _ in before[1]], sql
    assert (settings(locked), state(folder)) == before
    return answered


def test_300_statements_put_together_at_random_reach_nothing(locked, folder):
    assert 0 < try_statements(locked, folder, 300, SEED) < 150


@pytest.mark.soak
def test_20_000_statements_put_together_at_random_reach_nothing(locked, folder):
    assert 0 < try_statements(locked, folder, 20_000, SEED + 1) < 10_000


# what a query can use up


GREEDY = [
    "select length(repeat('x', 3000000000))",
    "select * from generate_series(1000000000000)",
    "select list(range) from range(1000000000000)",
    "select sum(a.range * b.range) from range(10000000) a, range(10000000) b",
    "select * from range(100000000) a, range(100000000) b",
    "with recursive t(n) as (select 1 union all select n + 1 from t) select max(n) from t",
    "with recursive t(s) as (select repeat('x', 1000) union all select s || s from t) select max(length(s)) from t",
    "select string_agg(range::varchar, repeat('y', 1000)) from range(1000000000)",
    "select list_sort(list(hash(range))) from range(1000000000)",
    "select rolling_ou(list(range::double), 0.1, 3) from range(100000000)",
    f"select {'(' * 100_000}1{')' * 100_000}",
    f"select {'abs(' * 5_000}1{')' * 5_000}",
    f"select {'1 + ' * 200_000}1",
]
ALL_GREEDY = """
import json, resource, sys, time
from pathlib import Path
from driftbook.store.ask import ask
from driftbook.store.contained import Limits
from driftbook.store.errors import BookError
limits = Limits(seconds=float(sys.argv[2]), memory=int(sys.argv[3]))
for sql in json.load(sys.stdin):
    began, said = time.monotonic(), ""
    try:
        with ask(Path(sys.argv[1]), sql, lambda rows: repr(rows.fetchall()).encode(), limits) as pieces:
            said = f"answered with {sum(map(len, pieces))} bytes"
    except BookError as error:
        said = str(error)
    most = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss << 10
    print(json.dumps([said, time.monotonic() - began, most]), flush=True)
"""


def test_a_greedy_query_ends_in_a_sentence_in_time_and_within_its_memory(filled):
    """The largest child so far is what the system reports, so the bound holds for each."""
    memory, seconds = 400 << 20, 3.0
    done = subprocess.run(
        [sys.executable, "-c", ALL_GREEDY, filled, str(seconds), str(memory)],
        input=json.dumps(GREEDY), capture_output=True, text=True, timeout=300, check=True,
    )  # fmt: skip
    assert done.stderr == ""
    found = [json.loads(line) for line in done.stdout.splitlines()]
    assert len(found) == len(GREEDY)
    for sql, (said, took, most) in zip(GREEDY, found, strict=True):
        assert said.startswith(("this takes longer than 3 s", "this needs more than 400 MiB", "the query failed: ")), (
            sql[:80], said[:200],
        )  # fmt: skip
        assert took < seconds + 3, sql[:80]
        assert most < memory + (250 << 20), sql[:80]  # 250 MiB: Python, DuckDB and the other libraries
    assert {said.split(";")[0] for said, *_ in found} >= {"this takes longer than 3 s"}
    assert any(said.startswith("this needs more than 400 MiB") for said, *_ in found)


def test_what_fits_into_small_limits_is_answered(filled):
    assert answer(filled, "select count(*) > 10 from observation") == "[(True,)]"
    assert answer(filled, "select (fit_abm([1.0, 2, 4, 7], 1.0)).n") == "[(3,)]"


# the process round it


@contextmanager
def nothing():
    yield None


def result_of(work, limits=SMALL):
    with contained(nothing, work, limits) as pieces:
        return b"".join(pieces)


def raising(error):
    def work(_):
        raise error

    return work


def ending_by(number):
    return lambda _: os.kill(os.getpid(), number) or time.sleep(60)


def test_bytes_of_any_number_come_back():
    assert result_of(lambda _: b"") == b""
    assert result_of(lambda _: b"\n\0" * 3_000_000) == b"\n\0" * 3_000_000


@pytest.mark.parametrize(
    ("work", "kind", "told"),
    [
        (raising(UsageError("so it is.")), UsageError, r"^so it is\.$"),
        (raising(BookError("so it was.")), BookError, r"^so it was\.$"),
        (raising(MemoryError()), UsageError, "needs more than 300 MiB of memory; ask for less"),
        (raising(ZeroDivisionError("by zero")), RuntimeError, "^ZeroDivisionError: by zero$"),
        (lambda _: bytes(1 << 30), UsageError, "needs more than 300 MiB"),
        (ending_by(signal.SIGKILL), UsageError, "needs more than 300 MiB"),
        (ending_by(signal.SIGTRAP), BookError, r"ended with code -5; the book is unchanged\.$"),
        (ending_by(signal.SIGALRM), UsageError, "takes longer than 30 s; ask for less, or give a longer --timeout"),
        (ending_by(signal.SIGINT), KeyboardInterrupt, None),
    ],
)
def test_whatever_ends_the_work_is_told(work, kind, told):
    with pytest.raises(kind, match=told):
        result_of(work)


class Short(bytes):
    """Says that it is longer than it is, as an answer is whose sender died."""

    def __len__(self):
        return super().__len__() + 1


def test_an_answer_that_breaks_off_is_told():
    with pytest.raises(BookError, match="ended while it told its answer; what is there is not whole"):
        result_of(lambda _: Short(b"x" * 3_000_000))


def test_no_file_can_grow_in_the_child_and_none_is_left(tmp_path):
    def work(_):
        with (tmp_path / "grown").open("wb", buffering=0) as file:
            try:
                file.write(b"x")
            except OSError as error:
                return error.strerror.encode()
        return b"grown"

    assert result_of(work) == b"File too large"
    assert resource.getrlimit(resource.RLIMIT_FSIZE) != (0, 0)  # here it is as it was


def test_the_time_counts_whatever_code_is_running():
    began = time.monotonic()
    with pytest.raises(UsageError, match=r"takes longer than 0\.2 s"):
        result_of(lambda _: sum(range(1 << 60)) or b"", Limits(0.2, 300 << 20))
    assert time.monotonic() - began < 5


ENDLESS = "select sum(a.range * b.range) from range(100000000) a, range(100000000) b"


def child_of(process):
    give_up = time.monotonic() + 30
    while time.monotonic() < give_up:
        if found := Path(f"/proc/{process.pid}/task/{process.pid}/children").read_text().split():
            return int(found[0])
        time.sleep(0.01)
    raise AssertionError("no child")


def is_gone(pid, within):
    give_up = time.monotonic() + within
    while time.monotonic() < give_up:
        try:
            if Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] == "Z":
                return True
        except FileNotFoundError:
            return True
        time.sleep(0.05)
    return False


def test_an_interrupt_ends_the_query_with_130_and_its_process(filled):
    running = subprocess.Popen([*PROGRAM, "sql", filled, ENDLESS], stderr=subprocess.PIPE, text=True)
    child = child_of(running)
    running.send_signal(signal.SIGINT)
    assert running.communicate(timeout=60)[1] == "driftbook: interrupted; the book is unchanged.\n"
    assert running.returncode == 130
    assert is_gone(child, within=5)


def test_a_query_does_not_outlive_its_time_though_nobody_waits_for_it_any_more(filled):
    running = subprocess.Popen([*PROGRAM, "sql", filled, "--timeout", "4", ENDLESS])
    child = child_of(running)
    running.kill()
    running.wait()
    assert is_gone(child, within=20)


def test_a_foreign_writer_is_told_of_as_without_a_child(filled):
    script = "import duckdb, sys; con = duckdb.connect(sys.argv[1]); print('open', flush=True); sys.stdin.read()"
    with subprocess.Popen(
        [sys.executable, "-c", script, filled], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    ) as writer:
        assert writer.stdout.readline() == "open\n"
        with pytest.raises(BookLocked, match="is open for writing outside driftbook"):
            answer(filled, "select 1")
        writer.stdin.close()


def test_the_book_is_left_to_others_while_a_query_runs(filled):
    with ask(filled, "select 1", written, SMALL) as pieces:
        assert b"".join(pieces) == b"[(1,)]"
    with attached(filled) as con:
        assert con.execute("select count(*) from base.run").fetchall() == [(6,)]
