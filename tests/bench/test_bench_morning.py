"""A morning on a large book, as ratios in one run: pytest -m bench -s tests/bench/test_bench_morning.py.

1000 series of 2500 values, four models, two lookbacks: the first refresh, then new days, one at a time. A day is
measured against what a run costs in which nothing changes: start, copy and swap, with the fsync of the copy and the
freeing of the old file. Of several days the least counts, since other work on the machine only adds.
"""

import statistics
import subprocess
import sys
import time
from contextlib import contextmanager
from datetime import UTC, datetime, timedelta

import duckdb
import numpy as np
import polars as pl
import pytest

from driftbook.estimators import MODELS
from driftbook.estimators.simulate import simulate_ou
from driftbook.store import Options, connect, create, writing
from driftbook.store.swap import rewriting

pytestmark = pytest.mark.bench

SERIES, VALUES, DAYS = 1000, 2500, 3
FOUR = ("abm", "gbm", "ou", "exp_ou")
PROGRAM = [sys.executable, "-c", "from driftbook.store.cli import main; main()"]


@pytest.fixture(scope="module")
def morning(tmp_path_factory):
    """The book after its first refresh, how long that took, and the frames of the days after."""
    folder = tmp_path_factory.mktemp("morning")
    book, names = folder / "bench.duckdb", [f"s{number:04d}" for number in range(SERIES)]
    paths = simulate_ou(
        np.random.default_rng(1), kappa=8.0, theta=4.0, sigma=0.4, dt=1 / 252, steps=VALUES, paths=SERIES
    )
    first = datetime(2016, 1, 1, tzinfo=UTC)
    times = pl.datetime_range(first, first + timedelta(days=VALUES), "1d", eager=True)
    frame = pl.DataFrame(
        {
            "series": np.repeat(names, VALUES + 1),
            "time": pl.concat([times] * SERIES),
            "value": np.exp(paths).reshape(-1),
        }
    )
    series = "".join(f'[[series]]\nname = "{name}"\nsign = "positive"\n' for name in names)
    plan = folder / "plan.toml"
    plan.write_text(
        f'name = "bench"\n{series}[[estimate]]\nseries = ["s*"]\nmodels = {list(FOUR)}\nlookbacks = [250, 1000]\n'
    )
    create(book)
    with writing(book, at="2026-01-05") as work:
        work.ingest(frame.filter(pl.col("time") < times[-DAYS]), Options(add_series=True))
    start = time.perf_counter()
    with writing(book, at="2026-01-06") as work:
        done = work.refresh(plan)
    took = time.perf_counter() - start
    print(f"\n  full refresh: {done.windows_due} windows in {took:.1f} s, {book.stat().st_size / 1e9:.2f} GB")
    return book, took, [frame.filter(pl.col("time") == time) for time in times[-DAYS:]]


@contextmanager
def measured():
    """Seconds of the block: by the clock, and of the processor."""
    taken, clock, cpu = [], time.perf_counter(), time.process_time()
    yield taken
    taken += [time.perf_counter() - clock, time.process_time() - cpu]


def one_day(book, day, number):
    """Seconds of a new day, and beyond a run in which nothing changes; prints these, and a copy alone."""
    with measured() as copy, rewriting(book, 0.0):
        pass
    with measured() as unchanged, rewriting(book, 0.0) as draft:
        draft.kept = True
    with measured() as whole, writing(book, at=f"2026-01-{7 + number:02d}") as work:
        work.ingest(day, name=f"day {number}")
        done = work.refresh()
    assert done.windows_due == SERIES * len(FOUR) * 2
    for name, (clock, cpu) in {"copy": copy, "copy and swap": unchanged, "day": whole}.items():
        print(f"  {name:14} {clock:6.2f} s, {cpu:.2f} s of the processor")
    print(f"  beyond copy and swap {whole[0] - unchanged[0]:.2f} s, {whole[1] - unchanged[1]:.2f} s of the processor")
    return whole[0], whole[0] - unchanged[0]


def test_one_new_day_against_the_full_refresh(morning):
    """At least 15 times less, and under 0.5 s beyond start, copy and swap."""
    book, full, days = morning
    took, beyond = zip(*(one_day(book, day, number) for number, day in enumerate(days)), strict=True)
    print(f"  one day against the full refresh: {full / min(took):.1f} times less")
    assert full / min(took) >= 15
    assert min(beyond) < 0.5


def test_latest_is_read_in_less_than_50_ms(morning):
    with connect(morning[0]) as con:
        for sql in ("from latest", "from latest_as_of('2026-01-06')"):
            times = []
            for _ in range(7):
                start = time.perf_counter()
                rows = con.execute(sql).fetchall()
                times.append(time.perf_counter() - start)
            print(f"  {sql}: {1e3 * statistics.median(times):.1f} ms")
            assert len(rows) == SERIES
            assert statistics.median(times) < 0.05


def seconds_of(*words):
    """The best of five runs of the program."""
    found = []
    for _ in range(5):
        start = time.perf_counter()
        subprocess.run([*PROGRAM, *map(str, words)], check=True, capture_output=True)
        found.append(time.perf_counter() - start)
    return min(found)


def test_help_is_there_in_300_ms(morning):
    took = seconds_of("--help")
    print(f"  driftbook --help: {took:.2f} s")
    assert took < 0.3


def test_the_first_row_of_sql_is_there_in_600_ms(tmp_path):
    book = tmp_path / "desk.duckdb"
    create(book)
    took = seconds_of("sql", book, "select 42")
    print(f"  driftbook sql: {took:.2f} s")
    assert took < 0.6


def test_fitting_lists_in_sql_against_the_estimators_on_ready_arrays(morning):
    """1000 groups of 1000 values: at most 1.5 times."""
    rng = np.random.default_rng(5)
    x = 50 + np.cumsum(rng.standard_normal((1000, 1000)), axis=1)
    with connect(morning[0]) as con:
        cursor = con.cursor()
        rows = {"g": np.repeat(np.arange(1000), 1000), "i": np.tile(np.arange(1000), 1000), "x": x.reshape(-1)}
        cursor.register("walk", pl.DataFrame(rows))
        cursor.execute("create temp table walks as from walk")
        sql, ratios = "select fit_ou(list(x order by i), 1 / 252) from walks group by g", []
        for _ in range(5):
            start = time.perf_counter()
            rows = cursor.execute(sql).fetchall()
            asked = time.perf_counter()
            MODELS["ou"].fit(x, 1 / 252)
            ratios.append((asked - start) / (time.perf_counter() - asked))
    print(f"  fit_ou in SQL {min(ratios):.2f} times the estimators (limit 1.5)")
    assert len(rows) == 1000
    assert min(ratios) <= 1.5


def test_the_book_is_read_by_a_plain_duckdb_as_fast(morning):
    with duckdb.connect(morning[0], read_only=True) as con:
        start = time.perf_counter()
        rows = con.execute("from latest").fetchall()
        assert time.perf_counter() - start < 0.1
    assert len(rows) == SERIES
