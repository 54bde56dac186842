"""Copy, work, swap: the book is never half written, never lost, and there is one writer at a time."""

import errno
import os
import shutil
import signal
import stat
import subprocess
import sys
import threading
import time
from contextlib import contextmanager
from datetime import UTC, date, datetime, timedelta
from pathlib import Path

import duckdb
import pytest
from made_series import days, wave

from driftbook import store
from driftbook.store import lock, moments
from driftbook.store.errors import BookError, BookLocked, UsageError
from driftbook.store.swap import create, rewriting

ADDING = store.Options(add_series=True)


def write(book, name, wait=0.0):
    """Puts a plan row of that name into the book, as a stand-in for any work."""
    with rewriting(book, wait) as draft:
        put(draft.con, name)
        draft.kept = True


def put(con, name):
    con.execute("insert into base.plan (plan_sha256, name, text, run_from) values ('', ?, '', 1)", [name])


def names(book):
    """What a new reader sees."""
    with store.connect(book) as con:
        return seen(con)


def seen(con):
    return [name for (name,) in con.execute("select name from plan order by name").fetchall()]


def beside(book):
    """The names of all files in the book's folder but the book and its lock."""
    return sorted(path.name for path in book.parent.iterdir() if path not in (book, lock.lock_path(book)))


@contextmanager
def other_process(script, book):
    """A Python process that runs a script on the book; it has said its first line and waits for a line from us."""
    command = [sys.executable, "-c", script, str(book)]
    with subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True) as process:
        try:
            assert process.stdout.readline() == "ready\n"
            yield process
        finally:
            process.kill()


WRITER = """
import sys
from pathlib import Path
from driftbook.store.swap import rewriting
with rewriting(Path(sys.argv[1]), 0) as draft:
    draft.con.execute("insert into base.plan (plan_sha256, name, text, run_from) values ('', 'other', '', 1)")
    draft.kept = True
    print("ready", flush=True)
    sys.stdin.readline()
"""

FOREIGN_WRITER = """
import sys, duckdb
con = duckdb.connect(sys.argv[1])
con.execute("pragma disable_checkpoint_on_shutdown")
con.execute("insert into base.plan (plan_sha256, name, text, run_from) values ('', 'foreign', '', 1)")
print("ready", flush=True)
sys.stdin.readline()
"""

FOREIGN_ATTEMPT = """
import sys, duckdb
try:
    duckdb.connect(sys.argv[1])
except duckdb.IOException:
    print("refused")
"""


def leave_stray_wal(book):
    """A foreign program commits to the book and dies before it writes the commit out of its log."""
    with other_process(FOREIGN_WRITER, book) as process:
        process.send_signal(signal.SIGKILL)
        process.wait()
    assert beside(book) == ["desk.duckdb.wal"]


# the block


def test_what_is_kept_is_in_the_book_after_the_block(book):
    write(book, "desk")
    assert names(book) == ["desk"]
    assert beside(book) == []


@pytest.mark.parametrize("error", [RuntimeError, KeyboardInterrupt, SystemExit])
def test_an_exception_in_the_block_leaves_the_bytes_as_they_were(book, error):
    before = book.read_bytes()
    with pytest.raises(error), rewriting(book, 0) as draft:  # noqa: PT012
        put(draft.con, "desk")
        draft.kept = True
        raise error
    assert book.read_bytes() == before
    assert beside(book) == []


def test_an_exception_after_an_intake_leaves_the_bytes_as_they_were(filled):
    before = filled.read_bytes()
    with pytest.raises(RuntimeError), store.writing(filled) as work:  # noqa: PT012
        work.ingest(days("diesel", wave(9)), ADDING, name="seventh")
        work.refresh(everything=True)
        raise RuntimeError
    assert filled.read_bytes() == before
    assert beside(filled) == []


def test_a_draft_that_is_not_kept_leaves_the_bytes_as_they_were(book):
    before = book.read_bytes()
    with rewriting(book, 0) as draft:
        put(draft.con, "desk")
    assert book.read_bytes() == before
    assert beside(book) == []


def test_a_run_that_changes_nothing_leaves_the_bytes_as_they_were(filled):
    before = filled.read_bytes()
    with store.writing(filled) as work:
        work.refresh()
    assert work.finished is None
    assert filled.read_bytes() == before


def test_a_failure_to_take_the_books_place_leaves_the_bytes_as_they_were(book, monkeypatch):
    before = book.read_bytes()

    def fail(self, target):
        raise OSError(errno.EIO, "Input/output error")

    monkeypatch.setattr(Path, "replace", fail)
    with pytest.raises(BookError, match=r"the run cannot take the place of .*: Input/output error; it is unchanged"):
        write(book, "desk")
    assert book.read_bytes() == before
    assert beside(book) == []


def test_a_book_of_any_name_can_be_written(tmp_path):
    book = tmp_path / "the island's desk; 2024.duckdb"
    create(book)
    write(book, "desk")
    assert names(book) == ["desk"]


def test_a_link_to_a_book_stays_a_link_and_its_book_is_written(book, tmp_path):
    link = tmp_path / "link" / "today.duckdb"
    link.parent.mkdir()
    link.symlink_to(book)
    write(link, "desk")
    assert link.is_symlink()
    assert names(book) == ["desk"]


def test_a_link_and_its_book_have_one_lock(book, tmp_path):
    link = tmp_path / "link" / "today.duckdb"
    link.parent.mkdir()
    link.symlink_to(book)
    with rewriting(book, 0), pytest.raises(BookLocked), rewriting(link, 0):
        pass
    assert lock.last_look(link) == lock.last_look(book)


def test_a_plain_copy_of_a_book_is_a_book(filled, tmp_path):
    copy = tmp_path / "backup.duckdb"
    shutil.copyfile(filled, copy)
    assert store.verify(copy).findings == []


def test_too_little_room_is_told_before_anything_is_done(book, monkeypatch):
    before = book.read_bytes()
    usage = shutil.disk_usage(book.parent)
    monkeypatch.setattr(shutil, "disk_usage", lambda _: usage._replace(free=1 << 20))
    with pytest.raises(BookError, match=r"too little room beside .*desk\.duckdb: a run needs \d+ MiB and 1 MiB are"):
        write(book, "desk")
    assert book.read_bytes() == before


def test_a_path_without_a_book_is_refused_and_nothing_is_made(tmp_path):
    with pytest.raises(UsageError, match="there is no book"):
        write(tmp_path / "desk.duckdb", "desk")
    with pytest.raises(UsageError, match="is a folder"):
        write(tmp_path, "desk")
    assert list(tmp_path.iterdir()) == []


# one writer at a time


def test_a_second_writer_hears_who_writes(book):
    with other_process(WRITER, book) as process:
        for _ in range(2):  # asking must not wipe out the answer
            with pytest.raises(BookLocked, match=rf"is being written by process {process.pid} on \S+ since 20"):
                write(book, "desk")
        process.communicate("\n")
    assert names(book) == ["other"]


def test_a_second_writer_waits_as_long_as_it_was_told(book):
    with other_process(WRITER, book) as process:
        begun = time.monotonic()
        with pytest.raises(BookLocked, match=r"after waiting 0\.3 s"):
            write(book, "desk", wait=0.3)
        assert 0.3 <= time.monotonic() - begun < 5
        soon = threading.Timer(0.2, process.communicate, ["\n"])
        soon.start()
        write(book, "desk", wait=30)
        soon.join()
    assert names(book) == ["desk", "other"]


def test_a_second_writer_in_the_same_process_is_refused(book):
    with (
        rewriting(book, 0),
        pytest.raises(BookLocked, match=f"process {os.getpid()} "),
        rewriting(book, 0),
    ):
        pass


def test_of_many_writers_that_wait_all_come_to_write(book):
    threads = [threading.Thread(target=write, args=(book, f"desk {k}", 60)) for k in range(5)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert names(book) == [f"desk {k}" for k in range(5)]


def test_a_foreign_writer_is_named(book):
    with other_process(FOREIGN_WRITER, book) as process:
        with pytest.raises(BookLocked, match=rf"is open for writing in process {process.pid}, outside driftbook"):
            write(book, "desk")
        with pytest.raises(BookLocked, match="is open for writing outside driftbook"):
            store.connect(book)


def test_no_foreign_writer_gets_in_while_the_book_is_copied(book):
    """Not even after descriptors of the book were closed in this process, which would drop a plain lock."""
    with rewriting(book, 0):
        book.read_bytes()
        store.connect(book).close()
        attempt = subprocess.run(
            [sys.executable, "-c", FOREIGN_ATTEMPT, book], capture_output=True, text=True, check=True
        )
    assert attempt.stdout == "refused\n"


def test_a_foreign_reader_does_not_keep_a_writer_out(book):
    script = FOREIGN_WRITER.replace("sys.argv[1])", "sys.argv[1], read_only=True)")
    script = "\n".join(line for line in script.splitlines() if "con.execute" not in line)
    with other_process(script, book):
        write(book, "desk")
    assert names(book) == ["desk"]


def test_the_lock_file_notes_the_last_look(filled):
    with store.writing(filled) as work:
        work.ingest(days("power_da", wave(1), 40), name="seventh")
    look = lock.last_look(filled)
    assert (look.holder, look.since, look.found) == (None, None, "run 7")
    assert timedelta(0) <= datetime.now(UTC) - datetime.fromisoformat(look.looked_at) < timedelta(seconds=60)
    with store.writing(filled) as work:
        work.ingest(days("power_da", wave(1), 40), name="seventh")
    assert lock.last_look(filled).found == "nothing new"


# readers


def test_a_reader_keeps_its_version_and_a_new_one_sees_the_newest(book):
    with store.connect(book) as first:
        write(book, "a")
        with store.connect(book) as second:
            write(book, "b")
            with store.connect(book) as third:
                assert (seen(first), seen(second), seen(third)) == ([], ["a"], ["a", "b"])


def test_cursors_in_threads_see_the_version_of_their_connection(book):
    found = {}
    with store.connect(book) as old:
        write(book, "a")
        with store.connect(book) as new:

            def look(name, con):
                with con.cursor() as cursor:
                    found[name] = seen(cursor), cursor.execute("select count(*) from versions.ou").fetchone()

            connections = {f"{name} {k}": con for k in range(3) for name, con in (("old", old), ("new", new))}
            threads = [threading.Thread(target=look, args=item) for item in connections.items()]
            for thread in threads:
                thread.start()
            for thread in threads:
                thread.join()
    assert found == {name: ([] if name.startswith("old") else ["a"], (0,)) for name in connections}


def test_a_reader_cannot_write(filled):
    with store.connect(filled) as con, pytest.raises(duckdb.Error, match=r"read-only|read only"):
        con.execute("delete from book.base.observation")


# crashes


def test_a_killed_writer_leaves_the_book_and_the_next_clears_what_it_left(book):
    before = book.read_bytes()
    with other_process(WRITER, book) as process:
        process.send_signal(signal.SIGKILL)
        process.wait()
    assert book.read_bytes() == before
    assert any(name.startswith(f".driftbook-draft-{process.pid}-") for name in beside(book))
    write(book, "desk")
    assert names(book) == ["desk"]
    assert beside(book) == []


def test_what_a_killed_writer_of_another_book_left_is_not_touched(book, tmp_path):
    other = tmp_path / ".driftbook-draft-1-other.duckdb"
    other.write_text("not ours")
    write(book, "desk")
    assert beside(book) == [other.name]


def test_a_stray_log_of_a_foreign_writer_is_taken_into_the_book(book):
    leave_stray_wal(book)
    assert names(book) == ["foreign"]
    write(book, "desk")
    assert names(book) == ["desk", "foreign"]
    assert beside(book) == []


def test_a_stray_log_survives_a_block_that_keeps_nothing(book):
    leave_stray_wal(book)
    with rewriting(book, 0):
        pass
    assert names(book) == ["foreign"]


CRASH_IN_THE_SWAP = """
import os, sys
from pathlib import Path
from driftbook.store.swap import rewriting
Path.{step} = lambda *_: os._exit(9)
with rewriting(Path(sys.argv[1]), 0) as draft:
    draft.kept = True
"""


@pytest.mark.parametrize("step", ["rename", "replace"])
def test_a_stray_log_survives_a_crash_in_the_middle_of_the_swap(book, step):
    """Whether the writer dies before it set the log aside or after."""
    leave_stray_wal(book)
    script = CRASH_IN_THE_SWAP.format(step=step)
    assert subprocess.run([sys.executable, "-c", script, book], check=False).returncode == 9
    write(book, "desk")
    assert names(book) == ["desk", "foreign"]
    assert beside(book) == []


CRASH_AFTER_THE_SWAP = """
import os, sys
from pathlib import Path
from driftbook.store import swap
really = Path.replace
Path.replace = lambda *paths: (really(*paths), os._exit(9))
with swap.rewriting(Path(sys.argv[1]), 0) as draft:
    draft.kept = True
"""


def test_a_stray_log_is_not_taken_in_twice_after_a_crash_behind_the_swap(book):
    leave_stray_wal(book)
    assert subprocess.run([sys.executable, "-c", CRASH_AFTER_THE_SWAP, book], check=False).returncode == 9
    assert names(book) == ["foreign"]
    write(book, "desk")
    assert names(book) == ["desk", "foreign"]
    assert beside(book) == []


@pytest.mark.soak
def test_a_writer_killed_at_any_moment_leaves_the_old_book_or_the_new_one(book):
    """60 kills, spread over the time that a writer takes."""
    script = WRITER.replace("    sys.stdin.readline()\n", "")
    count = 0
    for kill in range(60):
        with subprocess.Popen([sys.executable, "-c", script, book], stdout=subprocess.PIPE, text=True) as process:
            process.stdout.readline()
            time.sleep(kill * 0.0005)
            process.kill()
        now = len(names(book))
        assert now in (count, count + 1)
        count = now
    write(book, "desk")
    assert beside(book) == []


# rights


def mode(path):
    return stat.S_IMODE(path.stat().st_mode)


@pytest.fixture
def wide_umask():
    before = os.umask(0o022)
    yield
    os.umask(before)


@pytest.mark.parametrize("rights", [0o640, 0o600, 0o664])
def test_the_book_keeps_its_rights(book, wide_umask, rights):
    book.chmod(rights)
    write(book, "desk")
    assert mode(book) == rights


@pytest.mark.skipif(os.geteuid() != 0, reason="only root may give a file away")
def test_the_book_keeps_its_owner_and_group(book):
    os.chown(book, 12345, 54321)
    book.chmod(0o640)
    write(book, "desk")
    assert (book.stat().st_uid, book.stat().st_gid, mode(book)) == (12345, 54321, 0o640)


@pytest.mark.parametrize(("is_of_the_group", "rights"), [(True, 0o664), (False, 0o604)])
def test_a_writer_who_may_not_give_the_book_away_gives_no_other_group_its_rights(
    book, monkeypatch, is_of_the_group, rights
):
    """As for a writer who is not root: the group can be kept if it is one of the writer's own."""
    given = []

    def chown(path, uid, gid):
        if uid != -1 or not is_of_the_group:
            raise PermissionError
        given.append(gid)

    book.chmod(0o664)
    group = book.stat().st_gid
    monkeypatch.setattr(os, "chown", chown)
    write(book, "desk")
    assert mode(book) == rights
    assert given == [group] * is_of_the_group


@pytest.mark.parametrize("rights", [0o640, 0o600])
def test_nothing_beside_the_book_is_open_to_more_people_than_the_book(book, wide_umask, rights):
    """Neither the lock nor, while a run is under way, its draft; also when the book was narrowed."""
    book.chmod(0o644)
    write(book, "desk")
    book.chmod(rights)
    with rewriting(book, 0) as draft:
        put(draft.con, "other")
        wider = [path.name for path in book.parent.iterdir() if mode(path) & 0o077 & ~rights]
    assert wider == []


# moments


def run_at(book, at, count):
    with store.writing(book, at=at) as work:
        work.ingest(days("pellets_fob", [float(count)], count), ADDING, name=f"day {count}")
    return work.finished.moment


@pytest.mark.parametrize(
    ("told", "moment"),
    [
        ("2024-03-01", datetime(2024, 3, 1, 23, 59, 59, 999999, UTC)),
        (date(2024, 3, 1), datetime(2024, 3, 1, 23, 59, 59, 999999, UTC)),
        ("2024-03-01T08:00", datetime(2024, 3, 1, 8, tzinfo=UTC)),
        ("2024-03-01 08:00:00.25", datetime(2024, 3, 1, 8, 0, 0, 250_000, UTC)),
        ("2024-03-01T08:00+02:00", datetime(2024, 3, 1, 6, tzinfo=UTC)),
        ("2024-03-01T08:00Z", datetime(2024, 3, 1, 8, tzinfo=UTC)),
        (datetime(2024, 3, 1, 8), datetime(2024, 3, 1, 8, tzinfo=UTC)),
    ],
)
def test_a_told_moment_is_the_runs_moment(book, told, moment):
    """Without a zone it is UTC, and a bare date is the end of that UTC day."""
    assert run_at(book, told, 1) == moment
    with store.connect(book) as con:
        assert con.execute("select moment, told from run").fetchall() == [(moment, True)]


def test_todays_date_is_now(book):
    before = datetime.now(UTC)
    moment = run_at(book, before.date().isoformat(), 1)
    # the day may have ended since
    assert before <= moment <= datetime.now(UTC) or moment.date() == before.date() < datetime.now(UTC).date()


@pytest.mark.parametrize(
    "told", ["2024-03-01T08:00", "2024-03-01T07:59:59.999999", "2024-02-29", "2024-03-01T09:00+02:00"]
)
def test_a_moment_that_is_not_later_than_the_last_run_is_refused(book, told):
    run_at(book, "2024-03-01T08:00", 1)
    before = book.read_bytes()
    with pytest.raises(UsageError, match="not later than the last run's"):
        run_at(book, told, 2)
    assert book.read_bytes() == before


def test_a_moment_in_the_future_is_refused(book):
    soon = datetime.now(UTC) + timedelta(minutes=1)
    for told in (soon, soon.isoformat(), (soon + timedelta(days=1)).date().isoformat()):
        with pytest.raises(UsageError, match="lies in the future"):
            run_at(book, told, 1)


@pytest.mark.parametrize("told", ["", "yesterday", "2024-02-30", "2024-03-01T25:00", "01.03.2024"])
def test_what_is_no_moment_is_refused_with_the_forms_that_are(book, told):
    with pytest.raises(UsageError, match=r"is no moment; write 2026-01-31"):
        run_at(book, told, 1)


def test_moments_increase_when_the_clock_goes_backwards(book, monkeypatch):
    first = run_at(book, datetime.now(UTC), 1)

    class Behind(datetime):
        @classmethod
        def now(cls, tz=None):
            return datetime(2020, 1, 1, tzinfo=tz)

    monkeypatch.setattr(moments, "datetime", Behind)
    assert run_at(book, None, 2) == first + timedelta(microseconds=1)
    assert run_at(book, None, 3) == first + timedelta(microseconds=2)
    assert store.verify(book).findings == []


def test_an_untold_moment_is_when_the_run_was(book):
    before = datetime.now(UTC)
    assert before <= run_at(book, None, 1) <= datetime.now(UTC)
    with store.connect(book) as con:
        assert con.execute("select told, started_at <= moment, started_at <= finished_at from run").fetchall() == [
            (False, True, True)
        ]


# an empty book


def test_a_new_book_is_whole_and_has_no_run(book):
    seen = store.verify(book)
    assert (seen.findings, seen.runs, seen.last_digest) == ([], 0, "0" * 64)


def test_an_existing_path_is_no_place_for_a_new_book(book, tmp_path):
    before = book.read_bytes()
    with pytest.raises(UsageError, match="exists already"):
        create(book)
    assert book.read_bytes() == before
    with pytest.raises(UsageError, match="exists already"):
        create(tmp_path)


@pytest.mark.parametrize("name", ["base.duckdb", "versions.duckdb", "main.duckdb", "base", "temp.db", "Base.duckdb"])
def test_a_book_is_not_called_like_one_of_its_schemas(tmp_path, name):
    with pytest.raises(UsageError, match="cannot be called"):
        create(tmp_path / name)
    assert list(tmp_path.iterdir()) == []


def test_a_book_needs_a_folder_that_is_there(tmp_path):
    with pytest.raises(UsageError, match="there is no folder"):
        create(tmp_path / "away" / "desk.duckdb")
    assert list(tmp_path.iterdir()) == []


def test_a_file_that_is_no_book_is_refused_and_left_alone(tmp_path):
    text, other = tmp_path / "text.duckdb", tmp_path / "other.duckdb"
    text.write_text("not a database")
    with duckdb.connect(other) as con:
        con.execute("create table t (a integer)")
    for path, sentence in ((text, "cannot be opened"), (other, "no driftbook book")):
        before = path.read_bytes()
        with pytest.raises(BookError, match=sentence):
            write(path, "desk")
        with pytest.raises(BookError, match=sentence):
            store.connect(path)
        assert path.read_bytes() == before
