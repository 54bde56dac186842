"""A run computed again from the data as known then: identical to the bit, or different and where."""

from datetime import UTC, datetime, timedelta

import duckdb
import numpy as np
import polars as pl
import pytest
from made_series import days

from driftbook import store
from driftbook.estimators import MODELS
from driftbook.store.plan import parse_plan
from driftbook.store.reproducing import reproduce

ADDING = store.Options(add_series=True, yes=True)
MONDAY = datetime(2026, 1, 5, 8, tzinfo=UTC)
PLAN = """
name = "desk"
[[series]]
name = "pellets_fob"
sign = "positive"
shift = 2.0
[[series]]
name = "freight"
sign = "positive"
clock = "act365"
[[series]]
name = "tide"
clock = "seconds"
time_zone = "Europe/Oslo"
[[series]]
name = "peg"
[[estimate]]
series = ["pellets_fob", "freight"]
models = ["abm", "gbm", "ou", "exp_ou"]
lookbacks = [15, "all"]
[[estimate]]
series = ["tide"]
models = ["ou", "abm"]
lookbacks = [15]
every = "week"
[[estimate]]
series = ["peg"]
models = ["ou"]
lookbacks = [200]
"""
OTHER_PLAN = PLAN.replace("shift = 2.0", "shift = 5.0\nperiods_per_year = 365").replace('clock = "act365"\n', "")


def path_of(name, first, last):
    rng = np.random.default_rng(sum(name.encode()))
    return (100 + np.cumsum(rng.standard_normal(100)) * 0.3 + 2 * rng.standard_normal(100)).tolist()[first:last]


def lot(first, last):
    """Equal steps for pellets_fob and the peg, gaps for the others."""
    frames = [days(name, path_of(name, first, last), first) for name in ("pellets_fob", "freight", "tide", "peg")]
    return pl.concat(
        [frame.filter((frame["time"].dt.day() % 6 != 4) | (at in (0, 3))) for at, frame in enumerate(frames)]
    )


@pytest.fixture(scope="module")
def _history(tmp_path_factory):
    """Seven runs: a plan, a first lot, days, corrections, withdrawals, a late observation, another plan."""
    path = tmp_path_factory.mktemp("reproduced") / "desk.duckdb"
    store.create(path)
    withdrawn = pl.concat([days("pellets_fob", [None], 40), days("freight", [97.0], 10)])
    late = days("freight", [99.0], 50).with_columns(pl.col("time") + timedelta(hours=5))
    runs = [
        (None, PLAN), (lot(0, 60), None), (lot(60, 61), None), (days("tide", [88.0, 120.0], 30), None),
        (withdrawn, None), (late, OTHER_PLAN), (lot(61, 63), None),
    ]  # fmt: skip
    for run, (frame, plan) in enumerate(runs):
        with store.writing(path, at=MONDAY + timedelta(days=run)) as work:
            if frame is not None:
                work.ingest(frame, ADDING, name=f"lot {run}")
            work.refresh(None if plan is None else parse_plan(plan, "the plan"), yes=True)
    with store.writing(path, at=MONDAY + timedelta(days=7)) as work:
        work.ingest(lot(63, 64), name="not estimated yet")
    return path


@pytest.fixture
def book(_history, tmp_path):
    path = tmp_path / "desk.duckdb"
    path.write_bytes(_history.read_bytes())
    return path


def written(book, run):
    """The rows that a run wrote, over all models."""
    with duckdb.connect(book, read_only=True) as con:
        return sum(
            con.execute(f"select count(*) from base.{m} where run_from = ?", [run]).fetchone()[0] for m in MODELS
        )


def test_every_run_is_computed_again_identical_to_the_bit(book):
    """Whatever was corrected, withdrawn or planned afterwards; all clocks, every = week, all steps, shifts."""
    before = book.read_bytes()
    found = reproduce(book, every=True)
    assert [(one.run_id, one.identical, one.same, one.different) for one in found] == [
        (run, written(book, run), 0, 0) for run in range(1, 9)
    ]
    assert [one.rows > 0 for one in found] == [False, True, True, True, True, True, True, False]
    assert all(one.worst == [] and one.other_revision == {} for one in found)
    assert book.read_bytes() == before


def test_by_default_the_last_run_is_computed_again(book):
    (found,) = reproduce(book)
    assert (found.run_id, found.rows) == (8, 0)


def test_one_run_can_be_asked_for(book):
    (found,) = reproduce(book, 3)
    assert (found.run_id, found.identical) == (3, written(book, 3))


ONE_LOT = "series_id = {series} and lookback = 15 and run_from = 2"
ONE_DAY = ONE_LOT.format(series=1) + " and window_end = timestamp '2024-01-{day}'"


def tamper(book, sql):
    with duckdb.connect(book) as con:
        return con.execute(sql).fetchall()


def test_a_number_that_was_changed_is_found_with_what_it_is_now(book):
    where = "series_id = 1 and lookback = 15 and run_from = 2 and window_end = timestamp '2024-01-20'"
    ((stored,),) = tamper(book, f"select sigma from base.gbm where {where}")
    tamper(book, f"update base.gbm set sigma = 1.5 * sigma where {where}")
    (found,) = reproduce(book, 2)
    assert (found.different, found.identical) == (1, found.rows - 1)
    (worst,) = found.worst
    assert (worst.series, worst.model, worst.lookback, worst.column) == ("pellets_fob", "gbm", 15, "sigma")
    assert (worst.window_end, worst.stored, worst.again) == ("2024-01-20 00:00:00", 1.5 * stored, stored)
    assert worst.apart == pytest.approx(1 / 3)


def test_the_worst_stand_first(book):
    for factor, day in ((1.01, 20), (4.0, 21), (1.2, 22)):
        tamper(book, f"update base.abm set sigma = {factor} * sigma where {ONE_DAY.format(day=day)}")
    (found,) = reproduce(book, 2)
    assert found.different == 3
    assert [one.window_end[:10] for one in found.worst if one.column == "sigma"] == [
        "2024-01-21",
        "2024-01-22",
        "2024-01-20",
    ]
    assert [one.apart for one in found.worst] == sorted((one.apart for one in found.worst), reverse=True)


def test_a_change_that_counts_as_the_same_is_told_apart_from_identical(book):
    tamper(book, f"update base.abm set sigma = sigma * (1 + 1e-13) where {ONE_DAY.format(day=20)}")
    (found,) = reproduce(book, 2)
    assert (found.same, found.different, found.worst) == (1, 0, [])


def test_a_changed_status_is_found_and_shown(book):
    tamper(book, "update base.abm set status = 'flat' where series_id = 1 and lookback = 15 and run_from = 2 "
           "and window_end = timestamp '2024-01-20'")  # fmt: skip
    (found,) = reproduce(book, 2)
    assert found.different == 1
    assert [(one.column, one.stored, one.again) for one in found.worst] == [("status", "flat", "ok")]


@pytest.mark.parametrize("end", ["1999-01-01", "2024-01-03", "2024-01-20 03:00", "2099-01-01"])
def test_a_row_of_a_window_that_cannot_be_is_different_and_breaks_nothing(book, end):
    lot = ONE_LOT.format(series=2)
    last = f"(select max(window_end) from base.ou where {lot})"
    tamper(book, f"update base.ou set window_end = timestamp '{end}' where {lot} and window_end = {last}")
    (found,) = reproduce(book, 2)
    assert found.different == 1
    assert found.worst[0].again is None


def test_observations_that_were_changed_or_removed_are_found_by_their_estimates(book):
    tamper(
        book,
        "update base.observation set value = value + 3 where series_id = 1 and observed_at = timestamp '2024-01-10'",
    )
    tamper(book, "delete from base.observation where series_id = 3")
    (found,) = reproduce(book, 2)
    assert found.different > 15
    assert {one.series for one in found.worst} <= {"pellets_fob", "tide"}


def test_rows_of_another_revision_are_counted_apart(book):
    tamper(book, "update base.ou set revision = revision + 1 where run_from = 3")
    (found,) = reproduce(book, 3)
    with duckdb.connect(book, read_only=True) as con:
        ((others,),) = con.execute("select count(*) from base.ou where run_from = 3").fetchall()
    assert found.other_revision == {"ou": others}
    assert found.identical == written(book, 3) - others


@pytest.mark.parametrize("run", [0, 9, -1])
def test_a_run_that_is_not_there_is_refused_in_a_sentence(book, run):
    with pytest.raises(store.UsageError) as raised:
        reproduce(book, run)
    assert str(raised.value) == f"{book} has no run {run}; its runs are 1 to 8."


def test_a_book_without_runs_says_so(tmp_path):
    path = tmp_path / "empty.duckdb"
    store.create(path)
    with pytest.raises(store.UsageError, match=r"has no run yet\.$"):
        reproduce(path)
