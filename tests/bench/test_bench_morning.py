"""A morning on a large book, as ratios in one run: pytest -m bench -s tests/bench/test_bench_morning.py.

1000 series of 2500 values, four models, two lookbacks: the first refresh, then one new day.
"""

import statistics
import subprocess
import sys
import time
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

SERIES, VALUES = 1000, 2500
PROGRAM = [sys.executable, "-c", "from driftbook.store.cli import main; main()"]


@pytest.fixture(scope="module")
def morning(tmp_path_factory):
    """The book after its first refresh, how long that took, and the frame of the day after."""
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
        f'name = "bench"\n{series}[[estimate]]\nseries = ["s*"]\nmodels = {list(MODELS)}\nlookbacks = [250, 1000]\n'
    )
    create(book)
    is_new = pl.col("time") == times[-1]
    with writing(book, at="2026-01-05") as work:
        work.ingest(frame.filter(~is_new), Options(add_series=True))
    start = time.perf_counter()
    with writing(book, at="2026-01-06") as work:
        done = work.refresh(plan)
    took = time.perf_counter() - start
    print(f"\n  full refresh: {done.windows_due} windows in {took:.1f} s, {book.stat().st_size / 1e9:.2f} GB")
    return book, took, frame.filter(is_new)


def test_one_new_day_against_the_full_refresh(morning):
    """At least 15 times less, and under 0.5 s beyond the copy of the book."""
    book, full, day = morning
    start = time.perf_counter()
    with rewriting(book, 0.0):
        pass
    copy = time.perf_counter() - start
    start = time.perf_counter()
    with writing(book, at="2026-01-07") as work:
        work.ingest(day, name="day")
        done = work.refresh()
    took = time.perf_counter() - start
    print(f"  one day: {done.windows_due} windows in {took:.2f} s, of which copy {copy:.2f} s; ratio {full / took:.1f}")
    assert done.windows_due == SERIES * len(MODELS) * 2
    assert full / took >= 15
    assert took - copy < 0.5


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
