"""Runs that are killed: what they do, and how a process comes to die at a moment that is told."""

import os
import shutil
import signal
import sys
from datetime import UTC, datetime
from pathlib import Path

import duckdb
from made_series import days, plan_text, wave

from driftbook import store
from driftbook.store import migrate, moments, runs
from driftbook.store.forgetting import forget

ADDING = store.Options(add_series=True)
PLAN = plan_text({"pellets_fob": [8], "power_da": [8]}, models=("abm", "ou"))
DELIVERY = "series,time,value\npellets_fob,2024-02-10,101.5\npower_da,2024-01-05,61\npower_da,2024-02-10,n/a\n"


class StillClock(datetime):
    """Time stands still, so that the same run has the same digest however often it is begun."""

    @classmethod
    def now(cls, tz=None):
        return datetime(2026, 3, 2, 6, 30, tzinfo=UTC).astimezone(tz)


# what is done; each can be given again, whatever became of it the first time


def ingest(book):
    with store.writing(book) as work:
        work.ingest(book.with_name("delivery.csv"), ADDING)


def refresh(book):
    with store.writing(book) as work:
        work.refresh(PLAN, inbox=book.with_name("inbox"))


def forget_a_series(book):
    with store.connect(book) as con:
        there = con.execute("select count(*) from series where series = 'peg'").fetchall() == [(1,)]
    if there:
        forget(book, "peg", yes=True)
    look(book)


def make(book):
    if not book.exists():
        store.create(book)
    look(book)


def look(book):
    """A run that changes nothing, where what was to be done cannot be done twice."""
    with store.writing(book):
        pass


# what is there before; each makes a folder


def no_book(folder):
    folder.mkdir()


def small_book(folder):
    folder.mkdir()
    book = folder / "desk.duckdb"
    store.create(book)
    with store.writing(book, at="2026-01-05") as work:
        work.ingest(days("pellets_fob", wave(20)), ADDING, name="first")
        work.ingest(days("power_da", wave(20, 60.0)), ADDING, name="second")
        work.ingest(days("peg", wave(5, 1.0)), ADDING, name="third")
        work.refresh(PLAN)
    (folder / "delivery.csv").write_text(DELIVERY)
    (folder / "inbox").mkdir()
    shutil.copy(folder / "delivery.csv", folder / "inbox")


def older_book(folder):
    """A book that an older driftbook made."""
    folder.mkdir()
    with duckdb.connect(folder / "desk.duckdb", config={"storage_compatibility_version": "v1.2.0"}) as con:
        for migration in migrate.all_migrations()[:5]:
            migrate.apply(con, migration)
    (folder / "delivery.csv").write_text(DELIVERY)


def book_with_a_stray_log(folder):
    """A foreign program committed a name to a plan's row and died before it wrote that into the file."""
    small_book(folder)
    alive = folder / "alive"
    alive.mkdir()
    shutil.copy(folder / "desk.duckdb", alive)
    with duckdb.connect(alive / "desk.duckdb") as con:
        con.execute("insert into base.plan (plan_sha256, name, text, run_from) values ('', 'foreign', '', 1)")
        # as long as it is open, its log is as a crash would leave it
        shutil.copy(alive / "desk.duckdb.wal", folder)
    shutil.rmtree(alive)


SCENARIOS = {
    "ingest": (small_book, ingest),
    "refresh": (small_book, refresh),
    "migration": (older_book, ingest),
    "stray log": (book_with_a_stray_log, ingest),
    "forget": (small_book, forget_a_series),
    "new": (no_book, make),
}


# dying


def act(action, book, arm=None, *told):
    """Does it with the clock standing still; `arm` may have it killed."""
    runs.datetime = moments.datetime = StillClock
    disarm = arm(*told) if arm else None
    action(Path(book))
    if disarm:
        disarm()


SYSTEM_CALLS = ("open", "mkdir", "link", "rename", "replace", "fsync", "chmod", "chown", "unlink", "rmdir",
                "copy_file_range")  # fmt: skip


def before_system_call(number):
    """Dies before that call of those that change or sync a file."""
    seen = _watch_system_calls(lambda: len(seen) == number and _die())
    return lambda: None


def in_function(number):
    """Dies where the store calls its own function for that time."""
    seen = _watch_functions(lambda: seen[0] == number and _die())
    return lambda: sys.setprofile(None)


def counting():
    """Lives on, and tells how many functions and which system calls it came by."""
    functions = _watch_functions(lambda: None)
    calls = _watch_system_calls(lambda: None)

    def tell():
        sys.setprofile(None)
        print(functions[0], *calls)

    return tell


def _watch_system_calls(at_each):
    seen = []

    def watched(name, call):
        def calling(*arguments, **named):
            seen.append(name)
            at_each()
            return call(*arguments, **named)

        return calling

    for name in SYSTEM_CALLS:
        setattr(os, name, watched(name, getattr(os, name)))
    return seen


def _watch_functions(at_each):
    seen = [0]
    home = str(Path(store.__file__).parent)

    def watch(frame, event, _):
        if event == "call" and frame.f_code.co_filename.startswith(home):
            seen[0] += 1
            at_each()

    sys.setprofile(watch)
    return seen


def from_outside(begun):
    """Says that it begins; whoever hears that kills it when he likes."""
    begun.send(True)
    return lambda: None


def _die():
    os.kill(os.getpid(), signal.SIGKILL)
