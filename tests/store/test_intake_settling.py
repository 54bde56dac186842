"""What a row means for the observations in force: new, revised, same, withdrawn, refused; and nothing is lost."""

from contextlib import closing
from datetime import UTC, datetime, timedelta

import polars as pl
import pytest
from naive_intake import empty_book

from driftbook.store import intake
from driftbook.store.errors import IntakeError
from driftbook.store.series import Setting, Stamp, add_series

RULES = ("refuse", "last", "median")


def stamp(run):
    return Stamp(run, datetime(2026, 1, 1, tzinfo=UTC) + timedelta(days=run))


@pytest.fixture
def con():
    with closing(empty_book()) as con:
        add_series(con, {rule: Setting(same_time=rule) for rule in RULES}, stamp(1))
        yield con


@pytest.fixture
def take(con):
    """Takes in rows (series, day of January, value or None) as the intake of a run; each is its own source."""
    taken = []

    def take(run, rows, **options):
        taken.append(rows)
        frame = pl.DataFrame(
            {
                "series": [series for series, _, _ in rows],
                "time": [datetime(2024, 1, day) for _, day, _ in rows],
                "value": [value for *_, value in rows],
            },
            schema_overrides={"value": pl.Float64},
        )
        outcome = intake.take_in(con, frame, intake.Options(**options), stamp(run), name=f"delivery {len(taken)}")
        return outcome.rows_new, outcome.rows_revised, outcome.rows_same, outcome.rows_refused

    return take


@pytest.fixture
def history(con):
    """The versions of a series: (day, value, take, run_from, run_to)."""

    def history(series):
        return con.execute(
            "select day(observed_at), value, take, o.run_from, run_to from base.observation o"
            " join base.series s using (series_id) where series = ? order by observed_at, o.run_from, take",
            [series],
        ).fetchall()

    return history


def reasons(con):
    return con.execute("select line, reason from base.refused_row order by intake_id, line").fetchall()


MANY = [("refuse", day, 100.0 + day) for day in range(1, 31)]


def test_a_value_at_a_new_time_is_new_an_equal_one_same_and_another_a_revision(take, history):
    assert take(1, [("refuse", 1, 5.0)]) == (1, 0, 0, 0)
    assert take(2, [("refuse", 1, 5.0)]) == (0, 0, 1, 0)
    assert take(3, [("refuse", 1, 6.0)]) == (0, 1, 0, 0)
    assert history("refuse") == [(1, 5.0, 0, 1, 3), (1, 6.0, 0, 3, None)]


def test_a_changed_bar_is_a_revision(con):
    rows = {"series": ["refuse"], "time": ["2024-01-01"], "value": [5.0]}
    intake.take_in(con, pl.DataFrame({**rows, "high": [6.0]}), intake.Options(), stamp(1), name="a")
    outcome = intake.take_in(con, pl.DataFrame({**rows, "high": [7.0]}), intake.Options(), stamp(2), name="b")
    assert outcome.rows_revised == 1


def test_an_empty_value_withdraws_a_known_time_and_is_refused_at_an_unknown_one(take, con, history):
    take(1, MANY)
    assert take(2, [("refuse", 1, None), ("refuse", 31, None)]) == (0, 1, 0, 1)
    assert history("refuse")[0] == (1, 101.0, 0, 1, 2)
    assert reasons(con) == [(2, "no_value")]


def test_an_empty_value_at_a_withdrawn_time_says_the_same_again(take):
    take(1, MANY)
    take(2, [("refuse", 1, None)])
    assert take(3, [("refuse", 1, None)]) == (0, 0, 1, 0)


def test_a_value_at_a_withdrawn_time_is_revised(take, history):
    take(1, MANY)
    take(2, [("refuse", 1, None)])
    assert take(3, [("refuse", 1, 101.0)]) == (0, 1, 0, 0)
    assert history("refuse")[:2] == [(1, 101.0, 0, 1, 2), (1, 101.0, 0, 3, None)]


def test_more_than_a_tenth_withdrawn_at_once_needs_a_yes(take, history):
    take(1, MANY)
    gone = [("refuse", day, None) for day in range(1, 5)]
    with pytest.raises(IntakeError, match=r"withdraws 4 of the 30 observations of 'refuse'.*--yes"):
        take(2, gone)
    assert take(2, gone[:3]) == (0, 3, 0, 0)
    assert take(3, gone, yes=True) == (0, 1, 3, 0)
    assert len([row for row in history("refuse") if row[-1] is None]) == 26


def test_exact_repeats_in_one_intake_are_same_and_the_first_counts_as_it_is(take, history):
    for rule in RULES:
        assert take(1, [(rule, 1, 5.0), (rule, 1, 5.0), (rule, 1, 5.0)]) == (1, 0, 2, 0)
        assert history(rule) == [(1, 5.0, 0, 1, None)]
        assert take(2, [(rule, 1, 6.0), (rule, 1, 6.0)]) == (0, 1, 1, 0)


def test_refuse_takes_none_of_several_values_repeats_included(take, con, history):
    take(1, [("refuse", 1, 5.0)])
    assert take(2, [("refuse", 1, 5.0), ("refuse", 1, 6.0), ("refuse", 1, 5.0), ("refuse", 2, 1.0)]) == (1, 0, 0, 3)
    assert history("refuse") == [(1, 5.0, 0, 1, None), (2, 1.0, 0, 2, None)]
    assert reasons(con) == [(1, "several_values"), (2, "several_values"), (3, "several_values")]


def test_last_takes_several_values_in_their_order_and_keeps_each(take, history):
    assert take(1, [("last", 1, 5.0), ("last", 2, 1.0), ("last", 1, 6.0), ("last", 1, 5.0)]) == (2, 2, 0, 0)
    assert history("last") == [(1, 5.0, 0, 1, 1), (1, 6.0, 1, 1, 1), (1, 5.0, 2, 1, None), (2, 1.0, 0, 1, None)]


def test_last_may_withdraw_and_tell_again(take, history):
    assert take(1, [("last", 1, None), ("last", 1, 5.0), ("last", 1, None), ("last", 1, 6.0)]) == (1, 2, 0, 1)
    assert history("last") == [(1, 5.0, 0, 1, 1), (1, 6.0, 1, 1, None)]


def test_median_counts_the_first_and_the_others_are_same(take, history):
    assert take(1, [("median", 1, 9.0), ("median", 1, 1.0), ("median", 1, 2.0)]) == (1, 0, 2, 0)
    assert take(2, [("median", 1, 1.0), ("median", 1, 4.0)]) == (0, 1, 1, 0)
    assert take(3, [("median", 1, None), ("median", 1, 2.0), ("median", 1, 3.0)]) == (0, 0, 3, 0)
    assert history("median") == [(1, 2.0, 0, 1, 2), (1, 2.5, 0, 2, None)]


def test_an_empty_value_beside_others_does_not_move_a_median(take, history):
    assert take(1, [("median", 1, None), ("median", 1, 2.0), ("median", 1, 3.0)]) == (1, 0, 2, 0)
    assert take(2, [("median", 1, None), ("median", 1, 6.0), ("median", 1, 8.0)]) == (0, 1, 2, 0)
    assert history("median") == [(1, 2.5, 0, 1, 2), (1, 7.0, 0, 2, None)]


def test_a_median_of_huge_values_stays_finite(take, history):
    take(1, [("median", 1, 1.6e308), ("median", 1, 1.7e308)])
    assert history("median")[0][1] == pytest.approx(1.65e308)


def test_intakes_of_one_run_go_on_counting_takes(take, history):
    take(1, MANY)
    take(2, [("refuse", 1, 1.0)])
    take(2, [("refuse", 1, None)])
    take(2, [("refuse", 1, 2.0)])
    assert history("refuse")[:3] == [(1, 101.0, 0, 1, 2), (1, 1.0, 0, 2, 2), (1, 2.0, 1, 2, None)]


def test_observations_of_one_intake_lie_clustered_by_series_and_time(take, con):
    take(1, [(rule, day, float(day)) for day in range(28, 0, -1) for rule in RULES])
    rows = con.execute("select series_id, observed_at from base.observation order by rowid").fetchall()
    assert rows == sorted(rows)


def test_series_and_time_are_unique_among_the_observations_in_force(take, con):
    take(1, [("last", 1, float(value)) for value in range(5)])
    take(1, [("last", 1, 7.0), ("median", 1, 7.0)])
    assert con.execute(
        "select count(*), count(distinct series_id) from base.observation where run_to is null"
    ).fetchall() == [(2, 2)]


def test_an_intake_leaves_no_temporary_table_and_no_setting_behind(take, con):
    before = con.execute("select current_setting('disabled_optimizers')").fetchall()
    take(1, MANY)
    assert not con.execute("select * from duckdb_tables() where temporary").fetchall()
    assert not con.execute("select * from duckdb_views() where temporary and not internal").fetchall()
    assert con.execute("select current_setting('disabled_optimizers')").fetchall() == before


def test_rows_taken_up_need_a_yes_to_withdraw_more_than_a_tenth(con, take, history):
    take(1, MANY)
    take(2, [("waiting", day, None) for day in range(1, 5)])
    con.execute("insert into base.alias (series_id, name, run_from) values (1, 'waiting', 3)")
    with pytest.raises(IntakeError, match=r"what waits of intake 2 withdraws 4 of the 30 observations of 'refuse'"):
        intake.take_up(con, ["waiting"], stamp(3))
    assert intake.take_up(con, ["waiting"], stamp(3), yes=True) == 4
    assert len([version for version in history("refuse") if version[-1] is None]) == 26
