"""Where the machine refuses, users get one sentence and the book stays as it was, to be written when that is over."""

import os
import random
import re
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import duckdb
import pytest
from children import Child
from refusing import (
    run,
    run_in_the_belief_that_there_is_room,
    run_interrupted_at,
    run_with_an_early_clock,
    run_with_handles,
    run_with_the_rights_of_the_owner,
)

from driftbook import store
from driftbook.store import lock

SEED = 20261203
PROGRAM = "from driftbook.store.cli import main; print('ready', flush=True); main()"
PLAN = """
name = "desk"
[[series]]
name = "diesel"
sign = "positive"
[[series]]
name = "spark"
[[estimate]]
series = ["*"]
models = ["ou", "exp_ou"]
lookbacks = [50]
"""


def beside(book):
    return sorted(path.name for path in book.parent.iterdir() if path not in (book, lock.lock_path(book)))


def told(ended, code=1):
    """The one sentence that a child ended with."""
    assert ended.code == code, (ended.out, ended.err)
    (sentence,) = ended.err.splitlines()
    assert "should not have happened" not in sentence
    return sentence


@pytest.fixture
def delivery(tmp_path):
    """Many rows of two series."""
    path = tmp_path / "delivery.csv"
    rows = (f"{name},{2000 + k // 336}-{k // 28 % 12 + 1:02d}-{k % 28 + 1:02d},{50 + k * 7919 % 10007 / 64}"
            for name in ("diesel", "spark") for k in range(8000))  # fmt: skip
    path.write_text("series,time,value\n" + "\n".join(rows) + "\n")
    return path


# room


@pytest.fixture
def small_disk(tmp_path):
    """Mounts a small disk of its own; gives the folder and what sets the size."""
    folder = tmp_path / "disk"
    folder.mkdir()

    def sized(kibibytes, *more):
        command = ["mount", "-t", "tmpfs", "-o", ",".join([*more, f"size={kibibytes}k"]), "tmpfs", folder]
        return subprocess.run(command, capture_output=True, text=True, check=False)

    made = sized(4096)
    if made.returncode:
        pytest.skip(f"no small disk can be mounted here: {made.stderr.strip()}")
    yield folder, lambda kibibytes: sized(kibibytes, "remount")
    subprocess.run(["umount", folder], check=True)


def test_a_full_disk_is_told_and_the_book_is_as_it_was(small_disk, book, delivery, tmp_path):
    """Full at the copy, at a commit, at the checkpoint: whatever is written first where there is no more room."""
    folder, resize = small_disk
    desk = folder / "desk.duckdb"
    shutil.copy(book, desk)
    before, size = desk.read_bytes(), desk.stat().st_size >> 10
    words = ("ingest", desk, delivery, "--add-series")
    reasons = set()
    for spare in (8, size // 2, size + 200, size + 700, size + 1400, size + 2300):
        assert resize(size + spare).returncode == 0
        ended = Child(tmp_path / "said", run_in_the_belief_that_there_is_room, *words).ended()
        sentence = told(ended)
        assert sentence.rstrip(".").endswith(("No space left on device", "the book is unchanged")), sentence
        assert "No space left on device" in sentence
        reasons.add(re.sub(r"\W.*", "", sentence.removeprefix("driftbook: ")) + " " + sentence.split()[3])
        assert desk.read_bytes() == before
        assert beside(desk) == []
    assert len(reasons) >= 2
    assert "too little room beside" in told(Child(tmp_path / "said", run, *words).ended())
    assert resize(200_000).returncode == 0
    assert Child(tmp_path / "said", run, *words).ended().code == 0
    assert store.verify(desk).findings == []


def fill(file):
    while True:
        file.write(b"x" * 4096)


def test_a_full_disk_does_not_keep_a_book_from_being_read(small_disk, filled, tmp_path):
    folder, resize = small_disk
    desk = folder / "desk.duckdb"
    assert resize((filled.stat().st_size >> 10) + 256).returncode == 0
    shutil.copy(filled, desk)
    with (folder / "filler").open("wb", buffering=0) as filler, pytest.raises(OSError, match="No space"):
        fill(filler)
    for words in (["latest", desk], ["verify", desk], ["sql", desk, "from ou"], ["reproduce", desk]):
        ended = Child(tmp_path / "said", run, *words).ended()
        assert (ended.code, ended.err) == (0, "")


# rights


@pytest.fixture
def closing():
    """Takes rights from a path, and gives them back in the end so that it can be removed."""
    closed = []

    def close(path, mode):
        closed.append((path, path.stat().st_mode))
        path.chmod(mode)

    yield close
    for path, mode in reversed(closed):
        path.chmod(mode)


@pytest.mark.parametrize("lock_is_there", [False, True])
def test_a_folder_that_cannot_be_written_is_told_and_reading_goes_on(
    filled, delivery, closing, lock_is_there, tmp_path
):
    desk = tmp_path / "desk" / "desk.duckdb"
    desk.parent.mkdir()
    shutil.copy(filled, desk)
    if lock_is_there:
        lock.lock_path(desk).touch()
    closing(desk.parent, 0o555)
    before = desk.read_bytes()
    for words in (["ingest", desk, delivery], ["refresh", desk], ["forget", desk, "peg", "--yes"]):
        sentence = told(Child(tmp_path / "said", run_with_the_rights_of_the_owner, *words).ended())
        assert f"cannot write beside {desk}: Permission denied; the folder must be writable." in sentence
    for words in (["latest", desk], ["verify", desk]):
        assert Child(tmp_path / "said", run_with_the_rights_of_the_owner, *words).ended().code == 0
    sentence = told(
        Child(tmp_path / "said", run_with_the_rights_of_the_owner, "new", desk.with_name("other.duckdb")).ended()
    )
    assert "cannot write beside" in sentence
    assert desk.read_bytes() == before
    assert beside(desk) == []


def test_a_book_that_cannot_be_read_is_told(filled, delivery, closing, tmp_path):
    closing(filled, 0o000)
    for words in (["ingest", filled, delivery], ["refresh", filled], ["latest", filled], ["verify", filled]):
        ended = Child(tmp_path / "said", run_with_the_rights_of_the_owner, *words).ended()
        assert "is not readable" in told(ended, 2)


def test_a_book_that_may_only_be_read_is_not_written(filled, delivery, closing, tmp_path):
    before = filled.read_bytes()
    closing(filled, 0o444)
    for words in (["ingest", filled, delivery], ["refresh", filled]):
        ended = Child(tmp_path / "said", run_with_the_rights_of_the_owner, *words).ended()
        assert "is not yours to write" in told(ended)
    assert Child(tmp_path / "said", run_with_the_rights_of_the_owner, "latest", filled).ended().code == 0
    assert filled.read_bytes() == before


def test_a_folder_that_cannot_be_entered_is_told(filled, delivery, closing, tmp_path):
    desk = tmp_path / "desk" / "desk.duckdb"
    desk.parent.mkdir()
    shutil.move(filled, desk)
    closing(desk.parent, 0o000)
    for words in (["ingest", desk, delivery], ["latest", desk], ["verify", desk], ["new", desk]):
        sentence = told(Child(tmp_path / "said", run_with_the_rights_of_the_owner, *words).ended())
        assert f"cannot look at {desk}: Permission denied." in sentence


# handles


@pytest.mark.parametrize("more", [0, 2, 4, 6, 9, 40])
def test_without_file_handles_a_run_is_done_or_told(book, delivery, more, tmp_path):
    before = book.read_bytes()
    ended = Child(tmp_path / "said", run_with_handles, more, "ingest", book, delivery, "--add-series").ended()
    if ended.code == 0:
        assert more > 2
    else:
        assert more < 40
        assert "Too many open files" in told(ended)
        assert book.read_bytes() == before
    assert [name for name in beside(book) if name.startswith(".")] == []
    assert Child(tmp_path / "said", run, "ingest", book, delivery, "--add-series").ended().code == 0
    assert store.verify(book).findings == []


# Ctrl-C


def runs_of(book):
    with duckdb.connect(book, read_only=True) as con:
        return con.execute("select count(*) from base.run").fetchone()[0]


@pytest.mark.parametrize(
    ("call", "sentence", "count"),
    [
        ("copy_file_range", "driftbook: interrupted; the book is unchanged.", 0),
        ("chmod", "driftbook: interrupted; the book is unchanged.", 0),
        ("replace", "driftbook: interrupted; the run was done and is in the book.", 1),
    ],
)
def test_an_interrupt_about_the_swap_says_what_became_of_the_run(book, delivery, call, sentence, count, tmp_path):
    ended = Child(tmp_path / "said", run_interrupted_at, call, "ingest", book, delivery, "--add-series").ended()
    assert told(ended, 130) == sentence
    assert runs_of(book) == count
    assert [name for name in beside(book) if name.startswith(".")] == []
    assert store.verify(book).findings == []


def start(folder, *words):
    """The program as a terminal starts it: a group of its own, all of which hears Ctrl-C."""
    process = subprocess.Popen(
        [sys.executable, "-c", PROGRAM, *map(str, words)],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, start_new_session=True,
        env=os.environ | {"TMPDIR": str(folder)})  # fmt: skip
    assert process.stdout.readline() == "ready\n"
    return process


def interrupt(book, plan, folder, seconds, workers):
    """Ctrl-C after a time; checks that the sentence is true, and says what it was."""
    before = book.read_bytes()
    process = start(folder, "refresh", book, "--plan", plan, "--all", "--workers", workers, "--quiet")
    time.sleep(seconds)
    os.killpg(process.pid, signal.SIGINT)
    out, err = process.communicate(timeout=120)
    assert out == ""
    if process.returncode == 0:
        assert err == ""
        return "done"
    assert process.returncode == 130, err
    (sentence,) = err.splitlines()
    assert sentence.startswith("driftbook: interrupted; ")
    assert ("unchanged" in sentence) is (book.read_bytes() == before)
    assert [name for name in beside(book) if name.startswith(".")] == []
    return sentence


@pytest.fixture
def desk(book, delivery):
    with store.writing(book) as work:
        work.ingest(delivery, store.Options(add_series=True))
    (book.parent / "plan.toml").write_text(PLAN)
    (book.parent / "temporary").mkdir()
    return book, book.parent / "plan.toml", book.parent / "temporary"


@pytest.mark.parametrize(("seconds", "workers"), [(0.02, 1), (1.5, 2)])
def test_an_interrupt_from_the_terminal_is_one_sentence(desk, seconds, workers):
    said = interrupt(*desk, seconds, workers)
    assert said in {"done", "driftbook: interrupted; the book is unchanged."}


@pytest.mark.soak
def test_100_interrupts_from_the_terminal(desk):
    draw, said = random.Random(SEED), {}
    begun = time.monotonic()
    start(desk[2], "refresh", desk[0], "--plan", desk[1], "--workers", 2, "--quiet").communicate()
    longest = 1.1 * (time.monotonic() - begun)
    for _ in range(100):
        sentence = interrupt(*desk, draw.uniform(0, longest), draw.choice([1, 2]))
        said[sentence] = said.get(sentence, 0) + 1
    print(f"\n  {said}")
    assert set(said) >= {"driftbook: interrupted; the book is unchanged."}
    assert store.verify(desk[0]).findings == []


WORKING = """
import sys
from driftbook.store.workers import worker_processes
if __name__ == "__main__":
    pool = worker_processes(2)
    for piece in [pool.submit(sum, range(10_000_000)) for _ in range(4)]:
        piece.result()
    print("ready", flush=True)
    sys.stdin.readline()
"""


def descendants(pid):
    children = [int(one) for one in Path(f"/proc/{pid}/task/{pid}/children").read_text().split()]
    return children + [one for child in children for one in descendants(child)]


def alive(pid):
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] not in "ZX"
    except FileNotFoundError:
        return False


def test_workers_end_with_a_killed_run(tmp_path):
    script = tmp_path / "working.py"
    script.write_text(WORKING)
    with subprocess.Popen([sys.executable, script], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True) as run:
        assert run.stdout.readline() == "ready\n"
        workers = descendants(run.pid)
        assert len(workers) >= 2
        assert all(map(alive, workers))
        run.kill()
        run.wait()
    give_up = time.monotonic() + 30
    while any(map(alive, workers)) and time.monotonic() < give_up:
        time.sleep(0.05)
    assert [pid for pid in workers if alive(pid)] == []


# the clock


def test_a_clock_that_went_backwards_keeps_the_order_of_the_runs(filled, delivery, tmp_path):
    with store.connect(filled) as con:
        (last,) = con.execute("select max(moment) from run").fetchone()
    for number in range(2):
        delivery.write_text(delivery.read_text() + f"spark,2026-01-{number + 1:02d},1.5\n")
        words = ("ingest", filled, delivery, "--add-series", "--quiet")
        ended = Child(tmp_path / "said", run_with_an_early_clock, *words).ended()
        assert (ended.code, ended.err) == (0, "")
    with store.connect(filled) as con:
        moments = con.execute("select moment from run order by run_id").fetchall()
        now = con.execute("select count(*) from observation").fetchone()
        assert con.execute("select count(*) from observation_as_of((select max(moment) from run))").fetchone() == now
    assert moments == sorted(set(moments))
    assert all(moment > last for (moment,) in moments[-2:])
    assert (moments[-1][0] - last).total_seconds() < 1
    assert store.verify(filled).findings == []
    assert Child(tmp_path / "said", run_with_an_early_clock, "latest", filled).ended().code == 0
