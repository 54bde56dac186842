"""Killed at any moment, a run leaves the book as before it or as after it, and nothing else; the next run completes."""

import random
import shutil
import time
from collections import Counter
from itertools import cycle

import duckdb
import pytest
from children import FORKING, Child
from killing import SCENARIOS, act, before_system_call, counting, from_outside, in_function

from driftbook import store
from driftbook.store import lock

SEED = 20261201
KILLED = -9


class Trial:
    """One scenario: its folder before, the digests before and after, and how many moments there are to die in."""

    def __init__(self, folder, name):
        self.name = name
        self.folder = folder
        before, self.action = SCENARIOS[name]
        self.before = folder / "before"
        folder.mkdir()
        before(self.before)
        book = self.fresh()
        begun = time.monotonic()
        ended = self.run(book, counting)
        self.seconds = time.monotonic() - begun
        assert ended.code == 0, ended.err
        functions, *self.calls = ended.out.split()
        self.functions = int(functions)
        self.digests = {"before": chain(self.before / "desk.duckdb"), "after": chain(book)}
        self.findings_after = store.verify(book).findings
        self.files_after = self.files(book)
        if name == "stray log":
            self.digests["set aside"] = chain(self.without_log())
        assert len(set(map(str, self.digests.values()))) == len(self.digests)

    def run(self, book, *arm):
        return Child(self.folder / "said", act, self.action, book, *arm).ended()

    def fresh(self):
        """The book as before, in a folder of its own."""
        folder = self.folder / "now"
        shutil.rmtree(folder, ignore_errors=True)
        shutil.copytree(self.before, folder)
        return folder / "desk.duckdb"

    def without_log(self):
        book = self.fresh()
        book.with_name("desk.duckdb.wal").unlink()
        return book

    def files(self, book):
        return sorted(str(path.relative_to(book.parent)) for path in book.parent.rglob("*"))

    def kill(self, book, arm, number):
        """Runs the action on the book until it dies, or until its end if that came first; says which."""
        ended = self.run(book, arm, number)
        assert ended.code in (KILLED, 0), ended.err
        return ended.code == KILLED

    def state(self, book):
        """Which of the two states the book is in; it always opens.

        Between two renames a foreign log lies aside; it is whole, and the next writer puts it back.
        """
        found = chain(book)
        names = [name for name, digests in self.digests.items() if digests == found]
        assert names, f"{self.name}: neither before nor after: {found}"
        if names == ["set aside"]:
            log = book.with_name(".driftbook-aside-desk.duckdb.wal")
            assert log.read_bytes() == (self.before / "desk.duckdb.wal").read_bytes()
        return names[0]

    def completes(self, book):
        """The next run ends in the state after, with a whole book and no other file than after an undisturbed run."""
        ended = self.run(book)
        assert ended.code == 0, ended.err
        assert self.state(book) == "after"
        assert store.verify(book).findings == self.findings_after
        assert self.files(book) == self.files_after
        assert lock.last_look(book).holder is None


def at_a_time(trial, book, seconds):
    """Kills a run from outside, wherever it is by then, in Python or in DuckDB; whether it was still under way."""
    hear, begun = FORKING.Pipe(duplex=False)
    child = Child(trial.folder / "said", act, trial.action, book, from_outside, begun)
    hear.recv()
    time.sleep(seconds)
    child.process.kill()
    ended = child.ended()
    assert ended.code in (KILLED, 0), ended.err
    return ended.code == KILLED


def chain(book):
    """The digest of every run, and what a plain reader sees of a foreign program's plan."""
    if not book.exists():
        return "no book"
    with duckdb.connect(book, read_only=True) as con:
        tables = con.execute("select count(*) from duckdb_tables() where schema_name = 'base'").fetchall()
        runs = con.execute("select run_id, digest from base.run order by run_id").fetchall()
        plans = con.execute("select name, run_from, run_to from base.plan order by all").fetchall()
    return tables, runs, plans


@pytest.fixture(autouse=True)
def temporary_files_of_our_own(tmp_path, monkeypatch):
    folder = tmp_path / "temporary"
    folder.mkdir()
    monkeypatch.setenv("TMPDIR", str(folder))
    yield
    assert list(folder.iterdir()) == []


@pytest.mark.parametrize("name", SCENARIOS)
def test_a_run_killed_just_before_and_just_after_the_swap(tmp_path, name):
    trial = Trial(tmp_path / "trial", name)
    swap = len(trial.calls) - trial.calls[::-1].index("link" if name == "new" else "replace")
    before = "set aside" if name == "stray log" else "before"
    for number, state in ((swap, before), (swap + 1, "after")):
        book = trial.fresh()
        assert trial.kill(book, before_system_call, number)
        assert trial.state(book) == state
        trial.completes(book)


@pytest.mark.parametrize("name", ["ingest", "refresh"])
def test_a_run_killed_in_the_middle(tmp_path, name):
    trial = Trial(tmp_path / "trial", name)
    book = trial.fresh()
    assert trial.kill(book, in_function, trial.functions // 2)
    assert trial.state(book) == "before"
    trial.completes(book)


@pytest.mark.soak
def test_500_kills(tmp_path):
    """Before each call that changes or syncs a file, in functions and at times at random; and so do two recoveries."""
    draw = random.Random(SEED)
    trials = [Trial(tmp_path / name.replace(" ", "_"), name) for name in SCENARIOS]
    kinds, states, lived, books = Counter(), Counter(), 0, 0
    begun = time.monotonic()
    for trial, how, when in moments_of(trials, draw):
        book = trial.fresh()
        for kind, moment in ((how, when), at_random(draw, trial), at_random(draw, trial)):
            killed = kind(trial, book, moment) if kind is at_a_time else trial.kill(book, kind, moment)
            kinds[kind.__name__] += killed
            lived += not killed
            states[trial.name, trial.state(book)] += 1
        trial.completes(book)
        books += 1
        if books % 20 == 0:
            print(
                f"\n  {kinds.total()} kills, {lived} ended first, {time.monotonic() - begun:.0f} s", end="", flush=True
            )
        if kinds.total() >= 500 and books > sum(len(one.calls) for one in trials):
            break
    print(f"\n  {kinds.total()} kills, {books} books completed after them: {dict(kinds)}")
    print("  " + ", ".join(f"{name}: {count} {state}" for (name, state), count in sorted(states.items())))
    assert {name for name, _ in states} == set(SCENARIOS)


def moments_of(trials, draw):
    """Each chosen moment of each scenario, in any order, and then moments at random without an end."""
    chosen = [(one, before_system_call, number) for one in trials for number in range(1, len(one.calls) + 1)]
    draw.shuffle(chosen)
    yield from chosen
    for trial in cycle(trials):
        yield trial, *at_random(draw, trial)


def at_random(draw, trial):
    """A way and a moment to die."""
    if draw.random() < 0.5:
        return in_function, draw.randint(1, trial.functions)
    return at_a_time, draw.uniform(0, trial.seconds)
