"""Observations as arrays: each series' in the order of its times, however the rows lie in the book."""

import duckdb
import numpy as np
import pytest

from driftbook.store.observed import observed


def in_rows(rows):
    """A connection with observations in this order."""
    con = duckdb.connect()
    con.execute("create schema base")
    con.execute(
        "create table base.observation (series_id integer, observed_at timestamp, value double, run_to integer)"
    )
    con.register(
        "given", {name: np.array(each) for name, each in zip(("s", "d", "v"), zip(*rows, strict=True), strict=True)}
    )
    con.execute(
        "insert into base.observation select s, timestamp '2024-01-01' + to_days(d::integer), v, null from given"
    )
    return con


def orders():
    """Rows of three series, 300 a series: a series after the other, by time, two intakes, and in no order."""
    rows = [(series, day, 1000.0 * series + day) for series in (1, 2, 3) for day in range(300)]
    by_time = sorted(rows, key=lambda row: (row[1], row[0]))
    late = [row for row in rows if row[1] < 250] + [row for row in by_time if row[1] >= 250]
    back = [row for row in rows if row[1] >= 100] + [row for row in rows if row[1] < 100]
    mixed = [rows[at] for at in np.random.default_rng(3).permutation(len(rows))]
    return {"by series": rows, "by time": by_time, "late days": late, "old days last": back, "mixed": mixed}


@pytest.mark.parametrize("how", orders())
def test_rows_in_any_order_come_out_by_series_and_time(how):
    with in_rows(orders()[how]) as con:
        known = observed(con, [1, 3])
    assert set(known.places) == {1, 3}
    for series in (1, 3):
        place = known.place(series)
        assert known.values[place].tolist() == [1000.0 * series + day for day in range(300)]
        assert (np.diff(known.us[place]) == 86_400_000_000).all()


def test_a_series_without_observations_has_an_empty_place():
    with in_rows([(1, 0, 1.0)]) as con:
        known = observed(con, [1, 2])
        nothing = observed(con, [2])
    assert known.values[known.place(2)].size == 0
    assert nothing.values.size == 0
    assert nothing.places == {}
