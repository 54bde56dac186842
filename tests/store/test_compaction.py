"""A book is written out afresh when that is worth it: by a rule that can be reckoned with, and with nothing changed."""

import duckdb
import polars as pl
import pytest
from made_series import days, wave

from driftbook import store
from driftbook.store import compaction
from driftbook.store.compaction import FIRST_ROWS, has_doubled
from driftbook.store.errors import BookError
from driftbook.store.forgetting import forget
from driftbook.store.swap import rewriting


@pytest.mark.parametrize(
    ("before", "last", "worth"),
    [
        (0, 10 * FIRST_ROWS, False),  # the first filling lies in order
        (FIRST_ROWS - 2, 1, False),
        (FIRST_ROWS - 1, 1, True),
        (FIRST_ROWS, 1, False),
        (2 * FIRST_ROWS - 1, 1, True),
        (3 * FIRST_ROWS, FIRST_ROWS - 1, False),
        (3 * FIRST_ROWS, FIRST_ROWS, True),
        (100, 3 * FIRST_ROWS, False),
    ],
)
def test_a_rewrite_is_worth_it_at_each_doubling(before, last, worth):
    assert has_doubled(before, last) is worth


def test_rewrites_cost_no_more_than_the_rows_did():
    """Over 100 000 runs of 1000 rows, the rows rewritten are at most twice the rows written."""
    written, rewritten = 0, 0
    for _ in range(100_000):
        if has_doubled(written, 1000):
            rewritten += written + 1000
        written += 1000
    assert 0 < rewritten <= 2 * written


def contents(book):
    """All rows of all tables."""
    with duckdb.connect(book, read_only=True) as con:
        tables = con.execute("select table_name from duckdb_tables() where schema_name = 'base'").fetchall()
        return {name: sorted(map(repr, con.execute(f"from base.{name}").fetchall())) for (name,) in tables}


def in_order(book):
    """Whether observations lie in the order of their key."""
    with duckdb.connect(book, read_only=True) as con:
        rows = con.execute("select series_id, observed_at from base.observation order by rowid").fetchall()
    return rows == sorted(rows)


def take_in(book, first):
    with store.writing(book) as work:
        frame = pl.concat([days(name, wave(3, first=first), first) for name in ("pellets_fob", "spark")])
        work.ingest(frame, store.Options(add_series=True), name=f"day {first}")


def test_the_run_that_doubles_the_rows_puts_them_in_order(book, monkeypatch):
    take_in(book, 0)
    take_in(book, 3)
    assert not in_order(book)
    with duckdb.connect(book, read_only=True) as con:
        (rows,) = con.execute("select sum(rows_written) from base.run").fetchone()
    monkeypatch.setattr(compaction, "FIRST_ROWS", int(rows) + 1)
    take_in(book, 6)
    assert in_order(book)
    assert store.verify(book).findings == []
    take_in(book, 9)
    assert not in_order(book)


def test_a_rewritten_book_says_what_it_said(filled, monkeypatch):
    before = contents(filled)
    with duckdb.connect(filled, read_only=True) as con:
        version = con.execute("select tags['storage_version'] from duckdb_databases() where not internal").fetchone()
    monkeypatch.setattr(compaction, "worth_it", lambda _: True)
    with rewriting(filled, 0) as draft:
        draft.kept = True
    assert contents(filled) == before
    assert store.verify(filled).findings == []
    with duckdb.connect(filled, read_only=True) as con:
        assert (
            con.execute("select tags['storage_version'] from duckdb_databases() where not internal").fetchone()
            == version
        )


def leave_a_hole(book):
    """Makes a large table, lets a run write behind it, and drops it, so that the file is mostly free."""
    with duckdb.connect(book) as con:
        con.execute("create table t as select random() as a, random() as b from range(2000000)")
    take_in(book, 0)
    with duckdb.connect(book) as con:
        con.execute("drop table t")
        con.execute("checkpoint")
        free, total = con.execute("select free_blocks, total_blocks from pragma_database_size()").fetchone()
    assert free > 64
    assert 2 * free > total


def test_a_file_that_is_mostly_free_is_written_out_afresh(book):
    leave_a_hole(book)
    size = book.stat().st_size
    take_in(book, 3)
    assert book.stat().st_size < size / 8
    assert store.verify(book).findings == []


@pytest.mark.parametrize("name", ["main.mine", "base.mine"])
def test_what_somebody_else_made_in_the_book_is_not_lost(book, name):
    leave_a_hole(book)
    with duckdb.connect(book) as con:
        con.execute(f"create table {name} as select 1 as a")
    take_in(book, 3)
    with pytest.raises(BookError, match=f"driftbook did not make {name} in the book; drop it first"):
        forget(book, "spark", yes=True)
    with duckdb.connect(book, read_only=True) as con:
        assert con.execute(f"from {name}").fetchall() == [(1,)]


def test_a_rewrite_that_finds_no_room_is_left_for_later(filled, monkeypatch):
    monkeypatch.setattr(compaction, "worth_it", lambda _: True)
    monkeypatch.setattr("driftbook.store.swap._room_for", lambda _: False)
    take_in(filled, 50)
    assert not in_order(filled)
    assert store.verify(filled).findings == []
