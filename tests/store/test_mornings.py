"""A year of mornings: the file grows with what is new, and a morning takes as long and as much memory as ever.

Each morning a file comes with one value for each series, a few corrections, a few lines that are said twice and some
dirt; the inbox keeps all of them.
"""

import random
import statistics
import time
from dataclasses import dataclass
from datetime import date, timedelta
from pathlib import Path

import duckdb
import pytest

from driftbook import store
from driftbook.store import compaction
from driftbook.store.plan import parse_plan

SEED = 20261204
FIRST = date(2024, 1, 1)
DIRT = ("{name},2024-13-45,1.0", "{name},yesterday,1.0", "{name},{day},n/a", "no such series,{day},1.0", "{name},{day}")


@dataclass
class Morning:
    """What one morning took and left."""

    seconds: float
    memory: float
    size: int
    rows: int


class Desk:
    """A book of some series with a history, a plan and an inbox."""

    def __init__(self, folder, series, history):
        self.book, self.inbox = folder / "desk.duckdb", folder / "inbox"
        self.inbox.mkdir()
        self.names = [f"s{number:03d}" for number in range(series)]
        self.draw = random.Random(SEED)
        self.levels = dict.fromkeys(self.names, 100.0)
        self.days = 0
        listed = "".join(f'[[series]]\nname = "{name}"\nsign = "positive"\n' for name in self.names)
        lookback = history // 2
        entry = f'[[estimate]]\nseries = ["s*"]\nmodels = ["abm", "ou"]\nlookbacks = [{lookback}]\n'
        self.plan = parse_plan(f'name = "desk"\n{listed}{entry}', "the plan")
        store.create(self.book)
        self.deliver([line for _ in range(history) for line in self.day()])
        self.refresh()

    def day(self):
        """One value more for each series."""
        today = FIRST + timedelta(days=self.days)
        self.days += 1
        for name in self.names:
            self.levels[name] *= 1 + self.draw.gauss(0, 0.01)
            yield f"{name},{today},{self.levels[name]:.4f}"

    def deliver(self, lines):
        path = self.inbox / f"{self.days:05d}.csv"
        path.write_text("series,time,value\n" + "\n".join(lines) + "\n")

    def refresh(self):
        with store.writing(self.book) as work:
            work.refresh(self.plan, inbox=self.inbox)
        return work.finished

    def morning(self):
        lines = list(self.day())
        lines += lines[:3]
        for place in self.draw.sample(range(5 * len(self.names)), 5):
            back, name = place // len(self.names), self.names[place % len(self.names)]
            past = FIRST + timedelta(days=self.days - 2 - back)
            lines.append(f"{name},{past},{self.levels[name] * self.draw.uniform(0.98, 1.02):.4f}")
        today = FIRST + timedelta(days=self.days - 1)
        lines += [dirt.format(name=self.draw.choice(self.names), day=today) for dirt in DIRT]
        self.deliver(lines)
        begun = time.process_time()
        finished = self.refresh()
        assert finished is not None
        return Morning(time.process_time() - begun, memory(), self.book.stat().st_size, finished.rows_written)


def memory():
    """What the process holds now, in MiB."""
    (resident,) = [line for line in Path("/proc/self/status").read_text().splitlines() if line.startswith("VmRSS")]
    return int(resident.split()[1]) / 1024


def in_order(book, table):
    """Which share of a table's rows lies in order of series, from the first row on."""
    with duckdb.connect(book, read_only=True) as con:
        series = [one for (one,) in con.execute(f"select series_id from base.{table} order by rowid").fetchall()]
    breaks = (k for k in range(1, len(series)) if series[k] < series[k - 1])
    return next(breaks, len(series)) / len(series)


def check_counts(desk, mornings):
    """Every line of every morning was counted, and the right number was refused."""
    with store.connect(desk.book) as con:
        found = con.execute(
            "select sum(rows_read), sum(rows_new), sum(rows_refused) from intake where intake_id > 1"
        ).fetchone()
        versions = con.execute("select count(*) from versions.observation").fetchone()[0]
        in_force = con.execute("select count(*) from observation").fetchone()[0]
    each = len(desk.names) + 3 + 5 + len(DIRT)
    assert found == (mornings * each, mornings * len(desk.names), mornings * len(DIRT))
    assert in_force == desk.days * len(desk.names)
    assert versions > in_force


def growth(mornings):
    """Bytes of file for each row written, over some mornings."""
    return (mornings[-1].size - mornings[0].size) / sum(one.rows for one in mornings[1:])


def test_a_few_mornings(tmp_path, monkeypatch):
    """The rows double on the way, of what would else be a large book; the proof stays whole."""
    desk = Desk(tmp_path, series=4, history=40)
    monkeypatch.setattr(compaction, "FIRST_ROWS", 500)
    orders = []
    for _ in range(8):
        desk.morning()
        orders.append(in_order(desk.book, "observation"))
    check_counts(desk, 8)
    assert min(orders) < 1
    assert max(orders) == 1
    assert store.verify(desk.book).findings == []


@pytest.mark.soak
def test_250_mornings_of_200_series(tmp_path):
    desk = Desk(tmp_path, series=200, history=300)
    found = [desk.morning() for _ in range(250)]
    tenths = [found[k : k + 25] for k in range(0, 250, 25)]
    seconds = [statistics.median(one.seconds for one in tenth) for tenth in tenths]
    resident = [max(one.memory for one in tenth) for tenth in tenths]
    orders = {table: in_order(desk.book, table) for table in ("observation", "abm", "ou")}
    print(f"\n  processor seconds of a morning, median of each tenth: {[round(one, 2) for one in seconds]}")
    print(f"  resident MiB, highest of each tenth: {[round(one) for one in resident]}")
    print(f"  file MiB at the end of each tenth: {[round(tenth[-1].size / 2**20, 1) for tenth in tenths]}")
    print(f"  bytes of file for each new row: {growth(found[:125]):.0f} in the first half, {growth(found):.0f} in all")
    print(f"  rows written {sum(one.rows for one in found)}; in order from the first row on: {orders}")
    check_counts(desk, 250)
    assert store.verify(desk.book).findings == []
    assert seconds[-1] <= 1.2 * seconds[1]
    assert resident[-1] <= 1.1 * resident[1]
    assert growth(found) <= 1.2 * growth(found[:125])
    assert all(share >= 0.5 for share in orders.values())
