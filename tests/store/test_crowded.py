"""Many at one book: readers are never refused and never see half a run, writers take turns."""

import json
import subprocess
import sys
import time

import duckdb
import polars as pl
import pytest
from children import Child
from crowding import read_and_connect_again, refused_or_done, write_three_times
from made_series import days

from driftbook import store
from driftbook.store import lock
from driftbook.store.cli import app
from driftbook.store.swap import create, rewriting

NAMES = ("pellets_fob", "power_da")
COMMAND = [sys.executable, "-c", "from driftbook.store.cli import main; main()"]


def day(book, number):
    """One run: one value more of each of two series, one of them a correction of the day before as well."""
    frames = [days(name, [float(number)], number) for name in NAMES]
    if number:
        frames.append(days(NAMES[0], [number - 0.5], number - 1))
    with store.writing(book, wait=60) as work:
        work.ingest(pl.concat(frames), store.Options(add_series=True), name=f"day {number}")


def expected(run):
    """What the book holds after a run: two series from 0 to run - 1, one of them and a half more but for the last."""
    total = run * (run - 1) + 0.5 * (run - 1)
    return [2 * run, total, 3 * run - 1, run]


def crowd(tmp_path, *, readers, swaps):
    """Readers that come and go while a book is swapped, and one that stays; how often each read, and which runs."""
    book, stop = tmp_path / "desk.duckdb", tmp_path / "stop"
    create(book)
    day(book, 0)
    with store.connect(book) as old:
        children = [
            Child(tmp_path / f"reader {k}", read_and_connect_again, book, stop, k % 2 == 0) for k in range(readers)
        ]
        try:
            for number in range(1, swaps + 1):
                day(book, number)
                assert old.execute("select max(run_id), count(*) from run").fetchone() == (1, 1)
                assert old.execute("select count(*), sum(value) from observation").fetchone() == (2, 0.0)
            time.sleep(0.5)
        finally:
            stop.touch()
        found = [what_was_read(child) for child in children]
    assert store.verify(book).findings == []
    return found


def what_was_read(child):
    """How often a reader connected and how many runs it saw, each of them whole."""
    ended = child.ended()
    assert ended.code == 0, ended.err
    connections, seen = json.loads(ended.out)
    assert {run: answer for run, answer in seen.items() if answer != expected(int(run))} == {}
    return connections, len(seen)


def test_readers_that_come_and_go_while_the_book_is_swapped(tmp_path):
    found = crowd(tmp_path, readers=2, swaps=6)
    assert all(runs >= 2 for _, runs in found)


@pytest.mark.soak
def test_eight_readers_through_200_swaps(tmp_path):
    begun = time.monotonic()
    found = crowd(tmp_path, readers=8, swaps=200)
    reads = [connections for connections, _ in found]
    runs = [count for _, count in found]
    print(f"\n  200 swaps in {time.monotonic() - begun:.0f} s; 8 readers connected {sum(reads)} times, none failed; ")
    print(f"  each saw {min(runs)} to {max(runs)} of the 201 runs, each whole")
    assert min(runs) >= 20


# writers


def plans(book):
    with duckdb.connect(book, read_only=True) as con:
        return sorted(name for (name,) in con.execute("select name from plan").fetchall())


def test_of_three_writers_at_once_one_works_one_waits_and_one_is_told_who_works(book, tmp_path):
    first = Child(tmp_path / "1", refused_or_done, book, "first", 0, 2.5)
    while lock.last_look(book).holder is None and first.process.is_alive():
        time.sleep(0.01)
    holder = lock.last_look(book).holder
    second = Child(tmp_path / "2", refused_or_done, book, "second", 60, 0)
    third = Child(tmp_path / "3", refused_or_done, book, "third", 0, 0)
    ends = [child.ended() for child in (first, second, third)]
    assert [end.code for end in ends] == [0, 0, 75]
    assert f"process {first.process.pid} on" in holder
    assert f"desk.duckdb is being written by {holder} since " in ends[2].out
    assert plans(book) == ["first", "second"]


def test_no_run_of_three_writers_is_lost(book, tmp_path):
    children = [Child(tmp_path / f"{k}", write_three_times, book, f"writer {k}") for k in range(3)]
    assert [child.ended().code for child in children] == [0, 0, 0]
    assert plans(book) == sorted(f"writer {k}, {n}" for k in range(3) for n in range(3))
    assert lock.last_look(book).holder is None


# foreign programs


HOLDER = """
import sys, duckdb
con = duckdb.connect(sys.argv[1])
print("ready", flush=True)
sys.stdin.readline()
"""


def test_a_book_that_a_foreign_program_has_open_for_writing_is_refused_in_a_sentence(filled, capsys):
    """By every command that reads or writes; and once it is closed there, all is as before."""
    before = filled.read_bytes()
    with subprocess.Popen(
        [sys.executable, "-c", HOLDER, filled], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    ) as holder:
        assert holder.stdout.readline() == "ready\n"
        for words in (["refresh"], ["latest"], ["verify"], ["sql", "select 1"], ["reproduce"]):
            assert app.run([words[0], str(filled), *words[1:]]) == 75
            (sentence,) = capsys.readouterr().err.splitlines()
            assert f"{filled} is open for writing" in sentence
        holder.communicate("\n")
    assert filled.read_bytes() == before
    assert app.run(["verify", str(filled)]) == 0


def test_a_refusal_of_another_kind_is_not_taken_for_a_writer(tmp_path, capsys):
    """Whatever the folder is called."""
    folder = tmp_path / "block of locks"
    folder.mkdir()
    (folder / "desk.duckdb").write_text("no database")
    assert app.run(["latest", str(folder / "desk.duckdb")]) == 1
    assert "cannot be opened as a book" in capsys.readouterr().err


def foreign_log(book, other):
    """A log that belongs to another file lies beside a book."""
    create(other)
    with duckdb.connect(other) as con:
        con.execute("create table t as select 1 as a")
        con.execute("checkpoint")
        con.execute("insert into t values (2)")
        log = other.with_name(other.name + ".wal").read_bytes()
    book.with_name(book.name + ".wal").write_bytes(log)
    return log


def test_a_log_of_another_file_is_refused_and_kept(filled, tmp_path, capsys):
    (tmp_path / "other").mkdir()
    before = filled.read_bytes()
    log = foreign_log(filled, tmp_path / "other" / "other.duckdb")
    for words in (["refresh", "--all"], ["verify"], ["latest"]):
        assert app.run([words[0], str(filled), *words[1:]]) == 1
        (sentence,) = capsys.readouterr().err.splitlines()
        assert "should not have happened" not in sentence
        assert "cannot be opened" in sentence
    assert filled.read_bytes() == before
    assert filled.with_name("desk.duckdb.wal").read_bytes() == log
    filled.with_name("desk.duckdb.wal").unlink()
    assert app.run(["verify", str(filled)]) == 0


def test_a_torn_log_gives_what_was_committed_before_the_tear(book, tmp_path):
    """A foreign program died while it wrote its last commit."""
    with duckdb.connect(book) as con:
        for name in ("one", "two"):
            con.execute("insert into base.plan (plan_sha256, name, text, run_from) values ('', ?, '', 1)", [name])
            log = book.with_name("desk.duckdb.wal").read_bytes()
        kept = tmp_path / "kept.duckdb"
        kept.write_bytes(book.read_bytes())
    kept.with_name("kept.duckdb.wal").write_bytes(log[:-10])
    assert plans(kept) == ["one"]
    with rewriting(kept, 0) as draft:
        draft.kept = True
    assert plans(kept) == ["one"]
    assert not kept.with_name("kept.duckdb.wal").exists()


@pytest.mark.parametrize("what", ["touched", "replaced"])
def test_a_log_set_aside_is_kept_where_the_book_is_not_the_one_it_belongs_to(book, what, capsys):
    """Neither the book from before a swap that was broken off nor the one after it: a person has to look."""
    aside = book.with_name(".driftbook-aside-desk.duckdb.wal")
    aside.write_bytes(b"changes")
    book.with_name(".driftbook-aside-desk.duckdb.id").write_text("1 2 3 4\n5 6 7 8")
    if what == "replaced":
        book.with_name(".driftbook-aside-desk.duckdb.id").unlink()
    assert app.run(["refresh", str(book)]) == 1
    assert "holds changes that a foreign writer made to another file" in capsys.readouterr().err
    assert aside.read_bytes() == b"changes"
