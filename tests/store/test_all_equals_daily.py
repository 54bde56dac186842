"""However a book came to know its observations, day by day or at once, and with however many workers: the same end."""

import struct
from datetime import UTC, datetime, timedelta

import duckdb
import numpy as np
import polars as pl
import pytest
from made_series import days, plan_text
from naive_book import STORED, same_numbers

from driftbook import store
from driftbook.store import functions
from driftbook.store.swap import create

ADDING = store.Options(add_series=True, yes=True)
PLAN = plan_text({"pellets_fob": [7, 20, 33], "power_da": [20], "peg": [50]})
MONDAY = datetime(2025, 3, 3, 8, tzinfo=UTC)
FIRST_LOT = 75
DAYS = 12
TABLE = f"series_id, lookback, window_end, window_start, n, status, {', '.join(STORED)}"


def series(name, count):
    """A path that is pulled to its mean, the same on every machine; stretches of the peg stand still."""
    draws = np.random.default_rng(sum(name.encode())).integers(-40, 41, count)
    value, path = 0, []
    for day, draw in enumerate(draws.tolist()):
        value = value if name == "peg" and day % 90 > 30 else (value * 7) // 8 + draw
        path.append(100 + value / 16)
    return path


def lot(first, last):
    """What becomes known from one day to another, of every series."""
    return pl.concat([days(name, series(name, 200)[first:last], first) for name in ("pellets_fob", "power_da", "peg")])


def corrections(day):
    """Old values told anew; the same numbers of observations before and after."""
    return pl.concat([days("pellets_fob", [99.0 + day], 3 * day), days("power_da", [88.0 + day], FIRST_LOT - day)])


def unsettling(day):
    """A withdrawal, and an observation between two days, so that all later windows shift by a step."""
    late = days("power_da", [93.0 + day], 5 * day).with_columns(pl.col("time") + timedelta(hours=7))
    return pl.concat([days("pellets_fob", [None], 4 * day + 1), late])


def daily(book, *, extra):
    """A first lot and then a run a day, with one more delivery every third day."""
    create(book)
    for day in range(DAYS):
        with store.writing(book, at=MONDAY + timedelta(days=day)) as work:
            first, last = (0, FIRST_LOT) if day == 0 else (FIRST_LOT + day - 1, FIRST_LOT + day)
            work.ingest(lot(first, last), ADDING, name="daily")
            if day % 3 == 2:
                work.ingest(extra(day), ADDING, name="extra")
            work.refresh(PLAN)


def at_once(book, other):
    """A book that is told at once what another one knows in the end."""
    create(book)
    with store.connect(other) as con:
        known = con.sql("select series, observed_at as time, value from observation order by all").pl()
    known = pl.concat([known.filter(series=name) for name in ("pellets_fob", "power_da", "peg")])
    with store.writing(book, at=MONDAY) as work:
        work.ingest(known, ADDING, name="at once")
        work.refresh(PLAN)


def in_force(book):
    """The estimates in force by series, lookback and window."""
    with duckdb.connect(book, read_only=True) as con:
        rows = con.execute(f"select {TABLE} from base.ou where run_to is null").fetchall()
    return {row[:3]: (row[3:6], row[6:]) for row in rows}


def bits(numbers):
    return [None if number is None else struct.pack("<d", number) for number in numbers]


def whole_table(book):
    """All rows of the estimates, closed ones too, bit for bit and in the order in which they lie."""
    with duckdb.connect(book, read_only=True) as con:
        rows = con.execute("from base.ou").fetchall()
    return [tuple(struct.pack("<d", one) if isinstance(one, float) else one for one in row) for row in rows]


def leaves(book):
    with duckdb.connect(book, read_only=True) as con:
        return con.execute("from base.leaf order by all").fetchall()


@pytest.fixture(scope="module")
def books(tmp_path_factory):
    """Three books: day by day with corrections; so with withdrawals and late ones; the last one told at once."""
    folder = tmp_path_factory.mktemp("daily")
    daily(folder / "corrected.duckdb", extra=corrections)
    daily(folder / "unsettled.duckdb", extra=unsettling)
    for name in ("corrected", "unsettled"):
        at_once(folder / f"{name}_at_once.duckdb", folder / f"{name}.duckdb")
    return folder


def test_the_books_hold_what_makes_the_comparison_worth_while(books):
    """Many windows, several kinds of outcome, closed versions."""
    found = in_force(books / "unsettled.duckdb")
    assert len(found) > 200
    assert {kept[2] for kept, _ in found.values()} >= {"ok", "flat", "no_reversion"}
    with duckdb.connect(books / "unsettled.duckdb", read_only=True) as con:
        assert con.execute("select count(run_to) > 100 from base.ou").fetchall() == [(True,)]


@pytest.mark.parametrize("name", ["corrected", "unsettled"])
def test_the_daily_refreshes_end_where_one_refresh_of_everything_ends(books, name):
    """The same windows, steps and status; numbers the same by the measure by which versions are kept."""
    daily_end, whole = in_force(books / f"{name}.duckdb"), in_force(books / f"{name}_at_once.duckdb")
    assert {key: kept for key, (kept, _) in daily_end.items()} == {key: kept for key, (kept, _) in whole.items()}
    assert [key for key in whole if not same_numbers(whole[key][1], daily_end[key][1])] == []


def test_where_no_observation_came_in_between_not_even_the_last_bit_differs(books):
    """Blocks are counted from a series' first observation, also when only its tail is due."""
    daily_end, whole = in_force(books / "corrected.duckdb"), in_force(books / "corrected_at_once.duckdb")
    assert [key for key in whole if bits(whole[key][1]) != bits(daily_end[key][1])] == []


@pytest.mark.parametrize("name", ["corrected", "unsettled", "unsettled_at_once"])
def test_refreshing_everything_once_more_writes_no_version(books, tmp_path, name):
    book = tmp_path / "desk.duckdb"
    book.write_bytes((books / f"{name}.duckdb").read_bytes())
    before = whole_table(book)
    with store.writing(book) as work:
        done = work.refresh(everything=True)
    assert whole_table(book) == before
    assert done.windows_due == len(in_force(book))
    assert (work.finished.rows_written, work.finished.rows_closed) == (0, 0)
    assert store.verify(book).findings == []


def test_one_more_observation_makes_one_window_of_each_lookback_due(books, tmp_path):
    book = tmp_path / "desk.duckdb"
    book.write_bytes((books / "corrected.duckdb").read_bytes())
    with store.writing(book) as work:
        work.ingest(days("pellets_fob", [101.0], 150), name="daily")
        done = work.refresh()
    only_what_latest_said = 1
    assert (done.windows_due, work.finished.rows_closed) == (3, only_what_latest_said)


def test_a_number_on_demand_is_the_number_in_the_book(books):
    """To the last bit, since both come from the same function."""
    sql = """
        with listed as (
          select series, list(value order by observed_at) as x, list(observed_at order by observed_at) as times
          from observation group by series
        ), rolled as (
          select e.series, e.lookback, l.times[e.lookback + 1:] as ends, rolling_ou(l.x, 1.0 / 252, e.lookback) as fits
          from (select distinct series, lookback from ou) e join listed l using (series)
        ), opened as (
          select series, lookback, unnest(ends) as window_end, unnest(fits) as f from rolled
        )
        select {columns} from opened o join ou b using (series, lookback, window_end)
    """
    pairs = ", ".join(f"o.f.{name}, b.{name}" for name in STORED)
    with store.connect(books / "corrected_at_once.duckdb") as con:
        rows = con.execute(sql.format(columns=pairs)).fetchall()
        assert [(len(rows),)] == con.execute("select count(*) from ou").fetchall()
    assert [row for row in rows if bits(row[0::2]) != bits(row[1::2])] == []


def test_two_workers_give_the_bits_of_one(tmp_path):
    """The table of estimates byte for byte, and the digest of everything that every run did."""
    tables, digests = [], []
    for workers in (1, 2):
        book = tmp_path / f"{workers}.duckdb"
        create(book)
        for day, (first, last) in enumerate([(0, FIRST_LOT), (FIRST_LOT, FIRST_LOT + 2)]):
            with store.writing(book, at=MONDAY + timedelta(days=day)) as work:
                work.ingest(lot(first, last), ADDING, name="daily")
                work.refresh(PLAN, workers=workers)
        tables.append(whole_table(book))
        digests.append(leaves(book))
    assert tables[0] == tables[1]
    assert digests[0] == digests[1]
    assert len(tables[0]) > 200


def test_a_run_that_fails_while_it_estimates_leaves_the_book_byte_for_byte(books, tmp_path, monkeypatch):
    book = tmp_path / "desk.duckdb"
    book.write_bytes((books / "corrected.duckdb").read_bytes())
    before = book.read_bytes()

    def fail(*_, **__):
        raise MemoryError("no more")

    monkeypatch.setattr(functions, "roll_block", fail)
    with pytest.raises(Exception, match="no more"), store.writing(book) as work:  # noqa: PT012
        work.ingest(lot(120, 130), ADDING, name="daily")
        work.refresh()
    assert book.read_bytes() == before
    assert sorted(path.name for path in tmp_path.iterdir()) == ["desk.duckdb", "desk.duckdb.lock"]
